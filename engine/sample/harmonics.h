/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Orders of one direction and their Fourier coefficients on common lengths: separation of size and strain at every
 * column length (Warren & Averbach). */
#ifndef LW_SAMPLE_HARMONICS_H
#define LW_SAMPLE_HARMONICS_H

#include "profile/profiles.h"

#define LW_ORDERS_MOST 24

typedef struct lw_orders {
    char direction[24]; /* "111", or "all" for lines taken as isotropic */
    size_t n;
    const lw_profile *profile[LW_ORDERS_MOST]; /* ascending in s */
} lw_orders;

/* Directions with at least two orders among profiles that are resolved and have coefficients; families that coincide
 * (333 and 511) belong to no direction. Returns their number; out[most]. */
size_t lw_orders_find(const lw_profiles *profiles, lw_orders *out, size_t most);

/* The named lines ("111", "200" ...; one name "all" = every line) as one set. Status: LW_BAD_ARGUMENT names a line that
 * is not there, or says that two are needed. */
lw_status lw_orders_named(const lw_profiles *profiles, const lw_option_list *names, lw_orders *out, lw_error *err);

typedef enum lw_harmonic_form {
    LW_HARMONIC_LOG,   /* ln A = ln A_size - 2 pi^2 L^2 s^2 <eps^2> */
    LW_HARMONIC_LINEAR /* A = A_size (1 - 2 pi^2 L^2 s^2 <eps^2>) */
} lw_harmonic_form;

typedef struct lw_harmonics {
    const lw_orders *orders;
    size_t n;                        /* lengths 0, step, 2 step ... */
    double step_nm;
    double *coefficient, *u;         /* [orders->n][n] of the lines, and their uncertainty */
    double *size, *size_covariance;  /* [n], [n*n] size coefficients A_size */
    double *square, *square_covariance; /* [n], [n*n] mean square strain; the entry at L = 0 is not used */
    double *contrast;                /* [n] difference of ln A between the lowest and the highest order */
    double *chi2;                    /* [n] of the straight lines; n_orders - 2 degrees of freedom */
} lw_harmonics;

/* Separates. Lengths: the coarsest step among the orders, as far as every order has coefficients above the noise and
 * positive (form log), at most length_most_nm (0 = no limit); coefficients of other steps are interpolated by cubics.
 * Each length is a straight line in s^2 weighted by the coefficients' uncertainties. Coefficients of one line at
 * different lengths are correlated: through the two widths where they are a fitted Voigt's, else as far as the
 * window of eight breadths each side joins them.
 * Source: Warren & Averbach (1950) J. Appl. Phys. 21, 595; (1952) J. Appl. Phys. 23, 497.
 * Status: LW_NOT_SUPPORTED when fewer than 8 lengths remain. */
lw_status lw_harmonics_separate(const lw_profiles *profiles, const lw_orders *orders, lw_harmonic_form form,
                                double length_most_nm, lw_arena *arena, lw_harmonics *out, lw_error *err);

#endif
