/* SPDX-License-Identifier: MIT */
/* The solving of a block of members, one per level of vectors: the same source, engine/dynamic_kernel.c. */
#ifndef FOREWATER_ENGINE_DYNAMIC_KERNEL_H
#define FOREWATER_ENGINE_DYNAMIC_KERNEL_H

#include "engine/dynamic_internal.h"

/*
 * Newton's method over the tree for a block as wide as the level's vectors, from state to state. Leaves the old state
 * in the block's parts, and in is_open which members did not converge (their state is then meaningless). Returns how
 * many. Adds to counts->iterations.
 */
typedef size_t dynamic_kernel(const struct dynamic_tree *tree, const struct dynamic_step_data *data,
                              struct dynamic_block *block, struct dynamic_counts *counts);

dynamic_kernel dynamic_kernel_baseline;
#if defined(FW_VECTOR_AVX2)
dynamic_kernel dynamic_kernel_avx2;
#endif
#if defined(FW_VECTOR_AVX512)
dynamic_kernel dynamic_kernel_avx512;
#endif

#endif
