/* SPDX-License-Identifier: MIT */
#include "engine/network_internal.h"

#include <math.h>
#include <stdbool.h>
#include <string.h>

static const double farthest_level_m = 1e4;

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
    double gauge_flow =
        (1.0 - delay->part) * network_gauge_slot(network, block, side->share_of_gauge, later)[member] +
        delay->part * network_gauge_slot(network, block, side->share_of_gauge, earlier)[member];
    return side->constant_m3s + side->share * gauge_flow;
}

static bool is_gauged_at_head(const struct network *network, size_t reach_index)
{
    size_t gauge = network->gauge_of_head[reach_index];
    return gauge != NETWORK_NONE && network_has_inner_gauge(network, gauge);
}

/* Comes to the head of a reach, as passing volume; what comes from its own tree left out. */
static void gather_head(const struct network *network, double *block, size_t reach_index, size_t newest_slot)
{
    size_t members = network->members_per_group;
    double *head = network->stop_m3;
    size_t gauge = network->gauge_of_head[reach_index];
    bool is_fed_from_outside = gauge != NETWORK_NONE && !network_has_inner_gauge(network, gauge);
    for (size_t member = 0; member < members; member++)
        head[member] = is_fed_from_outside
                           ? network->time_step_s * network_gauge_slot(network, block, gauge, newest_slot)[member]
                           : 0.0;
    for (size_t above = network->first_above[reach_index]; above != NETWORK_NONE;
         above = network->next_above[above]) {
        if (network->tree_of_reach[above] != NETWORK_NONE &&
            network->tree_of_reach[above] == network->tree_of_reach[reach_index])
            continue;
        const double *foot = block + network->layout.foot_m3 + above * members;
        for (size_t member = 0; member < members; member++)
            head[member] += foot[member];
    }
}

/*
 * At the foot of the full equations water may run back for a while (a front that rings, a pool that fills). The head
 * below then takes nothing, and what ran back is kept from what comes next.
 */
static void hold_head(const struct network *network, double *block, size_t reach_index, bool is_start)
{
    size_t members = network->members_per_group;
    double *lent = block + network->layout.lent_m3 + reach_index * members;
    double *lent_before = block + network->layout.lent_before_m3 + reach_index * members;
    const double *given = is_gauged_at_head(network, reach_index)
                              ? block + network->layout.given + network->gauge_of_head[reach_index] * members
                              : NULL;
    for (size_t member = 0; member < members; member++) {
        lent_before[member] = is_start ? 0.0 : lent[member];
        if (given != NULL && !isnan(given[member]) && !is_start)
            continue; /* what was measured goes on as it is */
        double come = network->stop_m3[member] + lent_before[member];
        network->stop_m3[member] = come > 0.0 ? come : 0.0;
        lent[member] = is_start || come > 0.0 ? 0.0 : come;
    }
}

/* What was measured at the head goes on in place of what came. */
static void replace_head(const struct network *network, const double *block, size_t reach_index)
{
    if (!is_gauged_at_head(network, reach_index))
        return;
    size_t members = network->members_per_group;
    const double *given = block + network->layout.given + network->gauge_of_head[reach_index] * members;
    for (size_t member = 0; member < members; member++)
        if (!isnan(given[member]))
            network->stop_m3[member] = network->time_step_s * given[member];
}

/* Takes what a step left at the stops of a reach to its head, foot and points. */
static void keep_flows(const struct network *network, double *block, size_t reach_index)
{
    const struct routed_reach *reach = &network->reaches[reach_index];
    bool has_depths = network->tree_of_reach[reach_index] != NETWORK_NONE;
    size_t members = network->members_per_group;
    const double *stop_m3 = network->stop_m3;
    size_t row = members * sizeof *stop_m3;
    memcpy(block + network->layout.head_m3 + reach_index * members, stop_m3, row);
    memcpy(block + network->layout.foot_m3 + reach_index * members, stop_m3 + (reach->stop_count - 1) * members, row);
    for (size_t i = network->first_point[reach_index]; i != NETWORK_NONE; i = network->next_point[i]) {
        double *point = block + network->layout.point + i * members;
        double *depth = block + network->layout.depth + i * members;
        double share = network->points[i].share_of_next;
        size_t here = network->points[i].stop * members;
        size_t next = share > 0.0 ? here + members : here;
        for (size_t member = 0; member < members; member++) {
            point[member] =
                ((1.0 - share) * stop_m3[here + member] + share * stop_m3[next + member]) / network->time_step_s;
            depth[member] = has_depths ? (1.0 - share) * network->stop_depth_m[here + member] +
                                             share * network->stop_depth_m[next + member]
                                       : (double)NAN;
        }
    }
}

