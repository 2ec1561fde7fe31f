/* SPDX-License-Identifier: MIT */
#include "engine/dynamic_tree.h"

#include <math.h>
#include <string.h>

#include "engine/dynamic_internal.h"
#include "engine/steady_profile.h"

/* --- the tree ---------------------------------------------------------------------------------------------------- */

static bool is_branch_sound(const struct dynamic_tree *tree, size_t branch_index)
{
    const struct dynamic_branch *branch = &tree->branches[branch_index];
    if (branch->table == NULL || branch->interval_count == 0)
        return false;
    for (size_t k = 0; k < branch->interval_count; k++)
        if (!(branch->interval_m[k] > 0.0) || !isfinite(branch->interval_m[k]) || !isfinite(branch->slope_m_per_m[k]))
            return false;
    bool is_inner = branch->below != DYNAMIC_NOWHERE;
    if (is_inner && (branch->below <= branch_index || branch->below >= tree->branch_count))
        return false;
    switch (branch->foot) {
    case DYNAMIC_FOOT_JOINS:
        return is_inner && isfinite(branch->bed_drop_m);
    case DYNAMIC_FOOT_NORMAL:
        return !is_inner && branch->slope_m_per_m[branch->interval_count - 1] > 0.0;
    case DYNAMIC_FOOT_STAGE:
        return !is_inner;
    case DYNAMIC_FOOT_STRUCTURE:
        return isfinite(branch->bed_drop_m) && stage_structure_check(branch->structure) == FW_OK;
    }
    return false;
}

static bool is_side_sound(const struct dynamic_tree *tree, size_t side)
{
    size_t foot = 0;
    if (side > 0 && tree->side_node[side] < tree->side_node[side - 1])
        return false;
    for (size_t i = 0; i < tree->branch_count; i++) {
        foot += tree->branches[i].interval_count;
        if (tree->side_node[side] < foot)
            return true;
        if (tree->side_node[side] == foot)
            return false;
        foot++;
    }
    return false;
}

enum fw_status dynamic_tree_check(const struct dynamic_tree *tree)
{
    if (tree->branch_count == 0 || !(tree->momentum_factor > 0.0) || !isfinite(tree->momentum_factor))
        return FW_BAD_INPUT;
    for (size_t i = 0; i < tree->branch_count; i++)
        if (!is_branch_sound(tree, i))
            return FW_BAD_INPUT;
    for (size_t side = 0; side < tree->side_count; side++)
        if (!is_side_sound(tree, side))
            return FW_BAD_INPUT;
    return FW_OK;
}

size_t dynamic_tree_first_node(const struct dynamic_tree *tree, size_t branch_index)
{
    size_t node = 0;
    for (size_t i = 0; i < branch_index; i++)
        node += tree->branches[i].interval_count + 1;
    return node;
}

size_t dynamic_tree_node_count(const struct dynamic_tree *tree)
{
    return dynamic_tree_first_node(tree, tree->branch_count);
}

double dynamic_tree_volume_m3(const struct dynamic_tree *tree, const struct dynamic_state *state, size_t member_count,
                              size_t member, size_t branch_index, size_t from_interval, size_t to_interval)
{
    size_t first = dynamic_tree_first_node(tree, branch_index);
    double volume = 0.0;
    for (size_t k = from_interval; k < to_interval; k++) {
        size_t at = (first + k) * member_count + member;
        volume += 0.5 * tree->branches[branch_index].interval_m[k] *
                  (state->area_m2[at] + state->area_m2[at + member_count]);
    }
    return volume;
}

/* --- a steady start ---------------------------------------------------------------------------------------------- */

static void start_flows(const struct dynamic_tree *tree, size_t member_count, size_t member, const double side_m3s[],
                        struct dynamic_state *state)
{
    size_t node = 0, side = 0;
    for (size_t i = 0; i < tree->branch_count; i++) {
        double gauged = tree->gauged_m3s == NULL ? (double)NAN : tree->gauged_m3s[i * member_count + member];
        double flow = isnan(gauged) ? state->inflow_m3s[i * member_count + member] : gauged;
        for (size_t above = 0; above < i && isnan(gauged); above++)
            if (tree->branches[above].below == i)
                flow += state->discharge_m3s[(dynamic_tree_first_node(tree, above + 1) - 1) * member_count + member];
        for (size_t k = 0; k <= tree->branches[i].interval_count; k++, node++) {
            state->discharge_m3s[node * member_count + member] = flow;
            for (; side < tree->side_count && tree->side_node[side] == node; side++)
                flow += side_m3s[side * member_count + member];
        }
    }
}

