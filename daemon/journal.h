/* SPDX-License-Identifier: MIT */
/*
 * What the daemon says on stderr: one line each, who, what, number with unit, what happens next. The priority prefix
 * (<3> .. <7>) is written only when stderr goes to the journal (JOURNAL_STREAM). Control bytes, and bytes that are no
 * UTF-8, are escaped as \x1b; a closing line feed is dropped; a text too long for a line ends in "...". A line
 * repeated word for word is counted, not repeated.
 */
#ifndef FOREWATER_DAEMON_JOURNAL_H
#define FOREWATER_DAEMON_JOURNAL_H

#include <stdbool.h>
#include <stddef.h>
#include <stdio.h>

enum journal_priority {
    JOURNAL_ERROR = 3,   /* needs a person */
    JOURNAL_WARNING = 4, /* degraded */
    JOURNAL_NOTICE = 5,  /* a turning point */
    JOURNAL_INFO = 6,
    JOURNAL_DEBUG = 7
};

struct journal {
    FILE *stream;
    bool has_prefix;
    enum journal_priority most;          /* lines above this are dropped */
    enum journal_priority last_priority; /* 0: nothing was said yet */
    char last[1024];
    size_t repeated;
};

struct journal journal_open(FILE *stream,
                            enum journal_priority most); /* looks at JOURNAL_STREAM; a NULL stream is silence */
__attribute__((format(printf, 3, 4))) void journal_say(struct journal *journal, enum journal_priority priority,
                                                       const char *format, ...);
void journal_flush(struct journal *journal); /* says how often the last line came again */

#endif