static double largest_discharge_m3s(const struct network *network, size_t group, size_t reach_index)
{
    const struct routed_reach *reach = &network->reaches[reach_index];
    if (network->tree_of_reach[reach_index] == NETWORK_NONE)
        return routed_reach_largest_discharge_m3s(reach, group);
    return reach->curve.conveyance_m3s[reach->curve.count - 1] * sqrt(reach->source->slope_m_per_m) /
           network->roughness_factors[group];
}

static void count_flows_outside(struct network *network, const double *block, size_t group, size_t reach_index)
{
    const double *head = block + network->layout.head_m3 + reach_index * network->members_per_group;
    const double *foot = block + network->layout.foot_m3 + reach_index * network->members_per_group;
    bool may_turn = network->tree_of_reach[reach_index] != NETWORK_NONE;
    double largest = network->time_step_s * largest_discharge_m3s(network, group, reach_index);
    size_t above = 0, below = 0;
    for (size_t member = 0; member < network->members_per_group; member++) {
        above += head[member] > largest || foot[member] > largest;
        below += foot[member] < 0.0 && !may_turn;
    }
    network->steps_above_tables += above;
    network->steps_below_zero += below;
}

/* By the depths computed where the full equations rule, else by the flow that fills the survey. */
static void count_levels_above_survey(const struct network *network, double *block, size_t group, size_t reach_index,
                                      bool is_start)
{
    const struct routed_reach *reach = &network->reaches[reach_index];
    size_t members = network->members_per_group, last = (reach->stop_count - 1) * members;
    double *count = block + network->layout.above_survey + reach_index * members;
    bool has_depths = network->tree_of_reach[reach_index] != NETWORK_NONE;
    const double *values = has_depths ? network->stop_depth_m : network->stop_m3;
    double most = has_depths ? reach->survey_top_m
                             : network->time_step_s * reach->survey_conveyance_m3s *
                                   sqrt(reach->source->slope_m_per_m) / network->roughness_factors[group];
    for (size_t member = 0; member < members; member++) {
        bool is_above = values[member] > most || values[last + member] > most;
        count[member] = (is_start ? 0.0 : count[member]) + (is_above ? 1.0 : 0.0);
    }
}

/* The heads of a tree, and then all of it at once, when its outlet's turn comes. */
static void move_tree(struct network *network, size_t group, double *block, struct routed_tree *tree,
                      size_t newest_slot, bool is_start)
{
    size_t members = network->members_per_group;
    size_t outlet = tree->reach_index[tree->branch_count - 1];
    double *state = block + network->state_offset[outlet];
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        size_t reach_index = tree->reach_index[branch];
        gather_head(network, block, reach_index, newest_slot);
        hold_head(network, block, reach_index, is_start);
        for (size_t member = 0; member < members; member++)
            tree->inflow_m3s[branch * members + member] = network->stop_m3[member] / network->time_step_s;
        if (is_gauged_at_head(network, reach_index))
            memcpy(tree->gauged_m3s + branch * members,
                   block + network->layout.given + network->gauge_of_head[reach_index] * members,
                   members * sizeof *block);
    }
    const struct network_reach *last = &network->river.reaches[outlet];
    if (last->has_outlet_level)
        memcpy(tree->given_depth_m, block + network->layout.level + last->outlet_level * members,
               members * sizeof *block);
    if (is_start)
        routed_tree_start_steady(tree, group, network->side_m3, state);
    else
        routed_tree_step(tree, group, network->side_m3, state);
    for (size_t branch = 0; branch < tree->branch_count; branch++) {
        size_t reach_index = tree->reach_index[branch];
        routed_tree_read_stops(tree, group, branch, &network->reaches[reach_index], state, network->stop_m3,
                               network->stop_depth_m);
        keep_flows(network, block, reach_index);
        count_levels_above_survey(network, block, group, reach_index, is_start);
        if (!is_start)
            count_flows_outside(network, block, group, reach_index);
    }
}

