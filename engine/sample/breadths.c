/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/breadths.h"

#include "numeric/statistics.h"
#include "numeric/voigt.h"
#include "sample/positions.h"
#include "sample/shared.h"

#include <math.h>
#include <string.h>

#define PI 3.14159265358979323846
#define SQRT_PI 1.77245385090551602730

const char *const lw_form_name[LW_FORMS] = {"lorentzian", "gaussian", "mixed", "parabolic"};

/* FWHM of a Gaussian, of a Lorentzian, of integral breadth 1 */
#define GAUSS_FWHM 0.93943727869965133377
#define LORENTZ_FWHM 0.63661977236758134308

double lw_breadths_fwhm(const lw_profile *profile, double slopes[2])
{
    double gauss = fmax(0, profile->gauss_s.value) * GAUSS_FWHM;
    double lorentz = fmax(0, profile->lorentz_s.value) * LORENTZ_FWHM;
    if (!(gauss > 0) && !(lorentz > 0)) {
        slopes[0] = slopes[1] = 0;
        return 0;
    }
    lw_voigt_fwhm_slopes(gauss, lorentz, slopes);
    slopes[0] *= GAUSS_FWHM;
    slopes[1] *= LORENTZ_FWHM;
    return lw_voigt_fwhm(gauss, lorentz);
}

/* The breadth that the data suggest, limit or not; negative if only a limit is known. */
static double estimate(const lw_profile *profile)
{
    if (profile->breadth_s.kind == LW_VALUE)
        return profile->breadth_s.value;
    if (profile->gauss_s.kind != LW_VALUE || profile->lorentz_s.kind != LW_VALUE)
        return -1;
    double gauss = fmax(0, profile->gauss_s.value) * GAUSS_FWHM;
    double lorentz = fmax(0, profile->lorentz_s.value) * LORENTZ_FWHM;
    return gauss > 0 || lorentz > 0 ? lw_voigt_breadth(gauss, lorentz) : 0;
}

static double covariance_of(const lw_profiles *profiles, const lw_profile *a, const lw_profile *b)
{
    if (profiles->covariance != NULL && a->at_breadth < profiles->n_covariance &&
        b->at_breadth < profiles->n_covariance)
        return profiles->covariance[a->at_breadth * profiles->n_covariance + b->at_breadth];
    return a == b ? a->breadth_s.u * a->breadth_s.u : 0;
}

lw_status lw_breadths_gather(const lw_profiles *profiles, lw_arena *arena, lw_breadths *breadths,
                             lw_error *err)
{
    size_t all = profiles->n, n = 0;
    *breadths = (lw_breadths){.values_only = profiles->values_only};
    double *positions = lw_position_covariance(profiles, NULL, 0, arena, err);
    size_t *row = lw_arena_take(arena, all, sizeof *row, err);
    breadths->profile = lw_arena_take(arena, all, sizeof *breadths->profile, err);
    breadths->s = lw_arena_take(arena, all, sizeof(double), err);
    breadths->beta = lw_arena_take(arena, all, sizeof(double), err);
    breadths->covariance = lw_arena_take(arena, all * all, sizeof(double), err);
    breadths->s_covariance = lw_arena_take(arena, all * all, sizeof(double), err);
    if (!positions || !row || !breadths->profile || !breadths->s || !breadths->beta ||
        !breadths->covariance || !breadths->s_covariance)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < all; i++) {
        const lw_profile *profile = &profiles->profile[i];
        double beta = estimate(profile);
        double variance = covariance_of(profiles, profile, profile);
        if (!(beta >= 0) || !isfinite(beta) || !(variance > 0) || !isfinite(variance)) {
            breadths->n_left_out++;
            continue;
        }
        row[n] = i;
        breadths->profile[n] = profile;
        breadths->s[n] = profile->s_per_nm;
        breadths->beta[n++] = beta;
    }
    breadths->n = n;
    breadths->by_voigts = profiles->method != NULL && strcmp(profiles->method, "convolution") == 0;
    const lw_lines *lines = profiles->lines;
    if (breadths->by_voigts && lines->scan != NULL && lines->background != NULL) {
        breadths->background = lw_arena_take(arena, n, sizeof(double), err);
        if (breadths->background == NULL)
            return LW_OUT_OF_MEMORY;
        for (size_t i = 0; i < n; i++) {
            size_t at = 0;
            while (at + 1 < lines->scan->n && lines->scan->two_theta_deg[at] < breadths->profile[i]->line->two_theta.value)
                at++;
            breadths->background[i] = lines->background[at];
        }
    }
    breadths->cubic = profiles->lines->material != NULL && profiles->lines->material->system == LW_CUBIC;
    bool any = false;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            const lw_profile *a = breadths->profile[i], *b = breadths->profile[j];
            breadths->covariance[i * n + j] = covariance_of(profiles, a, b);
            double c = positions[row[i] * all + row[j]] * lw_position_s_slope(a->s_per_nm, a->theta_deg) *
                       lw_position_s_slope(b->s_per_nm, b->theta_deg);
            breadths->s_covariance[i * n + j] = c;
            any = any || c != 0;
        }
    if (!any)
        breadths->s_covariance = NULL;
    return LW_OK;
}

