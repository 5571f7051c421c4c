/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/axial.h"

#include <math.h>

/* Transmission of parallel foils: falls linearly to 0 at the aperture. */
static double through(double angle, double aperture)
{
    return aperture > 0 ? fmax(0, 1 - fabs(angle) / aperture) : 1;
}

lw_status lw_axial_rays_make(const lw_geometry *g, lw_arena *arena, lw_axial_rays *rays, lw_error *err)
{
    enum { POINTS = 28 };
    double length[3] = {g->source_length, g->specimen_length, g->slit_length};
    size_t points[3], most = 1;
    for (int i = 0; i < 3; i++) {
        points[i] = length[i] > 0 ? POINTS : 1;
        most *= points[i];
    }
    rays->n = 0;
    rays->m2 = lw_arena_take(arena, most, sizeof(double), err);
    rays->p2 = lw_arena_take(arena, most, sizeof(double), err);
    rays->weight = lw_arena_take(arena, most, sizeof(double), err);
    if (!rays->m2 || !rays->p2 || !rays->weight)
        return LW_OUT_OF_MEMORY;
    double sum = 0;
    for (size_t i = 0; i < points[0]; i++)
        for (size_t j = 0; j < points[1]; j++)
            for (size_t k = 0; k < points[2]; k++) {
                double from = (((double)i + 0.5) / (double)points[0] - 0.5) * length[0];
                double at = (((double)j + 0.5) / (double)points[1] - 0.5) * length[1];
                double to = (((double)k + 0.5) / (double)points[2] - 0.5) * length[2];
                double alpha = (at - from) / g->radius, beta = (to - at) / g->radius;
                double weight = through(alpha, g->soller_incident) * through(beta, g->soller_diffracted);
                if (!(weight > 0))
                    continue;
                double m = 0.5 * (alpha - beta), p = 0.5 * (alpha + beta);
                rays->m2[rays->n] = m * m;
                rays->p2[rays->n] = p * p;
                rays->weight[rays->n++] = weight;
                sum += weight;
            }
    if (!(sum > 0))
        return lw_fail(err, LW_BAD_ARGUMENT, "check the lengths and the Soller slits", "no ray passes the axial slits");
    for (size_t i = 0; i < rays->n; i++)
        rays->weight[i] /= sum;
    return LW_OK;
}

void lw_axial_rays_fill(const lw_axial_rays *rays, double two_theta_deg, size_t n, double step, double *density)
{
    double t = tan(two_theta_deg * (M_PI / 360)), to_steps = 180 / M_PI / step;
    for (size_t i = 0; i < rays->n; i++) {
        double at = (rays->p2[i] * t - rays->m2[i] / t) * to_steps, whole = floor(at), share = at - whole;
        long first = (long)whole % (long)n;
        if (first < 0)
            first += (long)n;
        density[first] += rays->weight[i] * (1 - share);
        density[((size_t)first + 1) % n] += rays->weight[i] * share;
    }
}
