/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The straight line y = a + b x with errors in both coordinates, independent or correlated.
 * Minimises S(b) = r' C(b)^-1 r, r = y - a - b x, C(b) = Cy + b^2 Cx, over a (in closed form) and b (exactly,
 * with the change of C). Source: York, Evensen, Lopez Martinez & De Basabe Delgado (2004) Am. J. Phys. 72,
 * 367, for independent errors; the same with full matrices: generalised least squares in JCGM 102:2011 and
 * ISO/TS 28037:2010. */
#ifndef LW_NUMERIC_STRAIGHT_LINE_H
#define LW_NUMERIC_STRAIGHT_LINE_H

#include "base/engine.h"

#include <stdbool.h>
#include <stddef.h>

typedef struct lw_straight_line {
    double intercept, slope;
    double intercept_variance, slope_variance, covariance; /* from the given errors, at the adjusted points */
    double chi2;                                           /* S at its minimum */
    size_t n;                                              /* points; n - 2 degrees of freedom */
    bool dependent; /* the covariance of y was singular to rounding: rows repeat each other */
} lw_straight_line;

/* Independent errors.
 * Given:  x[n], y[n]
 *         ux[n], uy[n]  standard uncertainties, or NULL for exact values; at each point one of the two has
 *                       to be above 0
 * LW_NOT_SUPPORTED if there are fewer than two different x, LW_BAD_ARGUMENT for errors that can't be. */
lw_status lw_line_independent(lw_engine *engine, size_t n, const double *x, const double *y, const double *ux,
                              const double *uy, lw_straight_line *line, lw_error *err);

/* Correlated errors: covariance matrices cy[n*n] and cx[n*n] (cx NULL: exact x), row-major, symmetric; no
 * covariance between x and y. A matrix may hold terms common to all points (a calibration), however large. */
lw_status lw_line_correlated(lw_engine *engine, size_t n, const double *x, const double *y, const double *cx,
                             const double *cy, lw_straight_line *line, lw_error *err);

/* Every point alike, error from the scatter: ordinary least squares, with variances scaled by chi2/(n - 2)
 * (0 for two points); chi2 is then the sum of squared residuals. */
lw_status lw_line_plain(lw_engine *engine, size_t n, const double *x, const double *y, lw_straight_line *line,
                        lw_error *err);

/* Value and standard uncertainty of the line at x. */
double lw_line_at(const lw_straight_line *line, double x, double *u);

#endif
