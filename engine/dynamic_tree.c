/* SPDX-License-Identifier: MIT */
#include "engine/dynamic_tree.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "engine/dynamic_internal.h"
#include "engine/steady_profile.h"

enum { MOST_HALVINGS = 4 };

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

/* --- room -------------------------------------------------------------------------------------------------------- */

static double *take(double **room, size_t count)
{
    double *taken = *room;
    *room += count;
    return taken;
}

static void lay_out(struct dynamic_work *work, double **room, size_t node_count, size_t branch_count)
{
    size_t members = work->member_count;
    double **const by_node[] = {&work->old_area, &work->old_discharge, &work->sweep_e, &work->sweep_f,
                                &work->lead,     &work->gain,          &work->inertia, &work->old_half_area,
                                &work->old_rise, &work->old_friction,  &work->old_flux};
    double **const by_branch[] = {&work->head_correction, &work->meeting_by_below, &work->meeting_fixed};
    double **const by_member[] = {&work->lateral, &work->area_correction, &work->discharge_correction, &work->is_open,
                                  &work->is_large};
    for (size_t i = 0; i < sizeof by_node / sizeof *by_node; i++)
        *by_node[i] = take(room, node_count * members);
    for (size_t i = 0; i < sizeof by_branch / sizeof *by_branch; i++)
        *by_branch[i] = take(room, branch_count * members);
    for (size_t i = 0; i < sizeof by_member / sizeof *by_member; i++)
        *by_member[i] = take(room, members);
    for (size_t side = 0; side < 2; side++) {
        struct dynamic_node_flow *flow = &work->flow[side];
        double **const parts[] = {&flow->depth,
                                  &flow->depth_by_area,
                                  &flow->conveyance,
                                  &flow->conveyance_by_area,
                                  &flow->speed,
                                  &flow->flux,
                                  &flow->friction,
                                  &flow->friction_by_area,
                                  &flow->friction_by_flow,
                                  &flow->froude_squared};
        for (size_t i = 0; i < sizeof parts / sizeof *parts; i++)
            *parts[i] = take(room, members);
    }
}

static void lay_out_lone(struct dynamic_work *work, double **room, size_t node_count, size_t branch_count,
                         size_t side_count)
{
    work->lone_state.area_m2 = take(room, node_count);
    work->lone_state.discharge_m3s = take(room, node_count);
    work->lone_state.passed_m3 = take(room, node_count);
    work->lone_state.inflow_m3s = take(room, branch_count);
    work->lone_passed = take(room, node_count);
    work->lone_inflow = take(room, branch_count);
    work->lone_inflow_now = take(room, branch_count);
    work->lone_depth = take(room, branch_count);
    work->lone_depth_before = take(room, branch_count);
    work->lone_depth_now = take(room, branch_count);
    work->lone_gauged = take(room, branch_count);
    work->lone_gauged_before = take(room, branch_count);
    work->lone_gauged_now = take(room, branch_count);
    work->lone_side = take(room, side_count);
    work->lone_side_now = take(room, side_count);
}

enum { BY_NODE = 11, BY_BRANCH = 3, BY_MEMBER = 5 + 2 * 10, LONE_BY_NODE = 4, LONE_BY_BRANCH = 9 };

static enum fw_status create_work(struct dynamic_work **work_out, const struct dynamic_tree *tree,
                                  size_t member_count, bool is_lone)
{
    size_t nodes = dynamic_tree_node_count(tree);
    size_t branches = tree->branch_count;
    size_t count = (nodes * BY_NODE + branches * BY_BRANCH + BY_MEMBER) * member_count;
    size_t lone_count = nodes * LONE_BY_NODE + branches * LONE_BY_BRANCH + 2 * tree->side_count;
    struct dynamic_work *work = calloc(1, sizeof *work);
    if (work == NULL)
        return FW_NO_MEMORY;
    work->member_count = member_count;
    work->block = calloc(count + (is_lone ? 0 : lone_count), sizeof *work->block);
    enum fw_status status = work->block == NULL ? FW_NO_MEMORY : FW_OK;
    if (status == FW_OK) {
        double *room = work->block;
        lay_out(work, &room, nodes, branches);
        if (!is_lone) {
            lay_out_lone(work, &room, nodes, branches, tree->side_count);
            status = create_work(&work->lone, tree, 1, true);
        }
    }
    if (status == FW_OK)
        *work_out = work;
    else
        dynamic_work_destroy(work);
    return status;
}

