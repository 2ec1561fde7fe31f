/* SPDX-License-Identifier: MIT */
/*
 * What routing costs, in nanoseconds and as ratios to an in-cache triad measured in the same run.
 *
 * The triad, a[i] = b[i] + s c[i] over 3 x 8 KiB in the nearest cache (tests/bench/level.c), is compiled with the
 * flags of the kernel it is held against: what the machine can do with the same few operations when nothing has to
 * be looked up. Every figure is the fastest of many short stretches, taken in turns, so that on a shared machine
 * each has seen a quiet moment. Whole networks are given in processor time, the best of a few runs.
 */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

#include "engine/network.h"
#include "tests/bench/level.h"

enum {
    MOST_MEMBERS = 64,
    MOST_CELLS = 400,
    STRETCH_NS = 25000, /* about this long: shorter than a time slice, far longer than reading the clock */
    ROUNDS = 1500,
    TRIAD_ROUNDS = 100,
    STEP_COUNT = 480
};

static double seconds_of(clockid_t clock)
{
    struct timespec now;
    clock_gettime(clock, &now);
    return (double)now.tv_sec + 1e-9 * (double)now.tv_nsec;
}

static double now_s(void)
{
    return seconds_of(CLOCK_MONOTONIC);
}

static const struct section channel = {.shape = SECTION_TRAPEZOID,
                                       .bottom_m = 14.0,
                                       .side_h_per_v = 2.0,
                                       .roughness_n = 0.038,
                                       .has_plain = true,
                                       .plain_above_m = 2.6,
                                       .plain_width_m = 80.0,
                                       .plain_roughness_n = 0.075};
static const double slope = 0.0024, cell_m = 130.0, time_step_s = 60.0, largest_m3s = 160.0;

static double flood_m3s(double t_s, size_t member)
{
    return 8.0 + (60.0 + (double)(member % 32)) * exp(-pow((t_s - 4.0 * 3600.0) / 4700.0, 2.0));
}

/* --- the kernel alone ------------------------------------------------------------------------------------------- */

struct bench {
    struct flow_curve curve;
    struct muskingum_cunge_table table;
    struct float_table float_table;
    double passing_m3[STEP_COUNT][MOST_MEMBERS], implicit_m3[STEP_COUNT][MOST_MEMBERS];
    double state_m3[MOST_CELLS * MOST_MEMBERS];
    float float_state_m3[MOST_CELLS * MOST_MEMBERS];
    struct triad_arrays triad __attribute__((aligned(64)));
};

static bool bench_init(struct bench *bench)
{
    const struct muskingum_cunge_reach reach = {.curve = &bench->curve,
                                                .slope_m_per_m = slope,
                                                .roughness_factor = 1.0,
                                                .cell_m = cell_m,
                                                .time_step_s = time_step_s,
                                                .smallest_discharge_m3s = 1e-3};
    struct muskingum_cunge_table *table = &bench->table;
    struct float_table *single = &bench->float_table;
    if (flow_curve_init(&bench->curve, &channel, 1e-3 / sqrt(slope), 32.0 * largest_m3s / sqrt(slope)) != FW_OK ||
        muskingum_cunge_table_init(table, &reach) != FW_OK)
        return false;
    size_t row_count = table->by_potential.row_count;
    single->rows = aligned_alloc(16, row_count * sizeof *single->rows);
    if (single->rows == NULL)
        return false;
    single->lowest = (float)table->by_potential.lowest;
    single->highest = (float)table->by_potential.highest;
    memcpy(&single->base, &single->lowest, sizeof single->base);
    single->base >>= FLOAT_SHIFT;
    for (size_t i = 0; i < row_count; i++)
        single->rows[i] = (struct float_row){(float)table->rows[i].outflow_0, (float)table->rows[i].outflow_1,
                                             (float)table->rows[i].implicit_0, (float)table->rows[i].implicit_1};
    for (size_t step = 0; step < STEP_COUNT; step++)
        for (size_t member = 0; member < MOST_MEMBERS; member++) {
            bench->passing_m3[step][member] = time_step_s * flood_m3s(time_step_s * (double)step, member);
            bench->implicit_m3[step][member] = muskingum_cunge_implicit_m3(table, bench->passing_m3[step][member]);
        }
    for (size_t i = 0; i < TRIAD_LENGTH; i++) {
        bench->triad.b[i] = 1.0 + (double)i;
        bench->triad.c[i] = 0.5 * (double)i;
    }
    return true;
}

