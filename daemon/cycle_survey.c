/* SPDX-License-Identifier: MIT */
/* Does the water of a forecast stand above what was surveyed of the river? */
#include "daemon/cycle_steps.h"

#include <math.h>

/* The flow that fills the survey of a reach, over a bed so much rougher than given; INFINITY: it has no upper end. */
static double filling_m3s(const struct network_reach *reach, double roughness_factor)
{
    double top_m = section_survey_top_m(reach->section);
    return isfinite(top_m)
               ? section_normal_discharge_m3s(reach->section, reach->slope_m_per_m, top_m) / roughness_factor
               : (double)INFINITY;
}

/* Any forecast run's value, [step + 1][member], above a limit of its roughness group, from a step on. */
static bool is_above(const struct cycle *cycle, const double values[], size_t from_step, const double limit[])
{
    for (size_t step = from_step; step <= cycle->step_count; step++)
        for (size_t i = 0; i < cycle->forecast_column_count; i++) {
            size_t column = cycle->forecast_columns[i];
            if (values[step * cycle->member_count + column] > limit[column / CYCLE_FUTURES])
                return true;
        }
    return false;
}

/* By its level, or where that is from a rating of its own, by its flow. */
static bool is_point_above(const struct cycle *cycle, size_t point, size_t from_step)
{
    const struct network_point *place = &cycle->settings->river.points[point];
    const struct network_reach *reach = &cycle->settings->river.reaches[place->reach_index];
    bool is_rated = place->stage_rating.row_count > 0;
    const double *values = is_rated ? cycle_discharge_m3s(cycle, point, 0) : cycle_stage_m(cycle, point, 0);
    double limit[sizeof cycle->settings->roughness_factors / sizeof *cycle->settings->roughness_factors];
    for (size_t group = 0; group < cycle->settings->roughness_factor_count; group++)
        limit[group] = is_rated ? filling_m3s(reach, cycle->settings->roughness_factors[group])
                                : section_survey_top_m(reach->section);
    return is_above(cycle, values, from_step, limit);
}

/* Over the roughest of the beds. */
static bool is_gauge_above(const struct cycle *cycle, size_t gauge, size_t from_step)
{
    const struct settings *settings = cycle->settings;
    size_t reach = network_reach_from(&settings->river, settings->river.gauge_node[gauge]);
    if (reach == NETWORK_NONE)
        return false;
    double limit = filling_m3s(&settings->river.reaches[reach],
                               settings->roughness_factors[settings->roughness_factor_count - 1]);
    for (size_t step = from_step; step <= cycle->step_count; step++)
        for (size_t future = 0; future < ASSUMED_FORECAST_COUNT; future++)
            if (cycle_inflow_m3s(cycle, gauge, future, step) > limit)
                return true;
    return false;
}

bool cycle_is_above_survey(const struct cycle *cycle, size_t point, size_t from_step)
{
    const struct network_river *river = &cycle->settings->river;
    const struct network_point *place = &river->points[point];
    for (size_t gauge = 0; gauge < cycle->settings->gauge_count; gauge++)
        if (cycle->is_above[gauge] && is_gauge_above(cycle, gauge, from_step))
            return true;
    for (size_t other = 0; other < cycle->settings->point_count; other++) {
        const struct network_point *above = &river->points[other];
        bool is_on_the_way = above->reach_index == place->reach_index
                                 ? above->at_m <= place->at_m
                                 : network_leads_to(river, river->reaches[above->reach_index].to_node,
                                                    river->reaches[place->reach_index].from_node);
        if (is_on_the_way && is_point_above(cycle, other, from_step))
            return true;
    }
    return false;
}
