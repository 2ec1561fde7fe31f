/* SPDX-License-Identifier: MIT */
/* The faults of one file while it is being read. */
#ifndef FOREWATER_DAEMON_SETTINGS_SETTINGS_REPORT_H
#define FOREWATER_DAEMON_SETTINGS_SETTINGS_REPORT_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/settings/settings.h"

enum { SETTINGS_FAULTS_MAX = 200 }; /* more are counted, not kept: a file that is wrong throughout */

struct settings_report {
    const char *file;
    struct settings_faults *faults;
    size_t not_kept;
    bool is_short; /* memory ran out: a fault was lost */
};

bool settings_report_is_full(const struct settings_report *report);
bool settings_report_has_faults(const struct settings_report *report);

/* Adds "file:line: " and the text. */
__attribute__((format(printf, 3, 4))) void settings_report_add(struct settings_report *report, size_t line,
                                                               const char *format, ...);

/* Puts the faults in the order of their lines; of one line, in the order in which they were found. */
void settings_report_sort(struct settings_report *report);

/* The candidate most like `word`, or NULL when none is near enough to be what was meant. */
const char *settings_report_nearest(const char *word, size_t candidate_count, const char *const candidates[]);

#endif
