/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_rung.h"

const lw_pattern_rung *lw_pattern_rung_for(lw_cpu cpu)
{
#ifdef LW_RUNGS_X86
    if ((cpu == LW_CPU_AUTO || cpu == LW_CPU_AVX512) && __builtin_cpu_supports("avx512f") &&
        __builtin_cpu_supports("avx512bw") && __builtin_cpu_supports("avx512cd") &&
        __builtin_cpu_supports("avx512dq") && __builtin_cpu_supports("avx512vl"))
        return &lw_pattern_rung_avx512;
    if (cpu != LW_CPU_PLAIN && __builtin_cpu_supports("avx2") && __builtin_cpu_supports("fma"))
        return &lw_pattern_rung_avx2;
#endif
    (void)cpu;
    return &lw_pattern_rung_plain;
}

size_t lw_pattern_total_size(size_t n_columns)
{
    size_t tiles = (n_columns + LW_PATTERN_TILE - 1) / LW_PATTERN_TILE;
    return tiles * (tiles + 1) / 2 * LW_PATTERN_TILE * LW_PATTERN_TILE * 8;
}
