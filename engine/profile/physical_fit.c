/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All lines of a scan at once, each with a physical shape of its own: lognormal spheres x Gaussian strain that is
 * correlated along the column. Every line has its area, place, size and strain; all share the width of the
 * distribution of sizes and the length over which strain is correlated; the background's Chebyshev terms are
 * fitted again, because tails of a shape that is too wide push it down. The form of the strain is not known: each
 * of a few is fitted, and they are averaged with weights exp(-chi2/2) (Burnham & Anderson 2002 Model Selection and
 * Multimodel Inference, 2nd ed., ch. 4), their scatter being part of the uncertainty. */
#include "profile/window.h"

#include "line/curve.h"
#include "numeric/cholesky.h"
#include "numeric/fft.h"
#include "numeric/least_squares.h"
#include "numeric/statistics.h"
#include "numeric/voigt.h"
#include "physics/intensity.h"

#include <math.h>
#include <string.h>

#define COLUMNS 6 /* value, place, size, strain, sigma, correlation length */
#define TAPS 6
#define STEPS 20 /* of the grid in the FWHM of a line */
#define BEYOND_MOST 8
#define NEAR 10 /* half-width of what counts for the curvature while iterating, in FWHM */
#define REACH 40 /* half-width of the grid in FWHM */

static const double degree = M_PI / 180;

typedef struct fit_line {
    const lw_profile *profile;
    lw__instrument instrument;
    size_t n_fft, n_lengths; /* lengths: up to where the instrument's coefficient has died */
    double grid, period;     /* nm^-1 */
    double *g;               /* [2 n_lengths], conjugate of the instrument's transform */
    lw_fft *plan;
    double *place, *factor;  /* [n]: s in grid steps; counts per unit of area (intensity x deg) */
    double *tail;            /* [n]: what a tail of unit kink adds: beyond the grid all, within it less its periodic images */
    size_t first, end;       /* points within the grid */
    size_t near_first, near_end; /* points that matter for the curvature */
    double kink;             /* of the instrument */
    size_t at_size, at_strain;
    double area_prior, area_u; /* of a line beyond the scan; area_u = 0: free */
} fit_line;

typedef struct fit {
    lw_engine *engine;
    const lw_profiles *profiles;
    size_t n, n_lines, n_all, n_terms, /* n_all: with lines that stand beyond the scan */
        n_parameters, at_terms, at_sigma, at_length;
    fit_line *line;
    const lw_strain_form *form;
    double *fixed, *weight, *term; /* [n], [n], [n_terms][n] */
    double *model, *jacobian;      /* [n], [n_parameters][n] */
    size_t *row_first, *row_end; /* [n_parameters] points at which a parameter matters while iterating */
    bool whole;                  /* for the covariance: everywhere */
    size_t n_used; /* lengths of the line in hand: up to where its coefficient has died */
    double *spectrum, *column[COLUMNS], *scratch;
    double **curve;                /* [n_all][n] */
    double sigma_prior, sigma_u, length_prior, length_u;
    /* sizes and strains of the lines are expected to scatter about a common one, fitted too (after a first round) */
    size_t at_common;       /* size, then strain */
    bool tied;
    double tie_u[2], member_tie[4][2];
} fit;

/* Integral breadth of the sample's own line by the fitted Voigt, nm^-1. */
static double voigt_breadth(const fit_line *line)
{
    return line->instrument.per_degree *
           lw_voigt_breadth(sqrt(line->profile->line->own_variance_deg2), line->profile->line->own_lorentz_deg);
}

static lw__shape shape_of(const fit *f, size_t k, const double *p)
{
    return (lw__shape){.strain = f->form, .size = p[f->line[k].at_size], .sigma = p[f->at_sigma],
                       .strain_parameter = {p[f->line[k].at_strain], p[f->at_length]}, .s = f->line[k].profile->s_per_nm};
}

/* Weights of six neighbouring grid points at a fraction 0 <= t < 1 between the third and the fourth (Lagrange). */
static void taps(double t, double w[TAPS])
{
    double a = t + 2, b = t + 1, c = t, d = t - 1, e = t - 2, g = t - 3;
    w[0] = -b * c * d * e * g / 120;
    w[1] = a * c * d * e * g / 24;
    w[2] = -a * b * d * e * g / 12;
    w[3] = a * b * c * e * g / 12;
    w[4] = -a * b * c * d * g / 24;
    w[5] = a * b * c * d * e / 120;
}

/* From grids of n_fft values to the points of the scan: out[c][n] = factor x (scale x grid + kink[c] x tail). */
static void to_points(const fit *f, const fit_line *line, size_t n_columns, double *const *column, const double *scale,
                      const double *kink, double *const *out, bool add)
{
    for (size_t c = 0; c < n_columns; c++)
        for (size_t i = 0; i < f->n; i++) {
            double value = kink[c] * line->tail[i] * line->factor[i];
            out[c][i] = add ? out[c][i] + value : value;
        }
    long n = (long)line->n_fft;
    for (size_t i = line->first; i < line->end; i++) {
        double whole = floor(line->place[i]), w[TAPS];
        taps(line->place[i] - whole, w);
        long at = (long)whole - 2;
        at = at < 0 ? at + n : at;
        for (size_t c = 0; c < n_columns; c++) {
            double sum = 0;
            if (at + TAPS <= n)
                for (int j = 0; j < TAPS; j++)
                    sum += w[j] * column[c][at + j];
            else
                for (int j = 0; j < TAPS; j++)
                    sum += w[j] * column[c][(at + j) % n];
            out[c][i] += sum * scale[c] * line->factor[i];
        }
    }
}

