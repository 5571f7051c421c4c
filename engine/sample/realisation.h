/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Realisations: the counts and the calibration as they might have been (private to sample/). */
#ifndef LW_SAMPLE_REALISATION_H
#define LW_SAMPLE_REALISATION_H

#include "numeric/random.h"
#include "profile/profiles.h"

enum { LW__UNDER_LINES, LW__BETWEEN_LINES, LW__PLACES };

/* What realisations of one scan share. */
typedef struct lw__draws {
    const lw_profiles *profiles;
    const double *model; /* [points] what is expected */
    bool by_physics;     /* it is made of physical shapes, else of the Voigts of the fit */
    bool counting, calibration, wavelength; /* what is drawn */
    uint64_t seed;
    /* bootstrap: residuals over their u, by where they belong */
    bool bootstrap;
    double *residual;               /* [points], mean 0, scaled for the parameters spent; NULL without bootstrap */
    unsigned char *place;           /* [points] */
    size_t block[LW__PLACES];       /* length of a block */
    double correlation[LW__PLACES]; /* of next residuals */
    size_t n_starts[LW__PLACES], *start[LW__PLACES]; /* where a whole block begins */
    /* calibration: parameters and a lower triangle whose product with its transpose is their covariance */
    size_t n_widths, width[LW_WIDTH_PARAMETERS], n_parameters;
    double factor[(LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST) * (LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST)];
} lw__draws;

/* One of them. It borrows from the draws and may be drawn again. */
typedef struct lw__realisation {
    lw_scan scan, background; /* copies whose intensities are own */
    double *intensity, *background_intensity;
    lw_width_function instrument;
    lw_calibration calibration;
    bool has_background, has_calibration;
} lw__realisation;

/* Errors: LW_NOT_SUPPORTED if the profiles do not come from a fit that can be repeated. */
lw_status lw__draws_begin(const lw_profiles *profiles, bool bootstrap, lw_arena *arena, lw__draws *draws,
                          lw_error *err);
/* Takes the curve of physical shapes (deconvolution "physical") for what is expected, if it describes the counts better
 * than the fit's Voigts do: methods that read the counts anew would else be shown a powder of Voigts. Leaves it as it is
 * for more than 30 lines, and where the shapes can't be fitted. */
lw_status lw__draws_choose_model(lw_engine *engine, lw__draws *draws, lw_arena *arena, lw_error *err);
lw_status lw__realisation_begin(const lw__draws *draws, lw_arena *arena, lw__realisation *one, lw_error *err);
/* The number-th realisation; counts and calibration have streams of their own. */
void lw__realisation_draw(const lw__draws *draws, uint64_t number, lw__realisation *one);

/* Lower triangle F with F F' = covariance[n*n], for a matrix that may be singular: directions without variance are
 * left out. */
void lw__square_root(const double *covariance, size_t n, double *factor);

#endif
