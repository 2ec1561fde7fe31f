/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdbool.h>
#include <stdlib.h>

#include "engine/series.h"

enum { SAMPLES_MAX = 1024, VALUES_MAX = 512 };

static const int64_t EVENING_UTC_S =
    1794330437; /* an awkward second of an evening, in the magnitude of real stamps */
static const int64_t HOUR_S = 3600;

struct samples {
    size_t count;
    int64_t observed_utc_s[SAMPLES_MAX];
    double value[SAMPLES_MAX];
};

static void assert_near(double value, double expected, double tolerance, const char *what)
{
    if (!(fabs(value - expected) <= tolerance))
        fail_msg("%s: %.17g, expected %.17g within %g", what, value, expected, tolerance);
}

/* Stage of a river that rises by 0.6 m/h, on a datum far below. */
static double straight_m(int64_t utc_s)
{
    return 126.40 + 1.05 + 0.6 / 3600 * (double)(utc_s - EVENING_UTC_S);
}

static void add(struct samples *samples, int64_t utc_s, double value)
{
    assert_true(samples->count < SAMPLES_MAX);
    samples->observed_utc_s[samples->count] = utc_s;
    samples->value[samples->count++] = value;
}

/* Reads a curve every 15 min, after two hours every 5 and after an hour more every minute. */
static struct samples logger_that_switches(double (*curve)(int64_t))
{
    struct samples samples = {0};
    for (int64_t age_s = 0; age_s <= 4 * HOUR_S; age_s += age_s < 2 * HOUR_S ? 900 : age_s < 3 * HOUR_S ? 300 : 60)
        add(&samples, EVENING_UTC_S + age_s, curve(EVENING_UTC_S + age_s));
    return samples;
}

static struct samples logger_at(int64_t interval_s, double (*curve)(int64_t))
{
    struct samples samples = {0};
    for (int64_t age_s = 0; age_s <= 4 * HOUR_S; age_s += interval_s)
        add(&samples, EVENING_UTC_S + age_s, curve(EVENING_UTC_S + age_s));
    return samples;
}

static double newest_rate(const struct samples *samples, int64_t window_s)
{
    return series_newest_rate_per_s(samples->count, samples->observed_utc_s, samples->value, window_s);
}

/* --- resampling ------------------------------------------------------------------------------------------------- */

static void origins_tell_measured_from_filled_from_assumed(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {1000, 1900, 2800, 6400, 7300};
    const double value[] = {1.02, 1.05, 1.14, 1.74, 1.71};
    static const struct {
        enum series_origin origin;
        double value;
    } rows[] = {
        {SERIES_ASSUMED, 1.02},  /*  700: before the first reading */
        {SERIES_MEASURED, 1.03}, /* 1300 */
        {SERIES_MEASURED, 1.05}, /* 1900: at a reading */
        {SERIES_MEASURED, 1.11}, /* 2500 */
        {SERIES_FILLED, 1.19},   /* 3100: in the gap of an hour */
        {SERIES_FILLED, 1.29},   /* 3700 */
        {SERIES_FILLED, 1.39},   /* 4300 */
        {SERIES_FILLED, 1.49},   /* 4900 */
        {SERIES_FILLED, 1.59},   /* 5500 */
        {SERIES_FILLED, 1.69},   /* 6100 */
        {SERIES_MEASURED, 1.73}, /* 6700 */
        {SERIES_MEASURED, 1.71}, /* 7300: the newest reading */
        {SERIES_ASSUMED, 1.71},  /* 7900: held on */
    };
    enum { COUNT = sizeof rows / sizeof *rows };
    double value_out[COUNT], alone_out[COUNT];
    enum series_origin origin_out[COUNT];
    assert_int_equal(series_resample(5, observed_utc_s, value, 700, 600, 900, COUNT, value_out, origin_out), FW_OK);
    for (size_t index = 0; index < COUNT; index++) {
        assert_near(value_out[index], rows[index].value, 1e-14, "value");
        assert_int_equal(origin_out[index], rows[index].origin);
    }
    assert_int_equal(series_resample(5, observed_utc_s, value, 700, 600, 900, COUNT, alone_out, NULL), FW_OK);
    assert_memory_equal(alone_out, value_out, sizeof value_out);
}

