/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the noise of a standard's counts does to a profile on a grid. An instrument that is wrong by a factor
 * 1 + e(L) is to the solution like data that are wrong by 1 - e(L): the target moves by -e x (observed line),
 * and the solution by Z response' weight times that. */
#include "profile/grid.h"

#include "numeric/cholesky.h"

#include <math.h>

#define LEAST 1e-3 /* of the observed line's transform, below which it does nothing */

/* Transform of the observed line at 0, step ...: its curve's and that of what the curve left. */
static lw_status observed(const lw__job *job, double step, size_t *n, double *re, double *im)
{
    const lw__window *data = &job->data;
    size_t end = *n;
    lw__instrument_transform(&job->instrument, step, end, re, im);
    for (size_t k = 0; k < end; k++) {
        double length = step * (double)k,
               a = job->line->area_s * lw__shape_coefficient(&job->line->shape, length, NULL);
        re[k] *= a;
        im[k] *= a;
        for (size_t i = 0; i < data->n; i++) {
            double phase = 2 * M_PI * length * data->s[i], x = data->step[i] * data->residual[i];
            re[k] += x * cos(phase);
            im[k] += x * sin(phase);
        }
        if (hypot(re[k], im[k]) < LEAST * re[0]) {
            *n = k + 1;
            break;
        }
    }
    return LW_OK;
}

/* Of one neighbour: moved[p][m], by how much a point p of its window moves x. */
static lw_status moves(const lw__job *job, const lw__grid *g, size_t neighbour, const double *z, double step,
                       size_t n, const double *re, const double *im, double **moved, lw_arena *scratch,
                       lw_error *err)
{
    size_t points = job->measured.line[neighbour]->data.n, m = g->m;
    double **by = lw_arena_take(scratch, n, sizeof *by, err);
    double *wave = lw_arena_take(scratch, g->n * 2 * n, sizeof *wave, err);
    double *pulled = lw_arena_take(scratch, m * 2 * n, sizeof *pulled, err);
    double *both = lw_arena_take(scratch, 2 * n, sizeof *both, err),
           *y = lw_arena_take(scratch, m, sizeof *y, err);
    if (!by || !wave || !pulled || !both || !y)
        return LW_OUT_OF_MEMORY;
    lw_status status = lw__measured_responses(&job->measured, neighbour, job->instrument.per_degree, step, n,
                                              by, scratch, err);
    if (status != LW_OK)
        return status;
    for (size_t i = 0; i < g->n; i++)
        for (size_t k = 0; k < n; k++) {
            double phase = 2 * M_PI * step * (double)k * job->data.s[i],
                   twice = (k == 0 ? 1 : 2) * step * g->weight[i];
            wave[i * 2 * n + 2 * k] = twice * cos(phase);
            wave[i * 2 * n + 2 * k + 1] = twice * sin(phase);
        }
    for (size_t i = 0; i < g->n; i++) /* response' weight wave, once for all points of the standard */
        for (size_t j = 0; j < m; j++) {
            double r = g->response[i * m + j];
            for (size_t k = 0; k < 2 * n && r != 0; k++)
                pulled[j * 2 * n + k] += r * wave[i * 2 * n + k];
        }
    for (size_t p = 0; p < points; p++) {
        if ((moved[p] = lw_arena_take(scratch, m, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
        for (size_t k = 0; k < n; k++) {
            double u = by[k][2 * p], v = by[k][2 * p + 1];
            both[2 * k] = u * re[k] - v * im[k];
            both[2 * k + 1] = u * im[k] + v * re[k];
        }
        for (size_t j = 0; j < m; j++)
            y[j] = lw_dot(pulled + j * 2 * n, both, 2 * n);
        for (size_t j = 0; j < m; j++)
            moved[p][j] = -lw_dot(z + j * m, y, m);
    }
    return lw_engine_poll(job->engine, err);
}

lw_status lw__add_standard(const lw__job *job, const lw__grid *g, const double *x, const double *z, double *c,
                           lw__answer *answer, lw_arena *scratch, lw_error *err)
{
    size_t m = g->m;
    if (job->measured.n == 0)
        return LW_OK;
    double step = 1 / (2 * (job->data.s[g->n - 1] - job->data.s[0])),
           most = 2.5 / (job->instrument.fwhm_deg * job->instrument.per_degree);
    size_t n = (size_t)fmin(most / step, 2000) + 2;
    double *re = lw_arena_take(scratch, n, sizeof *re, err), *im = lw_arena_take(scratch, n, sizeof *im, err);
    double *q = lw_arena_take(scratch, m, sizeof *q, err),
           *level = lw_arena_take(scratch, 2 * m, sizeof *level, err);
    if (!re || !im || !q || !level)
        return LW_OUT_OF_MEMORY;
    double *with = level + m;
    lw_status status = observed(job, step, &n, re, im);
    lw__grid_breadth(job, g, x, q);
    for (size_t neighbour = 0; neighbour < job->measured.n && status == LW_OK; neighbour++) {
        const lw__window *data = &job->measured.line[neighbour]->data;
        double **moved = lw_arena_take(scratch, data->n, sizeof *moved, err);
        double *by = answer->by_point[neighbour] = lw_arena_take(job->keep, data->n, sizeof *by, err);
        if (moved == NULL || by == NULL)
            return LW_OUT_OF_MEMORY;
        if ((status = moves(job, g, neighbour, z, step, n, re, im, moved, scratch, err)) != LW_OK)
            break;
        for (size_t j = 0; j < m; j++)
            level[j] = with[j] = 0;
        for (size_t p = 0; p < data->n; p++) {
            by[p] = lw_dot(q, moved[p], m);
            for (size_t j = 0; j < m; j++) {
                double weighed = moved[p][j] * data->own_variance[p];
                level[j] += moved[p][j];
                with[j] += moved[p][j] * data->with_level[p];
                for (size_t k = 0; k < m; k++)
                    c[j * m + k] += weighed * moved[p][k];
            }
        }
        for (size_t j = 0; j < m; j++)
            for (size_t k = 0; k < m; k++)
                c[j * m + k] +=
                    level[j] * level[k] * data->background_variance - level[j] * with[k] - with[j] * level[k];
    }
    return status;
}
