/* SPDX-License-Identifier: MIT */
/*
 * One reach below one gauge, routed through the network: what many routing tests and the bench begin with. Any fault
 * fails the test. Include <cmocka.h> with its companions first.
 */
#ifndef FOREWATER_TESTS_ENGINE_ROUTE_ONE_REACH_H
#define FOREWATER_TESTS_ENGINE_ROUTE_ONE_REACH_H

#include <math.h>
#include <stdlib.h>

#include "engine/network.h"

typedef double (*flood_fn)(double t_s, const void *parameters);

/* base + rise [(t/tp) e^(1 - t/tp)]^sharpness: smooth, with its peak at tp. */
struct gamma_flood {
    double base_m3s, rise_m3s, peak_s, sharpness;
};

static inline double gamma_flood_m3s(double t_s, const void *parameters)
{
    const struct gamma_flood *flood = parameters;
    double x = t_s / flood->peak_s;
    return t_s <= 0.0 ? flood->base_m3s : flood->base_m3s + flood->rise_m3s * pow(x * exp(1.0 - x), flood->sharpness);
}

struct one_reach {
    const struct section *section;
    double slope_m_per_m, length_m;
    enum network_method method;
    double time_step_s;
    size_t cell_count; /* 0: chosen */
    double largest_m3s;
    flood_fn flood;
    const void *flood_parameters;
    double duration_s;
    double side_m3s; /* constant, enters at 0.41 of the length */
    bool starts_dry;
};

struct one_reach_result { /* the caller frees the arrays */
    size_t step_count;
    double time_step_s;
    double *inflow_m3s;  /* step_count + 1 */
    double *outflow_m3s; /* step_count + 1 */
    double volume_start_m3, volume_end_m3;
    size_t cell_count;
    double cell_m;
    size_t steps_below_zero;
};

static inline double trapezoidal_volume_m3(size_t step_count, const double flow_m3s[], double time_step_s)
{
    double sum = 0.0;
    for (size_t i = 0; i < step_count; i++)
        sum += 0.5 * time_step_s * (flow_m3s[i] + flow_m3s[i + 1]);
    return sum;
}

static inline struct one_reach_result route_one_reach(const struct one_reach *one)
{
    const double factor = 1.0;
    const size_t gauge_node = 0;
    struct network_reach reach = {.id = "reach",
                                  .from_node = 0,
                                  .to_node = 1,
                                  .length_m = one->length_m,
                                  .slope_m_per_m = one->slope_m_per_m,
                                  .section = one->section,
                                  .method = one->method};
    struct network_side_inflow side = {
        .at_m = 0.41 * one->length_m, .share_of_gauge = NETWORK_NONE, .constant_m3s = one->side_m3s};
    struct network_point foot = {.id = "foot", .at_m = one->length_m};
    struct network_river river = {.node_count = 2,
                                  .gauge_count = 1,
                                  .gauge_node = &gauge_node,
                                  .reach_count = 1,
                                  .reaches = &reach,
                                  .side_inflow_count = one->side_m3s > 0.0 ? 1 : 0,
                                  .side_inflows = &side,
                                  .point_count = 1,
                                  .points = &foot};
    struct network_options options = {.time_step_s = one->time_step_s,
                                      .fixed_cell_count = one->cell_count,
                                      .group_count = 1,
                                      .roughness_factors = &factor,
                                      .members_per_group = 1,
                                      .largest_discharge_m3s = one->largest_m3s};
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);

    struct one_reach_result result = {.step_count = (size_t)ceil(one->duration_s / one->time_step_s - 1e-9),
                                      .time_step_s = one->time_step_s};
    result.inflow_m3s = malloc((result.step_count + 1) * sizeof(double));
    result.outflow_m3s = malloc((result.step_count + 1) * sizeof(double));
    assert_non_null(result.inflow_m3s);
    assert_non_null(result.outflow_m3s);
    for (size_t i = 0; i <= result.step_count; i++)
        result.inflow_m3s[i] = one->flood((double)i * one->time_step_s, one->flood_parameters);
    if (one->starts_dry)
        result.inflow_m3s[0] = 0.0;
    else
        assert_int_equal(network_start_steady(network, result.inflow_m3s), FW_OK);
    result.volume_start_m3 = network_volume_m3(network, 0);
    assert_int_equal(network_advance(network, result.step_count, result.inflow_m3s, result.outflow_m3s), FW_OK);
    result.volume_end_m3 = network_volume_m3(network, 0);
    result.cell_count = network_cell_count(network, 0);
    result.cell_m = one->length_m / (double)result.cell_count;
    result.steps_below_zero = network_steps_below_zero(network);
    network_destroy(network);
    return result;
}

static inline void one_reach_result_clear(struct one_reach_result *result)
{
    free(result->inflow_m3s);
    free(result->outflow_m3s);
}

struct flood_peak {
    double discharge_m3s, time_s;
};

/* By the parabola through the three highest samples. */
static inline struct flood_peak flood_peak_of(size_t count, const double flow_m3s[], double time_step_s)
{
    size_t top = 0;
    for (size_t i = 1; i < count; i++)
        if (flow_m3s[i] > flow_m3s[top])
            top = i;
    struct flood_peak peak = {flow_m3s[top], (double)top * time_step_s};
    if (top == 0 || top + 1 >= count)
        return peak;
    double before = flow_m3s[top - 1];
    double after = flow_m3s[top + 1];
    double bend = before - 2.0 * flow_m3s[top] + after;
    if (bend < 0.0) {
        double shift = 0.5 * (before - after) / bend;
        peak.time_s += shift * time_step_s;
        peak.discharge_m3s -= 0.25 * (before - after) * shift;
    }
    return peak;
}

/* Nash and Sutcliffe (1970): 1 is perfect, 0 no better than the mean. */
static inline double efficiency(size_t count, const double expected[], const double routed[])
{
    double mean = 0.0, square = 0.0, spread = 0.0;
    for (size_t i = 0; i < count; i++)
        mean += expected[i] / (double)count;
    for (size_t i = 0; i < count; i++) {
        square += (routed[i] - expected[i]) * (routed[i] - expected[i]);
        spread += (expected[i] - mean) * (expected[i] - mean);
    }
    return 1.0 - square / spread;
}

#endif
