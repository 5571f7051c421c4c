/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model's evaluation for AVX-512. */
#define LW_LANES 8
#define LW_RUNG_EVALUATE lw_model_evaluate_avx512
#include "line/model_normal.inc.h"
