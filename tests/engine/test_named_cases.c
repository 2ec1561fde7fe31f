/* SPDX-License-Identifier: MIT */
/*
 * Rivers that one can name, by the method that the automatic choice takes, against the independent judge
 * (tests/independent/full_flow). Pass lines: peak within 0.3 %, its time within the larger of 1 min and half a step,
 * Nash-Sutcliffe efficiency at least 0.9998; on the steep river 0.5 % and 0.999.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>

#include "engine/method.h"
#include "engine/network.h"
#include "tests/engine/route_one_reach.h"
#include "tests/independent/full_flow.h"

struct named_case {
    const char *name;
    struct section section;
    double slope_m_per_m, length_m;
    double held_depth_m; /* 0: the river goes on */
    struct gamma_flood flood;
    double duration_h;
    size_t judge_cells;
    double peak_line, efficiency_line;
    double level_at_m;         /* where the level is judged too */
    enum method_reason reason; /* that the choice gives */
};

#define PUBLISHED                                                                                                    \
    {                                                                                                                \
        .shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035                                           \
    }
#define PUBLISHED_FLOOD                                                                                              \
    {                                                                                                                \
        100.0, 800.0, 24.0 * 3600.0, 16.0                                                                            \
    }
#define BACKWATER                                                                                                    \
    {                                                                                                                \
        .shape = SECTION_RECTANGLE, .bottom_m = 30.0, .roughness_n = 0.035                                           \
    }
#define BACKWATER_FLOOD                                                                                              \
    {                                                                                                                \
        30.0, 170.0, 10.0 * 3600.0, 4.0                                                                              \
    }

static const struct named_case cases[] = {
    {"steep: 20 m wide, S0 0.01, n 0.04, 20 km, 5 to 100 m3/s in 2 h",
     {.shape = SECTION_RECTANGLE, .bottom_m = 20.0, .roughness_n = 0.04},
     0.01,
     20e3,
     0.0,
     {5.0, 95.0, 2.0 * 3600.0, 4.0},
     8.0,
     400,
     0.005,
     0.999,
     20e3,
     METHOD_WITHIN_LIMIT},
    {"published wave, S0 0.002", PUBLISHED, 2e-3, 100e3, 0.0, PUBLISHED_FLOOD, 96.0, 200, 0.003, 0.9998, 100e3,
     METHOD_WITHIN_LIMIT},
    {"published wave, S0 0.001", PUBLISHED, 1e-3, 100e3, 0.0, PUBLISHED_FLOOD, 96.0, 200, 0.003, 0.9998, 100e3,
     METHOD_EARLY_LEVELS},
    {"published wave, S0 0.0005", PUBLISHED, 5e-4, 100e3, 0.0, PUBLISHED_FLOOD, 96.0, 200, 0.003, 0.9998, 100e3,
     METHOD_BEYOND_LIMIT},
    {"published wave, S0 0.00025", PUBLISHED, 2.5e-4, 100e3, 0.0, PUBLISHED_FLOOD, 96.0, 200, 0.003, 0.9998, 100e3,
     METHOD_BEYOND_LIMIT},
    {"flashy: 8 m channel 1.8 m deep, plains of 20 m, n 0.04/0.07, S0 0.003, 12 km, 3 to 60 m3/s in 90 min",
     {.shape = SECTION_RECTANGLE,
      .bottom_m = 8.0,
      .roughness_n = 0.04,
      .has_plain = true,
      .plain_above_m = 1.8,
      .plain_width_m = 20.0,
      .plain_roughness_n = 0.07},
     0.003,
     12e3,
     0.0,
     {3.0, 57.0, 1.5 * 3600.0, 4.0},
     9.0,
     480,
     0.003,
     0.9998,
     12e3,
     METHOD_BEYOND_LIMIT},
    {"backwater: 30 m wide, S0 0.0003, 20 km, 30 to 200 m3/s in 10 h, level held at 5.0 m", BACKWATER, 3e-4, 20e3,
     5.0, BACKWATER_FLOOD, 40.0, 200, 0.003, 0.9998, 12.3e3, METHOD_HELD_LEVEL},
    {"the same river, going on below", BACKWATER, 3e-4, 20e3, 0.0, BACKWATER_FLOOD, 40.0, 200, 0.003, 0.9998, 20e3,
     METHOD_BEYOND_LIMIT},
};
enum { CASE_COUNT = sizeof cases / sizeof *cases, PLACES = 2 };

/* The steepest rise of the flood is where its second derivative is nothing. */
static double rise_s_of(const struct gamma_flood *flood)
{
    double x = 1.0 - 1.0 / sqrt(flood->sharpness);
    return flood->peak_s / (flood->sharpness * pow(x * exp(1.0 - x), flood->sharpness) * (1.0 / x - 1.0));
}

struct routed {
    size_t count;
    double *inflow_m3s, *flow_m3s, *level_m; /* [place][count] the latter two */
    struct method_choice choice;
    size_t cell_count, replaced;
};

