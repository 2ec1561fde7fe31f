/* SPDX-License-Identifier: MIT */
/* Methods chosen reach by reach in a whole river. */
#include "engine/network.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>
/* after the four above, which it needs */
#include <cmocka.h>

#include "engine/method.h"
#include "tests/engine/try_river.h"

static struct network *create(const struct network_river *river, const struct network_options *options)
{
    struct network *network = NULL;
    struct network_fault fault = {{0}};
    if (network_create(river, options, &network, &fault) != FW_OK)
        fail_msg("%s", fault.text);
    return network;
}

static struct method_choice choice_of(const struct network *network, size_t reach)
{
    struct method_choice choice;
    network_reach_choice(network, reach, &choice);
    return choice;
}

static void assert_flood(const struct network *network, size_t reach, double base, double peak, double rise_s)
{
    struct method_flood flood = choice_of(network, reach).flood;
    if (!(fabs(flood.base_m3s - base) < 1e-12 && fabs(flood.peak_m3s - peak) < 1e-12 && flood.rise_s == rise_s))
        fail_msg("reach %zu: %.15g to %.15g in %g s, expected %.15g to %.15g in %g s", reach, flood.base_m3s,
                 flood.peak_m3s, flood.rise_s, base, peak, rise_s);
}

/* --- floods ------------------------------------------------------------------------------------------------------- */

static const struct method_flood two_floods[GAUGE_COUNT] = {{5.3, 61.0, 5400.0}, {1.1, 14.0, 2700.0}};

/* Shares of 0.16 on the upper reach, 0.07 on the beck; 1.37 m3/s into the lower one. */
static void floods_add_downstream_with_their_shares_and_the_shortest_rise(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    try.options.gauge_floods = two_floods;
    struct network *network = create(&try.river, &try.options);
    assert_flood(network, UPPER, 1.16 * 5.3, 1.16 * 61.0, 5400.0);
    assert_flood(network, BECK, 1.07 * 1.1, 1.07 * 14.0, 2700.0);
    assert_flood(network, MIDDLE, 1.16 * 5.3, 1.16 * 61.0, 5400.0);
    assert_flood(network, LOWER, 1.16 * 5.3 + 1.07 * 1.1 + 1.37, 1.16 * 61.0 + 1.07 * 14.0 + 1.37, 2700.0);
    /* the longest way through each: the beck is shorter than the two reaches beside it */
    assert_true(choice_of(network, BECK).path_length_m == 3370.0 + 8130.0);
    assert_true(choice_of(network, LOWER).path_length_m == 9410.0 + 5270.0 + 8130.0);
    assert_true(choice_of(network, UPPER).path_length_m == 9410.0 + 5270.0 + 8130.0);
    network_destroy(network);
}

static void one_flood_that_is_not_known_leaves_all_below_it_to_the_storage_form(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    const struct method_flood floods[GAUGE_COUNT] = {{5.3, 61.0, 5400.0}, {0.0, 0.0, 0.0}};
    for (size_t i = 0; i < REACH_COUNT; i++)
        try.reaches[i].method = NETWORK_AUTO;
    try.options.gauge_floods = floods;
    struct network *network = create(&try.river, &try.options);
    assert_int_not_equal(choice_of(network, UPPER).reason, METHOD_NO_FLOOD);
    assert_int_equal(choice_of(network, BECK).reason, METHOD_NO_FLOOD);
    assert_int_equal(choice_of(network, LOWER).reason, METHOD_NO_FLOOD);
    assert_int_equal(choice_of(network, LOWER).method, NETWORK_MUSKINGUM_CUNGE);
    network_destroy(network);
    try.options.gauge_floods = NULL;
    network = create(&try.river, &try.options);
    for (size_t i = 0; i < REACH_COUNT; i++)
        assert_int_equal(choice_of(network, i).reason, METHOD_NO_FLOOD);
    network_destroy(network);
}

static void a_dry_gauge_is_a_known_flood_of_nothing(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    const struct method_flood floods[GAUGE_COUNT] = {{5.3, 61.0, 5400.0}, {0.0, 0.0, INFINITY}};
    try.reaches[BECK].method = try.reaches[LOWER].method = NETWORK_AUTO;
    try.options.gauge_floods = floods;
    struct network *network = create(&try.river, &try.options);
    assert_int_equal(choice_of(network, BECK).reason, METHOD_WITHIN_LIMIT);
    assert_flood(network, LOWER, 1.16 * 5.3 + 1.37, 1.16 * 61.0 + 1.37, 5400.0);
    network_destroy(network);
}