static void bench_clear(struct bench *bench)
{
    muskingum_cunge_table_clear(&bench->table);
    flow_curve_clear(&bench->curve);
    free(bench->float_table.rows);
}

enum kind { TRIAD, DOUBLE, SINGLE };

struct measurement {
    enum kind kind;
    enum vector_level level;
    size_t members, cells;
    size_t next_step;
    double ns; /* per triad element or member-cell-step */
};

static size_t units_per_step(const struct measurement *m)
{
    return m->kind == TRIAD ? TRIAD_ROUNDS * TRIAD_LENGTH : m->members * m->cells;
}

static void run_step(struct bench *bench, const struct measurement *m, size_t step)
{
    double passing[MOST_MEMBERS], implicit[MOST_MEMBERS];
    float single_passing[MOST_MEMBERS], single_implicit[MOST_MEMBERS];
    bench_triad *triad = bench_triad_baseline;
    bench_float_step *single_step = bench_float_step_baseline;
#if defined(FW_VECTOR_AVX2)
    if (m->level == VECTOR_AVX2) {
        triad = bench_triad_avx2;
        single_step = bench_float_step_avx2;
    }
#endif
    if (m->kind == TRIAD) {
        triad(&bench->triad, TRIAD_ROUNDS);
    } else if (m->kind == DOUBLE) {
        memcpy(passing, bench->passing_m3[step], m->members * sizeof *passing);
        memcpy(implicit, bench->implicit_m3[step], m->members * sizeof *implicit);
        muskingum_cunge_step(&bench->table, m->cells, m->members, bench->state_m3, passing, implicit);
    } else {
        for (size_t i = 0; i < m->members; i++) {
            single_passing[i] = (float)bench->passing_m3[step][i];
            single_implicit[i] = (float)bench->implicit_m3[step][i];
        }
        single_step(&bench->float_table, m->cells, m->members, bench->float_state_m3, single_passing,
                    single_implicit);
    }
}

/* A flood's first steps fill the cells; then stretches of it are timed. */
static void measure_stretch(struct bench *bench, struct measurement *m)
{
    size_t steps = 1 + (size_t)(STRETCH_NS / (double)units_per_step(m)) / (m->members < 8 ? 8 : 1);
    bench->table.vectors = m->level;
    if (m->kind != TRIAD)
        for (size_t i = 0; i < m->members * m->cells; i++) {
            bench->state_m3[i] = 2500.0;
            bench->float_state_m3[i] = 2500.0f;
        }
    for (size_t warm = 0; warm < 2; warm++)
        run_step(bench, m, m->next_step);
    double begin = now_s();
    for (size_t i = 0; i < steps; i++)
        run_step(bench, m, m->next_step = (m->next_step + 1) % STEP_COUNT);
    m->ns = fmin(m->ns, 1e9 * (now_s() - begin) / (double)(steps * units_per_step(m)));
}

static const size_t member_counts[] = {1, 2, 4, 8, 16, 24, 32, 40, 64};
static const size_t cell_counts[] = {50, 100, 200, 400};
enum {
    MEMBER_ROWS = sizeof member_counts / sizeof *member_counts,
    CELL_ROWS = sizeof cell_counts / sizeof *cell_counts
};

struct level_figures {
    struct measurement triad, by_members[MEMBER_ROWS], by_cells[CELL_ROWS], single;
};

static void measure_levels(struct bench *bench, struct level_figures figures[VECTOR_LEVEL_COUNT])
{
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
        const struct measurement blank = {DOUBLE, (enum vector_level)level, 32, 100, 0, 1e9};
        struct level_figures *f = &figures[level];
        f->triad = f->single = blank;
        f->triad.kind = TRIAD;
        f->single.kind = SINGLE;
        for (size_t i = 0; i < MEMBER_ROWS; i++) {
            f->by_members[i] = blank;
            f->by_members[i].members = member_counts[i];
        }
        for (size_t i = 0; i < CELL_ROWS; i++) {
            f->by_cells[i] = blank;
            f->by_cells[i].cells = cell_counts[i];
        }
    }
    for (int round = 0; round < ROUNDS; round++)
        for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
            struct level_figures *f = &figures[level];
            if (!vector_level_is_present((enum vector_level)level))
                continue;
            measure_stretch(bench, &f->triad);
            measure_stretch(bench, &f->single);
            for (size_t i = 0; i < MEMBER_ROWS; i++)
                measure_stretch(bench, &f->by_members[i]);
            for (size_t i = 0; i < CELL_ROWS; i++)
                measure_stretch(bench, &f->by_cells[i]);
        }
}

