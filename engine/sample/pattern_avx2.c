/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole pattern's loops for AVX2 with FMA. */
#define LW_LANES 4
#define LW_RUNG lw_pattern_rung_avx2
#define LW_RUNG_NAME "avx2"
#include "sample/pattern_rung.inc.h"