static void a_gap_of_exactly_the_limit_is_measured_and_a_second_more_is_not(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {0, 2700};
    const double value[] = {1.3, 1.9};
    double value_out;
    enum series_origin origin;
    assert_int_equal(series_resample(2, observed_utc_s, value, 900, 60, 2700, 1, &value_out, &origin), FW_OK);
    assert_int_equal(origin, SERIES_MEASURED);
    assert_int_equal(series_resample(2, observed_utc_s, value, 900, 60, 2699, 1, &value_out, &origin), FW_OK);
    assert_int_equal(origin, SERIES_FILLED);
    assert_near(value_out, 1.5, 1e-15, "value");
}

static void a_reading_between_two_gaps_is_still_measured(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {0, 7200, 14400};
    const double value[] = {1.3, 1.9, 1.7};
    double value_out[3];
    enum series_origin origin[3];
    assert_int_equal(series_resample(3, observed_utc_s, value, 7140, 60, 0, 3, value_out, origin), FW_OK);
    assert_int_equal(origin[0], SERIES_FILLED);
    assert_int_equal(origin[1], SERIES_MEASURED);
    assert_int_equal(origin[2], SERIES_FILLED);
    assert_true(value_out[1] == 1.9);
}

static void a_single_reading_is_held_both_ways(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {600};
    const double value[] = {2.31};
    double value_out[3];
    enum series_origin origin[3];
    assert_int_equal(series_resample(1, observed_utc_s, value, 0, 600, 900, 3, value_out, origin), FW_OK);
    for (size_t index = 0; index < 3; index++) {
        assert_true(value_out[index] == 2.31);
        assert_int_equal(origin[index], index == 1 ? SERIES_MEASURED : SERIES_ASSUMED);
    }
}

/* Values of 128 m carry 1.4e-14 m of rounding each; three of them meet in an interpolation. */
static void a_straight_rise_is_exact_however_the_logger_reads_it(void **state)
{
    (void)state;
    struct samples rows[] = {logger_at(900, straight_m), logger_at(300, straight_m), logger_at(60, straight_m),
                             logger_that_switches(straight_m), logger_at(1234, straight_m)};
    static const int64_t steps_s[] = {60, 300, 437};
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++)
        for (size_t step = 0; step < sizeof steps_s / sizeof *steps_s; step++) {
            double value_out[VALUES_MAX];
            enum series_origin origin_out[VALUES_MAX];
            int64_t start_utc_s = EVENING_UTC_S + 13;
            size_t count = (size_t)((13500 - 13) / steps_s[step]);
            assert_int_equal(series_resample(rows[row].count, rows[row].observed_utc_s, rows[row].value, start_utc_s,
                                             steps_s[step], 1300, count, value_out, origin_out),
                             FW_OK);
            for (size_t index = 0; index < count; index++) {
                assert_near(value_out[index], straight_m(start_utc_s + (int64_t)index * steps_s[step]), 6e-14,
                            "stage");
                assert_int_equal(origin_out[index], SERIES_MEASURED);
            }
        }
}

/* At random times, some far apart: every value lies between its neighbours and its origin follows the gap. */
static void resampled_values_never_leave_the_readings_about_them(void **state)
{
    (void)state;
    const unsigned seed = 20260317;
    print_message("seed %u\n", seed);
    srand(seed);
    for (int round = 0; round < 200; round++) {
        struct samples samples = {0};
        int64_t utc_s = EVENING_UTC_S;
        for (int sample = 0; sample < 40; sample++) {
            utc_s += 1 + rand() % (sample % 7 == 0 ? 9000 : 1200);
            add(&samples, utc_s, 1 + 3.0 * rand() / RAND_MAX);
        }
        double value_out[VALUES_MAX];
        enum series_origin origin_out[VALUES_MAX];
        int64_t start_utc_s = EVENING_UTC_S - 700, step_s = 97;
        assert_int_equal(series_resample(samples.count, samples.observed_utc_s, samples.value, start_utc_s, step_s,
                                         1000, VALUES_MAX, value_out, origin_out),
                         FW_OK);
        for (size_t index = 0; index < VALUES_MAX; index++) {
            int64_t time_utc_s = start_utc_s + (int64_t)index * step_s;
            size_t after = 0;
            while (after < samples.count && samples.observed_utc_s[after] < time_utc_s)
                after++;
            if (after == 0 || after == samples.count)
                continue;
            double a = samples.value[after - 1], b = samples.value[after];
            assert_true(value_out[index] >= fmin(a, b) && value_out[index] <= fmax(a, b));
            bool is_at_reading = samples.observed_utc_s[after] == time_utc_s;
            bool is_close = samples.observed_utc_s[after] - samples.observed_utc_s[after - 1] <= 1000;
            assert_int_equal(origin_out[index], is_at_reading || is_close ? SERIES_MEASURED : SERIES_FILLED);
        }
    }
}

