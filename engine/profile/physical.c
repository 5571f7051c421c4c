/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Deconvolution by convolution with a physical shape: see physical_fit.c. */
#include "profile/separation.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>

/* Coefficients and pure profile of a line: means over the forms of strain, their scatter in the uncertainty.
 */
static lw_status fill(lw_profiles *profiles, size_t k, const lw__physical_fit *fit, double breadth,
                      lw_error *err)
{
    lw_profile *profile = &profiles->profile[k];
    for (size_t i = 0; i < profile->n_coefficients; i++) {
        double value[LW__MEMBERS] = {0}, own[LW__MEMBERS] = {0}, off[LW__MEMBERS], variance = 0;
        for (size_t m = 0; m < fit->n_members; m++) {
            if (!(fit->reach[m] > 0))
                continue;
            double slope[4];
            value[m] = lw__shape_coefficient(&fit->shape[m][k], profile->length_nm[i], slope);
            for (int p = 0; p < 4; p++)
                for (int q = 0; q < 4; q++)
                    own[m] += slope[p] * slope[q] * fit->shape_covariance[m][16 * k + (size_t)(4 * p + q)];
            own[m] = fmax(own[m], 0);
        }
        profile->cosine[i] = lw__mean_of_members(fit, value, own, off);
        for (size_t m = 0; m < fit->n_members; m++)
            variance += fit->weight[m] * own[m] + off[m] * off[m];
        profile->u_cosine[i] = sqrt(variance);
    }
    return lw__curve_of_coefficients(profiles, profile, breadth, err);
}

/* "correlated 0.62, dislocations 0.38": what has a weight. */
static const char *forms_of(const lw__physical_fit *fit, char *text, size_t size)
{
    size_t used = 0;
    text[0] = '\0';
    for (size_t m = 0; m < fit->n_members && used < size; m++)
        if (fit->weight[m] >= 0.005)
            used += (size_t)snprintf(text + used, size - used, "%s%s %.2f", used > 0 ? ", " : "",
                                     fit->form[m], fit->weight[m]);
    return text;
}

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err)
{
    lw_arena scratch;
    lw__separation separation;
    lw__physical_fit fit;
    char forms[200];
    lw_arena_begin(&scratch, engine);
    lw_status status = lw__separate_by_physics(engine, profiles, &scratch, &separation, &fit, err);
    if (status == LW_OK)
        status = lw__keep_model(profiles, &separation, err);
    size_t n = profiles->n, stride = profiles->n_covariance;
    for (size_t k = 0; k < n && status == LW_OK; k++) {
        lw_profile *profile = &profiles->profile[k];
        for (size_t l = 0; l < n; l++)
            profiles->covariance[profile->at_breadth * stride + profiles->profile[l].at_breadth] =
                fit.covariance[k * n + l];
        for (size_t l = 0; l < n; l++) { /* the Voigt's parts belong to another description of the line */
            size_t at[2] = {profiles->profile[l].at_gauss, profiles->profile[l].at_lorentz};
            for (int i = 0; i < 2; i++)
                profiles->covariance[profile->at_breadth * stride + at[i]] =
                    profiles->covariance[at[i] * stride + profile->at_breadth] = 0;
        }
        lw__set_breadth(profiles, profile, fit.breadth[k], sqrt(fit.covariance[k * n + k]));
        if ((status = lw__take_lengths(profiles, profile, options, err)) != LW_OK ||
            (status = fill(profiles, k, &fit, fit.breadth[k], err)) != LW_OK)
            break;
        status = lw__refold_of_fit(profiles, profile, profiles->model, separation.background, err);
        if (status != LW_OK)
            break;
        profile->truncation = "none: the shape has coefficients at every length";
        profile->assumed = lw_arena_print(
            &profiles->arena, err,
            "lognormal spheres x strain (%s by weight); reduced chi-square %.3f; sigma and the "
            "correlation length or cut-off radius shared by all lines",
            forms_of(&fit, forms, sizeof forms), fit.goodness);
        if (profile->assumed == NULL)
            status = LW_OUT_OF_MEMORY;
    }
    lw_arena_end(&scratch);
    return status;
}

const lw_deconvolution lw_deconvolution_physical = {
    .name = "physical",
    .source = "lognormal spheres: Langford, Louer & Scardi (2000) J. Appl. Cryst. 33, 964; Gaussian strain: "
              "Warren & Averbach "
              "(1950) J. Appl. Phys. 21, 595; dislocations: Wilkens (1970) Phys. Status Solidi A 2, 359; the "
              "instrument inside the "
              "model",
    .run = run};
