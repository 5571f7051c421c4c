/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Single-line Voigt: the Lorentzian part of one line is size, the Gaussian part strain. */
#include "sample/breadths.h"
#include "sample/generalised.h"
#include "sample/method.h"
#include "sample/reading.h"
#include "sample/shared.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>

#define CHANCE_OF_3U 0.0026997960632601866 /* of a normal deviate beyond 3 u */

static const lw_option options[] = {LW_OPTIONS_END};

static void defaults(void *target)
{
    (void)target;
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->n >= 1)
        return NULL;
    snprintf(why, size, "one line is needed, none found");
    return why;
}

/* One kind of part (Lorentzian or Gaussian) over all lines: beta_i = weight_i x parameter. */
typedef struct part {
    size_t n;
    const lw_profile **profile;
    double *beta, *covariance, *weight;
} part;

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const part *m = user;
    (void)x_slope; /* positions are known far better than breadths */
    for (size_t i = 0; i < m->n; i++) {
        value[i] = m->weight[i] * p[0];
        slopes[i] = m->weight[i];
    }
}

static lw_status gather(const lw_profiles *profiles, bool gauss, lw_arena *arena, part *out, lw_error *err)
{
    size_t all = profiles->n, stride = profiles->n_covariance;
    *out = (part){.profile = lw_arena_take(arena, all, sizeof *out->profile, err),
                  .beta = lw_arena_take(arena, all, sizeof(double), err),
                  .covariance = lw_arena_take(arena, all * all, sizeof(double), err),
                  .weight = lw_arena_take(arena, all, sizeof(double), err)};
    if (!out->profile || !out->beta || !out->covariance || !out->weight)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < all; i++) {
        const lw_profile *profile = &profiles->profile[i];
        lw_quantity q = gauss ? profile->gauss_s : profile->lorentz_s;
        if (q.kind != LW_VALUE || !(q.u > 0) || !isfinite(q.u) || !isfinite(q.value))
            continue;
        out->profile[out->n] = profile;
        out->beta[out->n] = q.value;
        out->weight[out->n++] = gauss ? 2 * profile->s_per_nm : 1;
    }
    for (size_t i = 0; i < out->n; i++)
        for (size_t j = 0; j < out->n; j++) {
            const lw_profile *a = out->profile[i], *b = out->profile[j];
            size_t at = gauss ? a->at_gauss : a->at_lorentz, bt = gauss ? b->at_gauss : b->at_lorentz;
            double u = gauss ? a->gauss_s.u : a->lorentz_s.u;
            double c = i == j ? u * u : 0;
            if (profiles->covariance != NULL && at < stride && bt < stride &&
                profiles->covariance[at * stride + at] > 0)
                c = profiles->covariance[at * stride + bt];
            out->covariance[i * out->n + j] = c;
        }
    return LW_OK;
}

/* The mean of a part over the lines: value, u (enlarged by scatter). False if no line has the part. */
static lw_status mean_of(const part *m, lw_arena *arena, double *value, double *u, lw_generalised_fit *fit,
                         lw_error *err)
{
    lw_generalised problem = {
        .n = m->n, .m = 1, .y = m->beta, .covariance = m->covariance, .model = model, .user = (void *)m};
    double p[1] = {m->beta[0] / m->weight[0]};
    lw_status status = lw_generalised_solve(&problem, arena, p, fit, NULL, err);
    *value = p[0];
    *u = sqrt(fit->covariance[0][0]) * fit->scatter;
    return status;
}

static lw_quantity size_of(lw_quantity lorentz)
{
    if (lorentz.kind == LW_UPPER_LIMIT)
        return lw_lower_limit(1 / lorentz.value, lorentz.confidence, "nm");
    if (lorentz.value > 2 * lorentz.u)
        return lw_quantity_of(1 / lorentz.value, lorentz.u / (lorentz.value * lorentz.value), "nm");
    return lw_lower_limit(1 / (fmax(0, lorentz.value) + LW_ONE_SIDED_95 * lorentz.u), 0.95, "nm");
}

static lw_quantity strain_of(lw_quantity gauss, double s)
{
    double per = 1 / (2 * s);
    if (gauss.kind == LW_UPPER_LIMIT)
        return lw_upper_limit(gauss.value * per, gauss.confidence, "");
    if (gauss.value > 2 * gauss.u)
        return lw_quantity_of(gauss.value * per, gauss.u * per, "");
    return lw_upper_limit((fmax(0, gauss.value) + LW_ONE_SIDED_95 * gauss.u) * per, 0.95, "");
}

static lw_quantity times(lw_quantity q, double factor)
{
    q.value *= factor;
    q.u *= factor;
    return q;
}

static const char SIZE[] =
    "Volume-weighted mean column length: reciprocal of the Lorentzian integral breadth.";
static const char STRAIN[] = "Apparent strain e: Gaussian integral breadth over 2/d (Stokes & Wilson 1944); "
                             "about the largest strain present.";
static const char RMS[] =
    "Root mean square strain of normally distributed strains: sqrt(2/pi) times the apparent one.";

