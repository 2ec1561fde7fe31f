/* SPDX-License-Identifier: MIT */
/* The full equations: what an iteration costs per member and node, per level of vectors and number of members. */
#include <math.h>
#include <stdio.h>

#include "tests/bench/engine_bench.h"
#include "tests/bench/full_run.h"

static const double floor_triads = 60.0, aim_triads = 40.0;

struct row {
    struct full_run_setup setup;
    struct full_run run;
    struct laps laps;
    double imbalance;
};

static const size_t member_counts[] = {1, 8, 16, 32, 64};
enum { COUNTS = sizeof member_counts / sizeof *member_counts, MOST_ROWS = VECTOR_LEVEL_COUNT * COUNTS + 1 };

static size_t list_rows(bool is_smoke, struct row rows[])
{
    size_t count = 0, intervals = is_smoke ? 20 : 100, steps = is_smoke ? 300 : 720;
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++)
        for (size_t i = 0; i < COUNTS && vector_level_is_present((enum vector_level)level); i++)
            rows[count++].setup =
                (struct full_run_setup){(enum vector_level)level, member_counts[i], intervals, steps, false};
    rows[count++].setup = (struct full_run_setup){vector_level_widest(), 32, intervals, steps, true};
    return count;
}

static void print_row(const struct row *row, double triad_ns, double plain_triad_ns)
{
    const struct full_run_setup *setup = &row->setup;
    const struct dynamic_counts *counts = &row->run.counts;
    double ns = 1e9 * laps_total_s(&row->laps) / ((double)counts->iterations * (double)(setup->intervals + 1));
    double triads = ns / triad_ns;
    printf("  %-10s %8zu %8.2f %8.1f %8.1f %10.2f %9.1e", vector_level_name(setup->level), setup->members, ns,
           ns / plain_triad_ns, triads, (double)counts->iterations / (double)counts->steps, row->imbalance);
    if (setup->is_diffusive)
        printf("  without inertia");
    else if (setup->members == 32)
        printf("  floor %g, aim %g: %s / %s", floor_triads, aim_triads,
               bench_verdict_below(ns / plain_triad_ns, floor_triads, aim_triads),
               bench_verdict_below(triads, floor_triads, aim_triads));
    printf("\n");
}

bool bench_full(struct engine_bench *bench)
{
    static struct row rows[MOST_ROWS];
    struct flow_curve curve;
    struct area_table table;
    size_t count = list_rows(bench->is_smoke, rows);
    bool is_well = true;
    if (flow_curve_init(&curve, &bench_channel, 0.03, 160e3) != FW_OK)
        return false;
    if (area_table_init(&table, &curve, 1.0) != FW_OK) {
        flow_curve_clear(&curve);
        return false;
    }
    for (int repeat = 0; repeat < (bench->is_smoke ? 1 : 9); repeat++) {
        for (size_t i = 0; i < count; i++) {
            if (repeat == 0 && full_run_init(&rows[i].run, &rows[i].setup, &table))
                rows[i].imbalance = full_run_imbalance(&rows[i].run);
            if (rows[i].run.work != NULL)
                full_run_advance(&rows[i].run, &rows[i].laps);
        }
        bench_measure_triads(bench); /* between, so that both see the same quiet moments */
    }
    printf("\nFull equations: one reach of %zu nodes through a flood; per member-node-iteration\n",
           rows[0].setup.intervals + 1);
    printf("  %-10s %8s %8s %8s %8s %10s %9s\n", "vectors", "members", "ns", "plain", "own", "iterations",
           "imbalance");
    for (size_t i = 0; i < count; i++) {
        if (rows[i].run.work == NULL)
            continue;
        print_row(&rows[i], bench->triad_ns[rows[i].setup.level], bench->triad_ns[VECTOR_BASELINE]);
        is_well = is_well && rows[i].imbalance < 1e-12 && rows[i].run.counts.replaced == 0;
        full_run_clear(&rows[i].run);
    }
    area_table_clear(&table);
    flow_curve_clear(&curve);
    return is_well;
}
