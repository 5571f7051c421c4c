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
    size_t half = (most + 1) / 2; /* the rays mirrored in the equatorial plane are seen at the same angle */
    rays->sines = lw_arena_take(arena, half, sizeof(double), err);
    rays->cosines = lw_arena_take(arena, half, sizeof(double), err);
    rays->weight = lw_arena_take(arena, half, sizeof(double), err);
    if (!rays->sines || !rays->cosines || !rays->weight)
        return LW_OUT_OF_MEMORY;
    double sum = 0;
    for (size_t i = 0; i < points[0]; i++)
        for (size_t j = 0; j < points[1]; j++)
            for (size_t k = 0; k < points[2]; k++) {
                size_t at_ray = (i * points[1] + j) * points[2] + k, mirrored = most - 1 - at_ray;
                if (at_ray > mirrored)
                    continue;
                double from = (((double)i + 0.5) / (double)points[0] - 0.5) * length[0];
                double at = (((double)j + 0.5) / (double)points[1] - 0.5) * length[1];
                double to = (((double)k + 0.5) / (double)points[2] - 0.5) * length[2];
                double alpha = atan((at - from) / g->radius), beta = atan((to - at) / g->radius);
                double weight = through(alpha, g->soller_incident) * through(beta, g->soller_diffracted);
                if (!(weight > 0))
                    continue;
                /* lengths to axial angles on both sides of the specimen */
                weight *= (at_ray < mirrored ? 2 : 1) * pow(cos(alpha) * cos(beta), 2);
                rays->sines[rays->n] = sin(alpha) * sin(beta);
                rays->cosines[rays->n] = 1 / (cos(alpha) * cos(beta));
                rays->weight[rays->n++] = weight;
                sum += weight;
            }
    if (!(sum > 0))
        return lw_fail(err, LW_BAD_ARGUMENT, "check the lengths and the Soller slits", "no ray passes the axial slits");
    for (size_t i = 0; i < rays->n; i++)
        rays->weight[i] /= sum;
    return LW_OK;
}

static double cosine_seen(const lw_axial_rays *rays, size_t ray, double cosine)
{
    return (cosine - rays->sines[ray]) * rays->cosines[ray];
}

double lw_axial_shift(const lw_axial_rays *rays, size_t ray, double two_theta_deg)
{
    return acos(cosine_seen(rays, ray, cos(two_theta_deg * (M_PI / 180)))) * (180 / M_PI) - two_theta_deg;
}

void lw_axial_rays_fill(const lw_axial_rays *rays, double two_theta_deg, size_t n, double step, double *density)
{
    double two_theta = two_theta_deg * (M_PI / 180), cosine = cos(two_theta), to_steps = 180 / M_PI / step, sum = 0;
    for (size_t i = 0; i < n; i++)
        density[i] = 0;
    for (size_t i = 0; i < rays->n; i++) {
        double seen = cosine_seen(rays, i, cosine), sine2 = 1 - seen * seen;
        if (!(sine2 > 0))
            continue; /* closer to the direct beam than these axial angles */
        double at = (acos(seen) - two_theta) * to_steps, whole = floor(at), share = at - whole;
        double weight = rays->weight[i] / sqrt(sine2);
        long first = (long)whole % (long)n;
        if (first < 0)
            first += (long)n;
        density[first] += weight * (1 - share);
        density[((size_t)first + 1) % n] += weight * share;
        sum += weight;
    }
    for (size_t i = 0; i < n && sum > 0; i++)
        density[i] /= sum;
}
