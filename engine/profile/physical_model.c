/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/physical_model.h"

#include "numeric/cholesky.h"
#include "numeric/voigt.h"

#include <math.h>
#include <string.h>

#define TAPS 6

double lw__physical_voigt_breadth(const lw__physical_line *line)
{
    return line->instrument.per_degree * lw_voigt_breadth(sqrt(line->profile->line->own_variance_deg2),
                                                          line->profile->line->own_lorentz_deg);
}

lw__shape lw__physical_shape(const lw__physical *f, size_t k, const double *p)
{
    return (lw__shape){.strain = f->form,
                       .size = p[f->line[k].at_size],
                       .sigma = p[f->at_sigma],
                       .strain_parameter = {p[f->line[k].at_strain], p[f->at_length]},
                       .s = f->line[k].profile->s_per_nm,
                       .spread = f->spread};
}

/* Weights of six neighbouring grid points at a fraction 0 <= t < 1 between the third and the fourth
 * (Lagrange). */
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

/* From grids of n_fft values to the points of the scan: out[c][n] = factor x (scale x grid + kink[c] x tail).
 */
static void to_points(const lw__physical *f, const lw__physical_line *line, size_t n_columns,
                      double *const *column, const double *scale, const double *kink, double *const *out,
                      bool add)
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

/* One column: transform a(L) x instrument x phase of the displacement (x 2 pi i L for its slope), back to the
 * grid. */
static void back(lw__physical *f, const lw__physical_line *line, const double *a, size_t stride, double shift,
                 bool slope, double *out)
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

static void evaluate_line(lw__physical *f, size_t k, const double *p, bool slopes)
{
    lw__physical_line *line = &f->line[k];
    lw__shape shape = lw__physical_shape(f, k, p);
    size_t row = 2 * k;
    double area = p[row], *a = f->scratch; /* [n_lengths][5] */
    f->n_used = 0;
    for (size_t i = 0; i < line->n_lengths; i++) {
        a[5 * i] = lw__shape_coefficient(&shape, (double)i / line->period, slopes ? &a[5 * i + 1] : NULL);
        f->n_used = i + 1;
        if (a[5 * i] < 1e-13)
            break;
    }
    double one = 1 / line->period, scale[LW__PHYSICAL_COLUMNS], kink = line->kink + lw__shape_kink(&shape);
    back(f, line, a, 5, p[row + 1], false, f->column[0]);
    if (!slopes) {
        to_points(f, line, 1, f->column, (double[]){area * one}, (double[]){area * kink}, &f->curve[k],
                  false);
        return;
    }
    back(f, line, a, 5, p[row + 1], true, f->column[1]);
    for (size_t c = 0; c < 4; c++)
        back(f, line, a + 1 + c, 5, p[row + 1], false, f->column[2 + c]);
    for (size_t c = 0; c < LW__PHYSICAL_COLUMNS; c++)
        scale[c] = c == 0 ? one : area * one;
    double wide = 1.125 * exp(shape.sigma * shape.sigma); /* kink of the spheres over their size */
    double kinks[LW__PHYSICAL_COLUMNS] = {kink, 0, area * wide, 0, area * 2 * shape.sigma * wide * shape.size,
                                          0};
    double *out[LW__PHYSICAL_COLUMNS] = {
        f->jacobian + f->n * row,           f->jacobian + f->n * (row + 1),
        f->jacobian + f->n * line->at_size, f->jacobian + f->n * line->at_strain,
        f->jacobian + f->n * f->at_sigma,   f->jacobian + f->n * f->at_length};
    to_points(f, line, LW__PHYSICAL_COLUMNS, f->column, scale, kinks, out, true);
    for (size_t i = 0; i < f->n; i++)
        f->curve[k][i] = area * out[0][i];
}

/* Penalty that ties a line's size and strain loosely to the common ones. */
static void tie(const lw__physical *f, const double *p, lw_normal *normal, double *chi2)
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

lw_status lw__physical_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal,
                                lw_error *err)
{
    lw__physical *f = user;
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
                size_t first = f->whole                            ? 0
                               : f->row_first[a] > f->row_first[b] ? f->row_first[a]
                                                                   : f->row_first[b];
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

void lw__physical_widened(lw__physical *f, size_t k, const double *p, int which, double *out)
{
    const lw__physical_line *line = &f->line[k];
    lw__shape shape = lw__physical_shape(f, k, p);
    double d = line->instrument.per_degree, *a = f->scratch;
    f->n_used = line->n_lengths;
    for (size_t j = 0; j < line->n_lengths; j++) {
        double length = (double)j / line->period, x = d * length;
        a[j] = lw__shape_coefficient(&shape, length, NULL) *
               (which == 0 ? -M_PI * M_PI / (4 * M_LN2) * x * x : -M_PI * x);
    }
    back(f, line, a, 1, p[2 * k + 1], false, f->column[0]);
    to_points(f, line, 1, f->column, (double[]){p[2 * k] / line->period},
              (double[]){which == 0 ? 0 : p[2 * k] * M_PI * d}, &out, false);
}