enum fw_status dynamic_work_create(struct dynamic_work **work_out, const struct dynamic_tree *tree,
                                   size_t member_count)
{
    return create_work(work_out, tree, member_count, false);
}

void dynamic_work_destroy(struct dynamic_work *work)
{
    if (work == NULL)
        return;
    dynamic_work_destroy(work->lone);
    free(work->block);
    free(work);
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

/* Takes one member's column out of an array of rows, or puts it back. */
static void take_column(size_t row_count, size_t member_count, size_t member, const double from[], double column[])
{
    for (size_t row = 0; row < row_count; row++)
        column[row] = from[row * member_count + member];
}

static void put_column(size_t row_count, size_t member_count, size_t member, const double column[], double to[])
{
    for (size_t row = 0; row < row_count; row++)
        to[row * member_count + member] = column[row];
}

static void keep_old(const struct dynamic_state *state, size_t count, struct dynamic_work *work)
{
    memcpy(work->old_area, state->area_m2, count * sizeof *work->old_area);
    memcpy(work->old_discharge, state->discharge_m3s, count * sizeof *work->old_discharge);
}

/* The old state of one member, and what comes from outside before and after the step. */
static void begin_lone(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t member,
                       const struct dynamic_state *state, struct dynamic_work *work)
{
    size_t nodes = dynamic_tree_node_count(tree), members = work->member_count;
    take_column(nodes, members, member, work->old_area, work->lone_state.area_m2);
    take_column(nodes, members, member, work->old_discharge, work->lone_state.discharge_m3s);
    take_column(tree->branch_count, members, member, state->inflow_m3s, work->lone_state.inflow_m3s);
    take_column(tree->branch_count, members, member, data->inflow_m3s, work->lone_inflow);
    if (tree->side_count > 0)
        take_column(tree->side_count, members, member, data->side_m3, work->lone_side);
    for (size_t i = 0; i < tree->branch_count; i++) {
        size_t foot = dynamic_tree_first_node(tree, i + 1) - 1;
        bool is_given = tree->branches[i].foot == DYNAMIC_FOOT_STAGE;
        work->lone_depth[i] = is_given ? data->foot_depth_m[i * members + member] : 0.0;
        work->lone_depth_before[i] = area_table_depth_m(tree->branches[i].table, work->lone_state.area_m2[foot]);
        work->lone_gauged[i] = dynamic_gauged_m3s(data, i * members + member);
        work->lone_gauged_before[i] = work->lone_state.discharge_m3s[foot - tree->branches[i].interval_count];
    }
    memset(work->lone_passed, 0, nodes * sizeof *work->lone_passed);
}

/* The lone step in equal parts, everything from outside in straight lines between. True if all parts converged. */
static bool solve_in_parts(const struct dynamic_tree *tree, double time_step_s, bool has_inertia, size_t part_count,
                           struct dynamic_work *work, struct dynamic_counts *counts)
{
    size_t nodes = dynamic_tree_node_count(tree);
    for (size_t side = 0; side < tree->side_count; side++)
        work->lone_side_now[side] = work->lone_side[side] / (double)part_count;
    for (size_t part = 1; part <= part_count; part++) {
        double share = (double)part / (double)part_count;
        for (size_t i = 0; i < tree->branch_count; i++) {
            work->lone_inflow_now[i] = (1.0 - share) * work->lone_state.inflow_m3s[i] + share * work->lone_inflow[i];
            work->lone_depth_now[i] = (1.0 - share) * work->lone_depth_before[i] + share * work->lone_depth[i];
            work->lone_gauged_now[i] = (1.0 - share) * work->lone_gauged_before[i] + share * work->lone_gauged[i];
        }
        const struct dynamic_step_data data = {.time_step_s = time_step_s / (double)part_count,
                                               .has_inertia = has_inertia,
                                               .inflow_m3s = work->lone_inflow_now,
                                               .foot_depth_m = work->lone_depth_now,
                                               .side_m3 = work->lone_side_now,
                                               .gauged_m3s = work->lone_gauged_now};
        keep_old(&work->lone_state, nodes, work->lone);
        if (dynamic_solve(tree, &data, &work->lone_state, work->lone, counts) > 0)
            return false;
        for (size_t node = 0; node < nodes; node++)
            work->lone_passed[node] += work->lone_state.passed_m3[node];
    }
    return true;
}

static bool solve_halved(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t member,
                         bool has_inertia, size_t fewest_parts, const struct dynamic_state *state,
                         struct dynamic_work *work, struct dynamic_counts *counts)
{
    for (size_t parts = fewest_parts; parts <= (size_t)1 << MOST_HALVINGS; parts *= 2) {
        begin_lone(tree, data, member, state, work);
        if (solve_in_parts(tree, data->time_step_s, has_inertia, parts, work, counts))
            return true;
    }
    return false;
}

/* A member's step by other means, since all at once it did not converge. */
static void rescue(const struct dynamic_tree *tree, const struct dynamic_step_data *data, size_t member,
                   struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts)
{
    size_t nodes = dynamic_tree_node_count(tree), members = work->member_count;
    counts->halved++;
    if (!solve_halved(tree, data, member, data->has_inertia, 2, state, work, counts)) {
        counts->without_inertia++;
        if (!data->has_inertia || !solve_halved(tree, data, member, false, 1, state, work, counts)) {
            const struct dynamic_step_data lone_data = {.time_step_s = data->time_step_s,
                                                        .inflow_m3s = work->lone_inflow,
                                                        .foot_depth_m = work->lone_depth,
                                                        .side_m3 = work->lone_side,
                                                        .gauged_m3s = work->lone_gauged};
            counts->replaced++;
            begin_lone(tree, data, member, state, work);
            keep_old(&work->lone_state, nodes, work->lone);
            dynamic_replace_step(tree, &lone_data, &work->lone_state, work->lone);
            memcpy(work->lone_passed, work->lone_state.passed_m3, nodes * sizeof *work->lone_passed);
        }
    }
    put_column(nodes, members, member, work->lone_state.area_m2, state->area_m2);
    put_column(nodes, members, member, work->lone_state.discharge_m3s, state->discharge_m3s);
    put_column(nodes, members, member, work->lone_passed, state->passed_m3);
}

void dynamic_tree_step(const struct dynamic_tree *tree, double time_step_s, size_t member_count,
                       const double inflow_m3s[], const double foot_depth_m[], const double side_m3[],
                       struct dynamic_state *state, struct dynamic_work *work, struct dynamic_counts *counts)
{
    const struct dynamic_step_data data = {.time_step_s = time_step_s,
                                           .has_inertia = !tree->is_diffusive,
                                           .inflow_m3s = inflow_m3s,
                                           .foot_depth_m = foot_depth_m,
                                           .side_m3 = side_m3,
                                           .gauged_m3s = tree->gauged_m3s};
    keep_old(state, dynamic_tree_node_count(tree) * member_count, work);
    counts->steps += member_count;
    if (dynamic_solve(tree, &data, state, work, counts) > 0)
        for (size_t member = 0; member < member_count; member++)
            if (work->is_open[member] > 0.0)
                rescue(tree, &data, member, state, work, counts);
    memcpy(state->inflow_m3s, inflow_m3s, tree->branch_count * member_count * sizeof *inflow_m3s);
}
