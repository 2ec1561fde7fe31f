/* SPDX-License-Identifier: MIT */
#include "engine/network.h"

#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "engine/river.h"
#include "engine/routed_reach.h"

struct placed_point {
    size_t stop;
    double share_of_next;
};

struct delayed_share { /* of a gauge: (1 - part) of the flow `whole` steps ago and part of the one before */
    size_t whole;
    double part;
};

/* Where things lie in a group's block of doubles. Every array has the group's members innermost. */
struct block_layout {
    size_t head_m3; /* [reach] passing volumes now */
    size_t foot_m3; /* [reach] */
    size_t gauge; /* [gauge][slot] flows, the newest in slot ring_at, older ones in the slots before it, cyclically */
    size_t side;  /* [side inflow] flows now */
    size_t point; /* [point] flows now */
    size_t count;
};

struct network {
    struct network_river river;
    double time_step_s;
    size_t group_count;
    size_t members_per_group;
    double *roughness_factors; /* per group */

    struct routed_reach *reaches;
    size_t *order;
    size_t *gauge_of_head; /* per reach, NETWORK_NONE where reaches flow in */
    size_t *first_above;   /* per reach, the first that ends at its head, or NETWORK_NONE */
    size_t *next_above;    /* per reach, the next that ends where it does */
    size_t *first_point;   /* per reach, the first on it */
    size_t *next_point;    /* per point, the next on the same reach */
    size_t *state_offset;  /* per reach, within a group's block */
    struct placed_point *points;
    struct delayed_share *delays;
    size_t ring_count;
    size_t ring_at;

    struct block_layout layout;
    double *blocks; /* [group][layout.count] */

    double *side_m3; /* scratch of one group, [side inflow][member] */
    double *stop_m3;
    double *implicit_m3;
    double *passing_m3;
    double *lateral_m3;

    size_t steps_above_tables;
    size_t steps_below_zero;
};

static double *block_of(const struct network *network, size_t group)
{
    return network->blocks + group * network->layout.count;
}

static double *gauge_slot(const struct network *network, double *block, size_t gauge, size_t slot)
{
    return block + network->layout.gauge + (gauge * network->ring_count + slot) * network->members_per_group;
}

/* --- making ----------------------------------------------------------------------------------------------------- */

static void *room_for(size_t count, size_t size)
{
    return calloc(count > 0 ? count : 1, size);
}

static enum fw_status allocate_parts(struct network *network)
{
    const struct network_river *river = &network->river;
    network->reaches = room_for(river->reach_count, sizeof *network->reaches);
    network->order = room_for(river->reach_count, sizeof *network->order);
    network->gauge_of_head = room_for(river->reach_count, sizeof *network->gauge_of_head);
    network->first_above = room_for(river->reach_count, sizeof *network->first_above);
    network->next_above = room_for(river->reach_count, sizeof *network->next_above);
    network->first_point = room_for(river->reach_count, sizeof *network->first_point);
    network->next_point = room_for(river->point_count, sizeof *network->next_point);
    network->state_offset = room_for(river->reach_count, sizeof *network->state_offset);
    network->points = room_for(river->point_count, sizeof *network->points);
    network->delays = room_for(river->side_inflow_count, sizeof *network->delays);
    network->roughness_factors = room_for(network->group_count, sizeof *network->roughness_factors);
    bool is_short = network->reaches == NULL || network->order == NULL || network->gauge_of_head == NULL ||
                    network->first_above == NULL || network->next_above == NULL || network->first_point == NULL ||
                    network->next_point == NULL || network->state_offset == NULL || network->points == NULL ||
                    network->delays == NULL || network->roughness_factors == NULL;
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
        network->first_above[i] = NETWORK_NONE;
        network->first_point[i] = NETWORK_NONE;
        for (size_t gauge = 0; gauge < river->gauge_count; gauge++)
            if (river->gauge_node[gauge] == river->reaches[i].from_node)
                network->gauge_of_head[i] = gauge;
        for (size_t above = river->reach_count; above-- > 0;)
            if (river->reaches[above].to_node == river->reaches[i].from_node) {
                network->next_above[above] = network->first_above[i];
                network->first_above[i] = above;
            }
    }
    for (size_t i = river->point_count; i-- > 0;) {
        size_t *first = &network->first_point[river->points[i].reach_index];
        network->next_point[i] = *first;
        *first = i;
    }
}

