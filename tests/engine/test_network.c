/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdbool.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/engine/try_river.h"

static struct network *create(const struct try_river *try)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&try->river, &try->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    return network;
}

static void set_method(struct try_river *try, enum network_method method)
{
    for (size_t i = 0; i < REACH_COUNT; i++)
        try->reaches[i].method = method;
}

/* --- floods
 * -------------------------------------------------------------------------------------------------------- */

enum { STEPS = 900 }; /* 15 h at 60 s */

/* Two peaks, another for each gauge and member. */
static double flood_m3s(size_t gauge, size_t member, double t_s)
{
    double scale = (gauge == 0 ? 1.0 : 0.23) * (1.0 + 0.07 * (double)member);
    double h = t_s / 3600.0;
    double first = 1.9 + 0.3 * (double)gauge;
    return scale * (4.3 + 61.0 * exp(-pow((h - first) / 0.71, 2.0)) + 83.0 * exp(-pow((h - 5.3) / 1.13, 2.0)));
}

static double *make_inflow(size_t step_count, double time_step_s)
{
    double *inflow = calloc(GAUGE_COUNT * (step_count + 1) * ALL_MEMBERS, sizeof *inflow);
    assert_non_null(inflow);
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        for (size_t step = 0; step <= step_count; step++)
            for (size_t member = 0; member < ALL_MEMBERS; member++)
                inflow[(gauge * (step_count + 1) + step) * ALL_MEMBERS + member] =
                    flood_m3s(gauge, member, (double)step * time_step_s);
    return inflow;
}

static double *make_outflow(size_t step_count)
{
    double *outflow = calloc(POINT_COUNT * (step_count + 1) * ALL_MEMBERS, sizeof *outflow);
    assert_non_null(outflow);
    return outflow;
}

static void start_at_step_0(struct network *network, const double inflow_m3s[], size_t step_count)
{
    double first[GAUGE_COUNT * ALL_MEMBERS];
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
        memcpy(first + gauge * ALL_MEMBERS, inflow_m3s + gauge * (step_count + 1) * ALL_MEMBERS,
               ALL_MEMBERS * sizeof *first);
    assert_int_equal(network_start_steady(network, first), FW_OK);
}

static double at(const double series[], size_t row, size_t step_count, size_t step, size_t member)
{
    return series[(row * (step_count + 1) + step) * ALL_MEMBERS + member];
}

/* --- steady flow ----------------------------------------------------------------------------------------------- */

static void steady_flow_stays_steady(void **state)
{
    (void)state;
    static const enum network_method methods[] = {NETWORK_MUSKINGUM_CUNGE, NETWORK_KINEMATIC,
                                                  NETWORK_KINEMATIC_LINEAR};
    for (size_t m = 0; m < sizeof methods / sizeof *methods; m++) {
        struct try_river try;
        make_river(&try);
        set_method(&try, methods[m]);
        struct network *network = create(&try);
        double inflow[GAUGE_COUNT * (STEPS + 1) * ALL_MEMBERS];
        for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
            for (size_t i = 0; i < (STEPS + 1) * ALL_MEMBERS; i++)
                inflow[gauge * (STEPS + 1) * ALL_MEMBERS + i] =
                    flood_m3s(gauge, i % ALL_MEMBERS, 3600.0 * (1.0 + (double)(i % ALL_MEMBERS)));
        double *outflow = make_outflow(STEPS);
        start_at_step_0(network, inflow, STEPS);
        double volume = network_volume_m3(network, 1);
        assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
        for (size_t member = 0; member < ALL_MEMBERS; member++) {
            double upper = at(inflow, 0, STEPS, 0, member);
            double beck = at(inflow, 1, STEPS, 0, member);
            const double expected[POINT_COUNT] = {[HEAD_POINT] = upper,
                                                  [INNER_POINT] = 1.16 * upper,
                                                  [BECK_FOOT] = 1.07 * beck,
                                                  [LOWER_INNER] = 1.16 * upper + 1.07 * beck,
                                                  [MOUTH] = 1.16 * upper + 1.07 * beck + 1.37};
            for (size_t point = 0; point < POINT_COUNT; point++)
                for (size_t step = 0; step <= STEPS; step += 150) {
                    double flow = at(outflow, point, STEPS, step, member);
                    if (!(fabs(flow - expected[point]) <= 1e-12 * expected[point]))
                        fail_msg("method %d, point '%s', member %zu, step %zu: %.17g, expected %.17g",
                                 (int)methods[m], try.points[point].id, member, step, flow, expected[point]);
                }
        }
        assert_true(fabs(network_volume_m3(network, 1) - volume) <= 1e-12 * volume);
        free(outflow);
        network_destroy(network);
    }
}

