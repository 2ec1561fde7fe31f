/* SPDX-License-Identifier: MIT */
/*
 * Thomas's flood wave (1934): 500 miles of a wide channel, as routed by constant-parameter Muskingum-Cunge (Ponce and
 * Yevjevich 1978), as the exact solution of linear diffusion has it, and at its full height on the real section, which is
 * another problem. tests/reference/thomas_problem_500mi.csv.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "tests/engine/dynamic_channel.h"
#include "tests/engine/linear_river.h"
#include "tests/engine/reference_table.h"
#include "tests/engine/route_one_reach.h"

enum { ROWS = 51 }; /* every 6 h to 300 h */

static const double hour_s = 3600.0;
static const double mile_ft = 5280.0;
static const double length_ft = 500.0 * 5280.0;
static const double celerity_ft_s = 9.1877;
static const double reference_flow_ft2_s = 125.0;
static const double foot_m = 0.3048;

static double thomas_ft2_s(double t_s)
{
    double t_h = t_s / hour_s;
    return t_h <= 96.0 ? 125.0 - 75.0 * cos(3.14159265358979324 * t_h / 48.0) : 50.0;
}

static struct reference_table load_table(void)
{
    struct reference_table table = reference_table_load("thomas_problem_500mi.csv");
    assert_int_equal(table.row_count, ROWS);
    for (size_t row = 0; row < ROWS; row++) {
        assert_true(reference_table_number(&table, row, "t_h") == 6.0 * (double)row);
        assert_true(fabs(reference_table_number(&table, row, "inflow") - thomas_ft2_s(21600.0 * (double)row)) <=
                    1e-4);
    }
    return table;
}

/* The celerity that the file prints to five digits, unrounded: 5/3 of Manning's velocity with 1.486 / n = 50. */
static double exact_celerity_ft_s(void)
{
    double depth_ft = pow(reference_flow_ft2_s / (50.0 * sqrt(1.0 / mile_ft)), 0.6);
    double celerity = 5.0 / 3.0 * reference_flow_ft2_s / depth_ft;
    assert_true(fabs(depth_ft - 22.6754) <= 5e-5);
    assert_true(fabs(celerity - celerity_ft_s) <= 5e-5);
    return celerity;
}

/* The outflow at the table's times, ft2/s, by the storage form with one celerity and one diffusivity. */
static void route_linear(double cell_mile, double step_h, double outflow[ROWS], double *imbalance_out)
{
    const struct linear_reach reach = {.celerity = exact_celerity_ft_s(),
                                       .diffusivity = reference_flow_ft2_s / (2.0 / mile_ft),
                                       .cell_length = cell_mile * mile_ft,
                                       .time_step = step_h * hour_s,
                                       .cell_count = (size_t)lround(500.0 / cell_mile)};
    size_t every = (size_t)lround(6.0 / step_h);
    struct linear_river river;
    linear_river_init(&river, &reach, 50.0);
    double held = linear_river_volume(&river), in = 0.0, out = 0.0;
    outflow[0] = river.outflow;
    for (size_t step = 1; step <= every * (ROWS - 1); step++) {
        double inflow_before = river.inflow, outflow_before = river.outflow;
        linear_river_step(&river, thomas_ft2_s((double)step * reach.time_step));
        in += 0.5 * reach.time_step * (inflow_before + river.inflow);
        out += 0.5 * reach.time_step * (outflow_before + river.outflow);
        if (step % every == 0)
            outflow[step / every] = river.outflow;
    }
    *imbalance_out = (in - out - (linear_river_volume(&river) - held)) / in;
    linear_river_clear(&river);
}

static void the_published_muskingum_cunge_column_comes_out(void **state)
{
    (void)state;
    struct reference_table table = load_table();
    double outflow[ROWS], imbalance = 0.0, worst = 0.0, peak = 0.0, exact_peak = 0.0;
    route_linear(25.0, 6.0, outflow, &imbalance);
    for (size_t row = 0; row < ROWS; row++) {
        worst = fmax(worst, fabs(outflow[row] - reference_table_number(&table, row, "outflow_muskingum_cunge")));
        peak = fmax(peak, outflow[row]);
        exact_peak = fmax(exact_peak, reference_table_number(&table, row, "outflow_hayami_exact"));
    }
    print_message("Thomas, 20 cells of 25 miles, 6 h: 51 outflows within %.5f ft2/s of the published scheme; peak "
                  "%+.2f %% of the exact; volume %.0e\n",
                  worst, 100.0 * (peak / exact_peak - 1.0), imbalance);
    assert_true(worst <= 0.001);
    assert_true(fabs(peak - exact_peak) <= 0.01 * exact_peak);
    assert_true(fabs(imbalance) <= 1e-12);
    reference_table_clear(&table);
}

