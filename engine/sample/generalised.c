/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/generalised.h"

#include "numeric/statistics.h"

#include <float.h>
#include <math.h>
#include <string.h>

#define EIGENVALUE_LEAST 1e-7
#define ITERATIONS_MOST 100
#define STEP_ENOUGH                                                                                          \
    1e-5 /* in u of the parameter; the step is taken all the same, so the answer is better                   \
          */

double lw_generalised_p(double chi2, size_t degrees)
{
    if (degrees == 0 || !(chi2 > 0))
        return 1.0;
    return lw_chi2_tail(chi2, (double)degrees);
}

/* Eigenvalues (on the diagonal of a) and eigenvectors (columns of v) of a symmetric matrix by cyclic Jacobi
 * rotations (Golub & Van Loan, Matrix Computations, 8.5). n is at most some hundred here. */
static void jacobi(double *a, double *v, size_t n)
{
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            v[i * n + j] = i == j;
    for (int sweep = 0; sweep < 60; sweep++) {
        double off = 0, all = 0;
        for (size_t i = 0; i < n; i++)
            for (size_t j = 0; j < n; j++) {
                all += a[i * n + j] * a[i * n + j];
                if (i != j)
                    off += a[i * n + j] * a[i * n + j];
            }
        if (off <= all * DBL_EPSILON * DBL_EPSILON)
            return;
        for (size_t i = 0; i + 1 < n; i++)
            for (size_t j = i + 1; j < n; j++) {
                double x = a[i * n + j];
                if (x == 0)
                    continue;
                double tau = (a[j * n + j] - a[i * n + i]) / (2 * x);
                double t = (tau >= 0 ? 1 : -1) / (fabs(tau) + hypot(1, tau));
                double c = 1 / hypot(1, t), s = t * c;
                for (size_t k = 0; k < n; k++) {
                    double p = a[k * n + i], q = a[k * n + j];
                    a[k * n + i] = c * p - s * q;
                    a[k * n + j] = s * p + c * q;
                }
                for (size_t k = 0; k < n; k++) {
                    double p = a[i * n + k], q = a[j * n + k];
                    a[i * n + k] = c * p - s * q;
                    a[j * n + k] = s * p + c * q;
                }
                for (size_t k = 0; k < n; k++) {
                    double p = v[k * n + i], q = v[k * n + j];
                    v[k * n + i] = c * p - s * q;
                    v[k * n + j] = s * p + c * q;
                }
            }
    }
}

/* Work space of one solution. */
typedef struct work {
    const lw_generalised *problem;
    double *value, *slopes, *x_slope; /* of the model */
    double *c, *r, *v;                /* effective covariance, its correlation matrix, eigenvectors */
    double *whiten;                   /* rank x n */
    double *white;                    /* rank: whitened residual */
    double *white_slopes;             /* rank x m */
    double *u;                        /* n */
    size_t rank;
} work;

static lw_status start_work(work *w, const lw_generalised *problem, lw_arena *arena, lw_error *err)
{
    size_t n = problem->n, m = problem->m;
    *w = (work){.problem = problem};
    w->value = lw_arena_take(arena, n, sizeof(double), err);
    w->slopes = lw_arena_take(arena, n * m, sizeof(double), err);
    w->x_slope = lw_arena_take(arena, n, sizeof(double), err);
    w->c = lw_arena_take(arena, n * n, sizeof(double), err);
    w->r = lw_arena_take(arena, n * n, sizeof(double), err);
    w->v = lw_arena_take(arena, n * n, sizeof(double), err);
    w->whiten = lw_arena_take(arena, n * n, sizeof(double), err);
    w->white = lw_arena_take(arena, n, sizeof(double), err);
    w->white_slopes = lw_arena_take(arena, n * m, sizeof(double), err);
    w->u = lw_arena_take(arena, n, sizeof(double), err);
    bool all = w->value && w->slopes && w->x_slope && w->c && w->r && w->v && w->whiten && w->white &&
               w->white_slopes && w->u;
    return all ? LW_OK : LW_OUT_OF_MEMORY;
}

/* Evaluates the model; false where it does not exist. */
static bool evaluate(work *w, const double *p)
{
    size_t n = w->problem->n, m = w->problem->m;
    memset(w->slopes, 0, n * m * sizeof(double));
    memset(w->x_slope, 0, n * sizeof(double));
    w->problem->model(w->problem->user, p, w->value, w->slopes, w->x_slope);
    for (size_t i = 0; i < n; i++)
        if (!isfinite(w->value[i]))
            return false;
    return true;
}

