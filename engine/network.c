/* SPDX-License-Identifier: MIT */
#include "engine/network.h"

#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "engine/network_internal.h"
#include "engine/river.h"

static void *room_for(size_t count, size_t size)
{
    return calloc(count > 0 ? count : 1, size);
}

static enum fw_status allocate_parts(struct network *network)
{
    const struct network_river *river = &network->river;
    network->reaches = room_for(river->reach_count, sizeof *network->reaches);
    network->river_reaches = room_for(river->reach_count, sizeof *network->river_reaches);
    network->choices = room_for(river->reach_count, sizeof *network->choices);
    network->order = room_for(river->reach_count, sizeof *network->order);
    network->gauge_of_head = room_for(river->reach_count, sizeof *network->gauge_of_head);
    network->first_above_gauge = room_for(river->gauge_count, sizeof *network->first_above_gauge);
    network->first_above = room_for(river->reach_count, sizeof *network->first_above);
    network->next_above = room_for(river->reach_count, sizeof *network->next_above);
    network->first_point = room_for(river->reach_count, sizeof *network->first_point);
    network->next_point = room_for(river->point_count, sizeof *network->next_point);
    network->state_offset = room_for(river->reach_count, sizeof *network->state_offset);
    network->tree_of_reach = room_for(river->reach_count, sizeof *network->tree_of_reach);
    network->trees = room_for(river->reach_count, sizeof *network->trees);
    network->points = room_for(river->point_count, sizeof *network->points);
    network->delays = room_for(river->side_inflow_count, sizeof *network->delays);
    network->roughness_factors = room_for(network->group_count, sizeof *network->roughness_factors);
    bool is_short = network->reaches == NULL || network->river_reaches == NULL || network->choices == NULL ||
                    network->order == NULL || network->gauge_of_head == NULL || network->first_above == NULL ||
                    network->next_above == NULL || network->first_point == NULL || network->next_point == NULL ||
                    network->state_offset == NULL || network->tree_of_reach == NULL || network->trees == NULL ||
                    network->first_above_gauge == NULL || network->points == NULL || network->delays == NULL ||
                    network->roughness_factors == NULL;
    return is_short ? FW_NO_MEMORY : FW_OK;
}

static enum fw_status make_order(struct network *network, struct network_fault *fault_out)
{
    const struct network_river *river = &network->river;
    size_t *waiting = room_for(river->node_count, sizeof *waiting);
    if (waiting == NULL)
        return FW_NO_MEMORY;
    enum fw_status status = river_order(river, network->order, waiting, fault_out);
    free(waiting);
    return status;
}

/* Lists in rising order of index, so that sums are taken in one order whatever the tree. */
static void make_lists(struct network *network)
{
    const struct network_river *river = &network->river;
    for (size_t i = 0; i < river->reach_count; i++) {
        network->gauge_of_head[i] = NETWORK_NONE;
        network->first_point[i] = NETWORK_NONE;
        network->gauge_of_head[i] = network_gauge_at(river, river->reaches[i].from_node);
        network->first_above[i] = network_reach_into(river, river->reaches[i].from_node);
        network->next_above[i] = NETWORK_NONE;
        for (size_t other = i + 1; other < river->reach_count && network->next_above[i] == NETWORK_NONE; other++)
            if (river->reaches[other].to_node == river->reaches[i].to_node)
                network->next_above[i] = other;
    }
    for (size_t gauge = 0; gauge < river->gauge_count; gauge++)
        network->first_above_gauge[gauge] =
            network_gauge_is_inner(river, gauge) ? network_reach_into(river, river->gauge_node[gauge]) : NETWORK_NONE;
    for (size_t i = river->point_count; i-- > 0;) {
        size_t *first = &network->first_point[river->points[i].reach_index];
        network->next_point[i] = *first;
        *first = i;
    }
}

static enum fw_status make_curves(struct network *network, const struct network_options *options,
                                  struct network_fault *fault_out)
{
    const struct network_river *river = &network->river;
    for (size_t i = 0; i < river->reach_count; i++) {
        enum fw_status status = routed_reach_init_curve(&network->reaches[i], &river->reaches[i], options);
        if (status == FW_BAD_INPUT)
            snprintf(fault_out->text, sizeof fault_out->text,
                     "reach '%s': section: no depth at which it carries %g m3/s (with head-room) and widens upwards",
                     river->reaches[i].id, options->largest_discharge_m3s);
        if (status != FW_OK)
            return status;
    }
    return FW_OK;
}

