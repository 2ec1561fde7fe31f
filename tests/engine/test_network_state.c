/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "engine/network_internal.h"
#include "tests/engine/try_river.h"

enum { STEPS = 150, METHODS = NETWORK_DIFFUSIVE + 1 }; /* 150 min */

struct flows { /* [gauge or point][step][member] */
    double inflow_m3s[GAUGE_COUNT * (STEPS + 1) * ALL_MEMBERS];
    double point_m3s[POINT_COUNT * (STEPS + 1) * ALL_MEMBERS];
    double stage_m[POINT_COUNT * (STEPS + 1) * ALL_MEMBERS];
};

static struct network *create(const struct try_river *try)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&try->river, &try->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    return network;
}

/* Every reach by one method; METHODS: a river of several, with a tree of the full equations in its middle. */
static struct network *create_by(struct try_river *try, int method)
{
    make_river(try);
    for (size_t i = 0; i < REACH_COUNT; i++)
        try->reaches[i].method = method < METHODS ? (enum network_method)method : NETWORK_MUSKINGUM_CUNGE;
    if (method == METHODS) {
        try->reaches[MIDDLE].method = try->reaches[LOWER].method = NETWORK_DYNAMIC;
        try->reaches[BECK].method = NETWORK_KINEMATIC_LINEAR;
    }
    return create(try);
}

/* A dam-break on a nearly dry bed: the full equations must take some steps in parts, and what that leaves is state too. */
static double flood_m3s(size_t gauge, size_t member, double hours)
{
    double scale = (gauge == 0 ? 1.0 : 0.21) * (1.0 + 0.09 * (double)member);
    double wall = hours > 0.61 && hours < 1.0 ? 31.0 : 0.0;
    return scale * (0.3 + wall + 47.0 * exp(-pow((hours - 2.1) / 0.5, 2.0)));
}

static void fill_inflow(struct flows *flows, size_t steps)
{
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        for (size_t step = 0; step <= steps; step++)
            for (size_t member = 0; member < ALL_MEMBERS; member++)
                flows->inflow_m3s[(gauge * (steps + 1) + step) * ALL_MEMBERS + member] =
                    flood_m3s(gauge, member, (double)step / 60.0);
}

static void start(struct network *network)
{
    double inflow[GAUGE_COUNT * ALL_MEMBERS];
    for (size_t i = 0; i < GAUGE_COUNT * ALL_MEMBERS; i++)
        inflow[i] = flood_m3s(i / ALL_MEMBERS, i % ALL_MEMBERS, 0.0);
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
}

/* From one step of the flood to another, into the rows of the whole. */
static void advance(struct network *network, const struct flows *flood, size_t from, size_t to, struct flows *into)
{
    static struct flows part;
    size_t count = to - from;
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        memcpy(part.inflow_m3s + gauge * (count + 1) * ALL_MEMBERS,
               flood->inflow_m3s + (gauge * (STEPS + 1) + from) * ALL_MEMBERS,
               (count + 1) * ALL_MEMBERS * sizeof(double));
    assert_int_equal(network_advance_with_stage(network, count, part.inflow_m3s, part.point_m3s, part.stage_m),
                     FW_OK);
    for (size_t point = 0; point < POINT_COUNT; point++) {
        size_t to_at = (point * (STEPS + 1) + from) * ALL_MEMBERS, from_at = point * (count + 1) * ALL_MEMBERS;
        memcpy(into->point_m3s + to_at, part.point_m3s + from_at, (count + 1) * ALL_MEMBERS * sizeof(double));
        memcpy(into->stage_m + to_at, part.stage_m + from_at, (count + 1) * ALL_MEMBERS * sizeof(double));
    }
}

static void assert_same_bits(const double left[], const double right[], size_t count, int method, const char *what)
{
    for (size_t i = 0; i < count; i++)
        if (memcmp(&left[i], &right[i], sizeof *left) != 0)
            fail_msg("method %d, %s: value %zu of %zu: %.17g, %.17g", method, what, i, count, left[i], right[i]);
}

