/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Stokes' quotient of Fourier coefficients, F(L) = H(L)/G(L).
 * The instrument G (widths, axial copies and the whole emission spectrum) has closed coefficients. The observed H is
 * the fitted line's own transform plus that of what the fit left over inside the window: the tails beyond the window,
 * which a window alone would cut (its error grows as 1/window for tails that fall as 1/s^2), are so completed by the
 * fitted Voigt, and only the data's departure from it is transformed. Sums run over the points as measured,
 * so nothing is interpolated and each point's noise propagates to each coefficient exactly. */
#include "line/curve.h"
#include "profile/deconvolution.h"

#include "numeric/statistics.h"

#include <math.h>

static const double degree = M_PI / 180;

/* Points of one line's window and what the Fourier sums need of them. */
typedef struct window {
    size_t n;
    double *s;        /* nm^-1 from the line */
    double *step;     /* trapezoid weight, nm^-1 */
    double *residual; /* what the fit left over, intensity, intensity factor across the line taken out */
    double *variance;
    double *fitted;   /* this line alone */
    double background_variance; /* of the level under the line */
} window;

/* How far the window reaches, degrees: to the middle of the gap to a neighbour, at most `most`. */
static void reach(const lw_lines *lines, const lw_line *line, double most, double *low, double *high)
{
    double at = line->two_theta.value, doublet = 0;
    const lw_radiation *r = &lines->radiation;
    for (size_t i = 1; i < r->n; i++)
        doublet = fmax(doublet, 2 * tan(at * degree / 2) *
                                    (r->component[i].wavelength_nm / r->component[0].wavelength_nm - 1) / degree);
    *low = at - most;
    *high = at + doublet + most;
    for (size_t k = 0; k < lines->n; k++) {
        double other = lines->line[k].two_theta.value;
        if (other < at)
            *low = fmax(*low, 0.5 * (at + other + doublet));
        if (other > at)
            *high = fmin(*high, 0.5 * (at + doublet + other));
    }
}

/* Variance of the fitted background at a point, from the covariance of its Chebyshev terms. */
static double background_variance(const lw_lines *lines, double two_theta)
{
    double low = lines->scan->two_theta_deg[0], high = lines->scan->two_theta_deg[lines->scan->n - 1];
    double t = 2 * (two_theta - low) / (high - low) - 1, term[64], sum = 0;
    size_t n = lines->n_background < 64 ? lines->n_background : 64;
    for (size_t i = 0; i < n; i++)
        term[i] = i == 0 ? 1 : i == 1 ? t : 2 * t * term[i - 1] - term[i - 2];
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            sum += term[i] * term[j] *
                   lines->covariance[(lines->at_background + i) * lines->n_parameters + lines->at_background + j];
    return fmax(sum, 0);
}

static lw_status take_window(const lw_profiles *profiles, const lw_profile *profile, double breadths, lw_arena *scratch,
                             window *out, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    const lw_line *line = profile->line;
    const lw_scan *scan = lines->scan;
    double low, high, per_degree = lw__s_per_degree(profiles, profile);
    reach(lines, line, (breadths > 0 ? breadths : 8) * line->breadth.value, &low, &high);
    size_t first = 0, end = scan->n;
    while (first < scan->n && scan->two_theta_deg[first] < low)
        first++;
    while (end > first && scan->two_theta_deg[end - 1] > high)
        end--;
    size_t n = end - first;
    double **column[] = {&out->s, &out->step, &out->residual, &out->variance, &out->fitted};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(scratch, n + 1, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    out->n = n;
    out->background_variance = background_variance(lines, line->two_theta.value);
    if (n < 8)
        return LW_OK;
    lw_status status = lw_line_curve(lines, line, n, scan->two_theta_deg + first, out->fitted, err);
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        size_t at = first + i;
        double factor = lw_line_relative_factor(lines, line, scan->two_theta_deg[at]);
        out->s[i] = per_degree * lw_line_offset(lines, line, scan->two_theta_deg[at]);
        /* the residual belongs to the line in the measure of its share of all lines there */
        double above = lines->fitted[at] - lines->background[at], share = above > 0 ? out->fitted[i] / above : 1;
        share = fmin(fmax(share, 0), 1);
        out->residual[i] = share * (scan->intensity[at] - lines->fitted[at]) / factor;
        out->variance[i] = lines->variance[at] / (factor * factor);
        out->fitted[i] /= factor;
    }
    for (size_t i = 0; i < n && status == LW_OK; i++)
        out->step[i] = 0.5 * (out->s[i + 1 < n ? i + 1 : i] - out->s[i > 0 ? i - 1 : i]);
    return status;
}

