/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fits the whole pattern with one or several forms of strain and joins what they say. */
#ifndef LW_SAMPLE_PATTERN_FIT_H
#define LW_SAMPLE_PATTERN_FIT_H

#include "sample/pattern.h"

/* Which forms: an index of lw_strain_form_list, or: */
typedef int lw_pattern_choice;
#define LW_PATTERN_AUTO (-1)
#define LW_PATTERN_NO_STRAIN (-2)
#define LW_PATTERN_KNOTS (-3)

typedef struct lw_pattern_request {
    lw_pattern_choice strain;
    int anisotropy; /* 0 = if the data say so, 1 = no, 2 = yes */
    int fall;       /* of the scattering power: 0 = from the lines' areas, 1 = fitted, 2 = none */
    bool histogram; /* of the diameters, in place of a lognormal distribution */
} lw_pattern_request;

#define LW_PATTERN_FORMS_MOST 10
#define LW_ANSWER_LENGTHS 24
enum {
    LW_ANSWER_SIZE_VOLUME,
    LW_ANSWER_SIZE_AREA,
    LW_ANSWER_DIAMETER,
    LW_ANSWER_DISPERSION,
    LW_ANSWER_STRAIN,    /* rms over half the volume-weighted size */
    LW_ANSWER_STRAIN_AT, /* first of the lengths */
    LW_ANSWER_SHARE =
        LW_ANSWER_STRAIN_AT + LW_ANSWER_LENGTHS, /* first of the histogram's nodes: volume a unit of ln D */
    LW_ANSWER_MOST = LW_ANSWER_SHARE + LW_PATTERN_SIZE_MOST
};

typedef struct lw_pattern_form {
    const char *name, *title, *source;
    const lw_strain_form *strain; /* NULL: free at knots */
    bool none;                    /* strain held at 0 */
    bool varying;                 /* from crystal to crystal */
    bool fitted;                  /* else `why` says why not */
    const char *why;
    double chi2, weight; /* weight: its share of the answer */
    double correlation;  /* of neighbouring points' residuals over their u */
    double parameters;   /* that the data determine: of smoothed curves fewer than there are */
    double strength[2];  /* of the smoothing of sizes and of strains, 0 = none */
    size_t iterations;
    double shape[LW_PATTERN_SHARED_MOST];
    double value[LW_ANSWER_MOST];
    double covariance[LW_ANSWER_MOST][LW_ANSWER_MOST];
} lw_pattern_form;

typedef struct lw_pattern_answer {
    size_t n_forms, best, n_points, n_lengths;
    lw_pattern_form form[LW_PATTERN_FORMS_MOST];
    double length[LW_ANSWER_LENGTHS];                  /* nm */
    double value[LW_ANSWER_MOST];                      /* weighted mean over the forms */
    double covariance[LW_ANSWER_MOST][LW_ANSWER_MOST]; /* counting, misfit, calibration, choice of the form */
    double goodness, misfit; /* misfit: factor on u, 1 where chi-square is as it should be */
    double disagreement; /* of lines under the forms: the largest factor that it puts on a parameter's u */
    double strain_limit; /* 95 % upper limit of the rms strain where none stands out, else 0 */
    double size_volume_limit, size_area_limit; /* nm, 95 % lower limits where no size stands out */
    bool size_unresolved, sigma_at_bound;
    bool anisotropic, anisotropy_at_bound;
    double anisotropy, u_anisotropy, anisotropy_limit; /* limit: of q at its bound, 95 % */
    double u_variation;                                /* of kappa of the best form */
    lw_size_histogram histogram;                       /* n = 0: lognormal spheres */
    lw_strain_knots knots;                             /* n = 0: not tried */
} lw_pattern_answer;

/* Status: those of the fit; LW_NO_CONVERGENCE if no form could be fitted. */
lw_status lw_pattern_fit(lw_engine *engine, const lw_profiles *profiles, const lw_pattern_request *request,
                         lw_arena *arena, lw_pattern_answer *answer, lw_error *err);

#endif
