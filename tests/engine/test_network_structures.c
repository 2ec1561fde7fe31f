/* SPDX-License-Identifier: MIT */
/*
 * Weirs, road embankments, culverts and drops of the bed at the feet of reaches, within a river and at its end.
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "engine/method.h"
#include "tests/engine/route_one_reach.h"
#include "tests/engine/try_sections.h"

enum { STEPS = 720, MEMBERS = 3 };
enum { ABOVE, BELOW, END, PLACES }; /* at the structure's both sides, and at the river's end */

/* A culvert's table with its sill on the bed, and a road over it, Q = 1.6 L H^1.5 with L = 40 m at 2.1 m. */
enum { ROAD_ROWS = 60 };
static const double culvert_depth_m[] = {0.0, 0.5, 1.0, 1.7, 2.6, 4.0};
static const double culvert_m3s[] = {0.0, 3.1, 9.7, 21.3, 31.9, 44.0};
static double road_depth_m[ROAD_ROWS], road_m3s[ROAD_ROWS];

struct crossing { /* points into itself */
    struct stage_opening openings[2];
    struct stage_structure structure;
    struct network_reach reaches[2];
    struct network_point points[PLACES];
    struct network_river river;
    struct network_options options;
    double flow[PLACES * (STEPS + 1) * MEMBERS], stage[PLACES * (STEPS + 1) * MEMBERS];
    double inflow[(STEPS + 1) * MEMBERS];
};

static const size_t gauge_node = 0;
static const double one = 1.0;
static const struct section wide_20 = {.shape = SECTION_WIDE, .bottom_m = 20.0, .roughness_n = 0.035};
static const struct gamma_flood flood = {9.1, 71.0, 2.7 * 3600.0, 5.0};

static void make_road(void)
{
    road_depth_m[0] = 2.1;
    road_m3s[0] = 0.0;
    for (size_t row = 1; row < ROAD_ROWS; row++) {
        double head = 0.002 * pow(1.15, (double)row);
        road_depth_m[row] = 2.1 + head;
        road_m3s[row] = 1.6 * 40.0 * pow(head, 1.5);
    }
}

static void make_crossing(struct crossing *crossing, enum network_method upper, enum network_method lower,
                          double culvert_open_share)
{
    make_road();
    memset(crossing, 0, sizeof *crossing);
    crossing->openings[0] = (struct stage_opening){
        .row_count = 6, .depth_m = culvert_depth_m, .discharge_m3s = culvert_m3s, .open_share = culvert_open_share};
    crossing->openings[1] = (struct stage_opening){
        .row_count = ROAD_ROWS, .depth_m = road_depth_m, .discharge_m3s = road_m3s, .open_share = 1.0};
    crossing->structure = (struct stage_structure){2, crossing->openings};
    crossing->reaches[0] = (struct network_reach){.id = "upper",
                                                  .from_node = 0,
                                                  .to_node = 1,
                                                  .length_m = 6000.0,
                                                  .slope_m_per_m = 0.0013,
                                                  .section = &wide_20,
                                                  .cell_m = 150.0,
                                                  .method = upper,
                                                  .foot_structure = &crossing->structure};
    crossing->reaches[1] = (struct network_reach){.id = "lower",
                                                  .from_node = 1,
                                                  .to_node = 2,
                                                  .length_m = 4000.0,
                                                  .slope_m_per_m = 0.0011,
                                                  .section = &wide_20,
                                                  .cell_m = 150.0,
                                                  .method = lower};
    crossing->points[ABOVE] = (struct network_point){.id = "above", .reach_index = 0, .at_m = 6000.0};
    crossing->points[BELOW] = (struct network_point){.id = "below", .reach_index = 1, .at_m = 0.0};
    crossing->points[END] = (struct network_point){.id = "end", .reach_index = 1, .at_m = 4000.0};
    crossing->river = (struct network_river){.node_count = 3,
                                             .gauge_count = 1,
                                             .gauge_node = &gauge_node,
                                             .reach_count = 2,
                                             .reaches = crossing->reaches,
                                             .point_count = PLACES,
                                             .points = crossing->points};
    crossing->options = (struct network_options){.time_step_s = 60.0,
                                                 .group_count = 1,
                                                 .roughness_factors = &one,
                                                 .members_per_group = MEMBERS,
                                                 .largest_discharge_m3s = 120.0};
    for (size_t step = 0; step <= STEPS; step++)
        for (size_t member = 0; member < MEMBERS; member++)
            crossing->inflow[step * MEMBERS + member] =
                (0.7 + 0.3 * (double)member) * gamma_flood_m3s(60.0 * (double)step, &flood);
}