static void samples_and_grids_that_cannot_be_are_refused_and_nothing_is_written(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        size_t sample_count;
        int64_t observed_utc_s[3];
        double value[3];
        int64_t start_utc_s, step_s, gap_limit_s;
        size_t value_count;
    } rows[] = {
        {"no sample", 0, {0}, {0}, 0, 60, 900, 2},
        {"step of nothing", 3, {1, 2, 3}, {1, 2, 3}, 0, 0, 900, 2},
        {"step backwards", 3, {1, 2, 3}, {1, 2, 3}, 0, -60, 900, 2},
        {"two readings at one time", 3, {1, 2, 2}, {1, 2, 3}, 0, 60, 900, 2},
        {"times that fall", 3, {1, 3, 2}, {1, 2, 3}, 0, 60, 900, 2},
        {"no number", 3, {1, 2, 3}, {1, (double)NAN, 3}, 0, 60, 900, 2},
        {"a number without end", 3, {1, 2, 3}, {1, 2, (double)INFINITY}, 0, 60, 900, 2},
        {"a gap limit below zero", 3, {1, 2, 3}, {1, 2, 3}, 0, 60, -1, 2},
        {"beyond the end of time", 3, {1, 2, 3}, {1, 2, 3}, INT64_MAX - 59, 60, 900, 2},
    };
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++) {
        double value_out[2] = {47.11, 47.11};
        enum series_origin origin_out[2] = {SERIES_FILLED, SERIES_FILLED};
        if (series_resample(rows[row].sample_count, rows[row].observed_utc_s, rows[row].value, rows[row].start_utc_s,
                            rows[row].step_s, rows[row].gap_limit_s, rows[row].value_count, value_out,
                            origin_out) != FW_BAD_INPUT)
            fail_msg("%s: accepted", rows[row].shows);
        assert_true(value_out[0] == 47.11 && value_out[1] == 47.11);
        assert_true(origin_out[0] == SERIES_FILLED && origin_out[1] == SERIES_FILLED);
    }
}

static void times_at_both_ends_of_the_calendar_are_taken(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {INT64_MIN, INT64_MAX};
    const double value[] = {1, 3};
    double value_out[3];
    enum series_origin origin[3];
    assert_int_equal(series_resample(2, observed_utc_s, value, INT64_MIN, INT64_MAX, INT64_MAX, 3, value_out, origin),
                     FW_OK);
    assert_true(value_out[0] == 1);
    assert_near(value_out[1], 2, 1e-15, "half way");
    assert_int_equal(origin[1], SERIES_FILLED);
    assert_int_equal(series_resample(2, observed_utc_s, value, 0, 60, 900, 0, NULL, NULL), FW_OK); /* none wanted */
}

/* --- rate ------------------------------------------------------------------------------------------------------- */

/* The slope is right to what rounding of 128 m (1.4e-14 m) leaves over the window. */
static void the_rate_of_a_straight_rise_is_its_slope_however_the_logger_reads_it(void **state)
{
    (void)state;
    struct samples rows[] = {logger_at(900, straight_m), logger_at(300, straight_m), logger_at(60, straight_m),
                             logger_that_switches(straight_m), logger_at(1234, straight_m)};
    static const int64_t windows_s[] = {-1, 0, 60, 1800, 3600, 100000};
    for (size_t row = 0; row < sizeof rows / sizeof *rows; row++)
        for (size_t count = 2; count <= rows[row].count; count++)
            for (size_t window = 0; window < sizeof windows_s / sizeof *windows_s; window++) {
                double rate =
                    series_newest_rate_per_s(count, rows[row].observed_utc_s, rows[row].value, windows_s[window]);
                assert_near(rate * 3600, 0.6, 2.9e-14 * 3600 / 60, "m/h");
            }
}

/* A rise that steepens: 0.1 m/h2 about the evening's beginning. */
static double steepening_m(int64_t utc_s)
{
    double hours = (double)(utc_s - EVENING_UTC_S) / 3600;
    return 1.05 + 0.05 * hours * hours;
}