/* One column: transform a(L) x instrument x phase of the displacement (x 2 pi i L for its slope), back to the grid. */
static void back(fit *f, const fit_line *line, const double *a, size_t stride, double shift, bool slope, double *out)
{
    double *c = f->spectrum;
    memset(c, 0, 2 * (line->n_fft / 2 + 1) * sizeof *c);
    for (size_t k = 0; k < f->n_used; k++) {
        double length = (double)k / line->period, phase = -2 * M_PI * length * shift;
        double re = cos(phase), im = sin(phase), value = a[stride * k];
        double x = value * (line->g[2 * k] * re - line->g[2 * k + 1] * im);
        double y = value * (line->g[2 * k] * im + line->g[2 * k + 1] * re);
        c[2 * k] = slope ? 2 * M_PI * length * y : x;
        c[2 * k + 1] = slope ? -2 * M_PI * length * x : y;
    }
    lw_fft_back(line->plan, c, out);
}

static void evaluate_line(fit *f, size_t k, const double *p, bool slopes)
{
    fit_line *line = &f->line[k];
    lw__shape shape = shape_of(f, k, p);
    size_t row = 2 * k;
    double area = p[row], *a = f->scratch; /* [n_lengths][5] */
    f->n_used = 0;
    for (size_t i = 0; i < line->n_lengths; i++) {
        a[5 * i] = lw__shape_coefficient(&shape, (double)i / line->period, slopes ? &a[5 * i + 1] : NULL);
        f->n_used = i + 1;
        if (a[5 * i] < 1e-13)
            break;
    }
    double one = 1 / line->period, scale[COLUMNS], kink = line->kink + lw__shape_kink(&shape);
    back(f, line, a, 5, p[row + 1], false, f->column[0]);
    if (!slopes) {
        to_points(f, line, 1, f->column, (double[]){area * one}, (double[]){area * kink}, &f->curve[k], false);
        return;
    }
    back(f, line, a, 5, p[row + 1], true, f->column[1]);
    for (size_t c = 0; c < 4; c++)
        back(f, line, a + 1 + c, 5, p[row + 1], false, f->column[2 + c]);
    for (size_t c = 0; c < COLUMNS; c++)
        scale[c] = c == 0 ? one : area * one;
    double wide = 1.125 * exp(shape.sigma * shape.sigma); /* kink of the spheres over their size */
    double kinks[COLUMNS] = {kink, 0, area * wide, 0, area * 2 * shape.sigma * wide * shape.size, 0};
    double *out[COLUMNS] = {f->jacobian + f->n * row,           f->jacobian + f->n * (row + 1),
                            f->jacobian + f->n * line->at_size, f->jacobian + f->n * line->at_strain,
                            f->jacobian + f->n * f->at_sigma,   f->jacobian + f->n * f->at_length};
    to_points(f, line, COLUMNS, f->column, scale, kinks, out, true);
    for (size_t i = 0; i < f->n; i++)
        f->curve[k][i] = area * out[0][i];
}

/* Penalty that ties a line's size and strain loosely to the common ones. */
static void tie(const fit *f, const double *p, lw_normal *normal, double *chi2)
{
    size_t m = f->n_parameters, shared = 0;
    for (size_t k = 0; k < f->n_lines; k++)
        for (size_t i = 0; i < 2; i++) {
            size_t row = f->line[k].at_size + i, common = f->at_common + i;
            double w = 1 / (f->tie_u[i] * f->tie_u[i]), r = p[row] - p[common];
            if (f->line[k].profile->line->shared_width && shared++ > 1)
                break; /* they have one size and strain between them */
            *chi2 += r * r * w;
            if (normal == NULL)
                continue;
            normal->h[row * m + row] += w;
            normal->h[common * m + common] += w;
            normal->h[(row > common ? row : common) * m + (row > common ? common : row)] -= w;
            normal->g[row] -= r * w;
            normal->g[common] += r * w;
        }
}

