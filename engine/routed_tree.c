/* SPDX-License-Identifier: MIT */
/*
 * The scheme weighs flows by theta, the network sums them by the trapezoidal rule: the difference, (theta - 1/2) dt
 * times inflow less outflow, telescopes, and is taken off the volume. A step taken in parts or replaced passes
 * another volume than its flows say; the tree owes the difference to itself and gets it back, a little at a time, as a
 * side inflow at its foot.
 */
#include "engine/routed_tree.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

static const double gravity_m_s2 = 9.80665;
static const double extension_lengths = 5.0;     /* times D/c at the peak */
static const double extension_lengthening = 1.2; /* cell by cell: where their length jumps, waves are thrown back */
static const double edge_share = 0.7;            /* of the steepest friction at an edge that its cell can carry */
static const double most_given_back = 0.02;      /* of the water in the last cell, in one step */

/* --- making ------------------------------------------------------------------------------------------------------- */

static void *room_for(size_t count, size_t size)
{
    return calloc(count > 0 ? count : 1, size);
}

/* The next cell below one, beyond the foot. */
static double extension_cell_m(const struct routed_reach *reach, double above_m)
{
    return fmin(extension_lengthening * above_m, fmax(reach->cell_m, 0.5 * reach->diffusion_length_m));
}

static size_t outlet_interval_count(const struct routed_reach *reach)
{
    size_t count = 0;
    double extension_m = 0.0, cell_m = reach->cell_m;
    if (network_reach_has_held_foot(reach->source) || network_reach_has_control(reach->source))
        return reach->cell_count;
    for (; count < 3 || extension_m < extension_lengths * reach->diffusion_length_m; count++) {
        cell_m = extension_cell_m(reach, cell_m);
        extension_m += cell_m;
    }
    return reach->cell_count + count;
}

static size_t count_sides(const struct network_river *river, const struct routed_tree *tree)
{
    size_t count = 1;
    for (size_t branch = 0; branch < tree->branch_count; branch++)
        for (size_t side = 0; side < river->side_inflow_count; side++)
            count += river->side_inflows[side].reach_index == tree->reach_index[branch];
    return count;
}

static enum fw_status allocate_parts(struct routed_tree *tree, size_t side_count)
{
    size_t branches = tree->branch_count, groups = tree->group_count;
    tree->interval_m = room_for(tree->interval_count, sizeof *tree->interval_m);
    tree->slope_m_per_m = room_for(tree->interval_count, sizeof *tree->slope_m_per_m);
    tree->side_node = room_for(side_count, sizeof *tree->side_node);
    tree->side_index = room_for(side_count, sizeof *tree->side_index);
    tree->tables = room_for(groups * branches, sizeof *tree->tables);
    tree->branches = room_for(groups * branches, sizeof *tree->branches);
    tree->overfalls = room_for(branches, sizeof *tree->overfalls);
    tree->trees = room_for(groups, sizeof *tree->trees);
    tree->inflow_m3s = room_for(branches * tree->member_count, sizeof *tree->inflow_m3s);
    tree->given_depth_m = room_for(tree->member_count, sizeof *tree->given_depth_m);
    tree->foot_depth_m = room_for(branches * tree->member_count, sizeof *tree->foot_depth_m);
    tree->gauged_m3s = room_for(branches * tree->member_count, sizeof *tree->gauged_m3s);
    tree->side_m3 = room_for(side_count * tree->member_count, sizeof *tree->side_m3);
    bool is_short = tree->interval_m == NULL || tree->slope_m_per_m == NULL || tree->side_node == NULL ||
                    tree->side_index == NULL || tree->tables == NULL || tree->branches == NULL ||
                    tree->overfalls == NULL || tree->trees == NULL || tree->inflow_m3s == NULL ||
                    tree->given_depth_m == NULL || tree->gauged_m3s == NULL || tree->foot_depth_m == NULL ||
                    tree->side_m3 == NULL;
    return is_short ? FW_NO_MEMORY : FW_OK;
}