/* The matrix that turns the observations into independent numbers of unit variance. */
static lw_status whitener(work *w, lw_error *err)
{
    const lw_generalised *problem = w->problem;
    size_t n = problem->n;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            double c = 0.5 * (problem->covariance[i * n + j] + problem->covariance[j * n + i]);
            if (problem->x_covariance != NULL)
                c += w->x_slope[i] * w->x_slope[j] * 0.5 *
                     (problem->x_covariance[i * n + j] + problem->x_covariance[j * n + i]);
            w->c[i * n + j] = c;
        }
    for (size_t i = 0; i < n; i++) {
        double variance = w->c[i * n + i];
        if (!(variance > 0) || !isfinite(variance))
            return lw_fail(err, LW_NOT_SUPPORTED, "give every line a standard uncertainty",
                           "observation %zu of %zu has no uncertainty above 0", i + 1, n);
        w->u[i] = sqrt(variance);
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            w->r[i * n + j] = w->c[i * n + j] / (w->u[i] * w->u[j]);
    jacobi(w->r, w->v, n);
    double largest = 0;
    for (size_t i = 0; i < n; i++)
        largest = fmax(largest, w->r[i * n + i]);
    w->rank = 0;
    for (size_t k = 0; k < n; k++) {
        double lambda = w->r[k * n + k];
        if (!(lambda > EIGENVALUE_LEAST * largest))
            continue;
        for (size_t i = 0; i < n; i++)
            w->whiten[w->rank * n + i] = w->v[i * n + k] / (sqrt(lambda) * w->u[i]);
        w->rank++;
    }
    return LW_OK;
}

/* chi2 at the last evaluated point. */
static double whitened(work *w)
{
    size_t n = w->problem->n, m = w->problem->m;
    double chi2 = 0;
    for (size_t k = 0; k < w->rank; k++) {
        const double *row = w->whiten + k * n;
        double sum = 0;
        for (size_t i = 0; i < n; i++)
            sum += row[i] * (w->problem->y[i] - w->value[i]);
        w->white[k] = sum;
        chi2 += sum * sum;
        for (size_t j = 0; j < m; j++) {
            double slope = 0;
            for (size_t i = 0; i < n; i++)
                slope += row[i] * w->slopes[i * m + j];
            w->white_slopes[k * m + j] = slope;
        }
    }
    return chi2;
}

/* Step and covariance from J'J of the whitened problem, with columns scaled to unit length. False, with the
 * weakest parameter, when the columns cannot be told apart. */
static bool solve_normal(const work *w, double *step, lw_generalised_fit *fit, size_t *weakest)
{
    size_t m = w->problem->m;
    double a[LW_GENERALISED_MOST][LW_GENERALISED_MOST], inverse[LW_GENERALISED_MOST][LW_GENERALISED_MOST];
    double scale[LW_GENERALISED_MOST], g[LW_GENERALISED_MOST];
    for (size_t i = 0; i < m; i++) {
        double length = 0;
        for (size_t k = 0; k < w->rank; k++)
            length += w->white_slopes[k * m + i] * w->white_slopes[k * m + i];
        if (!(length > 0) || !isfinite(length)) {
            *weakest = i;
            return false;
        }
        scale[i] = sqrt(length);
    }
    for (size_t i = 0; i < m; i++) {
        g[i] = 0;
        for (size_t k = 0; k < w->rank; k++)
            g[i] += w->white_slopes[k * m + i] / scale[i] * w->white[k];
        for (size_t j = 0; j < m; j++) {
            a[i][j] = 0;
            for (size_t k = 0; k < w->rank; k++)
                a[i][j] += w->white_slopes[k * m + i] / scale[i] * (w->white_slopes[k * m + j] / scale[j]);
            inverse[i][j] = i == j;
        }
    }
    /* Cholesky, then the inverse by columns */
    for (size_t j = 0; j < m; j++) {
        double d = a[j][j];
        for (size_t k = 0; k < j; k++)
            d -= a[j][k] * a[j][k];
        if (!(d > 1e-11)) { /* 1 - d is the squared multiple correlation with the columns before */
            *weakest = j;
            return false;
        }
        a[j][j] = sqrt(d);
        for (size_t i = j + 1; i < m; i++) {
            double s = a[i][j];
            for (size_t k = 0; k < j; k++)
                s -= a[i][k] * a[j][k];
            a[i][j] = s / a[j][j];
        }
    }
    for (size_t column = 0; column < m; column++) {
        for (size_t i = 0; i < m; i++) {
            double s = inverse[i][column];
            for (size_t k = 0; k < i; k++)
                s -= a[i][k] * inverse[k][column];
            inverse[i][column] = s / a[i][i];
        }
        for (size_t i = m; i-- > 0;) {
            double s = inverse[i][column];
            for (size_t k = i + 1; k < m; k++)
                s -= a[k][i] * inverse[k][column];
            inverse[i][column] = s / a[i][i];
        }
    }
    for (size_t i = 0; i < m; i++) {
        step[i] = 0;
        for (size_t j = 0; j < m; j++) {
            step[i] += inverse[i][j] * g[j] / scale[i];
            fit->covariance[i][j] = inverse[i][j] / (scale[i] * scale[j]);
        }
        fit->shared[i] = sqrt(fmax(0, 1 - 1 / inverse[i][i]));
    }
    return true;
}

