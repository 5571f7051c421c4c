/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where a figure's frames lie on the page and what range each axis spans. We choose both ourselves, so
 * that a drawing looks the same everywhere and the report can tell a place from a pixel. */
#ifndef LW_RECORD_LAYOUT_H
#define LW_RECORD_LAYOUT_H

#include "record/figure.h"
#include "record/ticks.h"

typedef struct lw_layout {
    double width, height;    /* px */
    double left, right;      /* edges of the frames, fraction of the width from the left */
    double top[2], bottom[2]; /* edges of each panel, fraction of the height from the bottom */
    lw_axis_scale x, y[2];
    int panels;              /* 1 or 2 */
    int legend_rows;
    int tick_rows;           /* series of ticks below the main curve */
} lw_layout;

/* Lays a figure out on width x height px, with room for its title if it is to be drawn. */
lw_layout lw_layout_of(const lw_figure *figure, double width, double height, bool title);

/* Where a labelled series stands in the legend, which lies in rows above the main frame, left to
 * right: x of its sample in px from the left of the page, row from the top. */
void lw_layout_legend(const lw_figure *figure, const lw_layout *layout, const lw_series *series, double *x, int *row);

/* How many tick labels an axis of the frames has room for. panel -1 = x. */
double lw_layout_labels(const lw_layout *layout, int panel);

/* px that a series' sample in the legend takes. */
double lw_layout_sample(const lw_series *series);

#define LW_LEGEND_ROW_PX 24.0

#endif
