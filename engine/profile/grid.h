/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The sample's profile as values on a grid, for methods that solve for it there (private to profile/).
 * Between the grid's values the profile is linear; it is told as a departure from the completing shape, which
 * stands alone outside the window. */
#ifndef LW_PROFILE_GRID_H
#define LW_PROFILE_GRID_H

#include "profile/line_by_line.h"

typedef struct lw__grid {
    size_t n, m, middle;  /* points, values, the value at the line's centre */
    double spacing;       /* nm^-1 */
    double *place;        /* [m] nm^-1 */
    double *shape;        /* [m] completing shape there, intensity */
    double *response;     /* [n][m]: what a value adds at a point, instrument folded in */
    double *target;       /* [n] observed less instrument x shape */
    double *weight;       /* [n] 1/variance */
    double *normal;       /* [m][m] response' weight response */
    double *own_normal;   /* [m][m] the same with the noise that the shared-out target has */
    double *pull;         /* [m] response' weight target */
    double expected_chi2; /* of noise alone (a point that is shared with neighbours counts by its share) */
} lw__grid;

/* steps: grid values in the shape's breadth (fewer where that makes more than 240). */
lw_status lw__take_grid(const lw__job *job, const lw__instrument *instrument, double steps, lw_arena *scratch,
                        lw__grid *out, lw_error *err);

/* chi2 of a departure x[m] from the shape. */
double lw__grid_chi2(const lw__grid *grid, const double *x);

/* Breadth of shape + x; slopes[m] (or NULL) to x. */
double lw__grid_breadth(const lw__job *job, const lw__grid *grid, const double *x, double *slopes);

/* Fills coefficients and curve of the profile from shape + x with the covariance c[m][m] of x, and truncates.
 * plainly: what a standard's noise makes of a plain quotient of transforms is added, because c lacks it. */
lw_status lw__grid_coefficients(const lw__job *job, const lw__grid *grid, const double *x, const double *c,
                                bool plainly, lw_error *err);
/* Coefficients alone: out[2 n_coefficients], cosines then sines. */
void lw__grid_transform(const lw__job *job, const lw__grid *grid, const double *x, double *out);

/* Inverse of a positive definite matrix a[m][m] (upper triangle read, destroyed) to z[m][m]. False if
 * singular. */
bool lw__invert(double *a, size_t m, double *z);

/* Adds to c[m][m], the covariance of x = Z response' weight target, what an error of the background's level
 * makes. */
lw_status lw__add_background(const lw__job *job, const lw__grid *grid, const double *z, double *c,
                             lw_arena *scratch, lw_error *err);

/* Adds to c[m][m], the covariance of x = Z response' weight target, what the noise of the standard's counts
 * makes, and leaves in the answer how the breadth goes with each of them. Nothing without a standard. */
lw_status lw__add_standard(const lw__job *job, const lw__grid *grid, const double *x, const double *z,
                           double *c, lw__answer *answer, lw_arena *scratch, lw_error *err);

/* Degrees of freedom that an estimate x = Z response' weight target takes from chi2; zn[m][m] = Z normal. */
double lw__grid_followed(const lw__grid *grid, const double *z, const double *zn);

/* Refold of x: `followed` is the number of degrees of freedom that x took up. */
lw_status lw__grid_refold(const lw__job *job, const lw__grid *grid, const double *x, double followed, lw_error *err);

/* For an estimate x = Z response' weight target, Z = (normal + R)^-1: *variance of the breadth, nm^-2, from c[m][m]
 * (covariance of x by counting and background, or posterior), from tails beyond the window, and from what
 * remains the shape's: shape_share of a change of the shape's breadth survives in the result. bias: by what R
 * keeps x back, estimated by what it would keep back of x itself; it enters as if it were a standard
 * uncertainty. LW_OUT_OF_MEMORY. */
lw_status lw__grid_variance(const lw__job *job, const lw__grid *grid, const double *x, const double *z,
                            const double *c, double *variance, double *shape_share, double *bias,
                            lw_arena *scratch, lw_error *err);

#endif