static enum fw_status make_reaches(struct network *network, const struct network_options *options,
                                   struct network_fault *fault_out)
{
    const struct network_river *river = &network->river;
    for (size_t i = 0; i < river->reach_count; i++) {
        enum fw_status status = routed_reach_init(&network->reaches[i], river, i, options);
        if (status == FW_BAD_INPUT)
            snprintf(fault_out->text, sizeof fault_out->text,
                     "reach '%s': section: no depth at which it carries %g m3/s (with head-room) and widens upwards",
                     river->reaches[i].id, options->largest_discharge_m3s);
        if (status != FW_OK)
            return status;
    }
    return FW_OK;
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
        network->state_offset[i] = take(layout, routed_reach_state_count(reach), members);
        most_stops = reach->stop_count > most_stops ? reach->stop_count : most_stops;
        most_cells = reach->cell_count > most_cells ? reach->cell_count : most_cells;
    }
    layout->head_m3 = take(layout, river->reach_count, members);
    layout->foot_m3 = take(layout, river->reach_count, members);
    layout->gauge = take(layout, river->gauge_count * network->ring_count, members);
    layout->side = take(layout, river->side_inflow_count, members);
    layout->point = take(layout, river->point_count, members);

    network->blocks = room_for(network->group_count * layout->count, sizeof *network->blocks);
    network->side_m3 = room_for(river->side_inflow_count * members, sizeof *network->side_m3);
    network->stop_m3 = room_for(most_stops * members, sizeof *network->stop_m3);
    network->implicit_m3 = room_for(members, sizeof *network->implicit_m3);
    network->passing_m3 = room_for(members, sizeof *network->passing_m3);
    network->lateral_m3 = room_for(most_cells, sizeof *network->lateral_m3);
    bool is_short = network->blocks == NULL || network->side_m3 == NULL || network->stop_m3 == NULL ||
                    network->implicit_m3 == NULL || network->passing_m3 == NULL || network->lateral_m3 == NULL;
    return is_short ? FW_NO_MEMORY : FW_OK;
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
    status = make_order(network, fault_out);
    if (status == FW_OK)
        status = make_reaches(network, options, fault_out);
    if (status != FW_OK)
        goto cleanup;
    make_lists(network);
    place_points(network);
    place_delays(network);
    status = allocate_values(network);
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
    free(network->reaches);
    free(network->order);
    free(network->gauge_of_head);
    free(network->first_above);
    free(network->next_above);
    free(network->first_point);
    free(network->next_point);
    free(network->state_offset);
    free(network->points);
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

/* --- routing ---------------------------------------------------------------------------------------------------- */

static struct routed_flows flows_of(const struct network *network)
{
    return (struct routed_flows){
        .member_count = network->members_per_group,
        .side_m3 = network->side_m3,
        .stop_m3 = network->stop_m3,
        .implicit_m3 = network->implicit_m3,
        .passing_m3 = network->passing_m3,
        .lateral_m3 = network->lateral_m3,
    };
}

/* The side inflow's flow at the ring's newest slot. */
static double side_flow_m3s(const struct network *network, double *block, size_t side_index, size_t newest_slot,
                            size_t member)
{
    const struct network_side_inflow *side = &network->river.side_inflows[side_index];
    if (side->share_of_gauge == NETWORK_NONE)
        return side->constant_m3s;
    const struct delayed_share *delay = &network->delays[side_index];
    size_t later =
        newest_slot >= delay->whole ? newest_slot - delay->whole : newest_slot + network->ring_count - delay->whole;
    size_t earlier = later > 0 ? later - 1 : network->ring_count - 1;
    double gauge_flow = (1.0 - delay->part) * gauge_slot(network, block, side->share_of_gauge, later)[member] +
                        delay->part * gauge_slot(network, block, side->share_of_gauge, earlier)[member];
    return side->constant_m3s + side->share * gauge_flow;
}

