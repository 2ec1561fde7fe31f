/* SPDX-License-Identifier: MIT */
/* What is done about the step of a member that did not converge with the others. */
#include "engine/dynamic_internal.h"

#include <string.h>

enum { MOST_HALVINGS = 4 };

static void take_member(size_t row_count, const double from[], const struct dynamic_step_data *data, size_t member,
                        double to[])
{
    for (size_t row = 0; row < row_count; row++)
        to[row] = from[row * data->member_count + member];
}

static void take_old(size_t node_count, const struct dynamic_block *block, enum dynamic_part part, size_t lane,
                     double to[])
{
    for (size_t node = 0; node < node_count; node++)
        to[node] = dynamic_part_at(block, node, part)[lane];
}

/* The old state of one member, and what comes from outside before and after the step. */
static void begin_lone(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t lane,
                       const struct dynamic_state *state, struct dynamic_work *work)
{
    struct dynamic_lone *lone = &work->lone;
    size_t nodes = dynamic_tree_node_count(tree), member = dynamic_member_of_lane(&work->block, lane);
    take_old(nodes, &work->block, DYNAMIC_OLD_AREA, lane, lone->state.area_m2);
    take_old(nodes, &work->block, DYNAMIC_OLD_DISCHARGE, lane, lone->state.discharge_m3s);
    take_member(tree->branch_count, state->inflow_m3s, data, member, lone->state.inflow_m3s);
    take_member(tree->branch_count, data->inflow_m3s, data, member, lone->inflow_m3s);
    take_member(tree->side_count, data->side_m3, data, member, lone->side_m3);
    for (size_t i = 0; i < tree->branch_count; i++) {
        size_t foot = data->first_node[i] + tree->branches[i].interval_count;
        bool is_given = tree->branches[i].foot == DYNAMIC_FOOT_STAGE;
        lone->depth_m[i] = is_given ? data->foot_depth_m[i * data->member_count + member] : 0.0;
        lone->gauged_m3s[i] = dynamic_gauged_m3s(data, i * data->member_count + member);
        lone->gauged_before_m3s[i] = lone->state.discharge_m3s[data->first_node[i]];
        lone->depth_before_m[i] = area_table_depth_m(tree->branches[i].table, lone->state.area_m2[foot]);
    }
    memset(lone->passed_m3, 0, nodes * sizeof *lone->passed_m3);
}

/* The lone step in equal parts, everything from outside in straight lines between. True if all parts converged. */
static bool solve_in_parts(const struct dynamic_tree *tree, const struct dynamic_step_data *step, bool has_inertia,
                           size_t part_count, struct dynamic_work *work, struct dynamic_counts *counts)
{
    struct dynamic_lone *lone = &work->lone;
    size_t nodes = dynamic_tree_node_count(tree);
    const struct dynamic_step_data data = {.time_step_s = step->time_step_s / (double)part_count,
                                           .member_count = 1,
                                           .inflow_m3s = lone->inflow_now_m3s,
                                           .foot_depth_m = lone->depth_now_m,
                                           .side_m3 = lone->side_now_m3,
                                           .gauged_m3s = lone->gauged_now_m3s,
                                           .first_node = step->first_node,
                                           .intervals = work->lone_intervals};
    dynamic_make_intervals(tree, data.time_step_s, has_inertia, work->lone_intervals);
    for (size_t side = 0; side < tree->side_count; side++)
        lone->side_now_m3[side] = lone->side_m3[side] / (double)part_count;
    for (size_t part = 1; part <= part_count; part++) {
        double share = (double)part / (double)part_count;
        for (size_t i = 0; i < tree->branch_count; i++) {
            lone->inflow_now_m3s[i] = (1.0 - share) * lone->state.inflow_m3s[i] + share * lone->inflow_m3s[i];
            lone->gauged_now_m3s[i] = (1.0 - share) * lone->gauged_before_m3s[i] + share * lone->gauged_m3s[i];
            lone->depth_now_m[i] = (1.0 - share) * lone->depth_before_m[i] + share * lone->depth_m[i];
        }
        dynamic_solve(tree, &data, VECTOR_BASELINE, 0, &lone->state, &work->lone_block, counts);
        if (work->lone_block.is_open[0])
            return false;
        for (size_t node = 0; node < nodes; node++)
            lone->passed_m3[node] += lone->state.passed_m3[node];
    }
    return true;
}

static bool solve_halved(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t lane,
                         bool has_inertia, size_t fewest_parts, const struct dynamic_state *state,
                         struct dynamic_work *work, struct dynamic_counts *counts)
{
    for (size_t parts = fewest_parts; parts <= (size_t)1 << MOST_HALVINGS; parts *= 2) {
        begin_lone(tree, data, lane, state, work);
        if (solve_in_parts(tree, data, has_inertia, parts, work, counts))
            return true;
    }
    return false;
}

static void replace(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t lane,
                    const struct dynamic_state *state, struct dynamic_work *work)
{
    struct dynamic_lone *lone = &work->lone;
    size_t nodes = dynamic_tree_node_count(tree);
    begin_lone(tree, data, lane, state, work);
    const struct dynamic_step_data lone_data = {.time_step_s = data->time_step_s,
                                                .member_count = 1,
                                                .inflow_m3s = lone->inflow_m3s,
                                                .foot_depth_m = lone->depth_m,
                                                .side_m3 = lone->side_m3,
                                                .gauged_m3s = lone->gauged_m3s,
                                                .first_node = data->first_node};
    memcpy(lone->old_area_m2, lone->state.area_m2, nodes * sizeof *lone->old_area_m2);
    dynamic_replace_step(tree, &lone_data, lone->old_area_m2, lone->gauged_before_m3s, &lone->state);
    memcpy(lone->passed_m3, lone->state.passed_m3, nodes * sizeof *lone->passed_m3);
}

void dynamic_rescue(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t lane,
                    struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts)
{
    counts->halved++;
    if (!solve_halved(tree, data, lane, !tree->is_diffusive, 2, state, work, counts)) {
        counts->without_inertia++;
        if (tree->is_diffusive || !solve_halved(tree, data, lane, false, 1, state, work, counts)) {
            counts->replaced++;
            replace(tree, data, lane, state, work);
        }
    }
    size_t member = dynamic_member_of_lane(&work->block, lane);
    for (size_t node = 0; node < dynamic_tree_node_count(tree); node++) {
        size_t at = node * data->member_count + member;
        state->area_m2[at] = work->lone.state.area_m2[node];
        state->discharge_m3s[at] = work->lone.state.discharge_m3s[node];
        state->passed_m3[at] = work->lone.passed_m3[node];
    }
}
