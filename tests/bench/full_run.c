/* SPDX-License-Identifier: MIT */
#include "tests/bench/full_run.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "tests/bench/river_case.h"

enum { NODES_OF_A_LAP = 10000, MOST_BALANCED = 64 };
static const struct flood flood = {8.0, 80.0, 4.0 * 3600.0, 6.0};
static const double time_step_s = 60.0, interval_m = 130.0, slope = 0.0009;

static bool set_level(struct dynamic_work *work, enum vector_level level)
{
    return dynamic_work_set_vectors(work, level) == level;
}

static double *take(double **room, size_t count)
{
    double *taken = *room;
    *room += count;
    return taken;
}

bool full_run_init(struct full_run *run, const struct full_run_setup *setup, const struct area_table *table)
{
    size_t nodes = setup->intervals + 1, members = setup->members;
    *run = (struct full_run){.setup = *setup};
    double *room = run->room = calloc(
        2 * setup->intervals + (setup->steps + 1) * members + (3 * nodes + 1) * members + members, sizeof *room);
    if (room == NULL)
        return false;
    run->interval_m = take(&room, setup->intervals);
    run->slope_m_per_m = take(&room, setup->intervals);
    run->inflow_m3s = take(&room, (setup->steps + 1) * members);
    run->state = (struct dynamic_state){.area_m2 = take(&room, nodes * members),
                                        .discharge_m3s = take(&room, nodes * members),
                                        .inflow_m3s = take(&room, members),
                                        .passed_m3 = take(&room, nodes * members)};
    for (size_t i = 0; i < setup->intervals; i++) {
        run->interval_m[i] = interval_m;
        run->slope_m_per_m[i] = slope;
    }
    for (size_t member = 0; member < members; member++) {
        struct flood own = flood_of_member(&flood, member);
        for (size_t step = 0; step <= setup->steps; step++)
            run->inflow_m3s[step * members + member] = flood_m3s(time_step_s * (double)step, &own);
    }
    run->branch = (struct dynamic_branch){.table = table,
                                          .interval_count = setup->intervals,
                                          .interval_m = run->interval_m,
                                          .slope_m_per_m = run->slope_m_per_m,
                                          .foot = DYNAMIC_FOOT_NORMAL,
                                          .below = DYNAMIC_NOWHERE};
    run->tree = (struct dynamic_tree){
        .branch_count = 1, .branches = &run->branch, .momentum_factor = 1.0, .is_diffusive = setup->is_diffusive};
    if (dynamic_work_create(&run->work, &run->tree) == FW_OK && set_level(run->work, setup->level))
        return true;
    full_run_clear(run);
    return false;
}

void full_run_clear(struct full_run *run)
{
    dynamic_work_destroy(run->work);
    free(run->room);
    memset(run, 0, sizeof *run);
}

void full_run_advance(struct full_run *run, struct laps *laps)
{
    size_t members = run->setup.members, piece = 1 + NODES_OF_A_LAP / (members * run->setup.intervals);
    memcpy(run->state.inflow_m3s, run->inflow_m3s, members * sizeof *run->inflow_m3s);
    dynamic_tree_start_steady(&run->tree, members, NULL, NULL, &run->state);
    run->counts = (struct dynamic_counts){0};
    laps_start(laps);
    for (size_t step = 1; step <= run->setup.steps; step++) {
        dynamic_tree_step(&run->tree, time_step_s, members, run->inflow_m3s + step * members, NULL, NULL, &run->state,
                          run->work, &run->counts);
        if (step % piece == 0 || step == run->setup.steps)
            laps_mark(laps);
    }
}

double full_run_imbalance(struct full_run *run)
{
    size_t members = run->setup.members, intervals = run->setup.intervals, foot = intervals * members;
    double in[MOST_BALANCED] = {0.0}, out[MOST_BALANCED] = {0.0}, stored[MOST_BALANCED], worst = 0.0;
    size_t count = members < MOST_BALANCED ? members : MOST_BALANCED;
    memcpy(run->state.inflow_m3s, run->inflow_m3s, members * sizeof *run->inflow_m3s);
    dynamic_tree_start_steady(&run->tree, members, NULL, NULL, &run->state);
    for (size_t m = 0; m < count; m++)
        stored[m] = -dynamic_tree_volume_m3(&run->tree, &run->state, members, m, 0, 0, intervals);
    for (size_t step = 1; step <= run->setup.steps; step++) {
        dynamic_tree_step(&run->tree, time_step_s, members, run->inflow_m3s + step * members, NULL, NULL, &run->state,
                          run->work, &run->counts);
        for (size_t m = 0; m < count; m++) {
            in[m] += run->state.passed_m3[m];
            out[m] += run->state.passed_m3[foot + m];
        }
    }
    for (size_t m = 0; m < count; m++) {
        stored[m] += dynamic_tree_volume_m3(&run->tree, &run->state, members, m, 0, 0, intervals);
        worst = fmax(worst, fabs(in[m] - out[m] - stored[m]) / in[m]);
    }
    return worst;
}