/* Into the head of a reach, as passing volume. */
static void gather_head(const struct network *network, double *block, size_t reach_index, size_t newest_slot)
{
    size_t members = network->members_per_group;
    double *head = network->stop_m3;
    size_t gauge = network->gauge_of_head[reach_index];
    for (size_t member = 0; member < members; member++)
        head[member] = gauge == NETWORK_NONE
                           ? 0.0
                           : network->time_step_s * gauge_slot(network, block, gauge, newest_slot)[member];
    for (size_t above = network->first_above[reach_index]; above != NETWORK_NONE;
         above = network->next_above[above]) {
        const double *foot = block + network->layout.foot_m3 + above * members;
        for (size_t member = 0; member < members; member++)
            head[member] += foot[member];
    }
}

/* Takes what a step left at the stops of a reach to its head, foot and points. */
static void keep_flows(const struct network *network, double *block, size_t reach_index)
{
    const struct routed_reach *reach = &network->reaches[reach_index];
    size_t members = network->members_per_group;
    const double *stop_m3 = network->stop_m3;
    size_t row = members * sizeof *stop_m3;
    memcpy(block + network->layout.head_m3 + reach_index * members, stop_m3, row);
    memcpy(block + network->layout.foot_m3 + reach_index * members, stop_m3 + (reach->stop_count - 1) * members, row);
    for (size_t i = network->first_point[reach_index]; i != NETWORK_NONE; i = network->next_point[i]) {
        double *point = block + network->layout.point + i * members;
        double share = network->points[i].share_of_next;
        const double *here = stop_m3 + network->points[i].stop * members;
        const double *next = share > 0.0 ? here + members : here;
        for (size_t member = 0; member < members; member++)
            point[member] = ((1.0 - share) * here[member] + share * next[member]) / network->time_step_s;
    }
}

static void count_flows_outside(struct network *network, const double *block, size_t group, size_t reach_index)
{
    const double *head = block + network->layout.head_m3 + reach_index * network->members_per_group;
    const double *foot = block + network->layout.foot_m3 + reach_index * network->members_per_group;
    double largest = network->time_step_s * routed_reach_largest_discharge_m3s(&network->reaches[reach_index], group);
    size_t above = 0, below = 0;
    for (size_t member = 0; member < network->members_per_group; member++) {
        above += head[member] > largest || foot[member] > largest;
        below += foot[member] < 0.0;
    }
    network->steps_above_tables += above;
    network->steps_below_zero += below;
}

static bool is_inflow(double value)
{
    return value >= 0.0 && value <= NETWORK_LARGEST_INFLOW_M3S;
}

static void start_group(struct network *network, size_t group, const double inflow_m3s[])
{
    const struct network_river *river = &network->river;
    size_t members = network->members_per_group;
    double *block = block_of(network, group);
    struct routed_flows flows = flows_of(network);
    for (size_t gauge = 0; gauge < river->gauge_count; gauge++)
        for (size_t slot = 0; slot < network->ring_count; slot++)
            memcpy(gauge_slot(network, block, gauge, slot),
                   inflow_m3s + gauge * network->group_count * members + group * members, members * sizeof *block);
    for (size_t side = 0; side < river->side_inflow_count; side++)
        for (size_t member = 0; member < members; member++) {
            double flow = side_flow_m3s(network, block, side, 0, member);
            block[network->layout.side + side * members + member] = flow;
            network->side_m3[side * members + member] = network->time_step_s * flow;
        }
    for (size_t i = 0; i < river->reach_count; i++) {
        size_t reach_index = network->order[i];
        gather_head(network, block, reach_index, 0);
        routed_reach_start_steady(&network->reaches[reach_index], group, &flows,
                                  block + network->state_offset[reach_index]);
        keep_flows(network, block, reach_index);
    }
}

enum fw_status network_start_steady(struct network *network, const double inflow_m3s[])
{
    size_t count = network->river.gauge_count * network_member_count(network);
    for (size_t i = 0; i < count; i++)
        if (!is_inflow(inflow_m3s[i]))
            return FW_BAD_INPUT;
    for (size_t group = 0; group < network->group_count; group++)
        start_group(network, group, inflow_m3s);
    network->ring_at = 0;
    network->steps_above_tables = 0;
    network->steps_below_zero = 0;
    return FW_OK;
}

