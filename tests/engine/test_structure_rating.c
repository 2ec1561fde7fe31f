/* SPDX-License-Identifier: MIT */
#include "engine/structure_rating.h"

#include <math.h>
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>

#include "engine/network.h"
#include "tests/engine/reference_table.h"
#include "tests/engine/try_sections.h"

static const double nothing_below = -(double)INFINITY;
static const double slope = 0.0024;

/* A causeway: a pipe with its sill at 0.3 m under a road 41 m long at 1.95 m. */
static const double pipe_depth_m[] = {0.3, 0.9, 1.95, 3.1};
static const double pipe_m3s[] = {0.0, 9.7, 37.0, 51.5};

struct causeway {
    double weir_depth_m[STRUCTURE_RATING_WEIR_ROWS], weir_m3s[STRUCTURE_RATING_WEIR_ROWS];
    struct stage_opening openings[2];
    struct stage_structure structure;
    double discharge_m3s[STRUCTURE_RATING_ROWS_MAX], stage_m[STRUCTURE_RATING_ROWS_MAX];
    size_t row_count;
};

static void make_causeway(struct causeway *causeway, double open_share)
{
    *causeway = (struct causeway){.row_count = 0};
    structure_rating_weir(1.95, 41.0, 1.6, causeway->weir_depth_m, causeway->weir_m3s);
    causeway->openings[0] =
        (struct stage_opening){STRUCTURE_RATING_WEIR_ROWS, causeway->weir_depth_m, causeway->weir_m3s, 1.0, NULL};
    causeway->openings[1] = (struct stage_opening){4, pipe_depth_m, pipe_m3s, open_share, NULL};
    causeway->structure = (struct stage_structure){2, causeway->openings};
}

static void build(struct causeway *causeway, double roughness_factor)
{
    assert_int_equal(structure_rating_build(&causeway->structure, &try_plain, slope, roughness_factor,
                                            causeway->discharge_m3s, causeway->stage_m, &causeway->row_count),
                     FW_OK);
}

static double between(const struct causeway *causeway, double flow_m3s)
{
    const double *flow = causeway->discharge_m3s, *stage = causeway->stage_m;
    size_t row = 1;
    while (row + 1 < causeway->row_count && flow[row] < flow_m3s)
        row++;
    return stage[row - 1] + (stage[row] - stage[row - 1]) * (flow_m3s - flow[row - 1]) / (flow[row] - flow[row - 1]);
}

/* HDS-5, equation 8, its check: 3.0 US, 100 ft of road, 1 ft of head are 300 cfs. */
static void a_weir_passes_the_published_flow(void **state)
{
    (void)state;
    static const double foot_m = 0.3048;
    struct reference_table table = reference_table_load("roadway_overtopping_weir.csv");
    size_t check = reference_table_find(&table, "item", "check: 3.0 US, L=100 ft, H=1 ft");
    double cfs = strtod(reference_table_text(&table, check, "value_US"), NULL);
    assert_true(cfs == 300.0);
    double depth_m[STRUCTURE_RATING_WEIR_ROWS], flow_m3s[STRUCTURE_RATING_WEIR_ROWS];
    structure_rating_weir(1.2, 100.0 * foot_m, 3.0 * sqrt(foot_m), depth_m, flow_m3s);
    struct stage_opening opening = {STRUCTURE_RATING_WEIR_ROWS, depth_m, flow_m3s, 1.0, NULL};
    struct stage_structure weir = {1, &opening};
    assert_int_equal(stage_structure_check(&weir), FW_OK);
    double expected_m3s = cfs * foot_m * foot_m * foot_m;
    double found_m3s = stage_structure_flow(&weir, 1.2 + foot_m, nothing_below).discharge_m3s;
    assert_true(fabs(found_m3s - expected_m3s) <= 2e-4 * expected_m3s); /* what the header promises */
    double stage_m = stage_structure_depth_above_m(&weir, expected_m3s, nothing_below);
    assert_true(fabs(stage_m - (1.2 + foot_m)) <= 2e-4 * foot_m);
    reference_table_clear(&table);
}

static void the_lines_of_a_weir_lie_on_or_a_hair_above_the_formula(void **state)
{
    (void)state;
    double depth_m[STRUCTURE_RATING_WEIR_ROWS], flow_m3s[STRUCTURE_RATING_WEIR_ROWS];
    structure_rating_weir(0.7, 13.0, 1.53, depth_m, flow_m3s);
    struct stage_opening opening = {STRUCTURE_RATING_WEIR_ROWS, depth_m, flow_m3s, 1.0, NULL};
    struct stage_structure weir = {1, &opening};
    for (double head_m = 0.0011; head_m < 20.0; head_m *= 1.0137) {
        double formula = 13.0 * 1.53 * pow(head_m, 1.5);
        double found = stage_structure_flow(&weir, 0.7 + head_m, nothing_below).discharge_m3s;
        assert_true(found >= formula * (1.0 - 1e-12) && found <= formula * (1.0 + 2e-4));
    }
}