/* Least squares straight line; the largest distance from it as a share of the largest y. */
struct line {
    double at_0, slope, largest_miss;
};

static struct line line_through(size_t count, const double x[], const double y[])
{
    double sx = 0.0, sy = 0.0, sxx = 0.0, sxy = 0.0, n = (double)count;
    struct line line = {0};
    for (size_t i = 0; i < count; i++) {
        sx += x[i];
        sy += y[i];
        sxx += x[i] * x[i];
        sxy += x[i] * y[i];
    }
    line.slope = (n * sxy - sx * sy) / (n * sxx - sx * sx);
    line.at_0 = (sy - line.slope * sx) / n;
    for (size_t i = 0; i < count; i++)
        line.largest_miss = fmax(line.largest_miss, fabs(y[i] - line.at_0 - line.slope * x[i]) / fabs(y[count - 1]));
    return line;
}

static void print_line(const char *what, struct line line, double cell_steps, double triad_ns)
{
    double ns = line.slope / cell_steps;
    printf("  %-36s %6.0f ns + %.3f ns (%.1f triads) per member-cell-step; off the line by at most %.1f %%\n", what,
           line.at_0, ns, ns / triad_ns, 100.0 * line.largest_miss);
}

static void print_level(const struct level_figures *f, const char *name)
{
    double cells[CELL_ROWS], per_step[CELL_ROWS];
    printf("\n%s vectors; in-cache triad at the same flags: %.3f ns per element\n", name, f->triad.ns);
    printf("  one step of one reach; ns and triads per member-cell-step\n");
    printf("  %8s %6s %8s %8s\n", "members", "cells", "ns", "triads");
    for (size_t i = 0; i < MEMBER_ROWS; i++)
        printf("  %8zu %6d %8.2f %8.1f\n", f->by_members[i].members, 100, f->by_members[i].ns,
               f->by_members[i].ns / f->triad.ns);
    for (size_t i = 0; i < CELL_ROWS; i++) {
        printf("  %8d %6zu %8.2f %8.1f\n", 32, f->by_cells[i].cells, f->by_cells[i].ns,
               f->by_cells[i].ns / f->triad.ns);
        cells[i] = (double)f->by_cells[i].cells;
        per_step[i] = f->by_cells[i].ns * cells[i];
    }
    printf("  %8d %6d %8.2f %8.1f  in single precision, not for routing\n", 32, 100, f->single.ns,
           f->single.ns / f->triad.ns);
    print_line("a member's step against cells:", line_through(CELL_ROWS, cells, per_step), 1.0, f->triad.ns);
}

/* What single precision does to a flood: largest difference of the outflow, and what becomes of the water. */
static void print_single_precision(struct bench *bench)
{
    enum { CELLS = 100, MEMBERS = 32 };
    double largest = 0.0, worst_volume = 0.0, in[MEMBERS] = {0.0}, left[MEMBERS] = {0.0};
    for (size_t i = 0; i < CELLS * MEMBERS; i++)
        bench->float_state_m3[i] = (float)(bench->state_m3[i] = 0.0);
    for (size_t step = 0; step < STEP_COUNT; step++) {
        double passing[MEMBERS], implicit[MEMBERS];
        float single_passing[MEMBERS], single_implicit[MEMBERS];
        for (size_t i = 0; i < MEMBERS; i++) {
            single_passing[i] = (float)(passing[i] = bench->passing_m3[step][i]);
            single_implicit[i] = (float)(implicit[i] = bench->implicit_m3[step][i]);
        }
        for (size_t i = 0; i < MEMBERS; i++) {
            in[i] += (double)single_passing[i];
            left[i] += (double)single_passing[i];
        }
        muskingum_cunge_step(&bench->table, CELLS, MEMBERS, bench->state_m3, passing, implicit);
        bench_float_step_baseline(&bench->float_table, CELLS, MEMBERS, bench->float_state_m3, single_passing,
                                  single_implicit);
        for (size_t i = 0; i < MEMBERS; i++) {
            left[i] -= (double)single_passing[i];
            largest = fmax(largest, fabs((double)single_passing[i] - passing[i]) / time_step_s);
        }
    }
    for (size_t i = 0; i < MEMBERS; i++) {
        for (size_t cell = 0; cell < CELLS; cell++)
            left[i] -= (double)bench->float_state_m3[cell * MEMBERS + i];
        worst_volume = fmax(worst_volume, fabs(left[i]) / in[i]);
    }
    printf(
        "\nsingle precision over an 8 h flood of 70 to 100 m3/s: outflow off by at most %.1e m3/s, volume by %.1e\n",
        largest, worst_volume);
}