/* ---------------------------------------------------------------------------------------------------- forms
 */

/* exp(x^2) erfc(x) for any x; overflows to infinity far on the negative side. */
static double scaled_erfc(double x)
{
    double re, im;
    lw_faddeeva(0, fabs(x), &re, &im);
    return x >= 0 ? re : 2 * exp(x * x) - re;
}

/* Breadth of a Voigt and its slopes to lorentz and to gauss^2, continued a little beyond 0 in both: in the
 * Lorentzian breadth by the formula itself, in the squared Gaussian one by its tangent. Langford (1978). */
static double voigt_breadth(double lorentz, double gauss_squared, double slopes[2])
{
    if (gauss_squared <= 0 || (lorentz > 0 && lorentz * lorentz > 400 * PI * gauss_squared)) {
        /* erfcx(k) = 1/(sqrt(pi) k) (1 - 1/2k^2 + 3/4k^4 - 15/8k^6 + ...), k > 20: exact to rounding */
        if (lorentz <= 0) {
            slopes[0] = slopes[1] = NAN;
            return NAN;
        }
        double z = gauss_squared > 0 ? PI * gauss_squared / (lorentz * lorentz) : 0; /* 1/k^2 */
        double series = 1 + z * (-0.5 + z * (0.75 + z * (-1.875 + z * (6.5625 - z * 29.53125))));
        double d_series = -0.5 + z * (1.5 + z * (-5.625 + z * (26.25 - z * 147.65625)));
        double d_beta = -lorentz * d_series / (series * series); /* d(beta)/dz */
        slopes[1] = d_beta * PI / (lorentz * lorentz);
        slopes[0] = 1 / series - 2 * z * d_beta / lorentz;
        double beta = lorentz / series;
        return gauss_squared < 0 ? beta + slopes[1] * gauss_squared : beta;
    }
    double gauss = sqrt(gauss_squared), k = lorentz / (SQRT_PI * gauss), e = scaled_erfc(k);
    double d_e = 2 * k * e - 2 / SQRT_PI;
    slopes[0] = -d_e / (SQRT_PI * e * e);
    slopes[1] = (1 + k * d_e / e) / e / (2 * gauss);
    return gauss / e;
}

