/* SPDX-License-Identifier: MIT */
/*
 * The horizon of measured water against the same definition in the independent judge (tests/independent/full_flow): the level at
 * a point moves by 2 cm between the two edges of an envelope that opens at t0. Rivers by the method that the automatic choice
 * takes, t0 on the steepest rise, at the peak and on the steepest fall.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>

#include "engine/horizon.h"
#include "engine/method.h"
#include "engine/network.h"
#include "tests/engine/route_one_reach.h"
#include "tests/independent/full_flow.h"

static const double TOLERANCE_M = 0.02;
static const double FELT_M = 1e-5;
enum { LOW, HIGH, EDGES, FLOWS = 64 };

struct river_case {
    const char *name;
    struct section section;
    double slope_m_per_m, length_m;
    struct gamma_flood flood;
    size_t judge_cells;
    double ahead_h; /* how far after t0 both are followed */
    enum network_method method;
};

static const struct river_case rivers[] = {
    {"steep: 20 m wide, S0 0.01, 20 km",
     {.shape = SECTION_RECTANGLE, .bottom_m = 20.0, .roughness_n = 0.04},
     0.01,
     20e3,
     {5.0, 95.0, 2.0 * 3600.0, 4.0},
     400,
     4.0,
     NETWORK_MUSKINGUM_CUNGE},
    {"trapezoid with a plain, S0 0.0024, 17.8 km",
     {.shape = SECTION_TRAPEZOID,
      .bottom_m = 14.0,
      .side_h_per_v = 2.0,
      .roughness_n = 0.038,
      .has_plain = true,
      .plain_above_m = 2.6,
      .plain_width_m = 80.0,
      .plain_roughness_n = 0.075},
     0.0024,
     17.8e3,
     {6.0, 80.0, 6.0 * 3600.0, 4.0},
     240,
     6.0,
     NETWORK_DYNAMIC},
    {"trapezoid, S0 0.004, 9.4 km",
     {.shape = SECTION_TRAPEZOID, .bottom_m = 14.0, .side_h_per_v = 2.0, .roughness_n = 0.038},
     0.004,
     9.4e3,
     {6.0, 80.0, 6.0 * 3600.0, 4.0},
     240,
     4.0,
     NETWORK_MUSKINGUM_CUNGE},
    {"flashy: 8 m channel 1.8 m deep, plains of 20 m, S0 0.003, 12 km",
     {.shape = SECTION_RECTANGLE,
      .bottom_m = 8.0,
      .roughness_n = 0.04,
      .has_plain = true,
      .plain_above_m = 1.8,
      .plain_width_m = 20.0,
      .plain_roughness_n = 0.07},
     0.003,
     12e3,
     {3.0, 57.0, 1.5 * 3600.0, 4.0},
     240,
     4.0,
     NETWORK_DYNAMIC},
    {"flat: 30 m wide, S0 0.0003, 20 km",
     {.shape = SECTION_RECTANGLE, .bottom_m = 30.0, .roughness_n = 0.035},
     3e-4,
     20e3,
     {30.0, 170.0, 10.0 * 3600.0, 4.0},
     200,
     8.0,
     NETWORK_DYNAMIC},
    {"published wave's river, S0 0.001, 40 km",
     {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035},
     1e-3,
     40e3,
     {100.0, 800.0, 12.0 * 3600.0, 16.0},
     200,
     8.0,
     NETWORK_DYNAMIC},
};

/* --- the envelope ------------------------------------------------------------------------------------------------- */

struct
    edge { /* the flood up to from_s, then a straight line of the flood's own fastest rise or fall; never below its base */
    const struct gamma_flood *flood;
    double from_s, rate_m3s2;
};

static double edge_m3s(double t_s, const void *parameters)
{
    const struct edge *edge = parameters;
    double flow_m3s = gamma_flood_m3s(fmin(t_s, edge->from_s), edge->flood);
    return fmax(edge->flood->base_m3s, flow_m3s + edge->rate_m3s2 * fmax(0.0, t_s - edge->from_s));
}

