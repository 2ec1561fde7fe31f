/* SPDX-License-Identifier: MIT */
#include "tests/bench/network_run.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { VALUES_OF_A_LAP = 40000, VALUES_OF_A_FULL_LAP = 4000 };

/* A chain from node 0 down; a tributary runs from a node of its own into the chain's newest. */
static void lay_reaches(struct network_run *run)
{
    const struct network_run_setup *setup = &run->setup;
    size_t stem_node = 0, next_node = 1, every = setup->reaches_to_a_tributary;
    run->gauge_node[run->gauge_count++] = 0;
    for (size_t i = 0; i < setup->reach_count; i++) {
        bool is_tributary = every > 0 && i % every == every - 1 && i + 1 < setup->reach_count;
        struct network_reach reach = {.id = "reach",
                                      .from_node = is_tributary ? next_node : stem_node,
                                      .to_node = is_tributary ? stem_node : next_node,
                                      .length_m = setup->reach_m,
                                      .slope_m_per_m = setup->slope_m_per_m,
                                      .section = setup->section,
                                      .method = setup->method};
        if (is_tributary)
            run->gauge_node[run->gauge_count++] = next_node;
        else
            stem_node = next_node;
        next_node++;
        run->reaches[i] = reach;
        if (!is_tributary)
            run->foot = (struct network_point){.id = "foot", .reach_index = i, .at_m = setup->reach_m};
    }
}

static void fill_inflow(struct network_run *run)
{
    const struct network_run_setup *setup = &run->setup;
    size_t members = setup->group_count * setup->members_per_group;
    for (size_t member = 0; member < members; member++) {
        struct flood flood = flood_of_member(&setup->flood, member);
        for (size_t step = 0; step <= setup->step_count; step++) {
            double flow = flood_m3s(setup->time_step_s * (double)step, &flood) / (double)run->gauge_count;
            for (size_t gauge = 0; gauge < run->gauge_count; gauge++) {
                if (run->gauge_count == 1)
                    run->inflow_m3s[step * members + member] = flow;
                if (run->gauge_count > 1 && step > 0)
                    run->inflow_m3s[(((step - 1) * run->gauge_count + gauge) * 2 + 1) * members + member] = flow;
                if (run->gauge_count > 1 && step < setup->step_count)
                    run->inflow_m3s[((step * run->gauge_count + gauge) * 2) * members + member] = flow;
            }
        }
    }
}

bool network_run_init(struct network_run *run, const struct network_run_setup *setup)
{
    size_t values = (setup->step_count + 1) * setup->group_count * setup->members_per_group;
    struct network_fault fault = {""};
    *run = (struct network_run){.setup = *setup};
    run->reaches = calloc(setup->reach_count, sizeof *run->reaches);
    run->gauge_node = calloc(setup->reach_count + 1, sizeof *run->gauge_node);
    run->gauge_floods = calloc(setup->reach_count + 1, sizeof *run->gauge_floods);
    run->factors = calloc(setup->group_count, sizeof *run->factors);
    if (run->reaches == NULL || run->gauge_node == NULL || run->gauge_floods == NULL || run->factors == NULL)
        goto failed;
    lay_reaches(run);
    run->inflow_m3s = calloc(2 * run->gauge_count * values, sizeof *run->inflow_m3s);
    run->first_m3s = calloc(run->gauge_count * setup->group_count * setup->members_per_group, sizeof *run->first_m3s);
    run->outflow_m3s = calloc(values, sizeof *run->outflow_m3s);
    if (run->inflow_m3s == NULL || run->first_m3s == NULL || run->outflow_m3s == NULL)
        goto failed;
    fill_inflow(run);
    for (size_t gauge = 0; gauge < run->gauge_count; gauge++)
        run->gauge_floods[gauge] = (struct method_flood){.base_m3s = setup->flood.base_m3s / (double)run->gauge_count,
                                                         .peak_m3s = (setup->flood.base_m3s + setup->flood.rise_m3s) /
                                                                     (double)run->gauge_count,
                                                         .rise_s = flood_rise_s(&setup->flood)};
    for (size_t group = 0; group < setup->group_count; group++)
        run->factors[group] = 1.0 + 0.01 * ((double)group - 0.5 * (double)(setup->group_count - 1));
    run->river = (struct network_river){.node_count = setup->reach_count + 1,
                                        .gauge_count = run->gauge_count,
                                        .gauge_node = run->gauge_node,
                                        .reach_count = setup->reach_count,
                                        .reaches = run->reaches,
                                        .point_count = 1,
                                        .points = &run->foot};
    const struct network_options options = {.time_step_s = setup->time_step_s,
                                            .fixed_cell_count = setup->cells_per_reach,
                                            .group_count = setup->group_count,
                                            .roughness_factors = run->factors,
                                            .members_per_group = setup->members_per_group,
                                            .gauge_floods = run->gauge_floods,
                                            .largest_discharge_m3s = setup->flood.base_m3s + setup->flood.rise_m3s};
    double begin = wall_s();
    if (network_create(&run->river, &options, &run->network, &fault) != FW_OK) {
        fprintf(stderr, "the network: %s\n", fault.text);
        goto failed;
    }
    run->create_s = wall_s() - begin;
    return true;
failed:
    network_run_clear(run);
    return false;
}

void network_run_clear(struct network_run *run)
{
    network_destroy(run->network);
    free(run->reaches);
    free(run->gauge_node);
    free(run->gauge_floods);
    free(run->factors);
    free(run->inflow_m3s);
    free(run->first_m3s);
    free(run->outflow_m3s);
    memset(run, 0, sizeof *run);
}

/* Steps that take a fraction of a millisecond; of several gauges, whose arrays are laid out for it, one. */
static size_t steps_of_a_lap(const struct network_run *run)
{
    size_t values = run->setup.group_count * run->setup.members_per_group * network_cell_count(run->network, 0);
    size_t wanted = network_method_is_full(run->setup.method) ? VALUES_OF_A_FULL_LAP : VALUES_OF_A_LAP;
    size_t fewest = 1 + run->setup.step_count / (MOST_LAPS - 1);
    return run->gauge_count > 1 ? 1 : wanted / values > fewest ? wanted / values : fewest;
}

bool network_run_advance(struct network_run *run, struct laps *laps)
{
    size_t members = run->setup.group_count * run->setup.members_per_group, steps = run->setup.step_count;
    size_t of_a_step = run->gauge_count > 1 ? 2 * run->gauge_count * members : members;
    for (size_t gauge = 0; gauge < run->gauge_count; gauge++)
        memcpy(run->first_m3s + gauge * members, run->inflow_m3s + 2 * gauge * members,
               members * sizeof *run->first_m3s);
    if (network_start_steady(run->network, run->first_m3s) != FW_OK)
        return false;
    size_t piece = steps_of_a_lap(run);
    laps_start(laps);
    for (size_t at = 0; at < steps; at += piece) {
        size_t count = piece < steps - at ? piece : steps - at;
        if (network_advance(run->network, count, run->inflow_m3s + at * of_a_step, run->outflow_m3s + at * members) !=
            FW_OK)
            return false;
        laps_mark(laps);
    }
    return true;
}

double network_run_best_s(struct network_run *run, int repeats)
{
    struct laps laps = {0};
    for (int repeat = 0; repeat < repeats; repeat++)
        if (!network_run_advance(run, &laps))
            return -1.0;
    return laps_total_s(&laps);
}
