/* SPDX-License-Identifier: MIT */
/*
 * Which method each reach of a network gets. Floods are gathered downstream; levels that something below holds up are
 * followed upstream, from reach to reach, as long as they are felt.
 */
#include <math.h>
#include <stdlib.h>

#include "engine/network_internal.h"

enum { LEVELS = 3 }; /* flows of a flood at which backwater is looked at: its base, its middle, its peak */

struct head_levels { /* depths at the head of a reach, steady flow */
    double depth_m[LEVELS];
};

/* --- floods, from the gauges down --------------------------------------------------------------------------------- */

static void add_flood(struct method_flood *sum, const struct method_flood *more, double share)
{
    sum->base_m3s += share * more->base_m3s;
    sum->peak_m3s += share * more->peak_m3s;
    sum->rise_s = fmin(sum->rise_s, more->rise_s);
}

static void add_sides(const struct network_river *river, const struct network_options *options, size_t reach_index,
                      struct method_flood *flood)
{
    for (size_t i = 0; i < river->side_inflow_count; i++) {
        const struct network_side_inflow *side = &river->side_inflows[i];
        if (side->reach_index != reach_index)
            continue;
        flood->base_m3s += side->constant_m3s;
        flood->peak_m3s += side->constant_m3s;
        if (side->share_of_gauge != NETWORK_NONE && options->gauge_floods[side->share_of_gauge].rise_s > 0.0)
            add_flood(flood, &options->gauge_floods[side->share_of_gauge], side->share);
    }
}

static const struct method_flood unknown_flood = {0.0, 0.0, 0.0};

/* At the head of a reach: the gauge's, which knows the water from above, if it is known; else the sum of what flows in. */
static struct method_flood head_flood(const struct network *network, const struct network_options *options,
                                      size_t reach_index)
{
    const struct network_river *river = &network->river;
    size_t node = river->reaches[reach_index].from_node;
    size_t gauge = network_gauge_at(river, node);
    struct method_flood sum = {0.0, 0.0, INFINITY};
    if (gauge != NETWORK_NONE && (options->gauge_floods[gauge].rise_s > 0.0 || !network_gauge_is_inner(river, gauge)))
        return options->gauge_floods[gauge];
    for (size_t above = 0; above < river->reach_count; above++)
        if (river->reaches[above].to_node == node)
            add_flood(&sum, &network->choices[above].flood, 1.0);
    return sum.rise_s > 0.0 ? sum : unknown_flood; /* one that is not known makes the sum so */
}

static void gather_floods(struct network *network, const struct network_options *options)
{
    for (size_t i = 0; i < network->river.reach_count; i++) {
        size_t reach = network->order[i];
        struct method_flood *flood = &network->choices[reach].flood;
        *flood = options->gauge_floods != NULL ? head_flood(network, options, reach) : unknown_flood;
        if (flood->rise_s > 0.0)
            add_sides(&network->river, options, reach, flood);
    }
}

/* --- paths -------------------------------------------------------------------------------------------------------- */

/* From the head that is farthest upstream to the outlet; what a gauge in mid-river will say later comes down all of it too. */
static void measure_paths(struct network *network)
{
    const struct network_river *river = &network->river;
    struct method_choice *choices = network->choices;
    for (size_t i = 0; i < river->reach_count; i++) { /* down to each foot */
        size_t reach = network->order[i];
        size_t node = river->reaches[reach].from_node;
        double longest_m = 0.0;
        for (size_t above = 0; above < river->reach_count; above++)
            if (river->reaches[above].to_node == node)
                longest_m = fmax(longest_m, choices[above].path_length_m);
        choices[reach].path_length_m = longest_m + river->reaches[reach].length_m;
    }
    for (size_t i = river->reach_count; i-- > 0;) { /* and what is below */
        size_t reach = network->order[i];
        for (size_t below = network_reach_from(river, river->reaches[reach].to_node); below != NETWORK_NONE;
             below = network_reach_from(river, river->reaches[below].to_node))
            choices[reach].path_length_m += river->reaches[below].length_m;
    }
}

