/* SPDX-License-Identifier: MIT */
#include "tests/bench/level.h"

#if defined(__SSE2__)
#include <immintrin.h>
#endif

#if defined(FW_KERNEL_AVX512)
#define TRIAD bench_triad_avx512
#define FLOAT_STEP bench_float_step_avx512
enum { LANES = 16 };
#elif defined(FW_KERNEL_AVX2)
#define TRIAD bench_triad_avx2
#define FLOAT_STEP bench_float_step_avx2
enum { LANES = 8 };
#else
#define TRIAD bench_triad_baseline
#define FLOAT_STEP bench_float_step_baseline
enum { LANES = 4 };
#define IS_BASELINE
#endif

#if defined(IS_BASELINE) /* once */
bench_triad *bench_triad_of(enum vector_level level)
{
#if defined(FW_VECTOR_AVX512)
    if (level >= VECTOR_AVX512)
        return bench_triad_avx512;
#endif
#if defined(FW_VECTOR_AVX2)
    if (level >= VECTOR_AVX2)
        return bench_triad_avx2;
#endif
    (void)level;
    return bench_triad_baseline;
}

bench_float_step *bench_float_step_of(enum vector_level level)
{
#if defined(FW_VECTOR_AVX512)
    if (level >= VECTOR_AVX512)
        return bench_float_step_avx512;
#endif
#if defined(FW_VECTOR_AVX2)
    if (level >= VECTOR_AVX2)
        return bench_float_step_avx2;
#endif
    (void)level;
    return bench_float_step_baseline;
}
#endif

void TRIAD(struct triad_arrays *arrays, size_t rounds)
{
    for (size_t round = 0; round < rounds; round++) {
        double factor = 1e-3 * (double)round;
        for (size_t i = 0; i < TRIAD_LENGTH; i++)
            arrays->a[i] = arrays->b[i] + factor * arrays->c[i];
        __asm__ volatile("" : "+m"(*arrays)); /* every round counts */
    }
}

typedef float lanes __attribute__((vector_size(4 * LANES)));
typedef uint32_t lane_bits __attribute__((vector_size(4 * LANES)));
typedef float quad __attribute__((vector_size(16)));

static inline lanes load(const float *from)
{
    lanes value;
    memcpy(&value, from, sizeof value);
    return value;
}

static inline lanes held_between(lanes value, float lowest, float highest)
{
#if defined(FW_KERNEL_AVX512)
    return (lanes)_mm512_min_ps(_mm512_max_ps((__m512)value, _mm512_set1_ps(lowest)), _mm512_set1_ps(highest));
#elif defined(FW_KERNEL_AVX2)
    return (lanes)_mm256_min_ps(_mm256_max_ps((__m256)value, _mm256_set1_ps(lowest)), _mm256_set1_ps(highest));
#elif defined(__SSE2__)
    return (lanes)_mm_min_ps(_mm_max_ps((__m128)value, _mm_set1_ps(lowest)), _mm_set1_ps(highest));
#else
    for (int i = 0; i < LANES; i++)
        value[i] = value[i] > lowest ? (value[i] < highest ? value[i] : highest) : lowest;
    return value;
#endif
}

static inline lanes row_of(uintptr_t row_zero, const uint32_t offset[], int i)
{
    quad low;
    memcpy(&low, (const char *)(row_zero + offset[i]), sizeof low);
#if defined(FW_KERNEL_AVX512)
    quad part[3];
    for (int k = 0; k < 3; k++)
        memcpy(&part[k], (const char *)(row_zero + offset[i + 4 * (k + 1)]), sizeof part[k]);
    typedef float octet __attribute__((vector_size(32)));
    octet first = __builtin_shufflevector(low, part[0], 0, 1, 2, 3, 4, 5, 6, 7);
    octet second = __builtin_shufflevector(part[1], part[2], 0, 1, 2, 3, 4, 5, 6, 7);
    return __builtin_shufflevector(first, second, 0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12, 13, 14, 15);
#elif defined(FW_KERNEL_AVX2)
    quad high;
    memcpy(&high, (const char *)(row_zero + offset[i + 4]), sizeof high);
    return __builtin_shufflevector(low, high, 0, 1, 2, 3, 4, 5, 6, 7);
#else
    return low;
#endif
}

#if defined(FW_KERNEL_AVX512)
#define INTERLEAVE_LOW(a, b) __builtin_shufflevector(a, b, 0, 16, 1, 17, 4, 20, 5, 21, 8, 24, 9, 25, 12, 28, 13, 29)
#define INTERLEAVE_HIGH(a, b)                                                                                        \
    __builtin_shufflevector(a, b, 2, 18, 3, 19, 6, 22, 7, 23, 10, 26, 11, 27, 14, 30, 15, 31)
