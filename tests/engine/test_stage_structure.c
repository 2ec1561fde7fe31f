/* SPDX-License-Identifier: MIT */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <math.h>

#include "engine/stage_structure.h"

/* A broad-crested weir 11 m long at 1.3 m, Q = 1.7 L H^1.5, and a culvert beside it with its sill at 0.4 m. */
static const double weir_depth_m[] = {1.3, 1.4, 1.6, 2.0, 2.7};
static const double weir_m3s[] = {0.0, 0.591, 3.073, 10.952, 30.977};
static const double culvert_depth_m[] = {0.4, 0.9, 1.9};
static const double culvert_m3s[] = {0.0, 1.9, 4.3};
static const struct stage_opening openings[] = {
    {.row_count = 5, .depth_m = weir_depth_m, .discharge_m3s = weir_m3s, .open_share = 1.0},
    {.row_count = 3, .depth_m = culvert_depth_m, .discharge_m3s = culvert_m3s, .open_share = 0.35}};
static const struct stage_structure both = {2, openings};
static const struct stage_structure weir = {1, openings};

static const double nothing_below = -(double)INFINITY;

static void free_flow_is_the_sum_of_the_tables_and_their_open_shares(void **state)
{
    (void)state;
    static const struct {
        double depth_m, discharge_m3s;
        const char *shows;
    } rows[] = {
        {-2.0, 0.0, "below the bed"},
        {0.4, 0.0, "at the lower sill"},
        {0.65, 0.35 * 0.95, "culvert alone, half blocked and more"},
        {1.6, 3.073 + 0.35 * 3.58, "both"},
        {3.1, 30.977 + 0.4 * 20.025 / 0.7 + 0.35 * (4.3 + 1.2 * 2.4), "beyond both tables"},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        struct stage_flow flow = stage_structure_flow(&both, rows[i].depth_m, nothing_below);
        if (fabs(flow.discharge_m3s - rows[i].discharge_m3s) > 1e-12)
            fail_msg("%s: %g, expected %g", rows[i].shows, flow.discharge_m3s, rows[i].discharge_m3s);
        assert_true(flow.by_depth_below_m2s == 0.0);
    }
}

/* Villemonte (1947): half the head drowns little, level water stops the flow; it never runs backwards. */
static void water_below_drowns_the_flow(void **state)
{
    (void)state;
    double free_m3s = stage_structure_flow(&weir, 2.3, nothing_below).discharge_m3s;
    assert_true(stage_structure_flow(&weir, 2.3, 1.3).discharge_m3s == free_m3s);
    double half = stage_structure_flow(&weir, 2.3, 1.8).discharge_m3s;
    assert_true(fabs(half - free_m3s * pow(1.0 - pow(0.5, 1.5), 0.385)) <= 1e-12 * free_m3s);
    assert_true(half > 0.84 * free_m3s && half < 0.85 * free_m3s);
    assert_true(half == free_m3s * stage_structure_drowned_share(0.5));
    assert_true(stage_structure_drowned_share(-0.2) == 1.0 && stage_structure_drowned_share(1.3) == 0.0);
    double before = free_m3s;
    for (double below = 1.31; below < 2.3; below += 0.01) {
        double drowned = stage_structure_flow(&weir, 2.3, below).discharge_m3s;
        assert_true(drowned < before && drowned > 0.0);
        before = drowned;
    }
    assert_true(stage_structure_flow(&weir, 2.3, 2.3).discharge_m3s == 0.0);
    assert_true(stage_structure_flow(&weir, 2.3, 4.0).discharge_m3s == 0.0);
}

static void slopes_are_those_of_the_flow(void **state)
{
    (void)state;
    const double step = 1e-7;
    for (double above = 0.437; above < 3.2; above += 0.0931)
        for (double below = -0.3; below < above - 1e-3; below += 0.0717) {
            struct stage_flow flow = stage_structure_flow(&both, above, below);
            double by_above = (stage_structure_flow(&both, above + step, below).discharge_m3s -
                               stage_structure_flow(&both, above - step, below).discharge_m3s) /
                              (2.0 * step);
            double by_below = (stage_structure_flow(&both, above, below + step).discharge_m3s -
                               stage_structure_flow(&both, above, below - step).discharge_m3s) /
                              (2.0 * step);
            double size = 1.0 + fabs(by_above);
            assert_true(fabs(flow.by_depth_above_m2s - by_above) <= 1e-4 * size);
            assert_true(fabs(flow.by_depth_below_m2s - by_below) <= 1e-4 * size);
            assert_true(flow.by_depth_above_m2s >= 0.0 && flow.by_depth_below_m2s <= 0.0);
        }
}

static void the_depth_that_passes_a_flow_passes_it(void **state)
{
    (void)state;
    static const double below[] = {-(double)INFINITY, 0.9, 1.7, 6.0};
    for (size_t i = 0; i < 4; i++)
        for (double flow = 0.013; flow < 200.0; flow *= 3.1) {
            double depth = stage_structure_depth_above_m(&both, flow, below[i]);
            assert_true(depth > 0.4);
            double back = stage_structure_flow(&both, depth, below[i]).discharge_m3s;
            assert_true(fabs(back - flow) <= 1e-8 * flow + 1e-10);
        }
    struct stage_opening shut = openings[0];
    shut.open_share = 0.0;
    const struct stage_structure blocked = {1, &shut};
    assert_true(stage_structure_depth_above_m(&blocked, 1.0, nothing_below) == 1e6);
}