static double *room_for_state(const struct network *network)
{
    double *state = calloc(network_state_count(network), sizeof *state);
    assert_non_null(state);
    return state;
}

/* Into a new network, and into one that has seen another flood: neither's own past may show. */
static void a_restored_network_goes_on_as_if_it_had_never_stopped(void **state)
{
    (void)state;
    static struct flows whole, resumed;
    static const size_t stops[] = {0, 37, 41, STEPS - 1};
    for (int method = 0; method <= METHODS; method++) {
        struct try_river try, try_other;
        struct network *network = create_by(&try, method);
        struct network *other = create_by(&try_other, method);
        double *kept = room_for_state(network), *end = room_for_state(network), *end_again = room_for_state(network);
        assert_int_equal(network_state_count(network), network_state_count(other));
        fill_inflow(&whole, STEPS);
        start(network);
        advance(network, &whole, 0, STEPS, &whole);
        network_state_save(network, end);
        for (size_t tree = 0; tree < network->tree_count; tree++)
            assert_true(network->trees[tree].counts.halved > 0);
        for (size_t i = 0; i < sizeof stops / sizeof *stops; i++) {
            start(network);
            if (stops[i] > 0)
                advance(network, &whole, 0, stops[i], &resumed);
            network_state_save(network, kept);
            network_state_restore(other, kept);
            memcpy(&resumed, &whole, sizeof whole);
            memset(resumed.point_m3s, 0xa5, sizeof resumed.point_m3s);
            memset(resumed.stage_m, 0xa5, sizeof resumed.stage_m);
            advance(other, &whole, stops[i], STEPS, &resumed);
            for (size_t point = 0; point < POINT_COUNT; point++) {
                size_t at = (point * (STEPS + 1) + stops[i]) * ALL_MEMBERS;
                size_t count = (STEPS + 1 - stops[i]) * ALL_MEMBERS;
                assert_same_bits(whole.point_m3s + at, resumed.point_m3s + at, count, method, "discharge");
                assert_same_bits(whole.stage_m + at, resumed.stage_m + at, count, method, "stage");
            }
            network_state_save(other, end_again);
            assert_same_bits(end, end_again, network_state_count(network), method, "state at the end");
        }
        free(kept);
        free(end);
        free(end_again);
        network_destroy(network);
        network_destroy(other);
    }
}

static void the_counters_go_with_the_state(void **state)
{
    (void)state;
    static struct flows flood;
    struct try_river try;
    make_river(&try);
    try.options.largest_discharge_m3s = try.options.typical_peak_m3s = 1.0; /* the flood is above the tables */
    for (size_t i = 0; i < REACH_COUNT; i++)
        try.reaches[i].method = i == UPPER ? NETWORK_MUSKINGUM_CUNGE : NETWORK_DYNAMIC;
    struct network *network = create(&try);
    double *kept = room_for_state(network);
    fill_inflow(&flood, STEPS);
    start(network);
    advance(network, &flood, 0, 70, &flood);
    size_t above = network_steps_above_tables(network), replaced = network_steps_replaced(network);
    double volume_m3 = network_volume_m3(network, 3);
    assert_true(above > 0);
    network_state_save(network, kept);
    advance(network, &flood, 70, STEPS, &flood);
    assert_true(network_steps_above_tables(network) > above);
    network_state_restore(network, kept);
    assert_int_equal(network_steps_above_tables(network), above);
    assert_int_equal(network_steps_below_zero(network), 0);
    assert_int_equal(network_steps_replaced(network), replaced);
    assert_true(network_volume_m3(network, 3) == volume_m3);
    free(kept);
    network_destroy(network);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_restored_network_goes_on_as_if_it_had_never_stopped),
        cmocka_unit_test(the_counters_go_with_the_state),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
