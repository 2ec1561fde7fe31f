/* SPDX-License-Identifier: MIT */
/*
 * engine/dynamic_tree against waves that others computed: the published flood waves and linear waves of
 * tests/reference/, and the independent fine-grid solution of the full equations (tests/independent/full_flow.h).
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "tests/engine/dynamic_channel.h"
#include "tests/engine/reference_table.h"
#include "tests/engine/route_one_reach.h"
#include "tests/independent/full_flow.h"

static const double full_turn = 6.283185307179586;

static bool is_near(double value, double expected, double tolerance)
{
    return fabs(value - expected) <= tolerance;
}

/* --- the published flood wave ------------------------------------------------------------------------------------ */

static const struct gamma_flood published_flood = {100.0, 800.0, 24.0 * 3600.0, 16.0};

static struct channel_case published_case(const char *section, double slope, double time_step_s)
{
    struct channel_case made = {.section = {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035},
                                .slope_m_per_m = slope,
                                .length_m = 100e3,
                                .cell_m = 1000.0,
                                .extension_m = 100e3, /* the published channel ends at 200 km */
                                .time_step_s = time_step_s,
                                .duration_s = 72.0 * 3600.0,
                                .flood = gamma_flood_m3s,
                                .flood_parameters = &published_flood,
                                .largest_m3s = 900.0};
    if (strcmp(section, "trapezoid") == 0)
        made.section =
            (struct section){.shape = SECTION_TRAPEZOID, .bottom_m = 15.0, .side_h_per_v = 5.0, .roughness_n = 0.035};
    return made;
}

static void published_peaks_come_out(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("saint_venant_flood_wave_summary.csv");
    assert_int_equal(table.row_count, 4);
    for (size_t row = 0; row < table.row_count; row++) {
        const char *section = reference_table_text(&table, row, "section");
        double slope = reference_table_number(&table, row, "S0");
        struct channel_case wave = published_case(section, slope, 300.0);
        struct channel_result routed = channel_run(&wave);
        struct flood_peak flow = flood_peak_of(routed.count, routed.discharge_m3s, wave.time_step_s);
        struct flood_peak depth = flood_peak_of(routed.count, routed.depth_m, wave.time_step_s);
        double expected_m3s = reference_table_number(&table, row, "peak_Q_100km");
        double expected_h = reference_table_number(&table, row, "t_peak_Q_h");
        double expected_m = reference_table_number(&table, row, "peak_depth_100km_m");
        double expected_depth_h = reference_table_number(&table, row, "t_peak_depth_h");
        print_message("%s, S0 %g: peak %+.3f %%, %+.2f min; highest level %+.3f %%, %+.2f min; volume %.1e\n",
                      section, slope, 100.0 * (flow.discharge_m3s / expected_m3s - 1.0),
                      60.0 * (flow.time_s / 3600.0 - expected_h), 100.0 * (depth.discharge_m3s / expected_m - 1.0),
                      60.0 * (depth.time_s / 3600.0 - expected_depth_h), routed.imbalance);
        /* the reference's own tolerances are 0.5 % and 0.25 h; the scheme does better, and must go on doing so */
        assert_true(is_near(flow.discharge_m3s, expected_m3s, 0.002 * expected_m3s));
        assert_true(is_near(depth.discharge_m3s, expected_m, 0.002 * expected_m));
        assert_true(is_near(flow.time_s / 3600.0, expected_h, 0.05));
        assert_true(is_near(depth.time_s / 3600.0, expected_depth_h, 0.05));
        assert_true(fabs(routed.imbalance) <= 1e-12);
        assert_int_equal(routed.counts.halved, 0);
        channel_result_clear(&routed);
    }
    reference_table_clear(&table);
}

