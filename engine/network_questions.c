/* SPDX-License-Identifier: MIT */
#include "engine/network_internal.h"

#include <math.h>

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

size_t network_steps_above_survey(const struct network *network, size_t reach_index)
{
    size_t members = network->members_per_group;
    double sum = 0.0;
    for (size_t group = 0; group < network->group_count; group++)
        for (size_t member = 0; member < members; member++)
            sum += network_block_of(network, group)[network->layout.above_survey + reach_index * members + member];
    return (size_t)sum;
}

size_t network_steps_replaced(const struct network *network)
{
    size_t count = 0;
    for (size_t i = 0; i < network->tree_count; i++)
        count += network->trees[i].counts.replaced;
    return count;
}

static double rated_stage_m(const struct network_stage_rating *rating, double discharge_m3s)
{
    const double *discharge = rating->discharge_m3s;
    const double *stage = rating->stage_m;
    size_t row = 0;
    size_t last = rating->row_count - 2;
    if (discharge_m3s <= discharge[0])
        return stage[0];
    while (row < last) { /* the first row whose next is not below the flow */
        size_t middle = row + (last - row) / 2;
        if (discharge[middle + 1] < discharge_m3s)
            row = middle + 1;
        else
            last = middle;
    }
    return stage[row] +
           (discharge_m3s - discharge[row]) * ((stage[row + 1] - stage[row]) / (discharge[row + 1] - discharge[row]));
}

double network_point_stage_m(const struct network *network, size_t point_index, size_t member_index,
                             double discharge_m3s)
{
    const struct network_point *point = &network->river.points[point_index];
    if (point->stage_rating.row_count > 0)
        return rated_stage_m(&point->stage_rating, discharge_m3s);
    if (point->structure != NULL)
        return rated_stage_m(&network->structure_ratings[point_index * network->group_count +
                                                         member_index / network->members_per_group],
                             discharge_m3s);
    const struct routed_reach *reach = &network->reaches[point->reach_index];
    double factor = network->roughness_factors[member_index / network->members_per_group];
    return flow_curve_depth_m(&reach->curve, discharge_m3s * factor / sqrt(reach->source->slope_m_per_m));
}

double network_volume_m3(const struct network *network, size_t member_index)
{
    size_t members = network->members_per_group;
    size_t group = member_index / members;
    size_t member = member_index % members;
    double *block = network_block_of(network, group);
    double volume = 0.0;
    for (size_t i = 0; i < network->river.reach_count; i++) {
        const struct routed_tree *tree = network_tree_of(network, i);
        double *state = block + network->state_offset[i];
        if (tree == NULL)
            volume += routed_reach_volume_m3(&network->reaches[i], group, members, member, state,
                                             block[network->layout.head_m3 + i * members + member],
                                             block[network->layout.foot_m3 + i * members + member]);
        else if (network_is_outlet_of(tree, i))
            volume += routed_tree_volume_m3(tree, group, member, state);
        /* what ran back out of a head and has not come again; flows are summed by the trapezoidal rule */
        volume += 0.5 * (block[network->layout.lent_m3 + i * members + member] +
                         block[network->layout.lent_before_m3 + i * members + member]);
    }
    return volume;
}

double network_brought_m3(const struct network *network, size_t gauge_index, size_t member_index)
{
    size_t members = network->members_per_group;
    const double *block = network_block_of(network, member_index / members);
    return block[network->layout.brought_m3 + gauge_index * members + member_index % members];
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
