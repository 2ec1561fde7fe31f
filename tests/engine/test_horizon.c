/* SPDX-License-Identifier: MIT */
#include "engine/horizon.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
/* after the four above, which it needs */
#include <cmocka.h>

#define COUNT(array) (sizeof(array) / sizeof((array)[0]))
#define NOT_A_NUMBER ((double)NAN)

static void the_horizon_is_where_the_two_edges_part_by_the_tolerance(void **state)
{
    (void)state;
    static const struct {
        const char *shows;
        double low_m[5], high_m[5];
        double until_s;
    } rows[] = {
        /* 2 cm apart, 60 s steps */
        {"never parts", {1.0, 1.1, 1.2, 1.3, 1.4}, {1.0, 1.11, 1.21, 1.31, 1.41}, HUGE_VAL},
        {"exactly the tolerance is not beyond it", {0.0, 0.0, 0.0, 0.0, 0.0}, {0.0, 0.0, 0.02, 0.02, 0.02}, HUGE_VAL},
        {"parts between steps", {1.0, 1.0, 1.0, 1.0, 1.0}, {1.0, 1.0, 1.01, 1.05, 1.2}, 135.0},
        {"either may be the higher", {1.0, 1.0, 1.01, 1.05, 1.2}, {1.0, 1.0, 1.0, 1.0, 1.0}, 135.0},
        {"from one side through to the other", {1.0, 1.0, 1.01, 1.0, 1.0}, {1.0, 1.0, 1.0, 1.05, 1.2}, 150.0},
        {"apart from the first moment", {1.0, 1.0, 1.0, 1.0, 1.0}, {1.1, 1.0, 1.0, 1.0, 1.0}, 0.0},
        {"parts in the last step", {1.0, 1.0, 1.0, 1.0, 1.0}, {1.0, 1.0, 1.0, 1.0, 1.08}, 195.0},
        {"comes together again: the first parting counts",
         {1.0, 1.0, 1.0, 1.0, 1.0},
         {1.0, 1.04, 1.0, 1.0, 1.0},
         30.0},
        {"not a number counts as parted", {1.0, 1.0, NOT_A_NUMBER, 1.0, 1.0}, {1.0, 1.0, 1.0, 1.0, 1.0}, 60.0},
        {"nor does an infinite pair agree", {1.0, 1.0, 1.0, HUGE_VAL, 1.0}, {1.0, 1.0, 1.0, HUGE_VAL, 1.0}, 120.0},
    };
    for (size_t i = 0; i < COUNT(rows); i++) {
        double until_s = horizon_measured_until_s(5, 1, rows[i].low_m, rows[i].high_m, 60.0, 0.02);
        /* differences of levels near 1 m carry roundings of 1e-16 m, over 1e-2 m in 60 s: 1e-11 s and less */
        if (!(until_s == rows[i].until_s || fabs(until_s - rows[i].until_s) < 1e-9))
            fail_msg("%s: %.12g s", rows[i].shows, until_s);
    }
}

static void members_innermost_are_read_by_stride(void **state)
{
    (void)state;
    static const double stage_m[] = {9.0, 1.0, 1.0, 8.0, 1.00, 1.04, 7.0, 1.0, 1.2};
    assert_true(fabs(horizon_measured_until_s(3, 3, stage_m + 1, stage_m + 2, 300.0, 0.02) - 150.0) < 1e-9);
}

static void nothing_routed_rests_on_nothing_measured(void **state)
{
    (void)state;
    const double unused_m = 1.0;
    assert_true(horizon_measured_until_s(0, 1, &unused_m, &unused_m, 60.0, 0.02) == 0.0);
}

static void a_wider_tolerance_never_shortens_the_horizon(void **state)
{
    (void)state;
    double low_m[200], high_m[200], before_s = 0.0;
    for (size_t i = 0; i < COUNT(low_m); i++) {
        double t = (double)i / 40.0;
        low_m[i] = 1.7 - 0.03 * t * t;
        high_m[i] = 1.7 + 0.11 * t * t * t;
    }
    for (double tolerance_m = 0.001; tolerance_m < 2.0; tolerance_m *= 1.37) {
        double until_s = horizon_measured_until_s(COUNT(low_m), 1, low_m, high_m, 60.0, tolerance_m);
        assert_true(until_s > before_s);
        before_s = until_s;
    }
}

/* A rectangle 3.7 m deep with 2.9 m/s: 2.9 + sqrt(9.80665 3.7) = 8.92359 m/s; a plain beside it slows the characteristic. */
static void nothing_is_felt_before_the_fastest_characteristic(void **state)
{
    (void)state;
    const struct network_reach_flow flows[] = {
        {.discharge_m3s = 5.0 * 1.2 * 1.7, .top_width_m = 5.0, .velocity_m_s = 1.7},
        {.discharge_m3s = 5.0 * 3.7 * 2.9, .top_width_m = 5.0, .velocity_m_s = 2.9},
        {.discharge_m3s = 5.0 * 3.9 * 2.9, .top_width_m = 60.0, .velocity_m_s = 2.9}};
    const double expected_s = 8920.0 / (2.9 + sqrt(9.80665 * 3.7));
    assert_true(fabs(horizon_not_felt_before_s(8920.0, 3, flows) - expected_s) < 1e-9 * expected_s);
    assert_true(fabs(expected_s - 999.6) < 0.1); /* by hand */
    assert_true(horizon_not_felt_before_s(8920.0, 0, flows) == 0.0);
    const struct network_reach_flow still[] = {flows[0], {.discharge_m3s = 0.0, .top_width_m = 5.0}};
    assert_true(horizon_not_felt_before_s(8920.0, 2, still) == 0.0);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_horizon_is_where_the_two_edges_part_by_the_tolerance),
        cmocka_unit_test(members_innermost_are_read_by_stride),
        cmocka_unit_test(nothing_routed_rests_on_nothing_measured),
        cmocka_unit_test(a_wider_tolerance_never_shortens_the_horizon),
        cmocka_unit_test(nothing_is_felt_before_the_fastest_characteristic),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
