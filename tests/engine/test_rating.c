/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "engine/rating.h"
#include "tests/engine/reference_table.h"

static const double FOR_EVER = (double)INFINITY;
static const double NO_NUMBER = (double)NAN;

static void assert_near(double value, double expected, double tolerance, const char *what)
{
    if (!(fabs(value - expected) <= tolerance))
        fail_msg("%s: %.17g, expected %.17g within %g", what, value, expected, tolerance);
}

/* Orlin Scar: two segments, joined at 2.60 m. */
static struct rating orlin_scar(void)
{
    return (struct rating){.segment_count = 2,
                           .segments = {{2.60, 11.8, 0.42, 1.72}, {FOR_EVER, 0, 0.42, 2.15}},
                           .highest_gauged_m = 2.38,
                           .spread = 0.12};
}

/* Three controls: a notch, a riffle below which the notch begins, the banks; each with its own stage of zero flow. */
static struct rating three_controls(void)
{
    return (struct rating){.segment_count = 3,
                           .segments = {{0.87, 3.4, -0.13, 2.5}, {2.31, 0, 0.21, 1.55}, {FOR_EVER, 0, -0.62, 3.9}},
                           .highest_gauged_m = FOR_EVER};
}

static struct rating table_from_dry(void)
{
    return (struct rating){.table_count = 5,
                           .table_stage_m = {-0.31, 0.17, 0.94, 2.05, 3.62},
                           .table_discharge_m3s = {0, 0.83, 7.91, 33.7, 118.3},
                           .highest_gauged_m = 1.77};
}

static struct rating table_from_running(void)
{
    return (struct rating){.table_count = 3,
                           .table_stage_m = {0.64, 0.94, 2.05},
                           .table_discharge_m3s = {2.4, 7.9, 33.7},
                           .highest_gauged_m = FOR_EVER};
}

static void complete(struct rating *rating)
{
    const char *fault = "";
    size_t index = 0;
    if (rating_complete(rating, &fault, &index) != FW_OK)
        fail_msg("row %zu: %s", index, fault);
}

/* The fourth decimal of 8.440 is rounded off. */
static void the_upper_coefficient_of_the_demonstration_gauge_is_8_440(void **state)
{
    (void)state;
    struct rating rating = orlin_scar();
    complete(&rating);
    assert_near(rating.segments[1].coefficient, 8.440, 0.0005, "coefficient");
    assert_near(rating_discharge_m3s(&rating, 1.02, NULL), 11.8 * pow(0.60, 1.72), 1e-12, "18:00 of the night");
    assert_near(rating_discharge_m3s(&rating, 3.41, NULL), 8.440 * pow(2.99, 2.15), 0.006, "04:20 of the night");
}

static void the_curve_is_continuous_at_every_joint(void **state)
{
    (void)state;
    struct rating rows[] = {orlin_scar(), three_controls()};
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        complete(&rows[row]);
        for (size_t joint = 0; joint + 1 < rows[row].segment_count; joint++) {
            double stage_m = rows[row].segments[joint].to_stage_m;
            double below_m3s = rating_discharge_m3s(&rows[row], stage_m, NULL);
            double above_m3s = rating_discharge_m3s(&rows[row], nextafter(stage_m, 1e9), NULL);
            assert_near(above_m3s, below_m3s, 1e-13 * below_m3s, "just above the joint");
        }
    }
}

static void completing_twice_changes_nothing(void **state)
{
    (void)state;
    struct rating once = three_controls();
    complete(&once);
    struct rating twice = once;
    complete(&twice);
    for (size_t segment = 0; segment < 3; segment++)
        assert_true(once.segments[segment].coefficient == twice.segments[segment].coefficient);
}

