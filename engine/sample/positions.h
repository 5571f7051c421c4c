/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Positions of the lines with everything that makes them uncertain together. */
#ifndef LW_SAMPLE_POSITIONS_H
#define LW_SAMPLE_POSITIONS_H

#include "profile/profiles.h"

/* Covariance [n*n] of the profiles' positions, deg^2 of 2theta: the fit's (lines->covariance, else the
 * variance of each position), the calibration's aberrations and the scattering, which move all lines
 * together. Given: without[n_without] aberrations whose uncertainty is left out because the sample's own are
 * refined */
double *lw_position_covariance(const lw_profiles *profiles, const lw_aberration *const *without, size_t n_without,
                               lw_arena *arena, lw_error *err);

/* Shift of a line at a true 2theta by the calibration's aberrations, degrees, without some of them. 0 without
 * a calibration. */
double lw_position_shift(const lw_profiles *profiles, const lw_aberration *const *without, size_t n_without,
                         double two_theta_deg);

/* Shift of a broad line by the atoms' scattering, which falls while the line is crossed, degrees; *u its
 * standard uncertainty, common to all lines. A line of integral breadth b (in s) under a factor of
 * logarithmic slope g moves by g b^2/(2 pi), as a Gaussian does exactly. For the squared factors of carbon to
 * tungsten with usual thermal factors, g lies between -0.4 nm and -0.1 nm for s from 4 to 12 per nm
 * (International Tables for Crystallography C, table 6.1.1.1): its middle, and that range as a rectangular
 * distribution, are taken. 0 for unresolved lines, and where the fit of the lines was told to leave all
 * factors out; it has those of Lorentz and polarisation itself. */
double lw_position_scattering(const lw_profiles *profiles, size_t which, double *u);

/* d(s)/d(2theta), nm^-1 per degree, of a line at s and theta. */
double lw_position_s_slope(double s_per_nm, double theta_deg);

#endif