/* Every row and every place between: the level passes the flow against the normal depth below, to the stated width. */
static void the_level_passes_the_flow_against_the_normal_depth_below(void **state)
{
    (void)state;
    static struct causeway causeway;
    static const double factors[] = {0.8, 1.0, 1.37};
    for (size_t i = 0; i < sizeof factors / sizeof *factors; i++) {
        make_causeway(&causeway, 1.0);
        build(&causeway, factors[i]);
        assert_true(causeway.row_count > 64 && causeway.row_count < STRUCTURE_RATING_ROWS_MAX);
        assert_true(causeway.discharge_m3s[0] == 0.0 && causeway.stage_m[0] == 0.3);
        for (size_t row = 1; row < causeway.row_count; row++)
            assert_true(causeway.discharge_m3s[row] > causeway.discharge_m3s[row - 1] &&
                        causeway.stage_m[row] >= causeway.stage_m[row - 1]);
        for (double flow_m3s = 0.02; flow_m3s < 900.0; flow_m3s *= 1.0071) {
            double below_m = 0.0;
            assert_int_equal(section_normal_depth_m(&try_plain, slope, flow_m3s * factors[i], &below_m), FW_OK);
            double exact_m = stage_structure_depth_above_m(&causeway.structure, flow_m3s, below_m);
            if (!(fabs(between(&causeway, flow_m3s) - exact_m) <= 3.0 * STRUCTURE_RATING_CLOSE_M))
                fail_msg("x%g, %g m3/s: %.5f m, expected %.5f", factors[i], flow_m3s, between(&causeway, flow_m3s),
                         exact_m);
            assert_true(exact_m > below_m || exact_m >= 0.3);
        }
    }
}

/*
 * By hand, half of the pipe blocked, 30 m3/s. Normal depth in the demonstration's section at 0.0024: 1.3139 m. Were the
 * road not there: the pipe's half at 1.95 m passes 18.5 m3/s freely, so the road is awash. At 2.235 m: H = 0.285,
 * 1.6 x 41 x 0.285^1.5 = 9.981 m3/s over the road, free, as the water below stands under the crown; the pipe's half
 * 0.5 (37 + 0.285 x 14.5 / 1.15) = 20.297, drowned by (1.3139 - 0.3) / (2.235 - 0.3) = 0.52400:
 * x (1 - 0.52400^1.5)^0.385 = 0.83225: 16.892; together 26.873. At 2.30 m: 13.583 + 20.7065 x (1 - 0.50697^1.5)^0.385
 * = 13.583 + 17.427 = 31.011. By the straight line 30 m3/s at 2.2841.
 */
static void a_part_blocked_pipe_sends_the_water_over_the_road(void **state)
{
    (void)state;
    static struct causeway clean, blocked;
    double below_m = 0.0;
    assert_int_equal(section_normal_depth_m(&try_plain, slope, 30.0, &below_m), FW_OK);
    assert_true(fabs(below_m - 1.3139) < 0.0001);
    make_causeway(&clean, 1.0);
    make_causeway(&blocked, 0.5);
    build(&clean, 1.0);
    build(&blocked, 1.0);
    assert_true(fabs(between(&blocked, 30.0) - 2.2841) < 0.0015); /* the line stands in for a curve over 6.5 cm */
    /* clean: 37 m3/s at the crown, drowned to x 0.777: 28.7, so 30 m3/s just wet the road */
    assert_true(between(&clean, 30.0) > 1.95 && between(&clean, 30.0) < 2.0);
    for (double flow_m3s = 0.5; flow_m3s < 500.0; flow_m3s *= 1.07)
        assert_true(between(&blocked, flow_m3s) >= between(&clean, flow_m3s));
}

static void a_rougher_river_below_never_lowers_the_level_above(void **state)
{
    (void)state;
    static struct causeway smooth, rough;
    make_causeway(&smooth, 1.0);
    make_causeway(&rough, 1.0);
    build(&smooth, 1.0);
    build(&rough, 1.25);
    double most_m = 0.0;
    for (double flow_m3s = 0.5; flow_m3s < 500.0; flow_m3s *= 1.07) {
        double higher_m = between(&rough, flow_m3s) - between(&smooth, flow_m3s);
        assert_true(higher_m > -2.0 * STRUCTURE_RATING_CLOSE_M);
        most_m = fmax(most_m, higher_m);
    }
    assert_true(most_m > 0.05); /* and does raise it where it drowns the pipe */
}

