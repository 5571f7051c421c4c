/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/sensitivity.h"

#include <math.h>
#include <string.h>

enum { PARTS = sizeof(lw_optics_figure) / sizeof(double) };

static lw_status figures(lw_engine *engine, const lw_geometry *geometry, size_t n, const double *two_theta_deg,
                         lw_optics_figure *figure, lw_error *err)
{
    lw_optics optics;
    lw_status status = lw_optics_begin(engine, geometry, &optics, err);
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        status = lw_optics_figure_at(&optics, two_theta_deg[i], &figure[i], err);
        if (status == LW_OK)
            status = lw_engine_poll(engine, err);
    }
    lw_optics_end(&optics);
    return status;
}

/* (high - low)/by, part by part. */
static lw_optics_figure difference(const lw_optics_figure *high, const lw_optics_figure *low, double by)
{
    double h[PARTS], l[PARTS];
    memcpy(h, high, sizeof h);
    memcpy(l, low, sizeof l);
    for (int k = 0; k < PARTS; k++)
        h[k] = (h[k] - l[k]) / by;
    lw_optics_figure out;
    memcpy(&out, h, sizeof out);
    return out;
}

static lw_optics_figure propagated(const lw_refined_set *refined, const lw_optics_figure slope[LW_REFINED_MOST])
{
    double variance[PARTS] = {0};
    for (size_t i = 0; i < refined->n; i++)
        for (size_t j = 0; j < refined->n; j++) {
            double a[PARTS], b[PARTS];
            memcpy(a, &slope[i], sizeof a);
            memcpy(b, &slope[j], sizeof b);
            for (int k = 0; k < PARTS; k++)
                variance[k] += a[k] * refined->covariance[i][j] * b[k];
        }
    for (int k = 0; k < PARTS; k++)
        variance[k] = sqrt(fmax(variance[k], 0));
    lw_optics_figure out;
    memcpy(&out, variance, sizeof out);
    return out;
}

lw_status lw_optics_figures(lw_engine *engine, const lw_geometry *geometry, const lw_refined_set *refined, size_t n,
                            const double *two_theta_deg, lw_optics_figure *figure, lw_optics_figure *u,
                            lw_optics_figure (*slope)[LW_REFINED_MOST], lw_error *err)
{
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    lw_optics_figure *side[2] = {lw_arena_take(&scratch, n, sizeof *figure, err), lw_arena_take(&scratch, n, sizeof *figure, err)};
    lw_optics_figure(*by)[LW_REFINED_MOST] = lw_arena_take(&scratch, n, sizeof *by, err);
    lw_status status = side[0] && side[1] && by ? figures(engine, geometry, n, two_theta_deg, figure, err) : LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < refined->n && status == LW_OK; j++) {
        double spread = sqrt(fmax(refined->covariance[j][j], 0)), place[2];
        if (!(spread > 0))
            continue;
        for (int s = 0; s < 2 && status == LW_OK; s++) {
            lw_geometry moved = *geometry;
            double *field = lw_geometry_field(&moved, refined->name[j]);
            *field = place[s] = fmax(*field + (s - 0.5) * spread, 0);
            status = figures(engine, &moved, n, two_theta_deg, side[s], err);
        }
        for (size_t i = 0; i < n && status == LW_OK; i++)
            by[i][j] = difference(&side[1][i], &side[0][i], place[1] - place[0]);
    }
    for (size_t i = 0; i < n && status == LW_OK; i++)
        u[i] = propagated(refined, by[i]);
    if (status == LW_OK && slope != NULL)
        memcpy(slope, by, n * sizeof *by);
    lw_arena_end(&scratch);
    return status;
}
