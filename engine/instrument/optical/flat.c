/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Flat specimen: a ray at the equatorial angle phi, -alpha/2..alpha/2, meets the specimen off the focusing circle and is
 * shifted by e = e_M (2 phi/alpha)^2, e_M = -(alpha^2/2) cot(theta): density 1/(2 sqrt(e e_M)), mean e_M/3. */
#include "instrument/optical/aberration.h"

#include <math.h>
#include <stddef.h>

static void transform(const lw_geometry *g, double two_theta_deg, double k, double *re, double *im)
{
    double alpha = g->divergence_deg * (M_PI / 180), theta = two_theta_deg * (M_PI / 360);
    double most = -0.5 * alpha * alpha / tan(theta) * (180 / M_PI), phase = k * most;
    double size = fabs(phase), c = 0, d = 0; /* mean of exp(-i size u^2) over u = 0..1 = c - i d */
    if (size > 20) {
        /* the whole Fresnel integral less its tail beyond 1, by the tail's asymptotic series */
        double x = 1 / (2 * size), even = x - 3 * x * x * x, odd = x * x - 15 * x * x * x * x;
        c = 0.5 * sqrt(0.5 * M_PI / size) + even * sin(size) - odd * cos(size);
        d = 0.5 * sqrt(0.5 * M_PI / size) - even * cos(size) - odd * sin(size);
    } else {
        /* Gauss-Legendre pieces, short against the last oscillation */
        static const double node[4] = {0.0694318442029737, 0.3300094782075719, 0.6699905217924281, 0.9305681557970263};
        static const double weight[4] = {0.1739274225687269, 0.3260725774312731, 0.3260725774312731, 0.1739274225687269};
        size_t pieces = (size_t)(1 + size);
        for (size_t i = 0; i < pieces; i++)
            for (size_t j = 0; j < 4; j++) {
                double u = ((double)i + node[j]) / (double)pieces;
                c += weight[j] * cos(size * u * u) / (double)pieces;
                d += weight[j] * sin(size * u * u) / (double)pieces;
            }
    }
    *re = c;
    *im = phase < 0 ? d : -d;
}

const lw_optical lw_optical_flat = {
    .name = "flat_specimen",
    .definition = "density 1/(2 sqrt(e e_M)) between e_M = -(alpha^2/2) cot(theta) and 0",
    .source = "Cheary & Coelho (1992) J. Appl. Cryst. 25, 109",
    .transform = transform};