static void discharge_is_zero_at_and_below_the_cease_to_flow_stage(void **state)
{
    (void)state;
    struct rating rows[] = {orlin_scar(), three_controls(), table_from_dry(), table_from_running()};
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        complete(&rows[row]);
        double dry_m = rating_cease_to_flow_stage_m(&rows[row]);
        assert_true(rating_discharge_m3s(&rows[row], dry_m, NULL) == 0);
        assert_true(rating_discharge_m3s(&rows[row], dry_m - 1e-9, NULL) == 0);
        assert_true(rating_discharge_m3s(&rows[row], -100, NULL) == 0);
        assert_true(rating_discharge_m3s(&rows[row], dry_m + 1e-6, NULL) > 0);
        assert_true(rating_stage_m(&rows[row], 0, NULL) == dry_m);
        assert_true(rating_stage_m(&rows[row], -7.3, NULL) == dry_m);
    }
    assert_near(rating_cease_to_flow_stage_m(&rows[0]), 0.42, 0, "segments");
    assert_near(rating_cease_to_flow_stage_m(&rows[2]), -0.31, 0, "a table that begins dry");
    assert_near(rating_cease_to_flow_stage_m(&rows[3]), 0.64 - 0.30 * 2.4 / 5.5, 1e-15,
                "the first two rows, carried on");
}

/* A handful of roundings each way, raised by exponents up to 6: a few 1e-15. What is promised is 1e-12. */
static void stage_to_discharge_and_back_is_the_same_stage(void **state)
{
    (void)state;
    struct rating rows[] = {orlin_scar(), three_controls(), table_from_dry(), table_from_running()};
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        complete(&rows[row]);
        double dry_m = rating_cease_to_flow_stage_m(&rows[row]), before_m3s = 0;
        for (double above_m = 1e-4; above_m < 9; above_m = above_m * 1.013 + 1e-5) {
            struct rating_flags there, back;
            double stage_m = dry_m + above_m;
            double discharge_m3s = rating_discharge_m3s(&rows[row], stage_m, &there);
            assert_true(discharge_m3s > before_m3s);
            assert_near(rating_stage_m(&rows[row], discharge_m3s, &back), stage_m, 1e-12 * fmax(1, fabs(stage_m)),
                        "stage");
            assert_int_equal(there.is_outside_table, back.is_outside_table);
            assert_int_equal(there.is_beyond_highest_gauging, back.is_beyond_highest_gauging);
            before_m3s = discharge_m3s;
        }
    }
}

static void a_table_is_met_at_its_rows_and_straight_between_them(void **state)
{
    (void)state;
    struct rating rating = table_from_dry();
    complete(&rating);
    for (size_t row = 0; row < rating.table_count; row++) {
        struct rating_flags flags;
        assert_near(rating_discharge_m3s(&rating, rating.table_stage_m[row], &flags), rating.table_discharge_m3s[row],
                    1e-13, "at a row");
        assert_false(flags.is_outside_table);
    }
    assert_near(rating_discharge_m3s(&rating, 0.17 + 0.25 * 0.77, NULL), 0.83 + 0.25 * 7.08, 1e-13, "a quarter on");
}

static void a_stage_outside_the_table_is_carried_on_and_flagged(void **state)
{
    (void)state;
    struct rating dry = table_from_dry(), running = table_from_running();
    complete(&dry);
    complete(&running);
    struct rating_flags flags;
    assert_near(rating_discharge_m3s(&dry, 5.19, &flags), 118.3 + 84.6, 1e-12, "as far again above the last row");
    assert_true(flags.is_outside_table);
    assert_near(rating_stage_m(&dry, 118.3 + 42.3, &flags), 3.62 + 0.785, 1e-12, "half as far again");
    assert_true(flags.is_outside_table);
    assert_near(rating_discharge_m3s(&running, 0.58, &flags), 2.4 - 5.5 * 0.06 / 0.30, 1e-12, "below the first row");
    assert_true(flags.is_outside_table);
    rating_stage_m(&running, 1.3, &flags);
    assert_true(flags.is_outside_table);
    rating_stage_m(&running, 0, &flags);
    assert_true(flags.is_outside_table); /* where it falls dry was never measured */
    rating_stage_m(&dry, 0, &flags);
    assert_false(flags.is_outside_table); /* here it was */
    rating_discharge_m3s(&dry, -0.32, &flags);
    assert_true(flags.is_outside_table);
}

