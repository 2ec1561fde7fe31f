/* SPDX-License-Identifier: MIT */
/* muskingum_cunge_step, one per level of vectors: the same source, engine/muskingum_cunge_kernel.c. */
#ifndef FOREWATER_ENGINE_MUSKINGUM_CUNGE_KERNEL_H
#define FOREWATER_ENGINE_MUSKINGUM_CUNGE_KERNEL_H

#include "engine/muskingum_cunge.h"

typedef void muskingum_cunge_kernel(const struct muskingum_cunge_table *table, size_t cell_count, size_t member_count,
                                    double state_m3[restrict], double passing_m3[restrict],
                                    double implicit_m3[restrict]);

muskingum_cunge_kernel muskingum_cunge_kernel_baseline;
#if defined(FW_VECTOR_AVX2)
muskingum_cunge_kernel muskingum_cunge_kernel_avx2;
#endif

#endif