struct spoilt_flood {
    const char *shows;
    struct method_flood flood;
    const char *fault;
};

static void impossible_floods_are_refused_by_their_gauge(void **state)
{
    (void)state;
    static const struct spoilt_flood rows[] = {
        {"backwards", {9.0, 7.0, 600.0}, "gauge_floods[1]: base_m3s 9"},
        {"below nothing", {-1.0, 7.0, 600.0}, "gauge_floods[1]: base_m3s -1"},
        {"above the tables", {3.0, 161.0, 600.0}, "gauge_floods[1]: peak_m3s 161"},
        {"no number", {3.0, NAN, 600.0}, "gauge_floods[1]: peak_m3s nan"},
        {"before its time", {3.0, 7.0, -600.0}, "gauge_floods[1]: rise_s -600"},
        {"at no time", {3.0, 7.0, NAN}, "gauge_floods[1]: rise_s nan"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct try_river try;
        struct network *network = NULL;
        struct network_fault fault = {{0}};
        const struct method_flood floods[GAUGE_COUNT] = {two_floods[0], rows[i].flood};
        make_river(&try);
        try.options.gauge_floods = floods;
        assert_int_equal(network_create(&try.river, &try.options, &network, &fault), FW_BAD_INPUT);
        assert_null(network);
        if (strncmp(fault.text, rows[i].fault, strlen(rows[i].fault)) != 0)
            fail_msg("%s: '%s'", rows[i].shows, fault.text);
    }
}

/* --- what is chosen ----------------------------------------------------------------------------------------------- */

enum { STEPS = 300 };

static double *routed(const struct network_river *river, const struct network_options *options)
{
    struct network *network = create(river, options);
    double *inflow = calloc((size_t)GAUGE_COUNT * (STEPS + 1) * ALL_MEMBERS, sizeof *inflow);
    double *point = calloc((size_t)POINT_COUNT * (STEPS + 1) * ALL_MEMBERS, sizeof *point);
    double start[GAUGE_COUNT * ALL_MEMBERS];
    assert_non_null(inflow);
    assert_non_null(point);
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        for (size_t step = 0; step <= STEPS; step++)
            for (size_t member = 0; member < ALL_MEMBERS; member++) {
                double share = sin(fmin((double)step / 90.0, 1.0) * 3.14159), peak = two_floods[gauge].peak_m3s;
                inflow[(gauge * (STEPS + 1) + step) * ALL_MEMBERS + member] =
                    two_floods[gauge].base_m3s + (0.5 + 0.07 * (double)member) * peak * share;
            }
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        memcpy(start + gauge * ALL_MEMBERS, inflow + gauge * (STEPS + 1) * ALL_MEMBERS, ALL_MEMBERS * sizeof *start);
    assert_int_equal(network_start_steady(network, start), FW_OK);
    assert_int_equal(network_advance(network, STEPS, inflow, point), FW_OK);
    network_destroy(network);
    free(inflow);
    return point;
}

static void a_chosen_network_is_the_stated_one_bit_for_bit(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    for (size_t i = 0; i < REACH_COUNT; i++)
        try.reaches[i].method = NETWORK_AUTO;
    try.reaches[LOWER].slope_m_per_m = 0.0004;
    try.options.gauge_floods = two_floods;
    double *chosen = routed(&try.river, &try.options);
    struct network *network = create(&try.river, &try.options);
    size_t full_count = 0;
    for (size_t i = 0; i < REACH_COUNT; i++) {
        struct method_choice choice = choice_of(network, i);
        assert_int_not_equal(choice.reason, METHOD_STATED);
        full_count += network_method_is_full(choice.method);
        try.reaches[i].method = choice.method;
        print_message("%s: %s, %s\n", try.reaches[i].id, method_name(choice.method),
                      method_reason_text(choice.reason));
    }
    network_destroy(network);
    assert_true(full_count > 0 && full_count < REACH_COUNT); /* both kinds */
    double *stated = routed(&try.river, &try.options);
    assert_memory_equal(chosen, stated, (size_t)POINT_COUNT * (STEPS + 1) * ALL_MEMBERS * sizeof *chosen);
    network = create(&try.river, &try.options);
    for (size_t i = 0; i < REACH_COUNT; i++) {
        assert_int_equal(choice_of(network, i).reason, METHOD_STATED);
        assert_int_equal(choice_of(network, i).advised, try.reaches[i].method);
    }
    network_destroy(network);
    free(chosen);
    free(stated);
}

enum { PIECES = 6 };

/* A straight river of equal pieces from one gauge; the caller may change them. */
static struct network_river straight(struct network_reach reaches[PIECES], double length_m, double slope,
                                     const struct section *section)
{
    static const size_t gauge_node = 0;
    static const char *const ids[PIECES] = {"1", "2", "3", "4", "5", "6"};
    for (size_t i = 0; i < PIECES; i++)
        reaches[i] = (struct network_reach){.id = ids[i],
                                            .from_node = i,
                                            .to_node = i + 1,
                                            .length_m = length_m,
                                            .slope_m_per_m = slope,
                                            .section = section,
                                            .method = NETWORK_AUTO};
    return (struct network_river){.node_count = PIECES + 1,
                                  .gauge_count = 1,
                                  .gauge_node = &gauge_node,
                                  .reach_count = PIECES,
                                  .reaches = reaches};
}

static struct network_options options_for(const struct method_flood *flood)
{
    static const double as_given = 1.0;
    return (struct network_options){.time_step_s = 60.0,
                                    .group_count = 1,
                                    .roughness_factors = &as_given,
                                    .members_per_group = 1,
                                    .largest_discharge_m3s = 1000.0,
                                    .gauge_floods = flood};
}

/*
 * 6 m held at S0 0.004, a level pool of 1,500 m over pieces of 400 m. The base, half a metre deep, is raised as long as
 * the pool reaches: to the fourth foot, 1,200 m up, where the pool is 1.2 m deep, and not to the fifth.
 */
static void a_held_level_is_followed_upstream_as_far_as_it_is_felt(void **state)
{
    (void)state;
    static const enum method_reason reasons[PIECES] = {METHOD_WITHIN_LIMIT, METHOD_WITHIN_LIMIT, METHOD_BACKWATER,
                                                       METHOD_BACKWATER,    METHOD_BACKWATER,    METHOD_HELD_LEVEL};
    const struct method_flood flood = {25.0, 110.0, 20000.0};
    struct network_reach reaches[PIECES];
    struct network_river river = straight(reaches, 400.0, 0.004, &wide);
    struct network_options options = options_for(&flood);
    reaches[PIECES - 1].outlet_depth_m = 6.0;
    struct network *network = create(&river, &options);
    for (size_t i = 0; i < PIECES; i++) {
        struct method_choice choice = choice_of(network, i);
        print_message("piece %zu: foot raised by %.0f %%: %s\n", i, 100.0 * choice.raise_share,
                      method_reason_text(choice.reason));
        assert_int_equal(choice.reason, reasons[i]);
    }
    network_destroy(network);
    /* where the held reach is computed without knowing of it, there is nothing to follow */
    reaches[PIECES - 1].outlet_depth_m = 0.0;
    network = create(&river, &options);
    for (size_t i = 0; i < PIECES; i++)
        assert_int_equal(choice_of(network, i).reason, METHOD_WITHIN_LIMIT);
    network_destroy(network);
}

static void a_river_cut_into_pieces_is_chosen_as_the_uncut_one(void **state)
{
    (void)state;
    const struct method_flood flood = {25.0, 310.0, 15000.0};
    struct network_reach reaches[PIECES];
    struct network_river river = straight(reaches, 9000.0, 0.0006, &wide);
    struct network_options options = options_for(&flood);
    struct network *cut = create(&river, &options);
    struct network_reach whole = reaches[0];
    whole.length_m = PIECES * 9000.0;
    river.reaches = &whole;
    river.reach_count = 1;
    river.node_count = 2;
    struct network *uncut = create(&river, &options);
    struct method_choice expected = choice_of(uncut, 0);
    print_message("number %.4f\n", expected.storage_number);
    assert_int_equal(expected.reason, METHOD_BEYOND_LIMIT);
    assert_true(expected.storage_number < PIECES * METHOD_STORAGE_LIMIT); /* each piece by itself would pass */
    for (size_t i = 0; i < PIECES; i++) {
        assert_int_equal(choice_of(cut, i).reason, METHOD_BEYOND_LIMIT);
        assert_true(fabs(choice_of(cut, i).storage_number / expected.storage_number - 1.0) < 1e-12);
    }
    network_destroy(cut);
    network_destroy(uncut);
}

/* Steady flow stays, whatever is chosen. */
static void reaches_of_ten_metres_and_of_three_hundred_kilometres_work(void **state)
{
    (void)state;
    static const double lengths_m[] = {10.0, 300e3}, slopes[] = {0.0001, 0.01};
    const struct method_flood flood = {25.0, 110.0, 20000.0};
    for (size_t i = 0; i < 4; i++) {
        static const size_t gauge_node = 0;
        struct network_reach reach = {.id = "only",
                                      .from_node = 0,
                                      .to_node = 1,
                                      .length_m = lengths_m[i / 2],
                                      .slope_m_per_m = slopes[i % 2],
                                      .section = &wide,
                                      .method = NETWORK_AUTO};
        struct network_point foot = {.id = "foot", .reach_index = 0, .at_m = reach.length_m};
        struct network_river river = {.node_count = 2,
                                      .gauge_count = 1,
                                      .gauge_node = &gauge_node,
                                      .reach_count = 1,
                                      .reaches = &reach,
                                      .point_count = 1,
                                      .points = &foot};
        struct network_options options = options_for(&flood);
        struct network *network = create(&river, &options);
        double inflow[61], out[61];
        for (size_t step = 0; step <= 60; step++)
            inflow[step] = 37.0;
        assert_int_equal(network_start_steady(network, inflow), FW_OK);
        assert_int_equal(network_advance(network, 60, inflow, out), FW_OK);
        print_message("%.0f m at %g: %s, %zu cells\n", reach.length_m, reach.slope_m_per_m,
                      method_name(choice_of(network, 0).method), network_cell_count(network, 0));
        for (size_t step = 0; step <= 60; step++)
            assert_true(fabs(out[step] - 37.0) < 1e-8);
        assert_true(network_cell_count(network, 0) >= 3 && network_cell_count(network, 0) <= 400);
        network_destroy(network);
    }
}

/* 60 m of plain beside 12 m of channel: sized by the wave on the plain, its cells would be three times as many. */
static void cells_are_sized_by_the_reachs_own_flood(void **state)
{
    (void)state;
    const struct method_flood floods[] = {{5.0, 60.0, 20000.0}, {5.0, 600.0, 20000.0}};
    struct network_reach reaches[PIECES];
    struct network_river river = straight(reaches, 9000.0, 0.004, &trapezoid);
    size_t counts[2];
    for (size_t i = 0; i < 2; i++) {
        struct network_options options = options_for(&floods[i]);
        struct network *network = create(&river, &options);
        struct network_reach_steps steps;
        struct network_reach_flow peak;
        assert_int_equal(network_reach_summary(network, 0, 1.0, 1, &floods[i].peak_m3s, &steps, &peak), FW_OK);
        counts[i] = steps.cell_count;
        if (i == 0)
            assert_true(fabs(peak.courant_number - 1.0) < 0.02);
        network_destroy(network);
    }
    assert_int_not_equal(counts[0], counts[1]);
    double bank_full_m3s = section_normal_discharge_m3s(&trapezoid, 0.004, 2.3);
    struct method_flood just_above = {5.0, 1.02 * bank_full_m3s, 20000.0};
    struct network_options options = options_for(&just_above);
    struct network *network = create(&river, &options);
    assert_true(network_cell_count(network, 0) < 2 * counts[0]);
    network_destroy(network);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(floods_add_downstream_with_their_shares_and_the_shortest_rise),
        cmocka_unit_test(one_flood_that_is_not_known_leaves_all_below_it_to_the_storage_form),
        cmocka_unit_test(a_dry_gauge_is_a_known_flood_of_nothing),
        cmocka_unit_test(impossible_floods_are_refused_by_their_gauge),
        cmocka_unit_test(a_chosen_network_is_the_stated_one_bit_for_bit),
        cmocka_unit_test(a_held_level_is_followed_upstream_as_far_as_it_is_felt),
        cmocka_unit_test(a_river_cut_into_pieces_is_chosen_as_the_uncut_one),
        cmocka_unit_test(reaches_of_ten_metres_and_of_three_hundred_kilometres_work),
        cmocka_unit_test(cells_are_sized_by_the_reachs_own_flood),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