static void a_dry_river_stays_dry(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    try.sides[1].constant_m3s = 0.0;
    struct network *network = create(&try);
    double *inflow = calloc(GAUGE_COUNT * (STEPS + 1) * ALL_MEMBERS, sizeof *inflow);
    double *outflow = make_outflow(STEPS);
    assert_non_null(inflow);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    for (size_t i = 0; i < (size_t)POINT_COUNT * (STEPS + 1) * ALL_MEMBERS; i++)
        assert_true(outflow[i] == 0.0);
    assert_true(network_volume_m3(network, 0) == 0.0);
    free(inflow);
    free(outflow);
    network_destroy(network);
}

/* --- volume ---------------------------------------------------------------------------------------------------- */

static double side_flow_m3s(const struct try_river *try, size_t side, const double inflow[], size_t step,
                            size_t member)
{
    const struct network_side_inflow *inflow_at = &try->sides[side];
    if (inflow_at->share_of_gauge == NETWORK_NONE)
        return inflow_at->constant_m3s;
    double ago = inflow_at->delay_s / try->options.time_step_s;
    double from = fmax(0.0, (double)step - ago); /* before the start: steady */
    size_t lower = (size_t)floor(from);
    double part = from - floor(from);
    double flow = (1.0 - part) * at(inflow, inflow_at->share_of_gauge, STEPS, lower, member);
    if (part > 0.0)
        flow += part * at(inflow, inflow_at->share_of_gauge, STEPS, lower + 1, member);
    return inflow_at->share * flow;
}

static double trapezoidal_step_m3(double before, double after, double time_step_s)
{
    return 0.5 * time_step_s * (before + after);
}

static void volume_balances_through_confluence_and_side_inflows(void **state)
{
    (void)state;
    static const enum network_method methods[] = {NETWORK_MUSKINGUM_CUNGE, NETWORK_KINEMATIC};
    for (size_t m = 0; m < 2; m++) {
        struct try_river try;
        make_river(&try);
        set_method(&try, methods[m]);
        struct network *network = create(&try);
        double *inflow = make_inflow(STEPS, try.options.time_step_s);
        double *outflow = make_outflow(STEPS);
        double worst = 0.0;
        double before[ALL_MEMBERS];
        start_at_step_0(network, inflow, STEPS);
        for (size_t member = 0; member < ALL_MEMBERS; member++)
            before[member] = network_volume_m3(network, member);
        assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
        for (size_t member = 0; member < ALL_MEMBERS; member++) {
            double dt = try.options.time_step_s;
            double in = 0.0, out = 0.0;
            for (size_t step = 0; step < STEPS; step++) {
                for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
                    in += trapezoidal_step_m3(at(inflow, gauge, STEPS, step, member),
                                              at(inflow, gauge, STEPS, step + 1, member), dt);
                for (size_t side = 0; side < SIDE_COUNT; side++)
                    in += trapezoidal_step_m3(side_flow_m3s(&try, side, inflow, step, member),
                                              side_flow_m3s(&try, side, inflow, step + 1, member), dt);
                out += trapezoidal_step_m3(at(outflow, MOUTH, STEPS, step, member),
                                           at(outflow, MOUTH, STEPS, step + 1, member), dt);
            }
            double imbalance = (in - out - (network_volume_m3(network, member) - before[member])) / in;
            worst = fmax(worst, fabs(imbalance));
        }
        print_message("tree with confluence and side inflows, method %d: volume imbalance %.1e of inflow\n",
                      (int)methods[m], worst);
        assert_true(worst <= 1e-12);
        assert_int_equal(network_steps_below_zero(network), 0);
        assert_int_equal(network_steps_above_tables(network), 0);
        free(inflow);
        free(outflow);
        network_destroy(network);
    }
}