static bool are_inflows_in_order(const struct network *network, size_t step_count, const double inflow_m3s[])
{
    size_t members = network_member_count(network);
    for (size_t gauge = 0; gauge < network->river.gauge_count; gauge++) {
        const double *series = inflow_m3s + gauge * (step_count + 1) * members;
        for (size_t i = 0; i < (step_count + 1) * members; i++)
            if (!is_inflow(series[i]))
                return false;
        for (size_t group = 0; group < network->group_count; group++) {
            const double *present = gauge_slot(network, block_of(network, group), gauge, network->ring_at);
            for (size_t member = 0; member < network->members_per_group; member++)
                if (series[group * network->members_per_group + member] != present[member])
                    return false;
        }
    }
    return true;
}

/* One step of one group. `inflow_m3s` points at the new inflows of the group's first member at gauge 0. */
static enum fw_status step_group(struct network *network, size_t group, size_t newest_slot, const double inflow_m3s[],
                                 size_t gauge_stride)
{
    const struct network_river *river = &network->river;
    size_t members = network->members_per_group;
    double *block = block_of(network, group);
    struct routed_flows flows = flows_of(network);
    for (size_t gauge = 0; gauge < river->gauge_count; gauge++)
        memcpy(gauge_slot(network, block, gauge, newest_slot), inflow_m3s + gauge * gauge_stride,
               members * sizeof *block);
    for (size_t side = 0; side < river->side_inflow_count; side++)
        for (size_t member = 0; member < members; member++) {
            double *flow = block + network->layout.side + side * members + member;
            double flow_new = side_flow_m3s(network, block, side, newest_slot, member);
            network->side_m3[side * members + member] = 0.5 * network->time_step_s * (*flow + flow_new);
            *flow = flow_new;
        }
    for (size_t i = 0; i < river->reach_count; i++) {
        size_t reach_index = network->order[i];
        gather_head(network, block, reach_index, newest_slot);
        enum fw_status status = routed_reach_step(&network->reaches[reach_index], group, &flows,
                                                  block + network->state_offset[reach_index]);
        if (status != FW_OK)
            return status;
        keep_flows(network, block, reach_index);
        count_flows_outside(network, block, group, reach_index);
    }
    return FW_OK;
}

/* [point][step][member] of one group, from the present. */
static void give_points(const struct network *network, size_t group, size_t step, size_t step_count,
                        double point_discharge_m3s[])
{
    size_t members = network->members_per_group;
    size_t all_members = network_member_count(network);
    const double *present = block_of(network, group) + network->layout.point;
    for (size_t point = 0; point < network->river.point_count; point++)
        memcpy(point_discharge_m3s + (point * (step_count + 1) + step) * all_members + group * members,
               present + point * members, members * sizeof *present);
}

enum fw_status network_advance(struct network *network, size_t step_count, const double inflow_m3s[],
                               double point_discharge_m3s[])
{
    size_t all_members = network_member_count(network);
    if (!are_inflows_in_order(network, step_count, inflow_m3s))
        return FW_BAD_INPUT;
    size_t slot = network->ring_at;
    /* groups outermost: one group's cells and tables stay in the nearest cache over all steps */
    for (size_t group = 0; group < network->group_count; group++) {
        const double *group_inflow = inflow_m3s + group * network->members_per_group;
        give_points(network, group, 0, step_count, point_discharge_m3s);
        slot = network->ring_at;
        for (size_t step = 1; step <= step_count; step++) {
            slot = slot + 1 < network->ring_count ? slot + 1 : 0;
            enum fw_status status =
                step_group(network, group, slot, group_inflow + step * all_members, (step_count + 1) * all_members);
            if (status != FW_OK)
                return status;
            give_points(network, group, step, step_count, point_discharge_m3s);
        }
    }
    network->ring_at = slot;
    return FW_OK;
}

/* --- questions -------------------------------------------------------------------------------------------------- */

