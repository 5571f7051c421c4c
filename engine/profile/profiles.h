/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Pure profiles: what the sample alone does to each line, on the reciprocal axis
 * s = 2 sin(theta)/lambda (nm^-1) for breadths and on the length axis L (nm) for coefficients. */
#ifndef LW_PROFILE_PROFILES_H
#define LW_PROFILE_PROFILES_H

#include "instrument/calibration.h"

typedef struct lw_profile {
    const lw_line *line;
    double s_per_nm;                /* of the line: 2 sin(theta)/lambda, aberrations taken off */
    double theta_deg;               /* half of the corrected 2theta */
    bool resolved;                  /* breadth above twice its u */
    lw_quantity breadth_s;          /* integral breadth, nm^-1; upper limit when not resolved */
    lw_quantity breadth_deg;        /* the same in degrees 2theta */
    lw_quantity gauss_s, lorentz_s; /* integral breadths of the Gaussian and Lorentzian parts, nm^-1 */
    size_t at_gauss, at_lorentz, at_breadth; /* rows in lw_profiles.covariance */
    /* Fourier coefficients, normalised to A(0) = 1 */
    size_t n_coefficients;
    double *length_nm;                         /* [n] column length L = harmonic number x step, first 0 */
    double *cosine, *u_cosine, *sine, *u_sine; /* [n] */
    size_t truncated_at;                       /* coefficients from here on are below the noise */
    const char *truncation;                    /* the rule that chose it, in words */
    const char *assumed; /* what the method took for granted: separation, prior, regularisation */
    /* refold: instrument x pure profile against the data */
    double refold_chi2;    /* per degree of freedom */
    double refold_freedom; /* points less what the method fitted to them */
    size_t refold_points;
    double refold_p; /* probability of a chi2 this large by chance */
    bool refold_failed;
    /* its points: what stands over background and neighbours, with its u, and instrument x pure profile */
    size_t n_refold;
    double *refold_deg, *refold_seen, *refold_u, *refold_curve;
    /* pure profile for figures */
    size_t n_curve;
    double *curve_s, *curve_intensity, *curve_u; /* s - s_line in nm^-1, unit area */
} lw_profile;

typedef struct lw_profiles {
    lw_arena arena;
    const lw_lines *lines;             /* borrowed */
    const lw_calibration *calibration; /* borrowed, NULL if none */
    const char *method;                /* "convolution", "stokes" ... */
    const char *source;                /* published source of the method */
    size_t n;
    lw_profile *profile; /* supported lines only, ascending */
    size_t n_covariance;
    double *covariance; /* of gauss_s, lorentz_s, breadth_s of all profiles (rows by at_...), nm^-2,
                           calibration's part included: shared, so lines are correlated */
    const struct lw_deconvolve_options *options; /* as they were given */
    bool by_physics; /* lines were separated and completed by physical shapes, not by Voigts */
    bool values_only; /* set by whoever runs methods again for their values: what is there for u alone, and takes long,
                         may be left out */
    double *model;   /* then: the sum of these shapes and the background at the scan's points, else NULL */
} lw_profiles;

typedef struct lw_deconvolve_options {
    int method;            /* of lw_deconvolve_option_table: "convolution", "stokes", "physical" ... */
    double length_step_nm; /* step of L; 0 = from the window */
    double length_most_nm; /* largest L; 0 = where the noise begins */
    double window;         /* half-width used for the Fourier sums in units of the breadth; 0 = as far as the
                              neighbours allow */
    int completion;  /* by which shape lines are separated and tails completed: "auto", "voigt", "physical" */
    int apodise;     /* stokes: "none", "hann" */
    int order;       /* tikhonov: of the derivative whose square is kept small: 0, 1, 2 */
    int parameter;   /* tikhonov: rule, "discrepancy", "gcv" */
    double strength; /* tikhonov: the parameter itself; 0 = by the rule */
    bool non_negative; /* tikhonov: no negative intensity (uncertainties stay those of the free solution) */
    long iterations_most; /* richardson_lucy */
    long realisations;    /* richardson_lucy: of the Monte Carlo uncertainty */
    long seed;
    const lw_lines *standard; /* fitted lines of the standard; NULL = the instrument by the calibration */
    double standard_reach;    /* deg, how far a line of the standard may be */
    bool accept_refold; /* go on although instrument x result does not give the data back */
} lw_deconvolve_options;
extern const lw_option lw_deconvolve_option_table[];
lw_deconvolve_options lw_deconvolve_defaults(void);

/* Takes the instrument out of the fitted lines. lines must have been fitted with an instrument.
 * Errors: LW_NOT_SUPPORTED (no instrument, no supported line), LW_REFOLD_FAILED (names the lines). */
lw_status lw_deconvolve(lw_engine *engine, const lw_lines *lines, const lw_calibration *calibration,
                        const lw_deconvolve_options *options, lw_profiles **profiles, lw_error *err);
void lw_profiles_free(lw_profiles *profiles);
lw_node *lw_profiles_tree(const lw_profiles *profiles, lw_arena *arena, lw_error *err);

#endif
