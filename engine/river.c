/* SPDX-License-Identifier: MIT */
#include "engine/river.h"

#include <math.h>
#include <stdarg.h>
#include <stdbool.h>
#include <stdio.h>

#include "engine/method.h"

static const double longest_delay_s = 10.0 * 86400.0;
/* Below these a number is a mistake, and what is divided by it overflows. */
static const double shortest_reach_m = 0.1, flattest_slope = 1e-9, shortest_step_s = 1e-3, smallest_flow_m3s = 1e-6;
static const double most_cells = 10000.0;

__attribute__((format(printf, 2, 3))) static enum fw_status fault(struct network_fault *fault_out, const char *format,
                                                                  ...)
{
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(fault_out->text, sizeof fault_out->text, format, arguments);
    va_end(arguments);
    return FW_BAD_INPUT;
}

static bool is_not_negative(double value)
{
    return value >= 0.0 && isfinite(value);
}

static const char *held_foot(const struct network_reach *reach)
{
    return reach->has_outlet_level ? "outlet_level" : "outlet_depth_m";
}

static enum fw_status check_reach(const struct network_river *river, size_t reach_index,
                                  struct network_fault *fault_out)
{
    const struct network_reach *reach = &river->reaches[reach_index];
    const char *section_fault = NULL;
    if (reach->id == NULL)
        return fault(fault_out, "reaches[%zu]: has no id", reach_index);
    if (reach->from_node >= river->node_count)
        return fault(fault_out, "reach '%s': from_node %zu, but there are %zu nodes", reach->id, reach->from_node,
                     river->node_count);
    if (reach->to_node >= river->node_count)
        return fault(fault_out, "reach '%s': to_node %zu, but there are %zu nodes", reach->id, reach->to_node,
                     river->node_count);
    if (!(reach->length_m >= shortest_reach_m && reach->length_m <= 1e7))
        return fault(fault_out, "reach '%s': length_m %g: expected %g to 1e7", reach->id, reach->length_m,
                     shortest_reach_m);
    if (!(reach->slope_m_per_m >= flattest_slope && reach->slope_m_per_m <= 1.0))
        return fault(fault_out,
                     "reach '%s': slope_m_per_m %g: expected a fall downstream, more than 0 (%g) and at most 1",
                     reach->id, reach->slope_m_per_m, flattest_slope);
    if (!is_not_negative(reach->cell_m))
        return fault(fault_out, "reach '%s': cell_m %g: expected 0 (chosen) or more", reach->id, reach->cell_m);
    if (reach->cell_m > 0.0 && reach->length_m / reach->cell_m > most_cells)
        return fault(fault_out, "reach '%s': cell_m %g makes %.0f cells, more than %.0f", reach->id, reach->cell_m,
                     reach->length_m / reach->cell_m, most_cells);
    if ((unsigned)reach->method > NETWORK_AUTO)
        return fault(fault_out, "reach '%s': method %d is none that is known", reach->id, (int)reach->method);
    if (!is_not_negative(reach->outlet_depth_m) || reach->outlet_depth_m > 1e3)
        return fault(fault_out, "reach '%s': outlet_depth_m %g: expected 0 (none) to 1000", reach->id,
                     reach->outlet_depth_m);
    if (reach->has_outlet_level && reach->outlet_level >= river->level_count)
        return fault(fault_out, "reach '%s': outlet_level %zu, but there are %zu levels", reach->id,
                     reach->outlet_level, river->level_count);
    if (reach->has_outlet_level && reach->outlet_depth_m > 0.0)
        return fault(fault_out, "reach '%s': outlet_depth_m %g: is held, but outlet_level %zu is given too",
                     reach->id, reach->outlet_depth_m, reach->outlet_level);
    if (network_reach_has_held_foot(reach) && !network_method_is_full(reach->method) && reach->method != NETWORK_AUTO)
        return fault(fault_out, "reach '%s': %s: a held level needs method auto, dynamic or diffusive", reach->id,
                     held_foot(reach));
    if (network_reach_has_held_foot(reach) && network_reach_from(river, reach->to_node) != NETWORK_NONE)
        return fault(fault_out, "reach '%s': %s: a level is held at the foot of a last reach only", reach->id,
                     held_foot(reach));
    if (reach->foot_structure != NULL && stage_structure_check(reach->foot_structure) != FW_OK)
        return fault(fault_out,
                     "reach '%s': foot_structure: tables must rise from 0 flow at the sill, shares lie in 0 to 1",
                     reach->id);
    if (!is_not_negative(reach->foot_drop_m) || reach->foot_drop_m > 1e3)
        return fault(fault_out, "reach '%s': foot_drop_m %g: expected 0 (none) to 1000", reach->id,
                     reach->foot_drop_m);
    if (network_reach_has_control(reach) && !network_method_is_full(reach->method) && reach->method != NETWORK_AUTO)
        return fault(fault_out, "reach '%s': %s: needs method auto, dynamic or diffusive", reach->id,
                     reach->foot_structure != NULL ? "foot_structure" : "foot_drop_m");
    if (network_reach_has_control(reach) && network_reach_has_held_foot(reach))
        return fault(fault_out, "reach '%s': %s: stands where a level is held too; expected a short reach between",
                     reach->id, reach->foot_structure != NULL ? "foot_structure" : "foot_drop_m");
    if (reach->section == NULL)
        return fault(fault_out, "reach '%s': has no section", reach->id);
    if (section_check(reach->section, &section_fault) != FW_OK)
        return fault(fault_out, "reach '%s': section: %s", reach->id, section_fault);
    return FW_OK;
}

