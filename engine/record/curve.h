/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which points of a long curve are worth drawing. In each column half a pixel wide (a pixel for
 * markers) the first, the lowest, the highest and the last point stand for all: the picture is the
 * same, peaks are kept. */
#ifndef LW_RECORD_CURVE_H
#define LW_RECORD_CURVE_H

#include "record/layout.h"

typedef struct lw_pick {
    const lw_series *series;
    size_t next;     /* first point not looked at */
    size_t queue[4]; /* picked, in order */
    int queued, given;
    bool all;        /* short, with error bars or not in order of x: nothing is left out */
    double low, step; /* left edge and width of a column, in x or log10 x */
    bool log;
} lw_pick;

lw_pick lw_pick_begin(const lw_series *series, const lw_layout *layout);

/* The next index to draw, in order. False at the end. */
bool lw_pick_next(lw_pick *pick, size_t *index);

#endif