/* The upper reach alone: the structure, or the drop, is the river's end. */
static void end_at_the_structure(struct crossing *crossing)
{
    crossing->river.node_count = 2;
    crossing->river.reach_count = 1;
    crossing->points[BELOW] = crossing->points[END] = crossing->points[ABOVE];
}

static struct network *create(const struct crossing *crossing)
{
    struct network *network = NULL;
    struct network_fault fault = {""};
    if (network_create(&crossing->river, &crossing->options, &network, &fault) != FW_OK)
        fail_msg("network_create: %s", fault.text);
    return network;
}

static struct network *route(struct crossing *crossing, double before_m3[MEMBERS])
{
    struct network *network = create(crossing);
    assert_int_equal(network_start_steady(network, crossing->inflow), FW_OK);
    for (size_t member = 0; member < MEMBERS; member++)
        before_m3[member] = network_volume_m3(network, member);
    assert_int_equal(network_advance_with_stage(network, STEPS, crossing->inflow, crossing->flow, crossing->stage),
                     FW_OK);
    return network;
}

static double at(const double values[], size_t place, size_t step, size_t member)
{
    return values[(place * (STEPS + 1) + step) * MEMBERS + member];
}

static double imbalance(const struct crossing *crossing, const struct network *network, const double before_m3[])
{
    double worst = 0.0;
    for (size_t member = 0; member < MEMBERS; member++) {
        double in = 0.0, out = 0.0;
        for (size_t step = 0; step <= STEPS; step++) {
            double weight = step == 0 || step == STEPS ? 30.0 : 60.0;
            in += weight * crossing->inflow[step * MEMBERS + member];
            out += weight * at(crossing->flow, END, step, member);
        }
        worst = fmax(worst, fabs(in - out - (network_volume_m3(network, member) - before_m3[member])) / in);
    }
    return worst;
}

#define M NETWORK_MUSKINGUM_CUNGE
#define D NETWORK_DYNAMIC
#define F NETWORK_DIFFUSIVE

static const struct {
    const char *shows;
    enum network_method upper, lower;
    double open_share, drop_m, held_m;
    bool is_end, has_no_structure;
} rows[] = {
    {"a road with a culvert, the river below", D, D, 1.0, 0.6, 0.0, false, false},
    {"the same without inertia", F, F, 1.0, 0.6, 0.0, false, false},
    {"its culvert half blocked", D, D, 0.5, 0.6, 0.0, false, false},
    {"drowned by a lake below", D, D, 1.0, 0.0, 5.9, false, false},
    {"storage form below", D, M, 1.0, 0.6, 0.0, false, false},
    {"another kind of full equations below", D, F, 1.0, 0.6, 0.0, false, false},
    {"at the river's end", D, D, 1.0, 0.0, 0.0, true, false},
    {"a drop of the bed alone", D, D, 0.0, 1.4, 0.0, false, true},
    {"a drop drowned by a lake", D, D, 0.0, 0.4, 5.9, false, true},
    {"a drop at the river's end", F, F, 0.0, 1.4, 0.0, true, true},
};
enum { ROWS = sizeof rows / sizeof *rows };

static void make_row(struct crossing *crossing, size_t row)
{
    make_crossing(crossing, rows[row].upper, rows[row].lower, rows[row].open_share);
    crossing->reaches[0].foot_drop_m = rows[row].drop_m;
    crossing->reaches[1].outlet_depth_m = rows[row].held_m;
    if (rows[row].has_no_structure)
        crossing->reaches[0].foot_structure = NULL;
    if (rows[row].is_end)
        end_at_the_structure(crossing);
}

/* The level below, above the upper bed; nothing where it is not known there. */
static double below_m(const struct crossing *crossing, size_t row, size_t step, size_t member)
{
    return rows[row].is_end || rows[row].lower != rows[row].upper
               ? -(double)INFINITY
               : at(crossing->stage, BELOW, step, member) - rows[row].drop_m;
}

/*
 * `wide` of 20 m: critical flow at the edge, drowned by the same rule, and not more than what a cell's friction can carry: with
 * K = B h^(5/3) / n, Sf = 0.7 K / (dK/dh dx) = 0.42 h / dx.
 */
