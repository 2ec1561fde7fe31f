/* SPDX-License-Identifier: MIT */
/* The storage form: its kernel per level of vectors and number of members, in double and in single precision. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/bench/engine_bench.h"
#include "tests/bench/level.h"
#include "tests/bench/network_run.h"
#include "tests/bench/stopwatch.h"

enum {
    MOST_MEMBERS = 64,
    CELLS = 100,
    STEP_COUNT = 480,
    STRETCH_NS = 25000, /* about this long: shorter than a time slice, far longer than reading the clock */
    ROUNDS = 1500,
    SMOKE_ROUNDS = 3
};
static const double slope = 0.0024, cell_m = 130.0, time_step_s = 60.0, largest_m3s = 160.0;
static const double floor_triads = 9.0, aim_triads = 5.0;
static const struct flood flood = {8.0, 80.0, 4.0 * 3600.0, 6.0};

struct storage {
    struct flow_curve curve;
    struct muskingum_cunge_table table;
    struct float_table float_table;
    double passing_m3[STEP_COUNT][MOST_MEMBERS], implicit_m3[STEP_COUNT][MOST_MEMBERS];
    double state_m3[CELLS * MOST_MEMBERS];
    float float_state_m3[CELLS * MOST_MEMBERS];
};

static bool make_float_table(const struct muskingum_cunge_table *table, struct float_table *single)
{
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
    return true;
}

static bool storage_init(struct storage *storage)
{
    const struct muskingum_cunge_reach reach = {.curve = &storage->curve,
                                                .slope_m_per_m = slope,
                                                .roughness_factor = 1.0,
                                                .cell_m = cell_m,
                                                .time_step_s = time_step_s,
                                                .smallest_discharge_m3s = 1e-3};
    if (flow_curve_init(&storage->curve, &bench_channel, 1e-3 / sqrt(slope), 32.0 * largest_m3s / sqrt(slope)) !=
            FW_OK ||
        muskingum_cunge_table_init(&storage->table, &reach) != FW_OK ||
        !make_float_table(&storage->table, &storage->float_table))
        return false;
    for (size_t member = 0; member < MOST_MEMBERS; member++) {
        struct flood own = flood_of_member(&flood, member);
        for (size_t step = 0; step < STEP_COUNT; step++) {
            double passing = time_step_s * flood_m3s(time_step_s * (double)step, &own);
            storage->passing_m3[step][member] = passing;
            storage->implicit_m3[step][member] = muskingum_cunge_implicit_m3(&storage->table, passing);
        }
    }
    return true;
}

static void storage_clear(struct storage *storage)
{
    muskingum_cunge_table_clear(&storage->table);
    flow_curve_clear(&storage->curve);
    free(storage->float_table.rows);
}

struct kernel {
    enum vector_level level;
    bool is_single;
    size_t members;
    size_t next_step;
    double ns; /* per member-cell-step, the best so far */
};

static void run_step(struct storage *storage, const struct kernel *kernel, size_t step)
{
    double passing[MOST_MEMBERS], implicit[MOST_MEMBERS];
    float single_passing[MOST_MEMBERS], single_implicit[MOST_MEMBERS];
    if (kernel->is_single) {
        for (size_t i = 0; i < kernel->members; i++) {
            single_passing[i] = (float)storage->passing_m3[step][i];
            single_implicit[i] = (float)storage->implicit_m3[step][i];
        }
        bench_float_step_of(kernel->level)(&storage->float_table, CELLS, kernel->members, storage->float_state_m3,
                                           single_passing, single_implicit);
    } else {
        memcpy(passing, storage->passing_m3[step], kernel->members * sizeof *passing);
        memcpy(implicit, storage->implicit_m3[step], kernel->members * sizeof *implicit);
        muskingum_cunge_step(&storage->table, CELLS, kernel->members, storage->state_m3, passing, implicit);
    }
}

