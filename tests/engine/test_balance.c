/* SPDX-License-Identifier: MIT */
/*
 * Volume through a junction, by every conserving method, in every shape of section, for floods, pulses and a dry start:
 * what came in less what went out is what is held more, to 1e-12, and nothing runs below zero where it may not.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdbool.h>

#include "engine/network.h"
#include "tests/engine/try_sections.h"

enum { STEPS = 180, GAUGES = 2, POINTS = 4 };

static const double step_s = 120.0;

/* --- floods: at each of two gauges, step by step ------------------------------------------------------------------ */

static double smooth_m3s(size_t gauge, size_t step)
{
    double x = (double)step / (gauge == 0 ? 70.0 : 45.0);
    return 5.3 + (gauge == 0 ? 117.0 : 41.0) * pow(x * exp(1.0 - x), 5.0);
}

static double pulse_m3s(size_t gauge, size_t step)
{
    return step >= 20 + 17 * gauge && step < 65 + 31 * gauge ? 150.0 - 60.0 * (double)gauge : 0.0;
}

static double teeth_m3s(size_t gauge, size_t step) /* one gauge up while the other is down */
{
    return (step / 15 + gauge) % 2 == 0 ? 0.4 : 83.0;
}

static double one_side_m3s(size_t gauge, size_t step) /* the beck lies still and fills from below */
{
    return gauge == 1 ? 0.2 : 8.0 + 0.6 * fmin((double)step, fmax(0.0, 200.0 - (double)step));
}

static const struct {
    const char *name;
    double (*inflow_m3s)(size_t gauge, size_t step);
    bool starts_dry;
} floods[] = {{"smooth flood", smooth_m3s, false},
              {"pulses from a dry start", pulse_m3s, true},
              {"teeth", teeth_m3s, false},
              {"one side", one_side_m3s, false}};

static const struct {
    const char *name;
    enum network_method method, method_below;
} engines[] = {{"storage form", NETWORK_MUSKINGUM_CUNGE, NETWORK_MUSKINGUM_CUNGE},
               {"kinematic", NETWORK_KINEMATIC, NETWORK_KINEMATIC},
               {"dynamic", NETWORK_DYNAMIC, NETWORK_DYNAMIC},
               {"diffusive", NETWORK_DIFFUSIVE, NETWORK_DIFFUSIVE},
               {"storage form into dynamic", NETWORK_MUSKINGUM_CUNGE, NETWORK_DYNAMIC},
               {"dynamic into storage form", NETWORK_DYNAMIC, NETWORK_MUSKINGUM_CUNGE}};

struct tally {
    double worst;
    size_t runs, replaced;
};

static double volume_m3(const double flow_m3s[])
{
    double sum = 0.0;
    for (size_t i = 0; i < STEPS; i++)
        sum += 0.5 * step_s * (flow_m3s[i] + flow_m3s[i + 1]);
    return sum;
}

static struct network *make_network(size_t engine, const struct section *section, double slope)
{
    static struct network_reach reaches[3];
    static struct network_river river;
    static const size_t gauge_node[GAUGES] = {0, 1};
    static const double factor = 1.0;
    static const struct network_point points[POINTS] = {{.id = "upper foot", .reach_index = 0, .at_m = 6100.0},
                                                        {.id = "beck foot", .reach_index = 1, .at_m = 2300.0},
                                                        {.id = "half way", .reach_index = 2, .at_m = 3700.0},
                                                        {.id = "mouth", .reach_index = 2, .at_m = 7300.0}};
    static const struct network_side_inflow side = {
        .reach_index = 2, .at_m = 1900.0, .share_of_gauge = NETWORK_NONE, .constant_m3s = 2.7};
    static const double length_m[3] = {6100.0, 2300.0, 7300.0};
    static const char *const ids[3] = {"upper", "beck", "lower"};
    for (size_t i = 0; i < 3; i++)
        reaches[i] = (struct network_reach){.id = ids[i],
                                            .from_node = i,
                                            .to_node = i < 2 ? 2 : 3,
                                            .length_m = length_m[i],
                                            .slope_m_per_m = slope,
                                            .section = section,
                                            .method = i < 2 ? engines[engine].method : engines[engine].method_below};
    river = (struct network_river){.node_count = 4,
                                   .gauge_count = GAUGES,
                                   .gauge_node = gauge_node,
                                   .reach_count = 3,
                                   .reaches = reaches,
                                   .side_inflow_count = 1,
                                   .side_inflows = &side,
                                   .point_count = POINTS,
                                   .points = points};
    const struct network_options options = {.time_step_s = step_s,
                                            .group_count = 1,
                                            .roughness_factors = &factor,
                                            .members_per_group = 1,
                                            .largest_discharge_m3s = 240.0};
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("%s", fault.text);
    return network;
}