double lw_form_breadth(lw_form form, const double p[2], double s, double slopes[2], double *s_slope)
{
    double beta = NAN;
    switch (form) {
    case LW_FORM_LORENTZIAN:
        slopes[0] = 1;
        slopes[1] = 2 * s;
        *s_slope = 2 * p[1];
        return p[0] + 2 * p[1] * s;
    case LW_FORM_GAUSSIAN: {
        double square = p[0] + 4 * p[1] * s * s;
        beta = square > 0 ? sqrt(square) : NAN;
        slopes[0] = 0.5 / beta;
        slopes[1] = 2 * s * s / beta;
        *s_slope = 4 * p[1] * s / beta;
        return beta;
    }
    case LW_FORM_MIXED:
        beta = voigt_breadth(p[0], 4 * p[1] * s * s, slopes);
        *s_slope = slopes[1] * 8 * p[1] * s;
        slopes[1] *= 4 * s * s;
        return beta;
    case LW_FORM_PARABOLIC: {
        double root = p[0] * p[0] + 16 * p[1] * s * s;
        root = root > 0 ? sqrt(root) : NAN;
        beta = 0.5 * (p[0] + root);
        slopes[0] = 0.5 * (1 + p[0] / root);
        slopes[1] = 4 * s * s / root;
        *s_slope = 8 * p[1] * s / root;
        return beta > 0 ? beta : NAN;
    }
    default: slopes[0] = slopes[1] = *s_slope = NAN; return beta;
    }
}

/* ------------------------------------------------------------------------------------------------------ fit
 */

typedef struct model_of {
    const lw_breadths *breadths;
    lw_form form;
} model_of;

static double scale_of(const lw_breadths *breadths, size_t i)
{
    return breadths->scale != NULL ? breadths->scale[i] : 1;
}

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const model_of *m = user;
    for (size_t i = 0; i < m->breadths->n; i++) {
        double scale = scale_of(m->breadths, i);
        value[i] = lw_form_breadth(m->form, p, m->breadths->s[i] * scale, slopes + 2 * i, &x_slope[i]);
        x_slope[i] *= scale;
    }
}

/* Where the iteration starts: the straight line through transformed points, weighted alike, pushed into the
 * region where the form exists at every point. */
static void start(const model_of *m, double p[2])
{
    const lw_breadths *b = m->breadths;
    double n = (double)b->n, sx = 0, sy = 0, sxx = 0, sxy = 0, mean = 0, mean_s = 0;
    for (size_t i = 0; i < b->n; i++) {
        double s = b->s[i] * scale_of(b, i), beta = b->beta[i], x, y;
        if (m->form == LW_FORM_LORENTZIAN) {
            x = 2 * s;
            y = beta;
        } else if (m->form == LW_FORM_GAUSSIAN) {
            x = 4 * s * s;
            y = beta * beta;
        } else {
            x = beta / (s * s);
            y = beta * beta / (s * s);
        }
        mean += beta / n;
        mean_s += s / n;
        sx += x / n;
        sy += y / n;
        sxx += x * x / n;
        sxy += x * y / n;
    }
    double slope = (sxy - sx * sy) / (sxx - sx * sx), intercept = sy - slope * sx;
    if (m->form == LW_FORM_LORENTZIAN || m->form == LW_FORM_GAUSSIAN) {
        p[0] = intercept;
        p[1] = slope;
    } else { /* y = (1/D) x + 4 e^2 */
        p[0] = slope;
        p[1] = intercept / 4;
    }
    bool exists = isfinite(p[0]) && isfinite(p[1]);
    for (size_t i = 0; exists && i < b->n; i++) {
        double unused[3];
        exists = isfinite(lw_form_breadth(m->form, p, b->s[i] * scale_of(b, i), unused, &unused[2]));
    }
    if (!exists || (m->form == LW_FORM_MIXED && (p[0] <= 0 || p[1] <= 0))) {
        double half = 0.5 * fmax(mean, 1e-6);
        p[0] = m->form == LW_FORM_GAUSSIAN ? half * half : half;
        p[1] = m->form == LW_FORM_LORENTZIAN ? half / (2 * mean_s) : half * half / (4 * mean_s * mean_s);
    }
}