static enum fw_status check_side_inflow(const struct network_river *river, size_t side_index,
                                        struct network_fault *fault_out)
{
    const struct network_side_inflow *side = &river->side_inflows[side_index];
    if (side->reach_index >= river->reach_count)
        return fault(fault_out, "side_inflows[%zu]: reach_index %zu, but there are %zu reaches", side_index,
                     side->reach_index, river->reach_count);
    const struct network_reach *reach = &river->reaches[side->reach_index];
    if (!is_not_negative(side->at_m) || side->at_m > reach->length_m)
        return fault(fault_out, "reach '%s': side_inflows[%zu]: at_m %g: expected 0 to the reach's length %g",
                     reach->id, side_index, side->at_m, reach->length_m);
    if (!is_not_negative(side->constant_m3s) || side->constant_m3s > NETWORK_LARGEST_INFLOW_M3S)
        return fault(fault_out, "reach '%s': side_inflows[%zu]: constant_m3s %g: expected 0 to %g", reach->id,
                     side_index, side->constant_m3s, NETWORK_LARGEST_INFLOW_M3S);
    if (side->share_of_gauge == NETWORK_NONE)
        return FW_OK;
    if (side->share_of_gauge >= river->gauge_count)
        return fault(fault_out, "reach '%s': side_inflows[%zu]: share_of_gauge %zu, but there are %zu gauges",
                     reach->id, side_index, side->share_of_gauge, river->gauge_count);
    if (network_gauge_is_inner(river, side->share_of_gauge) &&
        network_leads_to(river, reach->to_node, river->gauge_node[side->share_of_gauge]))
        return fault(
            fault_out,
            "reach '%s': side_inflows[%zu]: share_of_gauge %zu stands downstream: its flow would feed itself",
            reach->id, side_index, side->share_of_gauge);
    if (!is_not_negative(side->share) || side->share > 1e3)
        return fault(fault_out, "reach '%s': side_inflows[%zu]: share %g: expected 0 to 1000", reach->id, side_index,
                     side->share);
    if (!is_not_negative(side->delay_s) || side->delay_s > longest_delay_s)
        return fault(fault_out, "reach '%s': side_inflows[%zu]: delay_s %g: expected 0 to %g", reach->id, side_index,
                     side->delay_s, longest_delay_s);
    return FW_OK;
}

static enum fw_status check_stage_rating(const struct network_point *point, struct network_fault *fault_out)
{
    const struct network_stage_rating *rating = &point->stage_rating;
    if (point->structure != NULL && rating->row_count > 0)
        return fault(fault_out, "point '%s': structure: has a stage_rating beside it: expected one of them",
                     point->id);
    if (point->structure != NULL && stage_structure_check(point->structure) != FW_OK)
        return fault(fault_out,
                     "point '%s': structure: tables must rise from 0 flow at the sill, shares lie in 0 to 1",
                     point->id);
    if (rating->row_count == 0)
        return FW_OK;
    if (rating->row_count == 1 || rating->discharge_m3s == NULL || rating->stage_m == NULL)
        return fault(fault_out, "point '%s': stage_rating: needs at least two rows", point->id);
    for (size_t i = 0; i < rating->row_count; i++) {
        double discharge = rating->discharge_m3s[i];
        double stage = rating->stage_m[i];
        if (!is_not_negative(discharge) || (i > 0 && discharge <= rating->discharge_m3s[i - 1]))
            return fault(fault_out,
                         "point '%s': stage_rating: row %zu: discharge_m3s %g: expected to rise from row to row",
                         point->id, i, discharge);
        if (!isfinite(stage) || (i > 0 && stage < rating->stage_m[i - 1]))
            return fault(fault_out, "point '%s': stage_rating: row %zu: stage_m %g: expected never to fall",
                         point->id, i, stage);
    }
    return FW_OK;
}

