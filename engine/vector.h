/* SPDX-License-Identifier: MIT */
/*
 * Which width of vectors the processor at hand can run.
 *
 * A kernel is one source compiled once per level (CMakeLists.txt, `vector_kernels`) and chosen at run time. All
 * levels give the same bits: the same operations in the same order, contraction off.
 */
#ifndef FOREWATER_ENGINE_VECTOR_H
#define FOREWATER_ENGINE_VECTOR_H

#include <stdbool.h>

enum vector_level {
    VECTOR_BASELINE, /* what the compiler's target has: 2 doubles on x86-64 (SSE2) and on arm64 (NEON) */
    VECTOR_AVX2,     /* 4 doubles: all that a kernel needs of x86-64-v3 */
    VECTOR_AVX512,   /* 8 doubles: all that a kernel needs of x86-64-v4; for kernels that gain by it */
    VECTOR_LEVEL_COUNT
};

const char *vector_level_name(enum vector_level level); /* as a person would say it */

/* Compiled in, and the processor and the system can run it. */
bool vector_level_is_present(enum vector_level level);
enum vector_level vector_level_widest(void);

#endif
