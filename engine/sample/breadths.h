/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Breadths against s: the two-parameter models that part a constant share (size) from a share that grows with
 * s (strain). Williamson-Hall and Halder-Wagner are these models with other rules of addition. */
#ifndef LW_SAMPLE_BREADTHS_H
#define LW_SAMPLE_BREADTHS_H

#include "profile/profiles.h"
#include "sample/generalised.h"

/* Integral breadths of the sample at the lines that can be used, with their full covariance. */
typedef struct lw_breadths {
    size_t n;
    const lw_profile **profile; /* [n] */
    double *s;                  /* [n] nm^-1 */
    double *beta;               /* [n] nm^-1, the best estimate also where the profile reports a limit */
    double *covariance;         /* [n*n] nm^-2 */
    const double *scale;        /* [n] factor on s in the share of strain, by direction; NULL = 1 */
    double *s_covariance;       /* [n*n] nm^-2, or NULL if positions have no uncertainty */
    size_t n_left_out;          /* profiles that carry a limit only */
    bool by_voigts;             /* the lines were fitted as Voigts, and these are the Voigts' breadths */
    double *background;         /* [n] under each line, intensity, or NULL if not known */
    bool values_only;           /* of the profiles */
    bool cubic;                 /* of the material: directions are told apart by |h|, |k|, |l| in any order */
} lw_breadths;

/* Gathers the breadths of all profiles. An unresolved line takes part with its estimate: leaving it out would
 * keep the broad lines only, and bias the answer. */
lw_status lw_breadths_gather(const lw_profiles *profiles, lw_arena *arena, lw_breadths *breadths,
                             lw_error *err);

/* FWHM of the pure profile of a line, nm^-1, and its derivatives to gauss_s and lorentz_s. */
double lw_breadths_fwhm(const lw_profile *profile, double slopes[2]);

/* How size and strain add up to the breadth beta at s, with D the column length and e the apparent strain: */
typedef enum lw_form {
    LW_FORM_LORENTZIAN, /* beta = 1/D + 2 e s                                  parameters 1/D, e */
    LW_FORM_GAUSSIAN,   /* beta^2 = 1/D^2 + 4 e^2 s^2                          parameters 1/D^2, e^2 */
    LW_FORM_MIXED,      /* Voigt of a Lorentzian 1/D and a Gaussian 2 e s      parameters 1/D, e^2 */
    LW_FORM_PARABOLIC,  /* (beta/s)^2 = (1/D) beta/s^2 + (2 e)^2               parameters 1/D, e^2 */
    LW_FORMS
} lw_form;
extern const char *const lw_form_name[LW_FORMS]; /* "lorentzian", "gaussian", "mixed", "parabolic" */

/* Breadth of a form at s and its derivatives to the parameters p[2] and to s. Negative parameters are allowed
 * as far as the form can be continued (a fit to noise may want them); beyond it is not finite. */
double lw_form_breadth(lw_form form, const double p[2], double s, double slopes[2], double *s_slope);

typedef struct lw_breadth_fit {
    lw_form form;
    double p[2];
    double covariance[2][2];     /* of p, enlarged by scatter^2 */
    double correlation;          /* of size and strain (of p[0] and p[1]) */
    lw_quantity size_volume;     /* nm; lower limit when p[0] is below 2 u */
    lw_quantity strain_apparent; /* upper limit when p[1] is below 2 u */
    lw_generalised_fit fit;
} lw_breadth_fit;

/* Fits one form, with breadths->scale.
 * Status: that of lw_generalised_solve(). */
lw_status lw_breadths_fit(const lw_breadths *breadths, lw_form form, lw_arena *arena, lw_breadth_fit *fit,
                          lw_error *err);

/* sqrt(2/pi): rms strain of a Gaussian distribution of strain over the apparent strain e = beta*(strain)/
 * (2 d*) (Stokes & Wilson 1944 Proc. Phys. Soc. 56, 174). */
#define LW_RMS_PER_APPARENT 0.79788456080286535588

/* Leaves in a result how size_volume and strain_rms of a fit move with the breadths (sample/shared.h). */
lw_status lw_breadths_share(const lw_profiles *profiles, const lw_breadths *breadths, const lw_breadth_fit *fit,
                            lw_arena *arena, lw_node *result, lw_error *err);

/* Adds size_volume, strain_apparent, strain_rms, their correlation and the statistics of the fit to a group.
 */
void lw_breadths_tell(const lw_breadth_fit *fit, lw_node *group, lw_error *err);
/* Adds the groups `points` (hkl, s, breadth, u, calculated, residual; scaled_s where a scale is set) and
 * `line` (s, or scaled s, breadth and u of the line) for a figure. */
void lw_breadths_draw(const lw_breadths *breadths, const lw_breadth_fit *fit, lw_node *group, lw_error *err);
/* Adds a list `remarks` of sentences about what the fit shows: limits, misfit, directions off the line, a
 * line that carries nearly all the weight, breadths that are not independent. */
void lw_breadths_remark(const lw_breadths *breadths, const lw_breadth_fit *fit, lw_node *remarks,
                        lw_error *err);

#endif
