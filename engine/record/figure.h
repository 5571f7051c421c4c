/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A figure as data: axes, series and notes, in an arena. record/gnuplot draws it. Each series gets its
 * look (colour, lightness, dash, marker) from its place, so that a grey print stays readable. */
#ifndef LW_RECORD_FIGURE_H
#define LW_RECORD_FIGURE_H

#include "base/tree.h"

typedef enum lw_series_kind {
    LW_SERIES_POINTS, /* markers, with error bars if given */
    LW_SERIES_LINE,   /* x in order; a NaN parts the line */
    LW_SERIES_STEP,   /* histogram outline, steps midway between the x */
    LW_SERIES_BAND,   /* shaded between y and `high`; takes the colour of the series before it */
    LW_SERIES_TICKS   /* marks at x below the curve, as for reflections; no y */
} lw_series_kind;

/* Axes: x is shared by both panels. */
typedef enum lw_figure_axis_name { LW_AXIS_X, LW_AXIS_Y, LW_AXIS_LOWER_Y } lw_figure_axis_name;

typedef struct lw_figure_axis {
    const char *label; /* quantity's name; "" = none */
    const char *unit;  /* "" = none */
    bool log;
    double low, high;  /* range; NaN = from the data */
} lw_figure_axis;

typedef struct lw_series lw_series;
struct lw_series {
    lw_series_kind kind;
    const char *label;       /* in the legend; "" = not there */
    const double *x, *y;     /* [n] in the axes' units; y NULL for ticks */
    const double *u_x, *u_y; /* [n] half lengths of error bars, or NULL */
    const double *high;      /* [n] upper edge of a band */
    size_t n;
    int panel; /* 0 = main, 1 = lower */
    int style; /* place in the palette, counted from 0 */
    lw_series *next;
};

typedef struct lw_note lw_note;
struct lw_note {
    double x, y;
    const char *text;
    int panel;
    lw_note *next;
};

typedef struct lw_figure {
    lw_arena *arena;
    const char *name;    /* file name without suffix: letters, digits, - and _ */
    const char *title;
    const char *caption; /* sentence below it in a report; "" = none */
    lw_figure_axis axis[3];
    lw_series *first, *last;
    lw_note *notes;
    int styles; /* given out so far */
} lw_figure;

/* A figure without series. Strings are copied; characters of the name other than letters, digits, -
 * and _ become _. NULL on refusal of memory. */
lw_figure *lw_figure_new(lw_arena *arena, const char *name, const char *title, lw_error *err);

/* Names an axis. unit in the engine's plain form: "deg", "nm^-1", "". */
lw_status lw_figure_label(lw_figure *figure, lw_figure_axis_name which, const char *label, const char *unit,
                          lw_error *err);

/* Adds a series to a panel (0 main, 1 lower) and copies x[n] and y[n]. NULL on refusal, or with
 * LW_BAD_ARGUMENT for another panel. `figure` may be NULL (an earlier refusal). */
lw_series *lw_figure_series(lw_figure *figure, lw_series_kind kind, int panel, const char *label, const double *x,
                            const double *y, size_t n, lw_error *err);

/* Error bars of points: half lengths u_x[n], u_y[n], either may be NULL. */
lw_status lw_series_errors(lw_figure *figure, lw_series *series, const double *u_x, const double *u_y,
                           lw_error *err);
/* Upper edge high[n] of a band. */
lw_status lw_series_high(lw_figure *figure, lw_series *series, const double *high, lw_error *err);

/* Writes a text at a place given in the axes' units. */
lw_status lw_figure_note(lw_figure *figure, int panel, double x, double y, const char *text, lw_error *err);

/* Makes a figure from a group of a result tree, so that floors below can describe one:
 *   title, name, caption: texts
 *   x, y, lower_y: groups {label, unit, log (flag), low, high}; all but label may be left out
 *   series: list of groups {kind = "points"|"line"|"step"|"band"|"ticks", label, x, y, u_x, u_y, high
 *           (vectors), panel (0 or 1)}
 *   notes: list of groups {x, y, text, panel}
 * NULL with LW_BAD_ARGUMENT that names the part which doesn't fit, or LW_OUT_OF_MEMORY. */
lw_figure *lw_figure_of_tree(lw_arena *arena, const lw_node *group, lw_error *err);

#endif
