/* SPDX-License-Identifier: MIT */
#include "daemon/settings/settings_report.h"

#include <stdarg.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

void settings_faults_clear(struct settings_faults *faults)
{
    free(faults->faults);
    *faults = (struct settings_faults){0};
}

bool settings_report_is_full(const struct settings_report *report)
{
    return report->faults->count >= SETTINGS_FAULTS_MAX;
}

bool settings_report_has_faults(const struct settings_report *report)
{
    return report->faults->count > 0 || report->not_kept > 0 || report->is_short;
}

void settings_report_add(struct settings_report *report, size_t line, const char *format, ...)
{
    struct settings_faults *faults = report->faults;
    if (settings_report_is_full(report)) {
        report->not_kept++;
        return;
    }
    if (buffer_grow(&faults->faults, &faults->capacity, faults->count, sizeof *faults->faults) != FW_OK) {
        report->is_short = true;
        return;
    }
    struct settings_fault *fault = &faults->faults[faults->count++];
    fault->line = line;
    int length = snprintf(fault->text, sizeof fault->text, "%s:%zu: ", report->file, line);
    size_t used = length < 0 ? 0 : (size_t)length;
    if (used > sizeof fault->text / 2) { /* a long path must not push out what is wrong */
        const char *base = strrchr(report->file, '/');
        length =
            snprintf(fault->text, sizeof fault->text, "%.200s:%zu: ", base != NULL ? base + 1 : report->file, line);
        used = length < 0 ? 0 : (size_t)length;
    }
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(fault->text + used, sizeof fault->text - used, format, arguments);
    va_end(arguments);
}

void settings_report_sort(struct settings_report *report)
{
    struct settings_fault *faults = report->faults->faults;
    for (size_t i = 1; i < report->faults->count; i++) {
        if (faults[i - 1].line <= faults[i].line)
            continue;
        struct settings_fault moved = faults[i];
        size_t to = i;
        for (; to > 0 && faults[to - 1].line > moved.line; to--)
            faults[to] = faults[to - 1];
        faults[to] = moved;
    }
}

enum { NEAREST_LENGTH_MAX = 48 };

static size_t smaller(size_t a, size_t b)
{
    return a < b ? a : b;
}

/* Insertions, deletions, substitutions and swaps of neighbours (optimal string alignment). */
static size_t edit_distance(const char *a, const char *b)
{
    size_t a_length = strlen(a);
    size_t b_length = strlen(b);
    if (a_length > NEAREST_LENGTH_MAX || b_length > NEAREST_LENGTH_MAX)
        return NEAREST_LENGTH_MAX;
    size_t rows[3][NEAREST_LENGTH_MAX + 1] = {{0}};
    for (size_t j = 0; j <= b_length; j++)
        rows[0][j] = j;
    for (size_t i = 1; i <= a_length; i++) {
        size_t *now = rows[i % 3];
        const size_t *last = rows[(i + 2) % 3];
        const size_t *before_last = rows[(i + 1) % 3];
        now[0] = i;
        for (size_t j = 1; j <= b_length; j++) {
            now[j] = smaller(smaller(last[j] + 1, now[j - 1] + 1), last[j - 1] + (a[i - 1] != b[j - 1]));
            if (i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1])
                now[j] = smaller(now[j], before_last[j - 2] + 1);
        }
    }
    return rows[a_length % 3][b_length];
}

const char *settings_report_nearest(const char *word, size_t candidate_count, const char *const candidates[])
{
    const char *nearest = NULL;
    size_t limit = strlen(word) / 3 + 1;
    size_t least = limit + 1;
    for (size_t i = 0; i < candidate_count; i++) {
        size_t distance = edit_distance(word, candidates[i]);
        if (distance < least) {
            least = distance;
            nearest = candidates[i];
        }
    }
    return nearest;
}
