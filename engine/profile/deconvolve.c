/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Deconvolution on one footing: the Voigt parts and their covariance first, then the method's own. */
#include "profile/deconvolution.h"

#include "numeric/statistics.h"
#include "numeric/voigt.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const double degree = M_PI / 180;
static const lw_deconvolution *const methods[] = {&lw_deconvolution_convolution,
                                                  &lw_deconvolution_stokes,
                                                  &lw_deconvolution_physical,
                                                  &lw_deconvolution_tikhonov,
                                                  &lw_deconvolution_richardson_lucy,
                                                  &lw_deconvolution_maximum_entropy,
                                                  NULL};
static const char *const method_names[] = {"convolution",     "stokes",          "physical", "tikhonov",
                                           "richardson_lucy", "maximum_entropy", NULL};

static const char *const completions[] = {"auto", "voigt", "physical", NULL};
static const char *const windows[] = {"none", "hann", NULL};
static const char *const orders[] = {"0", "1", "2", NULL};
static const char *const rules[] = {"discrepancy", "gcv", NULL};

#define AT(field) offsetof(lw_deconvolve_options, field)
const lw_option lw_deconvolve_option_table[] = {
    {"method", LW_OPTION_CHOICE, "", "convolution", 0, 0, method_names, AT(method),
     "convolution: the Voigt fitted with the instrument inside; stokes: Fourier quotient; physical: "
     "lognormal spheres x "
     "strain, all lines fitted again; tikhonov, richardson_lucy, maximum_entropy: regularised"},
    {"length_step", LW_OPTION_NUMBER, "nm", "from the breadth", 0, 1000, NULL, AT(length_step_nm),
     "step of the column length L, 0 = from the breadth"},
    {"length_most", LW_OPTION_NUMBER, "nm", "from the breadth", 0, 1e5, NULL, AT(length_most_nm),
     "largest column length, 0 = where the coefficients have died"},
    {"window", LW_OPTION_NUMBER, "breadths", "as far as the neighbours allow", 0, 100, NULL, AT(window),
     "half-width of the data used for the Fourier sums"},
    {"completion", LW_OPTION_CHOICE, "", "auto", 0, 0, completions, AT(completion),
     "shape by which lines are separated and tails completed; physical fits all lines again first, auto does "
     "so where "
     "the fitted Voigts miss the data (p < 0.2) and lines are at most 30"},
    {"apodise", LW_OPTION_CHOICE, "", "none", 0, 0, windows, AT(apodise),
     "stokes: window over the coefficients; its effect on the breadth is stated"},
    {"order", LW_OPTION_CHOICE, "", "2", 0, 0, orders, AT(order),
     "tikhonov: order of the derivative that is kept small"},
    {"parameter", LW_OPTION_CHOICE, "", "discrepancy", 0, 0, rules, AT(parameter),
     "tikhonov: rule for the regularisation parameter"},
    {"strength", LW_OPTION_NUMBER, "", "by the rule", 0, 1e300, NULL, AT(strength),
     "tikhonov: the regularisation parameter itself, 0 = by the rule"},
    {"non_negative", LW_OPTION_FLAG, "", "false", 0, 0, NULL, AT(non_negative),
     "tikhonov: no negative intensity"},
    {"iterations_most", LW_OPTION_COUNT, "", "500", 1, 100000, NULL, AT(iterations_most),
     "richardson_lucy: iterations at most"},
    {"realisations", LW_OPTION_COUNT, "", "20", 2, 10000, NULL, AT(realisations),
     "richardson_lucy: realisations of noise for the uncertainty"},
    {"seed", LW_OPTION_COUNT, "", "1", 0, 2147483647, NULL, AT(seed), "of the realisations"},
    {"standard", LW_OPTION_NOUN, "lines", "", 0, 0, NULL, AT(standard),
     "fitted lines of the standard: the instrument as measured on those nearest to each line, carried to its "
     "angle, instead of the calibration's function (stokes, tikhonov, richardson_lucy, maximum_entropy)"},
    {"standard_reach", LW_OPTION_NUMBER, "deg", "10", 0.1, 180, NULL, AT(standard_reach),
     "how far a line of the standard may stand from the sample's"},
    {"accept_refold", LW_OPTION_FLAG, "", "false", 0, 0, NULL, AT(accept_refold),
     "go on although instrument x result does not give the data back"},
    LW_OPTIONS_END};

