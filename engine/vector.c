/* SPDX-License-Identifier: MIT */
#include "engine/vector.h"

const char *vector_level_name(enum vector_level level)
{
    return level == VECTOR_AVX512 ? "AVX-512" : level == VECTOR_AVX2 ? "AVX2" : "baseline";
}

bool vector_level_is_present(enum vector_level level)
{
    if (level == VECTOR_BASELINE)
        return true;
#if defined(FW_VECTOR_AVX2)
    __builtin_cpu_init();
    if (level == VECTOR_AVX2)
        return __builtin_cpu_supports("avx2");
#endif
#if defined(FW_VECTOR_AVX512)
    if (level == VECTOR_AVX512)
        return __builtin_cpu_supports("avx512f") && __builtin_cpu_supports("avx512dq") &&
               __builtin_cpu_supports("avx512vl") && __builtin_cpu_supports("avx2");
#endif
    return false;
}

enum vector_level vector_level_widest(void)
{
    int level = VECTOR_LEVEL_COUNT - 1;
    while (!vector_level_is_present((enum vector_level)level))
        level--;
    return (enum vector_level)level;
}
