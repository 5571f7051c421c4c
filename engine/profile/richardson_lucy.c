/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Richardson-Lucy: f <- f R'(y/mu)/R'1, mu = R f + everything else at the points, from the completing shape,
 * with the acceleration of Biggs & Andrews (1997), until chi2 is that of noise. (From a flat start few counts
 * stop it long before the line is as narrow as it is: at 300 counts breadths came out a quarter too large.)
 * Uncertainties by Monte Carlo (JCGM 101): the found line with fresh noise is deconvolved again, as often as
 * the options say, from a stated seed; and by what survives of the shape, with the shape's own uncertainty.
 */
#include "profile/grid.h"

#include "numeric/cholesky.h"
#include "numeric/random.h"

#include <math.h>
#include <string.h>

typedef struct solver {
    const lw__grid *g;
    double *column;          /* [m][n]: the response, value by value */
    double *other, *y, *sum; /* [n] background and neighbours; [n] data with them; [m] R'1 */
    double *f, *last, *guess, *before, *mu, *ratio;
} solver;

static double refold(const solver *s, const double *f, bool ratios)
{
    const lw__grid *g = s->g;
    double chi2 = 0;
    for (size_t i = 0; i < g->n; i++) {
        double mu = fmax(s->other[i] + lw_dot(g->response + i * g->m, f, g->m), 1e-9), r = s->y[i] - mu;
        s->mu[i] = mu;
        chi2 += r * r * g->weight[i];
        if (ratios)
            s->ratio[i] = fmax(s->y[i], 0) / mu;
    }
    return chi2;
}

/* Runs from `start` until chi2 <= target, or for just `most` iterations if the target is below 0. Returns the
 * iterations. */
static size_t iterate(solver *s, const double *start, double target, size_t most, double *chi2)
{
    size_t m = s->g->m, n = s->g->n, count = 0;
    double pace = 0;
    for (size_t j = 0; j < m; j++) {
        s->f[j] = s->last[j] = fmax(start[j], 1e-12);
        s->before[j] = 0;
    }
    for (count = 0; count < most; count++) {
        for (size_t j = 0; j < m; j++)
            s->guess[j] = fmax(s->f[j] + pace * (s->f[j] - s->last[j]), 1e-6 * s->f[j]);
        *chi2 = refold(s, s->guess, true);
        if (*chi2 <= target) {
            memcpy(s->f, s->guess, m * sizeof *s->f);
            break;
        }
        memcpy(s->last, s->f, m * sizeof *s->f);
        double along = 0, square = 0;
        for (size_t j = 0; j < m; j++) {
            s->f[j] = s->sum[j] > 0 ? s->guess[j] * lw_dot(s->column + j * n, s->ratio, n) / s->sum[j]
                                    : s->guess[j];
            double move = s->f[j] - s->guess[j];
            along += move * s->before[j];
            square += s->before[j] * s->before[j];
            s->before[j] = move;
        }
        pace = square > 0 ? fmin(fmax(along / square, 0), 0.98) : 0;
    }
    return count;
}