/* --- time and members ------------------------------------------------------------------------------------------ */

static void many_calls_give_what_one_call_gives_bit_for_bit(void **state)
{
    (void)state;
    static const size_t chunks[] = {1, 7, 26, 61, 300, 2, 503};
    static const enum network_method methods[] = {NETWORK_MUSKINGUM_CUNGE, NETWORK_KINEMATIC,
                                                  NETWORK_KINEMATIC_LINEAR};
    for (size_t m = 0; m < 3; m++) {
        struct try_river try;
        make_river(&try);
        set_method(&try, methods[m]);
        struct network *whole = create(&try);
        struct network *parts = create(&try);
        double *inflow = make_inflow(STEPS, try.options.time_step_s);
        double *expected = make_outflow(STEPS);
        start_at_step_0(whole, inflow, STEPS);
        start_at_step_0(parts, inflow, STEPS);
        assert_int_equal(network_advance(whole, STEPS, inflow, expected), FW_OK);
        size_t begin = 0;
        for (size_t c = 0; c < sizeof chunks / sizeof *chunks; c++) {
            size_t length = chunks[c];
            double *part_inflow = calloc(GAUGE_COUNT * (length + 1) * ALL_MEMBERS, sizeof *part_inflow);
            double *part_outflow = make_outflow(length);
            assert_non_null(part_inflow);
            for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++)
                memcpy(part_inflow + gauge * (length + 1) * ALL_MEMBERS,
                       inflow + (gauge * (STEPS + 1) + begin) * ALL_MEMBERS,
                       (length + 1) * ALL_MEMBERS * sizeof *inflow);
            assert_int_equal(network_advance(parts, length, part_inflow, part_outflow), FW_OK);
            for (size_t point = 0; point < POINT_COUNT; point++)
                assert_memory_equal(part_outflow + point * (length + 1) * ALL_MEMBERS,
                                    expected + (point * (STEPS + 1) + begin) * ALL_MEMBERS,
                                    (length + 1) * ALL_MEMBERS * sizeof *expected);
            begin += length;
            free(part_inflow);
            free(part_outflow);
        }
        assert_int_equal(begin, STEPS);
        free(inflow);
        free(expected);
        network_destroy(whole);
        network_destroy(parts);
    }
}

static void a_member_does_not_feel_its_neighbours(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    double *inflow = make_inflow(STEPS, try.options.time_step_s);
    double *outflow = make_outflow(STEPS);
    start_at_step_0(network, inflow, STEPS);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    try.options.members_per_group = 1;
    for (size_t place = 0; place < MEMBERS;
         place++) { /* the members in this place of each group, without the others */
        struct network *alone = create(&try);
        double *alone_in = calloc(GAUGE_COUNT * (STEPS + 1) * GROUP_COUNT, sizeof *alone_in);
        double *alone_out = calloc(POINT_COUNT * (STEPS + 1) * GROUP_COUNT, sizeof *alone_out);
        double first[GAUGE_COUNT * GROUP_COUNT];
        assert_non_null(alone_in);
        assert_non_null(alone_out);
        for (size_t row = 0; row < GAUGE_COUNT * (STEPS + 1); row++)
            for (size_t group = 0; group < GROUP_COUNT; group++)
                alone_in[row * GROUP_COUNT + group] = inflow[row * ALL_MEMBERS + group * MEMBERS + place];
        memcpy(first, alone_in, GROUP_COUNT * sizeof *first);
        memcpy(first + GROUP_COUNT, alone_in + (STEPS + 1) * GROUP_COUNT, GROUP_COUNT * sizeof *first);
        assert_int_equal(network_start_steady(alone, first), FW_OK);
        assert_int_equal(network_advance(alone, STEPS, alone_in, alone_out), FW_OK);
        for (size_t row = 0; row < POINT_COUNT * (STEPS + 1); row++)
            for (size_t group = 0; group < GROUP_COUNT; group++)
                assert_memory_equal(&alone_out[row * GROUP_COUNT + group],
                                    &outflow[row * ALL_MEMBERS + group * MEMBERS + place], sizeof *outflow);
        free(alone_in);
        free(alone_out);
        network_destroy(alone);
    }
    free(inflow);
    free(outflow);
    network_destroy(network);
}

