/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Levenberg-Marquardt on normal equations, with bounds held by an active set. The problem hands over
 * J'WJ, J'Wr and chi-square; it never has to store a Jacobian.
 * Source: Marquardt (1963) SIAM J. 11, 431; gain-ratio damping of Nielsen (1999) IMM-REP-1999-05;
 * projected active set: Kanzow, Yamashita & Fukushima (2004) J. Comput. Appl. Math. 172, 375. */
#ifndef LW_NUMERIC_LEAST_SQUARES_H
#define LW_NUMERIC_LEAST_SQUARES_H

#include "base/arena.h"

#include <stdbool.h>
#include <stddef.h>

/* Normal equations of n parameters. h is the full n x n matrix, row-major, of which the problem
 * fills the lower triangle (column <= row). */
typedef struct lw_normal {
    size_t n;
    double *h;   /* J' W J */
    double *g;   /* J' W r, r = data - model: the downhill direction */
    double chi2; /* r' W r */
    double rounding; /* how far rounding may put chi2 off; left at 0 where the problem does not know */
} lw_normal;

typedef struct lw_problem {
    size_t n;            /* parameters, > 0 */
    const double *lower; /* [n] or NULL; -INFINITY where free */
    const double *upper; /* [n] or NULL */
    const bool *fixed;   /* [n] or NULL: held at its start */
    size_t border;       /* the last ones of the n, which may go with all others; these go with near ones only, or 0 */
    /* chi2 at p, and with want_normal also h and g (both zeroed by the caller of evaluate). A point where
     * the model can't be evaluated sets chi2 = INFINITY and returns LW_OK: the step is then shortened. */
    lw_status (*evaluate)(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);
    void *user;
} lw_problem;

typedef struct lw_fit_control {
    size_t iterations_most; /* default 100 */
    double chi2_tolerance;  /* stop when the predicted and the actual relative fall are below this; 1e-10 */
    double step_tolerance;  /* and when each step is below this many parameter u (scaled by H); 1e-4 */
    lw_arena *scratch;      /* work arrays are taken from it and given back to it; NULL: from an arena of its own */
} lw_fit_control;
/* The last evaluation is saved where the fall still predicted is a hundredth, and each step a tenth, of
 * these. */
lw_fit_control lw_fit_control_defaults(void);

typedef struct lw_fit_outcome {
    size_t iterations, evaluations;
    double chi2;
    bool converged;
    bool at_last_evaluation; /* the answer is the point that was evaluated last */
    const char *reason;  /* static text, why it stopped */
    double largest_step; /* last step, in units of u of the parameter that moved most */
    size_t largest_at;   /* which parameter that was */
    size_t n_active;     /* parameters on a bound at the end */
} lw_fit_outcome;

/* Minimises chi2 from the start in p[n], which is replaced by the answer. at_bound[n] (or NULL) tells
 * which parameters end on a bound. Not to converge is an outcome, not an error. Parameters may differ in
 * scale by any factor: the matrix is scaled by its diagonal. */
lw_status lw_least_squares(lw_engine *engine, const lw_problem *problem, const lw_fit_control *control,
                           double *p, bool *at_bound, lw_fit_outcome *outcome, lw_error *err);

/* Inverse of a symmetric positive definite matrix h[n*n] (lower triangle read), full matrix to c[n*n];
 * rows and columns with skip[i] come out zero (skip may be NULL). Scaled by the diagonal first.
 * LW_NOT_SUPPORTED, naming no parameter but with *weakest set to the one that the data do not determine,
 * if it is singular to rounding. */
lw_status lw_invert_normal(lw_engine *engine, const double *h, size_t n, const bool *skip, double *c,
                           size_t *weakest, lw_error *err);

/* The same where the last `border` parameters go with all others and these with near ones only. */
lw_status lw_invert_bordered(lw_engine *engine, const double *h, size_t n, size_t border, const bool *skip, double *c,
                             size_t *weakest, lw_error *err);

#endif
