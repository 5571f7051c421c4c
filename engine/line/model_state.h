/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the model share (private to line/): the state of a line at one point of an evaluation, and its
 * columns. */
#ifndef LW_LINE_MODEL_STATE_H
#define LW_LINE_MODEL_STATE_H

#include "line/model.h"

/* What one line needs at every point of an evaluation. */
typedef struct lw_line_state {
    double position, area;
    double variance, lorentz;                            /* totals, emission left out */
    double merged_variance;                              /* with the axial copies' variance */
    double slope_variance[LW_GLOBALS_MOST], slope_lorentz[LW_GLOBALS_MOST];
    double along, across;                                /* x = along sin(theta) - across, degrees */
    double tangent_over_cosine, secant2;
    double factor, factor_slope;                         /* intensity factor at the position; relative slope */
    const double *local;
} lw_line_state;

/* Fills model->state and the nodes at p; false where the model does not exist. */
bool lw_model_set_lines(const lw_model *model, const double *p);

/* Value and derivatives of line k at `count` places from `from` on, at most LW_BLOCK. The columns, `stride` apart:
 * d/d(position), value (per unit area), d/d(local[...]) and, where axial parameters are fitted, d/d(axial). Without
 * slopes only the value is written. near: point by point, with all copies of the axial divergence. */
void lw_model_columns(const lw_model *model, size_t k, bool near, const lw_model_places *places, size_t from,
                      size_t count, bool slopes, double *column, size_t stride);

/* Adds a line's share to the columns of the globals: into[q][i], rows `into_stride` apart. */
void lw_model_add_globals(const lw_model *model, size_t k, const double *column, size_t stride, size_t count,
                          double *into, size_t into_stride);

/* Products of background and weights, which stay the same while the weights do. */
void lw_model_weigh(lw_model *model);

#endif
