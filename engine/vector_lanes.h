/* SPDX-License-Identifier: MIT */
/*
 * The compiler's generic vectors, as wide as the registers of the level a kernel is compiled for.
 *
 * For the sources of kernels alone: what this header gives depends on the flags.
 */
#ifndef FOREWATER_ENGINE_VECTOR_LANES_H
#define FOREWATER_ENGINE_VECTOR_LANES_H

#include <stdint.h>
#include <string.h>

#if defined(__SSE2__)
#include <immintrin.h>
#endif

#if defined(FW_KERNEL_AVX512)
enum { VECTOR_LANES = 8 };
#elif defined(__AVX2__)
enum { VECTOR_LANES = 4 };
#else
enum { VECTOR_LANES = 2 };
#endif

typedef double vector_double __attribute__((vector_size(8 * VECTOR_LANES)));
typedef uint64_t vector_bits __attribute__((vector_size(8 * VECTOR_LANES)));

static inline vector_double vector_load(const double *from)
{
    vector_double value;
    memcpy(&value, from, sizeof value);
    return value;
}

static inline void vector_store(double *to, vector_double value)
{
    memcpy(to, &value, sizeof value);
}

static inline vector_double vector_of(double value)
{
    return value - (vector_double){0.0};
}

static inline vector_double vector_absolute(vector_double value)
{
    return (vector_double)((vector_bits)value & ~(vector_bits)vector_of(-0.0));
}

/* a > b ? a : b in every lane, and a < b ? a : b: where a is not a number, b. */
static inline vector_double vector_larger(vector_double a, vector_double b)
{
#if defined(FW_KERNEL_AVX512)
    return (vector_double)_mm512_max_pd((__m512d)a, (__m512d)b);
#elif defined(__AVX2__)
    return (vector_double)_mm256_max_pd((__m256d)a, (__m256d)b);
#elif defined(__SSE2__)
    return (vector_double)_mm_max_pd((__m128d)a, (__m128d)b);
#else
    vector_bits is_larger = (vector_bits)(a > b);
    return (vector_double)(((vector_bits)a & is_larger) | ((vector_bits)b & ~is_larger));
#endif
}

static inline vector_double vector_smaller(vector_double a, vector_double b)
{
#if defined(FW_KERNEL_AVX512)
    return (vector_double)_mm512_min_pd((__m512d)a, (__m512d)b);
#elif defined(__AVX2__)
    return (vector_double)_mm256_min_pd((__m256d)a, (__m256d)b);
#elif defined(__SSE2__)
    return (vector_double)_mm_min_pd((__m128d)a, (__m128d)b);
#else
    vector_bits is_smaller = (vector_bits)(a < b);
    return (vector_double)(((vector_bits)a & is_smaller) | ((vector_bits)b & ~is_smaller));
#endif
}

#endif