static void a_stage_beyond_the_highest_gauging_is_flagged_both_ways(void **state)
{
    (void)state;
    struct rating gauged = orlin_scar(), unstated = three_controls();
    complete(&gauged);
    complete(&unstated);
    struct rating_flags flags = {.is_outside_table = true};
    double highest_m3s = rating_discharge_m3s(&gauged, 2.38, &flags);
    assert_false(flags.is_beyond_highest_gauging || flags.is_outside_table);
    rating_discharge_m3s(&gauged, 2.3801, &flags);
    assert_true(flags.is_beyond_highest_gauging && !flags.is_outside_table);
    rating_stage_m(&gauged, highest_m3s * 1.001, &flags);
    assert_true(flags.is_beyond_highest_gauging);
    rating_stage_m(&gauged, highest_m3s * 0.999, &flags);
    assert_false(flags.is_beyond_highest_gauging);
    rating_discharge_m3s(&unstated, 19.3, &flags);
    assert_false(flags.is_beyond_highest_gauging);
}

static void no_number_gives_no_number(void **state)
{
    (void)state;
    struct rating rows[] = {orlin_scar(), table_from_dry()};
    for (size_t row = 0; row < 2; row++) {
        complete(&rows[row]);
        assert_true(isnan(rating_discharge_m3s(&rows[row], NO_NUMBER, NULL)));
        assert_true(isnan(rating_stage_m(&rows[row], NO_NUMBER, NULL)));
    }
}

/* --- published numbers ------------------------------------------------------------------------------------------ */

/*
 * Source: Subramanya, Engineering Hydrology, worked example on the stage-discharge relation: the curve fitted to its
 * gaugings at each gauged stage, and the standard error of ln Q. Coefficients are given to 7 digits: 1e-4 relative.
 */
static void the_published_gaugings_have_the_published_curve_and_standard_error(void **state)
{
    (void)state;
    struct rating rating = {.segment_count = 1,
                            .segments = {{FOR_EVER, 275.5217, 7.50, 1.455786}},
                            .highest_gauged_m = 11.70,
                            .spread = 0.22768};
    complete(&rating);
    struct reference_table table = reference_table_load("rating_subramanya_gaugings.csv");
    double squares = 0;
    for (size_t row = 0; row < table.row_count; row++) {
        double fitted_m3s = rating_discharge_m3s(&rating, reference_table_number(&table, row, "stage_m"), NULL);
        double expected_m3s = reference_table_number(&table, row, "fitted_m3_s");
        assert_near(fitted_m3s, expected_m3s, 1e-4 * expected_m3s, "fitted discharge");
        double residual = log(reference_table_number(&table, row, "discharge_m3_s") / fitted_m3s);
        assert_near(residual, reference_table_number(&table, row, "residual_ln"), 1e-4, "residual of ln Q");
        squares += residual * residual;
    }
    struct reference_table formulas = reference_table_load("rating_formulas.csv");
    size_t row = reference_table_find(&formulas, "item", "standard error of ln Q");
    assert_near(sqrt(squares / (double)(table.row_count - 2)), reference_table_number(&formulas, row, "result"), 1e-4,
                "standard error");
    assert_near(rating_discharge_m3s(&rating, 9.00, NULL), 497.17, 0.05, "at 9.00 m");
    assert_near(rating_stage_m(&rating, 3500, NULL), 13.2318, 1e-4, "for 3500 m3/s");
    reference_table_clear(&formulas);
    reference_table_clear(&table);
}

/*
 * Source: ISO 1100-2, Johnson's construction: with Q2^2 = Q1 Q3 the stage of zero flow is
 * (h1 h3 - h2^2) / (h1 + h3 - 2 h2). Our stages of 5, 20 and 80 m3/s must give back the stage they were made with.
 */
static void three_stages_in_geometric_progression_give_the_published_zero_flow_stage(void **state)
{
    (void)state;
    struct rating rating = {
        .segment_count = 1, .segments = {{FOR_EVER, 20, 0.35, 1.7}}, .highest_gauged_m = FOR_EVER};
    complete(&rating);
    struct reference_table table = reference_table_load("rating_formulas.csv");
    double h1 = rating_stage_m(&rating, 5, NULL), h2 = rating_stage_m(&rating, 20, NULL),
           h3 = rating_stage_m(&rating, 80, NULL);
    assert_near((h1 * h3 - h2 * h2) / (h1 + h3 - 2 * h2), reference_table_number(&table, 0, "result"), 1e-4 * 0.35,
                reference_table_text(&table, 0, "item"));
    reference_table_clear(&table);
}

