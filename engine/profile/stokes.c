/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Stokes' quotient of Fourier coefficients, F(L) = H(L)/G(L).
 * The instrument G (widths, axial copies and the whole emission spectrum) has closed coefficients. The
 * observed H is the transform of the line's fitted curve, in closed form, plus that of what the curve left
 * over inside the window: the tails beyond the window, which a window alone would cut (its error grows as
 * 1/window for tails that fall as 1/s^2), are so completed by the curve's shape, and only the data's
 * departure from it is transformed. Sums run over the points as measured, so nothing is interpolated and each
 * point's noise propagates to each coefficient exactly. Beyond the truncation the coefficients are the
 * shape's. */
#include "profile/line_by_line.h"

#include "numeric/cholesky.h"

#include <math.h>

/* Where the coefficients go under: three in a row below twice their uncertainty, or the instrument's own
 * coefficient below 2 % of its start, where a division by it makes anything of nothing. */
static size_t truncation(const lw_profile *profile, const double *g_re, const double *g_im, const char **why)
{
    size_t under = 0;
    for (size_t i = 1; i < profile->n_coefficients; i++) {
        if (hypot(g_re[i], g_im[i]) < 0.02) {
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

/* Waves of the transform at the window's points: wave[2k] the cosines, wave[2k + 1] the sines of length k. */
static double **waves(const lw__job *job, size_t n, lw_arena *scratch, lw_error *err)
{
    double **wave = lw_arena_take(scratch, 2 * n, sizeof *wave, err);
    for (size_t k = 0; k < 2 * n && wave != NULL; k++)
        if ((wave[k] = lw_arena_take(scratch, job->data.n, sizeof(double), err)) == NULL)
            return NULL;
    if (wave == NULL)
        return NULL;
    for (size_t i = 0; i < job->data.n; i++) {
        double phase = 2 * M_PI * (n > 1 ? job->profile->length_nm[1] : 0) * job->data.s[i];
        double turn_re = cos(phase), turn_im = sin(phase), x = 1, y = 0;
        for (size_t k = 0; k < n; k++) {
            wave[2 * k][i] = x;
            wave[2 * k + 1][i] = y;
            double next = x * turn_re - y * turn_im;
            y = x * turn_im + y * turn_re;
            x = next;
        }
    }
    return wave;
}

/* Degrees of freedom that the refold leaves: the kept coefficients follow the residual r by M r, and the
 * expectation of the weighted square of (1 - M) r is n - 2 tr M + tr(M V M' V^-1). M = waves x taken x waves'
 * x steps. */
static double freedom(const lw__job *job, double *const *wave, const double *taken, size_t last, double *w,
                      double *v)
{
    const lw__window *data = &job->data;
    size_t n = data->n;
    double sum = (double)n, length = 0;
    for (size_t i = 0; i < n; i++)
        length += data->step[i];
    for (size_t a = 0; a < 2 * last; a++) {
        sum -= (a % 2 == 0 ? 2 : 0) * taken[a / 2] * length;
        for (size_t i = 0; i < n; i++) {
            w[i] = wave[a][i] / data->own_variance[i];
            v[i] = wave[a][i] * data->step[i] * data->step[i] * data->own_variance[i];
        }
        for (size_t b = 0; b <= a; b++)
            sum += (a == b ? 1 : 2) * taken[a / 2] * taken[b / 2] * lw_dot(w, wave[b], n) *
                   lw_dot(v, wave[b], n);
    }
    return sum;
}

/* Weight of a length in the join of data and shape: 1, or falling to 0 at the truncation (Hann). */
static double apodised(const lw__job *job, size_t k, size_t last)
{
    return job->options->apodise == 0 ? 1 : 0.5 * (1 + cos(M_PI * (double)k / (double)last));
}

static lw_status refold(const lw__job *job, double *const *wave, const double *r_re, const double *r_im,
                        size_t last, lw_arena *scratch, lw_error *err)
{
    const lw__window *data = &job->data;
    size_t n = data->n;
    double step = job->profile->length_nm[1];
    double *taken = lw_arena_take(scratch, last, sizeof *taken, err),
           *w = lw_arena_take(scratch, n, sizeof *w, err);
    double *v = lw_arena_take(scratch, n, sizeof *v, err);
    if (taken == NULL || w == NULL || v == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = lw__take_refold(job->profiles, job->profile, data->first, n, err);
    if (status != LW_OK)
        return status;
    for (size_t k = 0; k < last; k++)
        taken[k] = (k == 0 ? 1 : 2) * step * apodised(job, k, last);
    double chi2 = 0, lost = 0, net = 0, free = freedom(job, wave, taken, last, w, v);
    for (size_t i = 0; i < n; i++) {
        double follows = 0;
        for (size_t k = 0; k < last; k++)
            follows += taken[k] * (r_re[k] * wave[2 * k][i] + r_im[k] * wave[2 * k + 1][i]);
        double r = data->residual[i] - follows;
        chi2 += r * r / data->own_variance[i];
        lost += r * r - data->own_variance[i] * free / (double)n;
        net += data->curve[i] * data->curve[i];
        lw__set_refold_point(job->profile, i, data->curve[i] + data->residual[i], data->own_variance[i],
                             data->curve[i] + follows);
    }
    lw__set_refold(job->profile, chi2, free, n, lost, net);
    return LW_OK;
}

static lw_status solve(const lw__job *job, const lw__instrument *instrument, bool first, lw_arena *scratch,
                       lw__answer *answer, lw_error *err)
{
    lw_profile *profile = job->profile;
    const lw__window *data = &job->data;
    const lw__shape *shape = &job->line->shape;
    size_t n = profile->n_coefficients;
    double step = profile->length_nm[1], area = job->line->area_s;
    double *g_re = lw_arena_take(scratch, n, sizeof *g_re, err),
           *g_im = lw_arena_take(scratch, n, sizeof *g_im, err);
    double *h_re = lw_arena_take(scratch, n, sizeof *h_re, err),
           *h_im = lw_arena_take(scratch, n, sizeof *h_im, err);
    double *r_re = lw_arena_take(scratch, n, sizeof *r_re, err),
           *r_im = lw_arena_take(scratch, n, sizeof *r_im, err);
    double **wave = waves(job, n, scratch, err), *by = lw_arena_take(scratch, data->n, sizeof *by, err);
    double *to_re = lw_arena_take(scratch, data->n, sizeof *to_re, err),
           *to_im = lw_arena_take(scratch, data->n, sizeof *to_im, err);
    if (!to_re || !to_im || !g_re || !g_im || !h_re || !h_im || !r_re || !r_im || !wave || !by)
        return LW_OUT_OF_MEMORY;
    lw__instrument_transform(instrument, step, n, g_re, g_im);
    if (instrument->measured != NULL) {
        lw_status status = lw__carry_measured(instrument->measured, instrument->per_degree, step, n, g_re,
                                              g_im, scratch, err);
        if (status != LW_OK)
            return status;
    }
    lw__instrument_transform(&job->instrument, step, n, h_re, h_im); /* in the line's curve */
    for (size_t i = 0; i < data->n; i++)
        by[i] = data->step[i] * data->residual[i];
    for (size_t k = 0; k < n; k++) {
        r_re[k] = lw_dot(wave[2 * k], by, data->n);
        r_im[k] = lw_dot(wave[2 * k + 1], by, data->n);
    }
    double scale = area + r_re[0];
    if (first) {
        double square_sum, cross, of_tails, beyond_window = lw__tail_variance(job, &of_tails);
        for (size_t k = 0; k < n; k++) {
            double square = g_re[k] * g_re[k] + g_im[k] * g_im[k];
            double a = area * lw__shape_coefficient(shape, profile->length_nm[k], NULL);
            square_sum = h_re[k] * a + r_re[k];
            cross = h_im[k] * a + r_im[k];
            profile->cosine[k] = (square_sum * g_re[k] + cross * g_im[k]) / square / scale;
            profile->sine[k] = (cross * g_re[k] - square_sum * g_im[k]) / square / scale;
            for (size_t i = 0; i < data->n; i++) {
                /* 1/G turns the phase back: weight of this point in the real and imaginary part of the
                 * quotient; A(L) is over A(0), which the same points make */
                double by_re =
                    (wave[2 * k][i] * g_re[k] + wave[2 * k + 1][i] * g_im[k]) / square - profile->cosine[k];
                double by_im =
                    (wave[2 * k + 1][i] * g_re[k] - wave[2 * k][i] * g_im[k]) / square - profile->sine[k];
                to_re[i] = by_re * data->step[i];
                to_im[i] = by_im * data->step[i];
            }
            /* tails beyond the window are in A(0), and the less in A(L) the longer L against the window */
            double apart =
                profile->cosine[k] * fmin(profile->length_nm[k] * (data->s[data->n - 1] - data->s[0]), 1);
            profile->u_cosine[k] = hypot(sqrt(lw__window_variance(data, to_re, data->variance)) / scale,
                                         apart * sqrt(beyond_window));
            profile->u_sine[k] = sqrt(lw__window_variance(data, to_im, data->variance)) / scale;
        }
        if (instrument->measured != NULL) {
            lw_status status =
                lw__add_measured(instrument->measured, instrument->per_degree, profile, scratch, err);
            if (status != LW_OK)
                return status;
        }
        profile->truncated_at = truncation(profile, g_re, g_im, &profile->truncation);
        answer->choice = (double)profile->truncated_at;
    }
    size_t last = (size_t)answer->choice;
    if (last < 4) {
        profile->truncated_at = last < 4 ? 0 : last;
        return LW_OK; /* nothing but noise: the fit's breadth stands, as a limit if it must */
    }
    answer->from_shape = false;

    /* Height of the pure profile: integral of A over all lengths, beyond the truncation by the shape. As a
     * linear function of the points its uncertainty needs no covariance of coefficients. */
    double height = area / job->shape_breadth, plain = height, beyond = height;
    for (size_t i = 0; i < data->n; i++)
        by[i] = 0;
    for (size_t k = 0; k < last; k++) {
        double square = g_re[k] * g_re[k] + g_im[k] * g_im[k], twice = (k == 0 ? 1 : 2) * step;
        double a = area * lw__shape_coefficient(shape, profile->length_nm[k], NULL);
        double re = h_re[k] * a + r_re[k], im = h_im[k] * a + r_im[k], weight = apodised(job, k, last);
        double departs = twice * ((re * g_re[k] + im * g_im[k]) / square - a);
        height += weight * departs;
        plain += departs;
        beyond -= twice * a;
        for (size_t i = 0; i < data->n && first; i++)
            by[i] += weight * twice * data->step[i] *
                     (wave[2 * k][i] * g_re[k] + wave[2 * k + 1][i] * g_im[k]) / square;
    }
    answer->breadth = scale / height;
    if (!first)
        return LW_OK;
    for (size_t i = 0; i < data->n; i++)
        by[i] = data->step[i] / height - scale / (height * height) * by[i];
    double variance = lw__window_variance(data, by, data->variance);

    /* What the shape completes is known no better than the shape is right where the data still see it: tails
     * beyond the window by the outer half of the window, coefficients beyond the truncation by the last
     * quarter kept. */
    double share, tails = lw__tail_variance(job, &share), sum = 0, weights = 0;
    for (size_t k = last - last / 4; k < last; k++) {
        double a = lw__shape_coefficient(shape, profile->length_nm[k], NULL), u = profile->u_cosine[k];
        if (a > 0 && u > 0) {
            sum += (profile->cosine[k] - a) * a / (u * u);
            weights += a * a / (u * u);
        }
    }
    double wrong = weights > 0 ? sum / weights : 1, uncertain = weights > 0 ? 1 / weights : 1;
    double cut = fmax(beyond / height, 0), cuts = cut * cut * fmin(fmax(wrong * wrong, uncertain), 1);
    answer->variance = variance + answer->breadth * answer->breadth * (tails + cuts);
    if (job->options->apodise != 0)
        for (size_t k = 0; k < last; k++) {
            double a = lw__shape_coefficient(shape, profile->length_nm[k], NULL),
                   weight = apodised(job, k, last);
            profile->cosine[k] = a + weight * (profile->cosine[k] - a);
            profile->sine[k] *= weight;
        }
    profile->assumed =
        lw_arena_print(&job->profiles->arena, err,
                       "%s; %.2g of the area lies beyond the window and %.2g of the height beyond the "
                       "truncation, both by that shape (u of breadth %.2g and %.2g)%s",
                       profile->assumed, share, cut, sqrt(tails), sqrt(cuts),
                       job->options->apodise != 0 ? "; apodised (Hann)" : "");
    if (profile->assumed != NULL && job->options->apodise != 0)
        profile->assumed = lw_arena_print(&job->profiles->arena, err, "%s: breadth changed by %+.2g %%",
                                          profile->assumed, 100 * (plain / height - 1));
    if (profile->assumed == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = refold(job, wave, r_re, r_im, last, scratch, err);
    return status == LW_OK ? lw__curve_of_coefficients(job->profiles, profile, answer->breadth, err) : status;
}

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err)
{
    return lw__line_by_line(engine, profiles, options, solve, "stokes", err);
}

const lw_deconvolution lw_deconvolution_stokes = {.name = "stokes",
                                                  .source = "Stokes (1948) Proc. Phys. Soc. London 61, 382",
                                                  .by_lines = true,
                                                  .run = run};
