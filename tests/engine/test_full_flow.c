/* SPDX-License-Identifier: MIT */
/*
 * The judge itself: tests/independent/full_flow against the published flood waves and steady profiles of
 * tests/reference/, closed forms, and its own orders of convergence. The engine appears only where two independent
 * readings of a section are held against each other.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdio.h>
#include <string.h>

#include "tests/engine/reference_table.h"
#include "tests/engine/route_one_reach.h"
#include "tests/independent/full_flow.h"
#include "tests/independent/full_shape.h"

static bool is_near(double value, double expected, double tolerance)
{
    return fabs(value - expected) <= tolerance;
}

static double even_flow(double t_s, const void *parameters)
{
    (void)t_s;
    return *(const double *)parameters;
}

/* --- geometry ------------------------------------------------------------------------------------------------------ */

static const double valley_offset_m[] = {0.0, 31.0, 31.0, 38.5, 42.0, 47.3, 52.0, 57.0, 57.0, 96.0, 118.0};
static const double valley_elevation_m[] = {104.1, 102.3, 102.0, 101.4, 99.2, 98.93,
                                            99.4,  101.2, 102.1, 102.6, 104.9};
static const double valley_panel_to_m[] = {31.0, 57.0, 118.0};
static const double valley_panel_n[] = {0.071, 0.036, 0.064};

static const struct section shapes[] = {
    {.shape = SECTION_WIDE, .bottom_m = 41.0, .roughness_n = 0.033},
    {.shape = SECTION_RECTANGLE, .bottom_m = 17.3, .roughness_n = 0.041},
    {.shape = SECTION_TRAPEZOID, .bottom_m = 8.7, .side_h_per_v = 1.7, .roughness_n = 0.037},
    {.shape = SECTION_WIDE,
     .bottom_m = 21.0,
     .roughness_n = 0.033,
     .has_plain = true,
     .plain_above_m = 1.9,
     .plain_width_m = 83.0,
     .plain_roughness_n = 0.061},
    {.shape = SECTION_RECTANGLE,
     .bottom_m = 8.3,
     .roughness_n = 0.04,
     .has_plain = true,
     .plain_above_m = 1.83,
     .plain_width_m = 27.0,
     .plain_roughness_n = 0.07},
    {.shape = SECTION_TRAPEZOID,
     .bottom_m = 6.1,
     .side_h_per_v = 1.4,
     .roughness_n = 0.038,
     .has_plain = true,
     .plain_above_m = 2.2,
     .plain_width_m = 54.0,
     .plain_roughness_n = 0.066},
    {.shape = SECTION_POINTS,
     .point_count = 11,
     .point_offset_m = valley_offset_m,
     .point_elevation_m = valley_elevation_m,
     .panel_count = 3,
     .panel_to_offset_m = valley_panel_to_m,
     .panel_roughness_n = valley_panel_n},
};
enum { SHAPE_COUNT = sizeof shapes / sizeof *shapes };

static void two_readings_of_a_section_agree(void **state)
{
    (void)state;
    for (size_t i = 0; i < SHAPE_COUNT; i++) {
        struct full_shape shape;
        assert_true(full_shape_of(&shapes[i], &shape));
        for (double depth = 0.013; depth < 9.0; depth *= 1.0719) {
            struct section_properties engine;
            section_properties_at(&shapes[i], depth, &engine);
            struct full_water judge = full_shape_water_at(&shape, depth);
            assert_true(is_near(judge.area_m2, engine.area_m2, 1e-12 * engine.area_m2));
            assert_true(is_near(judge.top_width_m, engine.top_width_m, 1e-12 * engine.top_width_m));
            assert_true(is_near(judge.conveyance_m3s, engine.conveyance_m3s, 1e-12 * engine.conveyance_m3s));
        }
    }
}

/* d I1 / dh = A, whatever the shape: over a small rise the mean of the areas (a strip may hold a corner). */
static void the_moment_of_the_area_grows_by_the_area(void **state)
{
    (void)state;
    for (size_t i = 0; i < SHAPE_COUNT; i++) {
        struct full_shape shape;
        assert_true(full_shape_of(&shapes[i], &shape));
        for (double depth = 0.21; depth < 6.0; depth += 0.173) {
            struct full_water below = full_shape_water_at(&shape, depth),
                              above = full_shape_water_at(&shape, depth + 1e-3);
            double rise = (above.moment_m3 - below.moment_m3) / 1e-3, mean = 0.5 * (above.area_m2 + below.area_m2);
            assert_true(is_near(rise, mean, 1e-6 * mean + 5e-5));
            assert_true(is_near(full_shape_depth_of_area_m(&shape, below.area_m2), depth, 1e-12));
        }
    }
}