static lw_status no_start(lw_error *err)
{
    return lw_fail(err, LW_NO_CONVERGENCE, NULL, "the model does not exist at the starting values");
}

/* The iteration proper; leaves the last evaluation in w. */
static lw_status iterate(work *w, double *p, lw_generalised_fit *fit, size_t *weakest, lw_error *err)
{
    size_t m = w->problem->m;
    for (fit->iterations = 0; fit->iterations < ITERATIONS_MOST; fit->iterations++) {
        if (!evaluate(w, p))
            return no_start(err);
        if (fit->iterations == 0 || w->problem->x_covariance != NULL) {
            lw_status status = whitener(w, err);
            if (status != LW_OK)
                return status;
            if (w->rank < m)
                return lw_fail(err, LW_NOT_SUPPORTED, "fit the lines one by one, or over a longer range",
                               "the lines carry %zu independent numbers, %zu are needed", w->rank, m);
        }
        fit->chi2 = whitened(w);
        double step[LW_GENERALISED_MOST], tried[LW_GENERALISED_MOST];
        if (!solve_normal(w, step, fit, weakest))
            return lw_fail(err, LW_NOT_SUPPORTED, "measure more lines, or over a longer range",
                           "the lines do not determine parameter %zu of %zu", *weakest + 1, m);
        double largest = 0;
        for (size_t i = 0; i < m; i++)
            largest = fmax(largest, fabs(step[i]) / sqrt(fit->covariance[i][i]));
        if (largest < STEP_ENOUGH) { /* chi2 is flat to its rounding here: what it says of a step is chance */
            for (size_t i = 0; i < m; i++)
                tried[i] = p[i] + step[i];
            if (evaluate(w, tried))
                memcpy(p, tried, m * sizeof(double));
            else if (!evaluate(w, p))
                return no_start(err);
            return LW_OK;
        }
        /* shorten until the model exists and chi2 does not rise by more than rounding */
        double share = 1;
        for (;; share /= 2) {
            if (share < 1e-9) {
                if (largest < 1e-4) /* no way down at the rounding of the data: this is the minimum */
                    return evaluate(w, p) ? LW_OK : no_start(err);
                return lw_fail(err, LW_NO_CONVERGENCE, NULL, "no step lowers chi-square after %zu iterations",
                               fit->iterations);
            }
            for (size_t i = 0; i < m; i++)
                tried[i] = p[i] + share * step[i];
            if (evaluate(w, tried) && whitened(w) <= fit->chi2 * (1 + 1e-12) + 1e-20)
                break;
        }
        memcpy(p, tried, m * sizeof(double));
    }
    return lw_fail(err, LW_NO_CONVERGENCE, NULL, "no convergence after %d iterations", ITERATIONS_MOST);
}

lw_status lw_generalised_solve(const lw_generalised *problem, lw_arena *arena, double *p,
                               lw_generalised_fit *fit, size_t *weakest, lw_error *err)
{
    size_t nowhere = 0, n = problem->n;
    if (weakest == NULL)
        weakest = &nowhere;
    *fit = (lw_generalised_fit){.p = 1, .scatter = 1};
    if (problem->m == 0 || problem->m > LW_GENERALISED_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "%zu parameters, 1 to %d are possible", problem->m,
                       LW_GENERALISED_MOST);
    if (n < problem->m)
        return lw_fail(err, LW_NOT_SUPPORTED, "measure more lines", "%zu observations for %zu parameters", n,
                       problem->m);
    work w;
    lw_status status = start_work(&w, problem, arena, err);
    if (status == LW_OK)
        status = iterate(&w, p, fit, weakest, err);
    if (status != LW_OK)
        return status;
    fit->chi2 = whitened(&w);
    fit->rank = w.rank;
    fit->degrees = w.rank - problem->m;
    fit->p = lw_generalised_p(fit->chi2, fit->degrees);
    if (fit->degrees > 0)
        fit->scatter = fmax(1, sqrt(fit->chi2 / (double)fit->degrees));
    fit->calculated = w.value;
    fit->u = w.u;
    fit->residual = lw_arena_take(arena, n, sizeof(double), err);
    if (fit->residual == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        fit->residual[i] = problem->y[i] - w.value[i];
    /* dp = C J' W (dy), all whitened */
    size_t m = problem->m;
    fit->gain = lw_arena_take(arena, m * n, sizeof(double), err);
    if (fit->gain == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k < w.rank; k++) {
            double by_white = 0;
            for (size_t l = 0; l < m; l++)
                by_white += fit->covariance[j][l] * w.white_slopes[k * m + l];
            for (size_t i = 0; i < n; i++)
                fit->gain[j * n + i] += by_white * w.whiten[k * n + i];
        }
    return LW_OK;
}
