/* SPDX-License-Identifier: MIT */
/*
 * The storage form as the linear Muskingum scheme, against published numbers: with one celerity and one diffusivity
 * (linear_river.h) it must be that scheme, coefficient by coefficient. And the published fits to recorded floods, which
 * say whether the series in tests/reference/ are copied right.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdbool.h>
#include <stdio.h>
#include <string.h>

#include "tests/engine/linear_river.h"
#include "tests/engine/reference_table.h"

struct coefficients { /* O' = new_inflow I' + old_inflow I + old_outflow O */
    double new_inflow, old_inflow, old_outflow;
};

/* Out of the kernel itself: the answer of one cell, at rest at 1, to an inflow of 2. */
static struct coefficients coefficients_of(const struct linear_reach *reach)
{
    struct linear_river river;
    linear_river_init(&river, reach, 1.0);
    double first = linear_river_step(&river, 2.0) - 1.0;
    double second = linear_river_step(&river, 2.0) - 1.0;
    double third = linear_river_step(&river, 2.0) - 1.0;
    linear_river_clear(&river);
    /* first = a, second = a + b + c a, third = a + b + c second */
    double c = (third - second) / (second - first);
    return (struct coefficients){first, second - first - c * first, c};
}

static double named(const struct reference_table *table, const char *quantity, const char *column)
{
    return reference_table_number(table, reference_table_find(table, "quantity", quantity), column);
}

static void the_published_muskingum_cunge_coefficients_come_out(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("muskingum_cunge_coefficients.csv");
    static const char *const columns[] = {"value_recomputed", "value_published"};
    double velocity = named(&table, "Qp_m3_s", columns[0]) / named(&table, "Ap_m2", columns[0]);
    double unit_flow = named(&table, "Qp_m3_s", columns[0]) / named(&table, "Tp_m", columns[0]);
    const struct linear_reach reach = {.celerity = named(&table, "beta", columns[0]) * velocity,
                                       .diffusivity = unit_flow / (2.0 * named(&table, "S0", columns[0])),
                                       .cell_length = named(&table, "dx_m", columns[0]),
                                       .time_step = named(&table, "dt_s", columns[0]),
                                       .cell_count = 1};
    struct coefficients got = coefficients_of(&reach);
    double courant = reach.celerity * reach.time_step / reach.cell_length;
    double diffusion = 2.0 * reach.diffusivity / (reach.celerity * reach.cell_length);
    const struct {
        const char *name;
        double value;
    } quantities[] = {{"V_m_s", velocity},    {"c_m_s", reach.celerity}, {"q0_m2_s", unit_flow},
                      {"C", courant},         {"D", diffusion},          {"C0", got.new_inflow},
                      {"C1", got.old_inflow}, {"C2", got.old_outflow}};
    double worst = 0.0;
    for (size_t i = 0; i < sizeof quantities / sizeof *quantities; i++)
        for (size_t column = 0; column < 2; column++) {
            double expected = named(&table, quantities[i].name, columns[column]);
            worst = fmax(worst, fabs(quantities[i].value - expected));
            /* the published celerity is the product of rounded numbers, 1.714 x 1.65 cut to 2.828 */
            if (!(fabs(quantities[i].value - expected) <=
                  (strcmp(quantities[i].name, "c_m_s") == 0 ? 0.001 : 0.0005)))
                fail_msg("%s: %.5f, expected %.5f", quantities[i].name, quantities[i].value, expected);
        }
    double sum = got.new_inflow + got.old_inflow + got.old_outflow;
    print_message(
        "Ponce's example: C0 %.5f, C1 %.5f, C2 %.5f out of the kernel, sum off by %.0e; worst of 16 values %.5f\n",
        got.new_inflow, got.old_inflow, got.old_outflow, sum - 1.0, worst);
    assert_true(fabs(sum - 1.0) <= 1e-12);
    reference_table_clear(&table);
}

/* The plain formula, as textbooks print it; X may be anything. */
static struct coefficients textbook(double k, double x, double step)
{
    double below = 2.0 * k * (1.0 - x) + step;
    return (struct coefficients){(step - 2.0 * k * x) / below, (step + 2.0 * k * x) / below,
                                 (2.0 * k * (1.0 - x) - step) / below};
}