static double start_foot_area(const struct dynamic_tree *tree, size_t branch_index, double discharge_m3s,
                              double given_depth_m, double depth_below_m)
{
    const struct dynamic_branch *branch = &tree->branches[branch_index];
    double area = 0.0;
    switch (branch->foot) {
    case DYNAMIC_FOOT_JOINS:
        area = area_table_area_at_depth_m2(branch->table, depth_below_m - branch->bed_drop_m);
        break;
    case DYNAMIC_FOOT_NORMAL:
        area = area_table_area_of_conveyance_m2(
            branch->table, discharge_m3s / sqrt(branch->slope_m_per_m[branch->interval_count - 1]));
        break;
    case DYNAMIC_FOOT_STAGE:
        area = area_table_area_at_depth_m2(branch->table, given_depth_m);
        break;
    case DYNAMIC_FOOT_STRUCTURE:
        area = area_table_area_at_depth_m2(
            branch->table,
            stage_structure_depth_above_m(branch->structure, discharge_m3s, depth_below_m - branch->bed_drop_m));
        break;
    }
    return fmax(area, branch->table->smallest_area_m2);
}

static void start_levels(const struct dynamic_tree *tree, size_t member_count, size_t member,
                         const double foot_depth_m[], struct dynamic_state *state)
{
    for (size_t i = tree->branch_count; i-- > 0;) {
        const struct dynamic_branch *branch = &tree->branches[i];
        size_t first = dynamic_tree_first_node(tree, i);
        size_t at = (first + branch->interval_count) * member_count + member;
        double depth_below = -(double)INFINITY;
        if (branch->below != DYNAMIC_NOWHERE) {
            size_t head = dynamic_tree_first_node(tree, branch->below) * member_count + member;
            depth_below = area_table_depth_m(tree->branches[branch->below].table, state->area_m2[head]);
        }
        state->area_m2[at] = start_foot_area(
            tree, i, state->discharge_m3s[at],
            branch->foot == DYNAMIC_FOOT_STAGE ? foot_depth_m[i * member_count + member] : 0.0, depth_below);
        for (size_t k = branch->interval_count; k-- > 0; at -= member_count) {
            const struct steady_interval interval = {.table = branch->table,
                                                     .length_m = branch->interval_m[k],
                                                     .slope_m_per_m = branch->slope_m_per_m[k],
                                                     .momentum_factor = tree->momentum_factor,
                                                     .has_inertia = !tree->is_diffusive};
            state->area_m2[at - member_count] = steady_profile_area_above_m2(
                &interval, state->discharge_m3s[at - member_count], state->area_m2[at], state->discharge_m3s[at]);
        }
    }
}

void dynamic_tree_start_steady(const struct dynamic_tree *tree, size_t member_count, const double side_m3s[],
                               const double foot_depth_m[], struct dynamic_state *state)
{
    for (size_t member = 0; member < member_count; member++) {
        start_flows(tree, member_count, member, side_m3s, state);
        start_levels(tree, member_count, member, foot_depth_m, state);
    }
}

/* --- a step ------------------------------------------------------------------------------------------------------ */

void dynamic_tree_step(const struct dynamic_tree *tree, double time_step_s, size_t member_count,
                       const double inflow_m3s[], const double foot_depth_m[], const double side_m3[],
                       struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts)
{
    const struct dynamic_step_data data = {.time_step_s = time_step_s,
                                           .member_count = member_count,
                                           .inflow_m3s = inflow_m3s,
                                           .foot_depth_m = foot_depth_m,
                                           .side_m3 = side_m3,
                                           .gauged_m3s = tree->gauged_m3s,
                                           .first_node = work->first_node,
                                           .intervals = work->intervals};
    size_t node = 0;
    for (size_t i = 0; i < tree->branch_count; i++) {
        work->first_node[i] = node;
        node += tree->branches[i].interval_count + 1;
    }
    dynamic_make_intervals(tree, time_step_s, !tree->is_diffusive, work->intervals);
    counts->steps += member_count;
    for (size_t first = 0, solved; first < member_count; first += solved) {
        solved = dynamic_solve(tree, &data, work->vectors, first, state, &work->block, counts);
        for (size_t lane = 0; lane < solved; lane++)
            if (work->block.is_open[lane])
                dynamic_rescue(tree, &data, lane, state, work, counts);
    }
    memcpy(state->inflow_m3s, inflow_m3s, tree->branch_count * member_count * sizeof *inflow_m3s);
}