/* --- whole networks --------------------------------------------------------------------------------------------- */

enum { MOST_REACHES = 8 };

struct run {
    const char *name;
    enum network_method method;
    size_t reaches, groups, members_per_group, cells, steps, repeats;
};

struct run_cost {
    double create_s, advance_s;
};

static bool time_run(const struct run *run, struct run_cost *cost_out)
{
    const size_t gauge_node = 0;
    struct network_reach reaches[MOST_REACHES];
    const struct network_point foot = {
        .id = "foot", .reach_index = run->reaches - 1, .at_m = cell_m * (double)run->cells};
    const struct network_river river = {.node_count = run->reaches + 1,
                                        .gauge_count = 1,
                                        .gauge_node = &gauge_node,
                                        .reach_count = run->reaches,
                                        .reaches = reaches,
                                        .point_count = 1,
                                        .points = &foot};
    size_t members = run->groups * run->members_per_group;
    double *factors = calloc(run->groups, sizeof *factors);
    double *inflow = calloc((run->steps + 1) * members, sizeof *inflow);
    double *outflow = calloc((run->steps + 1) * members, sizeof *outflow);
    struct network *network = NULL;
    struct network_fault fault = {""};
    struct run_cost cost = {.advance_s = 1e9};
    bool is_done = false;
    if (factors == NULL || inflow == NULL || outflow == NULL)
        goto cleanup;
    for (size_t i = 0; i < run->reaches; i++)
        reaches[i] = (struct network_reach){.id = "reach",
                                            .from_node = i,
                                            .to_node = i + 1,
                                            .length_m = cell_m * (double)run->cells,
                                            .slope_m_per_m = slope,
                                            .section = &channel,
                                            .method = run->method};
    for (size_t i = 0; i < run->groups; i++)
        factors[i] = 0.8 + 0.4 * (double)i / (double)run->groups;
    const struct network_options options = {.time_step_s = time_step_s,
                                            .fixed_cell_count = run->cells,
                                            .group_count = run->groups,
                                            .roughness_factors = factors,
                                            .members_per_group = run->members_per_group,
                                            .largest_discharge_m3s = largest_m3s};
    for (size_t step = 0; step <= run->steps; step++)
        for (size_t member = 0; member < members; member++)
            inflow[step * members + member] = flood_m3s(time_step_s * (double)step, member);
    double begin = seconds_of(CLOCK_PROCESS_CPUTIME_ID);
    if (network_create(&river, &options, &network, &fault) != FW_OK) {
        fprintf(stderr, "%s\n", fault.text);
        goto cleanup;
    }
    cost.create_s = seconds_of(CLOCK_PROCESS_CPUTIME_ID) - begin;
    for (size_t repeat = 0; repeat < run->repeats; repeat++) {
        if (network_start_steady(network, inflow) != FW_OK)
            goto cleanup;
        begin = seconds_of(CLOCK_PROCESS_CPUTIME_ID);
        if (network_advance(network, run->steps, inflow, outflow) != FW_OK)
            goto cleanup;
        cost.advance_s = fmin(cost.advance_s, seconds_of(CLOCK_PROCESS_CPUTIME_ID) - begin);
    }
    *cost_out = cost;
    is_done = true;
cleanup:
    network_destroy(network);
    free(factors);
    free(inflow);
    free(outflow);
    return is_done;
}