static lw_status take_solver(const lw__job *job, const lw__grid *g, lw_arena *scratch, solver *s,
                             lw_error *err)
{
    size_t n = g->n, m = g->m;
    *s = (solver){.g = g};
    double **by_point[] = {&s->other, &s->y, &s->mu, &s->ratio},
           **by_value[] = {&s->sum, &s->f, &s->last, &s->guess, &s->before};
    for (size_t i = 0; i < 4; i++)
        if ((*by_point[i] = lw_arena_take(scratch, n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < 5; i++)
        if ((*by_value[i] = lw_arena_take(scratch, m, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    if ((s->column = lw_arena_take(scratch, n * m, sizeof(double), err)) == NULL)
        return LW_OUT_OF_MEMORY;
    const lw_scan *scan = job->profiles->lines->scan;
    for (size_t i = 0; i < n; i++) {
        size_t at = job->data.first + i;
        /* what the line's own curve is in counts tells the factor that was divided out */
        double own = job->line->curve[at], factor = job->data.curve[i] > 0 ? own / job->data.curve[i] : 1;
        double beside = fmax((scan->intensity[at] - job->separation->residual[at] - own) / factor, 0);
        double within = lw_dot(g->response + i * m, g->shape, m);
        s->other[i] =
            job->data.curve[i] - within + beside; /* tails from outside the window stay the shape's */
        s->y[i] = job->data.curve[i] + g->target[i] + beside;
        for (size_t j = 0; j < m; j++) {
            s->column[j * n + i] = g->response[i * m + j];
            s->sum[j] += g->response[i * m + j];
        }
    }
    return LW_OK;
}

/* Directions in which the fit of the line has followed the noise already: area, place, width, level.
 * Orthogonal and of length 1 under the weights. */
#define FITTED 4
static bool take_fitted(const lw__grid *g, double *direction[FITTED], lw_arena *scratch, lw_error *err)
{
    double *shape = lw_arena_take(scratch, g->m, sizeof *shape, err);
    for (int d = 0; d < FITTED; d++)
        if ((direction[d] = lw_arena_take(scratch, g->n, sizeof(double), err)) == NULL || shape == NULL)
            return false;
    for (int d = 0; d < FITTED; d++) {
        for (size_t j = 0; j < g->m; j++) {
            double slope = g->shape[j + 1 < g->m ? j + 1 : j] - g->shape[j > 0 ? j - 1 : j];
            shape[j] = d == 0 ? g->shape[j] : d == 1 ? slope : g->place[j] * slope;
        }
        for (size_t i = 0; i < g->n; i++)
            direction[d][i] = d == 3 ? 1 : lw_dot(g->response + i * g->m, shape, g->m);
        for (int e = 0; e <= d; e++) {
            double sum = 0;
            for (size_t i = 0; i < g->n; i++)
                sum += direction[d][i] * g->weight[i] * direction[e][i];
            for (size_t i = 0; i < g->n; i++)
                direction[d][i] = e == d ? direction[d][i] / sqrt(fmax(sum, 1e-300))
                                         : direction[d][i] - sum * direction[e][i];
        }
    }
    return true;
}

static lw_status solve(const lw__job *job, const lw__instrument *instrument, bool first, lw_arena *scratch,
                       lw__answer *answer, lw_error *err)
{
    lw__grid g;
    solver s;
    lw_status status = lw__take_grid(job, instrument, 14, scratch, &g, err);
    if (status == LW_OK)
        status = take_solver(job, &g, scratch, &s, err);
    if (status != LW_OK)
        return status;
    size_t m = g.m, count = (size_t)job->options->realisations;
    double chi2;
    size_t most = (size_t)job->options->iterations_most;
    size_t used = first ? iterate(&s, g.shape, g.expected_chi2, most, &chi2)
                        : iterate(&s, g.shape, -1, (size_t)answer->choice, &chi2);
    double *x = lw_arena_take(scratch, m, sizeof *x, err),
           *mean = lw_arena_take(scratch, m, sizeof *mean, err);
    double *c = lw_arena_take(scratch, m * m, sizeof *c, err),
           *y = lw_arena_take(scratch, g.n, sizeof *y, err);
    double *draw = lw_arena_take(scratch, m * (count + 1), sizeof *draw, err);
    double *wider = lw_arena_take(scratch, m, sizeof *wider, err);
    double *fitted[FITTED];
    if (!take_fitted(&g, fitted, scratch, err) || !x || !mean || !c || !y || !draw || !wider)
        return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < m; j++)
        x[j] = s.f[j] - g.shape[j];
    answer->from_shape = false;
    answer->breadth = lw__grid_breadth(job, &g, x, NULL);
    if (!first)
        return LW_OK;
    answer->choice = (double)used;
    if ((status = lw__grid_refold(job, &g, x, 0, err)) != LW_OK)
        return status;
    /* what survives, after as many iterations, of a start that is wider by a part in fifty */
    double kept, moved = 0;
    for (size_t j = 0; j < m; j++) {
        double next = g.shape[j + 1 < m ? j + 1 : j], last = g.shape[j > 0 ? j - 1 : j];
        wider[j] = g.shape[j] - 0.02 * (g.shape[j] + g.place[j] * (next - last) / (2 * g.spacing));
        mean[j] = wider[j] - g.shape[j];
    }
    moved = lw__grid_breadth(job, &g, mean, NULL) - job->shape_breadth;
    memset(mean, 0, m * sizeof *mean);
    iterate(&s, wider, -1, used, &chi2);
    for (size_t j = 0; j < m; j++)
        wider[j] = s.f[j] - g.shape[j];
    kept = moved != 0 ? fmin(fabs((lw__grid_breadth(job, &g, wider, NULL) - answer->breadth) / moved), 1) : 1;
    for (size_t j = 0; j < m; j++)
        s.f[j] = x[j] + g.shape[j];
    refold(&s, s.f, false);
    memcpy(y, s.mu, g.n * sizeof *y);
    lw_random random;
    lw_random_begin(&random, (uint64_t)job->options->seed, (uint64_t)(job->profile - job->profiles->profile));
    double sum = 0, square = 0, share;
    for (size_t r = 0; r < count && status == LW_OK; r++) {
        double level = sqrt(job->data.background_variance) * lw_random_normal(&random);
        double along[FITTED] = {0};
        for (size_t i = 0; i < g.n; i++) {
            s.ratio[i] = sqrt(job->data.variance[i]) * lw_random_normal(&random);
            for (int d = 0; d < FITTED; d++)
                along[d] += fitted[d][i] * g.weight[i] * s.ratio[i];
        }
        for (size_t i = 0; i < g.n; i++) {
            s.y[i] = y[i] + level + s.ratio[i];
            for (int d = 0; d < FITTED; d++)
                s.y[i] -= along[d] * fitted[d][i];
        }
        iterate(&s, g.shape, (double)g.n, most, &chi2);
        for (size_t j = 0; j < m; j++) {
            draw[r * m + j] = s.f[j] - g.shape[j];
            mean[j] += draw[r * m + j] / (double)count;
        }
        double breadth = lw__grid_breadth(job, &g, draw + r * m, NULL) - answer->breadth;
        sum += breadth;
        square += breadth * breadth;
        status = lw_engine_poll(job->engine, err);
    }
    for (size_t r = 0; r < count; r++)
        for (size_t j = 0; j < m; j++)
            for (size_t k = 0; k < m; k++)
                c[j * m + k] +=
                    (draw[r * m + j] - mean[j]) * (draw[r * m + k] - mean[k]) / (double)(count - 1);
    double shift = sum / (double)count;
    answer->variance = (square - (double)count * shift * shift) / (double)(count - 1) + shift * shift +
                       answer->breadth * answer->breadth * lw__tail_variance(job, &share) +
                       kept * kept * job->shape_variance;
    job->profile->assumed = lw_arena_print(
        &job->profiles->arena, err,
        "%s; positive, from that shape, stopped after %zu iterations %s; %.2g of the breadth remains the "
        "shape's; "
        "%zu realisations with seed %ld, mean shift of the breadth %.2g nm^-1",
        job->profile->assumed, used, used < most ? "where chi-square is that of noise" : "(the limit)", kept,
        count, job->options->seed, shift);
    if (job->profile->assumed == NULL)
        return LW_OUT_OF_MEMORY;
    return status == LW_OK ? lw__grid_coefficients(job, &g, x, c, true, err) : status;
}

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err)
{
    return lw__line_by_line(engine, profiles, options, solve, "richardson-lucy", err);
}

const lw_deconvolution lw_deconvolution_richardson_lucy = {
    .name = "richardson_lucy",
    .source = "Richardson (1972) J. Opt. Soc. Am. 62, 55; Lucy (1974) Astron. J. 79, 745; acceleration: "
              "Biggs & Andrews (1997) "
              "Appl. Opt. 36, 1766",
    .by_lines = true,
    .run = run};