/* --- levels, from the outlets up ---------------------------------------------------------------------------------- */

static double level_flow_m3s(const struct method_flood *flood, int level)
{
    double share = (double)level / (LEVELS - 1);
    return fmax((1.0 - share) * flood->base_m3s + share * flood->peak_m3s, 1e-3 * flood->peak_m3s);
}

/* Depth at the foot at one of the flows; NAN: nothing says. */
static double foot_depth_m(const struct network *network, size_t reach_index, int level,
                           const struct head_levels levels[])
{
    const struct network_reach *reach = &network->river.reaches[reach_index];
    size_t below = network_reach_from(&network->river, reach->to_node);
    if (reach->outlet_depth_m > 0.0)
        return reach->outlet_depth_m;
    double below_m = below == NETWORK_NONE ? -(double)INFINITY : levels[below].depth_m[level] - reach->foot_drop_m;
    if (reach->foot_structure != NULL)
        return stage_structure_depth_above_m(reach->foot_structure,
                                             level_flow_m3s(&network->choices[reach_index].flood, level), below_m);
    return below == NETWORK_NONE ? (double)NAN : below_m;
}

/* How far the foot is raised above normal, at worst, and the levels at the head that follow. */
static double follow_levels(const struct network *network, size_t reach_index, struct head_levels levels[])
{
    const struct network_reach *reach = &network->river.reaches[reach_index];
    const struct method_flood *flood = &network->choices[reach_index].flood;
    double worst_share = 0.0;
    for (int level = 0; level < LEVELS; level++) {
        double flow_m3s = level_flow_m3s(flood, level);
        double foot_m = foot_depth_m(network, reach_index, level, levels);
        double normal_m =
            flow_curve_depth_m(&network->reaches[reach_index].curve, flow_m3s / sqrt(reach->slope_m_per_m));
        levels[reach_index].depth_m[level] = normal_m;
        if (!(flow_m3s > 0.0) || !(foot_m > normal_m))
            continue;
        worst_share = fmax(worst_share, foot_m / normal_m - 1.0);
        levels[reach_index].depth_m[level] = method_backwater_depth_m(reach->section, reach->slope_m_per_m,
                                                                      reach->length_m, flow_m3s, normal_m, foot_m);
    }
    return worst_share;
}

enum fw_status network_choose_methods(struct network *network, const struct network_options *options)
{
    const struct network_river *river = &network->river;
    struct head_levels *levels = calloc(river->reach_count, sizeof *levels);
    if (levels == NULL)
        return FW_NO_MEMORY;
    gather_floods(network, options);
    measure_paths(network);
    for (size_t i = river->reach_count; i-- > 0;) {
        size_t reach = network->order[i];
        struct network_reach *source = &network->river_reaches[reach];
        struct method_flood flood = network->choices[reach].flood;
        size_t below = network_reach_from(river, source->to_node);
        const struct method_reach described = {
            .curve = &network->reaches[reach].curve,
            .length_m = source->length_m,
            .slope_m_per_m = source->slope_m_per_m,
            .is_level_held = network_reach_has_held_foot(source),
            .has_structure = network_reach_has_control(source),
            .path_length_m = network->choices[reach].path_length_m,
            .has_control = below != NETWORK_NONE && network_method_is_full(river->reaches[below].method),
            .raise_share = follow_levels(network, reach, levels),
        };
        struct method_choice *choice = &network->choices[reach];
        method_choose(&described, &flood, choice);
        if (source->method != NETWORK_AUTO) {
            choice->method = source->method;
            choice->reason = METHOD_STATED;
        }
        source->method = choice->method;
    }
    free(levels);
    return FW_OK;
}

void network_reach_choice(const struct network *network, size_t reach_index, struct method_choice *choice_out)
{
    *choice_out = network->choices[reach_index];
}