static struct routed route(const struct named_case *named, double step_s)
{
    const double factor = 1.0;
    const size_t gauge_node = 0;
    const struct network_reach reach = {.id = "reach",
                                        .to_node = 1,
                                        .length_m = named->length_m,
                                        .slope_m_per_m = named->slope_m_per_m,
                                        .section = &named->section,
                                        .method = NETWORK_AUTO,
                                        .outlet_depth_m = named->held_depth_m};
    const struct network_point points[PLACES] = {{.id = "foot", .at_m = named->length_m},
                                                 {.id = "level", .at_m = named->level_at_m}};
    const struct network_river river = {.node_count = 2,
                                        .gauge_count = 1,
                                        .gauge_node = &gauge_node,
                                        .reach_count = 1,
                                        .reaches = &reach,
                                        .point_count = PLACES,
                                        .points = points};
    const struct method_flood flood = {named->flood.base_m3s, named->flood.base_m3s + named->flood.rise_m3s,
                                       rise_s_of(&named->flood)};
    const struct network_options options = {.time_step_s = step_s,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = flood.peak_m3s,
                                            .gauge_floods = &flood};
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    struct routed routed = {.count = (size_t)lround(named->duration_h * 3600.0 / step_s) + 1};
    routed.inflow_m3s = calloc(routed.count, sizeof(double));
    routed.flow_m3s = calloc(PLACES * routed.count, sizeof(double));
    routed.level_m = calloc(PLACES * routed.count, sizeof(double));
    assert_true(routed.inflow_m3s != NULL && routed.flow_m3s != NULL && routed.level_m != NULL);
    for (size_t i = 0; i < routed.count; i++)
        routed.inflow_m3s[i] = gamma_flood_m3s((double)i * step_s, &named->flood);
    assert_int_equal(network_start_steady(network, routed.inflow_m3s), FW_OK);
    assert_int_equal(
        network_advance_with_stage(network, routed.count - 1, routed.inflow_m3s, routed.flow_m3s, routed.level_m),
        FW_OK);
    network_reach_choice(network, 0, &routed.choice);
    routed.cell_count = network_cell_count(network, 0);
    routed.replaced = network_steps_replaced(network);
    network_destroy(network);
    return routed;
}

static struct full_flow_result judge(const struct named_case *named, double step_s, size_t cell_count)
{
    const double places[PLACES] = {named->length_m, named->level_at_m};
    const struct full_flow_case full = {.section = &named->section,
                                        .slope_m_per_m = named->slope_m_per_m,
                                        .length_m = named->length_m,
                                        .cell_count = cell_count,
                                        .held_depth_m = named->held_depth_m,
                                        .largest_m3s = named->flood.base_m3s + named->flood.rise_m3s,
                                        .duration_s = named->duration_h * 3600.0,
                                        .output_step_s = step_s,
                                        .inflow = gamma_flood_m3s,
                                        .inflow_parameters = &named->flood,
                                        .place_count = PLACES,
                                        .place_m = places};
    struct full_flow_result result;
    if (!full_flow_run(&full, &result))
        fail_msg("%s: the judge could not follow", named->name);
    return result;
}

static void check_case(const struct named_case *named)
{
    const struct method_flood flood = {named->flood.base_m3s, named->flood.base_m3s + named->flood.rise_m3s,
                                       rise_s_of(&named->flood)};
    double step_s = method_time_step_s(&flood, 900.0);
    struct routed routed = route(named, step_s);
    struct full_flow_result fine = judge(named, step_s, named->judge_cells);
    struct full_flow_result coarse = judge(named, step_s, named->judge_cells / 2);
    assert_int_equal(fine.count, routed.count);
    assert_int_equal(routed.choice.reason, named->reason);
    struct flood_peak truth = flood_peak_of(fine.count, fine.discharge_m3s, step_s);
    struct flood_peak other = flood_peak_of(coarse.count, coarse.discharge_m3s, step_s);
    struct flood_peak peak = flood_peak_of(routed.count, routed.flow_m3s, step_s);
    struct flood_peak true_level = flood_peak_of(fine.count, full_flow_depth_at(&fine, 1), step_s);
    struct flood_peak level = flood_peak_of(routed.count, routed.level_m + routed.count, step_s);
    double peak_error = peak.discharge_m3s / truth.discharge_m3s - 1.0, late_s = peak.time_s - truth.time_s;
    double reached = efficiency(fine.count, fine.discharge_m3s, routed.flow_m3s);
    print_message(
        "%s\n    judge: %.3f m3/s at %.2f min (half as fine: %+.4f %%, %+.2f min)\n"
        "    %s (%s), dt %g s, %zu cells: peak %+.3f %%, %+.2f min, efficiency %.6f, highest level %+.3f m, "
        "%+.1f min; %zu steps replaced\n",
        named->name, truth.discharge_m3s, truth.time_s / 60.0,
        100.0 * (other.discharge_m3s / truth.discharge_m3s - 1.0), (other.time_s - truth.time_s) / 60.0,
        method_name(routed.choice.method), method_reason_text(routed.choice.reason), step_s, routed.cell_count,
        100.0 * peak_error, late_s / 60.0, reached, level.discharge_m3s - true_level.discharge_m3s,
        (level.time_s - true_level.time_s) / 60.0, routed.replaced);
    assert_true(fabs(other.discharge_m3s / truth.discharge_m3s - 1.0) <= 5e-4); /* the judge is sure */
    assert_true(fabs(other.time_s - truth.time_s) <= 12.0);
    assert_true(fabs(fine.imbalance) <= 1e-11);
    assert_true(fabs(peak_error) <= named->peak_line);
    assert_true(fabs(late_s) <= fmax(60.0, 0.5 * step_s));
    assert_true(reached >= named->efficiency_line);
    free(routed.inflow_m3s);
    free(routed.flow_m3s);
    free(routed.level_m);
    full_flow_result_clear(&fine);
    full_flow_result_clear(&coarse);
}

static void named_rivers_are_routed_as_the_full_equations_say(void **state)
{
    (void)state;
    for (size_t i = 0; i < CASE_COUNT; i++)
        check_case(&cases[i]);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(named_rivers_are_routed_as_the_full_equations_say),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