static void the_table_is_the_geometry(void **state)
{
    (void)state;
    for (size_t i = 0; i < SHAPE_COUNT; i++) {
        struct full_shape shape;
        struct full_table table;
        assert_true(full_shape_of(&shapes[i], &shape));
        double largest = full_shape_water_at(&shape, 8.0).area_m2;
        assert_true(full_table_make(&shape, largest, 9.80665, &table));
        double worst = 0.0;
        for (double depth = 0.2; depth < 7.9; depth *= 1.00931) { /* from 0.1 to 2 % of the largest area */
            struct full_water water = full_shape_water_at(&shape, depth);
            double at = table.rows_per_root * sqrt(water.area_m2);
            const struct full_row *row = &table.rows[(size_t)at];
            double part = at - floor(at);
            worst = fmax(worst, fabs((row->depth_m[0] + part * row->depth_m[1]) / depth - 1.0));
            worst = fmax(worst, fabs((row->moment_m3[0] + part * row->moment_m3[1]) / water.moment_m3 - 1.0));
            double friction = 9.80665 * water.area_m2 / (water.conveyance_m3s * water.conveyance_m3s);
            worst = fmax(worst, fabs((row->friction[0] + part * row->friction[1]) / friction - 1.0));
        }
        print_message("shape %zu: depth, moment and friction of the table within %.1e\n", i, worst);
        assert_true(worst <= 1e-4);
        full_table_clear(&table);
    }
}

/* --- steady flow --------------------------------------------------------------------------------------------------- */

static void uniform_flow_is_kept(void **state)
{
    (void)state;
    static const double flows[] = {3.1, 61.7};
    for (size_t i = 0; i < SHAPE_COUNT; i++)
        for (size_t k = 0; k < 2; k++) {
            const struct full_flow_case even = {.section = &shapes[i],
                                                .slope_m_per_m = 0.0017,
                                                .length_m = 5000.0,
                                                .cell_count = 40,
                                                .largest_m3s = flows[k],
                                                .duration_s = 3600.0,
                                                .output_step_s = 300.0,
                                                .inflow = even_flow,
                                                .inflow_parameters = &flows[k]};
            double normal = 0.0;
            struct full_flow_result result;
            assert_int_equal(section_normal_depth_m(&shapes[i], 0.0017, flows[k], &normal), FW_OK);
            assert_true(full_flow_run(&even, &result));
            for (size_t t = 0; t < result.count; t++) { /* to the table's exactness */
                assert_true(is_near(result.discharge_m3s[t], flows[k], 1e-4 * flows[k]));
                assert_true(is_near(result.depth_m[t], normal, 1e-4 * normal));
            }
            full_flow_result_clear(&result);
        }
}

static double published_slope(double at_m, const void *parameters)
{
    const struct reference_table *table = parameters;
    for (size_t row = 0; row + 1 < table->row_count; row++) {
        double from = reference_table_number(table, row, "x_m"), to = reference_table_number(table, row + 1, "x_m");
        if (at_m <= to || row + 2 == table->row_count) {
            double part = (at_m - from) / (to - from);
            return (1.0 - part) * reference_table_number(table, row, "bed_slope") +
                   part * reference_table_number(table, row + 1, "bed_slope");
        }
    }
    return 0.0;
}

/* MacDonald and others (1997): subcritical, Froude numbers to 0.99. */
static void the_published_subcritical_profile_comes_out(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("macdonald_rect_subcritical.csv");
    static const struct section channel = {.shape = SECTION_RECTANGLE, .bottom_m = 10.0, .roughness_n = 0.03};
    static const double flow = 20.0;
    double places[64];
    size_t last = table.row_count - 1;
    assert_true(table.row_count <= 64);
    for (size_t row = 0; row <= last; row++)
        places[row] = reference_table_number(&table, row, "x_m");
    struct full_flow_case steady = {.section = &channel,
                                    .slope_at = published_slope,
                                    .slope_parameters = &table,
                                    .length_m = 1000.0,
                                    .cell_count = 200,
                                    .largest_m3s = flow,
                                    .held_depth_m = reference_table_number(&table, last, "depth_m"),
                                    .duration_s = 7200.0,
                                    .output_step_s = 3600.0,
                                    .inflow = even_flow,
                                    .inflow_parameters = &flow,
                                    .place_count = last + 1,
                                    .place_m = places};
    struct full_flow_result result;
    assert_true(full_flow_run(&steady, &result));
    double worst = 0.0, worst_flow = 0.0;
    for (size_t row = 0; row <= last; row++) {
        double depth = full_flow_depth_at(&result, row)[result.count - 1];
        worst = fmax(worst, fabs(depth / reference_table_number(&table, row, "depth_m") - 1.0));
        worst_flow = fmax(worst_flow, fabs(full_flow_discharge_at(&result, row)[result.count - 1] / flow - 1.0));
    }
    print_message("published subcritical profile: depth within %.3f %%, flow within %.4f %%\n", 100.0 * worst,
                  100.0 * worst_flow);
    assert_true(worst <= 0.01 && worst_flow <= 0.001); /* the file's own tolerances */
    full_flow_result_clear(&result);
    reference_table_clear(&table);
}