/* --- what is refused -------------------------------------------------------------------------------------------- */

static void assert_refused(const struct rating *rating, const char *reason, size_t index, const char *shows)
{
    struct rating copy = *rating;
    const char *fault = "";
    size_t where = 4711;
    if (rating_complete(&copy, &fault, &where) != FW_BAD_INPUT)
        fail_msg("%s: accepted", shows);
    if (strstr(fault, reason) == NULL || where != index)
        fail_msg("%s: '%s' at %zu", shows, fault, where);
    assert_true(rating_complete(&copy, NULL, NULL) == FW_BAD_INPUT);
    for (size_t segment = 0; segment < RATING_SEGMENTS_MAX; segment++) /* unchanged, no coefficient filled in */
        assert_memory_equal(&copy.segments[segment].coefficient, &rating->segments[segment].coefficient,
                            sizeof(double));
}

static void segments_that_cannot_be_are_refused_with_place_and_reason(void **state)
{
    (void)state;
    static const struct {
        const char *shows, *reason;
        struct rating_segment segments[3];
        size_t count, index;
    } rows[] = {
        {"no coefficient", "coefficient", {{FOR_EVER, 0, 0.4, 1.7}}, 1, 0},
        {"coefficient below zero", "coefficient", {{FOR_EVER, -3, 0.4, 1.7}}, 1, 0},
        {"coefficient no number", "coefficient", {{FOR_EVER, NO_NUMBER, 0.4, 1.7}}, 1, 0},
        {"coefficient without end", "coefficient", {{FOR_EVER, FOR_EVER, 0.4, 1.7}}, 1, 0},
        {"zero flow no number", "zero_flow_stage_m", {{FOR_EVER, 3, NO_NUMBER, 1.7}}, 1, 0},
        {"exponent too small", "exponent", {{FOR_EVER, 3, 0.4, 0.19}}, 1, 0},
        {"exponent too large", "exponent", {{FOR_EVER, 3, 0.4, 6.1}}, 1, 0},
        {"exponent no number", "exponent", {{2, 3, 0.4, 1.7}, {FOR_EVER, 0, 0.4, NO_NUMBER}}, 2, 1},
        {"last has an end", "no upper end", {{2, 3, 0.4, 1.7}}, 1, 0},
        {"last ends at no number", "no upper end", {{NO_NUMBER, 3, 0.4, 1.7}}, 1, 0},
        {"last ends in the depths", "no upper end", {{-FOR_EVER, 3, 0.4, 1.7}}, 1, 0},
        {"first has no end", "needs an upper end", {{FOR_EVER, 3, 0.4, 1.7}, {FOR_EVER, 0, 0.4, 2}}, 2, 0},
        {"first ends dry", "above the stage of zero flow", {{0.4, 3, 0.4, 1.7}, {FOR_EVER, 0, 0.1, 2}}, 2, 0},
        {"second ends below the first",
         "segment before",
         {{2, 3, 0.4, 1.7}, {2, 0, 0.4, 2}, {FOR_EVER, 0, 0.4, 2}},
         3,
         1},
        {"second begins dry", "below the joint", {{2, 3, 0.4, 1.7}, {FOR_EVER, 0, 2, 2}}, 2, 1},
        {"a joint that overflows", "continuous", {{2, 1e308, 0.4, 1.7}, {FOR_EVER, 0, 1.9999, 6}}, 2, 1},
    };
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        struct rating rating = {.segment_count = rows[row].count, .highest_gauged_m = FOR_EVER};
        for (size_t segment = 0; segment < rows[row].count; segment++)
            rating.segments[segment] = rows[row].segments[segment];
        assert_refused(&rating, rows[row].reason, rows[row].index, rows[row].shows);
    }
}

