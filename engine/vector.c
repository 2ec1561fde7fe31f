/* SPDX-License-Identifier: MIT */
#include "engine/vector.h"

const char *vector_level_name(enum vector_level level)
{
    return level == VECTOR_AVX2 ? "AVX2" : "baseline";
}

bool vector_level_is_present(enum vector_level level)
{
    if (level == VECTOR_BASELINE)
        return true;
#if defined(FW_VECTOR_AVX2)
    __builtin_cpu_init();
    return level == VECTOR_AVX2 && __builtin_cpu_supports("avx2");
#else
    return false;
#endif
}

enum vector_level vector_level_widest(void)
{
    return vector_level_is_present(VECTOR_AVX2) ? VECTOR_AVX2 : VECTOR_BASELINE;
}
