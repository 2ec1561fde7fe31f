/* SPDX-License-Identifier: MIT */
/*
 * What one member-cell-step costs, as a ratio to an in-cache triad measured in the same run.
 *
 * The triad, a[i] = b[i] + s c[i] over 3 x 8 KiB (in the first-level cache), compiled with this program's own flags,
 * is what the machine can do with the same few operations when nothing has to be looked up. Best of several runs
 * each; numbers of a busy machine waver.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "engine/network.h"

enum { TRIAD_LENGTH = 1024, TRIAD_ROUNDS = 20000, REPEATS = 9 };

static double now_s(void)
{
    struct timespec now;
    clock_gettime(CLOCK_MONOTONIC, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static double triad_ns(void)
{
    static double a[TRIAD_LENGTH], b[TRIAD_LENGTH], c[TRIAD_LENGTH];
    double best = 1e9;
    for (int i = 0; i < TRIAD_LENGTH; i++) {
        b[i] = 1.0 + i;
        c[i] = 0.5 * i;
    }
    for (int repeat = 0; repeat < REPEATS; repeat++) {
        double begin = now_s();
        for (int round = 0; round < TRIAD_ROUNDS; round++) {
            double factor = 1e-3 * round;
            for (int i = 0; i < TRIAD_LENGTH; i++)
                a[i] = b[i] + factor * c[i];
            __asm__ volatile("" ::"r"(a) : "memory"); /* every round counts */
        }
        best = fmin(best, (now_s() - begin) / ((double)TRIAD_ROUNDS * TRIAD_LENGTH));
    }
    return 1e9 * best;
}

static const struct section channel = {.shape = SECTION_TRAPEZOID,
                                       .bottom_m = 14.0,
                                       .side_h_per_v = 2.0,
                                       .roughness_n = 0.038,
                                       .has_plain = true,
                                       .plain_above_m = 2.6,
                                       .plain_width_m = 80.0,
                                       .plain_roughness_n = 0.075};

static double flood_m3s(double t_s, size_t member)
{
    return 8.0 + (60.0 + (double)member) * exp(-pow((t_s - 4.0 * 3600.0) / 4700.0, 2.0));
}

struct run {
    enum network_method method;
    size_t groups, members_per_group, cells, steps;
};

/* Nanoseconds per member-cell-step of a whole network_advance; -1 on a fault. */
static double route_ns(const struct run *run, double *create_s_out)
{
    const size_t gauge_node = 0;
    const struct network_reach reach = {.id = "reach",
                                        .to_node = 1,
                                        .length_m = 130.0 * (double)run->cells,
                                        .slope_m_per_m = 0.0024,
                                        .section = &channel,
                                        .method = run->method};
    const struct network_point foot = {.id = "foot", .at_m = reach.length_m};
    const struct network_river river = {.node_count = 2,
                                        .gauge_count = 1,
                                        .gauge_node = &gauge_node,
                                        .reach_count = 1,
                                        .reaches = &reach,
                                        .point_count = 1,
                                        .points = &foot};
    size_t members = run->groups * run->members_per_group;
    double *factors = calloc(run->groups, sizeof *factors);
    double *inflow = calloc((run->steps + 1) * members, sizeof *inflow);
    double *outflow = calloc((run->steps + 1) * members, sizeof *outflow);
    struct network *network = NULL;
    struct network_fault fault = {""};
    double best = -1.0;
    if (factors == NULL || inflow == NULL || outflow == NULL)
        goto cleanup;
    for (size_t i = 0; i < run->groups; i++)
        factors[i] = 0.8 + 0.4 * (double)i / (double)run->groups;
    const struct network_options options = {.time_step_s = 60.0,
                                            .fixed_cell_count = run->cells,
                                            .group_count = run->groups,
                                            .roughness_factors = factors,
                                            .members_per_group = run->members_per_group,
                                            .largest_discharge_m3s = 160.0};
    for (size_t step = 0; step <= run->steps; step++)
        for (size_t member = 0; member < members; member++)
            inflow[step * members + member] = flood_m3s(60.0 * (double)step, member % 32);
    double begin = now_s();
    if (network_create(&river, &options, &network, &fault) != FW_OK) {
        fprintf(stderr, "%s\n", fault.text);
        goto cleanup;
    }
    *create_s_out = now_s() - begin;
    double fastest = 1e9;
    for (int repeat = 0; repeat < REPEATS; repeat++) {
        if (network_start_steady(network, inflow) != FW_OK)
            goto cleanup;
        begin = now_s();
        if (network_advance(network, run->steps, inflow, outflow) != FW_OK)
            goto cleanup;
        fastest = fmin(fastest, now_s() - begin);
    }
    best = 1e9 * fastest / ((double)members * (double)run->cells * (double)run->steps);
cleanup:
    network_destroy(network);
    free(factors);
    free(inflow);
    free(outflow);
    return best;
}

int main(void)
{
    static const char *const method_name[] = {"muskingum-cunge", "kinematic", "kinematic-linear"};
    static const struct run runs[] = {
        {NETWORK_MUSKINGUM_CUNGE, 1, 1, 100, 2880},  {NETWORK_MUSKINGUM_CUNGE, 1, 8, 100, 720},
        {NETWORK_MUSKINGUM_CUNGE, 1, 32, 100, 720},  {NETWORK_MUSKINGUM_CUNGE, 3, 32, 100, 720},
        {NETWORK_MUSKINGUM_CUNGE, 31, 32, 100, 288}, {NETWORK_MUSKINGUM_CUNGE, 1, 32, 3, 2880},
        {NETWORK_MUSKINGUM_CUNGE, 1, 32, 400, 288},  {NETWORK_KINEMATIC, 1, 32, 100, 720},
        {NETWORK_KINEMATIC_LINEAR, 1, 32, 100, 72},
    };
    enum { RUN_COUNT = sizeof runs / sizeof *runs };
    double ns[RUN_COUNT], create_s[RUN_COUNT];
    double triad = triad_ns();
    for (size_t i = 0; i < RUN_COUNT; i++) {
        ns[i] = route_ns(&runs[i], &create_s[i]);
        if (ns[i] < 0.0)
            return EXIT_FAILURE;
        triad = fmin(triad, triad_ns()); /* between the runs, so that both see the same quiet moments */
    }
    printf("in-cache triad: %.3f ns per element\n", triad);
    printf("%-16s %6s %8s %6s | %24s | %6s | %s\n", "method", "groups", "members", "cells", "ns per member-cell-step",
           "triads", "tables built in");
    for (size_t i = 0; i < RUN_COUNT; i++)
        printf("%-16s %6zu %8zu %6zu | %24.2f | %6.1f | %.1f ms\n", method_name[runs[i].method], runs[i].groups,
               runs[i].groups * runs[i].members_per_group, runs[i].cells, ns[i], ns[i] / triad, 1e3 * create_s[i]);
    return EXIT_SUCCESS;
}