/* Transform of the instrument at a length: sum over its copies, times its widths. */
static void instrument_transform(const lw_voigt_node *node, size_t n, double variance, double lorentz, double per_degree,
                                 double length, double *re, double *im)
{
    double gauss = exp(-M_PI * M_PI / (4 * M_LN2) * variance * per_degree * per_degree * length * length);
    *re = *im = 0;
    for (size_t i = 0; i < n; i++) {
        double phase = 2 * M_PI * length * per_degree * node[i].offset;
        double size = node[i].weight * gauss * exp(-M_PI * (lorentz + node[i].lorentz) * per_degree * length);
        *re += size * cos(phase);
        *im += size * sin(phase);
    }
}

/* Where the coefficients go under: three in a row below twice their uncertainty, or the instrument's own
 * coefficient below 2 % of its start, where a division by it makes anything of nothing. */
static size_t truncation(const lw_profile *profile, const double *instrument, const char **why)
{
    size_t under = 0;
    for (size_t i = 1; i < profile->n_coefficients; i++) {
        if (instrument[i] < 0.02) {
            *why = "the instrument's coefficient falls below 0.02";
            return i;
        }
        under = fabs(profile->cosine[i]) < 2 * profile->u_cosine[i] ? under + 1 : 0;
        if (under == 3) {
            *why = "three coefficients in a row below twice their uncertainty";
            return i - 2;
        }
    }
    *why = "not needed: every coefficient stands out of the noise";
    return profile->n_coefficients;
}