static void check_balance(size_t engine, size_t shape, double slope, size_t flood, struct tally *tally)
{
    static double inflow[GAUGES][STEPS + 1], flow[POINTS][STEPS + 1], stage[POINTS][STEPS + 1];
    bool starts_dry = floods[flood].starts_dry;
    bool may_turn =
        network_method_is_full(engines[engine].method) || network_method_is_full(engines[engine].method_below);
    for (size_t gauge = 0; gauge < GAUGES; gauge++)
        for (size_t step = 0; step <= STEPS; step++)
            inflow[gauge][step] = floods[flood].inflow_m3s(gauge, step);
    struct network *network = make_network(engine, try_sections[shape].section, slope);
    const double start[GAUGES] = {inflow[0][0], inflow[1][0]};
    if (!starts_dry)
        assert_int_equal(network_start_steady(network, start), FW_OK);
    double before = network_volume_m3(network, 0);
    assert_int_equal(network_advance_with_stage(network, STEPS, inflow[0], flow[0], stage[0]), FW_OK);
    /* from a dry start the side inflow begins within the first step */
    double in =
        volume_m3(inflow[0]) + volume_m3(inflow[1]) + 2.7 * step_s * ((double)STEPS - (starts_dry ? 0.5 : 0.0));
    double imbalance = fabs(in - volume_m3(flow[3]) - (network_volume_m3(network, 0) - before)) / in;
    for (size_t point = 0; point < POINTS; point++)
        for (size_t step = 0; step <= STEPS; step++)
            if (!isfinite(flow[point][step]) || (!may_turn && !(flow[point][step] >= 0.0)) ||
                !(stage[point][step] >= 0.0))
                fail_msg("%s, %s, S0 %g, %s: point %zu, step %zu: %g m3/s, %g m", engines[engine].name,
                         try_sections[shape].name, slope, floods[flood].name, point, step, flow[point][step],
                         stage[point][step]);
    if (!(imbalance <= 1e-12))
        fail_msg("%s, %s, S0 %g, %s: volume off by %.1e", engines[engine].name, try_sections[shape].name, slope,
                 floods[flood].name, imbalance);
    assert_int_equal(network_steps_below_zero(network), 0);
    tally->worst = fmax(tally->worst, imbalance);
    tally->replaced += network_steps_replaced(network);
    tally->runs++;
    network_destroy(network);
}

static void volume_closes_for_every_engine_shape_and_flood(void **state)
{
    (void)state;
    static const double slopes[] = {0.0004, 0.0031};
    for (size_t engine = 0; engine < sizeof engines / sizeof *engines; engine++) {
        struct tally tally = {0.0, 0, 0};
        for (size_t shape = 0; shape < TRY_SECTION_COUNT; shape++)
            for (size_t i = 0; i < 2; i++)
                for (size_t flood = 0; flood < sizeof floods / sizeof *floods; flood++)
                    check_balance(engine, shape, slopes[i], flood, &tally);
        print_message(
            "%-26s %zu runs over shapes, slopes and floods: volume off by %.1e at worst, %zu steps replaced\n",
            engines[engine].name, tally.runs, tally.worst, tally.replaced);
    }
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(volume_closes_for_every_engine_shape_and_flood),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
