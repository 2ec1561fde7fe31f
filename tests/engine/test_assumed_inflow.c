/* SPDX-License-Identifier: MIT */
#include "engine/assumed_inflow.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
/* after the four above, which it needs */
#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof((array)[0]))
#define NOT_A_NUMBER ((double)NAN)

enum { STEPS = 144, STEP_S = 300 };

static const double PER_HOUR = 1.0 / 3600.0;

static const struct assumed_rules RULES = {.carry_rise_s = 5400.0,
                                           .recession_time_constant_s = 40000.0,
                                           .fastest_rise_per_s = 4.0 / 3600.0,
                                           .fastest_fall_per_s = 1.5 / 3600.0};

static struct rating stage_rating(void)
{
    struct rating rating = {.segment_count = 2,
                            .segments = {{2.60, 11.8, 0.42, 1.72}, {HUGE_VAL, 0.0, 0.42, 2.15}},
                            .highest_gauged_m = 2.38,
                            .spread = 0.12};
    assert_int_equal(rating_complete(&rating, NULL, NULL), FW_OK);
    return rating;
}

static void future_of(enum assumed_future future, const struct rating *rating, double value, double rate_per_s,
                      double discharge_m3s[STEPS + 1])
{
    assert_int_equal(assumed_inflow(&RULES, future, rating, value, rate_per_s, STEP_S, STEPS, discharge_m3s), FW_OK);
}

static void every_future_starts_at_the_newest_flow(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    for (int future = 0; future < ASSUMED_FUTURE_COUNT; future++) {
        future_of((enum assumed_future)future, &rating, 1.75, 0.6 * PER_HOUR, discharge_m3s);
        assert_true(discharge_m3s[0] == rating_discharge_m3s(&rating, 1.75, NULL));
        future_of((enum assumed_future)future, NULL, 23.7, 3.1 * PER_HOUR, discharge_m3s);
        assert_true(discharge_m3s[0] == 23.7);
    }
}

static void the_last_flow_is_held_to_the_end(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_HELD, &rating, 1.75, 0.6 * PER_HOUR, discharge_m3s);
    for (size_t i = 0; i <= STEPS; i++)
        assert_true(discharge_m3s[i] == discharge_m3s[0]);
}

static void a_rise_is_carried_in_stage_at_its_rate_and_then_held(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_RISE_CARRIED, &rating, 1.75, 0.6 * PER_HOUR, discharge_m3s);
    for (size_t i = 0; i <= STEPS; i++) {
        /* 5400 s are 18 steps; 1.75 m + 0.6 m/h for 1.5 h = 2.65 m */
        double stage_m = i < 18 ? 1.75 + 0.6 * (double)i * STEP_S / 3600.0 : 2.65;
        double expected_m3s = rating_discharge_m3s(&rating, stage_m, NULL);
        assert_true(fabs(discharge_m3s[i] - expected_m3s) < 1e-10 * expected_m3s);
    }
}

static void a_falling_gauge_is_carried_as_held(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_RISE_CARRIED, &rating, 1.75, -0.6 * PER_HOUR, discharge_m3s);
    for (size_t i = 0; i <= STEPS; i++)
        assert_true(discharge_m3s[i] == discharge_m3s[0]);
}

static void a_rise_of_measured_discharge_is_carried_in_discharge(void **state)
{
    (void)state;
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_RISE_CARRIED, NULL, 23.7, 3.1 * PER_HOUR, discharge_m3s);
    assert_true(fabs(discharge_m3s[12] - 26.8) < 1e-12);
    assert_true(fabs(discharge_m3s[STEPS] - (23.7 + 3.1 * 1.5)) < 1e-12);
}

static void recession_is_exponential_in_discharge(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_RECESSION, &rating, 1.75, 0.6 * PER_HOUR, discharge_m3s);
    /* the same share in each step, and 1/e after the time constant: 40000 s lie a
   * third of the way through step 133 */
    for (size_t i = 1; i <= STEPS; i++)
        assert_true(fabs(discharge_m3s[i] / discharge_m3s[i - 1] - exp(-300.0 / 40000.0)) < 1e-14);
    double at_constant = discharge_m3s[133] * exp(-100.0 / 40000.0);
    assert_true(fabs(at_constant / discharge_m3s[0] - exp(-1.0)) < 1e-12);
}