static double ns_per_cell_step(const struct run *run, double seconds)
{
    return 1e9 * seconds /
           ((double)(run->groups * run->members_per_group * run->reaches) * (double)run->cells * (double)run->steps);
}

static bool print_networks(double triad_ns)
{
    static const struct run runs[] = {
        {"muskingum-cunge", NETWORK_MUSKINGUM_CUNGE, 1, 1, 1, 100, 60, 60},
        {"muskingum-cunge", NETWORK_MUSKINGUM_CUNGE, 1, 1, 32, 100, 24, 200},
        {"muskingum-cunge", NETWORK_MUSKINGUM_CUNGE, 1, 1, 32, 3, 200, 200},
        {"muskingum-cunge", NETWORK_MUSKINGUM_CUNGE, 1, 3, 32, 100, 24, 100},
        {"kinematic", NETWORK_KINEMATIC, 1, 1, 32, 100, 24, 200},
        {"kinematic-linear", NETWORK_KINEMATIC_LINEAR, 1, 1, 32, 100, 12, 20},
        {"1,000 x 100 cells, 48 h", NETWORK_MUSKINGUM_CUNGE, 1, 25, 40, 100, 2880, 7},
    };
    printf("\nwhole networks, widest vectors; triads as above, tables for a reach in each roughness group\n");
    printf("  %-24s %6s %8s %6s %8s %8s %8s  %s\n", "method", "groups", "members", "cells", "ns", "triads", "tables",
           "run");
    for (size_t i = 0; i < sizeof runs / sizeof *runs; i++) {
        struct run_cost cost;
        if (!time_run(&runs[i], &cost))
            return false;
        double ns = ns_per_cell_step(&runs[i], cost.advance_s);
        printf("  %-24s %6zu %8zu %6zu %8.2f %8.1f %5.1f ms  %.2f ms\n", runs[i].name, runs[i].groups,
               runs[i].groups * runs[i].members_per_group, runs[i].cells, ns, ns / triad_ns, 1e3 * cost.create_s,
               1e3 * cost.advance_s);
    }
    return true;
}

enum growing { REACHES, GROUPS, MEMBERS_OF_A_GROUP };

static bool print_growth(double triad_ns)
{
    static const struct {
        enum growing growing;
        const char *what;
        double cell_steps, times_of[4];
    } rows[] = {
        {REACHES, "a step against reaches, 1 to 8:", 32 * 50, {1, 2, 4, 8}},
        {GROUPS, "against roughness groups, 1 to 8:", 32 * 50, {1, 2, 4, 8}},
        {MEMBERS_OF_A_GROUP, "against members of a group, 32 to 256:", 50, {32, 64, 128, 256}},
    };
    for (size_t i = 0; i < sizeof rows / sizeof *rows; i++) {
        double ns[4];
        for (size_t k = 0; k < 4; k++) {
            struct run run = {"", NETWORK_MUSKINGUM_CUNGE, 1, 1, 32, 50, 12, 200};
            size_t *const grown[] = {&run.reaches, &run.groups, &run.members_per_group};
            struct run_cost cost;
            *grown[rows[i].growing] = (size_t)rows[i].times_of[k];
            if (!time_run(&run, &cost))
                return false;
            ns[k] = 1e9 * cost.advance_s / (double)run.steps;
        }
        print_line(rows[i].what, line_through(4, rows[i].times_of, ns), rows[i].cell_steps, triad_ns);
    }
    return true;
}

int main(void)
{
    static struct bench bench;
    static struct level_figures figures[VECTOR_LEVEL_COUNT];
    enum vector_level widest = vector_level_widest();
    int result = EXIT_FAILURE;
    if (!bench_init(&bench))
        goto cleanup;
    measure_levels(&bench, figures);
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++)
        if (vector_level_is_present((enum vector_level)level))
            print_level(&figures[level], vector_level_name((enum vector_level)level));
    bench.table.vectors = widest;
    print_single_precision(&bench);
    if (print_networks(figures[widest].triad.ns) && print_growth(figures[widest].triad.ns))
        result = EXIT_SUCCESS;
cleanup:
    bench_clear(&bench);
    return result;
}