static lw_status one_line(lw_profiles *profiles, lw_profile *profile, const lw_deconvolve_options *options,
                          lw_arena *scratch, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    double per_degree = lw__s_per_degree(profiles, profile), area = profile->line->area.value * per_degree;
    window data = {0};
    lw_status status = lw__take_lengths(profiles, profile, options, err);
    if (status == LW_OK)
        status = take_window(profiles, profile, options->window, scratch, &data, err);
    if (status != LW_OK)
        return status;
    size_t n = profile->n_coefficients;
    lw_voigt_node *node = lw_arena_take(scratch, LW_NODES_MOST, sizeof *node, err);
    double *g_re = lw_arena_take(scratch, n, sizeof *g_re, err), *g_im = lw_arena_take(scratch, n, sizeof *g_im, err);
    double *size = lw_arena_take(scratch, n, sizeof *size, err);
    if (!node || !g_re || !g_im || !size)
        return LW_OUT_OF_MEMORY;
    double variance, lorentz;
    size_t n_nodes = lw_line_all_nodes(lines, profile->line, true, node, &variance, &lorentz);
    double *cosine = profile->cosine, *sine = profile->sine;
    double *u_cosine = profile->u_cosine, *u_sine = profile->u_sine;
    double scale = 0;
    for (size_t k = 0; k < n; k++) {
        double length = profile->length_nm[k];
        instrument_transform(node, n_nodes, variance, lorentz, per_degree, length, &g_re[k], &g_im[k]);
        double square = g_re[k] * g_re[k] + g_im[k] * g_im[k], re = 0, im = 0, var_re = 0, var_im = 0, level_re = 0;
        size[k] = sqrt(square);
        for (size_t i = 0; i < data.n; i++) {
            double phase = 2 * M_PI * length * data.s[i];
            /* 1/G turns the phase back: weights of this point in the real and imaginary part of the quotient */
            double by_re = (cos(phase) * g_re[k] + sin(phase) * g_im[k]) / square * data.step[i];
            double by_im = (sin(phase) * g_re[k] - cos(phase) * g_im[k]) / square * data.step[i];
            re += by_re * data.residual[i];
            im += by_im * data.residual[i];
            var_re += by_re * by_re * data.variance[i];
            var_im += by_im * by_im * data.variance[i];
            level_re += by_re;
        }
        /* an error of the background's level is the same at every point of the window */
        var_re += level_re * level_re * data.background_variance;
        cosine[k] = area * lw__voigt_coefficient(profile->gauss_s.value, profile->lorentz_s.value, length) + re;
        sine[k] = im;
        u_cosine[k] = sqrt(var_re);
        u_sine[k] = sqrt(var_im);
        if (k == 0)
            scale = cosine[0];
    }
    for (size_t k = 0; k < n; k++) {
        cosine[k] /= scale;
        sine[k] /= scale;
        u_cosine[k] /= scale;
        u_sine[k] /= scale;
    }
    u_cosine[0] = 0; /* the normalisation: its uncertainty is that of the area, which A(L) does not contain */
    profile->truncated_at = truncation(profile, size, &profile->truncation);

    /* Height of the pure profile: integral of A over all lengths, beyond the truncation by the fitted Voigt. As a linear
     * function of the points its uncertainty needs no covariance of coefficients. */
    size_t last = profile->truncated_at;
    double step = profile->length_nm[1], height = 0, *by_point = lw_arena_take(scratch, data.n + 1, sizeof *by_point, err);
    if (by_point == NULL)
        return LW_OUT_OF_MEMORY;
    double gauss_s = profile->gauss_s.value, lorentz_s = profile->lorentz_s.value;
    double voigt_breadth = lw_voigt_breadth(2 * gauss_s * sqrt(M_LN2 / M_PI), 2 * lorentz_s / M_PI);
    if (!(voigt_breadth > 0) || last < 4) {
        profile->truncated_at = last < 4 ? 0 : last;
        return LW_OK; /* nothing but noise: the fit's breadth stands, as a limit if it must */
    }
    height = area / voigt_breadth; /* of the fitted Voigt, then what the residual adds */
    for (size_t i = 0; i < data.n; i++) {
        for (size_t k = 0; k < last; k++) {
            double phase = 2 * M_PI * profile->length_nm[k] * data.s[i], square = size[k] * size[k];
            by_point[i] += (k == 0 ? 1 : 2) * step * data.step[i] * (cos(phase) * g_re[k] + sin(phase) * g_im[k]) / square;
        }
        height += by_point[i] * data.residual[i];
    }
    double breadth = scale / height, var = 0, level = 0;
    for (size_t i = 0; i < data.n; i++) {
        double slope = data.step[i] / height - scale / (height * height) * by_point[i];
        var += slope * slope * data.variance[i];
        level += slope;
    }
    var += level * level * data.background_variance;
    /* what the window and the truncation left to the Voigt: a tenth of the difference between the two breadths is
     * not known better than the Voigt is right there; it enters as a rectangular distribution */
    double completed = fabs(breadth - voigt_breadth);
    size_t at = profile->at_breadth * (profiles->n_covariance + 1);
    double instrument_part = 0;
    if (lines->from_instrument != NULL)
        instrument_part = profiles->covariance[at]; /* the fit's whole variance contains the instrument's part */
    double total = var + completed * completed / 3 + instrument_part;
    profiles->covariance[at] = fmax(total, 0);
    lw__set_breadth(profiles, profile, breadth, sqrt(profiles->covariance[at]));

    /* Refold: the truncated result times the instrument, against the data. What it can't follow is the part of the
     * residual whose lengths were cut off. */
    double chi2 = 0, lost = 0, net = 0;
    for (size_t i = 0; i < data.n; i++) {
        double follows = 0;
        for (size_t k = 0; k < last; k++) {
            double phase = 2 * M_PI * profile->length_nm[k] * data.s[i];
            double voigt = area / scale * lw__voigt_coefficient(gauss_s, lorentz_s, profile->length_nm[k]);
            double d_re = (cosine[k] - voigt) * scale, d_im = sine[k] * scale;
            double h_re = d_re * g_re[k] - d_im * g_im[k], h_im = d_re * g_im[k] + d_im * g_re[k];
            follows += (k == 0 ? 1 : 2) * step * (h_re * cos(phase) + h_im * sin(phase));
        }
        double r = data.residual[i] - follows;
        chi2 += r * r / data.variance[i];
        lost += r * r - data.variance[i];
        net += data.fitted[i] * data.fitted[i];
    }
    profile->refold_points = data.n;
    profile->refold_chi2 = data.n > 0 ? chi2 / (double)data.n : 0;
    profile->refold_p = lw_chi2_tail(chi2, (double)data.n);
    profile->refold_failed = profile->refold_p < 1e-6 && lost > 0.01 * net;

    size_t m = 161;
    double *curve[3];
    for (int i = 0; i < 3; i++)
        if ((curve[i] = lw_arena_take(&profiles->arena, m, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < m; j++) {
        double s = breadth * 0.05 * ((double)j - 80), sum = 0, var_sum = 0;
        for (size_t k = 0; k < last; k++) {
            double phase = 2 * M_PI * profile->length_nm[k] * s, twice = (k == 0 ? 1 : 2) * step;
            sum += twice * (cosine[k] * cos(phase) + sine[k] * sin(phase));
            var_sum += twice * twice * (u_cosine[k] * u_cosine[k] * cos(phase) * cos(phase) +
                                        u_sine[k] * u_sine[k] * sin(phase) * sin(phase));
        }
        curve[0][j] = s;
        curve[1][j] = sum;
        curve[2][j] = sqrt(var_sum);
    }
    profile->n_curve = m;
    profile->curve_s = curve[0];
    profile->curve_intensity = curve[1];
    profile->curve_u = curve[2];
    return LW_OK;
}

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options, lw_error *err)
{
    for (size_t k = 0; k < profiles->n; k++) {
        lw_arena scratch;
        lw_arena_begin(&scratch, engine);
        lw_status status = one_line(profiles, &profiles->profile[k], options, &scratch, err);
        lw_arena_end(&scratch);
        if (status == LW_OK)
            status = lw_engine_poll(engine, err);
        if (status != LW_OK)
            return status;
        lw_engine_progress(engine, "stokes", (double)(k + 1) / (double)profiles->n);
    }
    return LW_OK;
}

const lw_deconvolution lw_deconvolution_stokes = {
    .name = "stokes", .source = "Stokes (1948) Proc. Phys. Soc. London 61, 382", .run = run};
