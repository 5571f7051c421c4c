/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Geometric factors of a powder line's intensity. */
#ifndef LW_PHYSICS_INTENSITY_H
#define LW_PHYSICS_INTENSITY_H

/* Polarisation of a beam that was unpolarised at its source: (1 + A cos^2(2theta))/(1 + A).
 * Given:  two_theta_deg      of the sample, degrees
 *         monochromator_deg  2theta of a crystal monochromator before or behind the sample, in the same
 *                            plane; 0 = none (A = 1), or A = cos^2(2theta_m) for a mosaic crystal
 * Returns 1 at 2theta = 0. Source: Azaroff (1955) Acta Cryst. 8, 701. */
double lw_polarisation(double two_theta_deg, double monochromator_deg);

/* Lorentz factor of a powder ring, 1/(sin^2(theta) cos(theta)): the integrated intensity on a scale of
 * angle. Source: International Tables for Crystallography C, 6.2. */
double lw_lorentz(double two_theta_deg);

/* Product of both: integrated intensity of a line against angle. */
double lw_lorentz_polarisation(double two_theta_deg, double monochromator_deg);

/* How the factor runs across one line whose profile is a function of s = 2 sin(theta)/lambda:
 * P/sin^2(theta). The cosine of lw_lorentz() is missing because ds = cos(theta) d(2theta)/lambda already
 * brings it in: I(2theta) = const P/sin^2(theta) i(s(2theta)). */
double lw_line_factor(double two_theta_deg, double monochromator_deg);

/* d ln(lw_line_factor)/d(2theta), 1/degree: times the variance of a line (deg^2) it is the shift of its
 * centroid by the factor. */
double lw_line_factor_slope(double two_theta_deg, double monochromator_deg);

#endif