/* Size is a power of p[0] and strain one of p[1]. */
static double size_power(lw_form form)
{
    return form == LW_FORM_GAUSSIAN ? -0.5 : -1;
}

static double strain_power(lw_form form)
{
    return form == LW_FORM_LORENTZIAN ? 1 : 0.5;
}

/* Size and strain with limits where a parameter is below twice its uncertainty. */
static void read_parameters(lw_breadth_fit *fit)
{
    double u0 = sqrt(fit->covariance[0][0]), u1 = sqrt(fit->covariance[1][1]);
    double of_size = size_power(fit->form), of_strain = strain_power(fit->form);
    if (fit->p[0] > 2 * u0) {
        double size = pow(fit->p[0], of_size);
        fit->size_volume = lw_quantity_of(size, -of_size * size / fit->p[0] * u0, "nm");
    } else {
        fit->size_volume = lw_lower_limit(pow(fmax(0, fit->p[0]) + LW_ONE_SIDED_95 * u0, of_size), 0.95, "nm");
    }
    if (fit->p[1] > 2 * u1) {
        double strain = pow(fit->p[1], of_strain);
        fit->strain_apparent = lw_quantity_of(strain, of_strain * strain / fit->p[1] * u1, "");
    } else {
        fit->strain_apparent =
            lw_upper_limit(pow(fmax(0, fit->p[1]) + LW_ONE_SIDED_95 * u1, of_strain), 0.95, "");
    }
}

lw_status lw_breadths_fit(const lw_breadths *breadths, lw_form form, lw_arena *arena, lw_breadth_fit *fit,
                          lw_error *err)
{
    model_of m = {.breadths = breadths, .form = form};
    *fit = (lw_breadth_fit){.form = form};
    lw_generalised problem = {.n = breadths->n,
                              .m = 2,
                              .y = breadths->beta,
                              .covariance = breadths->covariance,
                              .x_covariance = breadths->s_covariance,
                              .model = model,
                              .user = &m};
    if (breadths->n < 2)
        return lw_fail(err, LW_NOT_SUPPORTED, "measure more lines",
                       "%zu breadth to part size from strain, 2 are needed", breadths->n);
    start(&m, fit->p);
    lw_status status = lw_generalised_solve(&problem, arena, fit->p, &fit->fit, NULL, err);
    if (status != LW_OK)
        return status;
    double enlarge = fit->fit.scatter * fit->fit.scatter;
    for (size_t i = 0; i < 2; i++)
        for (size_t j = 0; j < 2; j++)
            fit->covariance[i][j] = enlarge * fit->fit.covariance[i][j];
    /* size falls when 1/D rises, so the sign turns */
    fit->correlation = -fit->covariance[0][1] / sqrt(fit->covariance[0][0] * fit->covariance[1][1]);
    read_parameters(fit);
    return LW_OK;
}

lw_status lw_breadths_share(const lw_profiles *profiles, const lw_breadths *breadths, const lw_breadth_fit *fit,
                            lw_arena *arena, lw_node *result, lw_error *err)
{
    size_t n = breadths->n, *row = lw_arena_take(arena, n, sizeof *row, err);
    if (row == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        row[i] = breadths->profile[i]->at_breadth;
    lw_quantity size = fit->size_volume, strain = fit->strain_apparent;
    double of_size[2] = {size_power(fit->form) * size.value / fit->p[0], 0};
    double of_strain[2] = {0, LW_RMS_PER_APPARENT * strain_power(fit->form) * strain.value / fit->p[1]};
    lw_status status = LW_OK;
    if (size.kind == LW_VALUE)
        status = lw_shared_tell(profiles, "size_volume", &fit->fit, n, 2, of_size, row, NULL, arena, result, err);
    if (status == LW_OK && strain.kind == LW_VALUE)
        status = lw_shared_tell(profiles, "strain_rms", &fit->fit, n, 2, of_strain, row, NULL, arena, result, err);
    return status;
}
