/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Voigt kernel for the compiler's baseline, every processor. */
#define LW_LANES 2
#define LW_RUNG_SUM lw_voigt_sum_plain
#include "numeric/voigt_rung.inc.h"