/* --- floods -------------------------------------------------------------------------------------------------------- */

static const struct gamma_flood published_flood = {100.0, 800.0, 24.0 * 3600.0, 16.0};

static void published_flood_waves_come_out(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("saint_venant_flood_wave_summary.csv");
    assert_int_equal(table.row_count, 4);
    for (size_t row = 0; row < table.row_count; row++) {
        struct section channel = {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035};
        if (strcmp(reference_table_text(&table, row, "section"), "trapezoid") == 0)
            channel = (struct section){
                .shape = SECTION_TRAPEZOID, .bottom_m = 15.0, .side_h_per_v = 5.0, .roughness_n = 0.035};
        struct full_flow_case wave = {.section = &channel,
                                      .slope_m_per_m = reference_table_number(&table, row, "S0"),
                                      .length_m = 100e3,
                                      .cell_count = 200,
                                      .largest_m3s = 900.0,
                                      .beyond_m = 100e3,
                                      .gravity_m_s2 = 9.81,
                                      .duration_s = 72.0 * 3600.0,
                                      .output_step_s = 300.0,
                                      .inflow = gamma_flood_m3s,
                                      .inflow_parameters = &published_flood};
        struct full_flow_result result;
        assert_true(full_flow_run(&wave, &result));
        struct flood_peak flow = flood_peak_of(result.count, result.discharge_m3s, 300.0);
        struct flood_peak depth = flood_peak_of(result.count, result.depth_m, 300.0);
        double flow_error = flow.discharge_m3s / reference_table_number(&table, row, "peak_Q_100km") - 1.0;
        double depth_error = depth.discharge_m3s / reference_table_number(&table, row, "peak_depth_100km_m") - 1.0;
        double flow_late_h = flow.time_s / 3600.0 - reference_table_number(&table, row, "t_peak_Q_h");
        double depth_late_h = depth.time_s / 3600.0 - reference_table_number(&table, row, "t_peak_depth_h");
        print_message("published wave, %s, S0 %g: peak %+.3f %%, %+.2f min; level %+.3f %%, %+.2f min; volume %.1e\n",
                      reference_table_text(&table, row, "section"), wave.slope_m_per_m, 100.0 * flow_error,
                      60.0 * flow_late_h, 100.0 * depth_error, 60.0 * depth_late_h, result.imbalance);
        /* an order of magnitude inside the file's own tolerances of 0.5 % and 0.25 h */
        assert_true(fabs(flow_error) <= 5e-4 && fabs(depth_error) <= 5e-4);
        assert_true(fabs(flow_late_h) <= 0.025 && fabs(depth_late_h) <= 0.025);
        assert_true(fabs(result.imbalance) <= 1e-12);
        full_flow_result_clear(&result);
    }
    reference_table_clear(&table);
}

static void the_grid_converges_with_the_second_order(void **state)
{
    (void)state;
    static const struct gamma_flood smooth = {100.0, 60.0, 12.0 * 3600.0, 6.0};
    struct full_flow_case wave = {
        .section = &(const struct section){.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035},
        .slope_m_per_m = 0.0005,
        .length_m = 48e3,
        .beyond_m = 48e3,
        .largest_m3s = 160.0,
        .duration_s = 30.0 * 3600.0,
        .output_step_s = 600.0,
        .inflow = gamma_flood_m3s,
        .inflow_parameters = &smooth};
    struct full_flow_result results[4];
    for (size_t i = 0; i < 4; i++) {
        wave.cell_count = (size_t)(i < 3 ? 12 << i : 192);
        assert_true(full_flow_run(&wave, &results[i]));
    }
    double errors[3];
    for (size_t i = 0; i < 3; i++) {
        errors[i] = 0.0;
        for (size_t t = 0; t < results[3].count; t++)
            errors[i] += pow(results[i].discharge_m3s[t] - results[3].discharge_m3s[t], 2.0);
        errors[i] = sqrt(errors[i] / (double)results[3].count);
    }
    print_message("cells of 4, 2, 1 km: errors %.4f, %.4f, %.4f m3/s; orders %.2f, %.2f\n", errors[0], errors[1],
                  errors[2], log2(errors[0] / errors[1]), log2(errors[1] / errors[2]));
    assert_true(log2(errors[0] / errors[1]) >= 1.8 && log2(errors[1] / errors[2]) >= 1.8);
    for (size_t i = 0; i < 4; i++)
        full_flow_result_clear(&results[i]);
}