static lw_status evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    fit *f = user;
    size_t n = f->n, m = f->n_parameters;
    if (want_normal)
        memset(f->jacobian, 0, n * m * sizeof(double));
    memcpy(f->model, f->fixed, n * sizeof(double));
    for (size_t t = 0; t < f->n_terms; t++)
        for (size_t i = 0; i < n; i++)
            f->model[i] += p[f->at_terms + t] * f->term[t * n + i];
    for (size_t k = 0; k < f->n_all; k++) {
        evaluate_line(f, k, p, want_normal);
        for (size_t i = 0; i < n; i++)
            f->model[i] += f->curve[k][i];
    }
    if (want_normal)
        memcpy(f->jacobian + n * f->at_terms, f->term, n * f->n_terms * sizeof(double));
    const double *y = f->profiles->lines->scan->intensity;
    double chi2 = 0;
    for (size_t i = 0; i < n; i++) {
        double r = y[i] - f->model[i];
        chi2 += r * r * f->weight[i];
        f->model[i] = r; /* residual from here on */
    }
    double sigma = (p[f->at_sigma] - f->sigma_prior) / f->sigma_u;
    double length = f->form->n > 1 ? (p[f->at_length] - f->length_prior) / f->length_u : 0;
    normal->chi2 = chi2 + sigma * sigma + length * length;
    for (size_t k = f->n_lines; k < f->n_all; k++) {
        double area = (p[2 * k] - f->line[k].area_prior) / f->line[k].area_u;
        normal->chi2 += area * area;
    }
    if (f->tied)
        tie(f, p, want_normal ? normal : NULL, &normal->chi2);
    if (want_normal) {
        for (size_t a = 0; a < m; a++) {
            double *row = f->jacobian + n * a, *weighed = f->scratch;
            for (size_t i = 0; i < n; i++)
                weighed[i] = row[i] * f->weight[i];
            normal->g[a] += lw_dot(weighed, f->model, n);
            for (size_t b = 0; b <= a; b++) {
                size_t first = f->whole ? 0 : f->row_first[a] > f->row_first[b] ? f->row_first[a] : f->row_first[b];
                size_t end = f->whole ? n : f->row_end[a] < f->row_end[b] ? f->row_end[a] : f->row_end[b];
                if (first < end)
                    normal->h[a * m + b] += lw_dot(weighed + first, f->jacobian + n * b + first, end - first);
            }
        }
        for (size_t k = f->n_lines; k < f->n_all; k++) {
            double u = f->line[k].area_u;
            normal->h[2 * k * m + 2 * k] += 1 / (u * u);
            normal->g[2 * k] -= (p[2 * k] - f->line[k].area_prior) / (u * u);
        }
        normal->h[f->at_sigma * m + f->at_sigma] += 1 / (f->sigma_u * f->sigma_u);
        normal->g[f->at_sigma] -= sigma / f->sigma_u;
        if (f->form->n > 1) {
            normal->h[f->at_length * m + f->at_length] += 1 / (f->length_u * f->length_u);
            normal->g[f->at_length] -= length / f->length_u;
        }
    }
    return lw_engine_poll(f->engine, err);
}

static lw_status prepare_line(fit *f, fit_line *line, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = f->profiles->lines;
    const lw_profile *profile = line->profile;
    lw_status status = lw__take_instrument(f->profiles, profile, arena, &line->instrument, err);
    if (status != LW_OK)
        return status;
    double d = line->instrument.per_degree, centre = 0;
    line->place = lw_arena_take(arena, f->n, sizeof(double), err);
    line->factor = lw_arena_take(arena, f->n, sizeof(double), err);
    line->tail = lw_arena_take(arena, f->n, sizeof(double), err);
    if (line->place == NULL || line->factor == NULL || line->tail == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < line->instrument.n; i++) {
        centre += line->instrument.node[i].weight * line->instrument.node[i].offset * d;
        line->kink += line->instrument.node[i].weight * M_PI * d * (line->instrument.lorentz + line->instrument.node[i].lorentz);
    }
    /* The grid covers the line; further out the tail is what the kink of the coefficients at L = 0 makes of it,
     * kink/(2 pi^2 s^2). The six-point interpolation needs steps that are small against the narrowest feature. */
    double width = d * lw_voigt_fwhm(sqrt(line->instrument.variance + profile->line->own_variance_deg2),
                                     line->instrument.lorentz + profile->line->own_lorentz_deg);
    line->grid = width / STEPS;
    line->n_fft = lw_fft_length((size_t)(2 * (REACH * width + fabs(centre)) / line->grid));
    line->period = (double)line->n_fft * line->grid;
    line->first = f->n;
    for (size_t i = 0; i < f->n; i++) {
        double x = lines->scan->two_theta_deg[i], s = d * lw_line_offset(lines, profile->line, x);
        line->place[i] = s / line->grid;
        line->factor[i] = d * lw_line_relative_factor(lines, profile->line, x);
        bool inside = fabs(s) < 0.48 * line->period;
        s -= centre;
        if (inside) {
            double t = M_PI * s / line->period, images = fabs(t) < 1e-2 ? 1 + t * t / 5 : 3 / (sin(t) * sin(t)) - 3 / (t * t);
            line->tail[i] = -images / (6 * line->period * line->period);
            line->first = i < line->first ? i : line->first;
            line->end = i + 1;
            if (fabs(s) < NEAR * width) {
                line->near_first = line->near_end == 0 ? i : line->near_first;
                line->near_end = i + 1;
            }
        } else {
            line->tail[i] = 1 / (2 * M_PI * M_PI * s * s);
        }
    }
    if (line->end == 0)
        line->first = 0;
    if ((line->plan = lw_fft_plan(f->engine, line->n_fft, LW_FFT_REAL, LW_FFT_MANY, err)) == NULL)
        return err->status;
    size_t most = line->n_fft / 2;
    line->g = lw_arena_take(arena, 2 * most, sizeof(double), err);
    double *re = lw_arena_take(arena, most, sizeof(double), err), *im = lw_arena_take(arena, most, sizeof(double), err);
    if (line->g == NULL || re == NULL || im == NULL)
        return LW_OUT_OF_MEMORY;
    lw__instrument_transform(&line->instrument, 1 / line->period, most, re, im);
    for (size_t k = 0; k < most; k++) {
        line->g[2 * k] = re[k];
        line->g[2 * k + 1] = -im[k];
        line->n_lengths = k + 1;
        if (fabs(re[k]) + fabs(im[k]) < 1e-11 && k > 8)
            break;
    }
    return LW_OK;
}