static void rougher_members_are_later(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    double *inflow = make_inflow(STEPS, try.options.time_step_s);
    double *outflow = make_outflow(STEPS);
    double arrival_s[GROUP_COUNT];
    for (size_t gauge = 0; gauge < GAUGE_COUNT; gauge++) /* the same flood for all */
        for (size_t step = 0; step <= STEPS; step++)
            for (size_t member = 1; member < ALL_MEMBERS; member++)
                inflow[(gauge * (STEPS + 1) + step) * ALL_MEMBERS + member] = at(inflow, gauge, STEPS, step, 0);
    start_at_step_0(network, inflow, STEPS);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    for (size_t group = 0; group < GROUP_COUNT; group++) {
        size_t step = 0;
        while (step < STEPS && at(outflow, MOUTH, STEPS, step, group * MEMBERS) < 30.0)
            step++;
        assert_true(step < STEPS);
        arrival_s[group] = (double)step * try.options.time_step_s;
        for (size_t i = 0; i <= STEPS; i++)
            assert_true(at(outflow, MOUTH, STEPS, i, group * MEMBERS) ==
                        at(outflow, MOUTH, STEPS, i, group * MEMBERS + 1));
    }
    /* Manning: celerity goes as n^-1 at one depth, n^-0.6 at one flow: 1.2 against 0.8 is 1.5, to the 0.6 1.28 */
    double ratio = arrival_s[2] / arrival_s[0];
    assert_true(arrival_s[0] < arrival_s[1] && arrival_s[1] < arrival_s[2]);
    assert_true(ratio > 1.05 && ratio < 1.28);
    free(inflow);
    free(outflow);
    network_destroy(network);
}

/* --- places
 * ------------------------------------------------------------------------------------------------------ */

static void a_delayed_share_comes_when_it_should(void **state)
{
    (void)state;
    /* a side inflow as large as the gauge's flow, at the foot, delayed by a part of a step; the last cell alone
     * stands between */
    static const double delays_s[] = {0.0, 60.0, 90.0, 1830.0, 7213.7};
    for (size_t d = 0; d < sizeof delays_s / sizeof *delays_s; d++) {
        struct try_river try;
        make_river(&try);
        try.sides[0] = (struct network_side_inflow){
            .reach_index = UPPER, .at_m = 0.0, .share_of_gauge = 1, .share = 1.0, .delay_s = delays_s[d]};
        try.river.side_inflow_count = 1;
        struct network *network = create(&try);
        double *inflow = make_inflow(STEPS, try.options.time_step_s);
        double *outflow = make_outflow(STEPS);
        double held = 0.0;
        for (size_t step = 0; step <= STEPS; step++) /* gauge 0 flows evenly: what varies comes from the side alone */
            for (size_t member = 0; member < ALL_MEMBERS; member++)
                inflow[step * ALL_MEMBERS + member] = 11.0;
        start_at_step_0(network, inflow, STEPS);
        double before = network_volume_m3(network, 0);
        assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
        /* the balance of the whole river gives the side volume that entered, to rounding */
        for (size_t step = 0; step < STEPS; step++)
            held += trapezoidal_step_m3(at(inflow, 0, STEPS, step, 0) + at(inflow, 1, STEPS, step, 0) -
                                            at(outflow, MOUTH, STEPS, step, 0),
                                        at(inflow, 0, STEPS, step + 1, 0) + at(inflow, 1, STEPS, step + 1, 0) -
                                            at(outflow, MOUTH, STEPS, step + 1, 0),
                                        try.options.time_step_s);
        double entered = network_volume_m3(network, 0) - before - held;
        double expected = 0.0;
        for (size_t step = 0; step < STEPS; step++)
            expected += trapezoidal_step_m3(side_flow_m3s(&try, 0, inflow, step, 0),
                                            side_flow_m3s(&try, 0, inflow, step + 1, 0), try.options.time_step_s);
        assert_true(fabs(entered - expected) <= 1e-10 * expected);
        free(inflow);
        free(outflow);
        network_destroy(network);
    }
}