static enum fw_status make_cells(struct network *network, const struct network_options *options)
{
    double typical_m3s = options->typical_peak_m3s > 0.0 ? options->typical_peak_m3s : options->largest_discharge_m3s;
    enum fw_status status = FW_OK;
    for (size_t i = 0; i < network->river.reach_count && status == FW_OK; i++) {
        struct method_flood flood = network->choices[i].flood;
        if (!(flood.peak_m3s > 0.0))
            flood = (struct method_flood){.peak_m3s = typical_m3s};
        status = routed_reach_init_cells(&network->reaches[i], &network->river, i, &flood, options);
    }
    return status;
}

/* Neighbours by the same full equations make one tree, known by its outlet, which comes last of them in the order. */
static enum fw_status make_trees(struct network *network, const struct network_options *options)
{
    const struct network_river *river = &network->river;
    size_t *members = room_for(river->reach_count, sizeof *members);
    enum fw_status status = members == NULL ? FW_NO_MEMORY : FW_OK;
    for (size_t i = river->reach_count; i-- > 0 && status == FW_OK;) {
        size_t reach = network->order[i];
        size_t below = network_reach_from(river, river->reaches[reach].to_node);
        enum network_method method = river->reaches[reach].method;
        bool joins = below != NETWORK_NONE && river->reaches[below].method == method;
        network->tree_of_reach[reach] = !network_method_is_full(method) ? NETWORK_NONE
                                        : joins                         ? network->tree_of_reach[below]
                                                                        : network->tree_count++;
    }
    for (size_t tree = 0; tree < network->tree_count && status == FW_OK; tree++) {
        size_t count = 0;
        for (size_t i = 0; i < river->reach_count; i++)
            if (network->tree_of_reach[network->order[i]] == tree)
                members[count++] = network->order[i];
        status = routed_tree_init(&network->trees[tree], river, network->reaches, count, members, options);
    }
    free(members);
    return status;
}

static void place_points(struct network *network)
{
    const struct network_river *river = &network->river;
    for (size_t i = 0; i < river->point_count; i++) {
        const struct routed_reach *reach = &network->reaches[river->points[i].reach_index];
        struct placed_point *placed = &network->points[i];
        placed->stop = routed_reach_stop_at(reach, river->points[i].at_m, &placed->share_of_next);
    }
}

static void place_delays(struct network *network)
{
    const struct network_river *river = &network->river;
    network->ring_count = 1;
    for (size_t i = 0; i < river->side_inflow_count; i++) {
        if (river->side_inflows[i].share_of_gauge == NETWORK_NONE)
            continue;
        double steps = river->side_inflows[i].delay_s / network->time_step_s;
        network->inner_share_count += network_has_inner_gauge(network, river->side_inflows[i].share_of_gauge);
        struct delayed_share *delay = &network->delays[i];
        delay->whole = (size_t)floor(steps);
        delay->part = steps - floor(steps);
        if (network->ring_count < delay->whole + 2)
            network->ring_count = delay->whole + 2;
    }
}

static size_t take(struct block_layout *layout, size_t row_count, size_t member_count)
{
    size_t offset = layout->count;
    layout->count += row_count * member_count;
    return offset;
}

static enum fw_status allocate_values(struct network *network)
{
    const struct network_river *river = &network->river;
    struct block_layout *layout = &network->layout;
    size_t members = network->members_per_group;
    size_t most_stops = 0;
    size_t most_cells = 0;
    for (size_t i = 0; i < river->reach_count; i++) {
        const struct routed_reach *reach = &network->reaches[i];
        const struct routed_tree *tree = network_tree_of(network, i);
        size_t state_count = tree == NULL                    ? routed_reach_state_count(reach)
                             : network_is_outlet_of(tree, i) ? routed_tree_state_count(tree)
                                                             : 0;
        network->state_offset[i] = take(layout, state_count, members);
        most_stops = reach->stop_count > most_stops ? reach->stop_count : most_stops;
        most_cells = reach->cell_count > most_cells ? reach->cell_count : most_cells;
    }
    layout->head_m3 = take(layout, river->reach_count, members);
    layout->foot_m3 = take(layout, river->reach_count, members);
    layout->lent_m3 = take(layout, river->reach_count, members);
    layout->lent_before_m3 = take(layout, river->reach_count, members);
    layout->above_survey = take(layout, river->reach_count, members);
    layout->gauge = take(layout, river->gauge_count * network->ring_count, members);
    layout->given = take(layout, river->gauge_count, members);
    layout->brought_m3s = take(layout, river->gauge_count, members);
    layout->brought_m3 = take(layout, river->gauge_count, members);
    layout->level = take(layout, river->level_count, members);
    layout->side = take(layout, river->side_inflow_count, members);
    layout->point = take(layout, river->point_count, members);
    layout->depth = take(layout, river->point_count, members);