/* What gauges in mid-river measured, against what was routed there; and what they are now for those who follow them. */
static void keep_gauges(const struct network *network, double *block, size_t newest_slot, bool is_start)
{
    const struct network_river *river = &network->river;
    size_t members = network->members_per_group;
    for (size_t gauge = 0; gauge < river->gauge_count; gauge++) {
        if (!network_has_inner_gauge(network, gauge))
            continue;
        bool goes_on = network_reach_from(river, river->gauge_node[gauge]) != NETWORK_NONE;
        const double *given = block + network->layout.given + gauge * members;
        double *slot = network_gauge_slot(network, block, gauge, newest_slot);
        double *brought_m3s = block + network->layout.brought_m3s + gauge * members;
        double *brought_m3 = block + network->layout.brought_m3 + gauge * members;
        for (size_t member = 0; member < members; member++) {
            double routed_m3 = 0.0;
            for (size_t i = network->first_above_gauge[gauge]; i != NETWORK_NONE; i = network->next_above[i])
                routed_m3 += block[network->layout.foot_m3 + i * members + member];
            double routed = routed_m3 / network->time_step_s;
            double brought = isnan(given[member]) || !goes_on ? 0.0 : given[member] - routed;
            slot[member] = isnan(given[member]) ? fmax(routed, 0.0) : given[member];
            brought_m3[member] =
                is_start ? 0.0 : brought_m3[member] + 0.5 * network->time_step_s * (brought_m3s[member] + brought);
            brought_m3s[member] = brought;
        }
    }
}

/* A gauge's flow as it is given; where nothing was measured, until it is routed, what it was in `last_m3s`. */
static void take_gauge(const struct network *network, double *block, size_t gauge, size_t slot,
                       const double inflow_m3s[], const double last_m3s[])
{
    size_t members = network->members_per_group;
    double *newest = network_gauge_slot(network, block, gauge, slot);
    memcpy(block + network->layout.given + gauge * members, inflow_m3s, members * sizeof *block);
    for (size_t member = 0; member < members; member++)
        newest[member] = isnan(inflow_m3s[member]) ? last_m3s[member] : inflow_m3s[member];
}

static bool is_inflow(const struct network *network, size_t gauge, double value)
{
    return (value >= 0.0 && value <= NETWORK_LARGEST_INFLOW_M3S) ||
           (isnan(value) && network_has_inner_gauge(network, gauge));
}

static bool are_levels(const struct network *network, size_t count, const double level_m[])
{
    for (size_t i = 0; level_m != NULL && i < network->river.level_count * count; i++)
        if (!(fabs(level_m[i]) < farthest_level_m))
            return false;
    return true;
}

static void take_levels(const struct network *network, double *block, const double level_m[], size_t level_stride)
{
    size_t members = network->members_per_group;
    for (size_t level = 0; level_m != NULL && level < network->river.level_count; level++)
        memcpy(block + network->layout.level + level * members, level_m + level * level_stride,
               members * sizeof *block);
}

static void take_sides(struct network *network, double *block, size_t newest_slot, bool is_start)
{
    size_t members = network->members_per_group;
    for (size_t side = 0; side < network->river.side_inflow_count; side++)
        for (size_t member = 0; member < members; member++) {
            double *flow = block + network->layout.side + side * members + member;
            double flow_new = side_flow_m3s(network, block, side, newest_slot, member);
            double flow_before = is_start ? flow_new : *flow;
            network->side_m3[side * members + member] = 0.5 * network->time_step_s * (flow_before + flow_new);
            *flow = flow_new;
        }
}

