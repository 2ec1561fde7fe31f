/* SPDX-License-Identifier: MIT */
/*
 * What the judge says of a random reach: the flood at its foot by the full equations, on a grid that is made finer
 * until half as fine gives the same, and how sure it is of that. May be kept in a file, and found there again.
 */
#ifndef FOREWATER_TESTS_INDEPENDENT_JUDGED_FLOOD_H
#define FOREWATER_TESTS_INDEPENDENT_JUDGED_FLOOD_H

#include <stdbool.h>
#include <stddef.h>

#include "tests/independent/random_reach.h"

enum { JUDGED_MARKS = 3 }; /* at 30, 50 and 70 % of the rise */
extern const double judged_mark_parts[JUDGED_MARKS];

struct judged_peak { /* by the parabola through the three highest samples */
    double value, time_s;
};

struct judged_flood {
    size_t count; /* outputs, step_s apart, from 0 */
    double step_s;
    double *discharge_m3s, *depth_m;
    struct judged_peak flow, level;
    double level_mark_m[JUDGED_MARKS], level_passage_s[JUDGED_MARKS];
    double flow_mark_m3s[JUDGED_MARKS], flow_passage_s[JUDGED_MARKS];
    double travel_s; /* of half the rise of the flow, head to foot */
    size_t cell_count;
    double imbalance;
    /* a third of the difference to the grid half as fine, which second order leaves as error */
    double peak_doubt /* relative */, passage_doubt_s /* the worst of the levels' */;
};

/* First time at which straight lines between samples reach a mark; infinity if never. */
double judged_passage_s(size_t count, const double values[], double step_s, double mark);
struct judged_peak judged_peak_of(size_t count, const double values[], double step_s);

/* folder NULL: nothing is kept. False: no memory, or the judge could not follow the flood. */
bool judged_flood_of(const struct random_reach *reach, const char *folder, struct judged_flood *flood_out);
void judged_flood_clear(struct judged_flood *flood);

#endif
