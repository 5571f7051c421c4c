/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/straight_line.h"
#include "base/arena.h"
#include "numeric/cholesky.h"

#include <float.h>
#include <math.h>

#define PI 3.14159265358979323846
#define ANGLES 90 /* slopes tried in the search for the deepest minimum */

typedef struct problem {
    size_t n, ld;
    const double *x, *y;
    const double *ux, *uy; /* independent errors, or */
    const double *cx, *cy; /* full matrices */
    double *factor;        /* n x ld, of the scaled C(b) */
    double *scale;         /* 1/sqrt(diagonal of C(b)) */
    double *one, *wx, *wy; /* whitened 1, x and y; wy becomes the whitened residual */
    double *q;             /* C^-1 r */
    bool dependent;
} problem;

/* S(b) with a profiled out, and its derivative. */
typedef struct state {
    double a, chi2, slope;
} state;

/* C(b), factored. False where a point has no error at all. */
static bool prepare(problem *p, double b)
{
    size_t n = p->n;
    for (size_t i = 0; i < n; i++) {
        double variance;
        if (p->cy == NULL) {
            double sx = p->ux != NULL ? b * p->ux[i] : 0, sy = p->uy != NULL ? p->uy[i] : 0;
            variance = sx * sx + sy * sy;
        } else
            variance = p->cy[i * n + i] + (p->cx != NULL ? b * b * p->cx[i * n + i] : 0);
        if (!(variance > 0) || !isfinite(variance))
            return false;
        p->scale[i] = 1 / sqrt(variance);
    }
    if (p->cy == NULL)
        return true;
    /* a matrix that is singular to rounding says that some combination of points is exact; a jitter of
     * 1e-11 of the diagonal keeps that combination nearly so, and the rest as it is */
    for (double jitter = 0; jitter<1; jitter = jitter> 0 ? 100 * jitter : 1e-11) {
        for (size_t i = 0; i < n; i++)
            for (size_t j = i; j < n; j++) {
                double c = p->cy[i * n + j] + (p->cx != NULL ? b * b * p->cx[i * n + j] : 0);
                p->factor[i * p->ld + j] = c * p->scale[i] * p->scale[j] + (i == j ? jitter : 0);
            }
        if (lw_cholesky(p->factor, n, p->ld, 2 * DBL_EPSILON * (double)n) == n)
            return true;
        p->dependent = true;
    }
    return false;
}

/* v := C^-1/2 v and v := C^-1/2' v */
static void whiten(const problem *p, double *v)
{
    for (size_t i = 0; i < p->n; i++)
        v[i] *= p->scale[i];
    if (p->cy != NULL)
        lw_cholesky_forward(p->factor, p->n, p->ld, v);
}

static void unwhiten(const problem *p, double *v)
{
    if (p->cy != NULL)
        lw_cholesky_back(p->factor, p->n, p->ld, v);
    for (size_t i = 0; i < p->n; i++)
        v[i] *= p->scale[i];
}

static double cx_at(const problem *p, size_t i, const double *q)
{
    if (p->cy == NULL)
        return p->ux != NULL ? p->ux[i] * p->ux[i] * q[i] : 0;
    return p->cx != NULL ? lw_dot(p->cx + i * p->n, q, p->n) : 0;
}

static void load(problem *p)
{
    for (size_t i = 0; i < p->n; i++) {
        p->one[i] = 1;
        p->wx[i] = p->x[i];
        p->wy[i] = p->y[i];
    }
    whiten(p, p->one);
    whiten(p, p->wx);
    whiten(p, p->wy);
}

/* False where C(b) cannot be used. Leaves wy = whitened residual, q = C^-1 r. */
static bool evaluate(problem *p, double b, state *s)
{
    size_t n = p->n;
    if (!prepare(p, b))
        return false;
    load(p);
    for (size_t i = 0; i < n; i++)
        p->wy[i] -= b * p->wx[i];
    s->a = lw_dot(p->one, p->wy, n) / lw_dot(p->one, p->one, n);
    for (size_t i = 0; i < n; i++)
        p->wy[i] -= s->a * p->one[i];
    s->chi2 = lw_dot(p->wy, p->wy, n);
    s->slope = -2 * lw_dot(p->wx, p->wy, n);
    for (size_t i = 0; i < n; i++)
        p->q[i] = p->wy[i];
    unwhiten(p, p->q);
    for (size_t i = 0; i < n; i++)
        s->slope -= 2 * b * p->q[i] * cx_at(p, i, p->q);
    return isfinite(s->chi2);
}

