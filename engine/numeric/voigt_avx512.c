/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Voigt kernel for AVX-512. */
#define LW_LANES 8
#define LW_RUNG_SUM lw_voigt_sum_avx512
#include "numeric/voigt_rung.inc.h"
