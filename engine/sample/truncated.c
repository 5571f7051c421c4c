/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/truncated.h"

#include "sample/generalised.h"

#include <math.h>

/* Ends of the cell of a point. */
static void cell(const lw_tailed *line, size_t i, double *low, double *high)
{
    const double *s = line->s;
    double before = i > 0 ? s[i] - s[i - 1] : s[i + 1] - s[i], after = i + 1 < line->n ? s[i + 1] - s[i] : before;
    *low = s[i] - 0.5 * before;
    *high = s[i] + 0.5 * after;
}

/* Integrals of 1 and s^2 over the part of a cell within the range. */
static void share(const lw_tailed *line, size_t i, double half, double out[2])
{
    double low, high;
    cell(line, i, &low, &high);
    low = fmax(low, -half);
    high = fmin(high, half);
    out[0] = out[1] = 0;
    if (low < high) {
        out[0] = high - low;
        out[1] = (high * high * high - low * low * low) / 3;
    }
}

void lw_truncated_moments(const lw_tailed *line, size_t n, const double *half, double *zeroth, double *second)
{
    for (size_t j = 0; j < n; j++) {
        double part[2];
        zeroth[j] = second[j] = 0;
        for (size_t i = 0; i < line->n && line->n > 1; i++) {
            share(line, i, half[j], part);
            zeroth[j] += part[0] * line->intensity[i];
            second[j] += part[1] * line->intensity[i];
        }
    }
}

/* With tails k/s^2 (per unit area, k = slope/2 of the variance against the whole width) the share 4 slope/width of the
 * area lies beyond a range. The slope is only known after the fit, but enters linearly: with M2, M0 the moments,
 *     M2/M0 (inside + 4 tail/widest - 4 slope/widest) - taken = start + slope width
 * is a straight line again when the last term on the left is moved into the abscissa. `tail` is a slope here too. */
lw_status lw_truncated_variance(const lw_tailed *line, size_t n, const double *half, double inside, double tail,
                                const double *taken, lw_arena *arena, lw_truncated *out, lw_error *err)
{
    *out = (lw_truncated){.n = n,
                          .half = lw_arena_copy(arena, half, n, sizeof *half, err),
                          .variance = lw_arena_take(arena, n, sizeof(double), err),
                          .range = lw_arena_take(arena, n, sizeof(double), err),
                          .level = lw_arena_take(arena, n, sizeof(double), err),
                          .covariance = lw_arena_take(arena, n * n, sizeof(double), err)};
    double *zeroth = lw_arena_take(arena, n, sizeof *zeroth, err), *second = lw_arena_take(arena, n, sizeof *second, err);
    double *moved = lw_arena_take(arena, n, sizeof *moved, err);
    if (err->status != LW_OK)
        return err->status;
    lw_truncated_moments(line, n, half, zeroth, second);
    double area = zeroth[n - 1], widest = 2 * half[n - 1], whole = inside + 4 * tail / widest;
    if (!(area > 0))
        return lw_fail(err, LW_NOT_SUPPORTED, NULL, "there is no line above the background");
    for (size_t j = 0; j < n; j++) {
        double ratio = second[j] / area;
        out->variance[j] = ratio * whole - (taken != NULL ? taken[j] : 0);
        out->range[j] = 2 * half[j] + 4 / widest * ratio;
    }
    for (size_t i = 0; i < line->n; i++) {
        double all[2], part[2];
        share(line, i, half[n - 1], all);
        for (size_t j = 0; j < n; j++) {
            share(line, i, half[j], part);
            moved[j] = (part[1] - second[j] / area * all[0]) * whole / area;
            out->level[j] += moved[j];
            for (size_t k = 0; k <= j && line->variance != NULL; k++)
                out->covariance[j * n + k] += moved[j] * moved[k] * line->variance[i];
        }
    }
    for (size_t j = 0; j < n; j++)
        for (size_t k = 0; k <= j; k++)
            out->covariance[k * n + j] = out->covariance[j * n + k];
    return LW_OK;
}

/* ---------------------------------------------------------------------------------------------------- the line */

enum { START, SLOPE, LEVEL, PARAMETERS };
#define FALL 2.0 /* f of the third term: 1 to 3 */

typedef struct stretch {
    size_t n;
    const double *range, *level;
    double third; /* 12 f */
} stretch;

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const stretch *w = user;
    (void)x_slope;
    for (size_t j = 0; j < w->n; j++) {
        double by = p[START] > 0 ? w->third / w->range[j] : 0, *slope = slopes + PARAMETERS * j;
        value[j] = p[START] + p[SLOPE] * w->range[j] - by * p[START] * p[SLOPE] + p[LEVEL] * w->level[j];
        slope[START] = 1 - by * p[SLOPE];
        slope[SLOPE] = w->range[j] - by * p[START];
        slope[LEVEL] = w->level[j];
    }
}

/* Fits the ranges from `first` on. The moved abscissa makes noise of the moments count less by the tail's share. */
static lw_status fit_from(const lw_truncated *w, size_t first, double f, lw_arena *arena, double p[PARAMETERS],
                          lw_generalised_fit *fit, lw_error *err)
{
    size_t n = w->n - first;
    double *covariance = lw_arena_take(arena, n * n, sizeof *covariance, err);
    if (covariance == NULL)
        return LW_OUT_OF_MEMORY;
    p[SLOPE] = (w->variance[w->n - 1] - w->variance[first]) / (w->range[w->n - 1] - w->range[first]);
    p[START] = w->variance[first] - p[SLOPE] * w->range[first];
    p[LEVEL] = 0;
    double less = 1 - 2 * p[SLOPE] / w->half[w->n - 1];
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            covariance[i * n + j] = less * less * w->covariance[(first + i) * w->n + first + j];
    stretch user = {.n = n, .range = w->range + first, .level = w->level + first, .third = 12 * f};
    lw_generalised problem = {
        .n = n, .m = PARAMETERS, .y = w->variance + first, .covariance = covariance, .model = model, .user = &user};
    return lw_generalised_solve(&problem, arena, p, fit, NULL, err);
}

lw_status lw_variance_line(const lw_truncated *w, lw_arena *arena, lw_variance_fit *out, lw_error *err)
{
    lw_generalised_fit fit, other;
    double p[PARAMETERS], change[2][PARAMETERS];
    size_t last = 3 * w->n / 5;
    for (size_t first = 0; first <= last; first++) {
        lw_status status = fit_from(w, first, FALL, arena, p, &fit, err);
        if (status != LW_OK)
            return status;
        if (fit.p < 0.05)
            continue;
        *out = (lw_variance_fit){.start = p[START], .slope = p[SLOPE], .level = p[LEVEL], .chi2 = fit.chi2, .p = fit.p,
                                 .degrees = fit.degrees, .first = first};
        status = fit_from(w, first + (w->n - first) / 3, FALL, arena, change[0], &other, err);
        if (status == LW_OK)
            status = fit_from(w, first, FALL - 1, arena, change[1], &other, err);
        if (status != LW_OK)
            return status;
        for (int i = 0; i < 2; i++)
            for (int j = 0; j < 2; j++) {
                out->covariance[i][j] = fit.covariance[i][j];
                for (int k = 0; k < 2; k++)
                    out->covariance[i][j] += (change[k][i] - p[i]) * (change[k][j] - p[j]) / 3;
            }
        return LW_OK;
    }
    return lw_fail(err, LW_NOT_SUPPORTED, "measure further out, or weaker neighbours",
                   "its variance does not grow in proportion to the range: the tails have not reached their law within "
                   "what the neighbours leave");
}