static void published_hydrographs_are_followed(void **state)
{
    (void)state;
    static const struct {
        const char *file;
        double slope;
    } waves[] = {{"saint_venant_flood_wave_S0.001.csv", 0.001}, {"saint_venant_flood_wave_S0.00025.csv", 0.00025}};
    for (size_t i = 0; i < 2; i++) {
        struct reference_table table = reference_table_load(waves[i].file);
        struct channel_case wave = published_case("rectangle", waves[i].slope, 300.0);
        struct channel_result routed = channel_run(&wave);
        double flow_error = 0.0, depth_error = 0.0, volume = 0.0, expected_volume = 0.0;
        size_t compared = 0;
        for (size_t row = 0; row < table.row_count; row++) {
            size_t step = (size_t)lround(reference_table_number(&table, row, "t_h") * 3600.0 / wave.time_step_s);
            if (step >= routed.count)
                break;
            double expected = reference_table_number(&table, row, "Q_100km");
            flow_error = fmax(flow_error, fabs(routed.discharge_m3s[step] - expected));
            depth_error =
                fmax(depth_error, fabs(routed.depth_m[step] - reference_table_number(&table, row, "depth_100km_m")));
            volume += routed.discharge_m3s[step] - 100.0;
            expected_volume += expected - 100.0;
            compared++;
        }
        print_message("S0 %g, %zu half hours: worst flow %.2f m3/s, worst depth %.4f m, volume %+.4f %%\n",
                      waves[i].slope, compared, flow_error, depth_error, 100.0 * (volume / expected_volume - 1.0));
        assert_true(compared > 100);
        assert_true(flow_error <= 0.005 * 900.0);
        assert_true(depth_error <= 0.05); /* the front rises that much in two minutes */
        assert_true(is_near(volume, expected_volume, 0.001 * expected_volume));
        channel_result_clear(&routed);
        reference_table_clear(&table);
    }
}

static double crossing_h(size_t count, const double values[], double level, double time_step_s, bool is_up)
{
    for (size_t i = 0; i + 1 < count; i++) {
        double before = values[i] - level, after = values[i + 1] - level;
        if (is_up ? before < 0.0 && after >= 0.0 : before >= 0.0 && after < 0.0)
            return ((double)i + before / (before - after)) * time_step_s / 3600.0;
    }
    return (double)INFINITY;
}

/* What a crossing lives by: when a flow or a level is first reached, and when it is passed again on the way down. */
static void published_thresholds_are_crossed_in_time(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("saint_venant_threshold_times.csv");
    size_t compared = 0;
    double worst_h = 0.0;
    for (size_t row = 0; row < table.row_count; row++) {
        struct channel_case wave = published_case(reference_table_text(&table, row, "section"),
                                                  reference_table_number(&table, row, "S0"), 300.0);
        struct channel_result routed = channel_run(&wave);
        const char *threshold = reference_table_text(&table, row, "threshold");
        double level = 0.0;
        bool is_depth = sscanf(threshold, "depth %lf m", &level) == 1;
        assert_true(is_depth || sscanf(threshold, "Q %lf m3/s", &level) == 1);
        const double *values = is_depth ? routed.depth_m : routed.discharge_m3s;
        for (int is_up = 0; is_up < 2; is_up++) {
            double expected =
                reference_table_number(&table, row, is_up ? "at_100km_upcross_h" : "at_100km_downcross_h");
            double crossed = crossing_h(routed.count, values, level, wave.time_step_s, is_up);
            worst_h = fmax(worst_h, fabs(crossed - expected));
            assert_true(is_near(crossed, expected, 0.05)); /* the reference's tolerance is 0.25 h */
            compared++;
        }
        channel_result_clear(&routed);
    }
    print_message("%zu crossings: worst %.2f min\n", compared, 60.0 * worst_h);
    assert_int_equal(compared, 40);
    reference_table_clear(&table);
}

/* --- small waves ------------------------------------------------------------------------------------------------- */

struct sine_flood {
    double mean_m3s, rise_m3s, period_s;
};