static void what_cannot_be_rated_is_refused(void **state)
{
    (void)state;
    static struct causeway causeway;
    make_causeway(&causeway, 1.0);
    size_t count = 7;
    double *flow = causeway.discharge_m3s, *stage = causeway.stage_m;
    assert_int_equal(structure_rating_build(&causeway.structure, &try_plain, 0.0, 1.0, flow, stage, &count),
                     FW_BAD_INPUT);
    assert_int_equal(structure_rating_build(&causeway.structure, &try_plain, slope, -1.0, flow, stage, &count),
                     FW_BAD_INPUT);
    assert_int_equal(
        structure_rating_build(&causeway.structure, &try_plain, (double)INFINITY, 1.0, flow, stage, &count),
        FW_BAD_INPUT);
    causeway.structure.opening_count = 0;
    assert_int_equal(structure_rating_build(&causeway.structure, &try_plain, slope, 1.0, flow, stage, &count),
                     FW_BAD_INPUT);
    make_causeway(&causeway, 0.0);
    causeway.openings[0].open_share = 0.0;
    assert_int_equal(structure_rating_build(&causeway.structure, &try_plain, slope, 1.0, flow, stage, &count),
                     FW_OUT_OF_RANGE);
    assert_int_equal(count, 7);
}

/* --- in the network --- */

static void a_point_has_the_level_above_its_structure_in_each_groups_roughness(void **state)
{
    (void)state;
    static struct causeway causeway;
    static const double factors[] = {0.8, 1.3};
    size_t gauge_node = 0;
    make_causeway(&causeway, 0.6);
    struct network_reach reach = {.id = "reach",
                                  .from_node = 0,
                                  .to_node = 1,
                                  .length_m = 5000.0,
                                  .slope_m_per_m = slope,
                                  .section = &try_plain};
    struct network_point points[] = {
        {.id = "causeway", .reach_index = 0, .at_m = 5000.0, .structure = &causeway.structure},
        {.id = "bank", .reach_index = 0, .at_m = 2500.0}};
    struct network_river river = {.node_count = 2,
                                  .gauge_count = 1,
                                  .gauge_node = &gauge_node,
                                  .reach_count = 1,
                                  .reaches = &reach,
                                  .point_count = 2,
                                  .points = points};
    struct network_options options = {.time_step_s = 60.0,
                                      .group_count = 2,
                                      .roughness_factors = factors,
                                      .members_per_group = 1,
                                      .largest_discharge_m3s = 300.0};
    struct network *network = NULL;
    struct network_fault fault = {.text = ""};
    assert_int_equal(network_create(&river, &options, &network, &fault), FW_OK);
    const double inflow[] = {44.0, 44.0};
    double next[] = {44.0, 44.0, 44.0, 44.0}, flow[8], stage[8];
    assert_int_equal(network_start_steady(network, inflow), FW_OK);
    assert_int_equal(network_advance_with_stage(network, 1, next, flow, stage), FW_OK);
    for (size_t group = 0; group < 2; group++) {
        double below_m = 0.0;
        assert_int_equal(section_normal_depth_m(&try_plain, slope, 44.0 * factors[group], &below_m), FW_OK);
        double exact_m = stage_structure_depth_above_m(&causeway.structure, 44.0, below_m);
        assert_true(fabs(stage[2 + group] - exact_m) <= 2.0 * STRUCTURE_RATING_CLOSE_M);
        assert_true(network_point_stage_m(network, 0, group, flow[2 + group]) == stage[2 + group]);
        assert_true(fabs(stage[4 + 2 + group] - below_m) <= 1e-3); /* the other point: normal depth */
    }
    assert_true(stage[3] > stage[2] + 0.01);
    network_destroy(network);

    points[0].stage_rating = (struct network_stage_rating){4, pipe_m3s, pipe_depth_m};
    assert_int_equal(network_create(&river, &options, &network, &fault), FW_BAD_INPUT);
    assert_non_null(strstr(fault.text, "point 'causeway': structure: has a stage_rating beside it"));
    points[0].stage_rating.row_count = 0;
    causeway.openings[1].open_share = 1.2;
    assert_int_equal(network_create(&river, &options, &network, &fault), FW_BAD_INPUT);
    assert_non_null(strstr(fault.text, "point 'causeway': structure: tables must rise"));
    causeway.openings[0].open_share = causeway.openings[1].open_share = 0.0;
    assert_int_equal(network_create(&river, &options, &network, &fault), FW_BAD_INPUT);
    assert_non_null(strstr(fault.text, "point 'causeway': structure: nothing flows there"));
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(a_weir_passes_the_published_flow),
        cmocka_unit_test(the_lines_of_a_weir_lie_on_or_a_hair_above_the_formula),
        cmocka_unit_test(the_level_passes_the_flow_against_the_normal_depth_below),
        cmocka_unit_test(a_part_blocked_pipe_sends_the_water_over_the_road),
        cmocka_unit_test(a_rougher_river_below_never_lowers_the_level_above),
        cmocka_unit_test(what_cannot_be_rated_is_refused),
        cmocka_unit_test(a_point_has_the_level_above_its_structure_in_each_groups_roughness),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