/* When the flood rises (sign 1) or falls (-1) fastest, and how fast, on a grid of the time steps. */
static double fastest_at_s(const struct gamma_flood *flood, double sign, double step_s, double *rate_out_m3s2)
{
    double at_s = 0.0;
    *rate_out_m3s2 = 0.0;
    for (double t_s = step_s; t_s < 4.0 * flood->peak_s; t_s += step_s) {
        double rate = sign * (gamma_flood_m3s(t_s + 1.0, flood) - gamma_flood_m3s(t_s - 1.0, flood)) / 2.0;
        if (rate > *rate_out_m3s2) {
            *rate_out_m3s2 = rate;
            at_s = t_s;
        }
    }
    return at_s;
}

/* --- the judge and the engine --------------------------------------------------------------------------------------- */

struct judged {
    double horizon_s;
    double felt_s; /* when the level first moves by FELT_M */
};

static double parting_s(const struct full_flow_result results[EDGES], double step_s, double tolerance_m)
{
    double before_m = 0.0;
    for (size_t i = 0; i < results[LOW].count; i++) {
        double apart_m = fabs(full_flow_depth_at(&results[HIGH], 0)[i] - full_flow_depth_at(&results[LOW], 0)[i]);
        if (apart_m > tolerance_m)
            return step_s * ((double)i - 1.0 + (tolerance_m - before_m) / (apart_m - before_m));
        before_m = apart_m;
    }
    return INFINITY;
}

static struct judged judge(const struct river_case *river, const struct edge edges[EDGES], double from_s)
{
    enum { OUTPUT_STEP_S = 15 };
    struct full_flow_result results[EDGES];
    for (size_t i = 0; i < EDGES; i++) {
        const struct full_flow_case full = {.section = &river->section,
                                            .slope_m_per_m = river->slope_m_per_m,
                                            .length_m = river->length_m,
                                            .cell_count = river->judge_cells,
                                            .largest_m3s = 3.0 * (river->flood.base_m3s + river->flood.rise_m3s),
                                            .duration_s = from_s + 3600.0 * river->ahead_h,
                                            .output_step_s = OUTPUT_STEP_S,
                                            .inflow = edge_m3s,
                                            .inflow_parameters = &edges[i]};
        if (!full_flow_run(&full, &results[i]))
            fail_msg("%s: the judge failed", river->name);
        assert_true(fabs(results[i].imbalance) < 1e-9);
    }
    const struct judged judged = {parting_s(results, OUTPUT_STEP_S, TOLERANCE_M) - from_s,
                                  parting_s(results, OUTPUT_STEP_S, FELT_M) - from_s};
    full_flow_result_clear(&results[LOW]);
    full_flow_result_clear(&results[HIGH]);
    return judged;
}

struct said {
    enum network_method method;
    double horizon_s, step_s;
    double not_before_s;
};

static struct said engine_horizon(const struct river_case *river, const struct edge edges[EDGES], double from_s,
                                  double step_s)
{
    const double factor = 1.0;
    const size_t gauge_node = 0;
    double rise_m3s2;
    fastest_at_s(&river->flood, 1.0, step_s, &rise_m3s2);
    const struct method_flood flood = {river->flood.base_m3s, river->flood.base_m3s + river->flood.rise_m3s,
                                       river->flood.rise_m3s / rise_m3s2};
    const struct network_reach reach = {.id = "reach",
                                        .to_node = 1,
                                        .length_m = river->length_m,
                                        .slope_m_per_m = river->slope_m_per_m,
                                        .section = &river->section,
                                        .method = NETWORK_AUTO};
    const struct network_point point = {.id = "foot", .at_m = river->length_m};
    const struct network_river tree = {.node_count = 2,
                                       .gauge_count = 1,
                                       .gauge_node = &gauge_node,
                                       .reach_count = 1,
                                       .reaches = &reach,
                                       .point_count = 1,
                                       .points = &point};
    const struct network_options options = {.time_step_s = step_s,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = EDGES,
                                            .largest_discharge_m3s = 3.0 * flood.peak_m3s,
                                            .gauge_floods = &flood};
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&tree, &options, &network, &fault) != FW_OK)
        fail_msg("%s: %s", river->name, fault.text);
    struct method_choice choice;
    network_reach_choice(network, 0, &choice);
    size_t count = (size_t)((from_s + 3600.0 * river->ahead_h) / step_s);
    double *flows = calloc(3 * (count + 1) * EDGES, sizeof *flows);
    assert_non_null(flows);
    double *point_m3s = flows + (count + 1) * EDGES, *stage_m = point_m3s + (count + 1) * EDGES;
    for (size_t step = 0; step <= count; step++)
        for (size_t edge = 0; edge < EDGES; edge++)
            flows[step * EDGES + edge] = edge_m3s((double)step * step_s, &edges[edge]);
    assert_int_equal(network_start_steady(network, flows), FW_OK);
    assert_int_equal(network_advance_with_stage(network, count, flows, point_m3s, stage_m), FW_OK);
    struct network_reach_steps steps;
    struct network_reach_flow uniform[FLOWS];
    double range_m3s[FLOWS];
    for (size_t i = 0; i < FLOWS;
         i++) /* from the base to what the upper edge has come to after the judge's whole run */
        range_m3s[i] = river->flood.base_m3s *
                       pow(edge_m3s(from_s + 3600.0 * river->ahead_h, &edges[HIGH]) / river->flood.base_m3s,
                           (double)i / (FLOWS - 1));
    assert_int_equal(network_reach_summary(network, 0, 1.0, FLOWS, range_m3s, &steps, uniform), FW_OK);
    double until_s = horizon_measured_until_s(count + 1, EDGES, stage_m + LOW, stage_m + HIGH, step_s, TOLERANCE_M);
    network_destroy(network);
    free(flows);
    return (struct said){choice.method, until_s - from_s, step_s,
                         horizon_not_felt_before_s(river->length_m, FLOWS, uniform)};
}