lw_deconvolve_options lw_deconvolve_defaults(void)
{
    return (lw_deconvolve_options){
        .order = 2, .iterations_most = 500, .realisations = 20, .seed = 1, .standard_reach = 10};
}

double lw__s_per_degree(const lw_profiles *profiles, const lw_profile *profile)
{
    return degree * cos(profile->theta_deg * degree) / lw_radiation_wavelength(&profiles->lines->radiation);
}

double lw__voigt_coefficient(double gauss_s, double lorentz_s, double length_nm)
{
    return exp(-2 * lorentz_s * length_nm - M_PI * gauss_s * gauss_s * length_nm * length_nm);
}

void lw__set_breadth(const lw_profiles *profiles, lw_profile *profile, double value, double u)
{
    double per_degree = lw__s_per_degree(profiles, profile);
    profile->resolved = value > 2 * u;
    if (profile->resolved) {
        profile->breadth_s = lw_quantity_of(value, u, "nm^-1");
        profile->breadth_deg = lw_quantity_of(value / per_degree, u / per_degree, "deg");
    } else {
        double limit = fmax(value, 0) + 1.645 * u; /* one-sided 95 % of a normal distribution */
        profile->breadth_s = lw_upper_limit(limit, 0.95, "nm^-1");
        profile->breadth_deg = lw_upper_limit(limit / per_degree, 0.95, "deg");
    }
}

void lw__set_refold(lw_profile *profile, double chi2, double freedom, size_t points, double lost, double net)
{
    profile->refold_points = points;
    profile->refold_freedom = fmax(freedom, 1);
    profile->refold_chi2 = points > 0 ? chi2 / profile->refold_freedom : 0;
    profile->refold_p = points > 0 ? lw_chi2_tail(chi2, profile->refold_freedom) : 1;
    profile->refold_failed = profile->refold_p < 1e-6 && lost > 0.01 * net;
}