/* Lines that stand beyond the ends of the scan but reach into it: their places follow from the nearest line by the
 * cell, their shape is its, and their area is expected from multiplicity and geometry, at equal structure factors,
 * within a half: a tail alone hardly tells it from background. */
static lw_status lines_beyond(fit *f, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = f->profiles->lines;
    const lw_scan *scan = lines->scan;
    f->n_all = f->n_lines;
    if (lines->material == NULL)
        return LW_OK;
    double wavelength = lw_radiation_wavelength(&lines->radiation);
    lw_reflection *all;
    size_t n;
    lw_status status = lw_reflections(lines->material, wavelength, 2, 178, arena, &all, &n, err);
    for (size_t i = 0; i < n && status == LW_OK && f->n_all < f->n_lines + BEYOND_MOST; i++) {
        bool above = all[i].two_theta_deg > scan->two_theta_deg[scan->n - 1];
        if (!above && all[i].two_theta_deg > scan->two_theta_deg[0])
            continue;
        const fit_line *near = &f->line[above ? f->n_lines - 1 : 0];
        const lw_line *from = near->profile->line;
        double ratio = sin(from->two_theta.value * degree / 2) * 2 * from->reflection.d_nm / wavelength;
        double sine = wavelength / (2 * all[i].d_nm) * ratio, per_degree = lw__s_per_degree(f->profiles, near->profile);
        if (!(sine < 0.9998) || fabs(near->profile->s_per_nm - 2 * sine / wavelength) > 4 * from->breadth.value * per_degree)
            continue;
        lw_line *line = lw_arena_copy(arena, from, 1, sizeof *line, err);
        lw_profile *profile = lw_arena_copy(arena, near->profile, 1, sizeof *profile, err);
        if (line == NULL || profile == NULL)
            return LW_OUT_OF_MEMORY;
        line->reflection = all[i];
        line->two_theta.value = line->nominal_deg = 2 * asin(sine) / degree;
        if (line->two_theta.value > scan->two_theta_deg[0] && line->two_theta.value < scan->two_theta_deg[scan->n - 1])
            continue; /* a line of the scan that was not looked for */
        profile->line = line;
        profile->theta_deg = near->profile->theta_deg + 0.5 * (line->two_theta.value - from->two_theta.value);
        profile->s_per_nm = near->profile->s_per_nm * from->reflection.d_nm / all[i].d_nm;
        if (!(profile->theta_deg > 0 && profile->theta_deg < 89))
            continue;
        fit_line *added = &f->line[f->n_all++];
        added->profile = profile;
        added->area_prior = from->area.value * all[i].multiplicity / from->reflection.multiplicity *
                            lw_lorentz_polarisation(line->two_theta.value, 0) /
                            lw_lorentz_polarisation(from->two_theta.value, 0);
        added->area_u = 0.5 * added->area_prior;
    }
    return status;
}