/* Sides in the order of their nodes, the tree's own last among those of the last cell. */
static void place_sides(struct routed_tree *tree, const struct routed_reach reaches[])
{
    size_t count = 0, first_node = 0;
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        const struct routed_reach *reach = &reaches[tree->reach_index[branch]];
        for (size_t cell = 0; cell < reach->cell_count; cell++)
            for (size_t i = 0; i < reach->side_count; i++)
                if (reach->sides[i].cell == cell) {
                    tree->side_node[count] = first_node + cell;
                    tree->side_index[count++] = reach->sides[i].side_index;
                }
        if (branch + 1 == tree->branch_count) {
            tree->side_node[count] = first_node + reach->cell_count - 1;
            tree->side_index[count++] = NETWORK_NONE;
        }
        first_node += reach->cell_count + 1;
    }
    for (size_t group = 0; group < tree->group_count; group++) {
        tree->trees[group].side_count = count;
        tree->trees[group].side_node = tree->side_node;
    }
}

static size_t branch_of_reach(const struct routed_tree *tree, size_t reach_index)
{
    for (size_t branch = 0; branch < tree->branch_count; branch++)
        if (tree->reach_index[branch] == reach_index)
            return branch;
    return DYNAMIC_NOWHERE;
}

/* The table of the roughest members. */
static const struct area_table *roughest_table(const struct routed_tree *tree, size_t branch)
{
    const struct area_table *roughest = &tree->tables[branch];
    double area = roughest->largest_area_m2;
    for (size_t group = 1; group < tree->group_count; group++) {
        const struct area_table *table = &tree->tables[group * tree->branch_count + branch];
        if (area_table_conveyance_m3s(table, area) < area_table_conveyance_m3s(roughest, area))
            roughest = table;
    }
    return roughest;
}

/*
 * Critical flow at the edge, by depth: Q = A sqrt(g A / B), made to rise where a plain floods. A cell is longer than the
 * drawdown to the critical depth: friction at such an edge, taken for the whole cell, would make the flow fall with the
 * level. So the edge passes no more than a friction slope can that still rises: 1/dx > d(Sf)/dh / 2.
 */
static void make_overfall(struct routed_overfall *overfall, const struct area_table *table, double cell_m)
{
    double from = area_table_depth_m(table, table->smallest_area_m2);
    double to = area_table_depth_m(table, table->largest_area_m2);
    for (size_t row = 1; row < ROUTED_OVERFALL_ROWS; row++) {
        double depth = from * pow(to / from, (double)(row - 1) / (ROUTED_OVERFALL_ROWS - 2));
        double area = area_table_area_at_depth_m2(table, depth);
        const struct area_table_row *at = area_table_row_at(table, area);
        double critical = area * sqrt(gravity_m_s2 * area * at->depth_1);
        double conveyance = at->conveyance_0 + at->conveyance_1 * area;
        double steepest = edge_share * conveyance * at->depth_1 / (at->conveyance_1 * cell_m);
        double most = fmin(critical, conveyance * sqrt(steepest));
        overfall->depth_m[row] = depth;
        overfall->discharge_m3s[row] = fmax(critical, 1.001 * overfall->discharge_m3s[row - 1]);
        overfall->most_m3s[row] = fmax(most, 1.001 * overfall->most_m3s[row - 1]);
    }
    overfall->opening = (struct stage_opening){.row_count = ROUTED_OVERFALL_ROWS,
                                               .depth_m = overfall->depth_m,
                                               .discharge_m3s = overfall->discharge_m3s,
                                               .open_share = 1.0,
                                               .most_m3s = overfall->most_m3s};
    overfall->structure = (struct stage_structure){.opening_count = 1, .openings = &overfall->opening};
}

static const struct stage_structure *structure_at_foot(struct routed_tree *tree, size_t branch,
                                                       const struct routed_reach *reach)
{
    const struct network_reach *source = reach->source;
    if (source->foot_structure == NULL && source->foot_drop_m > 0.0)
        make_overfall(&tree->overfalls[branch], roughest_table(tree, branch), reach->cell_m);
    return source->foot_structure != NULL ? source->foot_structure
           : source->foot_drop_m > 0.0    ? &tree->overfalls[branch].structure
                                          : NULL;
}