/* --- on finer grids ----------------------------------------------------------------------------------------------- */

/* e^-z I1(z), the modified Bessel function, by its integral: the trapezoidal rule is exact to rounding for z < 400. */
static double scaled_bessel_i1(double z)
{
    enum { PARTS = 400 };
    double sum = 0.0;
    for (int i = 0; i < PARTS; i++) {
        double angle = 3.14159265358979324 * ((double)i + 0.5) / PARTS;
        sum += exp(z * (cos(angle) - 1.0)) * cos(angle);
    }
    return sum / PARTS;
}

/*
 * As cells and steps shrink together the storage form with one c and one D becomes
 *     (1/c) dQ/dt + dQ/dx + (D/c^2) d2Q/dx dt = 0:
 * diffusion with one of its two derivatives turned, by the wave itself, from x to t. Laplace's transform answers a unit
 * impulse x further down by exp(-x s / (c + s D/c)), so with P = c x / D and a = c^2 / D by
 *     e^-P { delta(t) + e^-at sqrt(P a / t) I1(2 sqrt(P a t)) }.
 */
static void solve_limit(double outflow[ROWS])
{
    enum { PER_HOUR = 10, COUNT = 300 * PER_HOUR + 1 };
    static double response[COUNT]; /* to an impulse, times the step */
    double celerity = exact_celerity_ft_s(), diffusivity = reference_flow_ft2_s / (2.0 / mile_ft);
    double p = celerity * length_ft / diffusivity, a = celerity * celerity / diffusivity;
    double step_s = hour_s / PER_HOUR;
    response[0] = 0.0; /* e^-P is 1e-32 */
    for (size_t i = 1; i < COUNT; i++) {
        double t = (double)i * step_s, z = 2.0 * sqrt(p * a * t);
        response[i] = step_s * exp(z - p - a * t) * sqrt(p * a / t) * scaled_bessel_i1(z);
    }
    for (size_t row = 0; row < ROWS; row++) {
        outflow[row] = 50.0;
        for (size_t i = 0; i <= row * 6 * PER_HOUR; i++)
            outflow[row] += response[row * 6 * PER_HOUR - i] * (thomas_ft2_s((double)i * step_s) - 50.0);
    }
}

struct difference {
    double rms, worst;
};

static struct difference difference_of(const double a[ROWS], const double b[ROWS])
{
    struct difference difference = {0.0, 0.0};
    for (size_t row = 0; row < ROWS; row++) {
        difference.rms += (a[row] - b[row]) * (a[row] - b[row]) / ROWS;
        difference.worst = fmax(difference.worst, fabs(a[row] - b[row]));
    }
    difference.rms = sqrt(difference.rms);
    return difference;
}

/* Second order: centred in space and time, diffusion matched. The Courant number stays the published 1.5. */
static void the_storage_form_converges_to_its_own_exact_limit(void **state)
{
    (void)state;
    enum { GRIDS = 5 };
    double limit[ROWS], before = 0.0;
    solve_limit(limit);
    for (size_t grid = 0; grid < GRIDS; grid++) {
        double outflow[ROWS], imbalance = 0.0;
        double cell_mile = 25.0 / (double)(1 << grid), step_h = 6.0 / (double)(1 << grid);
        route_linear(cell_mile, step_h, outflow, &imbalance);
        struct difference error = difference_of(outflow, limit);
        double order = grid == 0 ? 0.0 : log2(before / error.rms);
        print_message("Thomas against the exact limit, cells of %6.3f miles, %5.3f h: rms %.5f, worst %.5f ft2/s, "
                      "order %.2f\n",
                      cell_mile, step_h, error.rms, error.worst, order);
        assert_true(grid == 0 || fabs(order - 2.0) <= 0.1);
        before = error.rms;
    }
    assert_true(before <= 0.01);
}

/* How far that limit is from linear diffusion, which the table holds exactly: a property of the method, on any grid. */
static void the_limit_of_the_storage_form_is_near_the_exact_diffusion_wave(void **state)
{
    (void)state;
    struct reference_table table = load_table();
    double limit[ROWS], peak = 0.0, exact_peak = 0.0;
    double *exact = reference_table_column(&table, "outflow_hayami_exact");
    solve_limit(limit);
    for (size_t row = 0; row < ROWS; row++) {
        peak = fmax(peak, limit[row]);
        exact_peak = fmax(exact_peak, exact[row]);
    }
    struct difference off = difference_of(limit, exact);
    print_message(
        "Thomas, the storage form's limit against linear diffusion: rms %.3f, worst %.3f ft2/s, peak %+.2f %%\n",
        off.rms, off.worst, 100.0 * (peak / exact_peak - 1.0));
    assert_true(fabs(peak - exact_peak) <= 0.01 * exact_peak);
    assert_true(off.worst <= 0.01 * 150.0);
    free(exact);
    reference_table_clear(&table);
}

