/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A line as the scan of a perfect powder shows it: emission spectrum, intensity factor, optical profile, the powder's own
 * width and the step of the scan. */
#ifndef LW_INSTRUMENT_OPTICAL_OBSERVED_H
#define LW_INSTRUMENT_OPTICAL_OBSERVED_H

#include "instrument/optical/optics.h"
#include "physics/radiation.h"

typedef struct lw_observed {
    const lw_radiation *radiation;
    bool with_factor; /* the intensity (constant + cos2 cos^2(2theta))/sin^2(theta) varies across the spectrum */
    double constant_polarisation, cos2_polarisation;
    double domain_size_nm; /* mean column length of the powder: a Lorentzian of lambda/(D cos theta); 0 = none */
    double step_deg;       /* counts are summed over a step of this width; 0 = counted at points */
} lw_observed;

/* Density of a line that the reference wavelength puts at two_theta_deg, 1/deg, on the periodic grid of
 * optics.h, of the offset by lw_observed_offset(): on this axis, even in sin(theta), the emission
 * components are Lorentzians to any distance, which on the axis of 2theta they are not. Each component goes through the
 * optics at its own angle; the intensity factor is that at the spectrum's angle, aberrations don't enter it, and is 1 at the
 * reference wavelength. The spectrum is taken to diffract in proportion to its intensities: lambda^3 of the powder's
 * scattering and the attenuation of a thick specimen cancel.
 * curve: [LW_OPTICS_POINTS]. */
lw_status lw_observed_curve(const lw_observed *observed, lw_optics *optics, double two_theta_deg, double *curve,
                            lw_error *err);

/* Offset of an angle from a place, both 2theta in degrees: 2 (sin(theta) - sin(theta_0))/cos(theta_0), in degrees. */
double lw_observed_offset(double place_deg, double two_theta_deg);

/* Value and slope of a curve at an offset. */
double lw_observed_at(const double *curve, double offset_deg, double *slope);

#endif
