/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole pattern's loops for AVX-512 (x86-64-v4). */
#define LW_LANES 8
#define LW_RUNG lw_pattern_rung_avx512
#define LW_RUNG_NAME "avx512"
#include "sample/pattern_rung.inc.h"