/* --- held against each other ------------------------------------------------------------------------------------------ */

static void the_horizon_is_the_judges_and_never_a_step_later(void **state)
{
    (void)state;
    static const char *const when[] = {"rise", "peak", "fall"};
    size_t faults = 0;
    print_message("%-64s %5s %9s %8s %7s %6s %6s %6s\n", "river", "t0", "judge/min", "engine", "off", "%", "bound",
                  "felt");
    for (size_t i = 0; i < sizeof rivers / sizeof *rivers; i++) {
        const struct river_case *river = &rivers[i];
        double rise_m3s2, fall_m3s2;
        fastest_at_s(&river->flood, 1.0, 60.0, &rise_m3s2);
        const struct method_flood flood = {river->flood.base_m3s, river->flood.base_m3s + river->flood.rise_m3s,
                                           river->flood.rise_m3s / rise_m3s2};
        double step_s = method_time_step_s(&flood, 300.0);
        double from_s[3] = {fastest_at_s(&river->flood, 1.0, step_s, &rise_m3s2), river->flood.peak_s,
                            fastest_at_s(&river->flood, -1.0, step_s, &fall_m3s2)};
        for (size_t k = 0; k < 3; k++) {
            const struct edge edges[EDGES] = {
                [LOW] = {&river->flood, from_s[k], -fall_m3s2}, [HIGH] = {&river->flood, from_s[k], rise_m3s2}};
            const struct judged judged = judge(river, edges, from_s[k]);
            double truth_s = judged.horizon_s;
            struct said said = engine_horizon(river, edges, from_s[k], step_s);
            double off_s = said.horizon_s - truth_s;
            bool is_full = network_method_is_full(said.method);
            double allowed_s = is_full ? fmax(180.0, 0.03 * truth_s) : 0.10 * truth_s;
            print_message("%-64s %5s %9.2f %8.2f %+7.2f %+6.1f %6.1f %6.1f%s\n", k == 0 ? river->name : "", when[k],
                          truth_s / 60.0, said.horizon_s / 60.0, off_s / 60.0, 100.0 * off_s / truth_s,
                          said.not_before_s / 60.0, judged.felt_s / 60.0, is_full ? "  full" : "");
            assert_true(isfinite(truth_s) && truth_s > 10.0 * step_s);
            assert_int_equal(said.method, river->method);
            /* the bound bounds: nothing is felt before it, in the judge or here */
            assert_true(said.not_before_s > 0.0 && said.not_before_s <= judged.felt_s);
            assert_true(said.not_before_s <= said.horizon_s);
            faults += fabs(off_s) <= allowed_s && off_s <= said.step_s ? 0 : 1;
        }
    }
    assert_int_equal(faults, 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_horizon_is_the_judges_and_never_a_step_later),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
