/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a method of deconvolution is, and what the methods share (private to profile/). To add one: a file
 * that ends in one such constant, and a line in the list. */
#ifndef LW_PROFILE_DECONVOLUTION_H
#define LW_PROFILE_DECONVOLUTION_H

#include "profile/profiles.h"

typedef struct lw_deconvolution {
    const char *name;
    const char *source; /* published source */
    bool by_lines;      /* works on one line's data at a time, so that a standard's lines can stand for the
                           instrument */
    /* Fills coefficients, breadth and refold of every profile in `profiles`; the Voigt parts are there
     * already. */
    lw_status (*run)(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err);
} lw_deconvolution;

extern const lw_deconvolution lw_deconvolution_convolution, lw_deconvolution_physical,
    lw_deconvolution_stokes, lw_deconvolution_tikhonov, lw_deconvolution_richardson_lucy,
    lw_deconvolution_maximum_entropy;

/* Degrees of the line's own axis to nm^-1: ds = factor x dx. */
double lw__s_per_degree(const lw_profiles *profiles, const lw_profile *profile);

/* Fourier coefficient of a Voigt with integral breadths gauss_s, lorentz_s (nm^-1) at a length (nm):
 * exp(-2 lorentz L - pi gauss^2 L^2). */
double lw__voigt_coefficient(double gauss_s, double lorentz_s, double length_nm);

/* Lengths 0, step, 2 step ... for a profile: n and step by the options, else so that the last Voigt
 * coefficient is 0.002. Takes the arrays of the profile. */
lw_status lw__take_lengths(lw_profiles *profiles, lw_profile *profile, const lw_deconvolve_options *options,
                           lw_error *err);

/* Breadth as a quantity, or an upper limit (95 %) when it is below twice its u. */
void lw__set_breadth(const lw_profiles *profiles, lw_profile *profile, double value, double u);

/* Refold: chi2 with its degrees of freedom; lost = sum of r^2 - variance, net = sum of (line)^2. It fails
 * when the misfit is beyond chance (1e-6) and more than a tenth of the line (in amplitude, noise taken off)
 * is not given back: a matter of shape alone never reaches that. */
void lw__set_refold(lw_profile *profile, double chi2, double freedom, size_t points, double lost, double net);

/* Takes the points of a refold: n of the scan from `first` on; their angles are set. */
lw_status lw__take_refold(lw_profiles *profiles, lw_profile *profile, size_t first, size_t n, lw_error *err);
/* Sets one of them. */
void lw__set_refold_point(lw_profile *profile, size_t i, double seen, double variance, double curve);

/* Refold where the method is itself a fit of the whole scan: the points within 2 FWHM of the line against the
 * fit's model and background, [points of the scan], intensity. Beyond, a line's own misfit drowns in its
 * neighbours' and the background's. LW_OUT_OF_MEMORY. */
lw_status lw__refold_of_fit(lw_profiles *profiles, lw_profile *profile, const double *model,
                            const double *background, lw_error *err);

/* The pure profile for figures, from the coefficients up to truncated_at, over +-4 breadths. */
lw_status lw__curve_of_coefficients(lw_profiles *profiles, lw_profile *profile, double breadth_s,
                                    lw_error *err);

#endif