/*
 * Over a window the least-squares line through a parabola has the slope of its middle: 0.1 m/h2 x 3.5 h at the end of
 * four hours, with a window of one. Readings that turn from 15 to 1 minute inside that window may miss it by a tenth
 * of what the rate itself changes in 15 minutes, 0.025 m/h; were all samples weighed alike, they would by a third.
 */
static void a_logger_that_reads_more_often_does_not_change_the_rate(void **state)
{
    (void)state;
    struct samples often = logger_at(60, steepening_m), seldom = logger_at(900, steepening_m), switched = {0};
    for (int64_t age_s = 0; age_s <= 4 * HOUR_S; age_s += age_s < 4 * HOUR_S - 1800 ? 900 : 60)
        add(&switched, EVENING_UTC_S + age_s, steepening_m(EVENING_UTC_S + age_s));
    assert_near(newest_rate(&often, HOUR_S) * 3600, 0.35, 1e-12, "every minute");
    assert_near(newest_rate(&seldom, HOUR_S) * 3600, 0.35, 1e-12, "every 15 minutes");
    assert_near(newest_rate(&switched, HOUR_S) * 3600, 0.35, 0.0025, "switched half an hour ago");
}

/* By hand, the readings equally weighted but for the ends, which stand for half the time. */
static void the_rate_is_the_slope_of_the_least_squares_line(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {-5000, 0, 600, 1200, 1800};
    const double value[] = {9.9, 1.00, 1.02, 1.10, 1.21}; /* the first is outside the window */
    /* weights 1 2 2 1 about the middle: sum w t (v) / sum w t^2 with t = -900 -300 300 900 */
    double product = -900 * 1.00 - 2 * 300 * 1.02 + 2 * 300 * 1.10 + 900 * 1.21;
    double spread = 2 * 900.0 * 900 + 4 * 300.0 * 300;
    assert_near(series_newest_rate_per_s(5, observed_utc_s, value, 1800), product / spread, 1e-18, "rate");
}

static void the_newest_two_count_however_old_the_second_is(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {0, 600, 90600};
    const double value[] = {5.2, 1.30, 2.20};
    assert_near(series_newest_rate_per_s(3, observed_utc_s, value, 3600), 0.90 / 90000, 1e-18, "rate");
}

static void the_edge_of_the_window_is_inside(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {0, 1800, 3600};
    const double value[] = {1.0, 1.9, 2.0};
    assert_near(series_newest_rate_per_s(3, observed_utc_s, value, 3600), 1.0 / 3600, 1e-18, "all three");
    assert_near(series_newest_rate_per_s(3, observed_utc_s, value, 3599), 0.1 / 1800, 1e-18, "the newest two");
}

static void one_reading_has_no_rate(void **state)
{
    (void)state;
    const int64_t observed_utc_s[] = {77};
    const double value[] = {1.9};
    assert_true(series_newest_rate_per_s(1, observed_utc_s, value, 3600) == 0);
    assert_true(series_newest_rate_per_s(0, NULL, NULL, 3600) == 0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(origins_tell_measured_from_filled_from_assumed),
        cmocka_unit_test(a_gap_of_exactly_the_limit_is_measured_and_a_second_more_is_not),
        cmocka_unit_test(a_reading_between_two_gaps_is_still_measured),
        cmocka_unit_test(a_single_reading_is_held_both_ways),
        cmocka_unit_test(a_straight_rise_is_exact_however_the_logger_reads_it),
        cmocka_unit_test(resampled_values_never_leave_the_readings_about_them),
        cmocka_unit_test(samples_and_grids_that_cannot_be_are_refused_and_nothing_is_written),
        cmocka_unit_test(times_at_both_ends_of_the_calendar_are_taken),
        cmocka_unit_test(the_rate_of_a_straight_rise_is_its_slope_however_the_logger_reads_it),
        cmocka_unit_test(a_logger_that_reads_more_often_does_not_change_the_rate),
        cmocka_unit_test(the_rate_is_the_slope_of_the_least_squares_line),
        cmocka_unit_test(the_newest_two_count_however_old_the_second_is),
        cmocka_unit_test(the_edge_of_the_window_is_inside),
        cmocka_unit_test(one_reading_has_no_rate),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