static void the_fastest_fall_follows_its_rate_and_ends_at_zero_flow(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_FASTEST_FALL, &rating, 1.75, 0.0, discharge_m3s);
    double expected_m3s = rating_discharge_m3s(&rating, 1.75 - 1.5 * 4.0 / 12.0, NULL);
    assert_true(fabs(discharge_m3s[4] - expected_m3s) < 1e-10);
    /* 1.75 - 0.42 = 1.33 m at 1.5 m/h are 10.64 steps */
    assert_true(discharge_m3s[10] > 0.0 && discharge_m3s[11] == 0.0 && discharge_m3s[STEPS] == 0.0);
    future_of(ASSUMED_FASTEST_FALL, NULL, 0.02, 0.0, discharge_m3s);
    assert_true(discharge_m3s[1] == 0.0 && discharge_m3s[STEPS] == 0.0);
}

static void the_fastest_rise_follows_its_rate_until_the_rating_means_nothing(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_FASTEST_RISE, &rating, 1.75, 0.6 * PER_HOUR, discharge_m3s);
    double after_20_min_m3s = rating_discharge_m3s(&rating, 1.75 + 4.0 / 3.0, NULL);
    assert_true(fabs(discharge_m3s[4] - after_20_min_m3s) < 1e-10 * after_20_min_m3s);
    double limit_m3s = ASSUMED_EDGE_FACTOR * rating_discharge_m3s(&rating, 2.38, NULL);
    assert_true(discharge_m3s[STEPS] == limit_m3s);
    /* above the highest gauging the newest flow sets the limit */
    future_of(ASSUMED_FASTEST_RISE, &rating, 3.41, 0.0, discharge_m3s);
    assert_true(discharge_m3s[STEPS] == ASSUMED_EDGE_FACTOR * rating_discharge_m3s(&rating, 3.41, NULL));
    /* no gauging stated: to the end */
    rating.highest_gauged_m = HUGE_VAL;
    future_of(ASSUMED_FASTEST_RISE, &rating, 1.75, 0.0, discharge_m3s);
    double end_m3s = rating_discharge_m3s(&rating, 1.75 + 4.0 * 12.0, NULL);
    assert_true(fabs(discharge_m3s[STEPS] - end_m3s) < 1e-10 * end_m3s);
    /* measured discharge: a straight line to the end */
    future_of(ASSUMED_FASTEST_RISE, NULL, 23.7, 0.0, discharge_m3s);
    assert_true(fabs(discharge_m3s[STEPS] - (23.7 + 4.0 * 12.0)) < 1e-10);
}

static void a_rating_table_limits_the_fastest_rise_by_its_last_row(void **state)
{
    (void)state;
    struct rating rating = {.table_count = 3,
                            .table_stage_m = {0.30, 1.10, 2.70},
                            .table_discharge_m3s = {0.0, 6.3, 41.0},
                            .highest_gauged_m = HUGE_VAL};
    assert_int_equal(rating_complete(&rating, NULL, NULL), FW_OK);
    double discharge_m3s[STEPS + 1];
    future_of(ASSUMED_FASTEST_RISE, &rating, 1.0, 0.0, discharge_m3s);
    assert_true(discharge_m3s[STEPS] == ASSUMED_EDGE_FACTOR * 41.0);
}

static void the_edges_enclose_every_forecast_future(void **state)
{
    (void)state;
    struct rating rating = stage_rating();
    uint64_t seed = 0x0ddba11u;
    print_message("seed %llx\n", (unsigned long long)seed);
    double low[STEPS + 1], high[STEPS + 1], between[STEPS + 1];
    for (int round = 0; round < 200; round++) {
        seed = seed * 6364136223846793005u + 1442695040888963407u;
        double stage_m = 0.3 + 4.0 * (double)(seed >> 40) / (double)(1 << 24);
        seed = seed * 6364136223846793005u + 1442695040888963407u;
        /* also rates beyond the recorded ones, up to 9 m/h either way */
        double rate_per_s = 18.0 * ((double)(seed >> 40) / (double)(1 << 24) - 0.5) * PER_HOUR;
        const struct rating *turned = round % 3 == 0 ? NULL : &rating;
        future_of(ASSUMED_FASTEST_FALL, turned, stage_m, rate_per_s, low);
        future_of(ASSUMED_FASTEST_RISE, turned, stage_m, rate_per_s, high);
        for (int future = 0; future < ASSUMED_FORECAST_COUNT; future++) {
            future_of((enum assumed_future)future, turned, stage_m, rate_per_s, between);
            for (size_t i = 0; i <= STEPS; i++)
                assert_true(low[i] >= 0.0 && low[i] <= between[i] && between[i] <= high[i]);
        }
        for (size_t i = 1; i <= STEPS; i++)
            assert_true(low[i] <= low[i - 1] && high[i] >= high[i - 1]);
    }
}

static void a_negative_measured_discharge_counts_as_zero(void **state)
{
    (void)state;
    double discharge_m3s[STEPS + 1];
    for (int future = 0; future < ASSUMED_FUTURE_COUNT; future++) {
        future_of((enum assumed_future)future, NULL, -0.3, 0.0, discharge_m3s);
        for (size_t i = 0; i <= STEPS; i++)
            assert_true(discharge_m3s[i] >= 0.0);
    }
}

