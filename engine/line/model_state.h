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

/* The rungs of lw_model_evaluate. All are compiled from model_normal.inc.h; only lanes and machine flags differ. */
lw_status lw_model_evaluate_plain(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);
lw_status lw_model_evaluate_avx2(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);
lw_status lw_model_evaluate_avx512(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);

/* Products of background and weights, which stay the same while the weights do. */
void lw_model_weigh(lw_model *model);

#endif
