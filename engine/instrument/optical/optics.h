/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The full optical profile: the instrument's profile at one wavelength as the convolution of named aberrations. */
#ifndef LW_INSTRUMENT_OPTICAL_OPTICS_H
#define LW_INSTRUMENT_OPTICAL_OPTICS_H

#include "instrument/optical/axial.h"

#include <stdbool.h>

extern const lw_optical *const lw_optical_list[]; /* those with a transform; NULL-terminated */

/* Refuses what can't be a diffractometer: a negative length, no radius, a Soller slit of 1 rad or more, a divergence of
 * 20 deg or more. The message names the quantity. */
lw_status lw_geometry_check(const lw_geometry *geometry, lw_error *err);

#define LW_OPTICS_POINTS 8192
#define LW_OPTICS_STEP 0.001 /* deg: a period of 8.192 deg */

typedef struct lw_optics {
    lw_engine *engine;
    lw_arena arena;
    lw_geometry geometry;
    lw_axial_rays rays;
    double *density, *transform, *second; /* [points], [points + 2] each */
    size_t last;                          /* of the frequencies: those above are set to 0. points/2 at first */
} lw_optics;

/* Prepares a geometry (checked). End with lw_optics_end(), also after an error. */
lw_status lw_optics_begin(lw_engine *engine, const lw_geometry *geometry, lw_optics *optics, lw_error *err);
void lw_optics_end(lw_optics *optics);

/* Transform of the profile at an angle: transform[k] (optics->transform or optics->second) = mean of
 * exp(-2 pi i k e/period), k = 0..points/2, all shifts e multiplied by `stretch` (1 on an axis of 2theta). */
lw_status lw_optics_transform(lw_optics *optics, double two_theta_deg, double stretch, double *transform, lw_error *err);

/* The profile, 1/deg, on the periodic grid (negative shifts at the end), into optics->density. sharpness_deg: FWHM of
 * a Gaussian that keeps the edges of boxes from ringing. */
lw_status lw_optics_profile(lw_optics *optics, double two_theta_deg, double sharpness_deg, lw_error *err);

/* FWHM, breadth (area over height), centroid, place of the top, middle at half height, third central moment. The edges of boxes are softened by
 * a Gaussian of 0.002 deg FWHM for the first two and the top; the moments are exact. */
typedef struct lw_optics_figure {
    double fwhm_deg, breadth_deg, centroid_deg, top_deg, middle_deg, third_moment_deg3;
} lw_optics_figure;
lw_status lw_optics_figure_at(lw_optics *optics, double two_theta_deg, lw_optics_figure *figure, lw_error *err);

#endif
