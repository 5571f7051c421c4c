/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The shape of a calibration's profile at one wavelength, for looking at and for comparing. */
#ifndef LW_INSTRUMENT_PROFILE_SHAPE_H
#define LW_INSTRUMENT_PROFILE_SHAPE_H

#include "instrument/calibration.h"

/* The figure of the profile at an angle: FWHM, breadth and places from the geometry itself where there is one (the table that
 * fits take is as sharp as its grid, 1 to 2 % of a width), else from the width functions. */
lw_status lw_profile_figure(lw_engine *engine, const lw_calibration *calibration, double two_theta_deg,
                            lw_width_figure *figure, lw_error *err);

/* Density of the profile at an angle, 1/deg, at n offsets from the unaberrated place, degrees. */
lw_status lw_profile_curve(lw_engine *engine, const lw_calibration *calibration, double two_theta_deg, size_t n,
                           const double *offset_deg, double *density, lw_error *err);

/* Asymmetry at n angles: the centroid minus the middle of the profile at half its height, degrees; negative where the tail
 * goes to low angles. Its u follows from the covariance of the width function, or of the refined geometry, by central
 * differences. */
lw_status lw_profile_asymmetry(lw_engine *engine, const lw_calibration *calibration, size_t n, const double *two_theta_deg,
                               lw_quantity *asymmetry, lw_error *err);

#endif