/* Outflow of a river of one reach, or of the same cut in two at a third of its cells, to one flood. */
static void route_whole_or_cut(bool is_cut, enum network_method method, double outflow[STEPS + 1])
{
    const size_t gauge_node = 0;
    const double factor = 1.0;
    const double length_m = 9000.0;
    struct network_reach reaches[2] = {{.id = "first",
                                        .from_node = 0,
                                        .to_node = 1,
                                        .length_m = is_cut ? length_m / 3.0 : length_m,
                                        .slope_m_per_m = 0.0024,
                                        .section = &trapezoid,
                                        .cell_m = length_m / 60.0,
                                        .method = method}};
    reaches[1] = reaches[0];
    reaches[1].id = "second";
    reaches[1].from_node = 1;
    reaches[1].to_node = 2;
    reaches[1].length_m = length_m * 2.0 / 3.0;
    struct network_point foot = {.id = "foot", .reach_index = is_cut, .at_m = reaches[is_cut].length_m};
    struct network_river river = {.node_count = is_cut ? 3 : 2,
                                  .gauge_count = 1,
                                  .gauge_node = &gauge_node,
                                  .reach_count = is_cut ? 2 : 1,
                                  .reaches = reaches,
                                  .point_count = 1,
                                  .points = &foot};
    struct network_options options = {.time_step_s = 60.0,
                                      .group_count = 1,
                                      .roughness_factors = &factor,
                                      .members_per_group = 1,
                                      .largest_discharge_m3s = 100.0};
    struct network *network = NULL;
    struct network_fault fault = {""};
    double inflow[STEPS + 1];
    if (network_create(&river, &options, &network, &fault) != FW_OK)
        fail_msg("%s", fault.text);
    assert_int_equal(network_cell_count(network, 0), is_cut ? 20 : 60);
    for (size_t step = 0; step <= STEPS; step++)
        inflow[step] = flood_m3s(0, 0, 60.0 * (double)step);
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    network_destroy(network);
}

static void a_reach_cut_in_two_at_a_cell_routes_as_one(void **state)
{
    (void)state;
    static const enum network_method methods[] = {NETWORK_MUSKINGUM_CUNGE, NETWORK_KINEMATIC,
                                                  NETWORK_KINEMATIC_LINEAR};
    for (size_t m = 0; m < 3; m++) {
        double whole[STEPS + 1], cut[STEPS + 1];
        double worst = 0.0;
        route_whole_or_cut(false, methods[m], whole);
        route_whole_or_cut(true, methods[m], cut);
        for (size_t step = 0; step <= STEPS; step++)
            worst = fmax(worst, fabs(cut[step] - whole[step]) / whole[step]);
        print_message("cut in two, method %d: largest difference %.1e of the flow\n", (int)methods[m], worst);
        assert_true(worst <= 1e-11);
    }
}

