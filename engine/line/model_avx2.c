/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model's evaluation for AVX2 with FMA. */
#define LW_LANES 4
#define LW_RUNG_EVALUATE lw_model_evaluate_avx2
#include "line/model_normal.inc.h"