static enum dynamic_foot foot_of(const struct network_reach *source, bool is_outlet)
{
    if (network_reach_has_control(source))
        return DYNAMIC_FOOT_STRUCTURE;
    if (!is_outlet)
        return DYNAMIC_FOOT_JOINS;
    return network_reach_has_held_foot(source) ? DYNAMIC_FOOT_STAGE : DYNAMIC_FOOT_NORMAL;
}

static void place_branches(struct routed_tree *tree, const struct network_river *river,
                           const struct routed_reach reaches[])
{
    size_t at = 0;
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        const struct routed_reach *reach = &reaches[tree->reach_index[branch]];
        const struct network_reach *source = reach->source;
        bool is_outlet = branch + 1 == tree->branch_count;
        size_t count = is_outlet ? tree->interval_count - at : reach->cell_count;
        for (size_t k = 0; k < count; k++) {
            tree->interval_m[at + k] =
                k < reach->cell_count ? reach->cell_m : extension_cell_m(reach, tree->interval_m[at + k - 1]);
            tree->slope_m_per_m[at + k] = source->slope_m_per_m;
        }
        for (size_t group = 0; group < tree->group_count; group++)
            tree->branches[group * tree->branch_count + branch] = (struct dynamic_branch){
                .table = &tree->tables[group * tree->branch_count + branch],
                .interval_count = count,
                .interval_m = tree->interval_m + at,
                .slope_m_per_m = tree->slope_m_per_m + at,
                .foot = foot_of(source, is_outlet),
                .bed_drop_m = source->foot_drop_m,
                .structure = structure_at_foot(tree, branch, reach),
                .below =
                    is_outlet ? DYNAMIC_NOWHERE : branch_of_reach(tree, network_reach_from(river, source->to_node))};
        at += count;
    }
    double outlet_depth_m = reaches[tree->reach_index[tree->branch_count - 1]].source->outlet_depth_m;
    for (size_t member = 0; member < tree->member_count; member++)
        tree->given_depth_m[member] = outlet_depth_m;
}

static void place_gauges(struct routed_tree *tree, const struct network_river *river,
                         const struct routed_reach reaches[])
{
    for (size_t i = 0; i < tree->branch_count * tree->member_count; i++)
        tree->gauged_m3s[i] = (double)NAN;
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        size_t gauge = network_gauge_at(river, reaches[tree->reach_index[branch]].source->from_node);
        tree->has_gauges = tree->has_gauges || (gauge != NETWORK_NONE && network_gauge_is_inner(river, gauge));
    }
    for (size_t group = 0; group < tree->group_count && tree->has_gauges; group++)
        tree->trees[group].gauged_m3s = tree->gauged_m3s;
}

static enum fw_status make_tables(struct routed_tree *tree, const struct routed_reach reaches[],
                                  const struct network_options *options)
{
    for (size_t group = 0; group < tree->group_count; group++)
        for (size_t branch = 0; branch < tree->branch_count; branch++) {
            enum fw_status status =
                area_table_init(&tree->tables[group * tree->branch_count + branch],
                                &reaches[tree->reach_index[branch]].curve, options->roughness_factors[group]);
            if (status != FW_OK)
                return status;
        }
    return FW_OK;
}