static double sine_flood_m3s(double t_s, const void *parameters)
{
    const struct sine_flood *flood = parameters;
    return flood->mean_m3s + flood->rise_m3s * sin(full_turn * t_s / flood->period_s);
}

struct wave_fit {
    double ratio; /* of the amplitude to that of the inflow */
    double lag_s;
};

/* By Fourier's coefficient over the last two periods. */
static struct wave_fit fit_wave(const struct channel_result *routed, const struct sine_flood *flood,
                                double time_step_s)
{
    size_t period = (size_t)lround(flood->period_s / time_step_s);
    double in_phase = 0.0, out_of_phase = 0.0;
    for (size_t i = routed->count - 1 - 2 * period; i < routed->count - 1; i++) {
        double phase = full_turn * (double)i / (double)period;
        in_phase += (routed->discharge_m3s[i] - flood->mean_m3s) * sin(phase) / (double)period;
        out_of_phase += (routed->discharge_m3s[i] - flood->mean_m3s) * cos(phase) / (double)period;
    }
    double lag = atan2(-out_of_phase, in_phase) / full_turn * flood->period_s;
    return (struct wave_fit){hypot(in_phase, out_of_phase) / flood->rise_m3s,
                             lag > 0.0 ? lag : lag + flood->period_s};
}

static void small_waves_run_and_fade_as_the_linear_equations_say(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("saint_venant_linear_wave.csv");
    assert_int_equal(table.row_count, 5);
    for (size_t row = 0; row < table.row_count; row++) {
        double mean = reference_table_number(&table, row, "u0_m_s") * reference_table_number(&table, row, "h0_m");
        double period_s = 3600.0 * reference_table_number(&table, row, "T_h");
        const struct sine_flood flood = {mean, 0.01 * mean, period_s};
        const struct channel_case wave = {.section = {.shape = SECTION_WIDE,
                                                      .bottom_m = 1.0,
                                                      .roughness_n = reference_table_number(&table, row, "n")},
                                          .slope_m_per_m = reference_table_number(&table, row, "S0"),
                                          .length_m = 50e3,
                                          .cell_m = 500.0,
                                          .extension_m = 200e3,
                                          .time_step_s = 60.0,
                                          .duration_s = 3.0 * period_s + 12.0 * 3600.0,
                                          .flood = sine_flood_m3s,
                                          .flood_parameters = &flood,
                                          .largest_m3s = 2.0 * mean};
        struct channel_result routed = channel_run(&wave);
        struct wave_fit fit = fit_wave(&routed, &flood, wave.time_step_s);
        double expected_ratio = reference_table_number(&table, row, "amplitude_ratio_50km");
        double expected_s = 3600.0 * reference_table_number(&table, row, "travel_h_50km");
        print_message("S0 %g, period %.0f h: amplitude ratio %+.4f, travel time %+.3f %%\n", wave.slope_m_per_m,
                      period_s / 3600.0, fit.ratio - expected_ratio, 100.0 * (fit.lag_s / expected_s - 1.0));
        assert_true(is_near(fit.ratio, expected_ratio, 0.01));
        assert_true(is_near(fit.lag_s, expected_s, 0.01 * expected_s));
        channel_result_clear(&routed);
    }
    reference_table_clear(&table);
}

/* --- Thomas's wave ----------------------------------------------------------------------------------------------- */

static const double foot_m = 0.3048;

struct thomas_flood {
    double share; /* of the published wave's height */
};

static double thomas_flood_m3s(double t_s, const void *parameters)
{
    const struct thomas_flood *flood = parameters;
    double t_h = t_s / 3600.0;
    double published_ft2_s = t_h <= 96.0 ? 125.0 - 75.0 * cos(full_turn * t_h / 96.0) : 50.0;
    return foot_m * foot_m * (125.0 + flood->share * (published_ft2_s - 125.0));
}

