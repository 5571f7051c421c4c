/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the size coefficients A(L) of a line say about the columns of a crystal, whatever method gave them. */
#ifndef LW_SAMPLE_COLUMN_LENGTHS_H
#define LW_SAMPLE_COLUMN_LENGTHS_H

#include "base/arena.h"

#include <stdbool.h>
#include <stddef.h>

/* A(L) at L = 0, step, 2 step ...; A(0) is 1 by definition and takes no part. */
typedef struct lw_size_coefficients {
    size_t n;
    double step_nm;
    const double *value;      /* [n] */
    const double *covariance; /* [n*n] */
} lw_size_coefficients;

typedef struct lw_initial_slope {
    double size_area, u;        /* nm: start over slope of the fit below */
    double hook, u_hook;        /* start of the fit minus 1: what a lost tail or a wrong background did to A(0) */
    double start, slope, cubic; /* A(L) = start - slope L + cubic L^3 */
    double low_nm, high_nm;     /* over this range */
    size_t points;
} lw_initial_slope;

/* Area-weighted size from the initial slope: A(L) = a - b L + c L^3 is fitted over range[0] to range[1] times the
 * size itself, and size_area = a/b. There is no square because no crystal ends in columns of no length:
 * p(0) = A''(0) = 0, and the cube is the first term that spheres have. u holds the coefficients' covariance and, as a
 * rectangular distribution, what leaving out the upper third of the range changes; so does u_hook.
 * Status: LW_NOT_SUPPORTED with the reason if the coefficients don't reach or don't fall. */
lw_status lw_columns_slope(const lw_size_coefficients *a, const double range[2], lw_arena *arena, lw_initial_slope *slope,
                           lw_error *err);

/* Volume-weighted size 2 int A dL (start from the slope's fit). False, with the reason, where the coefficients end
 * before they have died: what would be added beyond is then no measurement. */
bool lw_columns_integral(const lw_size_coefficients *a, const lw_initial_slope *slope, double *size_volume, double *u,
                         const char **why, lw_arena *arena, lw_error *err);

typedef struct lw_column_density {
    size_t n;
    double *length_nm, *density, *u; /* [n] p(L), number of columns, nm^-1, integral 1 */
    double chi2, smoothing;          /* of the fit to A(L), and the weight of the second difference */
    double beyond;                   /* share of the columns that are as long as the last coefficient or longer */
} lw_column_density;

/* Distribution of column lengths, p = size_area A''(L), as the smoothest density >= 0 whose coefficients agree with A(L)
 * within its uncertainties: Tikhonov's second-order regularisation with the discrepancy principle (Morozov 1966; for
 * columns: Pausescu et al. 1974 J. Appl. Cryst. 7, 281). Columns longer than the last coefficient are not told.
 * u: from the coefficients, and from what a hundredth of the smoothing would change. */
lw_status lw_columns_density(const lw_size_coefficients *a, const lw_initial_slope *slope, lw_arena *arena,
                             lw_column_density *density, lw_error *err);

#endif
