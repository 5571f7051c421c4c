/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which points of a long series are worth drawing. Of a curve, in each column half a pixel wide the
 * first, the lowest, the highest and the last point stand for all: the picture is the same, peaks are
 * kept. Of markers, one stands for those on the same pixel. */
#ifndef LW_RECORD_CURVE_H
#define LW_RECORD_CURVE_H

#include "record/layout.h"

#define LW_PICK_ROWS 2048

typedef struct lw_pick {
    const lw_series *series;
    size_t next;     /* first point not looked at */
    size_t queue[4]; /* picked, in order */
    int queued, given;
    bool all;        /* short, with error bars or not in order of x: nothing is left out */
    bool markers;    /* thinned by pixel, not by column */
    double low, step; /* left edge and width of a column, in x or log10 x */
    bool log;
    lw_axis_scale y;  /* and for markers height: px of the panel */
    double height, column;
    unsigned char taken[LW_PICK_ROWS / 8]; /* pixels of the column that have a marker */
} lw_pick;

lw_pick lw_pick_begin(const lw_series *series, const lw_layout *layout);

/* The next index to draw, in order. False at the end. */
bool lw_pick_next(lw_pick *pick, size_t *index);

#endif
