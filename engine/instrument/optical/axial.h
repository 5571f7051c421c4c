/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Axial divergence of both beams: rays from a point of the source to one of the specimen to one of the receiving
 * slit, through both Soller slits. A ray with the axial angles alpha before and beta after the specimen is seen at
 * 2phi - 2theta = -m^2 cot(theta) + p^2 tan(theta), m = (alpha - beta)/2, p = (alpha + beta)/2; the distribution of
 * (m^2, p^2) is the same at every angle. Geometry: Cheary & Coelho (1998) J. Appl. Cryst. 31, 851; without incident
 * divergence the relation of Finger, Cox & Jephcoat (1994) J. Appl. Cryst. 27, 892, to second order. */
#ifndef LW_INSTRUMENT_OPTICAL_AXIAL_H
#define LW_INSTRUMENT_OPTICAL_AXIAL_H

#include "base/arena.h"
#include "instrument/optical/aberration.h"

typedef struct lw_axial_rays {
    size_t n;
    double *m2, *p2, *weight; /* rad^2; weights sum to 1 */
} lw_axial_rays;

/* Rays of a geometry, in the arena. A length of 0 is a point; a Soller slit of 0 is none. */
lw_status lw_axial_rays_make(const lw_geometry *geometry, lw_arena *arena, lw_axial_rays *rays, lw_error *err);

/* Adds their density to a periodic grid: n points of `step` degrees, point 0 at no shift, negative shifts at the end; a
 * ray is shared by its two neighbours, so that the mean is kept. */
void lw_axial_rays_fill(const lw_axial_rays *rays, double two_theta_deg, size_t n, double step, double *density);

#endif
