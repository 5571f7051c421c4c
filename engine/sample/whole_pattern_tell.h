/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole pattern's answer as a result tree (private to sample/). */
#ifndef LW_SAMPLE_WHOLE_PATTERN_TELL_H
#define LW_SAMPLE_WHOLE_PATTERN_TELL_H

#include "sample/pattern_fit.h"

/* Quantities, forms, covariance, figures and remarks. arena: for what the tree does not copy. */
lw_status lw_whole_pattern_tell(const lw_pattern_answer *answer, lw_arena *arena, lw_node *result,
                                lw_error *err);

#endif