static void tell_lines(const lw_profiles *profiles, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "lines", err);
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_profile *profile = &profiles->profile[i];
        const lw_reflection *r = &profile->line->reflection;
        lw_quantity strain = strain_of(profile->gauss_s, profile->s_per_nm);
        char text[24];
        lw_node *node = lw_add_group(list, NULL, err);
        lw_add_text(node, "hkl", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        lw_add_quantity(node, "size_volume", size_of(profile->lorentz_s), SIZE, err);
        lw_add_quantity(node, "strain_apparent", strain, STRAIN, err);
        lw_add_quantity(node, "strain_rms", times(strain, LW_RMS_PER_APPARENT), RMS, err);
    }
}

/* How a headline moves with the parts of the lines. */
static void share(const lw_profiles *profiles, const part *m, bool gauss, const char *field, double of,
                  const lw_generalised_fit *fit, lw_arena *arena, lw_node *result, lw_error *err)
{
    size_t *row = lw_arena_take(arena, m->n, sizeof *row, err);
    if (row == NULL)
        return;
    for (size_t i = 0; i < m->n; i++)
        row[i] = gauss ? m->profile[i]->at_gauss : m->profile[i]->at_lorentz;
    lw_shared_tell(profiles, field, fit, m->n, 1, &of, row, NULL, arena, result, err);
}

/* One headline from a part, with its statistics. *enlarged receives the factor on its u where the lines
 * disagree beyond 3 u, else 1. */
static lw_status tell_mean(const lw_profiles *profiles, bool gauss, lw_arena *arena, lw_node *result,
                           const lw_readings *readings, lw_node *remarks, double *enlarged, lw_error *err)
{
    *enlarged = 1;
    part m;
    lw_status status = gather(profiles, gauss, arena, &m, err);
    if (status != LW_OK)
        return status;
    if (m.n == 0) {
        lw_add_text(
            remarks, NULL,
            gauss ? "no line shows a Gaussian part with an uncertainty: strain is left to the lines' limits"
                  : "no line shows a Lorentzian part with an uncertainty: size is left to the lines' limits",
            err);
        return err->status;
    }
    double value, u;
    lw_generalised_fit fit;
    status = mean_of(&m, arena, &value, &u, &fit, err);
    if (status != LW_OK)
        return status;
    if (gauss) { /* the parameter is e itself: s = 1/2 makes it its own breadth */
        lw_quantity strain = strain_of(lw_quantity_of(value, u, ""), 0.5);
        lw_quantity rms = times(strain, LW_RMS_PER_APPARENT);
        if (rms.kind == LW_VALUE)
            share(profiles, &m, gauss, "strain_rms", LW_RMS_PER_APPARENT, &fit, arena, result, err);
        lw_readings_widen(readings, LW_READ_STRAIN, 0, &rms, result, err);
        lw_add_quantity(result, "strain_apparent", times(rms, 1 / LW_RMS_PER_APPARENT), STRAIN, err);
        lw_add_quantity(result, "strain_rms", rms, RMS, err);
    } else {
        lw_quantity mean = size_of(lw_quantity_of(value, u, "nm^-1"));
        if (mean.kind == LW_VALUE)
            share(profiles, &m, gauss, "size_volume", -1 / (value * value), &fit, arena, result, err);
        lw_readings_widen(readings, LW_READ_SIZE_VOLUME, 0, &mean, result, err);
        lw_add_quantity(result, "size_volume", mean, SIZE, err);
    }
    lw_node *statistics = lw_add_group(result, gauss ? "strain_mean" : "size_mean", err);
    lw_add_number(statistics, "lines", (double)m.n, err);
    lw_add_number(statistics, "chi2", fit.chi2, err);
    lw_add_number(statistics, "degrees_of_freedom", (double)fit.degrees, err);
    lw_add_number(statistics, "scatter_factor", fit.scatter, err);
    if (fit.degrees > 0 && fit.p < CHANCE_OF_3U)
        *enlarged = fit.scatter;
    return err->status;
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    (void)given;
    lw_node *remarks = lw_add_list(result, "remarks", err);
    double sizes = 1, strains = 1;
    lw_breadths breadths;
    lw_readings readings = {0};
    lw_status status = lw_breadths_gather(profiles, arena, &breadths, err);
    if (status == LW_OK)
        status = lw_breadths_read(&breadths, arena, &readings, err);
    if (status == LW_OK)
        status = tell_mean(profiles, false, arena, result, &readings, remarks, &sizes, err);
    if (status == LW_OK)
        status = tell_mean(profiles, true, arena, result, &readings, remarks, &strains, err);
    if (status == LW_OK && (sizes > 1 || strains > 1)) {
        char text[200];
        snprintf(
            text, sizeof text,
            "the lines disagree beyond 3 u: u of the means enlarged %.1f times for size, %.1f for strain",
            sizes, strains);
        lw_add_text(remarks, NULL, text, err);
    }
    if (status == LW_OK) {
        lw_readings_remark(result, remarks, err);
        tell_lines(profiles, result, err);
        status = err->status;
    }
    return status;
}

const lw_method lw_method_single_line_voigt = {
    .name = "single_line_voigt",
    .title = "Single-line Voigt",
    .purpose = "size from the Lorentzian part of each line, strain from its Gaussian part",
    .assumes = "Size broadening is purely Lorentzian and strain broadening purely Gaussian. Use it where one "
               "line is "
               "all there is; the tails must be measured far out, or the parts are wrong.",
    .source =
        "de Keijser, Langford, Mittemeijer & Vogels (1982) J. Appl. Cryst. 15, 308; Langford (1978) J. Appl. "
        "Cryst. 11, 10",
    .options = options,
    .options_size = 0,
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
