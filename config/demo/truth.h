/* SPDX-License-Identifier: MIT */
/*
 * What truly happened at the crossings on the invented night: the gauge's true flow, routed by the engine at a finer
 * step and in finer cells than the daemon uses, roughness exactly as in the recipe, Sethick Beck joining as the
 * recipe says.
 *
 * This judges what the daemon makes of a poor feed. It cannot judge the routing itself, which is the same engine:
 * that is tested elsewhere, against published results.
 */
#ifndef FOREWATER_CONFIG_DEMO_TRUTH_H
#define FOREWATER_CONFIG_DEMO_TRUTH_H

#include <stdbool.h>

#include "config/demo/recipe.h"

enum { TRUTH_STEP_S = 30 };

struct truth { /* levels at start + i TRUTH_STEP_S */
    int64_t start_utc_s;
    size_t count;
    double *level_m[RECIPE_POINT_COUNT]; /* above the section's invert; at the bridge with its lift */
};

/* FW_NO_MEMORY or the engine's fault, said on stderr. The caller clears. */
FW_MUST_CHECK enum fw_status truth_route(const struct recipe *recipe, struct truth *truth_out);
void truth_clear(struct truth *truth);

/* Straight line between steps, held at the ends. */
double truth_level_m(const struct truth *truth, size_t point, int64_t utc_s);

/* First second from from_utc_s on at or above a level, or below it when is_above is false; NIGHT_TIME_NEVER: none. */
int64_t truth_first(const struct truth *truth, size_t point, double level_m, bool is_above, int64_t from_utc_s);

/* The highest level between two moments and when it comes. */
double truth_peak_m(const struct truth *truth, size_t point, int64_t from_utc_s, int64_t to_utc_s,
                    int64_t *at_utc_s_out);

#endif
