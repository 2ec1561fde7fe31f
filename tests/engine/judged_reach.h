/* SPDX-License-Identifier: MIT */
/*
 * One random reach by the engine, held against what the independent judge says of it. Any fault fails the test.
 * Include <cmocka.h> with its companions first.
 */
#ifndef FOREWATER_TESTS_ENGINE_JUDGED_REACH_H
#define FOREWATER_TESTS_ENGINE_JUDGED_REACH_H

#include <math.h>
#include <stdlib.h>

#include "engine/method.h"
#include "engine/network.h"
#include "tests/independent/judged_flood.h"

struct reach_errors {
    double peak; /* of the discharge, relative */
    double peak_late_s;
    double efficiency;                                            /* Nash and Sutcliffe */
    double level_late_s[JUDGED_MARKS], flow_late_s[JUDGED_MARKS]; /* first passages; negative is early */
    double level_off_m[JUDGED_MARKS];                             /* when the judge says that it passes the mark */
    double level_m;                                               /* of the highest level */
    size_t cell_count, replaced;
    struct method_choice choice;
};

static inline double value_at(size_t count, const double values[], double step_s, double t_s)
{
    size_t step = (size_t)(t_s / step_s);
    if (step + 1 >= count)
        return values[count - 1];
    return values[step] + (t_s / step_s - (double)step) * (values[step + 1] - values[step]);
}

static inline double efficiency_against(const struct judged_flood *flood, size_t count, const double flow_m3s[],
                                        double step_s)
{
    double mean = 0.0, error = 0.0, spread = 0.0;
    for (size_t i = 0; i < count; i++)
        mean += value_at(flood->count, flood->discharge_m3s, flood->step_s, (double)i * step_s) / (double)count;
    for (size_t i = 0; i < count; i++) {
        double truth = value_at(flood->count, flood->discharge_m3s, flood->step_s, (double)i * step_s);
        error += (flow_m3s[i] - truth) * (flow_m3s[i] - truth);
        spread += (truth - mean) * (truth - mean);
    }
    return 1.0 - error / spread;
}

/* By a method, or by the automatic choice, which knows the flood. */
static inline struct reach_errors route_random_reach(const struct random_reach *reach,
                                                     const struct judged_flood *flood, enum network_method method,
                                                     double step_s)
{
    const double factor = 1.0;
    const size_t gauge_node = 0;
    const struct network_reach routed = {.id = "reach",
                                         .from_node = 0,
                                         .to_node = 1,
                                         .length_m = reach->length_m,
                                         .slope_m_per_m = reach->slope_m_per_m,
                                         .section = &reach->section,
                                         .method = method};
    const struct network_point foot = {.id = "foot", .at_m = reach->length_m};
    const struct network_river river = {.node_count = 2,
                                        .gauge_count = 1,
                                        .gauge_node = &gauge_node,
                                        .reach_count = 1,
                                        .reaches = &routed,
                                        .point_count = 1,
                                        .points = &foot};
    const struct method_flood gauge_flood = {.base_m3s = reach->flood.base_m3s,
                                             .peak_m3s = reach->flood.base_m3s + reach->flood.rise_m3s,
                                             .rise_s = reach->rise_s};
    const struct network_options options = {.gauge_floods = &gauge_flood,
                                            .time_step_s = step_s,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = reach->flood.base_m3s + reach->flood.rise_m3s};
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("reach %zu: network_create: %s", reach->number, fault.text);
    size_t count = (size_t)((double)(flood->count - 1) * flood->step_s / step_s) + 1;
    double *values = calloc(3 * count, sizeof *values);
    assert_non_null(values);
    double *inflow = values, *flow = values + count, *level = values + 2 * count;
    for (size_t i = 0; i < count; i++)
        inflow[i] = random_flood_m3s((double)i * step_s, &reach->flood);
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
    assert_int_equal(network_advance_with_stage(network, count - 1, inflow, flow, level), FW_OK);

    struct judged_peak peak = judged_peak_of(count, flow, step_s);
    struct reach_errors errors = {.peak = peak.value / flood->flow.value - 1.0,
                                  .peak_late_s = peak.time_s - flood->flow.time_s,
                                  .efficiency = efficiency_against(flood, count, flow, step_s),
                                  .level_m = judged_peak_of(count, level, step_s).value - flood->level.value,
                                  .cell_count = network_cell_count(network, 0),
                                  .replaced = network_steps_replaced(network)};
    network_reach_choice(network, 0, &errors.choice);
    for (size_t i = 0; i < JUDGED_MARKS; i++) {
        errors.level_late_s[i] =
            judged_passage_s(count, level, step_s, flood->level_mark_m[i]) - flood->level_passage_s[i];
        errors.level_off_m[i] = value_at(count, level, step_s, flood->level_passage_s[i]) - flood->level_mark_m[i];
        errors.flow_late_s[i] =
            judged_passage_s(count, flow, step_s, flood->flow_mark_m3s[i]) - flood->flow_passage_s[i];
    }
    assert_int_equal(network_steps_below_zero(network), 0);
    free(values);
    network_destroy(network);
    return errors;
}

#endif