enum fw_status routed_tree_init(struct routed_tree *tree, const struct network_river *river,
                                const struct routed_reach reaches[], size_t branch_count, const size_t reach_index[],
                                const struct network_options *options)
{
    const struct routed_reach *outlet = &reaches[reach_index[branch_count - 1]];
    *tree = (struct routed_tree){.branch_count = branch_count,
                                 .member_count = options->members_per_group,
                                 .time_step_s = options->time_step_s,
                                 .group_count = options->group_count,
                                 .outlet_cell_count = outlet->cell_count};
    tree->reach_index = room_for(branch_count, sizeof *tree->reach_index);
    if (tree->reach_index == NULL)
        return FW_NO_MEMORY;
    memcpy(tree->reach_index, reach_index, branch_count * sizeof *reach_index);
    tree->interval_count = outlet_interval_count(outlet);
    for (size_t branch = 0; branch + 1 < branch_count; branch++)
        tree->interval_count += reaches[reach_index[branch]].cell_count;
    tree->node_count = tree->interval_count + branch_count;
    enum fw_status status = allocate_parts(tree, count_sides(river, tree));
    if (status == FW_OK)
        status = make_tables(tree, reaches, options);
    if (status != FW_OK)
        goto cleanup;
    for (size_t group = 0; group < tree->group_count; group++)
        tree->trees[group] = (struct dynamic_tree){.branch_count = branch_count,
                                                   .branches = tree->branches + group * branch_count,
                                                   .momentum_factor = 1.0,
                                                   .is_diffusive = outlet->source->method == NETWORK_DIFFUSIVE};
    place_branches(tree, river, reaches);
    place_sides(tree, reaches);
    place_gauges(tree, river, reaches);
    status = dynamic_work_create(&tree->work, &tree->trees[0]);
cleanup:
    if (status != FW_OK)
        routed_tree_clear(tree);
    return status;
}

void routed_tree_clear(struct routed_tree *tree)
{
    if (tree->tables != NULL)
        for (size_t i = 0; i < tree->group_count * tree->branch_count; i++)
            area_table_clear(&tree->tables[i]);
    dynamic_work_destroy(tree->work);
    free(tree->reach_index);
    free(tree->interval_m);
    free(tree->slope_m_per_m);
    free(tree->side_node);
    free(tree->side_index);
    free(tree->tables);
    free(tree->branches);
    free(tree->overfalls);
    free(tree->trees);
    free(tree->inflow_m3s);
    free(tree->given_depth_m);
    free(tree->foot_depth_m);
    free(tree->gauged_m3s);
    free(tree->side_m3);
    memset(tree, 0, sizeof *tree);
}

/* --- state -------------------------------------------------------------------------------------------------------- */

size_t routed_tree_state_count(const struct routed_tree *tree)
{
    return 3 * tree->node_count + 2 * tree->branch_count + 1;
}

static struct dynamic_state state_of(const struct routed_tree *tree, double state[])
{
    size_t row = tree->node_count * tree->member_count;
    return (struct dynamic_state){
        .area_m2 = state, .discharge_m3s = state + row, .passed_m3 = state + 2 * row, .inflow_m3s = state + 3 * row};
}

/* [branch][member]: what gauges bring into the heads, measured less what comes, now. */
static double *brought_of(const struct routed_tree *tree, double state[])
{
    return state + (3 * tree->node_count + tree->branch_count) * tree->member_count;
}

/* [member]: volume that the flows say left or did not enter, and that is still there. */
static double *owed_of(const struct routed_tree *tree, double state[])
{
    return state + (3 * tree->node_count + 2 * tree->branch_count) * tree->member_count;
}

static size_t foot_node(const struct routed_tree *tree)
{
    return dynamic_tree_first_node(&tree->trees[0], tree->branch_count - 1) + tree->outlet_cell_count;
}

static double last_cell_m3(const struct routed_tree *tree, const struct dynamic_state *now, size_t member)
{
    size_t foot = foot_node(tree), members = tree->member_count;
    double cell_m = tree->interval_m[foot - tree->branch_count]; /* nodes before it: one more to a branch */
    return 0.5 * cell_m * (now->area_m2[(foot - 1) * members + member] + now->area_m2[foot * members + member]);
}

static void gather_sides(struct routed_tree *tree, const double side_m3[], const struct dynamic_state *now,
                         double owed[])
{
    size_t members = tree->member_count;
    for (size_t side = 0; side < tree->trees[0].side_count; side++) {
        double *into = tree->side_m3 + side * members;
        if (tree->side_index[side] != NETWORK_NONE) {
            memcpy(into, side_m3 + tree->side_index[side] * members, members * sizeof *into);
            continue;
        }
        for (size_t member = 0; member < members; member++) {
            double most = owed == NULL ? 0.0 : most_given_back * last_cell_m3(tree, now, member);
            into[member] = owed == NULL ? 0.0 : fmax(-most, fmin(most, owed[member]));
            if (owed != NULL)
                owed[member] -= into[member];
        }
    }
}