static double overfall_m3s(double above_m, double below_edge_m, double cell_m)
{
    double flow = 20.0 * sqrt(9.80665 * above_m) * above_m;
    double most = 20.0 / 0.035 * pow(above_m, 5.0 / 3.0) * sqrt(0.42 * above_m / cell_m);
    double ratio = fmin(below_edge_m / above_m, 1.0);
    if (ratio > 0.0 && ratio < 0.98)
        flow *= pow(1.0 - pow(ratio, 1.5), 0.385);
    else if (ratio > 0.0)
        flow *= pow(1.0 - pow(0.98, 1.5), 0.385) * (1.0 - ratio) / 0.02;
    return fmin(flow, most);
}

static void the_flow_is_what_the_levels_say_and_volume_closes(void **state)
{
    (void)state;
    static struct crossing crossing;
    for (size_t row = 0; row < ROWS; row++) {
        double before_m3[MEMBERS], worst = 0.0, worst_steady = 0.0, mean = 0.0;
        make_row(&crossing, row);
        struct network *network = route(&crossing, before_m3);
        for (size_t step = 0; step <= STEPS; step++)
            for (size_t member = 0; member < MEMBERS; member++) {
                double above_m = at(crossing.stage, ABOVE, step, member);
                double below = below_m(&crossing, row, step, member);
                double said = rows[row].has_no_structure
                                  ? overfall_m3s(above_m, below, 150.0)
                                  : stage_structure_flow(&crossing.structure, above_m, below).discharge_m3s;
                double error = fabs(at(crossing.flow, ABOVE, step, member) / said - 1.0);
                worst = fmax(worst, error);
                mean += error / ((STEPS + 1) * MEMBERS);
                worst_steady = fmax(worst_steady, step == 0 ? error : 0.0);
            }
        double volume_error = imbalance(&crossing, network, before_m3);
        print_message("%s: volume error %.1e; flow by the levels to %.1e at the start, %.1e in the mean, %.1e at "
                      "worst; %zu steps replaced\n",
                      rows[row].shows, volume_error, worst_steady, mean, worst, network_steps_replaced(network));
        assert_true(volume_error <= 1e-12);
        /* an overfall's table is of straight lines; drowned, flow is steep against the levels, which have 1e-13 of themselves */
        assert_true(worst_steady <= (rows[row].has_no_structure ? 8e-3 : 1e-8));
        assert_true(mean <= 8e-3);
        assert_true(worst <= 0.1); /* Newton's remainder in one step */
        assert_int_equal(network_steps_replaced(network), 0);
        network_destroy(network);
    }
}

/* The same flow stands higher above a culvert that is part-blocked, and the road is wet earlier. */
static void a_part_blocked_culvert_raises_the_water_above_it(void **state)
{
    (void)state;
    static struct crossing clean, blocked;
    double before_m3[MEMBERS];
    size_t wet[2] = {0, 0};
    make_row(&clean, 0);
    make_row(&blocked, 2);
    network_destroy(route(&clean, before_m3));
    network_destroy(route(&blocked, before_m3));
    for (size_t step = 0; step <= STEPS; step++) {
        wet[0] = wet[0] == 0 && at(clean.stage, ABOVE, step, 1) >= 2.1 ? step : wet[0];
        wet[1] = wet[1] == 0 && at(blocked.stage, ABOVE, step, 1) >= 2.1 ? step : wet[1];
    }
    double base_m[2] = {at(clean.stage, ABOVE, 0, 1), at(blocked.stage, ABOVE, 0, 1)};
    print_message("culvert clean and half blocked: at %.1f m3/s %.2f and %.2f m above it, the road wet after %zu "
                  "and %zu min\n",
                  clean.inflow[1], base_m[0], base_m[1], wet[0], wet[1]);
    assert_true(base_m[1] > base_m[0] + 0.1);
    assert_true(wet[1] > 0 && wet[0] > wet[1] + 10);
}