lw_status lw__take_refold(lw_profiles *profiles, lw_profile *profile, size_t first, size_t n, lw_error *err)
{
    double **column[] = {&profile->refold_deg, &profile->refold_seen, &profile->refold_u,
                         &profile->refold_curve};
    for (size_t c = 0; c < sizeof column / sizeof *column; c++)
        if ((*column[c] = lw_arena_take(&profiles->arena, n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    memcpy(profile->refold_deg, profiles->lines->scan->two_theta_deg + first, n * sizeof(double));
    profile->n_refold = n;
    return LW_OK;
}

void lw__set_refold_point(lw_profile *profile, size_t i, double seen, double variance, double curve)
{
    profile->refold_seen[i] = seen;
    profile->refold_u[i] = sqrt(variance);
    profile->refold_curve[i] = curve;
}

lw_status lw__refold_of_fit(lw_profiles *profiles, lw_profile *profile, const double *model,
                            const double *background, lw_error *err)
{
    const lw_scan *scan = profiles->lines->scan;
    double at = profile->line->two_theta.value, reach = 2 * profile->line->fwhm.value;
    double chi2 = 0, lost = 0, net = 0;
    size_t first = 0, end = scan->n;
    while (first < end && scan->two_theta_deg[first] < at - reach)
        first++;
    while (end > first && scan->two_theta_deg[end - 1] > at + reach)
        end--;
    lw_status status = lw__take_refold(profiles, profile, first, end - first, err);
    if (status != LW_OK)
        return status;
    for (size_t i = first; i < end; i++) {
        double r = scan->intensity[i] - model[i], variance = profiles->lines->variance[i];
        double above = model[i] - background[i];
        chi2 += r * r / variance;
        lost += r * r - variance;
        net += above * above;
        lw__set_refold_point(profile, i - first, above + r, variance, above);
    }
    lw__set_refold(profile, chi2, (double)(end - first), end - first, lost, net);
    return LW_OK;
}

lw_status lw__curve_of_coefficients(lw_profiles *profiles, lw_profile *profile, double breadth, lw_error *err)
{
    size_t n = 161, last = profile->truncated_at;
    double *curve[3];
    for (int i = 0; i < 3; i++)
        if ((curve[i] = lw_arena_take(&profiles->arena, n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    if (!(breadth > 0) || last < 2)
        return LW_OK;
    double step = profile->length_nm[1];
    for (size_t j = 0; j < n; j++) {
        double s = breadth * 0.05 * ((double)j - 80), sum = 0, variance = 0;
        for (size_t k = 0; k < last; k++) {
            double phase = 2 * M_PI * profile->length_nm[k] * s, twice = (k == 0 ? 1 : 2) * step;
            double c = cos(phase), d = sin(phase);
            sum += twice * (profile->cosine[k] * c + profile->sine[k] * d);
            variance += twice * twice *
                        (profile->u_cosine[k] * profile->u_cosine[k] * c * c +
                         profile->u_sine[k] * profile->u_sine[k] * d * d);
        }
        curve[0][j] = s;
        curve[1][j] = sum;
        curve[2][j] = sqrt(variance);
    }
    profile->n_curve = n;
    profile->curve_s = curve[0];
    profile->curve_intensity = curve[1];
    profile->curve_u = curve[2];
    return LW_OK;
}

lw_status lw__take_lengths(lw_profiles *profiles, lw_profile *profile, const lw_deconvolve_options *options,
                           lw_error *err)
{
    double gauss = profile->gauss_s.value, lorentz = profile->lorentz_s.value;
    double most = options->length_most_nm;
    if (!(most > 0)) {
        /* 2 lorentz L + pi gauss^2 L^2 = -ln(0.002), not beyond 1000 nm where nothing is resolved */
        double q = 2 * lorentz, a = M_PI * gauss * gauss, c = 6.2146;
        most = a > 1e-12 ? (-q + sqrt(q * q + 4 * a * c)) / (2 * a) : q > 0 ? c / q : 1000;
        most = fmin(most, 1000);
    }
    double step = options->length_step_nm > 0 ? options->length_step_nm : most / 64;
    size_t n = (size_t)fmin(most / step, 4000) + 1;
    double *length = lw_arena_take(&profiles->arena, n, sizeof *length, err);
    double *column[4];
    for (int i = 0; i < 4; i++)
        column[i] = lw_arena_take(&profiles->arena, n, sizeof(double), err);
    if (!length || !column[0] || !column[1] || !column[2] || !column[3])
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        length[i] = step * (double)i;
    profile->n_coefficients = profile->truncated_at = n;
    profile->length_nm = length;
    profile->cosine = column[0];
    profile->u_cosine = column[1];
    profile->sine = column[2];
    profile->u_sine = column[3];
    return LW_OK;
}

/* Derivatives of gauss_s, lorentz_s and breadth_s of one line to its own variance and Lorentzian (deg^2,
 * deg). */
static void voigt_slopes(const lw_line *line, double u_variance, double per_degree, double slope[3][2])
{
    double to_gauss = 0.5 * sqrt(M_PI / M_LN2) * per_degree, to_lorentz = 0.5 * M_PI * per_degree;
    double variance = line->own_variance_deg2, lorentz = line->own_lorentz_deg;
    /* the root of the variance has no slope at 0: its uncertainty is then that of the root of u */
    slope[0][0] = to_gauss * 0.5 / sqrt(fmax(variance, fmax(u_variance, 1e-14)));
    slope[0][1] = 0;
    slope[1][0] = 0;
    slope[1][1] = to_lorentz;
    double scale = sqrt(variance) + lorentz + 1e-6, step[2] = {1e-4 * scale * scale, 1e-4 * scale};
    for (int i = 0; i < 2; i++) {
        double at[3];
        for (int j = 0; j < 3; j++)
            at[j] =
                lw_voigt_breadth(sqrt(variance + (i == 0) * j * step[0]), lorentz + (i == 1) * j * step[1]);
        if (variance == 0 && lorentz == 0)
            slope[2][i] = i == 1 ? to_lorentz : 0;
        else
            slope[2][i] = per_degree * (4 * at[1] - 3 * at[0] - at[2]) / (2 * step[i]);
    }
}

/* Covariance of the widths (variance, Lorentzian) of lines a and b. */
static void width_covariance(const lw_lines *lines, const lw_line *a, const lw_line *b, double c[2][2])
{
    size_t rows[2][2] = {{a->at_gauss, a->at_lorentz}, {b->at_gauss, b->at_lorentz}};
    for (int i = 0; i < 2; i++)
        for (int j = 0; j < 2; j++) {
            c[i][j] = 0;
            if (rows[0][i] != LW_NO_PARAMETER && rows[1][j] != LW_NO_PARAMETER)
                c[i][j] = lines->covariance[rows[0][i] * lines->n_parameters + rows[1][j]];
        }
    if (!a->shared_width || !b->shared_width)
        return;
    double g[2][LW_WIDTH_PARAMETERS], l[2][LW_WIDTH_PARAMETERS];
    const lw_line *line[2] = {a, b};
    for (int i = 0; i < 2; i++) {
        lw_width_gauss_variance(lines->smooth.value, line[i]->nominal_deg, g[i]);
        lw_width_lorentz(lines->smooth.value, line[i]->nominal_deg, l[i]);
    }
    for (int p = 0; p < LW_WIDTH_PARAMETERS; p++)
        for (int q = 0; q < LW_WIDTH_PARAMETERS; q++) {
            double cov = lines->smooth.covariance[p][q];
            c[0][0] += g[0][p] * cov * g[1][q];
            c[0][1] += g[0][p] * cov * l[1][q];
            c[1][0] += l[0][p] * cov * g[1][q];
            c[1][1] += l[0][p] * cov * l[1][q];
        }
}

static lw_status voigt_parts(lw_profiles *profiles, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    size_t n = profiles->n;
    double(*slope)[3][2] = lw_arena_take(&profiles->arena, n, sizeof *slope, err);
    profiles->n_covariance = 3 * n;
    profiles->covariance = lw_arena_take(&profiles->arena, 9 * n * n, sizeof(double), err);
    if (slope == NULL || profiles->covariance == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < n; k++) {
        lw_profile *profile = &profiles->profile[k];
        const lw_line *line = profile->line;
        double position = line->two_theta.value;
        if (profiles->calibration != NULL)
            position -= lw_aberrations_shift(&profiles->calibration->aberrations, position, NULL);
        profile->theta_deg = position / 2;
        profile->s_per_nm = 2 * sin(profile->theta_deg * degree) / lw_radiation_wavelength(&lines->radiation);
        double own[2][2];
        width_covariance(lines, line, line, own);
        voigt_slopes(line, sqrt(fmax(own[0][0], 0)), lw__s_per_degree(profiles, profile), slope[k]);
        profile->at_gauss = 3 * k;
        profile->at_lorentz = 3 * k + 1;
        profile->at_breadth = 3 * k + 2;
    }
    for (size_t a = 0; a < n; a++)
        for (size_t b = 0; b < n; b++) {
            double c[2][2];
            width_covariance(lines, profiles->profile[a].line, profiles->profile[b].line, c);
            for (size_t i = 0; i < 3; i++)
                for (size_t j = 0; j < 3; j++) {
                    double sum = 0;
                    for (int p = 0; p < 2; p++)
                        for (int q = 0; q < 2; q++)
                            sum += slope[a][i][p] * c[p][q] * slope[b][j][q];
                    profiles->covariance[(3 * a + i) * 3 * n + 3 * b + j] = sum;
                }
        }
    for (size_t k = 0; k < n; k++) {
        lw_profile *profile = &profiles->profile[k];
        double u[3], per_degree = lw__s_per_degree(profiles, profile);
        for (size_t i = 0; i < 3; i++)
            u[i] = sqrt(fmax(profiles->covariance[(3 * k + i) * (3 * n + 1)], 0));
        double gauss = sqrt(profile->line->own_variance_deg2), lorentz = profile->line->own_lorentz_deg;
        profile->gauss_s = lw_quantity_of(0.5 * sqrt(M_PI / M_LN2) * gauss * per_degree, u[0], "nm^-1");
        profile->lorentz_s = lw_quantity_of(0.5 * M_PI * lorentz * per_degree, u[1], "nm^-1");
        lw__set_breadth(profiles, profile, lw_voigt_breadth(gauss, lorentz) * per_degree, u[2]);
    }
    return LW_OK;
}

/* A line of which the scan shows little more than one side can't be checked: what its other half would say is
 * free. */
static bool is_cut(const lw_profiles *profiles, const lw_profile *profile)
{
    const lw_scan *scan = profiles->lines->scan;
    double at = profile->line->two_theta.value, reach = 0.5 * profile->line->fwhm.value;
    return at - scan->two_theta_deg[0] < reach || scan->two_theta_deg[scan->n - 1] - at < reach;
}

static lw_status check_refold(lw_profiles *profiles, bool accept, lw_error *err)
{
    char names[2][120] = {"", ""};
    size_t used[2] = {0, 0};
    for (size_t k = 0; k < profiles->n; k++) {
        lw_profile *profile = &profiles->profile[k];
        const lw_reflection *r = &profile->line->reflection;
        char hkl[24];
        int cut = is_cut(profiles, profile);
        profile->refold_failed |= cut;
        if (!profile->refold_failed || used[cut] + 30 >= sizeof names[cut])
            continue;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        used[cut] += (size_t)snprintf(names[cut] + used[cut], sizeof names[cut] - used[cut], "%s%s",
                                      used[cut] ? ", " : "", hkl);
        if (!cut)
            used[0] += (size_t)snprintf(names[0] + used[0], sizeof names[0] - used[0], " (%.1f)",
                                        profile->refold_chi2);
    }
    if (accept || (used[0] == 0 && used[1] == 0))
        return LW_OK;
    if (used[0] == 0)
        return lw_fail_at(err, LW_REFOLD_FAILED, profiles->lines->scan->file, 0,
                          "measure further, crop the scan before the line, or say accept_refold = true",
                          "the scan ends within %s: instrument x result can't be held against half a line",
                          names[1]);
    return lw_fail_at(
        err, LW_REFOLD_FAILED, profiles->lines->scan->file, 0,
        "check the calibration and the background, or say accept_refold = true",
        "instrument x result does not give the data back for %s (chi-square per degree of freedom)",
        names[0]);
}

lw_status lw_deconvolve(lw_engine *engine, const lw_lines *lines, const lw_calibration *calibration,
                        const lw_deconvolve_options *options, lw_profiles **out, lw_error *err)
{
    *out = NULL;
    if (!lines->has_instrument)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0,
                          "fit the lines with instrument = calibration",
                          "the lines were fitted without an instrument: nothing can be taken out of them");
    if (strcmp(lines->shape, "voigt") != 0)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0, "fit the lines with shape = voigt",
                          "lines of shape %s are not sums of the instrument's and the sample's part",
                          lines->shape);
    const lw_deconvolution *method = methods[options->method];
    if (options->standard != NULL && !method->by_lines)
        return lw_fail_at(
            err, LW_NOT_SUPPORTED, lines->scan->file, 0,
            "say method = stokes, tikhonov, richardson_lucy or maximum_entropy, or leave the "
            "standard out",
            "method %s folds the calibration's own function into a fit: it can't take a standard's "
            "measured lines",
            method->name);
    size_t supported = 0;
    for (size_t k = 0; k < lines->n; k++)
        supported += lines->line[k].supported;
    if (supported == 0)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0,
                          "measure longer, or check the material",
                          "no line of the scan is supported by the data");
    lw_profiles *profiles = lw_take(engine, sizeof *profiles, err);
    if (profiles == NULL)
        return LW_OUT_OF_MEMORY;
    *profiles = (lw_profiles){.lines = lines,
                              .calibration = calibration,
                              .n = supported,
                              .method = method->name,
                              .source = method->source};
    lw_arena_begin(&profiles->arena, engine);
    lw_status status = LW_OK;
    profiles->profile = lw_arena_take(&profiles->arena, supported, sizeof *profiles->profile, err);
    profiles->options = lw_arena_copy(&profiles->arena, options, 1, sizeof *options, err);
    if (profiles->profile == NULL || profiles->options == NULL)
        status = LW_OUT_OF_MEMORY;
    for (size_t k = 0, at = 0; k < lines->n && status == LW_OK; k++)
        if (lines->line[k].supported)
            profiles->profile[at++].line = &lines->line[k];
    if (status == LW_OK)
        status = voigt_parts(profiles, err);
    if (status == LW_OK)
        status = method->run(engine, profiles, options, err);
    if (status == LW_OK)
        status = check_refold(profiles, options->accept_refold, err);
    if (status != LW_OK) {
        lw_profiles_free(profiles);
        return status;
    }
    *out = profiles;
    return LW_OK;
}

void lw_profiles_free(lw_profiles *profiles)
{
    if (profiles == NULL)
        return;
    lw_engine *engine = profiles->arena.engine;
    lw_arena_end(&profiles->arena);
    lw_give(engine, profiles, sizeof *profiles);
}