/* --- at its full height ------------------------------------------------------------------------------------------- */

static double whole_wave_m3s(double t_s, const void *parameters)
{
    (void)parameters;
    return foot_m * foot_m * thomas_ft2_s(t_s);
}

static const struct section wide_channel = {.shape = SECTION_WIDE, .bottom_m = 1.0, .roughness_n = 0.02972};

static struct one_reach_result route_storage_form(double step_h, size_t cell_count)
{
    const struct one_reach whole = {.section = &wide_channel,
                                    .slope_m_per_m = 1.0 / mile_ft,
                                    .length_m = length_ft * foot_m,
                                    .method = NETWORK_MUSKINGUM_CUNGE,
                                    .time_step_s = step_h * hour_s,
                                    .cell_count = cell_count,
                                    .largest_m3s = 200.0 * foot_m * foot_m,
                                    .flood = whole_wave_m3s,
                                    .duration_s = 300.0 * hour_s};
    return route_one_reach(&whole);
}

static struct channel_result route_full_equations(void)
{
    const struct channel_case whole = {.section = wide_channel,
                                       .slope_m_per_m = 1.0 / mile_ft,
                                       .length_m = length_ft * foot_m,
                                       .cell_m = 2.5 * mile_ft * foot_m,
                                       .extension_m = length_ft * foot_m,
                                       .time_step_s = 900.0,
                                       .duration_s = 300.0 * hour_s,
                                       .flood = whole_wave_m3s,
                                       .largest_m3s = 20.0};
    return channel_run(&whole);
}

/*
 * From 50 to 200 ft2/s celerity and diffusivity change by a factor of 1.7 and 4: no published answer. The two
 * engines are held against each other, and each against its own finer grid.
 */
static void at_full_height_both_engines_agree(void **state)
{
    (void)state;
    static const struct {
        double step_h;
        size_t cell_count;
    } grids[] = {{6.0, 20}, {3.0, 40}, {0.5, 240}};
    struct channel_result full = route_full_equations();
    struct flood_peak expected = flood_peak_of(full.count, full.discharge_m3s, 900.0);
    double unit = foot_m * foot_m;
    print_message("Thomas at full height, full equations, 2.5 miles, 900 s: peak %.2f ft2/s at %.2f h, volume %.0e\n",
                  expected.discharge_m3s / unit, expected.time_s / hour_s, full.imbalance);
    assert_true(fabs(full.imbalance) <= 1e-12);
    assert_int_equal(full.counts.halved, 0);
    for (size_t grid = 0; grid < 3; grid++) {
        struct one_reach_result routed = route_storage_form(grids[grid].step_h, grids[grid].cell_count);
        struct flood_peak peak =
            flood_peak_of(routed.step_count + 1, routed.outflow_m3s, grids[grid].step_h * hour_s);
        double in = trapezoidal_volume_m3(routed.step_count, routed.inflow_m3s, routed.time_step_s);
        double out = trapezoidal_volume_m3(routed.step_count, routed.outflow_m3s, routed.time_step_s);
        double imbalance = (in - out - (routed.volume_end_m3 - routed.volume_start_m3)) / in;
        print_message("Thomas at full height, storage form, %3zu cells, %3.1f h: peak %.2f ft2/s at %.2f h, volume "
                      "%.0e\n",
                      grids[grid].cell_count, grids[grid].step_h, peak.discharge_m3s / unit, peak.time_s / hour_s,
                      imbalance);
        assert_true(fabs(imbalance) <= 1e-12);
        assert_int_equal(routed.steps_below_zero, 0);
        if (grid > 0) { /* 6 h is a coarse step for a front that rises in 10 */
            assert_true(fabs(peak.discharge_m3s / expected.discharge_m3s - 1.0) <= 0.01);
            assert_true(fabs(peak.time_s - expected.time_s) <= hour_s);
        }
        one_reach_result_clear(&routed);
    }
    channel_result_clear(&full);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_muskingum_cunge_column_comes_out),
        cmocka_unit_test(the_storage_form_converges_to_its_own_exact_limit),
        cmocka_unit_test(the_limit_of_the_storage_form_is_near_the_exact_diffusion_wave),
        cmocka_unit_test(at_full_height_both_engines_agree),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