/* All reaches of one group, each after those that flow into it. */
static enum fw_status move_reaches(struct network *network, size_t group, double *block, size_t newest_slot,
                                   bool is_start)
{
    const struct network_river *river = &network->river;
    struct routed_flows flows = flows_of(network);
    for (size_t i = 0; i < river->reach_count; i++) {
        size_t reach_index = network->order[i];
        const struct routed_reach *reach = &network->reaches[reach_index];
        struct routed_tree *tree = network_tree_of(network, reach_index);
        double *state = block + network->state_offset[reach_index];
        enum fw_status status = FW_OK;
        if (tree != NULL) {
            if (network_is_outlet_of(tree, reach_index))
                move_tree(network, group, block, tree, newest_slot, is_start);
            continue;
        }
        gather_head(network, block, reach_index, newest_slot);
        hold_head(network, block, reach_index, is_start);
        replace_head(network, block, reach_index);
        if (is_start)
            routed_reach_start_steady(reach, group, &flows, state);
        else
            status = routed_reach_step(reach, group, &flows, state);
        if (status != FW_OK)
            return status;
        keep_flows(network, block, reach_index);
        count_levels_above_survey(network, block, group, reach_index, is_start);
        if (!is_start)
            count_flows_outside(network, block, group, reach_index);
    }
    keep_gauges(network, block, newest_slot, is_start);
    return FW_OK;
}

/* In every slot, until what follows a gauge in mid-river knows what is routed there. */
static enum fw_status start_group(struct network *network, size_t group, const double inflow_m3s[],
                                  const double level_m[])
{
    size_t members = network->members_per_group, all_members = network_member_count(network);
    double *block = network_block_of(network, group);
    enum fw_status status = FW_OK;
    for (size_t gauge = 0; gauge < network->river.gauge_count; gauge++) {
        memset(network_gauge_slot(network, block, gauge, 0), 0, members * sizeof *block);
        take_gauge(network, block, gauge, 0, inflow_m3s + gauge * all_members + group * members,
                   network_gauge_slot(network, block, gauge, 0));
    }
    if (level_m != NULL)
        take_levels(network, block, level_m + group * members, all_members);
    for (size_t pass = 0; pass <= network->inner_share_count && status == FW_OK; pass++) {
        for (size_t gauge = 0; gauge < network->river.gauge_count; gauge++)
            for (size_t slot = 1; slot < network->ring_count; slot++)
                memcpy(network_gauge_slot(network, block, gauge, slot), network_gauge_slot(network, block, gauge, 0),
                       members * sizeof *block);
        take_sides(network, block, 0, true);
        status = move_reaches(network, group, block, 0, true);
    }
    for (size_t gauge = 0; gauge < network->river.gauge_count; gauge++)
        for (size_t slot = 1; slot < network->ring_count; slot++)
            memcpy(network_gauge_slot(network, block, gauge, slot), network_gauge_slot(network, block, gauge, 0),
                   members * sizeof *block);
    return status;
}

enum fw_status network_start_steady_at(struct network *network, const double inflow_m3s[], const double level_m[])
{
    size_t members = network_member_count(network);
    for (size_t i = 0; i < network->river.gauge_count * members; i++)
        if (!is_inflow(network, i / members, inflow_m3s[i]))
            return FW_BAD_INPUT;
    if (!are_levels(network, members, level_m))
        return FW_BAD_INPUT;
    for (size_t group = 0; group < network->group_count; group++) {
        enum fw_status status = start_group(network, group, inflow_m3s, level_m);
        if (status != FW_OK)
            return status;
    }
    network->ring_at = 0;
    network->steps_above_tables = 0;
    network->steps_below_zero = 0;
    return FW_OK;
}

enum fw_status network_start_steady(struct network *network, const double inflow_m3s[])
{
    return network_start_steady_at(network, inflow_m3s, NULL);
}

static bool are_inflows_in_order(const struct network *network, size_t step_count, const double inflow_m3s[])
{
    size_t members = network_member_count(network);
    for (size_t gauge = 0; gauge < network->river.gauge_count; gauge++) {
        const double *series = inflow_m3s + gauge * (step_count + 1) * members;
        for (size_t i = 0; i < (step_count + 1) * members; i++)
            if (!is_inflow(network, gauge, series[i]))
                return false;
        for (size_t group = 0; group < network->group_count && !network_has_inner_gauge(network, gauge); group++) {
            const double *present =
                network_gauge_slot(network, network_block_of(network, group), gauge, network->ring_at);
            for (size_t member = 0; member < network->members_per_group; member++)
                if (series[group * network->members_per_group + member] != present[member])
                    return false;
        }
    }
    return true;
}

