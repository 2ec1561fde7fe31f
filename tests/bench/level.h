/* SPDX-License-Identifier: MIT */
/* What is measured at each level of vectors beside the engine's own kernel: level.c, compiled once per level. */
#ifndef FOREWATER_TESTS_BENCH_LEVEL_H
#define FOREWATER_TESTS_BENCH_LEVEL_H

#include "engine/muskingum_cunge.h"

enum { TRIAD_LENGTH = 1024 };

/* a[i] = b[i] + factor c[i]: 3 x 8 KiB, in the nearest cache; side by side, so that one register addresses all. */
struct triad_arrays {
    double a[TRIAD_LENGTH], b[TRIAD_LENGTH], c[TRIAD_LENGTH];
};
typedef void bench_triad(struct triad_arrays *arrays, size_t rounds);

/* The routing kernel in single precision: here to be measured, not for routing. */
struct float_row {
    float outflow_0, outflow_1, implicit_0, implicit_1;
};

struct float_table {
    float lowest, highest;
    uint32_t base;
    struct float_row *rows;
};

enum { FLOAT_SHIFT = 23 - 6 }; /* 64 rows to the octave, as in engine/bit_index.h */

/* As muskingum_cunge_step; member_count is a multiple of 32. */
typedef void bench_float_step(const struct float_table *table, size_t cell_count, size_t member_count,
                              float *restrict state_m3, float *restrict passing_m3, float *restrict implicit_m3);

/* Of the levels compiled in; the widest below, where a level has none of its own. */
bench_triad *bench_triad_of(enum vector_level level);
bench_float_step *bench_float_step_of(enum vector_level level);

bench_triad bench_triad_baseline;
bench_float_step bench_float_step_baseline;
#if defined(FW_VECTOR_AVX2)
bench_triad bench_triad_avx2;
bench_float_step bench_float_step_avx2;
#endif
#if defined(FW_VECTOR_AVX512)
bench_triad bench_triad_avx512;
bench_float_step bench_float_step_avx512;
#endif

#endif
