/* SPDX-License-Identifier: MIT */
/* A river through the network, as the daemon routes it, for the benches to time. */
#ifndef FOREWATER_TESTS_BENCH_NETWORK_RUN_H
#define FOREWATER_TESTS_BENCH_NETWORK_RUN_H

#include "engine/method.h"
#include "engine/network.h"
#include "tests/bench/river_case.h"
#include "tests/bench/stopwatch.h"

struct network_run_setup {
    const struct section *section;
    double slope_m_per_m, reach_m;
    size_t reach_count;
    size_t reaches_to_a_tributary; /* every so manieth reach comes from the side, with a gauge of its own; 0: none */
    enum network_method method;
    size_t cells_per_reach; /* 0: as the network chooses */
    size_t group_count, members_per_group;
    double time_step_s;
    size_t step_count;
    struct flood flood; /* split evenly among the gauges */
};

struct network_run {
    struct network_run_setup setup;
    struct network_reach *reaches;
    size_t *gauge_node;
    size_t gauge_count;
    struct method_flood *gauge_floods;
    double *factors;
    double *inflow_m3s;  /* [step][member]; of several gauges [step][gauge][before and after it][member] */
    double *first_m3s;   /* [gauge][member] */
    double *outflow_m3s; /* [step, 0 the present][member] */
    struct network_river river;
    struct network_point foot;
    struct network *network;
    double create_s; /* what the network took to make, with its tables */
};

bool network_run_init(struct network_run *run, const struct network_run_setup *setup);
void network_run_clear(struct network_run *run); /* an all-zero one is fine */

/* From a steady start to the end; the time of the steps alone is added to the laps. False: refused. */
bool network_run_advance(struct network_run *run, struct laps *laps);

/* The best time of that from several times. Negative: refused. */
double network_run_best_s(struct network_run *run, int repeats);

#endif
