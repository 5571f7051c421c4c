/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole pattern's loops for the compiler's baseline, every processor. */
#define LW_LANES 2
#define LW_RUNG lw_pattern_rung_plain
#define LW_RUNG_NAME "plain"
#include "sample/pattern_rung.inc.h"