static enum fw_status check_point(const struct network_river *river, size_t point_index,
                                  struct network_fault *fault_out)
{
    const struct network_point *point = &river->points[point_index];
    if (point->id == NULL)
        return fault(fault_out, "points[%zu]: has no id", point_index);
    if (point->reach_index >= river->reach_count)
        return fault(fault_out, "point '%s': reach_index %zu, but there are %zu reaches", point->id,
                     point->reach_index, river->reach_count);
    const struct network_reach *reach = &river->reaches[point->reach_index];
    if (!is_not_negative(point->at_m) || point->at_m > reach->length_m)
        return fault(fault_out, "point '%s': at_m %g: expected 0 to the length %g of reach '%s'", point->id,
                     point->at_m, reach->length_m, reach->id);
    return check_stage_rating(point, fault_out);
}

/* Every gauge's flood, where any is stated; a rise of 0 says that this one's is not known. */
static enum fw_status check_floods(const struct network_river *river, const struct network_options *options,
                                   struct network_fault *fault_out)
{
    for (size_t i = 0; options->gauge_floods != NULL && i < river->gauge_count; i++) {
        const struct method_flood *flood = &options->gauge_floods[i];
        if (!(flood->rise_s >= 0.0)) /* endless: steady */
            return fault(fault_out, "gauge_floods[%zu]: rise_s %g: expected more than 0, or 0 (not known)", i,
                         flood->rise_s);
        if (flood->rise_s == 0.0)
            continue;
        if (!is_not_negative(flood->peak_m3s) || flood->peak_m3s > options->largest_discharge_m3s)
            return fault(fault_out, "gauge_floods[%zu]: peak_m3s %g: expected 0 to largest_discharge_m3s %g", i,
                         flood->peak_m3s, options->largest_discharge_m3s);
        if (!is_not_negative(flood->base_m3s) || flood->base_m3s > flood->peak_m3s)
            return fault(fault_out, "gauge_floods[%zu]: base_m3s %g: expected 0 to the peak %g", i, flood->base_m3s,
                         flood->peak_m3s);
    }
    return FW_OK;
}

static enum fw_status check_options(const struct network_options *options, struct network_fault *fault_out)
{
    if (!(options->time_step_s >= shortest_step_s && options->time_step_s <= 86400.0))
        return fault(fault_out, "options: time_step_s %g: expected %g to a day", options->time_step_s,
                     shortest_step_s);
    if ((double)options->fixed_cell_count > most_cells)
        return fault(fault_out, "options: fixed_cell_count %zu: expected 0 (chosen) to %.0f",
                     options->fixed_cell_count, most_cells);
    if (options->group_count == 0 || options->group_count > 100000 || options->roughness_factors == NULL)
        return fault(fault_out, "options: group_count %zu: expected 1 to 100000, with as many roughness factors",
                     options->group_count);
    for (size_t i = 0; i < options->group_count; i++)
        if (!(options->roughness_factors[i] >= 0.01 && options->roughness_factors[i] <= 100.0))
            return fault(fault_out, "options: roughness_factors[%zu] %g: expected 0.01 to 100", i,
                         options->roughness_factors[i]);
    if (options->members_per_group == 0 || options->members_per_group > 1000000 / options->group_count)
        return fault(fault_out,
                     "options: members_per_group %zu: expected at least 1, at most a million in all groups",
                     options->members_per_group);
    if (!(options->largest_discharge_m3s >= smallest_flow_m3s && options->largest_discharge_m3s <= 1e6))
        return fault(fault_out, "options: largest_discharge_m3s %g: expected %g to 1e6",
                     options->largest_discharge_m3s, smallest_flow_m3s);
    if (!is_not_negative(options->typical_peak_m3s) || options->typical_peak_m3s > options->largest_discharge_m3s ||
        (options->typical_peak_m3s > 0.0 && options->typical_peak_m3s < smallest_flow_m3s))
        return fault(fault_out, "options: typical_peak_m3s %g: expected 0 (none), or %g to largest_discharge_m3s %g",
                     options->typical_peak_m3s, smallest_flow_m3s, options->largest_discharge_m3s);
    return FW_OK;
}

