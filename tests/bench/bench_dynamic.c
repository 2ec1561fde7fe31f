/* SPDX-License-Identifier: MIT */
/*
 * What one iteration of the full equations costs per member and node, as a ratio to an in-cache triad measured in the
 * same run, and how it grows with members and nodes.
 *
 * The triad is that of bench_routing: a[i] = b[i] + s c[i] over 3 x 8 KiB, compiled with this program's own flags.
 * Best of several runs each; numbers of a busy machine waver.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

#include "engine/dynamic_tree.h"

enum { TRIAD_LENGTH = 1024, TRIAD_ROUNDS = 20000, REPEATS = 7 };

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
    size_t members, intervals, steps;
    bool is_diffusive;
};

struct cost {
    double ns; /* per member, node and iteration; below zero: a fault */
    double iterations_per_step;
    size_t halved;
};

static void *room_for(size_t count)
{
    double *room = calloc(count, sizeof *room);
    if (room == NULL) {
        fputs("no memory\n", stderr);
        exit(EXIT_FAILURE);
    }
    return room;
}

static double advance_s(const struct dynamic_tree *tree, const struct run *run, struct dynamic_state *state,
                        struct dynamic_work *work, const double inflow[], struct dynamic_counts *counts)
{
    memcpy(state->inflow_m3s, inflow, run->members * sizeof *inflow);
    dynamic_tree_start_steady(tree, run->members, NULL, NULL, state);
    memset(counts, 0, sizeof *counts);
    double begin = now_s();
    for (size_t step = 1; step <= run->steps; step++)
        dynamic_tree_step(tree, 60.0, run->members, inflow + step * run->members, NULL, NULL, state, work, counts);
    return now_s() - begin;
}

static struct cost measure(const struct run *run, const struct area_table *table)
{
    struct cost cost = {-1.0, 0.0, 0};
    size_t values = (run->intervals + 1) * run->members;
    double *lengths = room_for(run->intervals), *slopes = room_for(run->intervals);
    double *inflow = room_for((run->steps + 1) * run->members);
    struct dynamic_state state = {room_for(values), room_for(values), room_for(run->members), room_for(values)};
    struct dynamic_work *work = NULL;
    for (size_t i = 0; i < run->intervals; i++) {
        lengths[i] = 130.0;
        slopes[i] = 0.0009;
    }
    for (size_t step = 0; step <= run->steps; step++)
        for (size_t member = 0; member < run->members; member++)
            inflow[step * run->members + member] = flood_m3s(60.0 * (double)step, member % 32);
    const struct dynamic_branch branch = {.table = table,
                                          .interval_count = run->intervals,
                                          .interval_m = lengths,
                                          .slope_m_per_m = slopes,
                                          .foot = DYNAMIC_FOOT_NORMAL,
                                          .below = DYNAMIC_NOWHERE};
    const struct dynamic_tree tree = {
        .branch_count = 1, .branches = &branch, .momentum_factor = 1.0, .is_diffusive = run->is_diffusive};
    if (dynamic_work_create(&work, &tree, run->members) == FW_OK) {
        struct dynamic_counts counts;
        double best = 1e9;
        for (int repeat = 0; repeat < REPEATS; repeat++)
            best = fmin(best, advance_s(&tree, run, &state, work, inflow, &counts));
        /* a block iterates until its last member is done: counted are the iterations that members needed */
        cost.ns = 1e9 * best / ((double)counts.iterations * (double)(run->intervals + 1));
        cost.iterations_per_step = (double)counts.iterations / (double)counts.steps;
        cost.halved = counts.halved;
    }
    dynamic_work_destroy(work);
    free(lengths);
    free(slopes);
    free(inflow);
    free(state.area_m2);
    free(state.discharge_m3s);
    free(state.inflow_m3s);
    free(state.passed_m3);
    return cost;
}

int main(void)
{
    static const struct run runs[] = {
        {1, 100, 720, false},  {8, 100, 720, false},  {16, 100, 720, false},
        {32, 100, 720, false}, {64, 100, 720, false}, {32, 50, 720, false},
        {32, 200, 720, false}, {32, 400, 360, false}, {32, 100, 720, true},
    };
    enum { RUN_COUNT = sizeof runs / sizeof *runs };
    struct cost costs[RUN_COUNT];
    struct flow_curve curve;
    struct area_table table;
    if (flow_curve_init(&curve, &channel, 0.03, 160e3) != FW_OK || area_table_init(&table, &curve, 1.0) != FW_OK)
        return EXIT_FAILURE;
    double triad = triad_ns();
    for (size_t i = 0; i < RUN_COUNT; i++) {
        costs[i] = measure(&runs[i], &table);
        if (costs[i].ns < 0.0)
            return EXIT_FAILURE;
        triad = fmin(triad, triad_ns()); /* between the runs, so that both see the same quiet moments */
    }
    printf("in-cache triad: %.3f ns per element\n", triad);
    printf("%-10s %8s %6s | %28s | %6s | %s\n", "equations", "members", "nodes", "ns per member-node-iteration",
           "triads", "iterations per step");
    for (size_t i = 0; i < RUN_COUNT; i++)
        printf("%-10s %8zu %6zu | %28.2f | %6.1f | %.2f\n", runs[i].is_diffusive ? "diffusive" : "full",
               runs[i].members, runs[i].intervals + 1, costs[i].ns, costs[i].ns / triad,
               costs[i].iterations_per_step);
    area_table_clear(&table);
    flow_curve_clear(&curve);
    return EXIT_SUCCESS;
}