static void the_published_muskingum_example_comes_out(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("chow1988_8_4_1_muskingum.csv");
    const struct linear_reach reach = linear_reach_of_muskingum(2.3, 0.15, 1.0);
    struct coefficients got = coefficients_of(&reach);
    assert_true(fabs(got.new_inflow - 0.063136) <= 1e-6);
    assert_true(fabs(got.old_inflow - 0.344196) <= 1e-6);
    assert_true(fabs(got.old_outflow - 0.592668) <= 1e-6);
    double worst = 0.0, worst_published = 0.0;
    struct linear_river river;
    linear_river_init(&river, &reach, 85.0);
    linear_river_set(&river, reference_table_number(&table, 0, "inflow_cfs"), 85.0);
    assert_int_equal(table.row_count, 20);
    for (size_t row = 0; row < table.row_count; row++) {
        if (row > 0)
            linear_river_step(&river, reference_table_number(&table, row, "inflow_cfs"));
        double exact = reference_table_number(&table, row, "outflow_unrounded_coeffs");
        double published = reference_table_number(&table, row, "outflow_published_cfs");
        worst = fmax(worst, fabs(river.outflow - exact));
        worst_published = fmax(worst_published, fabs(river.outflow - published));
    }
    print_message("Chow 1988, Example 8.4.1: 20 outflows within %.5f cfs of the unrounded, %.2f cfs of the printed\n",
                  worst, worst_published);
    assert_true(worst <= 0.005);
    assert_true(worst_published <= 1.0);
    linear_river_clear(&river);
    reference_table_clear(&table);
}

/* --- recorded floods ---------------------------------------------------------------------------------------------- */

struct flood {
    size_t count;
    double *inflow, *outflow;
};

static struct flood load_flood(const char *event)
{
    char name[64];
    snprintf(name, sizeof name, "flood_%s.csv", event);
    struct reference_table table = reference_table_load(name);
    struct flood flood = {table.row_count, reference_table_column(&table, "inflow"),
                          reference_table_column(&table, "outflow")};
    reference_table_clear(&table);
    return flood;
}

static void clear_flood(struct flood *flood)
{
    free(flood->inflow);
    free(flood->outflow);
}

/* Sum of squared errors of the outflow, from the observed first one on. */
static double squares_of_textbook(const struct flood *flood, double k, double x, double step)
{
    struct coefficients c = textbook(k, x, step);
    double outflow = flood->outflow[0], sum = 0.0;
    for (size_t i = 1; i < flood->count; i++) {
        outflow = c.new_inflow * flood->inflow[i] + c.old_inflow * flood->inflow[i - 1] + c.old_outflow * outflow;
        sum += pow(outflow - flood->outflow[i], 2.0);
    }
    return sum;
}

static double squares_of_storage_form(const struct flood *flood, double k, double x, double step)
{
    const struct linear_reach reach = linear_reach_of_muskingum(k, x, step);
    struct linear_river river;
    double sum = 0.0;
    linear_river_init(&river, &reach, flood->outflow[0]);
    linear_river_set(&river, flood->inflow[0], flood->outflow[0]);
    for (size_t i = 1; i < flood->count; i++)
        sum += pow(linear_river_step(&river, flood->inflow[i]) - flood->outflow[i], 2.0);
    linear_river_clear(&river);
    return sum;
}

/* How far K and X are from the least squares: Newton's step, relative. */
static double step_to_least(const struct flood *flood, double k, double x, double step)
{
    double dk = 1e-3 * k, dx = 1e-3 * fabs(x), here = squares_of_textbook(flood, k, x, step);
    double up = squares_of_textbook(flood, k + dk, x, step), down = squares_of_textbook(flood, k - dk, x, step);
    double right = squares_of_textbook(flood, k, x + dx, step), left = squares_of_textbook(flood, k, x - dx, step);
    double cross =
        (squares_of_textbook(flood, k + dk, x + dx, step) - squares_of_textbook(flood, k + dk, x - dx, step) -
         squares_of_textbook(flood, k - dk, x + dx, step) + squares_of_textbook(flood, k - dk, x - dx, step)) /
        4.0;
    double kk = up - 2.0 * here + down, xx = right - 2.0 * here + left;
    double by_k = 0.5 * (up - down), by_x = 0.5 * (right - left);
    double determinant = kk * xx - cross * cross;
    assert_true(kk > 0.0 && determinant > 0.0);
    return 1e-3 * fmax(fabs(xx * by_k - cross * by_x), fabs(kk * by_x - cross * by_k)) / determinant;
}

static void check_facts(const struct reference_table *table, size_t row, const struct flood *flood, double step)
{
    double in = 0.0, out = 0.0;
    size_t top_in = 0, top_out = 0;
    for (size_t i = 1; i < flood->count; i++) {
        in += 0.5 * (flood->inflow[i - 1] + flood->inflow[i]);
        out += 0.5 * (flood->outflow[i - 1] + flood->outflow[i]);
        top_in = flood->inflow[i] > flood->inflow[top_in] ? i : top_in;
        top_out = flood->outflow[i] > flood->outflow[top_out] ? i : top_out;
    }
    assert_true((double)flood->count == reference_table_number(table, row, "n"));
    assert_true(flood->inflow[top_in] == reference_table_number(table, row, "peak_in"));
    assert_true(flood->outflow[top_out] == reference_table_number(table, row, "peak_out"));
    assert_true((double)top_in * step == reference_table_number(table, row, "t_peak_in_h"));
    assert_true((double)top_out * step == reference_table_number(table, row, "t_peak_out_h"));
    assert_true(fabs(out / in - reference_table_number(table, row, "volume_ratio")) <= 1e-5);
}

