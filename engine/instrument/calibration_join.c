/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/calibration_join.h"

#include "numeric/least_squares.h"
#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

/* Normal equations of all estimates, and each one's inverse covariance into inverse[k]. */
static lw_status gather(lw_engine *engine, const lw_estimate *estimate, size_t n_estimates, size_t n, double **inverse,
                        double *h, double *g, lw_arena *scratch, lw_error *err)
{
    for (size_t e = 0; e < n_estimates; e++) {
        const lw_estimate *at = &estimate[e];
        size_t weakest;
        inverse[e] = lw_arena_take(scratch, at->n * at->n, sizeof(double), err);
        if (inverse[e] == NULL)
            return LW_OUT_OF_MEMORY;
        lw_status status = lw_invert_normal(engine, at->covariance, at->n, NULL, inverse[e], &weakest, err);
        if (status != LW_OK)
            return status;
        for (size_t i = 0; i < at->n; i++)
            for (size_t j = 0; j < at->n; j++) {
                h[at->which[i] * n + at->which[j]] += inverse[e][i * at->n + j];
                g[at->which[i]] += inverse[e][i * at->n + j] * at->value[j];
            }
    }
    return LW_OK;
}

/* Values with those of `held` at their bounds. */
static lw_status solve(lw_engine *engine, const double *h, const double *g, size_t n, const bool *held, const double *bound,
                       double *value, double *c, lw_error *err)
{
    size_t weakest;
    lw_status status = lw_invert_normal(engine, h, n, held, c, &weakest, err);
    if (status != LW_OK)
        return status;
    for (size_t i = 0; i < n; i++) {
        value[i] = held[i] ? bound[i] : 0;
        for (size_t j = 0; j < n && !held[i]; j++) {
            double right = g[j];
            for (size_t k = 0; k < n; k++)
                right -= held[k] ? h[j * n + k] * bound[k] : 0;
            value[i] += held[j] ? 0 : c[i * n + j] * right;
        }
    }
    return LW_OK;
}

static lw_status join(lw_engine *engine, const lw_estimate *estimate, size_t n_estimates, size_t n, const double *lower,
                      double *value, double *covariance, lw_joined *joined, lw_arena *scratch, lw_error *err)
{
    double *h = lw_arena_take(scratch, n * n, sizeof *h, err), *g = lw_arena_take(scratch, n, sizeof *g, err);
    double **inverse = lw_arena_take(scratch, n_estimates, sizeof *inverse, err);
    double *bound = lw_arena_take(scratch, n, sizeof *bound, err);
    bool *held = lw_arena_take(scratch, n, sizeof *held, err), *untold = lw_arena_take(scratch, n, sizeof *untold, err);
    if (!h || !g || !inverse || !bound || !held || !untold)
        return LW_OUT_OF_MEMORY;
    lw_status status = gather(engine, estimate, n_estimates, n, inverse, h, g, scratch, err);
    size_t told = n;
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        held[i] = untold[i] = !(h[i * n + i] > 0);
        told -= untold[i];
    }
    for (bool again = true; again && status == LW_OK;) {
        again = false;
        status = solve(engine, h, g, n, held, bound, value, covariance, err);
        for (size_t i = 0; i < n && status == LW_OK; i++)
            if (!held[i] && value[i] < lower[i]) {
                bound[i] = lower[i];
                held[i] = again = true;
            }
    }
    size_t weakest;
    if (status == LW_OK) /* a width at its bound keeps its uncertainty */
        status = lw_invert_normal(engine, h, n, untold, covariance, &weakest, err);
    if (status != LW_OK)
        return status;
    double chi2 = 0, given = 0;
    for (size_t e = 0; e < n_estimates; e++) {
        const lw_estimate *at = &estimate[e];
        given += (double)at->n;
        for (size_t i = 0; i < at->n; i++)
            for (size_t j = 0; j < at->n; j++)
                chi2 += (at->value[i] - value[at->which[i]]) * inverse[e][i * at->n + j] *
                        (at->value[j] - value[at->which[j]]);
    }
    joined->chi2 = chi2;
    joined->freedom = given - (double)told;
    joined->p = joined->freedom > 0 ? lw_chi2_tail(chi2, joined->freedom) : 1;
    joined->birge = joined->p < 1e-3 ? sqrt(chi2 / joined->freedom) : 1;
    for (size_t i = 0; i < n * n; i++)
        covariance[i] *= joined->birge * joined->birge;
    return LW_OK;
}

lw_status lw_join(lw_engine *engine, const lw_estimate *estimate, size_t n_estimates, size_t n, const double *lower,
                  double *value, double *covariance, lw_joined *joined, lw_error *err)
{
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    lw_status status = join(engine, estimate, n_estimates, n, lower, value, covariance, joined, &scratch, err);
    lw_arena_end(&scratch);
    return status;
}