enum fw_status river_check_values(const struct network_river *river, const struct network_options *options,
                                  struct network_fault *fault_out)
{
    enum fw_status status = check_options(options, fault_out);
    if (status == FW_OK)
        status = check_floods(river, options, fault_out);
    if (status == FW_OK && river->reach_count == 0)
        status = fault(fault_out, "the river has no reach");
    for (size_t i = 0; i < river->reach_count && status == FW_OK; i++)
        status = check_reach(river, i, fault_out);
    for (size_t i = 0; i < river->gauge_count && status == FW_OK; i++)
        if (river->gauge_node[i] >= river->node_count && river->gauge_node[i] != NETWORK_NONE)
            status = fault(fault_out, "gauge_node[%zu]: node %zu, but there are %zu nodes", i, river->gauge_node[i],
                           river->node_count);
    for (size_t i = 0; i < river->side_inflow_count && status == FW_OK; i++)
        status = check_side_inflow(river, i, fault_out);
    for (size_t i = 0; i < river->point_count && status == FW_OK; i++)
        status = check_point(river, i, fault_out);
    return status;
}

static enum fw_status check_gauges(const struct network_river *river, struct network_fault *fault_out)
{
    for (size_t i = 0; i < river->gauge_count; i++) {
        size_t node = river->gauge_node[i];
        if (node == NETWORK_NONE)
            continue;
        if (network_gauge_at(river, node) != i)
            return fault(fault_out, "gauge_node[%zu]: node %zu has gauge %zu already", i, node,
                         network_gauge_at(river, node));
        if (network_reach_from(river, node) == NETWORK_NONE && network_reach_into(river, node) == NETWORK_NONE)
            return fault(fault_out, "gauge_node[%zu]: no reach begins or ends at node %zu", i, node);
    }
    return FW_OK;
}

static enum fw_status check_nodes(const struct network_river *river, struct network_fault *fault_out)
{
    for (size_t node = 0; node < river->node_count; node++)
        if (network_reach_into(river, node) == NETWORK_NONE && network_reach_from(river, node) == NETWORK_NONE)
            return fault(fault_out, "node %zu: no reach begins or ends there", node);
    for (size_t i = 0; i < river->reach_count; i++) {
        const struct network_reach *reach = &river->reaches[i];
        size_t leaving = network_reach_from(river, reach->from_node);
        if (leaving != i)
            return fault(fault_out, "reach '%s': leaves node %zu, as reach '%s' does; a river does not fork",
                         reach->id, reach->from_node, river->reaches[leaving].id);
        if (network_reach_into(river, reach->from_node) == NETWORK_NONE &&
            network_gauge_at(river, reach->from_node) == NETWORK_NONE)
            return fault(fault_out,
                         "reach '%s': nothing flows into its head, node %zu: no gauge there, and no reach ends",
                         reach->id, reach->from_node);
    }
    return FW_OK;
}

enum fw_status river_order(const struct network_river *river, size_t order_out[], size_t waiting[],
                           struct network_fault *fault_out)
{
    size_t count = 0;
    enum fw_status status = check_gauges(river, fault_out);
    if (status == FW_OK)
        status = check_nodes(river, fault_out);
    if (status != FW_OK)
        return status;

    for (size_t node = 0; node < river->node_count; node++)
        waiting[node] = 0;
    for (size_t i = 0; i < river->reach_count; i++)
        waiting[river->reaches[i].to_node]++;
    for (size_t i = 0; i < river->reach_count; i++)
        if (network_reach_into(river, river->reaches[i].from_node) == NETWORK_NONE)
            order_out[count++] = i;
    for (size_t done = 0; done < count; done++) {
        size_t node = river->reaches[order_out[done]].to_node;
        size_t below = network_reach_from(river, node);
        if (--waiting[node] == 0 && below != NETWORK_NONE)
            order_out[count++] = below;
    }
    /* as nothing forks, only the reaches of a loop are left */
    for (size_t i = 0; i < river->reach_count && count < river->reach_count; i++)
        if (waiting[river->reaches[i].from_node] > 0)
            return fault(fault_out, "reach '%s': is part of a loop", river->reaches[i].id);
    return FW_OK;
}