/* Two steps of a flood to warm up; then a stretch of it is timed. */
static void measure_stretch(struct storage *storage, struct kernel *kernel)
{
    double units = (double)(kernel->members * CELLS);
    size_t steps = 1 + (size_t)(STRETCH_NS / units) / (kernel->members < 8 ? 8 : 1);
    storage->table.vectors = kernel->level;
    for (size_t i = 0; i < kernel->members * CELLS; i++)
        storage->float_state_m3[i] = (float)(storage->state_m3[i] = 2500.0);
    for (size_t warm = 0; warm < 2; warm++)
        run_step(storage, kernel, kernel->next_step);
    double begin = wall_s();
    for (size_t i = 0; i < steps; i++)
        run_step(storage, kernel, kernel->next_step = (kernel->next_step + 1) % STEP_COUNT);
    kernel->ns = fmin(kernel->ns, 1e9 * (wall_s() - begin) / ((double)steps * units));
}

static const size_t member_counts[] = {1, 8, 16, 32, 64};
enum { COUNTS = sizeof member_counts / sizeof *member_counts };

struct level_kernels {
    struct kernel by_members[COUNTS], single;
};

static void measure_levels(struct storage *storage, int rounds, struct level_kernels kernels[VECTOR_LEVEL_COUNT])
{
    for (int level = 0; level <= BENCH_STORAGE_WIDEST; level++) {
        kernels[level].single = (struct kernel){(enum vector_level)level, true, 32, 0, 1e9};
        for (size_t i = 0; i < COUNTS; i++)
            kernels[level].by_members[i] = (struct kernel){(enum vector_level)level, false, member_counts[i], 0, 1e9};
    }
    for (int round = 0; round < rounds; round++)
        for (int level = 0; level <= BENCH_STORAGE_WIDEST; level++) {
            if (!vector_level_is_present((enum vector_level)level))
                continue;
            measure_stretch(storage, &kernels[level].single);
            for (size_t i = 0; i < COUNTS; i++)
                measure_stretch(storage, &kernels[level].by_members[i]);
        }
}

static void print_level(const struct level_kernels *kernels, enum vector_level level, const double level_triad_ns[])
{
    const char *name = vector_level_name(level);
    double triad_ns = level_triad_ns[level], plain_triad_ns = level_triad_ns[VECTOR_BASELINE];
    for (size_t i = 0; i < COUNTS; i++) {
        double triads = kernels->by_members[i].ns / triad_ns;
        double plain_triads = kernels->by_members[i].ns / plain_triad_ns;
        printf("  %-10s %8zu %8.3f %8.1f %8.1f", name, member_counts[i], kernels->by_members[i].ns, plain_triads,
               triads);
        if (member_counts[i] == 32)
            printf("  floor %g, aim %g: %s / %s", floor_triads, aim_triads,
                   bench_verdict_below(plain_triads, floor_triads, aim_triads),
                   bench_verdict_below(triads, floor_triads, aim_triads));
        printf("\n");
    }
    printf("  %-10s %8d %8.3f %8.1f %8.1f  single precision\n", name, 32, kernels->single.ns,
           kernels->single.ns / plain_triad_ns, kernels->single.ns / triad_ns);
}

struct single_figures {
    double outflow_off_m3s, imbalance, double_imbalance;
};