#define FIRST_HALVES(a, b) __builtin_shufflevector(a, b, 0, 1, 16, 17, 4, 5, 20, 21, 8, 9, 24, 25, 12, 13, 28, 29)
#define SECOND_HALVES(a, b) __builtin_shufflevector(a, b, 2, 3, 18, 19, 6, 7, 22, 23, 10, 11, 26, 27, 14, 15, 30, 31)
#elif defined(FW_KERNEL_AVX2)
#define INTERLEAVE_LOW(a, b) __builtin_shufflevector(a, b, 0, 8, 1, 9, 4, 12, 5, 13)
#define INTERLEAVE_HIGH(a, b) __builtin_shufflevector(a, b, 2, 10, 3, 11, 6, 14, 7, 15)
#define FIRST_HALVES(a, b) __builtin_shufflevector(a, b, 0, 1, 8, 9, 4, 5, 12, 13)
#define SECOND_HALVES(a, b) __builtin_shufflevector(a, b, 2, 3, 10, 11, 6, 7, 14, 15)
#else
#define INTERLEAVE_LOW(a, b) __builtin_shufflevector(a, b, 0, 4, 1, 5)
#define INTERLEAVE_HIGH(a, b) __builtin_shufflevector(a, b, 2, 6, 3, 7)
#define FIRST_HALVES(a, b) __builtin_shufflevector(a, b, 0, 1, 4, 5)
#define SECOND_HALVES(a, b) __builtin_shufflevector(a, b, 2, 3, 6, 7)
#endif

enum { BLOCK_MEMBERS = 32, BLOCK_VECTORS = BLOCK_MEMBERS / LANES };

static void step_block(const struct float_table *table, size_t cell_count, size_t member_count, float *state_m3,
                       float *passing_m3, float *implicit_m3)
{
    const uintptr_t row_zero = (uintptr_t)table->rows - ((uintptr_t)table->base << 4);
    lanes passing[BLOCK_VECTORS], implicit[BLOCK_VECTORS], potentials[BLOCK_VECTORS];
    uint32_t offsets[BLOCK_VECTORS][LANES] __attribute__((aligned(64)));
    for (size_t v = 0; v < BLOCK_VECTORS; v++) {
        passing[v] = load(passing_m3 + v * LANES);
        implicit[v] = load(implicit_m3 + v * LANES);
    }
    for (size_t cell = 0; cell < cell_count; cell++, state_m3 += member_count) {
#pragma GCC unroll 8
        for (size_t v = 0; v < BLOCK_VECTORS; v++) {
            potentials[v] = load(state_m3 + v * LANES) + implicit[v];
            lane_bits held = (lane_bits)held_between(potentials[v], table->lowest, table->highest);
            held = held >> (FLOAT_SHIFT - 4) & ~(uint32_t)15;
            memcpy(offsets[v], &held, sizeof held);
        }
        __asm__("" : "+m"(offsets));
#pragma GCC unroll 8
        for (size_t v = 0; v < BLOCK_VECTORS; v++) {
            const uint32_t *offset = offsets[v];
            lanes state = load(state_m3 + v * LANES), potential = potentials[v];
            lanes row_0 = row_of(row_zero, offset, 0), row_1 = row_of(row_zero, offset, 1);
            lanes row_2 = row_of(row_zero, offset, 2), row_3 = row_of(row_zero, offset, 3);
            lanes outflow_01 = INTERLEAVE_LOW(row_0, row_1), outflow_23 = INTERLEAVE_LOW(row_2, row_3);
            lanes implicit_01 = INTERLEAVE_HIGH(row_0, row_1), implicit_23 = INTERLEAVE_HIGH(row_2, row_3);
            lanes out = FIRST_HALVES(outflow_01, outflow_23) + SECOND_HALVES(outflow_01, outflow_23) * potential;
            state = (state - out) + passing[v];
            memcpy(state_m3 + v * LANES, &state, sizeof state);
            passing[v] = out;
            implicit[v] =
                FIRST_HALVES(implicit_01, implicit_23) + SECOND_HALVES(implicit_01, implicit_23) * potential;
        }
    }
    memcpy(passing_m3, passing, sizeof passing);
    memcpy(implicit_m3, implicit, sizeof implicit);
}

void FLOAT_STEP(const struct float_table *table, size_t cell_count, size_t member_count, float *restrict state_m3,
                float *restrict passing_m3, float *restrict implicit_m3)
{
    for (size_t member = 0; member < member_count; member += BLOCK_MEMBERS)
        step_block(table, cell_count, member_count, state_m3 + member, passing_m3 + member, implicit_m3 + member);
}