/* Free it is the lesser of the two; drowned far enough the limit does nothing. */
static void a_limit_holds_free_or_drowned(void **state)
{
    (void)state;
    static const double most_m3s[] = {0.0, 0.4, 2.0, 6.0, 9.0};
    struct stage_opening limited = openings[0];
    limited.most_m3s = most_m3s;
    const struct stage_structure structure = {1, &limited};
    assert_int_equal(stage_structure_check(&structure), FW_OK);
    struct stage_flow flow = stage_structure_flow(&structure, 1.8, nothing_below);
    assert_true(fabs(flow.discharge_m3s - 4.0) <= 1e-12);
    assert_true(fabs(flow.by_depth_above_m2s - 10.0) <= 1e-12);
    flow = stage_structure_flow(&structure, 1.8, 1.5); /* a little drowned: still more than the limit */
    assert_true(fabs(flow.discharge_m3s - 4.0) <= 1e-12 && flow.by_depth_below_m2s == 0.0);
    struct stage_flow unlimited = stage_structure_flow(&weir, 1.8, 1.76);
    flow = stage_structure_flow(&structure, 1.8, 1.76);
    assert_true(unlimited.discharge_m3s < 4.0 && flow.discharge_m3s == unlimited.discharge_m3s);
    assert_true(flow.by_depth_below_m2s == unlimited.by_depth_below_m2s);
}

static void faulty_tables_are_refused(void **state)
{
    (void)state;
    static const double falling[] = {1.3, 1.2, 1.6, 2.0, 2.7}, endless[] = {1.3, 1.4, 1.6, 2.0, (double)INFINITY};
    static const double not_from_zero[] = {0.1, 0.591, 3.073, 10.952, 30.977}, level[] = {0.0, 1.0, 1.0, 2.0, 3.0};
    static const double endless_m3s[] = {0.0, (double)INFINITY};
    static const struct {
        const char *shows;
        struct stage_opening opening;
    } rows[] = {
        {"one row", {.row_count = 1, .depth_m = weir_depth_m, .discharge_m3s = weir_m3s, .open_share = 1.0}},
        {"depth falls", {.row_count = 5, .depth_m = falling, .discharge_m3s = weir_m3s, .open_share = 1.0}},
        {"depth endless", {.row_count = 5, .depth_m = endless, .discharge_m3s = weir_m3s, .open_share = 1.0}},
        {"flow at the sill",
         {.row_count = 5, .depth_m = weir_depth_m, .discharge_m3s = not_from_zero, .open_share = 1.0}},
        {"flow does not rise", {.row_count = 5, .depth_m = weir_depth_m, .discharge_m3s = level, .open_share = 1.0}},
        {"flow endless", {.row_count = 2, .depth_m = weir_depth_m, .discharge_m3s = endless_m3s, .open_share = 1.0}},
        {"more than open", {.row_count = 5, .depth_m = weir_depth_m, .discharge_m3s = weir_m3s, .open_share = 1.01}},
        {"less than shut", {.row_count = 5, .depth_m = weir_depth_m, .discharge_m3s = weir_m3s, .open_share = -0.01}},
        {"share unknown",
         {.row_count = 5, .depth_m = weir_depth_m, .discharge_m3s = weir_m3s, .open_share = (double)NAN}},
    };
    static const double most_falls[] = {0.0, 0.5, 0.4, 6.0, 7.0}, most_at_sill[] = {0.1, 0.5, 3.0, 6.0, 7.0};
    static const double most_endless[] = {0.0, 0.5, 3.0, 6.0, (double)INFINITY};
    const double *const most[] = {most_falls, most_at_sill, most_endless};
    assert_int_equal(stage_structure_check(&both), FW_OK);
    for (size_t i = 0; i < sizeof most / sizeof *most; i++) {
        struct stage_opening limited = openings[0];
        limited.most_m3s = most[i];
        const struct stage_structure faulty = {1, &limited};
        assert_int_equal(stage_structure_check(&faulty), FW_BAD_INPUT);
    }
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        const struct stage_opening two[] = {openings[0], rows[i].opening};
        const struct stage_structure faulty = {2, two};
        if (stage_structure_check(&faulty) != FW_BAD_INPUT)
            fail_msg("%s was taken", rows[i].shows);
    }
    const struct stage_structure none = {0};
    assert_int_equal(stage_structure_check(&none), FW_BAD_INPUT);
    assert_int_equal(stage_structure_check(NULL), FW_BAD_INPUT);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(free_flow_is_the_sum_of_the_tables_and_their_open_shares),
        cmocka_unit_test(water_below_drowns_the_flow),
        cmocka_unit_test(slopes_are_those_of_the_flow),
        cmocka_unit_test(the_depth_that_passes_a_flow_passes_it),
        cmocka_unit_test(a_limit_holds_free_or_drowned),
        cmocka_unit_test(faulty_tables_are_refused),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