static void a_point_part_way_lies_between_its_neighbours(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    try.options.fixed_cell_count = 20;
    double cell_m = try.reaches[UPPER].length_m / 20.0;
    try.points[INNER_POINT].at_m = 7.0 * cell_m;
    try.points[BECK_FOOT] = (struct network_point){.id = "next", .reach_index = UPPER, .at_m = 8.0 * cell_m};
    try.points[LOWER_INNER] = (struct network_point){.id = "part", .reach_index = UPPER, .at_m = 7.29 * cell_m};
    struct network *network = create(&try);
    double *inflow = make_inflow(STEPS, try.options.time_step_s);
    double *outflow = make_outflow(STEPS);
    start_at_step_0(network, inflow, STEPS);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    for (size_t step = 0; step <= STEPS; step++)
        for (size_t member = 0; member < ALL_MEMBERS; member++) {
            double straight = 0.71 * at(outflow, INNER_POINT, STEPS, step, member) +
                              0.29 * at(outflow, BECK_FOOT, STEPS, step, member);
            assert_true(fabs(at(outflow, LOWER_INNER, STEPS, step, member) - straight) <= 1e-12 * straight);
            double head = at(inflow, 0, STEPS, step, member);
            assert_true(fabs(at(outflow, HEAD_POINT, STEPS, step, member) - head) <= 1e-15 * head);
        }
    free(inflow);
    free(outflow);
    network_destroy(network);
}

/* --- stages
 * ------------------------------------------------------------------------------------------------------ */

static void stage_is_the_normal_stage_of_the_members_roughness(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    double worst_m = 0.0;
    for (size_t group = 0; group < GROUP_COUNT; group++) {
        struct section rougher = trapezoid;
        rougher.roughness_n *= try.roughness_factors[group];
        rougher.plain_roughness_n *= try.roughness_factors[group];
        for (double flow = 1e-4; flow < 160.0; flow *= 1.0137) {
            double stage = network_point_stage_m(network, INNER_POINT, group * MEMBERS + 1, flow);
            double depth = 0.0;
            assert_int_equal(section_normal_depth_m(&rougher, try.reaches[UPPER].slope_m_per_m, flow, &depth), FW_OK);
            worst_m = fmax(worst_m, fabs(stage - depth));
            if (!(fabs(stage - depth) <= fmax(1e-3, 1e-3 * depth)))
                fail_msg("group %zu, %g m3/s: stage %.6f m, normal depth %.6f m", group, flow, stage, depth);
        }
        assert_true(network_point_stage_m(network, INNER_POINT, group * MEMBERS, 0.0) == 0.0);
    }
    print_message("normal stage from the tables: largest error %.2e m\n", worst_m);
    network_destroy(network);
}