static lw_status prepare(fit *f, lw_engine *engine, const lw_profiles *profiles, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    *f = (fit){.engine = engine, .profiles = profiles, .n = lines->scan->n, .n_lines = profiles->n};
    f->n_terms = lines->n_background > 0 ? lines->n_background : 1;
    f->line = lw_arena_take(arena, f->n_lines + BEYOND_MOST, sizeof *f->line, err);
    f->curve = lw_arena_take(arena, f->n_lines + BEYOND_MOST, sizeof *f->curve, err);
    double **column[] = {&f->fixed, &f->weight, &f->model};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(arena, f->n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    f->term = lw_arena_take(arena, f->n * f->n_terms, sizeof(double), err);
    if (f->line == NULL || f->curve == NULL || f->term == NULL)
        return LW_OUT_OF_MEMORY;
    /* rows: area and place of each line, sizes and strains (one for all lines that were widened together), terms of
     * the background, sigma, correlation length */
    for (size_t k = 0; k < f->n_lines; k++)
        f->line[k].profile = &profiles->profile[k];
    lw_status status = lines_beyond(f, arena, err);
    size_t row = 2 * f->n_all, shared = 0, longest = 0, lengths = 0;
    double breadth_sum = 0;
    for (size_t k = 0; k < f->n_all && status == LW_OK; k++) {
        fit_line *line = &f->line[k];
        status = prepare_line(f, line, arena, err);
        if ((f->curve[k] = lw_arena_take(arena, f->n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
        longest = line->n_fft > longest ? line->n_fft : longest;
        lengths = line->n_lengths > lengths ? line->n_lengths : lengths;
        if (k >= f->n_lines) { /* shapes of the nearest line */
            line->at_size = f->line[line->profile->s_per_nm > f->line[0].profile->s_per_nm ? f->n_lines - 1 : 0].at_size;
            line->at_strain = line->at_size + 1;
            continue;
        }
        if (!line->profile->line->shared_width || shared == 0) {
            line->at_size = row++;
            line->at_strain = row++;
            if (line->profile->line->shared_width)
                shared = line->at_size;
        } else {
            line->at_size = shared;
            line->at_strain = shared + 1;
        }
        breadth_sum += log(fmax(voigt_breadth(line), 1e-4));
    }
    if (status != LW_OK)
        return status;
    f->at_terms = row;
    f->at_sigma = row + f->n_terms;
    f->at_length = f->at_sigma + 1;
    f->at_common = f->at_length + 1;
    f->n_parameters = f->at_common + 2;
    f->row_first = lw_arena_take(arena, f->n_parameters, sizeof(size_t), err);
    f->row_end = lw_arena_take(arena, f->n_parameters, sizeof(size_t), err);
    if (f->row_first == NULL || f->row_end == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < f->n_parameters; i++) {
        f->row_first[i] = i < f->at_terms ? f->n : 0;
        f->row_end[i] = i < f->at_terms || i >= f->at_common ? 0 : f->n;
    }
    for (size_t k = 0; k < f->n_all; k++) {
        const fit_line *line = &f->line[k];
        size_t rows[4] = {2 * k, 2 * k + 1, line->at_size, line->at_strain};
        for (int i = 0; i < 4; i++) {
            size_t r = rows[i];
            f->row_first[r] = line->near_first < f->row_first[r] ? line->near_first : f->row_first[r];
            f->row_end[r] = line->near_end > f->row_end[r] ? line->near_end : f->row_end[r];
        }
    }
    /* What is known of the two shared parameters beforehand: milled and precipitated powders have sigma near 0.35
     * (Langford, Louer & Scardi 2000 J. Appl. Cryst. 33, 964, and their like); strain is correlated over less
     * than a crystal. Wide enough for the data to overrule. */
    f->sigma_prior = 0.35;
    f->sigma_u = 0.15;
    f->length_prior = -breadth_sum / (double)f->n_lines - 0.7;
    f->length_u = 1;
    f->jacobian = lw_arena_take(arena, f->n * f->n_parameters, sizeof(double), err);
    f->spectrum = lw_arena_take(arena, longest + 2, sizeof(double), err);
    f->scratch = lw_arena_take(arena, (5 * lengths > f->n ? 5 * lengths : f->n) + 1, sizeof(double), err);
    for (int c = 0; c < COLUMNS; c++)
        if ((f->column[c] = lw_arena_take(arena, longest, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    if (f->jacobian == NULL || f->spectrum == NULL || f->scratch == NULL)
        return LW_OUT_OF_MEMORY;
    /* lines too weak to be widened by themselves stay as they were fitted */
    double *voigt = lw_arena_take(arena, f->n, sizeof *voigt, err);
    if (voigt == NULL)
        return LW_OUT_OF_MEMORY;
    memcpy(f->fixed, lines->background, f->n * sizeof(double));
    for (size_t k = 0; k < lines->n; k++) {
        if (lines->line[k].supported)
            continue;
        lw_status status = lw_line_curve(lines, &lines->line[k], f->n, lines->scan->two_theta_deg, voigt, err);
        if (status != LW_OK)
            return status;
        for (size_t i = 0; i < f->n; i++)
            f->fixed[i] += voigt[i];
    }
    double first = lines->scan->two_theta_deg[0], last = lines->scan->two_theta_deg[f->n - 1];
    for (size_t i = 0; i < f->n; i++) {
        double t = 2 * (lines->scan->two_theta_deg[i] - first) / (last - first) - 1;
        f->weight[i] = 1 / lines->variance[i];
        for (size_t j = 0; j < f->n_terms; j++)
            f->term[j * f->n + i] = j == 0 ? 1 : j == 1 ? t : 2 * t * f->term[(j - 1) * f->n + i] - f->term[(j - 2) * f->n + i];
    }
    return LW_OK;
}

/* A share of the least breadth as size, the rest of each line as strain. */
static void start(const fit *f, double share, double *p)
{
    double least = INFINITY;
    for (size_t k = 0; k < f->n_lines; k++)
        least = fmin(least, voigt_breadth(&f->line[k]));
    double size = fmax(share * least, 2e-4);
    for (size_t k = 0; k < f->n_all; k++) {
        const fit_line *line = &f->line[k];
        double breadth = voigt_breadth(line), s = line->profile->s_per_nm;
        p[2 * k] = line->area_u > 0 ? line->area_prior : line->profile->line->area.value;
        p[2 * k + 1] = 0;
        if (k >= f->n_lines)
            continue;
        p[line->at_size] = size;
        p[line->at_strain] = fmax(breadth * breadth - size * size, 0.04 * size * size) / (2 * M_PI * s * s);
    }
    p[f->at_sigma] = f->sigma_prior;
    p[f->at_length] = f->length_prior;
    p[f->at_common] = size;
    p[f->at_common + 1] = 0;
}

/* After the first round: the common size and strain, and how far lines may be from them: a third of the
 * size and a half of the mean square strain, as shapes of crystals and elastic anisotropy make it, and never less than
 * what a tenth of the breadth comes from. */
static void begin_ties(fit *f, double *p)
{
    double sum[2] = {0}, weight[2] = {0}, least[2] = {INFINITY, INFINITY};
    for (size_t k = 0; k < f->n_lines; k++) {
        double s = f->line[k].profile->s_per_nm, breadth = voigt_breadth(&f->line[k]);
        double small[2] = {0.1 * breadth, 0.02 * breadth * breadth / (2 * M_PI * s * s)};
        for (size_t i = 0; i < 2; i++) {
            double w = f->line[k].profile->line->area.value / fmax(f->line[k].profile->line->area.u, 1e-300);
            sum[i] += w * p[f->line[k].at_size + i];
            weight[i] += w;
            least[i] = fmin(least[i], small[i]);
        }
    }
    for (size_t i = 0; i < 2; i++) {
        p[f->at_common + i] = sum[i] / weight[i];
        f->tie_u[i] = fmax((i == 0 ? 0.35 : 0.5) * p[f->at_common + i], least[i]);
    }
}

/* Covariance of all parameters and, by_breadth[n_lines][2], what the instrument's two widths at one line do to the
 * breadths: the parameters' answer to a model that is wider there. */
static lw_status member_covariance(fit *f, const double *p, const bool *held, double inflate, lw__physical_fit *out,
                                   size_t member, double *breadth, double *covariance, lw_arena *scratch, lw_error *err)
{
    size_t m = f->n_parameters, n = f->n, lines = f->n_lines, weakest;
    double *h = lw_arena_take(scratch, m * m, sizeof *h, err), *g = lw_arena_take(scratch, m, sizeof *g, err);
    double *c = lw_arena_take(scratch, m * m, sizeof *c, err), *wide = lw_arena_take(scratch, 2 * n, sizeof *wide, err);
    double *by = lw_arena_take(scratch, lines * m, sizeof *by, err);
    double(*answer)[2] = lw_arena_take(scratch, lines * lines, sizeof *answer, err); /* [breadth a][widths at line k] */
    double *response = lw_arena_take(scratch, m, sizeof *response, err);
    if (!h || !g || !c || !wide || !by || !answer || !response)
        return LW_OUT_OF_MEMORY;
    lw_normal normal = {.n = m, .h = h, .g = g};
    f->whole = true;
    lw_status status = evaluate(f, p, true, &normal, err);
    if (status == LW_OK)
        status = lw_invert_normal(f->engine, h, m, held, c, &weakest, err);
    if (status != LW_OK)
        return status;
    for (size_t k = 0; k < lines; k++) {
        lw__shape shape = shape_of(f, k, p);
        double slope[4];
        size_t at[4] = {f->line[k].at_size, f->line[k].at_strain, f->at_sigma, f->at_length};
        breadth[k] = lw__shape_breadth(&shape, slope);
        out->shape[member][k] = shape;
        for (int i = 0; i < 4; i++) {
            by[k * m + at[i]] = slope[i];
            for (int j = 0; j < 4; j++)
                out->shape_covariance[member][16 * k + (size_t)(4 * i + j)] = inflate * c[at[i] * m + at[j]];
        }
    }
    for (size_t k = 0; k < lines; k++) {
        fit_line *line = &f->line[k];
        lw__shape shape = shape_of(f, k, p);
        double d = line->instrument.per_degree, *a = f->scratch;
        for (int i = 0; i < 2; i++) {
            f->n_used = line->n_lengths;
            for (size_t j = 0; j < line->n_lengths; j++) {
                double length = (double)j / line->period, x = d * length;
                a[j] = lw__shape_coefficient(&shape, length, NULL) *
                       (i == 0 ? -M_PI * M_PI / (4 * M_LN2) * x * x : -M_PI * x);
            }
            back(f, line, a, 1, p[2 * k + 1], false, f->column[0]);
            to_points(f, line, 1, f->column, (double[]){p[2 * k] / line->period},
                      (double[]){i == 0 ? 0 : p[2 * k] * M_PI * d}, &wide, false);
            for (size_t j = 0; j < n; j++)
                wide[j] *= f->weight[j];
            for (size_t q = 0; q < m; q++)
                g[q] = lw_dot(wide, f->jacobian + n * q, n);
            for (size_t q = 0; q < m; q++)
                response[q] = -lw_dot(c + q * m, g, m);
            for (size_t b = 0; b < lines; b++)
                answer[b * lines + k][i] = lw_dot(by + b * m, response, m);
        }
    }
    for (size_t a = 0; a < lines; a++)
        for (size_t b = 0; b < lines; b++) {
            double sum = 0;
            for (size_t q = 0; q < m; q++)
                for (size_t r = 0; r < m; r++)
                    sum += inflate * by[a * m + q] * c[q * m + r] * by[b * m + r];
            for (size_t k = 0; k < lines; k++)
                for (size_t l = 0; l < lines; l++)
                    sum += lw__from_instrument(f->profiles, f->line[k].profile, answer[a * lines + k],
                                               f->line[l].profile, answer[b * lines + l]);
            covariance[a * lines + b] = sum;
        }
    return LW_OK;
}

/* By how much variances are enlarged, of the residuals that the last evaluation left: where chi2 is beyond chance by
 * it, and where neighbours' residuals go together by their long-run variance, as in the fit of lines. */
static double misfit_factor(const fit *f)
{
    const lw_scan *scan = f->profiles->lines->scan;
    double square = 0, step = 0, before = 0, freedom = fmax((double)f->n - (double)f->n_parameters, 1);
    for (size_t i = 0; i < f->n; i++) {
        double z = f->model[i] * sqrt(f->weight[i]);
        square += z * z;
        step += i > 0 ? (z - before) * (z - before) : 0;
        before = z;
    }
    double rho = square > 0 ? 1 - step / (2 * square) - scan->correlation : 0;
    double factor = (1 + scan->correlation) / (1 - scan->correlation);
    if (lw_chi2_tail(square, freedom) < 1e-3)
        factor *= square / freedom;
    if (rho > 3 / sqrt((double)f->n))
        factor *= (1 + fmin(rho, 0.9)) / (1 - fmin(rho, 0.9));
    return fmax(factor, 1);
}

static lw_status fit_members(fit *f, lw_arena *arena, lw__separation *out, lw__physical_fit *result, lw_error *err)
{
    static const lw_strain_form *const forms[] = {&lw_strain_constant, &lw_strain_correlated,
                                                  &lw_strain_gaussian_correlated};
    const size_t n_forms = sizeof forms / sizeof *forms;
    size_t m = f->n_parameters, lines = f->n_lines, best = 0;
    double *p[4], *breadth[4], *covariance[4], *other = lw_arena_take(arena, m, sizeof *other, err), *lower = lw_arena_take(arena, m, sizeof *lower, err);
    double *upper = lw_arena_take(arena, m, sizeof *upper, err);
    bool *held = lw_arena_take(arena, m, sizeof *held, err), *at_bound = lw_arena_take(arena, m, sizeof *at_bound, err);
    if (!other || !lower || !upper || !held || !at_bound)
        return LW_OUT_OF_MEMORY;
    result->n_members = n_forms;
    for (size_t i = 0; i < n_forms; i++) {
        p[i] = lw_arena_take(arena, m, sizeof **p, err);
        breadth[i] = lw_arena_take(arena, lines, sizeof **breadth, err);
        covariance[i] = lw_arena_take(arena, lines * lines, sizeof **covariance, err);
        result->shape[i] = lw_arena_take(arena, lines, sizeof **result->shape, err);
        result->shape_covariance[i] = lw_arena_take(arena, 16 * lines, sizeof(double), err);
        if (!p[i] || !breadth[i] || !covariance[i] || !result->shape[i] || !result->shape_covariance[i])
            return LW_OUT_OF_MEMORY;
    }
    for (size_t i = 0; i < m; i++) {
        lower[i] = -INFINITY;
        upper[i] = INFINITY;
    }
    for (size_t k = 0; k < f->n_all; k++) {
        double reach = f->line[k].grid * STEPS;
        lower[2 * k + 1] = -reach;
        upper[2 * k + 1] = reach;
        held[2 * k + 1] = k >= lines;
        if (k >= lines)
            lower[2 * k] = 0;
        lower[f->line[k].at_size] = 1e-5;
        upper[f->line[k].at_size] = 2;
        lower[f->line[k].at_strain] = 0;
    }
    lower[f->at_sigma] = 0.05;
    upper[f->at_sigma] = 0.8;
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-8;
    control.step_tolerance = 0.01;
    control.iterations_most = 60;
    for (size_t i = 0; i < n_forms; i++) {
        f->form = forms[i];
        f->whole = false;
        held[f->at_length] = f->form->n < 2;
        lower[f->at_length] = f->form->n < 2 ? -INFINITY : fmax(f->form->least[1], f->length_prior - 4);
        upper[f->at_length] = f->form->n < 2 ? INFINITY : fmax(f->form->most[1], f->length_prior);
        lw_problem problem = {.n = m, .lower = lower, .upper = upper, .fixed = held, .evaluate = evaluate, .user = f};
        lw_fit_outcome outcome = {.chi2 = INFINITY};
        /* first with the shared parameters as expected, or a wide distribution takes the place of strain; from two
         * starts, since size and strain are two valleys when strain is correlated */
        lw_fit_control rough = control;
        rough.chi2_tolerance = 1e-4;
        rough.step_tolerance = 0.3;
        held[f->at_sigma] = held[f->at_length] = held[f->at_common] = held[f->at_common + 1] = true;
        f->tied = false;
        lw_status status = LW_OK;
        double least = INFINITY;
        for (int from = 0; from < 2 && status == LW_OK; from++) {
            if (from == 1 && i >= 2)
                memcpy(other, p[i - 1], m * sizeof *other);
            else
                start(f, from == 0 ? 0.85 : 0.5, other);
            status = lw_least_squares(f->engine, &problem, &rough, other, at_bound, &outcome, err);
            if (outcome.chi2 < least) {
                least = outcome.chi2;
                memcpy(p[i], other, m * sizeof *other);
            }
        }
        f->tied = true;
        held[f->at_sigma] = held[f->at_common] = held[f->at_common + 1] = false;
        held[f->at_length] = f->form->n < 2;
        for (int round = 0; round < 3 && status == LW_OK; round++) { /* how wide the ties are depends on the outcome */
            double before = f->tie_u[1];
            begin_ties(f, p[i]);
            if (round > 0 && fabs(f->tie_u[1] / before - 1) < 0.1) {
                f->tie_u[1] = before;
                break;
            }
            memcpy(f->member_tie[i], f->tie_u, sizeof f->tie_u);
            status = lw_least_squares(f->engine, &problem, &control, p[i], at_bound, &outcome, err);
        }
        if (status != LW_OK)
            return status;
        if (!isfinite(outcome.chi2))
            return lw_fail_at(err, LW_NO_CONVERGENCE, f->profiles->lines->scan->file, 0, "use method = convolution",
                              "the fit of physical shapes found no start");
        result->form[i] = f->form->name;
        result->chi2[i] = outcome.chi2;
        best = outcome.chi2 < result->chi2[best] ? i : best;
    }
    f->form = forms[best];
    f->tied = false;
    lw_normal left = {.n = m};
    lw_status looked = evaluate(f, p[best], false, &left, err);
    if (looked != LW_OK)
        return looked;
    result->goodness = result->chi2[best] / fmax((double)f->n - (double)m, 1);
    f->tied = true;
    double inflate = misfit_factor(f), sum = 0;
    for (size_t i = 0; i < n_forms; i++) {
        result->weight[i] = exp(-0.5 * (result->chi2[i] - result->chi2[best]) / inflate);
        sum += result->weight[i];
    }
    for (size_t i = 0; i < n_forms; i++)
        result->weight[i] /= sum;
    for (size_t i = 0; i < n_forms; i++) {
        lw_arena scratch;
        lw_arena_begin(&scratch, f->engine);
        f->form = forms[i];
        memcpy(f->tie_u, f->member_tie[i], sizeof f->tie_u);
        for (size_t j = 0; j < m; j++) {
            held[j] = (j == f->at_length && f->form->n < 2) || (j >= 2 * lines && j < 2 * f->n_all && j % 2 == 1);
        }
        for (size_t k = 0; k < lines; k++) { /* what rests on a bound has no freedom left */
            held[f->line[k].at_size] |= p[i][f->line[k].at_size] <= 1.0001e-5;
            held[f->line[k].at_strain] |= p[i][f->line[k].at_strain] <= 0;
        }
        lw_status status = result->weight[i] < 1e-4 ? LW_OK
                                                    : member_covariance(f, p[i], held, inflate, result, i, breadth[i],
                                                                        covariance[i], &scratch, err);
        lw_arena_end(&scratch);
        if (status != LW_OK)
            return status;
        if (result->weight[i] < 1e-4)
            result->weight[i] = 0;
    }
    result->breadth = lw_arena_take(arena, lines, sizeof(double), err);
    result->covariance = lw_arena_take(arena, lines * lines, sizeof(double), err);
    if (!result->breadth || !result->covariance)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n_forms; i++)
        for (size_t k = 0; k < lines; k++)
            result->breadth[k] += result->weight[i] * breadth[i][k];
    for (size_t i = 0; i < n_forms; i++)
        for (size_t a = 0; a < lines; a++)
            for (size_t b = 0; b < lines; b++)
                result->covariance[a * lines + b] +=
                    result->weight[i] * (covariance[i][a * lines + b] + (breadth[i][a] - result->breadth[a]) *
                                                                            (breadth[i][b] - result->breadth[b]));
    /* the best member takes the scan apart */
    f->form = forms[best];
    lw_normal normal = {.n = m};
    lw_status status = evaluate(f, p[best], false, &normal, err);
    for (size_t i = 0; i < f->n && status == LW_OK; i++) {
        out->residual[i] = f->model[i];
        out->background[i] = f->profiles->lines->background[i];
        for (size_t t = 0; t < f->n_terms; t++)
            out->background[i] += p[best][f->at_terms + t] * f->term[t * f->n + i];
    }
    for (size_t k = 0; k < lines; k++)
        out->line[k] = (lw__separated){.shape = shape_of(f, k, p[best]), .curve = f->curve[k], .shift_s = p[best][2 * k + 1],
                                       .area_s = p[best][2 * k] * f->line[k].instrument.per_degree};
    return status;
}

lw_status lw__separate_by_physics(lw_engine *engine, const lw_profiles *profiles, lw_arena *arena,
                                  lw__separation *out, lw__physical_fit *result, lw_error *err)
{
    fit f;
    *result = (lw__physical_fit){0};
    *out = (lw__separation){.how = "lines separated and their tails completed by fitted physical shapes"};
    out->line = lw_arena_take(arena, profiles->n, sizeof *out->line, err);
    out->background = lw_arena_take(arena, profiles->lines->scan->n, sizeof(double), err);
    out->residual = lw_arena_take(arena, profiles->lines->scan->n, sizeof(double), err);
    if (!out->line || !out->background || !out->residual)
        return LW_OUT_OF_MEMORY;
    lw_status status = prepare(&f, engine, profiles, arena, err);
    return status == LW_OK ? fit_members(&f, arena, out, result, err) : status;
}
