/* SPDX-License-Identifier: MIT */
/*
 * Where a reach by another method follows on the full equations, whose flow may turn: a square pulse over a few cells
 * and long steps makes a front ring. (Found by tests/fuzz/fuzz_flood.c.)
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "engine/network.h"

enum { STEPS = 400 };

static const double step_s = 120.0;

static const struct section flat_channel = {.shape = SECTION_RECTANGLE, .bottom_m = 11.3, .roughness_n = 0.034};

static double square_m3s(size_t step)
{
    return step / 20 % 2 == 1 ? 310.0 : 0.3;
}

/* A short reach by the full equations, then one by `below`, and one by the storage form after that. */
static struct network *make_river(enum network_method above, enum network_method below)
{
    static struct network_reach reaches[3] = {{.id = "above",
                                               .from_node = 0,
                                               .to_node = 1,
                                               .length_m = 60.0,
                                               .slope_m_per_m = 0.0007,
                                               .section = &flat_channel},
                                              {.id = "below",
                                               .from_node = 1,
                                               .to_node = 2,
                                               .length_m = 2300.0,
                                               .slope_m_per_m = 0.003,
                                               .section = &flat_channel},
                                              {.id = "last",
                                               .from_node = 2,
                                               .to_node = 3,
                                               .length_m = 1700.0,
                                               .slope_m_per_m = 0.004,
                                               .section = &flat_channel}};
    static const struct network_point points[4] = {{.id = "foot above", .reach_index = 0, .at_m = 60.0},
                                                   {.id = "head below", .reach_index = 1, .at_m = 0.0},
                                                   {.id = "half way", .reach_index = 1, .at_m = 1150.0},
                                                   {.id = "mouth", .reach_index = 2, .at_m = 1700.0}};
    static const size_t gauge_node = 0;
    static const double factor = 1.0;
    static struct network_river river;
    reaches[0].method = above;
    reaches[1].method = below;
    river = (struct network_river){.node_count = 4,
                                   .gauge_count = 1,
                                   .gauge_node = &gauge_node,
                                   .reach_count = 3,
                                   .reaches = reaches,
                                   .point_count = 4,
                                   .points = points};
    const struct network_options options = {.time_step_s = step_s,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 310.0};
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("%s", fault.text);
    return network;
}

static double passed_m3(const double flow_m3s[])
{
    double sum = 0.0;
    for (size_t i = 0; i < STEPS; i++)
        sum += 0.5 * step_s * (flow_m3s[i] + flow_m3s[i + 1]);
    return sum;
}

static void what_runs_back_is_kept_from_what_comes_next_and_no_drop_is_lost(void **state)
{
    (void)state;
    static const enum network_method above[] = {NETWORK_DYNAMIC, NETWORK_DIFFUSIVE};
    static const enum network_method below[] = {NETWORK_MUSKINGUM_CUNGE, NETWORK_KINEMATIC, NETWORK_KINEMATIC_LINEAR,
                                                NETWORK_DYNAMIC, NETWORK_DIFFUSIVE};
    double inflow[STEPS + 1], flow[4 * (STEPS + 1)], lowest_of_all = 0.0;
    for (size_t i = 0; i <= STEPS; i++)
        inflow[i] = square_m3s(i);
    for (size_t a = 0; a < 2; a++)
        for (size_t b = 0; b < 5; b++) {
            struct network *network = make_river(above[a], below[b]);
            assert_int_equal(network_start_steady(network, inflow), FW_OK);
            double before = network_volume_m3(network, 0);
            assert_int_equal(network_advance(network, STEPS, inflow, flow), FW_OK);
            double held = network_volume_m3(network, 0) - before;
            for (size_t i = 0; i <= STEPS; i++)
                lowest_of_all = fmin(lowest_of_all, flow[i]);
            for (size_t i = STEPS + 1; i < 4 * (STEPS + 1); i++)
                assert_true(isfinite(flow[i]) && (b >= 3 || flow[i] >= 0.0));
            if (b != 2) /* the linear scheme conserves nothing */
                assert_true(fabs(passed_m3(inflow) - passed_m3(flow + 3 * (STEPS + 1)) - held) <=
                            1e-12 * passed_m3(inflow));
            assert_int_equal(network_steps_below_zero(network), 0);
            network_destroy(network);
        }
    print_message("flow at the foot of the full equations down to %.1f m3/s\n", lowest_of_all);
    assert_true(lowest_of_all < -1.0); /* it was put to the test */
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(what_runs_back_is_kept_from_what_comes_next_and_no_drop_is_lost),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
