/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The data of one line, ready for deconvolution, and the instrument in front of it (private to profile/). */
#ifndef LW_PROFILE_WINDOW_H
#define LW_PROFILE_WINDOW_H

#include "line/nodes.h"
#include "profile/separation.h"

/* The instrument's profile at a line: copies (emission x axial) of one Voigt, on its own axis in degrees. */
struct lw__measured;
typedef struct lw__instrument {
    size_t n;
    const lw_voigt_node *node;
    double variance, lorentz;            /* squared Gaussian FWHM (deg^2), Lorentzian FWHM (deg) */
    double per_degree;                   /* to nm^-1 */
    double fwhm_deg;                     /* of the one Voigt */
    const struct lw__measured *measured; /* by what a standard's lines differ from it; NULL = as calibrated */
} lw__instrument;

lw_status lw__take_instrument(const lw_profiles *profiles, const lw_profile *profile, lw_arena *arena,
                              lw__instrument *out, lw_error *err);

/* G(L) at L = 0, step, ... (n lengths): integral of the profile times exp(+2 pi i L s); as calibrated. */
void lw__instrument_transform(const lw__instrument *instrument, double step, size_t n, double *re,
                              double *im);

/* Points of one line's window. Intensities have the factor that runs across the line divided out. */
typedef struct lw__window {
    size_t n, first;            /* first: of the scan's points */
    double *s;                  /* nm^-1 from the centre of the line's shape */
    double *step;               /* trapezoid weight, nm^-1 */
    double *curve;              /* the line alone, of the separation */
    double *residual;           /* its share of what no curve explains: line's curve over all curves there */
    double *variance;           /* of a point, whole */
    double *own_variance;       /* of `residual` by counting: share^2 x variance */
    double background_variance; /* of the level under the line, the same error at every point */
    double *with_level;         /* covariance of that level with a point's counts, which helped to fix it */
} lw__window;

/* Variance of sum slope_i x (counts_i - level) by counting, the level being fitted to the same counts.
 * variance: of the points. */
double lw__window_variance(const lw__window *window, const double *slope, const double *variance);

/* breadths: half-width in observed breadths, 0 = 8; neighbours end it half-way. */
lw_status lw__take_window(const lw_profiles *profiles, size_t which, const lw__separation *separation,
                          double breadths, lw_arena *arena, lw__window *out, lw_error *err);

/* How a result leans on the instrument's widths: its slopes to the two (Gaussian variance, Lorentzian) at n
 * angles. */
typedef struct lw__leaning {
    size_t n;
    const double *angle_deg; /* [n] */
    double (*by)[2];         /* [n] */
} lw__leaning;

/* Covariance of two results through the covariance of the instrument's width function. */
double lw__from_instrument(const lw_profiles *profiles, const lw__leaning *a, const lw__leaning *b);

#endif