static double froude_squared(const struct area_table *table, double area_m2, double discharge_m3s)
{
    double speed = discharge_m3s / area_m2;
    return speed * speed / (gravity_m_s2 * area_m2 * area_table_row_at(table, area_m2)->depth_1);
}

/* The given depth, or the flow's critical one where that is higher: what lies below it does not act upstream. */
static double acting_depth_m(const struct area_table *table, double given_depth_m, double discharge_m3s)
{
    double low = fmax(area_table_area_at_depth_m2(table, given_depth_m), table->smallest_area_m2);
    if (froude_squared(table, low, discharge_m3s) <= 1.0)
        return fmax(given_depth_m, area_table_depth_m(table, table->smallest_area_m2));
    double high = 2.0 * low;
    while (froude_squared(table, high, discharge_m3s) > 1.0)
        high *= 2.0;
    for (int i = 0; i < 100 && high - low > 1e-14 * high; i++) {
        double middle = 0.5 * (low + high);
        if (froude_squared(table, middle, discharge_m3s) > 1.0)
            low = middle;
        else
            high = middle;
    }
    return area_table_depth_m(table, high);
}

/* Did any depth at the outlet change? */
static bool hold_foot(struct routed_tree *tree, size_t group, const struct dynamic_state *now)
{
    size_t members = tree->member_count, foot = foot_node(tree), last = tree->branch_count - 1;
    bool has_changed = false;
    if (tree->trees[group].branches[last].foot != DYNAMIC_FOOT_STAGE)
        return false;
    for (size_t member = 0; member < members; member++) {
        double *depth = &tree->foot_depth_m[last * members + member];
        double acting = acting_depth_m(tree->trees[group].branches[last].table, tree->given_depth_m[member],
                                       fmax(now->discharge_m3s[foot * members + member], 0.0));
        has_changed = has_changed || acting != *depth;
        *depth = acting;
    }
    return has_changed;
}

static void find_brought(const struct routed_tree *tree, size_t group, const struct dynamic_state *now,
                         const double inflow_m3s[], double brought_m3s[])
{
    size_t members = tree->member_count, node = 0;
    if (!tree->has_gauges)
        return;
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        for (size_t member = 0; member < members; member++) {
            size_t at = branch * members + member;
            bool is_gauged = !isnan(tree->gauged_m3s[at]);
            brought_m3s[at] = is_gauged ? now->discharge_m3s[node * members + member] - inflow_m3s[at] : 0.0;
        }
        node += tree->trees[group].branches[branch].interval_count + 1;
    }
    node = 0;
    for (size_t above = 0; above + 1 < tree->branch_count; above++) {
        size_t below = tree->trees[group].branches[above].below;
        node += tree->trees[group].branches[above].interval_count + 1;
        for (size_t member = 0; member < members; member++)
            if (!isnan(tree->gauged_m3s[below * members + member]))
                brought_m3s[below * members + member] -= now->discharge_m3s[(node - 1) * members + member];
    }
}

void routed_tree_start_steady(struct routed_tree *tree, size_t group, const double side_m3[], double state[])
{
    struct dynamic_state now = state_of(tree, state);
    gather_sides(tree, side_m3, &now, NULL);
    for (size_t i = 0; i < tree->trees[group].side_count * tree->member_count; i++)
        tree->side_m3[i] /= tree->time_step_s; /* now flows */
    memcpy(now.inflow_m3s, tree->inflow_m3s, tree->branch_count * tree->member_count * sizeof *tree->inflow_m3s);
    /* flows do not depend on levels: the second time the foot is where they put it */
    hold_foot(tree, group, &now);
    dynamic_tree_start_steady(&tree->trees[group], tree->member_count, tree->side_m3, tree->foot_depth_m, &now);
    if (hold_foot(tree, group, &now))
        dynamic_tree_start_steady(&tree->trees[group], tree->member_count, tree->side_m3, tree->foot_depth_m, &now);
    find_brought(tree, group, &now, tree->inflow_m3s, brought_of(tree, state));
    memset(owed_of(tree, state), 0, tree->member_count * sizeof *state);
    tree->counts = (struct dynamic_counts){0};
}