/* The slope for a covariance that does not depend on it. */
static bool direct_slope(problem *p, double *b)
{
    size_t n = p->n;
    if (!prepare(p, *b))
        return false;
    load(p);
    double ee = lw_dot(p->one, p->one, n), mean = lw_dot(p->one, p->wx, n) / ee;
    double mean_y = lw_dot(p->one, p->wy, n) / ee;
    for (size_t i = 0; i < n; i++) {
        p->wx[i] -= mean * p->one[i];
        p->wy[i] -= mean_y * p->one[i];
    }
    double xx = lw_dot(p->wx, p->wx, n);
    *b = lw_dot(p->wx, p->wy, n) / xx;
    return xx > 0 && isfinite(*b);
}

/* Root of dS/db between low and high, where it changes sign from - to +: false position, halved where one
 * end stays (Illinois), with bisection as the safeguard. */
static double slope_between(problem *p, double low, double high, double at_low, double at_high)
{
    state s;
    double b = low;
    int side = 0;
    for (int i = 0; i < 200; i++) {
        double next = i % 4 == 3 ? 0.5 * (low + high) : high - at_high * (high - low) / (at_high - at_low);
        if (!(next > low && next < high))
            next = 0.5 * (low + high);
        if (fabs(next - b) <= 2 * DBL_EPSILON * fabs(next) || !evaluate(p, next, &s))
            return next;
        b = next;
        if (s.slope == 0)
            return b;
        if (s.slope < 0) {
            low = b;
            at_low = s.slope;
            at_high *= side == -1 ? 0.5 : 1;
            side = -1;
        } else {
            high = b;
            at_high = s.slope;
            at_low *= side == 1 ? 0.5 : 1;
            side = 1;
        }
    }
    return b;
}

/* S may have several minima; it is searched over all directions of the line, in units of the scatter. */
static bool search_slope(problem *p, double unit, double *best)
{
    state s;
    double least = INFINITY;
    int at = -1;
    for (int k = 1; k < ANGLES; k++)
        if (evaluate(p, unit * tan(PI * (k - 0.5 * ANGLES) / ANGLES), &s) && s.chi2 < least) {
            least = s.chi2;
            at = k;
        }
    if (at < 0)
        return false;
    double low = unit * tan(PI * (at - 1 - 0.5 * ANGLES + (at == 1 ? 0.01 : 0)) / ANGLES);
    double high = unit * tan(PI * (at + 1 - 0.5 * ANGLES - (at == ANGLES - 1 ? 0.01 : 0)) / ANGLES);
    double middle = unit * tan(PI * (at - 0.5 * ANGLES) / ANGLES);
    state s_low, s_high;
    if (!evaluate(p, middle, &s))
        return false;
    /* the sign at the best direction says on which side the minimum lies */
    if (s.slope == 0)
        *best = middle;
    else if (s.slope > 0 && evaluate(p, low, &s_low) && s_low.slope < 0)
        *best = slope_between(p, low, middle, s_low.slope, s.slope);
    else if (s.slope < 0 && evaluate(p, high, &s_high) && s_high.slope > 0)
        *best = slope_between(p, middle, high, s.slope, s_high.slope);
    else
        return false;
    return true;
}

