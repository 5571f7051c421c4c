/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Do the lines agree? Each line, with the points nearest to it, draws at the parameters; at the minimum these
 * pulls cancel. Where they are larger than counting makes them, lines contradict each other under the model,
 * and the scatter of the pulls says what that does to each parameter, however the residuals within a line go
 * together: the covariance of clustered data of White (1982) Econometrica 50, 1, and Liang & Zeger (1986)
 * Biometrika 73, 13. With as few clusters as there are lines it is itself uncertain: it replaces the other
 * only where chance does not give it. */
#include "sample/pattern_fitter.h"

#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

#define CHANCE 0.01

/* Sum over the lines of the squared shift that each alone asks of the shared parameters. */
static lw_status add_pulls(lw_pattern_fitter *f, double *residual, double *difference, double *g,
                           double *square, size_t *groups, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    size_t n = m->n_parameters, shared = lw_pattern_background_row(m), begin = 0;
    *groups = 0;
    for (size_t k = 0; k < m->n_lines; k++) {
        size_t end = begin;
        double border = k + 1 < m->n_lines ? 0.5 * (m->line[k].s_start + m->line[k + 1].s_start) : INFINITY;
        while (end < m->n && m->s[end] < border)
            end++;
        if (end - begin < 5)
            continue; /* these points go to the next line */
        memset(difference, 0, m->n * sizeof *difference);
        memcpy(difference + begin, residual + begin, (end - begin) * sizeof *difference);
        memset(g, 0, n * sizeof *g);
        lw_status status = lw_pattern_project(m, f->p, difference, g, err);
        if (status != LW_OK)
            return status;
        for (size_t i = 0; i < shared; i++) {
            double shift = 0;
            for (size_t j = 0; j < n; j++)
                shift += f->inverse[i * n + j] * g[j];
            square[i] += shift * shift;
        }
        (*groups)++;
        begin = end;
    }
    return LW_OK;
}

lw_status lw_pattern_fitter_widen(lw_pattern_fitter *f, double misfit, double *covariance, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    size_t n = m->n_parameters, shared = lw_pattern_background_row(m), groups;
    lw_normal normal = {.n = n};
    lw_status status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    if (status != LW_OK)
        return status;
    double *residual = lw_arena_copy(f->arena, m->residual, m->n, sizeof *residual, err);
    double *difference = lw_arena_take(f->arena, m->n, sizeof *difference, err);
    double *g = lw_arena_take(f->arena, n, sizeof *g, err), factor[LW_PATTERN_SHARED_MOST] = {0};
    if (residual == NULL || difference == NULL || g == NULL)
        return LW_OUT_OF_MEMORY;
    status = add_pulls(f, residual, difference, g, factor, &groups, err);
    if (status != LW_OK || groups < 3)
        return status;
    double freedom = (double)groups - 1;
    for (size_t i = 0; i < shared; i++) {
        double counting = misfit * misfit * f->inverse[i * n + i];
        double ratio = counting > 0 ? factor[i] * ((double)groups / freedom) / counting : 1;
        factor[i] = ratio > 1 && lw_chi2_tail(ratio * freedom, freedom) < CHANCE ? sqrt(ratio) : 1;
        f->answer->disagreement = fmax(f->answer->disagreement, factor[i]);
    }
    for (size_t i = 0; i < shared; i++)
        for (size_t j = 0; j < shared; j++)
            covariance[i * n + j] *= factor[i] * factor[j];
    return LW_OK;
}