static void a_carried_value_passes_a_trigger_at_its_own_minute(void **state)
{
    (void)state;
    /* last reading 1.60 m at 21:15, rising 0.6 m/h: 2.00 m is passed 40 minutes
   * later, not a second before */
    const double rate_per_s = 0.6 * PER_HOUR;
    assert_true(assumed_value_carried(&RULES, 1.60, rate_per_s, 2399.0) < 2.00);
    assert_true(assumed_value_carried(&RULES, 1.60, rate_per_s, 2401.0) > 2.00);
    assert_true(fabs(assumed_value_carried(&RULES, 1.60, rate_per_s, 90000.0) - 2.50) < 1e-12); /* held after 1.5 h */
    assert_true(assumed_value_carried(&RULES, 1.60, rate_per_s, -60.0) == 1.60);
    assert_true(assumed_value_carried(&RULES, 1.60, -rate_per_s, 2400.0) == 1.60);
}

static void what_is_not_a_number_is_refused(void **state)
{
    (void)state;
    const double bad[] = {NOT_A_NUMBER, HUGE_VAL, -1.0};
    double out[3];
    for (size_t i = 0; i < COUNT(bad); i++) {
        for (size_t key = 0; key < 4; key++) {
            struct assumed_rules rules = RULES;
            double *values[] = {&rules.carry_rise_s, &rules.recession_time_constant_s, &rules.fastest_rise_per_s,
                                &rules.fastest_fall_per_s};
            *values[key] = bad[i];
            assert_int_equal(assumed_inflow(&rules, ASSUMED_HELD, NULL, 1.0, 0.0, 60.0, 2, out), FW_BAD_INPUT);
        }
        assert_int_equal(assumed_inflow(&RULES, ASSUMED_HELD, NULL, 1.0, 0.0, bad[i], 2, out), FW_BAD_INPUT);
    }
    struct assumed_rules no_constant = RULES;
    no_constant.recession_time_constant_s = 0.0;
    assert_int_equal(assumed_inflow(&no_constant, ASSUMED_RECESSION, NULL, 1.0, 0.0, 60.0, 2, out), FW_BAD_INPUT);
    assert_int_equal(assumed_inflow(&RULES, ASSUMED_HELD, NULL, NOT_A_NUMBER, 0.0, 60.0, 2, out), FW_BAD_INPUT);
    assert_int_equal(assumed_inflow(&RULES, ASSUMED_HELD, NULL, 1.0, HUGE_VAL, 60.0, 2, out), FW_BAD_INPUT);
    assert_int_equal(assumed_inflow(&RULES, ASSUMED_HELD, NULL, 1.0, 0.0, 0.0, 2, out), FW_BAD_INPUT);
    assert_int_equal(assumed_inflow(&RULES, ASSUMED_FUTURE_COUNT, NULL, 1.0, 0.0, 60.0, 2, out), FW_BAD_INPUT);
    /* none of them need be more than zero but the time constant */
    const struct assumed_rules still = {.recession_time_constant_s = 40000.0};
    assert_int_equal(assumed_inflow(&still, ASSUMED_FASTEST_RISE, NULL, 1.0, 0.0, 60.0, 2, out), FW_OK);
    assert_true(out[2] == 1.0);
    /* 1e308 m3/s and rising runs out of numbers */
    assert_int_equal(assumed_inflow(&RULES, ASSUMED_FASTEST_RISE, NULL, 1e308, 1e308, 60.0, 2, out), FW_BAD_INPUT);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_future_starts_at_the_newest_flow),
        cmocka_unit_test(the_last_flow_is_held_to_the_end),
        cmocka_unit_test(a_rise_is_carried_in_stage_at_its_rate_and_then_held),
        cmocka_unit_test(a_falling_gauge_is_carried_as_held),
        cmocka_unit_test(a_rise_of_measured_discharge_is_carried_in_discharge),
        cmocka_unit_test(recession_is_exponential_in_discharge),
        cmocka_unit_test(the_fastest_fall_follows_its_rate_and_ends_at_zero_flow),
        cmocka_unit_test(the_fastest_rise_follows_its_rate_until_the_rating_means_nothing),
        cmocka_unit_test(a_rating_table_limits_the_fastest_rise_by_its_last_row),
        cmocka_unit_test(the_edges_enclose_every_forecast_future),
        cmocka_unit_test(a_negative_measured_discharge_counts_as_zero),
        cmocka_unit_test(a_carried_value_passes_a_trigger_at_its_own_minute),
        cmocka_unit_test(what_is_not_a_number_is_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