static lw_status fit(lw_engine *engine, problem *p, lw_straight_line *line, lw_error *err)
{
    size_t n = p->n;
    *line = (lw_straight_line){.n = n};
    double mean_x = 0, mean_y = 0, xx = 0, yy = 0;
    for (size_t i = 0; i < n; i++) {
        if (!isfinite(p->x[i]) || !isfinite(p->y[i]))
            return lw_fail(err, LW_BAD_ARGUMENT, NULL, "point %zu of the straight line is not a number",
                           i + 1);
        mean_x += p->x[i] / (double)n;
        mean_y += p->y[i] / (double)n;
    }
    for (size_t i = 0; i < n; i++) {
        xx += (p->x[i] - mean_x) * (p->x[i] - mean_x);
        yy += (p->y[i] - mean_y) * (p->y[i] - mean_y);
    }
    if (n < 2 || !(xx > 1e-24 * (double)n * mean_x * mean_x))
        return lw_fail(err, LW_NOT_SUPPORTED, "give points at two different abscissae at least",
                       "a straight line needs two different abscissae; there are %zu points", n);
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    p->ld = (n + 7) / 8 * 8;
    p->factor = lw_arena_take(&arena, p->cy != NULL ? n * p->ld : 0, sizeof(double), err);
    p->scale = lw_arena_take(&arena, n, sizeof(double), err);
    p->one = lw_arena_take(&arena, n, sizeof(double), err);
    p->wx = lw_arena_take(&arena, n, sizeof(double), err);
    p->wy = lw_arena_take(&arena, n, sizeof(double), err);
    p->q = lw_arena_take(&arena, n, sizeof(double), err);
    lw_status status = LW_OUT_OF_MEMORY;
    if (!p->factor || !p->scale || !p->one || !p->wx || !p->wy || !p->q)
        goto done;
    state s;
    double b = 0, unit = yy > 0 ? sqrt(yy / xx) : 1 / sqrt(xx);
    bool x_exact = p->cy != NULL ? p->cx == NULL : p->ux == NULL;
    if (!(x_exact ? direct_slope(p, &b) : search_slope(p, unit, &b)) || !evaluate(p, b, &s)) {
        status = lw_fail(err, LW_BAD_ARGUMENT,
                         "give each point an uncertainty in x or y, and symmetric covariances",
                         "the errors given do not determine a straight line");
        goto done;
    }
    line->slope = b;
    line->intercept = s.a;
    line->chi2 = s.chi2;
    line->dependent = p->dependent;
    /* cov = ([1 x]' C^-1 [1 x])^-1 at the adjusted abscissae x + b Cx C^-1 r (York et al. 2004) */
    for (size_t i = 0; i < n; i++)
        p->wx[i] = p->x[i] + b * cx_at(p, i, p->q);
    whiten(p, p->wx);
    double ee = lw_dot(p->one, p->one, n), mean = lw_dot(p->one, p->wx, n) / ee;
    for (size_t i = 0; i < n; i++)
        p->wx[i] -= mean * p->one[i];
    line->slope_variance = 1 / lw_dot(p->wx, p->wx, n);
    line->intercept_variance = 1 / ee + mean * mean * line->slope_variance;
    line->covariance = -mean * line->slope_variance;
    status = LW_OK;
done:
    lw_arena_end(&arena);
    return status;
}

lw_status lw_line_independent(lw_engine *engine, size_t n, const double *x, const double *y, const double *ux,
                              const double *uy, lw_straight_line *line, lw_error *err)
{
    problem p = {.n = n, .x = x, .y = y, .ux = ux, .uy = uy};
    return fit(engine, &p, line, err);
}

lw_status lw_line_correlated(lw_engine *engine, size_t n, const double *x, const double *y, const double *cx,
                             const double *cy, lw_straight_line *line, lw_error *err)
{
    problem p = {.n = n, .x = x, .y = y, .cx = cx, .cy = cy};
    if (cy == NULL)
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "the covariance of y is missing");
    return fit(engine, &p, line, err);
}

lw_status lw_line_plain(lw_engine *engine, size_t n, const double *x, const double *y, lw_straight_line *line,
                        lw_error *err)
{
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    double *u = lw_arena_take(&arena, n, sizeof *u, err);
    lw_status status = u != NULL ? LW_OK : LW_OUT_OF_MEMORY;
    for (size_t i = 0; u != NULL && i < n; i++)
        u[i] = 1;
    if (status == LW_OK)
        status = lw_line_independent(engine, n, x, y, NULL, u, line, err);
    if (status == LW_OK) {
        double variance = n > 2 ? line->chi2 / (double)(n - 2) : 0;
        line->slope_variance *= variance;
        line->intercept_variance *= variance;
        line->covariance *= variance;
    }
    lw_arena_end(&arena);
    return status;
}

double lw_line_at(const lw_straight_line *line, double x, double *u)
{
    if (u != NULL) {
        double variance = line->intercept_variance + x * (2 * line->covariance + x * line->slope_variance);
        *u = sqrt(fmax(variance, 0));
    }
    return line->intercept + line->slope * x;
}
