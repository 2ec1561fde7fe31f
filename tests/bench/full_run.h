/* SPDX-License-Identifier: MIT */
/* One reach by the full equations, stepped by engine/dynamic_tree alone, for the benches to time. */
#ifndef FOREWATER_TESTS_BENCH_FULL_RUN_H
#define FOREWATER_TESTS_BENCH_FULL_RUN_H

#include "engine/dynamic_tree.h"
#include "engine/vector.h"
#include "tests/bench/stopwatch.h"

struct full_run_setup {
    enum vector_level level;
    size_t members, intervals, steps;
    bool is_diffusive;
};

struct full_run {
    struct full_run_setup setup;
    double *room, *interval_m, *slope_m_per_m, *inflow_m3s;
    struct dynamic_branch branch;
    struct dynamic_tree tree;
    struct dynamic_state state;
    struct dynamic_work *work;
    struct dynamic_counts counts;
};

/* False: no memory, or a level that cannot be set. */
bool full_run_init(struct full_run *run, const struct full_run_setup *setup, const struct area_table *table);
void full_run_clear(struct full_run *run);

/* From a steady start through a flood of 12 h and more, in steps of 60 s; adds the time of the steps to the laps. */
void full_run_advance(struct full_run *run, struct laps *laps);

/* What came in, less what went out and is there, as a share of what came in; the worst of 64. Runs the flood. */
double full_run_imbalance(struct full_run *run);

#endif