static struct channel_result route_thomas(const struct thomas_flood *flood)
{
    const struct channel_case wave = {.section = {.shape = SECTION_WIDE, .bottom_m = 1.0, .roughness_n = 0.02972},
                                      .slope_m_per_m = 1.0 / 5280.0,
                                      .length_m = 500.0 * 5280.0 * foot_m,
                                      .cell_m = 2.5 * 5280.0 * foot_m,
                                      .extension_m = 500.0 * 5280.0 * foot_m,
                                      .time_step_s = 900.0,
                                      .duration_s = 300.0 * 3600.0,
                                      .flood = thomas_flood_m3s,
                                      .flood_parameters = flood,
                                      .largest_m3s = 20.0};
    return channel_run(&wave);
}

/*
 * Thomas (1934). The exact column of the table is of the linear equation at 125 ft2/s, so the wave is routed at a
 * hundredth of its height; at full height the full equations are another problem, and their answer is only printed.
 */
static void a_small_wave_of_the_shape_of_thomas_agrees_with_the_exact_solution(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("thomas_problem_500mi.csv");
    const struct thomas_flood small = {0.01}, whole = {1.0};
    struct channel_result routed = route_thomas(&small);
    double worst = 0.0, peak = 0.0, expected_peak = 0.0;
    for (size_t row = 0; row < table.row_count; row++) {
        size_t step = (size_t)lround(reference_table_number(&table, row, "t_h") * 4.0);
        assert_true(step < routed.count);
        double flow = 125.0 + (routed.discharge_m3s[step] / (foot_m * foot_m) - 125.0) / small.share;
        double expected = reference_table_number(&table, row, "outflow_hayami_exact");
        worst = fmax(worst, fabs(flow - expected));
        peak = fmax(peak, flow);
        expected_peak = fmax(expected_peak, expected);
    }
    channel_result_clear(&routed);
    routed = route_thomas(&whole);
    struct flood_peak full = flood_peak_of(routed.count, routed.discharge_m3s, 900.0);
    print_message("Thomas, small: worst %.2f of 150 ft2/s, peak %+.2f %%; at full height the peak is %.1f ft2/s at "
                  "%.1f h\n",
                  worst, 100.0 * (peak / expected_peak - 1.0), full.discharge_m3s / (foot_m * foot_m),
                  full.time_s / 3600.0);
    assert_true(is_near(peak, expected_peak, 0.01 * expected_peak));
    assert_true(worst <= 0.02 * 150.0); /* the table's equation has no inertia and one c and D */
    assert_true(fabs(routed.imbalance) <= 1e-12);
    channel_result_clear(&routed);
    reference_table_clear(&table);
}

/* --- named rivers, judged by the fine grid ------------------------------------------------------------------------ */

static const struct gamma_flood steep_flood = {5.0, 95.0, 2.0 * 3600.0, 4.0};
static const struct gamma_flood flashy_flood = {3.0, 57.0, 1.5 * 3600.0, 4.0};

struct judged_case {
    const char *name;
    struct channel_case channel;
    double extension_m;
    double peak_tolerance, efficiency;
    double time_tolerance_s;
    size_t most_halved;
};

static struct judged_case judged(const char *name, const struct gamma_flood *flood, double width, double n,
                                 double plain_above, double plain_width, double plain_n, double slope, double length,
                                 double extension)
{
    struct judged_case made = {
        .name = name,
        .extension_m = extension,
        .channel = {.section = {.shape = SECTION_RECTANGLE, .bottom_m = width, .roughness_n = n},
                    .slope_m_per_m = slope,
                    .length_m = length,
                    .extension_m = extension,
                    .flood = gamma_flood_m3s,
                    .flood_parameters = flood,
                    .largest_m3s = flood->base_m3s + flood->rise_m3s}};
    if (plain_width > 0.0) {
        made.channel.section.has_plain = true;
        made.channel.section.plain_above_m = plain_above;
        made.channel.section.plain_width_m = plain_width;
        made.channel.section.plain_roughness_n = plain_n;
    }
    return made;
}

