/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A scan taken apart: the curve of every supported line, the rest and what no curve explains (private to
 * profile/). All methods that work on one line's data start here, so that they see the same input. */
#ifndef LW_PROFILE_SEPARATION_H
#define LW_PROFILE_SEPARATION_H

#include "profile/deconvolution.h"

#include "physics/size_distribution.h"
#include "physics/strain.h"

/* Fourier coefficients of a sample's profile in closed form. */
typedef struct lw__shape {
    const lw_strain_form *strain; /* NULL: a Voigt */
    double gauss_s, lorentz_s;    /* Voigt: integral breadths, nm^-1 */
    double size;                  /* physical: 1/(volume-weighted column length), nm^-1 */
    double sigma;                 /* of the logarithm of the diameters */
    double strain_parameter[LW_STRAIN_PARAMETERS_MOST];
    double s; /* of the line, nm^-1 */
    bool
        spread; /* mean square strain exponentially distributed over the crystals, about what the form says */
} lw__shape;

/* A(L); slopes[4] (or NULL; physical only): to size, strain_parameter[0], sigma, strain_parameter[1]. */
double lw__shape_coefficient(const lw__shape *shape, double length_nm, double *slopes);
/* Integral breadth 1/(2 integral A dL), nm^-1, with the same slopes. */
double lw__shape_breadth(const lw__shape *shape, double *slopes);
/* -A'(0), nm^-1: the tail falls as this over 2 pi^2 s^2. */
double lw__shape_kink(const lw__shape *shape);

typedef struct lw__separated {
    lw__shape shape;
    double area_s;         /* intensity x nm^-1 */
    double shift_s;        /* centre of the shape from the fitted position, nm^-1 */
    double *curve;         /* [points of the scan], intensity */
    double level_variance; /* of the background under the line */
    double *with_level; /* [points of the scan] covariance of that level with the counts, or NULL: by the line
                           fit */
} lw__separated;

typedef struct lw__separation {
    const char *how;     /* in words */
    lw__separated *line; /* [profiles] */
    double *background;  /* [points] */
    double *residual;    /* [points] */
} lw__separation;

/* By the Voigts of the fit. */
lw_status lw__separate_by_voigts(const lw_profiles *profiles, lw_arena *arena, lw__separation *out,
                                 lw_error *err);

#define LW__MEMBERS 5 /* strain forms that are fitted */

/* What the fit of physical shapes gives besides. */
typedef struct lw__physical_fit {
    size_t n_members;              /* strain forms that were fitted */
    const char *form[LW__MEMBERS]; /* their names */
    double weight[LW__MEMBERS], chi2[LW__MEMBERS];
    double reach[LW__MEMBERS]; /* shares of the members in the spread between them; 0: not taken along */
    size_t best;
    lw__separation apart[LW__MEMBERS]; /* by the members with a reach */
    double goodness;                   /* chi2 over degrees of freedom of the best */
    double *covariance; /* [profiles^2] of the breadths, nm^-2: counting, instrument, choice of form */
    double *breadth;    /* [profiles], weighted mean */
    lw__shape *shape[LW__MEMBERS];         /* [members][profiles] */
    double *shape_covariance[LW__MEMBERS]; /* [members][profiles][16]: of size, strain 0, sigma, strain 1 of a
                                              line */
} lw__physical_fit;

/* What the members say of one quantity, value[n_members] with variance[n_members]: returns their mean by
 * evidence; off[n_members] receives their deviations from it, so that the sum of products of two quantities'
 * is the covariance by the choice of form. */
double lw__mean_of_members(const lw__physical_fit *fit, const double *value, const double *variance,
                           double *off);

/* All lines at once, each with its own size and strain, as lognormal spheres x correlated strain. */
lw_status lw__separate_by_physics(lw_engine *engine, const lw_profiles *profiles, lw_arena *arena,
                                  lw__separation *out, lw__physical_fit *fit, lw_error *err);

/* Notes in the profiles that physical shapes were used, and the curve that they make. */
lw_status lw__keep_model(lw_profiles *profiles, const lw__separation *separation, lw_error *err);

#endif
