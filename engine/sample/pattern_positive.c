/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Uncertainty of shares that can't be negative. About the minimum the parameters are taken as normal, but the
 * shares of a histogram only from 0 up: their second moments about the answer, from draws of the truncated
 * normal distribution by Gibbs' sampler (Geweke 1991 Proc. 23rd Symp. Interface, 571; tails by Robert 1995
 * Stat. Comput. 5, 121), stand in place of the covariance, and the other parameters follow them linearly. The
 * draws' seed is fixed. */
#include "sample/pattern_fitter.h"

#include "numeric/random.h"
#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

#define SWEEPS 12000
#define SKIPPED 1000
#define LOOSE                                                                                                \
    100.0 /* strength that keeps the sum of the shares near 1 while drawing: only their ratios count */

/* A normal deviate above `least`. */
static double draw_above(lw_random *random, double least)
{
    if (least < 5)
        return -lw_normal_quantile(lw_normal_probability(-least) * lw_random_uniform(random));
    for (;;) {
        double beyond = -log(lw_random_uniform(random)) / least;
        if (lw_random_uniform(random) < exp(-0.5 * beyond * beyond))
            return least + beyond;
    }
}

/* second[n n] = mean of (x - p)(x - p)', x normal with precision[n n] about p + moved[n], not below 0. */
static void draw(size_t n, const double *precision, const double *p, const double *moved, double *second)
{
    lw_random random;
    lw_random_begin(&random, 1, 0);
    double x[LW_PATTERN_SIZE_MOST];
    memcpy(x, p, n * sizeof *x);
    memset(second, 0, n * n * sizeof *second);
    for (int sweep = 0; sweep < SWEEPS; sweep++) {
        for (size_t b = 0; b < n; b++) {
            const double *row = precision + b * n;
            double pull = 0, sd = 1 / sqrt(row[b]);
            for (size_t c = 0; c < n; c++)
                if (c != b)
                    pull += row[c] * (x[c] - p[c] - moved[c]);
            double mean = p[b] + moved[b] - pull / row[b];
            x[b] = mean + sd * draw_above(&random, -mean / sd);
        }
        if (sweep < SKIPPED)
            continue;
        for (size_t b = 0; b < n; b++)
            for (size_t c = 0; c <= b; c++)
                second[b * n + c] += (x[b] - p[b]) * (x[c] - p[c]) / (SWEEPS - SKIPPED);
    }
    for (size_t b = 0; b < n; b++)
        for (size_t c = 0; c < b; c++)
            second[c * n + b] = second[b * n + c];
}

lw_status lw_pattern_fitter_positive(lw_pattern_fitter *f, double misfit, double *covariance, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    const lw_pattern_prior *prior = &m->prior[0];
    size_t n = m->n_parameters, all = lw_pattern_background_row(m), k = prior->n, first = prior->row;
    double *c = lw_arena_take(f->arena, n * n, sizeof *c, err),
           *block = lw_arena_take(f->arena, 4 * k * k, sizeof *block, err);
    if (c == NULL || block == NULL)
        return LW_OUT_OF_MEMORY;
    double *precision = block + k * k, *second = precision + k * k, *gain = second + k * k,
           moved[LW_PATTERN_SIZE_MOST];
    /* covariance with no share held at 0 */
    for (size_t i = 0; i < k; i++) {
        f->skip[first + i] = false;
        for (size_t j = 0; j <= i; j++)
            f->normal_h[(first + i) * n + first + j] -= prior->pin - LOOSE;
    }
    size_t weakest;
    lw_status status = lw_invert_normal(m->engine, f->normal_h, n, f->skip, c, &weakest, err);
    if (status != LW_OK)
        return status;
    for (size_t i = 0; i < k; i++) {
        moved[i] = 0;
        for (size_t j = 0; j < k; j++) {
            /* the downhill direction is 0 but at the bound */
            moved[i] += c[(first + i) * n + first + j] *
                        (f->at_bound[first + j] ? fmin(f->normal_g[first + j], 0) : 0);
            block[i * k + j] = misfit * misfit * c[(first + i) * n + first + j];
        }
    }
    status = lw_invert_normal(m->engine, block, k, NULL, precision, &weakest, err);
    if (status != LW_OK)
        return status;
    draw(k, precision, f->p + first, moved, second);
    /* what the others owe to the shares, c x precision, goes with the draws; the rest stays */
    double *owed = lw_arena_take(f->arena, all * k, sizeof *owed, err);
    if (owed == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < all; i++)
        for (size_t b = 0; b < k; b++)
            for (size_t d = 0; d < k; d++)
                owed[i * k + b] += misfit * misfit * c[i * n + first + d] * precision[d * k + b];
    for (size_t b = 0; b < k * k; b++)
        gain[b] = second[b] - block[b];
    for (size_t i = 0; i < all; i++)
        for (size_t j = 0; j < all; j++) {
            double sum = misfit * misfit * c[i * n + j];
            for (size_t b = 0; b < k; b++)
                for (size_t d = 0; d < k; d++)
                    sum += owed[i * k + b] * gain[b * k + d] * owed[j * k + d];
            covariance[i * n + j] += sum - misfit * misfit * f->inverse[i * n + j];
        }
    return LW_OK;
}
