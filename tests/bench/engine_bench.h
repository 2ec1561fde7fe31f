/* SPDX-License-Identifier: MIT */
/* The parts of bench_engine. Each prints its tables; false: something failed, or a smoke run's bounds were passed. */
#ifndef FOREWATER_TESTS_BENCH_ENGINE_BENCH_H
#define FOREWATER_TESTS_BENCH_ENGINE_BENCH_H

#include <stdbool.h>

#include "engine/section.h"
#include "engine/vector.h"

struct engine_bench {
    const char *river;                   /* of the rival's; NULL: all */
    bool is_smoke;                       /* smallest sizes, to see that everything runs */
    double triad_ns[VECTOR_LEVEL_COUNT]; /* per element; 0 where the level is not present */
};

/* The channel of the benches that are of no river in particular. */
extern const struct section bench_channel;

void bench_measure_triads(struct engine_bench *bench);
/* At the widest level that the processor and a kernel have. */
double bench_widest_triad_ns(const struct engine_bench *bench, enum vector_level most);
#define BENCH_STORAGE_WIDEST VECTOR_AVX2 /* engine/muskingum_cunge.h */
#define BENCH_FULL_WIDEST VECTOR_AVX512

bool bench_storage(struct engine_bench *bench);
bool bench_full(struct engine_bench *bench);
bool bench_growth(struct engine_bench *bench);
bool bench_rival(struct engine_bench *bench);

/* "met", "aim met" or "NOT MET": a figure that should not be above these. */
const char *bench_verdict_below(double value, double floor, double aim);
const char *bench_verdict_above(double value, double floor, double aim);

#endif