size_t network_member_count(const struct network *network)
{
    return network->group_count * network->members_per_group;
}

size_t network_cell_count(const struct network *network, size_t reach_index)
{
    return network->reaches[reach_index].cell_count;
}

size_t network_steps_above_tables(const struct network *network)
{
    return network->steps_above_tables;
}

size_t network_steps_below_zero(const struct network *network)
{
    return network->steps_below_zero;
}

static double rated_stage_m(const struct network_stage_rating *rating, double discharge_m3s)
{
    const double *discharge = rating->discharge_m3s;
    const double *stage = rating->stage_m;
    size_t row = 0;
    if (discharge_m3s <= discharge[0])
        return stage[0];
    while (row + 2 < rating->row_count && discharge[row + 1] < discharge_m3s)
        row++;
    return stage[row] +
           (discharge_m3s - discharge[row]) * ((stage[row + 1] - stage[row]) / (discharge[row + 1] - discharge[row]));
}

double network_point_stage_m(const struct network *network, size_t point_index, size_t member_index,
                             double discharge_m3s)
{
    const struct network_point *point = &network->river.points[point_index];
    if (point->stage_rating.row_count > 0)
        return rated_stage_m(&point->stage_rating, discharge_m3s);
    const struct routed_reach *reach = &network->reaches[point->reach_index];
    double factor = network->roughness_factors[member_index / network->members_per_group];
    return flow_curve_depth_m(&reach->curve, discharge_m3s * factor / sqrt(reach->source->slope_m_per_m));
}

double network_volume_m3(const struct network *network, size_t member_index)
{
    size_t members = network->members_per_group;
    size_t group = member_index / members;
    size_t member = member_index % members;
    const double *block = block_of(network, group);
    double volume = 0.0;
    for (size_t i = 0; i < network->river.reach_count; i++)
        volume +=
            routed_reach_volume_m3(&network->reaches[i], group, members, member, block + network->state_offset[i],
                                   block[network->layout.head_m3 + i * members + member],
                                   block[network->layout.foot_m3 + i * members + member]);
    return volume;
}

static void summarise_flow(const struct routed_reach *reach, double roughness_factor, double discharge_m3s,
                           struct network_reach_flow *flow_out)
{
    double slope = reach->source->slope_m_per_m;
    double discharge_per_conveyance = sqrt(slope) / roughness_factor;
    struct flow_curve_place place;
    flow_curve_at(&reach->curve, discharge_m3s / discharge_per_conveyance, &place);
    double celerity = place.conveyance_slope_m_s * discharge_per_conveyance;
    *flow_out = (struct network_reach_flow){
        .discharge_m3s = discharge_m3s,
        .depth_m = place.depth_m,
        .top_width_m = place.top_width_m,
        .velocity_m_s = discharge_m3s / place.area_m2,
        .celerity_m_s = celerity,
        .travel_time_s = reach->source->length_m / celerity,
        .diffusivity_m2_s =
            flow_curve_diffusivity_m2_s(discharge_m3s, place.area_m2, place.top_width_m, celerity, slope),
        .courant_number = celerity * reach->time_step_s / reach->cell_m,
    };
}

enum fw_status network_reach_summary(const struct network *network, size_t reach_index, double roughness_factor,
                                     size_t flow_count, const double discharge_m3s[],
                                     struct network_reach_steps *steps_out, struct network_reach_flow flow_out[])
{
    if (reach_index >= network->river.reach_count || !(roughness_factor > 0.0) || !isfinite(roughness_factor))
        return FW_BAD_INPUT;
    for (size_t i = 0; i < flow_count; i++)
        if (!(discharge_m3s[i] > 0.0) || !isfinite(discharge_m3s[i]))
            return FW_BAD_INPUT;
    const struct routed_reach *reach = &network->reaches[reach_index];
    *steps_out = (struct network_reach_steps){reach->cell_count, reach->cell_m, reach->time_step_s};
    for (size_t i = 0; i < flow_count; i++)
        summarise_flow(reach, roughness_factor, discharge_m3s[i], &flow_out[i]);
    return FW_OK;
}
