/* SPDX-License-Identifier: MIT */
/*
 * All speed figures of the engine, as ratios to an in-cache triad and to a general library for differential
 * equations, both measured in the same run (docs/speed.md).
 *
 *     ninja -C build/release bench_engine && build/release/tests/bench_engine [--smoke] [PART...]
 * Parts: storage, full, growth, rival; none named: all. The rival's rivers: published, flashy, flat; none named: all.
 * --smoke takes seconds, asserts that accuracy is within wide bounds, and nothing of speed.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "tests/bench/engine_bench.h"
#include "tests/bench/level.h"
#include "tests/bench/river_case.h"
#include "tests/bench/stopwatch.h"

const struct section bench_channel = {.shape = SECTION_TRAPEZOID,
                                      .bottom_m = 14.0,
                                      .side_h_per_v = 2.0,
                                      .roughness_n = 0.038,
                                      .has_plain = true,
                                      .plain_above_m = 2.6,
                                      .plain_width_m = 80.0,
                                      .plain_roughness_n = 0.075};

enum { TRIAD_STRETCH = 25, TRIAD_STRETCHES = 400 };

void bench_measure_triads(struct engine_bench *bench)
{
    static struct triad_arrays arrays __attribute__((aligned(64)));
    for (size_t i = 0; i < TRIAD_LENGTH; i++) {
        arrays.b[i] = 1.0 + (double)i;
        arrays.c[i] = 0.5 * (double)i;
    }
    for (int stretch = 0; stretch < TRIAD_STRETCHES; stretch++)
        for (int level = 0; level < VECTOR_LEVEL_COUNT; level++) {
            if (!vector_level_is_present((enum vector_level)level))
                continue;
            bench_triad *triad = bench_triad_of((enum vector_level)level);
            double begin = wall_s();
            triad(&arrays, TRIAD_STRETCH);
            double ns = 1e9 * (wall_s() - begin) / ((double)TRIAD_STRETCH * TRIAD_LENGTH);
            if (bench->triad_ns[level] == 0.0 || ns < bench->triad_ns[level])
                bench->triad_ns[level] = ns;
        }
}

double bench_widest_triad_ns(const struct engine_bench *bench, enum vector_level most)
{
    return bench->triad_ns[vector_level_widest() < most ? vector_level_widest() : most];
}

const char *bench_verdict_below(double value, double floor, double aim)
{
    return value <= aim ? "aim met" : value <= floor ? "floor met" : "floor NOT MET";
}

const char *bench_verdict_above(double value, double floor, double aim)
{
    return value >= aim ? "aim met" : value >= floor ? "floor met" : "floor NOT MET";
}

#if defined(__clang__)
static const char compiler[] = ""; /* its version says so */
#else
static const char compiler[] = "gcc ";
#endif

static void print_conditions(struct engine_bench *bench)
{
    char line[256] = "", model[200] = "unknown";
    FILE *info = fopen("/proc/cpuinfo", "re");
    while (info != NULL && fgets(line, sizeof line, info) != NULL)
        if (sscanf(line, "model name : %199[^\n]", model) == 1)
            break;
    if (info != NULL)
        fclose(info);
    printf("processor: %s; compiler: %s%s\n", model, compiler, __VERSION__);
    bench_measure_triads(bench);
    printf("in-cache triad a[i] = b[i] + s c[i], 3 x 8 KiB, at each level's flags (tests/bench/level.c), ns per "
           "element:");
    for (int level = 0; level < VECTOR_LEVEL_COUNT; level++)
        if (vector_level_is_present((enum vector_level)level))
            printf("  %s %.4f", vector_level_name((enum vector_level)level), bench->triad_ns[level]);
    printf("\nTwo ratios to it: 'plain', the triad as any x86-64 runs it (baseline), one yardstick for all levels; "
           "'own', that of "
           "the kernel's own flags.\n");
}

int main(int argument_count, char *arguments[])
{
    static const struct part {
        const char *name;
        bool (*run)(struct engine_bench *bench);
    } parts[] = {{"storage", bench_storage}, {"full", bench_full}, {"growth", bench_growth}, {"rival", bench_rival}};
    enum { PARTS = sizeof parts / sizeof *parts };
    struct engine_bench bench = {0};
    setvbuf(stdout, NULL, _IOLBF, 0); /* a long run into a file can be followed */
    bool is_wanted[PARTS] = {0}, is_any = false, is_well = true;
    for (int i = 1; i < argument_count; i++) {
        bool is_known = strcmp(arguments[i], "--smoke") == 0;
        bench.is_smoke = bench.is_smoke || is_known;
        for (size_t part = 0; part < PARTS; part++)
            if (strcmp(arguments[i], parts[part].name) == 0)
                is_known = is_wanted[part] = is_any = true;
        for (size_t river = 0; river < RIVER_CASE_COUNT; river++)
            if (strcmp(arguments[i], river_cases[river].name) == 0) {
                bench.river = river_cases[river].name;
                is_known = true;
            }
        if (!is_known) {
            fprintf(stderr,
                    "usage: bench_engine [--smoke] [storage] [full] [growth] [rival] [published | flashy | flat]\n");
            return EXIT_FAILURE;
        }
    }
    print_conditions(&bench);
    for (size_t part = 0; part < PARTS; part++)
        if ((!is_any || is_wanted[part]) && !parts[part].run(&bench)) {
            fprintf(stderr, "bench_engine: %s: failed\n", parts[part].name);
            is_well = false;
        }
    return is_well ? EXIT_SUCCESS : EXIT_FAILURE;
}
