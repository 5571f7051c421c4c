/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Maximum entropy: of all positive profiles f that give the data back with chi2 as noise alone would make it,
 * the one of greatest entropy sum (f - m - f ln(f/m)) against the completing shape m. f = m exp(theta) is
 * found by Newton's method, its weight alpha by bisection on chi2. Uncertainties are those of the counts,
 * propagated through the curvature at the maximum, and what the entropy keeps back. (The posterior's width,
 * which is often given, takes every profile near the shape for possible: its intervals are too wide.) */
#include "profile/grid.h"

#include "numeric/cholesky.h"

#include <math.h>

typedef struct solver {
    const lw__grid *g;
    double *theta, *x, *work, *root, *step;
} solver;

/* Curvature sqrt(f) N sqrt(f) + alpha h in `work` (upper triangle). */
static void curvature(const solver *s, double alpha)
{
    size_t m = s->g->m;
    for (size_t j = 0; j < m; j++)
        for (size_t k = j; k < m; k++)
            s->work[j * m + k] =
                s->root[j] * s->g->normal[j * m + k] * s->root[k] + (j == k ? alpha * s->g->spacing : 0);
}

static void set_x(const solver *s)
{
    for (size_t j = 0; j < s->g->m; j++) {
        s->x[j] = s->g->shape[j] * expm1(s->theta[j]);
        s->root[j] = sqrt(s->g->shape[j] * exp(s->theta[j]));
    }
}

/* Newton to the maximum at alpha from the present theta; returns chi2. */
static double settle(const solver *s, double alpha)
{
    size_t m = s->g->m;
    for (int iteration = 0; iteration < 20; iteration++) {
        double largest = 0;
        set_x(s);
        curvature(s, alpha);
        for (size_t j = 0; j < m; j++)
            s->step[j] = s->root[j] * (s->g->pull[j] - lw_dot(s->g->normal + j * m, s->x, m)) -
                         alpha * s->g->spacing * s->root[j] * s->theta[j];
        if (lw_cholesky(s->work, m, m, 0) < m)
            break;
        lw_cholesky_solve(s->work, m, m, s->step);
        for (size_t j = 0; j < m; j++)
            largest = fmax(largest, fabs(s->step[j] / s->root[j]));
        double shorten = fmin(1, 0.7 / fmax(largest, 1e-300));
        for (size_t j = 0; j < m; j++)
            s->theta[j] = fmax(s->theta[j] + shorten * s->step[j] / s->root[j], -30);
        if (largest < 1e-4)
            break;
    }
    set_x(s);
    return lw__grid_chi2(s->g, s->x);
}

static lw_status solve(const lw__job *job, const lw__instrument *instrument, bool first, lw_arena *scratch,
                       lw__answer *answer, lw_error *err)
{
    lw__grid g;
    lw_status status = lw__take_grid(job, instrument, 10, scratch, &g, err);
    if (status != LW_OK)
        return status;
    size_t m = g.m;
    solver s = {.g = &g};
    double **column[] = {&s.theta, &s.x, &s.root, &s.step};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(scratch, m, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    s.work = lw_arena_take(scratch, m * m, sizeof(double), err);
    double *z = lw_arena_take(scratch, m * m, sizeof *z, err),
           *zn = lw_arena_take(scratch, m * m, sizeof *zn, err);
    if (!s.work || !z || !zn)
        return LW_OUT_OF_MEMORY;
    /* chi2 falls with alpha; at the top f = m */
    double unit = 0, high = 6, low = -6;
    for (size_t j = 0; j < m; j++)
        unit += g.normal[j * m + j] * g.shape[j] / g.spacing;
    unit /= (double)m;
    bool reached = true, plain = false;
    if (!first) {
        settle(&s, answer->choice);
    } else if (settle(&s, unit * pow(10, high)) <= g.expected_chi2) {
        plain = true;
        answer->choice = unit * pow(10, high);
    } else {
        double power = high;
        reached = false;
        while (power > low && !reached) { /* down in steps, so that each starts near its answer */
            power -= 1;
            reached = settle(&s, unit * pow(10, power)) <= g.expected_chi2;
        }
        double below = power, above = power + 1;
        for (int i = 0; i < 7 && reached; i++) {
            power = 0.5 * (below + above);
            *(settle(&s, unit * pow(10, power)) <= g.expected_chi2 ? &below : &above) = power;
        }
        /* where noise alone is never reached, a weight that leaves the data the say */
        answer->choice = unit * pow(10, reached ? below : -2);
        settle(&s, answer->choice);
    }
    answer->from_shape = false;
    answer->breadth = lw__grid_breadth(job, &g, s.x, NULL);
    if (!first)
        return LW_OK;
    curvature(&s, answer->choice);
    if (!lw__invert(s.work, m, z)) {
        answer->from_shape = true;
        return LW_OK;
    }
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k < m; k++)
            z[j * m + k] *= s.root[j] * s.root[k];
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k < m; k++)
            zn[j * m + k] = lw_dot(z + j * m, g.normal + k * m, m);
    double share, bias, *c = lw_arena_take(scratch, m * m, sizeof *c, err);
    for (size_t j = 0; j < m && c != NULL; j++)
        for (size_t k = 0; k < m; k++)
            c[j * m + k] = lw_dot(zn + j * m, z + k * m, m);
    if (c == NULL)
        return LW_OUT_OF_MEMORY;
    if ((status = lw__add_background(job, &g, z, c, scratch, err)) != LW_OK)
        return status;
    status = lw__grid_variance(job, &g, s.x, z, c, &answer->variance, &share, &bias, scratch, err);
    if (status != LW_OK)
        return status;
    if ((status = lw__grid_refold(job, &g, s.x, lw__grid_followed(&g, z, zn), err)) != LW_OK)
        return status;
    if ((status = lw__add_standard(job, &g, s.x, z, c, answer, scratch, err)) != LW_OK)
        return status;
    job->profile->assumed = lw_arena_print(
        &job->profiles->arena, err,
        "%s; entropy against that shape, %s; %.2g of the breadth remains the shape's", job->profile->assumed,
        plain     ? "which gives the data back as it is"
        : reached ? "chi-square that of noise"
                  : "chi-square never down to that of noise",
        share);
    if (job->profile->assumed == NULL)
        return LW_OUT_OF_MEMORY;
    return lw__grid_coefficients(job, &g, s.x, c, false, err);
}

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err)
{
    return lw__line_by_line(engine, profiles, options, solve, "maximum entropy", err);
}

const lw_deconvolution lw_deconvolution_maximum_entropy = {
    .name = "maximum_entropy",
    .source = "Skilling & Bryan (1984) Mon. Not. R. Astron. Soc. 211, 111",
    .by_lines = true,
    .run = run};