static void tables_that_cannot_be_are_refused_with_place_and_reason(void **state)
{
    (void)state;
    static const struct {
        const char *shows, *reason;
        double stage_m[3], discharge_m3s[3];
        size_t count, index;
    } rows[] = {
        {"one row", "at least 2", {0.3}, {0}, 1, 0},
        {"stages equal", "table_stage_m", {0.3, 0.9, 0.9}, {0, 4, 9}, 3, 2},
        {"stages fall", "table_stage_m", {0.3, 0.2, 0.9}, {0, 4, 9}, 3, 1},
        {"discharge equal", "table_discharge_m3s", {0.3, 0.7, 0.9}, {0, 4, 4}, 3, 2},
        {"discharge falls", "table_discharge_m3s", {0.3, 0.7, 0.9}, {0, 4, 3}, 3, 2},
        {"discharge below zero", "table_discharge_m3s", {0.3, 0.7, 0.9}, {-1, 4, 9}, 3, 0},
        {"stage no number", "table_stage_m", {0.3, NO_NUMBER, 0.9}, {0, 4, 9}, 3, 1},
        {"discharge without end", "table_discharge_m3s", {0.3, 0.7, 0.9}, {0, 4, FOR_EVER}, 3, 2},
    };
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        struct rating rating = {.table_count = rows[row].count, .highest_gauged_m = FOR_EVER};
        for (size_t index = 0; index < rows[row].count; index++) {
            rating.table_stage_m[index] = rows[row].stage_m[index];
            rating.table_discharge_m3s[index] = rows[row].discharge_m3s[index];
        }
        assert_refused(&rating, rows[row].reason, rows[row].index, rows[row].shows);
    }
}

static void a_rating_of_nothing_of_too_much_or_with_a_wrong_limit_is_refused(void **state)
{
    (void)state;
    struct rating rating = {.highest_gauged_m = FOR_EVER};
    assert_refused(&rating, "there are none", 0, "empty");
    rating.segment_count = RATING_SEGMENTS_MAX + 1;
    assert_refused(&rating, "more than 8", 0, "nine segments");
    rating = (struct rating){.table_count = RATING_TABLE_MAX + 1, .highest_gauged_m = FOR_EVER};
    assert_refused(&rating, "more than 256", 0, "257 rows");
    rating = table_from_dry();
    rating.segment_count = 1;
    assert_refused(&rating, "only one of the two", 0, "segments and a table");
    static const double gauged_m[] = {0.42, -3, NO_NUMBER, -FOR_EVER};
    for (size_t row = 0; row < sizeof gauged_m / sizeof *gauged_m; row++) {
        rating = orlin_scar();
        rating.highest_gauged_m = gauged_m[row];
        assert_refused(&rating, "highest_gauged_m", 0, "highest gauging");
    }
    static const double spreads[] = {-0.01, NO_NUMBER, FOR_EVER};
    for (size_t row = 0; row < sizeof spreads / sizeof *spreads; row++) {
        rating = orlin_scar();
        rating.spread = spreads[row];
        assert_refused(&rating, "spread", 0, "spread");
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_upper_coefficient_of_the_demonstration_gauge_is_8_440),
        cmocka_unit_test(the_curve_is_continuous_at_every_joint),
        cmocka_unit_test(completing_twice_changes_nothing),
        cmocka_unit_test(discharge_is_zero_at_and_below_the_cease_to_flow_stage),
        cmocka_unit_test(stage_to_discharge_and_back_is_the_same_stage),
        cmocka_unit_test(a_table_is_met_at_its_rows_and_straight_between_them),
        cmocka_unit_test(a_stage_outside_the_table_is_carried_on_and_flagged),
        cmocka_unit_test(a_stage_beyond_the_highest_gauging_is_flagged_both_ways),
        cmocka_unit_test(no_number_gives_no_number),
        cmocka_unit_test(the_published_gaugings_have_the_published_curve_and_standard_error),
        cmocka_unit_test(three_stages_in_geometric_progression_give_the_published_zero_flow_stage),
        cmocka_unit_test(segments_that_cannot_be_are_refused_with_place_and_reason),
        cmocka_unit_test(tables_that_cannot_be_are_refused_with_place_and_reason),
        cmocka_unit_test(a_rating_of_nothing_of_too_much_or_with_a_wrong_limit_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
