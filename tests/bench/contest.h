/* SPDX-License-Identifier: MIT */
/*
 * A river and a flood, routed by the engine and by the rival (tests/bench/rival.h) on many grids and at many steps or
 * tolerances, each judged by the fine grid of tests/independent: from these the cheapest that reaches a goal.
 */
#ifndef FOREWATER_TESTS_BENCH_CONTEST_H
#define FOREWATER_TESTS_BENCH_CONTEST_H

#include "tests/bench/network_run.h"
#include "tests/bench/rival.h"
#include "tests/bench/river_case.h"

enum { CONTEST_MEMBERS = 32, MOST_RIVAL_TRIALS = 512, MOST_ENGINE_TRIALS = 128 };

struct rival_trial {
    struct rival_setup setup;
    struct accuracy accuracy;
    double work;    /* counted: unknowns by evaluations, steps and factorings; of no unit */
    double seconds; /* of one run; 0: none */
};

struct engine_trial {
    size_t cells; /* 0: as the network chooses */
    double time_step_s;
    struct accuracy accuracy;
    double seconds; /* per member of 32; 0: none */
};

struct contest {
    const struct river_case *river;
    bool is_full;  /* Saint-Venant; else storage form and diffusive wave */
    bool is_smoke; /* few trials */
    size_t count;  /* outputs */
    const double *truth_m3s;
    double *flow_m3s; /* room for one run's outputs */
    struct flow_curve curve;
    struct area_table table;
    double largest_m3s, diffusion_length_m;
    size_t rival_trial_count, engine_trial_count;
    struct rival_trial rival_trials[MOST_RIVAL_TRIALS];
    struct engine_trial engine_trials[MOST_ENGINE_TRIALS];
};

bool contest_prepare(struct contest *contest); /* the first five members are set, the others zero */
void contest_clear(struct contest *contest);

struct rival_reach contest_reach(const struct contest *contest);
struct network_run_setup contest_engine_setup(const struct contest *contest, const struct engine_trial *trial,
                                              size_t members);

/* One of each, with its accuracy and the best time of several. seconds 0: it did not come to an end. */
struct rival_trial contest_try_rival(struct contest *contest, const struct rival_setup *setup, int repeats);
struct engine_trial contest_try_engine(struct contest *contest, size_t cells, double time_step_s, int repeats);

/* All trials, each run once. */
void contest_run_trials(struct contest *contest);

/* The cheapest that reaches the goal; seconds 0: none does. cells 0: any. */
struct rival_trial contest_cheapest_rival(struct contest *contest, const struct accuracy *goal, size_t cells);
struct engine_trial contest_cheapest_engine(struct contest *contest, const struct accuracy *goal);

#endif