/*
 * Where the fitted K and X leave no coefficient below zero the storage form is the fitted rule. Where the first would
 * be below zero (a step shorter than 2 K X: outflow dips as inflow rises) the storage form spreads the wave as little as
 * a monotone scheme can, which is X = step / (2 K), and must be that rule.
 */
static void the_fitted_linear_rules_come_out_or_are_held_to_the_monotone_one(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("flood_facts_and_linear_fits.csv");
    assert_int_equal(table.row_count, 4);
    size_t held_back = 0;
    for (size_t row = 0; row < table.row_count; row++) {
        const char *event = reference_table_text(&table, row, "event");
        struct flood flood = load_flood(event);
        double step = reference_table_number(&table, row, "dt_h");
        double k = reference_table_number(&table, row, "K_h"), x = reference_table_number(&table, row, "x");
        double expected = reference_table_number(&table, row, "SSQ");
        double plain = squares_of_textbook(&flood, k, x, step);
        double least_x = fmin(x, step / (2.0 * k));
        double monotone = squares_of_textbook(&flood, k, least_x, step);
        double stored = squares_of_storage_form(&flood, k, x, step);
        double mean = 0.0, spread = 0.0;
        for (size_t i = 0; i < flood.count; i++)
            mean += flood.outflow[i] / (double)flood.count;
        for (size_t i = 0; i < flood.count; i++)
            spread += pow(flood.outflow[i] - mean, 2.0);
        check_facts(&table, row, &flood, step);
        print_message(
            "%-20s K %.3f h, X %+.3f: squares %.3f of the file, %.3f plain, %.3f storage form (X %+.3f there), "
            "efficiency %.4f and %.4f; least squares %.0e away\n",
            event, k, x, expected, plain, stored, least_x, 1.0 - plain / spread, 1.0 - stored / spread,
            step_to_least(&flood, k, x, step));
        assert_true(fabs(plain - expected) <= 1e-4 * expected);
        assert_true(fabs(1.0 - plain / spread - reference_table_number(&table, row, "NSE")) <= 1e-5);
        assert_true(step_to_least(&flood, k, x, step) <= 1e-3);
        assert_true(fabs(stored - monotone) <= 1e-4 * monotone);
        held_back += least_x < x;
        clear_flood(&flood);
    }
    assert_int_equal(held_back, 2); /* Wilson and Wye: 6 h is shorter than 2 K X */
    reference_table_clear(&table);
}

/*
 * S = K (x I + (1 - x) O)^m by the published explicit procedure: a rule for one lumped store, fitted to one flood. The
 * engine has none such, by intention; this says that the two series stand here as they were published.
 */
static void the_published_nonlinear_fits_hold_for_the_series_as_they_stand_here(void **state)
{
    (void)state;
    struct reference_table table = reference_table_load("flood_published_nonlinear_fits.csv");
    assert_int_equal(table.row_count, 2);
    for (size_t row = 0; row < table.row_count; row++) {
        const char *event = reference_table_text(&table, row, "event");
        struct flood flood = load_flood(event);
        double k = reference_table_number(&table, row, "K"), x = reference_table_number(&table, row, "x");
        double m = reference_table_number(&table, row, "m"),
               step = reference_table_number(&table, row, "time_unit_h");
        double outflow = flood.outflow[0], sum = 0.0;
        sscanf(reference_table_text(&table, row, "initial_outflow"), "inflow %lf", &outflow); /* else observed */
        double store = k * pow(x * flood.inflow[0] + (1.0 - x) * outflow, m);
        sum += pow(outflow - flood.outflow[0], 2.0);
        for (size_t i = 1; i < flood.count; i++) {
            store += step * (flood.inflow[i - 1] - pow(store / k, 1.0 / m)) / (1.0 - x);
            outflow = pow(store / k, 1.0 / m) / (1.0 - x) - x / (1.0 - x) * flood.inflow[i - 1];
            sum += pow(outflow - flood.outflow[i], 2.0);
        }
        print_message("%s, three parameters: squares %.4f, published %.2f\n", event, sum,
                      reference_table_number(&table, row, "SSQ_published"));
        assert_true(fabs(sum - reference_table_number(&table, row, "SSQ_published")) <= 0.01);
        assert_true(fabs(sum - reference_table_number(&table, row, "SSQ_recomputed")) <= 0.001);
        clear_flood(&flood);
    }
    reference_table_clear(&table);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_published_muskingum_cunge_coefficients_come_out),
        cmocka_unit_test(the_published_muskingum_example_comes_out),
        cmocka_unit_test(the_fitted_linear_rules_come_out_or_are_held_to_the_monotone_one),
        cmocka_unit_test(the_published_nonlinear_fits_hold_for_the_series_as_they_stand_here),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
