/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Axial divergence of both beams: rays from a point of the source to one of the specimen to one of the receiving
 * slit, through both Soller slits. A ray with the axial angles alpha before and beta after the specimen is seen at
 * 2phi with cos(2phi) = (cos(2theta) - sin(alpha) sin(beta))/(cos(alpha) cos(beta)): to second order
 * 2phi - 2theta = -m^2 cot(theta) + p^2 tan(theta), m = (alpha - beta)/2, p = (alpha + beta)/2. A cone of diffracted
 * rays meets the axial length dz of the slit with an intensity proportional to 1/sin(2phi).
 * Geometry: Cheary & Coelho (1998) J. Appl. Cryst. 31, 851; without incident divergence the relation and the weight of
 * Finger, Cox & Jephcoat (1994) J. Appl. Cryst. 27, 892. */
#ifndef LW_INSTRUMENT_OPTICAL_AXIAL_H
#define LW_INSTRUMENT_OPTICAL_AXIAL_H

#include "base/arena.h"
#include "instrument/optical/aberration.h"

typedef struct lw_axial_rays {
    size_t n;
    double *sines, *cosines, *weight; /* sin(alpha) sin(beta), 1/(cos(alpha) cos(beta)); weights sum to 1 */
} lw_axial_rays;

/* Rays of a geometry, in the arena. A length of 0 is a point; a Soller slit of 0 is none. */
lw_status lw_axial_rays_make(const lw_geometry *geometry, lw_arena *arena, lw_axial_rays *rays, lw_error *err);

/* Where a ray is seen, degrees from 2theta; NAN if no ray of these axial angles is diffracted by 2theta. */
double lw_axial_shift(const lw_axial_rays *rays, size_t ray, double two_theta_deg);

/* Writes their density on a periodic grid: n points of `step` degrees, point 0 at no shift, negative shifts at the end; a
 * ray is shared by its two neighbours, so that the mean is kept. The whole is 1. */
void lw_axial_rays_fill(const lw_axial_rays *rays, double two_theta_deg, size_t n, double step, double *density);

#endif
