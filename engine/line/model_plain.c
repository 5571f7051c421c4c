/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model's evaluation for the compiler's baseline, every processor. */
#define LW_LANES 2
#define LW_RUNG_EVALUATE lw_model_evaluate_plain
#include "line/model_normal.inc.h"
