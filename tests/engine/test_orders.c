/* SPDX-License-Identifier: MIT */
/*
 * The order of convergence of every method on a smooth wave, as its design says, with cells and steps refined together and
 * apart. Each grid is held against one much finer by the same method; the storage form also meets an exact solution at an
 * order of 2.00 in test_thomas.c.
 *
 *   kinematic-linear, kinematic   upwind: 1 in everything
 *   storage form                  centred, diffusion matched: 2 in everything, while no cell is held to the least diffusion
 *   diffusive, dynamic            box scheme, weighted 0.55: 2 in cells; in steps (theta - 1/2) dt, so 1, and 1 together
 */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>

#include <cmocka.h>
#include <stdbool.h>
#include <stdio.h>

#include "tests/engine/route_one_reach.h"

enum { GRIDS = 3 };

enum refined { TOGETHER, CELLS, STEPS };
static const char *const refined_name[] = {"cells and steps", "cells alone", "steps alone"};

static const struct section wide_bed = {.shape = SECTION_WIDE, .bottom_m = 43.0, .roughness_n = 0.034};
static const struct gamma_flood smooth = {120.0, 130.0, 6.0 * 3600.0, 5.0};

struct order_case {
    enum network_method method;
    enum refined refined;
    size_t cell_count; /* of the coarsest grid */
    double time_step_s;
    size_t finest;          /* the judge is so many times finer than the finest grid */
    double lowest, highest; /* of every order */
};

/* 30 km, steep enough for waves of a day to run mostly down, flat enough for their diffusion to show. */
static struct one_reach_result route_grid(const struct order_case *from, size_t finer)
{
    bool has_cells = from->refined != STEPS, has_steps = from->refined != CELLS;
    const struct one_reach one = {.section = &wide_bed,
                                  .slope_m_per_m = 0.0007,
                                  .length_m = 30000.0,
                                  .method = from->method,
                                  .time_step_s = from->time_step_s / (double)(has_steps ? finer : 1),
                                  .cell_count = from->cell_count * (has_cells ? finer : 1),
                                  .largest_m3s = 250.0,
                                  .flood = gamma_flood_m3s,
                                  .flood_parameters = &smooth,
                                  .duration_s = 24.0 * 3600.0};
    return route_one_reach(&one);
}

static double rms_against(const struct one_reach_result *coarse, const struct one_reach_result *judge)
{
    size_t every = judge->step_count / coarse->step_count;
    double sum = 0.0;
    for (size_t i = 0; i <= coarse->step_count; i++)
        sum += pow(coarse->outflow_m3s[i] - judge->outflow_m3s[i * every], 2.0);
    return sqrt(sum / (double)(coarse->step_count + 1));
}

static void check_orders(const char *name, const struct order_case *one)
{
    double errors[GRIDS];
    struct one_reach_result judge = route_grid(one, one->finest << (GRIDS - 1));
    for (size_t grid = 0; grid < GRIDS; grid++) {
        struct one_reach_result coarse = route_grid(one, (size_t)1 << grid);
        errors[grid] = rms_against(&coarse, &judge);
        one_reach_result_clear(&coarse);
    }
    one_reach_result_clear(&judge);
    print_message("%-16s %-16s from %3zu cells, %4.0f s: off by %.2e %.2e %.2e m3/s, orders", name,
                  refined_name[one->refined], one->cell_count, one->time_step_s, errors[0], errors[1], errors[2]);
    for (size_t grid = 1; grid < GRIDS; grid++)
        print_message(" %.2f", log2(errors[grid - 1] / errors[grid]));
    print_message("\n");
    for (size_t grid = 1; grid < GRIDS; grid++) {
        double order = log2(errors[grid - 1] / errors[grid]);
        if (!(order >= one->lowest && order <= one->highest))
            fail_msg("%s, %s: order %.2f, expected %.2f to %.2f", name, refined_name[one->refined], order,
                     one->lowest, one->highest);
    }
}

static void every_method_converges_at_the_order_of_its_design(void **state)
{
    (void)state;
    static const struct {
        const char *name;
        struct order_case one;
    } cases[] = {
        {"kinematic-linear", {NETWORK_KINEMATIC_LINEAR, TOGETHER, 24, 1200.0, 8, 0.8, 1.3}},
        {"kinematic-linear", {NETWORK_KINEMATIC_LINEAR, CELLS, 12, 300.0, 8, 0.8, 1.3}},
        {"kinematic-linear", {NETWORK_KINEMATIC_LINEAR, STEPS, 48, 1200.0, 8, 0.8, 1.3}},
        {"kinematic", {NETWORK_KINEMATIC, TOGETHER, 24, 1200.0, 8, 0.8, 1.3}},
        {"kinematic", {NETWORK_KINEMATIC, CELLS, 12, 300.0, 8, 0.8, 1.3}},
        {"kinematic", {NETWORK_KINEMATIC, STEPS, 48, 1200.0, 8, 0.8, 1.3}},
        /* finer yet, the 0.004 % of the tables show */
        {"storage form", {NETWORK_MUSKINGUM_CUNGE, TOGETHER, 24, 1200.0, 4, 1.8, 2.3}},
        {"storage form", {NETWORK_MUSKINGUM_CUNGE, CELLS, 12, 600.0, 4, 1.8, 2.3}},
        {"storage form", {NETWORK_MUSKINGUM_CUNGE, STEPS, 24, 1200.0, 4, 1.8, 2.3}},
        {"diffusive", {NETWORK_DIFFUSIVE, TOGETHER, 24, 1200.0, 8, 0.9, 1.5}},
        {"diffusive", {NETWORK_DIFFUSIVE, CELLS, 12, 600.0, 4, 1.8, 2.3}},
        {"diffusive", {NETWORK_DIFFUSIVE, STEPS, 48, 1200.0, 8, 0.9, 1.3}},
        {"dynamic", {NETWORK_DYNAMIC, TOGETHER, 24, 1200.0, 8, 0.9, 1.5}},
        {"dynamic", {NETWORK_DYNAMIC, CELLS, 12, 600.0, 4, 1.8, 2.3}},
        {"dynamic", {NETWORK_DYNAMIC, STEPS, 48, 1200.0, 8, 0.9, 1.3}},
    };
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++)
        check_orders(cases[i].name, &cases[i].one);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(every_method_converges_at_the_order_of_its_design),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