static void judge(struct judged_case *run, double cell_m, double time_step_s, double judge_cell_m, double duration_s)
{
    run->channel.cell_m = cell_m;
    run->channel.time_step_s = time_step_s;
    run->channel.duration_s = duration_s;
    const struct full_flow_case fine = {.section = &run->channel.section,
                                        .slope_m_per_m = run->channel.slope_m_per_m,
                                        .length_m = run->channel.length_m,
                                        .cell_count = (size_t)lround(run->channel.length_m / judge_cell_m),
                                        .largest_m3s = run->channel.largest_m3s,
                                        .duration_s = duration_s,
                                        .output_step_s = time_step_s,
                                        .inflow = run->channel.flood,
                                        .inflow_parameters = run->channel.flood_parameters};
    struct channel_result routed = channel_run(&run->channel);
    struct full_flow_result full;
    assert_true(full_flow_run(&fine, &full));
    assert_int_equal(routed.count, full.count);
    double mean = 0.0, error = 0.0, spread = 0.0;
    for (size_t i = 0; i < full.count; i++)
        mean += full.discharge_m3s[i] / (double)full.count;
    for (size_t i = 0; i < full.count; i++) {
        error += pow(routed.discharge_m3s[i] - full.discharge_m3s[i], 2.0);
        spread += pow(full.discharge_m3s[i] - mean, 2.0);
    }
    struct flood_peak got = flood_peak_of(routed.count, routed.discharge_m3s, time_step_s);
    struct flood_peak expected = flood_peak_of(full.count, full.discharge_m3s, time_step_s);
    print_message("%s, dx %g m, dt %g s: peak %+.3f %%, %+.2f min, efficiency %.5f, level %+.4f m; volume %.1e; %.2f "
                  "iterations, %zu halved, %zu without inertia, %zu replaced\n",
                  run->name, cell_m, time_step_s, 100.0 * (got.discharge_m3s / expected.discharge_m3s - 1.0),
                  (got.time_s - expected.time_s) / 60.0, 1.0 - error / spread,
                  flood_peak_of(routed.count, routed.depth_m, time_step_s).discharge_m3s -
                      flood_peak_of(full.count, full.depth_m, time_step_s).discharge_m3s,
                  routed.imbalance, (double)routed.counts.iterations / (double)routed.counts.steps,
                  routed.counts.halved, routed.counts.without_inertia, routed.counts.replaced);
    assert_true(is_near(got.discharge_m3s, expected.discharge_m3s, run->peak_tolerance * expected.discharge_m3s));
    assert_true(is_near(got.time_s, expected.time_s, run->time_tolerance_s));
    assert_true(1.0 - error / spread >= run->efficiency);
    assert_true(fabs(routed.imbalance) <= 1e-12);
    assert_true(routed.counts.halved <= run->most_halved);
    assert_int_equal(routed.counts.replaced, 0);
    channel_result_clear(&routed);
    full_flow_result_clear(&full);
}

static void named_rivers_agree_with_the_fine_grid(void **state)
{
    (void)state;
    struct judged_case steep = judged("steep", &steep_flood, 20.0, 0.04, 0.0, 0.0, 0.0, 0.01, 20e3, 1000.0);
    steep.peak_tolerance = 0.005;
    steep.efficiency = 0.999;
    steep.time_tolerance_s = 60.0;
    steep.most_halved = 4; /* the front starts from 5 m3/s on cells of 200 m */
    judge(&steep, 200.0, 60.0, 100.0, 7.0 * 3600.0);
    judge(&steep, 50.0, 60.0, 100.0, 7.0 * 3600.0);

    struct judged_case flashy = judged("flashy", &flashy_flood, 8.0, 0.04, 1.8, 20.0, 0.07, 0.003, 12e3, 2400.0);
    flashy.peak_tolerance = 0.003;
    flashy.efficiency = 0.9998;
    flashy.time_tolerance_s = 60.0;
    judge(&flashy, 150.0, 60.0, 100.0, 9.0 * 3600.0);

    struct judged_case plains = judged("wide plains", &flashy_flood, 8.0, 0.04, 1.8, 60.0, 0.07, 0.003, 12e3, 2400.0);
    plains.peak_tolerance = 0.003;
    plains.efficiency = 0.9998;
    plains.time_tolerance_s = 60.0;
    judge(&plains, 100.0, 60.0, 50.0, 9.0 * 3600.0);

    flashy.channel.is_diffusive = true; /* its inertia matters little */
    flashy.peak_tolerance = 0.005;
    judge(&flashy, 150.0, 60.0, 100.0, 9.0 * 3600.0);
}

