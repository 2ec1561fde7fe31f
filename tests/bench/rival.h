/* SPDX-License-Identifier: MIT */
/*
 * The rival: a general library for ordinary differential equations (SUNDIALS CVODE: BDF of variable order and step,
 * Newton with a banded direct solver) on the same reach by the method of lines, with the engine's own tables in its
 * right-hand side and its derivatives written out. One run is one member.
 *
 * Staggered second-order differences: areas in cells, flows at their ends. Beyond the reach the channel goes on, in
 * cells that lengthen, to an outlet at normal depth.
 *     diffusive   unknowns A; Q = K(A) sqrt(S0 - dh/dx) at the ends: a band of 3
 *     Saint-Venant  unknowns A and Q in turn from head to foot: a band of 5
 */
#ifndef FOREWATER_TESTS_BENCH_RIVAL_H
#define FOREWATER_TESTS_BENCH_RIVAL_H

#include <stdbool.h>
#include <stddef.h>

#include "engine/area_table.h"
#include "tests/bench/stopwatch.h"

struct rival_setup {
    bool is_diffusive;
    size_t cell_count; /* of the reach */
    double relative_tolerance;
    int most_order; /* of the formulas, 1 to 5 */
    double beyond_m;
};

struct rival_reach {
    const struct area_table *table;
    double slope_m_per_m, length_m;
    double duration_s, output_step_s;
    double longest_step_s; /* none is longer, so that no flood is stepped over */
    double largest_m3s;
};

struct rival_counts {
    long steps, evaluations, factorings;
};

struct rival; /* rooms and library handles: made once, run for any number of members */

bool rival_create(struct rival **rival_out, const struct rival_reach *reach, const struct rival_setup *setup);
void rival_destroy(struct rival *rival); /* NULL is fine */

/* Flows at the reach's foot, one per output from 0 on; adds its time to the laps. False: the library gave up. */
bool rival_run(struct rival *rival, double (*inflow)(double t_s, const void *parameters), const void *parameters,
               double outflow_m3s[], struct laps *laps, struct rival_counts *counts_out);

#endif