/* A channel cut where the level is given is the uncut one. */
static void a_held_level_is_felt_upstream_and_a_changed_inflow_downstream(void **state)
{
    (void)state;
    static const double flow = 61.7;
    static const double places[] = {0.0, 7000.0, 10000.0};
    struct full_flow_case held = {.section = &shapes[5],
                                  .slope_m_per_m = 0.0007,
                                  .length_m = 10e3,
                                  .cell_count = 100,
                                  .largest_m3s = 90.0,
                                  .duration_s = 12.0 * 3600.0,
                                  .output_step_s = 600.0,
                                  .inflow = even_flow,
                                  .inflow_parameters = &flow,
                                  .place_count = 3,
                                  .place_m = places};
    struct full_flow_result natural, raised;
    assert_true(full_flow_run(&held, &natural));
    held.held_depth_m = 4.9;
    assert_true(full_flow_run(&held, &raised));
    size_t last = raised.count - 1;
    double normal = natural.depth_m[last];
    assert_true(is_near(full_flow_depth_at(&raised, 2)[last], 4.9, 1e-6));
    assert_true(full_flow_depth_at(&raised, 1)[last] > normal + 0.1 && full_flow_depth_at(&raised, 1)[last] < 4.9);
    for (size_t place = 0; place < 3; place++)
        assert_true(is_near(full_flow_discharge_at(&raised, place)[last], flow, 1e-3 * flow));
    full_flow_result_clear(&natural);

    const struct full_flow_change change = {even_flow, &flow, 6.0 * 3600.0, 1.2, 0.0};
    held.inflow = full_flow_changed_m3s;
    held.inflow_parameters = &change;
    assert_true(full_flow_run(&held, &natural));
    for (size_t t = 0; t <= 36; t++) /* nothing before the moment */
        assert_true(natural.discharge_m3s[natural.count + t] == raised.discharge_m3s[raised.count + t]);
    assert_true(full_flow_discharge_at(&natural, 1)[last] > 1.1 * flow);
    full_flow_result_clear(&natural);
    full_flow_result_clear(&raised);
}

/* False, nothing written, nothing leaked: the sanitizers watch. */
static void what_the_judge_cannot_do_is_refused(void **state)
{
    (void)state;
    static const double flow = 17.0, none = 0.0;
    double offset[FULL_SHAPE_LINES + 8], elevation[FULL_SHAPE_LINES + 8];
    for (size_t i = 0; i < FULL_SHAPE_LINES + 8; i++) {
        offset[i] = (double)i;
        elevation[i] = 3.0 + (i % 2 == 0 ? 0.0 : 0.1);
    }
    const struct section ragged = {.shape = SECTION_POINTS,
                                   .roughness_n = 0.04,
                                   .point_count = FULL_SHAPE_LINES + 8,
                                   .point_offset_m = offset,
                                   .point_elevation_m = elevation};
    struct full_flow_case full = {.section = &ragged,
                                  .slope_m_per_m = 0.002,
                                  .length_m = 900.0,
                                  .cell_count = 9,
                                  .largest_m3s = 20.0,
                                  .duration_s = 600.0,
                                  .output_step_s = 60.0,
                                  .inflow = even_flow,
                                  .inflow_parameters = &flow};
    struct full_flow_result result = {.count = 77};
    assert_false(full_flow_run(&full, &result)); /* more lines than there is room for */
    full.section = &shapes[1];
    full.inflow_parameters = &none;
    assert_false(full_flow_run(&full, &result)); /* a dry bed */
    assert_int_equal(result.count, 77);
    full.inflow_parameters = &flow;
    assert_true(full_flow_run(&full, &result));
    full_flow_result_clear(&result);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(two_readings_of_a_section_agree),
        cmocka_unit_test(the_moment_of_the_area_grows_by_the_area),
        cmocka_unit_test(the_table_is_the_geometry),
        cmocka_unit_test(uniform_flow_is_kept),
        cmocka_unit_test(the_published_subcritical_profile_comes_out),
        cmocka_unit_test(published_flood_waves_come_out),
        cmocka_unit_test(the_grid_converges_with_the_second_order),
        cmocka_unit_test(what_the_judge_cannot_do_is_refused),
        cmocka_unit_test(a_held_level_is_felt_upstream_and_a_changed_inflow_downstream),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
