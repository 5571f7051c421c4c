/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model of a scan of physical shapes, and its normal equations (private to profile/; see physical_fit.c).
 */
#ifndef LW_PROFILE_PHYSICAL_MODEL_H
#define LW_PROFILE_PHYSICAL_MODEL_H

#include "numeric/fft.h"
#include "numeric/least_squares.h"
#include "profile/window.h"

#define LW__PHYSICAL_COLUMNS 6 /* value, place, size, strain, sigma, correlation length */
#define LW__PHYSICAL_STEPS 20  /* of the grid in the FWHM of a line */

typedef struct lw__physical_line {
    const lw_profile *profile;
    lw__instrument instrument;
    size_t n_fft, n_lengths; /* lengths: up to where the instrument's coefficient has died */
    double grid, period;     /* nm^-1 */
    double *g;               /* [2 n_lengths], conjugate of the instrument's transform */
    lw_fft *plan;
    double *place, *factor; /* [n]: s in grid steps; counts per unit of area (intensity x deg) */
    double *tail;      /* [n]: what a tail of unit kink adds: beyond the grid all, within it less its periodic
                          images */
    size_t first, end; /* points within the grid */
    size_t near_first, near_end; /* points that matter for the curvature */
    double kink;                 /* of the instrument */
    size_t at_size, at_strain;
    double area_prior, area_u; /* of a line beyond the scan; area_u = 0: free */
} lw__physical_line;

typedef struct lw__physical {
    lw_engine *engine;
    const lw_profiles *profiles;
    size_t n, n_lines, n_all, n_terms, /* n_all: with lines that stand beyond the scan */
        n_parameters, at_terms, at_sigma, at_length;
    lw__physical_line *line;
    const lw_strain_form *form;
    bool spread;                   /* see lw__shape */
    double *fixed, *weight, *term; /* [n], [n], [n_terms][n] */
    double *model, *jacobian;      /* [n], [n_parameters][n] */
    size_t *row_first, *row_end;   /* [n_parameters] points at which a parameter matters while iterating */
    bool whole;                    /* for the covariance: everywhere */
    size_t n_used;                 /* lengths of the line in hand: up to where its coefficient has died */
    double *spectrum, *column[LW__PHYSICAL_COLUMNS], *scratch;
    double **curve;                                                  /* [n_all][n] */
    double sigma_prior, sigma_u, size_prior, length_prior, length_u; /* size: logarithm of a crystal's */
    /* sizes and strains of the lines are expected to scatter about a common one, fitted too (after a first
     * round) */
    size_t at_common; /* size, then strain */
    bool tied;
    double tie_u[2], member_tie[LW__MEMBERS][2];
} lw__physical;

/* Lays out lines (with those that stand beyond the scan), grids, parameters and what is expected of them. */
lw_status lw__physical_prepare(lw__physical *model, lw_engine *engine, const lw_profiles *profiles,
                               lw_arena *arena, lw_error *err);

/* The callback of lw_problem: user is the lw__physical. Leaves the residual in `model` and the curves in
 * `curve`. */
lw_status lw__physical_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal,
                                lw_error *err);

/* Shape of a line at the parameters p. */
lw__shape lw__physical_shape(const lw__physical *model, size_t line, const double *p);

/* Integral breadth of the sample's own line by the fitted Voigt, nm^-1. */
double lw__physical_voigt_breadth(const lw__physical_line *line);

/* Slope of a line's curve to the instrument's squared Gaussian FWHM (which = 0) or Lorentzian FWHM (1):
 * out[n]. */
void lw__physical_widened(lw__physical *model, size_t line, const double *p, int which, double *out);

#endif