/* What a place's flows before and after a step say that passed, by the scheme's own weights. */
static double said_m3(const struct routed_tree *tree, double before_m3s, double after_m3s)
{
    return tree->time_step_s * (DYNAMIC_TIME_WEIGHT * after_m3s + (1.0 - DYNAMIC_TIME_WEIGHT) * before_m3s);
}

void routed_tree_step(struct routed_tree *tree, size_t group, const double side_m3[], double state[])
{
    struct dynamic_state now = state_of(tree, state);
    double *owed = owed_of(tree, state), *brought = brought_of(tree, state);
    size_t members = tree->member_count, node = 0;
    size_t foot = foot_node(tree) * members;
    gather_sides(tree, side_m3, &now, owed);
    hold_foot(tree, group, &now);
    /* said to have come and to have gone, less what did come and go: nothing but rounding in an ordinary step */
    for (size_t member = 0; member < members; member++) {
        owed[member] += (1.0 - DYNAMIC_TIME_WEIGHT) * tree->time_step_s * -now.discharge_m3s[foot + member];
        for (size_t branch = 0; branch < tree->branch_count; branch++)
            owed[member] +=
                said_m3(tree, now.inflow_m3s[branch * members + member] + brought[branch * members + member],
                        tree->inflow_m3s[branch * members + member]);
    }
    dynamic_tree_step(&tree->trees[group], tree->time_step_s, members, tree->inflow_m3s, tree->foot_depth_m,
                      tree->side_m3, &now, tree->work, &tree->counts);
    find_brought(tree, group, &now, tree->inflow_m3s, brought);
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        size_t last = node + tree->trees[group].branches[branch].interval_count;
        for (size_t member = 0; member < members; member++) {
            owed[member] += said_m3(tree, 0.0, brought[branch * members + member]);
            owed[member] -= now.passed_m3[node * members + member];
            if (branch + 1 < tree->branch_count) /* passes into another head */
                owed[member] += now.passed_m3[last * members + member];
        }
        node = last + 1;
    }
    for (size_t member = 0; member < members; member++)
        owed[member] +=
            now.passed_m3[foot + member] - DYNAMIC_TIME_WEIGHT * tree->time_step_s * now.discharge_m3s[foot + member];
}

/* --- reading ------------------------------------------------------------------------------------------------------ */

void routed_tree_read_stops(const struct routed_tree *tree, size_t group, size_t branch_index,
                            const struct routed_reach *reach, double state[], double stop_m3[], double stop_depth_m[])
{
    struct dynamic_state now = state_of(tree, state);
    size_t members = tree->member_count;
    size_t first = dynamic_tree_first_node(&tree->trees[group], branch_index);
    const struct area_table *table = tree->trees[group].branches[branch_index].table;
    for (size_t stop = 0; stop < reach->stop_count; stop++)
        for (size_t member = 0; member < members; member++) {
            size_t at = (first + reach->stop_node[stop]) * members + member;
            stop_m3[stop * members + member] = tree->time_step_s * now.discharge_m3s[at];
            stop_depth_m[stop * members + member] = area_table_depth_m(table, now.area_m2[at]);
        }
}

double routed_tree_volume_m3(const struct routed_tree *tree, size_t group, size_t member, double state[])
{
    struct dynamic_state now = state_of(tree, state);
    size_t members = tree->member_count;
    double volume = owed_of(tree, state)[member];
    double net_m3s = -now.discharge_m3s[foot_node(tree) * members + member];
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        size_t count = branch + 1 == tree->branch_count ? tree->outlet_cell_count
                                                        : tree->trees[group].branches[branch].interval_count;
        volume += dynamic_tree_volume_m3(&tree->trees[group], &now, members, member, branch, 0, count);
        net_m3s += now.inflow_m3s[branch * members + member] + brought_of(tree, state)[branch * members + member];
    }
    return volume - (DYNAMIC_TIME_WEIGHT - 0.5) * tree->time_step_s * net_m3s;
}