/* What single precision does to a flood: largest difference of the outflow, and what becomes of the water. */
static struct single_figures measure_single_precision(struct storage *storage)
{
    enum { MEMBERS = 32 };
    struct single_figures figures = {0};
    double in[MEMBERS] = {0.0}, single_in[MEMBERS] = {0.0}, left[MEMBERS] = {0.0}, single_left[MEMBERS] = {0.0};
    storage->table.vectors = vector_level_widest();
    for (size_t i = 0; i < CELLS * MEMBERS; i++)
        storage->float_state_m3[i] = (float)(storage->state_m3[i] = 0.0);
    for (size_t step = 0; step < STEP_COUNT; step++) {
        double passing[MEMBERS], implicit[MEMBERS];
        float single_passing[MEMBERS], single_implicit[MEMBERS];
        for (size_t i = 0; i < MEMBERS; i++) {
            single_passing[i] = (float)(passing[i] = storage->passing_m3[step][i]);
            single_implicit[i] = (float)(implicit[i] = storage->implicit_m3[step][i]);
            in[i] += passing[i];
            single_in[i] += (double)single_passing[i];
        }
        muskingum_cunge_step(&storage->table, CELLS, MEMBERS, storage->state_m3, passing, implicit);
        bench_float_step_of(vector_level_widest())(&storage->float_table, CELLS, MEMBERS, storage->float_state_m3,
                                                   single_passing, single_implicit);
        for (size_t i = 0; i < MEMBERS; i++) {
            left[i] += passing[i];
            single_left[i] += (double)single_passing[i];
            figures.outflow_off_m3s =
                fmax(figures.outflow_off_m3s, fabs((double)single_passing[i] - passing[i]) / time_step_s);
        }
    }
    for (size_t i = 0; i < MEMBERS; i++) {
        for (size_t cell = 0; cell < CELLS; cell++) {
            left[i] += storage->state_m3[cell * MEMBERS + i];
            single_left[i] += (double)storage->float_state_m3[cell * MEMBERS + i];
        }
        figures.imbalance = fmax(figures.imbalance, fabs(single_left[i] / single_in[i] - 1.0));
        figures.double_imbalance = fmax(figures.double_imbalance, fabs(left[i] / in[i] - 1.0));
    }
    return figures;
}

/* 1,000 members through 100 cells for 48 h at 60 s, tables of 25 roughness groups. */
static bool print_thousand(const struct engine_bench *bench)
{
    const struct network_run_setup setup = {.section = &bench_channel,
                                            .slope_m_per_m = slope,
                                            .reach_m = cell_m * CELLS,
                                            .reach_count = 1,
                                            .cells_per_reach = CELLS,
                                            .group_count = bench->is_smoke ? 2 : 25,
                                            .members_per_group = 40,
                                            .time_step_s = time_step_s,
                                            .step_count = bench->is_smoke ? 60 : 2880,
                                            .flood = flood};
    struct network_run run;
    if (!network_run_init(&run, &setup))
        return false;
    size_t members = setup.group_count * setup.members_per_group;
    double seconds = network_run_best_s(&run, bench->is_smoke ? 1 : 7);
    double ns = 1e9 * seconds / ((double)(members * setup.step_count) * CELLS);
    printf(
        "  %zu members x %d cells x %g h at %g s through the network, %zu groups: %.3f s of one core, %.2f ns, %.1f "
        "triads; tables %.1f ms\n",
        members, CELLS, (double)setup.step_count * time_step_s / 3600.0, time_step_s, setup.group_count, seconds, ns,
        ns / bench_widest_triad_ns(bench, BENCH_STORAGE_WIDEST), 1e3 * run.create_s);
    network_run_clear(&run);
    return seconds > 0.0;
}

bool bench_storage(struct engine_bench *bench)
{
    static struct storage storage;
    static struct level_kernels kernels[VECTOR_LEVEL_COUNT];
    bool is_well = storage_init(&storage);
    if (!is_well)
        goto cleanup;
    measure_levels(&storage, bench->is_smoke ? SMOKE_ROUNDS : ROUNDS, kernels);
    bench_measure_triads(bench);
    printf("\nStorage form: one step of one reach of %d cells; per member-cell-step\n", CELLS);
    printf("  %-10s %8s %8s %8s %8s\n", "vectors", "members", "ns", "plain", "own");
    for (int level = 0; level <= BENCH_STORAGE_WIDEST; level++)
        if (vector_level_is_present((enum vector_level)level))
            print_level(&kernels[level], (enum vector_level)level, bench->triad_ns);
    struct single_figures figures = measure_single_precision(&storage);
    printf("  single precision over an 8 h flood of 72 to 104 m3/s: outflow off by at most %.1e m3/s; imbalance "
           "%.1e, in "
           "double %.1e\n",
           figures.outflow_off_m3s, figures.imbalance, figures.double_imbalance);
    is_well = print_thousand(bench) && figures.outflow_off_m3s < 1e-2 && figures.imbalance < 5e-6 &&
              figures.double_imbalance < 1e-12;
cleanup:
    storage_clear(&storage);
    return is_well;
}
