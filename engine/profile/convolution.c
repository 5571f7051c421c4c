/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Deconvolution by convolution: the sample's Gaussian and Lorentzian parts were fitted with the instrument
 * folded into every line, so nothing is divided or subtracted here. */
#include "profile/deconvolution.h"

#include "numeric/voigt.h"

#include <math.h>

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err)
{
    size_t stride = profiles->n_covariance;
    for (size_t k = 0; k < profiles->n; k++) {
        lw_profile *profile = &profiles->profile[k];
        lw_status status = lw__take_lengths(profiles, profile, options, err);
        if (status == LW_OK)
            status = lw_engine_poll(engine, err);
        if (status != LW_OK)
            return status;
        double gauss = profile->gauss_s.value, lorentz = profile->lorentz_s.value;
        const double *c = profiles->covariance;
        size_t g = profile->at_gauss, l = profile->at_lorentz;
        for (size_t i = 0; i < profile->n_coefficients; i++) {
            double length = profile->length_nm[i], a = lw__voigt_coefficient(gauss, lorentz, length);
            double by_gauss = -2 * M_PI * gauss * length * length * a, by_lorentz = -2 * length * a;
            double variance = by_gauss * by_gauss * c[g * stride + g] +
                              by_lorentz * by_lorentz * c[l * stride + l] +
                              2 * by_gauss * by_lorentz * c[g * stride + l];
            profile->cosine[i] = a;
            profile->u_cosine[i] = sqrt(fmax(variance, 0));
        }
        profile->truncation = "none: a Voigt has coefficients at every length";
        status = lw__refold_of_fit(profiles, profile, profiles->lines->fitted, profiles->lines->background, err);
        if (status != LW_OK)
            return status;
        profile->assumed = "the sample's profile is a Voigt";
        size_t n = 161;
        double *curve[3];
        for (int i = 0; i < 3; i++)
            if ((curve[i] = lw_arena_take(&profiles->arena, n, sizeof(double), err)) == NULL)
                return LW_OUT_OF_MEMORY;
        double breadth = lw_voigt_breadth(2 * gauss * sqrt(M_LN2 / M_PI), 2 * lorentz / M_PI);
        for (size_t i = 0; i < n && breadth > 0; i++) {
            curve[0][i] = breadth * 0.05 * ((double)i - 80);
            curve[1][i] = lw_voigt(curve[0][i], 2 * gauss * sqrt(M_LN2 / M_PI), 2 * lorentz / M_PI);
        }
        profile->n_curve = breadth > 0 ? n : 0;
        profile->curve_s = curve[0];
        profile->curve_intensity = curve[1];
        profile->curve_u = curve[2];
    }
    return LW_OK;
}

const lw_deconvolution lw_deconvolution_convolution = {
    .name = "convolution",
    .source = "Voigt in the fit: Langford (1978) J. Appl. Cryst. 11, 10; the instrument inside the model: "
              "Klug & Alexander "
              "(1974) X-ray Diffraction Procedures, ch. 9",
    .run = run};