static void stage_rating_is_straight_between_rows_and_beyond_the_last(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    try.points[INNER_POINT].stage_rating =
        (struct network_stage_rating){4, try.rated_discharge_m3s, try.rated_stage_m};
    struct network *network = create(&try);
    static const struct {
        double discharge_m3s, stage_m;
        const char *shows;
    } rows[] = {
        {0.0, 0.31, "below the first row its stage stands"},
        {2.0, 0.31, "a row"},
        {9.5, 0.625, "between"},
        {17.0, 0.94, "a row"},
        {40.0, 1.52, "a row"},
        {65.0, 2.245, "between"},
        {90.0, 2.97, "the last row"},
        {140.0, 4.42, "carried on: as far again as from 40 to 90"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++)
        for (size_t member = 0; member < ALL_MEMBERS; member += 5)
            if (!(fabs(network_point_stage_m(network, INNER_POINT, member, rows[i].discharge_m3s) -
                       rows[i].stage_m) <= 1e-12))
                fail_msg("%s: %.17g", rows[i].shows,
                         network_point_stage_m(network, INNER_POINT, member, rows[i].discharge_m3s));
    network_destroy(network);
}

/* --- choices and the summary
 * ------------------------------------------------------------------------------------- */

static void cells_follow_the_celerity_within_bounds(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    try.reaches[UPPER].length_m = 10.0;
    try.reaches[MIDDLE].length_m = 300e3;
    try.reaches[BECK].cell_m = 100.0;
    try.points[INNER_POINT].at_m = 6.0;
    try.sides[0].at_m = 9.9;
    struct network *network = create(&try);
    const double peak[] = {90.0};
    struct network_reach_steps steps;
    struct network_reach_flow flow;
    assert_int_equal(network_cell_count(network, UPPER), 3);
    assert_int_equal(network_cell_count(network, MIDDLE), 400);
    assert_int_equal(network_cell_count(network, BECK), 34); /* 3370 m by 100 */
    assert_int_equal(network_reach_summary(network, LOWER, 1.0, 1, peak, &steps, &flow), FW_OK);
    /* rounded to whole cells: within half a cell in n */
    assert_true(fabs(flow.courant_number - 1.0) <= 0.5 / (double)steps.cell_count * 1.01);

    double *inflow = make_inflow(STEPS, try.options.time_step_s);
    double *outflow = make_outflow(STEPS);
    start_at_step_0(network, inflow, STEPS);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    for (size_t i = 0; i < (size_t)POINT_COUNT * (STEPS + 1) * ALL_MEMBERS; i++)
        assert_true(isfinite(outflow[i]) && outflow[i] >= 0.0);
    free(inflow);
    free(outflow);
    network_destroy(network);
}

static void the_summary_gives_mannings_flow_in_a_wide_channel(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    const double discharge[] = {0.37, 8.1, 90.0, 160.0};
    struct network_reach_steps steps;
    struct network_reach_flow flow[4];
    assert_int_equal(network_reach_summary(network, LOWER, 1.2, 4, discharge, &steps, flow), FW_OK);
    assert_int_equal(steps.cell_count, network_cell_count(network, LOWER));
    assert_true(fabs(steps.cell_m * (double)steps.cell_count - 8130.0) <= 1e-9);
    assert_true(steps.time_step_s == 60.0);
    for (size_t i = 0; i < 4; i++) {
        /* Manning with R = h, B = 31 m, n = 0.033 x 1.2, S0 = 0.0019: h = (n q / sqrt S0)^(3/5), c = 5/3 V */
        double per_width = discharge[i] / 31.0;
        double depth = pow(0.033 * 1.2 * per_width / sqrt(0.0019), 0.6);
        double velocity = per_width / depth;
        double froude_squared = velocity * velocity / (9.80665 * depth);
        double diffusivity = per_width / (2.0 * 0.0019) * (1.0 - 4.0 / 9.0 * froude_squared);
        assert_true(fabs(flow[i].depth_m - depth) <= 1e-5 * depth);
        assert_true(fabs(flow[i].velocity_m_s - velocity) <= 1e-5 * velocity);
        /* the curve's straight pieces are 0.3 % of depth long, so celerity steps by 0.2 % at most */
        assert_true(fabs(flow[i].celerity_m_s - velocity * 5.0 / 3.0) <= 2e-3 * velocity);
        assert_true(fabs(flow[i].travel_time_s - 8130.0 / flow[i].celerity_m_s) <= 1e-9 * flow[i].travel_time_s);
        assert_true(fabs(flow[i].diffusivity_m2_s - diffusivity) <= 2e-3 * diffusivity);
        assert_true(fabs(flow[i].top_width_m - 31.0) <= 1e-6);
        assert_true(fabs(flow[i].courant_number - flow[i].celerity_m_s * 60.0 / steps.cell_m) <= 1e-9);
    }
    network_destroy(network);
}

static void the_summary_refuses_bad_questions(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    const double good[] = {3.1}, zero[] = {0.0}, nan_flow[] = {NOT_A_NUMBER}, infinite[] = {ENDLESS},
                 negative[] = {-1.0};
    struct network_reach_steps steps = {77, 0.0, 0.0};
    struct network_reach_flow flow = {.depth_m = 77.0};
    assert_int_equal(network_reach_summary(network, REACH_COUNT, 1.0, 1, good, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, 0.0, 1, good, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, NOT_A_NUMBER, 1, good, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, ENDLESS, 1, good, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, 1.0, 1, zero, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, 1.0, 1, nan_flow, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, 1.0, 1, infinite, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(network_reach_summary(network, LOWER, 1.0, 1, negative, &steps, &flow), FW_BAD_INPUT);
    assert_int_equal(steps.cell_count, 77);
    assert_true(flow.depth_m == 77.0);
    network_destroy(network);
}

/* --- what is refused while routing ---------------------------------------------------------------------------- */

static void a_bad_inflow_changes_nothing(void **state)
{
    (void)state;
    static const double bad[] = {-1e-9, NOT_A_NUMBER, ENDLESS, -ENDLESS, 1.1e9};
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    struct network *untouched = create(&try);
    double *inflow = make_inflow(STEPS, try.options.time_step_s);
    double *expected = make_outflow(STEPS);
    double *outflow = make_outflow(STEPS);
    double start[GAUGE_COUNT * ALL_MEMBERS] = {0};
    start_at_step_0(network, inflow, STEPS);
    start_at_step_0(untouched, inflow, STEPS);
    for (size_t i = 0; i < sizeof bad / sizeof *bad; i++) {
        size_t spot = (1 * (STEPS + 1) + 411) * ALL_MEMBERS + 3;
        double good = inflow[spot];
        inflow[spot] = bad[i];
        assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_BAD_INPUT);
        inflow[spot] = good;
        start[ALL_MEMBERS + 2] = bad[i];
        assert_int_equal(network_start_steady(network, start), FW_BAD_INPUT);
    }
    /* a series that does not begin at the present */
    inflow[4] += 1e-9;
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_BAD_INPUT);
    inflow[4] = flood_m3s(0, 4, 0.0);
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    assert_int_equal(network_advance(untouched, STEPS, inflow, expected), FW_OK);
    assert_memory_equal(outflow, expected, (size_t)POINT_COUNT * (STEPS + 1) * ALL_MEMBERS * sizeof *outflow);
    free(inflow);
    free(expected);
    free(outflow);
    network_destroy(network);
    network_destroy(untouched);
}

static void flow_above_the_tables_is_computed_and_counted(void **state)
{
    (void)state;
    struct try_river try;
    make_river(&try);
    struct network *network = create(&try);
    double *inflow = make_inflow(STEPS, try.options.time_step_s);
    double *outflow = make_outflow(STEPS);
    start_at_step_0(network, inflow, STEPS);
    for (size_t step = 100; step < 130; step++)
        inflow[step * ALL_MEMBERS + 1] = 9e8; /* absurd, but a number */
    assert_int_equal(network_advance(network, STEPS, inflow, outflow), FW_OK);
    for (size_t i = 0; i < (size_t)POINT_COUNT * (STEPS + 1) * ALL_MEMBERS; i++)
        assert_true(isfinite(outflow[i]));
    assert_true(network_steps_above_tables(network) >= 30);
    free(inflow);
    free(outflow);
    network_destroy(network);
}

static void no_network_is_destroyed_quietly(void **state)
{
    (void)state;
    network_destroy(NULL);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(steady_flow_stays_steady),
        cmocka_unit_test(a_dry_river_stays_dry),
        cmocka_unit_test(volume_balances_through_confluence_and_side_inflows),
        cmocka_unit_test(many_calls_give_what_one_call_gives_bit_for_bit),
        cmocka_unit_test(a_member_does_not_feel_its_neighbours),
        cmocka_unit_test(rougher_members_are_later),
        cmocka_unit_test(a_delayed_share_comes_when_it_should),
        cmocka_unit_test(a_reach_cut_in_two_at_a_cell_routes_as_one),
        cmocka_unit_test(a_point_part_way_lies_between_its_neighbours),
        cmocka_unit_test(stage_is_the_normal_stage_of_the_members_roughness),
        cmocka_unit_test(stage_rating_is_straight_between_rows_and_beyond_the_last),
        cmocka_unit_test(cells_follow_the_celerity_within_bounds),
        cmocka_unit_test(the_summary_gives_mannings_flow_in_a_wide_channel),
        cmocka_unit_test(the_summary_refuses_bad_questions),
        cmocka_unit_test(a_bad_inflow_changes_nothing),
        cmocka_unit_test(flow_above_the_tables_is_computed_and_counted),
        cmocka_unit_test(no_network_is_destroyed_quietly),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