/* --- order of convergence ---------------------------------------------------------------------------------------- */

static double rms_against(const struct channel_result *coarse, const struct channel_result *fine, size_t every)
{
    double sum = 0.0;
    for (size_t i = 0; i < coarse->count; i++)
        sum += pow(coarse->discharge_m3s[i] - fine->discharge_m3s[i * every], 2.0);
    return sqrt(sum / (double)coarse->count);
}

/*
 * Second order in dx; in dt the scheme's error is (theta - 1/2) dt c_t + O(dt^2): order between 1 and 2, nearing 1 as
 * the step shrinks. Both are measured on a smooth wave, each with the other held fine.
 */
static void the_order_of_convergence_is_as_designed(void **state)
{
    (void)state;
    static const struct gamma_flood smooth = {100.0, 60.0, 12.0 * 3600.0, 6.0};
    struct channel_case wave = {.section = {.shape = SECTION_RECTANGLE, .bottom_m = 50.0, .roughness_n = 0.035},
                                .slope_m_per_m = 0.0005,
                                .length_m = 48e3,
                                .extension_m = 48e3,
                                .duration_s = 40.0 * 3600.0,
                                .flood = gamma_flood_m3s,
                                .flood_parameters = &smooth,
                                .largest_m3s = 160.0};
    double errors[3];
    wave.time_step_s = 600.0;
    wave.cell_m = 250.0;
    struct channel_result finest = channel_run(&wave);
    for (size_t i = 0; i < 3; i++) {
        wave.cell_m = 8000.0 / (double)(1 << i);
        struct channel_result coarse = channel_run(&wave);
        errors[i] = rms_against(&coarse, &finest, 1);
        channel_result_clear(&coarse);
    }
    channel_result_clear(&finest);
    print_message("order in dx: %.2f, %.2f\n", log2(errors[0] / errors[1]), log2(errors[1] / errors[2]));
    assert_true(log2(errors[0] / errors[1]) > 1.8 && log2(errors[1] / errors[2]) > 1.8);

    wave.cell_m = 2000.0;
    wave.time_step_s = 18.75;
    finest = channel_run(&wave);
    for (size_t i = 0; i < 3; i++) {
        wave.time_step_s = 1200.0 / (double)(1 << i);
        struct channel_result coarse = channel_run(&wave);
        errors[i] = rms_against(&coarse, &finest, (size_t)lround(wave.time_step_s / 18.75));
        channel_result_clear(&coarse);
    }
    channel_result_clear(&finest);
    print_message("order in dt: %.2f, %.2f\n", log2(errors[0] / errors[1]), log2(errors[1] / errors[2]));
    assert_true(log2(errors[0] / errors[1]) > 0.95 && log2(errors[1] / errors[2]) > 0.95);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(published_peaks_come_out),
        cmocka_unit_test(published_hydrographs_are_followed),
        cmocka_unit_test(published_thresholds_are_crossed_in_time),
        cmocka_unit_test(small_waves_run_and_fade_as_the_linear_equations_say),
        cmocka_unit_test(a_small_wave_of_the_shape_of_thomas_agrees_with_the_exact_solution),
        cmocka_unit_test(named_rivers_agree_with_the_fine_grid),
        cmocka_unit_test(the_order_of_convergence_is_as_designed),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
