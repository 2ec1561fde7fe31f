/* SPDX-License-Identifier: MIT */
/*
 * Time for the benches. The same work is done over and over in the same pieces, and of each piece the fastest time
 * counts: on a shared machine every piece has then seen a quiet moment, however long the whole is.
 */
#ifndef FOREWATER_TESTS_BENCH_STOPWATCH_H
#define FOREWATER_TESTS_BENCH_STOPWATCH_H

#include <assert.h>
#include <stddef.h>
#include <time.h>

static inline double wall_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

enum { MOST_LAPS = 4096 };

struct laps { /* all zero to begin with */
    size_t at, count;
    double begin_s;
    double best_s[MOST_LAPS];
};

static inline void laps_start(struct laps *laps)
{
    laps->at = 0;
    laps->begin_s = wall_s();
}

/* The end of a piece, and the beginning of the next. No more than MOST_LAPS of them. */
static inline void laps_mark(struct laps *laps)
{
    double now_s = wall_s(), took_s = now_s - laps->begin_s;
    assert(laps->at < MOST_LAPS);
    if (laps->at == laps->count) {
        laps->best_s[laps->count++] = took_s;
    } else if (took_s < laps->best_s[laps->at]) {
        laps->best_s[laps->at] = took_s;
    }
    laps->at++;
    laps->begin_s = now_s;
}

static inline double laps_total_s(const struct laps *laps)
{
    double total_s = 0.0;
    for (size_t i = 0; i < laps->count; i++)
        total_s += laps->best_s[i];
    return total_s;
}

#endif
