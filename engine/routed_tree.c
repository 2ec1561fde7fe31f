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

static const double extension_lengths = 5.0;     /* times D/c at the peak */
static const double extension_lengthening = 1.2; /* cell by cell: where their length jumps, waves are thrown back */
static const double most_given_back = 0.02;      /* of the water in the last cell, in one step */

/* --- making ------------------------------------------------------------------------------------------------------- */

static void *room_for(size_t count, size_t size)
{
    return calloc(count > 0 ? count : 1, size);
}

static bool ends_at_a_given_depth(const struct network_reach *reach)
{
    return reach->outlet_depth_m > 0.0;
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
    if (ends_at_a_given_depth(reach->source))
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
    tree->trees = room_for(groups, sizeof *tree->trees);
    tree->inflow_m3s = room_for(branches * tree->member_count, sizeof *tree->inflow_m3s);
    tree->foot_depth_m = room_for(branches * tree->member_count, sizeof *tree->foot_depth_m);
    tree->side_m3 = room_for(side_count * tree->member_count, sizeof *tree->side_m3);
    bool is_short = tree->interval_m == NULL || tree->slope_m_per_m == NULL || tree->side_node == NULL ||
                    tree->side_index == NULL || tree->tables == NULL || tree->branches == NULL ||
                    tree->trees == NULL || tree->inflow_m3s == NULL || tree->foot_depth_m == NULL ||
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
                .foot = !is_outlet                      ? DYNAMIC_FOOT_JOINS
                        : ends_at_a_given_depth(source) ? DYNAMIC_FOOT_STAGE
                                                        : DYNAMIC_FOOT_NORMAL,
                .below =
                    is_outlet ? DYNAMIC_NOWHERE : branch_of_reach(tree, network_reach_from(river, source->to_node))};
        for (size_t member = 0; member < tree->member_count; member++)
            tree->foot_depth_m[branch * tree->member_count + member] = source->outlet_depth_m;
        at += count;
    }
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
    status = dynamic_work_create(&tree->work, &tree->trees[0], tree->member_count);
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
    free(tree->trees);
    free(tree->inflow_m3s);
    free(tree->foot_depth_m);
    free(tree->side_m3);
    memset(tree, 0, sizeof *tree);
}

/* --- state -------------------------------------------------------------------------------------------------------- */

size_t routed_tree_state_count(const struct routed_tree *tree)
{
    return 3 * tree->node_count + tree->branch_count + 1;
}

static struct dynamic_state state_of(const struct routed_tree *tree, double state[])
{
    size_t row = tree->node_count * tree->member_count;
    return (struct dynamic_state){
        .area_m2 = state, .discharge_m3s = state + row, .passed_m3 = state + 2 * row, .inflow_m3s = state + 3 * row};
}

/* [member]: volume that the flows say left or did not enter, and that is still there. */
static double *owed_of(const struct routed_tree *tree, double state[])
{
    return state + (3 * tree->node_count + tree->branch_count) * tree->member_count;
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

void routed_tree_start_steady(struct routed_tree *tree, size_t group, const double side_m3[], double state[])
{
    struct dynamic_state now = state_of(tree, state);
    gather_sides(tree, side_m3, &now, NULL);
    for (size_t i = 0; i < tree->trees[group].side_count * tree->member_count; i++)
        tree->side_m3[i] /= tree->time_step_s; /* now flows */
    memcpy(now.inflow_m3s, tree->inflow_m3s, tree->branch_count * tree->member_count * sizeof *tree->inflow_m3s);
    dynamic_tree_start_steady(&tree->trees[group], tree->member_count, tree->side_m3, tree->foot_depth_m, &now);
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
    double *owed = owed_of(tree, state);
    size_t members = tree->member_count, node = 0;
    size_t foot = foot_node(tree) * members;
    gather_sides(tree, side_m3, &now, owed);
    /* said to have come and to have gone, less what did come and go: nothing but rounding in an ordinary step */
    for (size_t member = 0; member < members; member++) {
        owed[member] += (1.0 - DYNAMIC_TIME_WEIGHT) * tree->time_step_s * -now.discharge_m3s[foot + member];
        for (size_t branch = 0; branch < tree->branch_count; branch++)
            owed[member] +=
                said_m3(tree, now.inflow_m3s[branch * members + member], tree->inflow_m3s[branch * members + member]);
    }
    dynamic_tree_step(&tree->trees[group], tree->time_step_s, members, tree->inflow_m3s, tree->foot_depth_m,
                      tree->side_m3, &now, tree->work, &tree->counts);
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        size_t last = node + tree->trees[group].branches[branch].interval_count;
        for (size_t member = 0; member < members; member++) {
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
        net_m3s += now.inflow_m3s[branch * members + member];
    }
    return volume - (DYNAMIC_TIME_WEIGHT - 0.5) * tree->time_step_s * net_m3s;
}