struct step_input { /* of the group's first member at gauge and level 0, at the new time */
    const double *inflow_m3s, *level_m;
    size_t stride; /* to the next gauge or level */
};

static enum fw_status step_group(struct network *network, size_t group, size_t newest_slot,
                                 const struct step_input *input)
{
    size_t slot_before = newest_slot > 0 ? newest_slot - 1 : network->ring_count - 1;
    double *block = network_block_of(network, group);
    for (size_t gauge = 0; gauge < network->river.gauge_count; gauge++)
        take_gauge(network, block, gauge, newest_slot, input->inflow_m3s + gauge * input->stride,
                   network_gauge_slot(network, block, gauge, slot_before));
    take_levels(network, block, input->level_m, input->stride);
    take_sides(network, block, newest_slot, false);
    return move_reaches(network, group, block, newest_slot, false);
}

/* [point][step][member] of one group, from the present. Stages may be NULL. */
static void give_points(const struct network *network, size_t group, size_t step, size_t step_count,
                        double point_discharge_m3s[], double point_stage_m[])
{
    size_t members = network->members_per_group;
    size_t all_members = network_member_count(network);
    const double *block = network_block_of(network, group);
    for (size_t point = 0; point < network->river.point_count; point++) {
        const double *flow = block + network->layout.point + point * members;
        const double *depth = block + network->layout.depth + point * members;
        size_t at = (point * (step_count + 1) + step) * all_members + group * members;
        memcpy(point_discharge_m3s + at, flow, members * sizeof *flow);
        bool is_rated =
            network->river.points[point].stage_rating.row_count > 0 || network->river.points[point].structure != NULL;
        for (size_t member = 0; point_stage_m != NULL && member < members; member++)
            point_stage_m[at + member] =
                is_rated || isnan(depth[member])
                    ? network_point_stage_m(network, point, group * members + member, flow[member])
                    : depth[member];
    }
}

enum fw_status network_advance_at(struct network *network, size_t step_count, const double inflow_m3s[],
                                  const double level_m[], double point_discharge_m3s[], double point_stage_m[])
{
    size_t all_members = network_member_count(network);
    if (!are_inflows_in_order(network, step_count, inflow_m3s) ||
        !are_levels(network, (step_count + 1) * all_members, level_m))
        return FW_BAD_INPUT;
    size_t slot = network->ring_at;
    /* groups outermost: one group's cells and tables stay in the nearest cache over all steps */
    for (size_t group = 0; group < network->group_count; group++) {
        size_t first_member = group * network->members_per_group;
        give_points(network, group, 0, step_count, point_discharge_m3s, point_stage_m);
        slot = network->ring_at;
        for (size_t step = 1; step <= step_count; step++) {
            size_t at = step * all_members + first_member;
            const struct step_input input = {.inflow_m3s = inflow_m3s + at,
                                             .level_m = level_m == NULL ? NULL : level_m + at,
                                             .stride = (step_count + 1) * all_members};
            slot = slot + 1 < network->ring_count ? slot + 1 : 0;
            enum fw_status status = step_group(network, group, slot, &input);
            if (status != FW_OK)
                return status;
            give_points(network, group, step, step_count, point_discharge_m3s, point_stage_m);
        }
    }
    network->ring_at = slot;
    return FW_OK;
}

enum fw_status network_advance_with_stage(struct network *network, size_t step_count, const double inflow_m3s[],
                                          double point_discharge_m3s[], double point_stage_m[])
{
    return network_advance_at(network, step_count, inflow_m3s, NULL, point_discharge_m3s, point_stage_m);
}

enum fw_status network_advance(struct network *network, size_t step_count, const double inflow_m3s[],
                               double point_discharge_m3s[])
{
    return network_advance_at(network, step_count, inflow_m3s, NULL, point_discharge_m3s, NULL);
}
