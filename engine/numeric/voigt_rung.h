/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The rungs of the Voigt kernel, for voigt.c to choose from. All are compiled from
 * voigt_rung.inc.h; only lanes and machine flags differ. */
#ifndef LW_NUMERIC_VOIGT_RUNG_H
#define LW_NUMERIC_VOIGT_RUNG_H

#include "numeric/voigt.h"

lw_voigt_sum_fn lw_voigt_sum_plain;  /* 2 lanes, the compiler's baseline */
lw_voigt_sum_fn lw_voigt_sum_avx2;   /* 4 lanes, x86-64 with AVX2 and FMA */
lw_voigt_sum_fn lw_voigt_sum_avx512; /* 8 lanes, x86-64-v4 */

#endif
