/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Positions of the lines with everything that makes them uncertain together. */
#ifndef LW_SAMPLE_POSITIONS_H
#define LW_SAMPLE_POSITIONS_H

#include "profile/profiles.h"

/* Covariance [n*n] of the profiles' positions, deg^2 of 2theta: the fit's (lines->covariance, else the
 * variance of each position) and the calibration's aberrations, which move all lines together. Given: without
 * an aberration whose uncertainty is left out because the sample's own is refined, or NULL */
double *lw_position_covariance(const lw_profiles *profiles, const lw_aberration *without, lw_arena *arena,
                               lw_error *err);

/* Shift of a line at a true 2theta by the calibration's aberrations, degrees, without one of them (or NULL).
 * 0 without a calibration. */
double lw_position_shift(const lw_profiles *profiles, const lw_aberration *without, double two_theta_deg);

/* d(s)/d(2theta), nm^-1 per degree, of a line at s and theta. */
double lw_position_s_slope(double s_per_nm, double theta_deg);

#endif