/* Free over a drop the water falls to the critical depth, as far as cells are short enough to see it. */
static void an_edge_is_critical_where_cells_are_short(void **state)
{
    (void)state;
    static struct crossing crossing;
    static const double cells_m[] = {150.0, 50.0, 15.0, 5.0};
    double before_m3[MEMBERS], ratio[4], far_m[4];
    for (size_t i = 0; i < 4; i++) {
        make_row(&crossing, 7);
        crossing.reaches[0].cell_m = cells_m[i];
        crossing.points[END] = (struct network_point){.id = "far", .reach_index = 0, .at_m = 5100.0};
        struct network *network = route(&crossing, before_m3);
        double flow = crossing.inflow[2], critical_m = cbrt(pow(flow / 20.0, 2.0) / 9.80665);
        ratio[i] = at(crossing.stage, ABOVE, 0, 2) / critical_m;
        far_m[i] = at(crossing.stage, END, 0, 2);
        print_message("cells of %.0f m: %.3f of the critical depth at the edge, %.4f m 900 m above it, %zu steps "
                      "replaced\n",
                      cells_m[i], ratio[i], far_m[i], network_steps_replaced(network));
        assert_int_equal(network_steps_replaced(network), 0);
        assert_true(i == 0 || ratio[i] < ratio[i - 1]);
        assert_true(fabs(far_m[i] / far_m[0] - 1.0) <= 0.01); /* what happens at the edge stays there */
        network_destroy(network);
    }
    assert_true(ratio[3] <= 1.05 && ratio[3] >= 0.998);
}

/* Far drowned the two levels are one but for about the velocity head. */
static void a_drowned_edge_costs_a_velocity_head(void **state)
{
    (void)state;
    static struct crossing crossing;
    double before_m3[MEMBERS], most = 0.0;
    make_row(&crossing, 8);
    network_destroy(route(&crossing, before_m3));
    for (size_t step = 0; step <= STEPS; step += 60)
        for (size_t member = 0; member < MEMBERS; member++) {
            double above_m = at(crossing.stage, ABOVE, step, member);
            double fall_m = above_m - (at(crossing.stage, BELOW, step, member) - 0.4);
            double speed = at(crossing.flow, ABOVE, step, member) / (20.0 * above_m);
            assert_true(fall_m > 0.0);
            most = fmax(most, fall_m - speed * speed / (2.0 * 9.80665));
        }
    print_message("drowned drop: the fall is at most %.3f m more than the velocity head\n", most);
    assert_true(most <= 0.1);
}

static void a_member_beside_others_is_as_alone(void **state)
{
    (void)state;
    static struct crossing crossing, alone;
    double before_m3[MEMBERS];
    make_row(&crossing, 0);
    network_destroy(route(&crossing, before_m3));
    make_row(&alone, 0);
    alone.options.members_per_group = 1;
    double inflow[STEPS + 1], flow[PLACES * (STEPS + 1)];
    for (size_t step = 0; step <= STEPS; step++)
        inflow[step] = crossing.inflow[step * MEMBERS + 2];
    struct network *network = create(&alone);
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
    assert_int_equal(network_advance(network, STEPS, inflow, flow), FW_OK);
    for (size_t place = 0; place < PLACES; place++)
        for (size_t step = 0; step <= STEPS; step++)
            assert_true(flow[place * (STEPS + 1) + step] == at(crossing.flow, place, step, 2));
    network_destroy(network);
}

static void the_choice_knows_a_structure_and_its_backwater(void **state)
{
    (void)state;
    static struct crossing crossing;
    const struct method_flood gentle = {9.0, 11.0, 40.0 * 3600.0};
    for (int has_structure = 0; has_structure < 2; has_structure++) {
        struct method_choice choice;
        make_crossing(&crossing, NETWORK_AUTO, NETWORK_AUTO, 0.2);
        crossing.reaches[0].slope_m_per_m = crossing.reaches[1].slope_m_per_m = 0.004;
        crossing.options.gauge_floods = &gentle;
        if (has_structure == 0) {
            crossing.reaches[0].foot_structure = NULL;
            crossing.reaches[0].foot_drop_m = 0.3;
        }
        struct network *network = create(&crossing);
        network_reach_choice(network, 0, &choice);
        assert_int_equal(choice.reason, METHOD_STRUCTURE);
        assert_int_equal(choice.method, NETWORK_DYNAMIC);
        assert_true((choice.raise_share > 0.5) == (has_structure == 1));
        network_reach_choice(network, 1, &choice);
        assert_int_equal(choice.method, NETWORK_MUSKINGUM_CUNGE);
        network_destroy(network);
    }
    assert_non_null(strstr(method_reason_text(METHOD_STRUCTURE), "structure"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(the_flow_is_what_the_levels_say_and_volume_closes),
        cmocka_unit_test(a_part_blocked_culvert_raises_the_water_above_it),
        cmocka_unit_test(an_edge_is_critical_where_cells_are_short),
        cmocka_unit_test(a_drowned_edge_costs_a_velocity_head),
        cmocka_unit_test(a_member_beside_others_is_as_alone),
        cmocka_unit_test(the_choice_knows_a_structure_and_its_backwater),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
