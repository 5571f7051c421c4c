/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Voigt kernel for AVX2 with FMA. */
#define LW_LANES 4
#define LW_RUNG_SUM lw_voigt_sum_avx2
#include "numeric/voigt_rung.inc.h"