    network->blocks = room_for(network->group_count * layout->count, sizeof *network->blocks);
    network->side_m3 = room_for(river->side_inflow_count * members, sizeof *network->side_m3);
    network->stop_m3 = room_for(most_stops * members, sizeof *network->stop_m3);
    network->implicit_m3 = room_for(members, sizeof *network->implicit_m3);
    network->passing_m3 = room_for(members, sizeof *network->passing_m3);
    network->lateral_m3 = room_for(most_cells, sizeof *network->lateral_m3);
    network->stop_depth_m = room_for(most_stops * members, sizeof *network->stop_depth_m);
    bool is_short = network->blocks == NULL || network->side_m3 == NULL || network->stop_m3 == NULL ||
                    network->implicit_m3 == NULL || network->passing_m3 == NULL || network->lateral_m3 == NULL ||
                    network->stop_depth_m == NULL;
    return is_short ? FW_NO_MEMORY : FW_OK;
}

/* All else is dry as it is allocated. */
static void dry_trees(struct network *network)
{
    for (size_t i = 0; i < network->tree_count; i++) {
        struct routed_tree *tree = &network->trees[i];
        size_t outlet = tree->reach_index[tree->branch_count - 1];
        for (size_t group = 0; group < network->group_count; group++)
            routed_tree_start_steady(tree, group, network->side_m3,
                                     network_block_of(network, group) + network->state_offset[outlet]);
    }
}

enum fw_status network_create(const struct network_river *river, const struct network_options *options,
                              struct network **network_out, struct network_fault *fault_out)
{
    enum fw_status status = river_check_values(river, options, fault_out);
    if (status != FW_OK)
        return status;
    struct network *network = calloc(1, sizeof *network);
    if (network == NULL)
        return FW_NO_MEMORY;
    network->river = *river;
    network->time_step_s = options->time_step_s;
    network->group_count = options->group_count;
    network->members_per_group = options->members_per_group;

    status = allocate_parts(network);
    if (status != FW_OK)
        goto cleanup;
    memcpy(network->roughness_factors, options->roughness_factors,
           options->group_count * sizeof *options->roughness_factors);
    memcpy(network->river_reaches, river->reaches, river->reach_count * sizeof *river->reaches);
    network->river.reaches = network->river_reaches;
    status = make_order(network, fault_out);
    if (status == FW_OK)
        status = make_curves(network, options, fault_out);
    if (status == FW_OK)
        status = network_choose_methods(network, options);
    if (status == FW_OK)
        status = make_cells(network, options);
    if (status != FW_OK)
        goto cleanup;
    status = make_trees(network, options);
    if (status != FW_OK)
        goto cleanup;
    make_lists(network);
    place_points(network);
    place_delays(network);
    status = allocate_values(network);
    if (status == FW_OK)
        status = network_make_levels(network, fault_out);
    if (status == FW_OK)
        dry_trees(network);
cleanup:
    if (status == FW_OK)
        *network_out = network;
    else
        network_destroy(network);
    return status;
}

void network_destroy(struct network *network)
{
    if (network == NULL)
        return;
    if (network->reaches != NULL)
        for (size_t i = 0; i < network->river.reach_count; i++)
            routed_reach_clear(&network->reaches[i]);
    if (network->trees != NULL)
        for (size_t i = 0; i < network->tree_count; i++)
            routed_tree_clear(&network->trees[i]);
    free(network->reaches);
    free(network->river_reaches);
    free(network->choices);
    free(network->tree_of_reach);
    free(network->trees);
    free(network->stop_depth_m);
    free(network->order);
    free(network->gauge_of_head);
    free(network->first_above_gauge);
    free(network->first_above);
    free(network->next_above);
    free(network->first_point);
    free(network->next_point);
    free(network->state_offset);
    free(network->points);
    free(network->structure_ratings);
    free(network->structure_rows);
    free(network->delays);
    free(network->roughness_factors);
    free(network->blocks);
    free(network->side_m3);
    free(network->stop_m3);
    free(network->implicit_m3);
    free(network->passing_m3);
    free(network->lateral_m3);
    free(network);
}
