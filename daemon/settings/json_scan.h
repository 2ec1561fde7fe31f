/* SPDX-License-Identifier: MIT */
/*
 * What the JSON parser does not do: comments, positions, and the strictness of RFC 8259.
 *
 * The scan blanks comments (from two slashes to the end of the line, outside of strings), checks the grammar, the
 * form and size of numbers, escapes, UTF-8 and depth, and records where every value stands, in the order in which
 * they stand. What can be mended (a bad number, a bad escape, a comma too many) is noted and mended in the clean
 * copy, so that one run finds the other faults of the file too.
 */
#ifndef FOREWATER_DAEMON_SETTINGS_JSON_SCAN_H
#define FOREWATER_DAEMON_SETTINGS_JSON_SCAN_H

#include <stdbool.h>
#include <stddef.h>

#include "daemon/settings/settings_report.h"

enum { JSON_SCAN_DEPTH_MAX = 32, JSON_SCAN_NUMBER_MAX = 60 };

enum json_kind { JSON_OBJECT, JSON_ARRAY, JSON_STRING, JSON_NUMBER, JSON_TRUE, JSON_FALSE, JSON_NULL };

struct json_position {
    enum json_kind kind;
    size_t line;                   /* first line is 1 */
    size_t offset, length;         /* the value as written, in the text */
    size_t key_line;               /* of the name before it; 0: an element or the whole */
    size_t key_offset, key_length; /* with its quotes */
    double number;
    const char *fault; /* NULL, or what is wrong with it; its place in the clean copy is mended */
};

struct json_scan { /* born empty as {0}; the owner clears it */
    char *clean;   /* as long as the text, with a closing zero */
    struct json_position *positions;
    size_t count, capacity;
};

/*
 * FW_BAD_INPUT: a fault that cannot be mended, reported; the scan stops there. FW_NO_MEMORY. Faults of single values
 * are left in their positions for the caller to report; a mended comma is reported.
 */
FW_MUST_CHECK enum fw_status json_scan(const char *text, size_t length, struct settings_report *report,
                                       struct json_scan *scan_out);
void json_scan_clear(struct json_scan *scan);

/* A number in JSON's form, with a decimal point whatever the locale; NULL, or what is wrong with it. */
const char *json_scan_number(const char *text, size_t length, double *number_out);

#endif
