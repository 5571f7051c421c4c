/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a width function means at an angle: FWHM, breadth and place of the profile at one wavelength. */
#ifndef LW_LINE_WIDTH_FIGURE_H
#define LW_LINE_WIDTH_FIGURE_H

#include "line/width.h"

typedef struct lw_width_figure {
    double fwhm_deg, u_fwhm, breadth_deg, u_breadth; /* breadth: area over height */
    double centroid_deg, top_deg, middle_deg; /* from the unaberrated position; middle: at half height */
    double d_fwhm[2], d_breadth[2]; /* slopes to the own Gaussian FWHM^2 (1/deg) and to the own Lorentzian FWHM */
} lw_width_figure;

/* Profile at one wavelength with the function's widths plus own parts.
 * Given:  two_theta_deg       0 to 180
 *         own_gauss_variance  square of the own Gaussian FWHM, deg^2, >= 0
 *         own_lorentz_deg     own Lorentzian FWHM, deg, >= 0
 * Returned: *figure; its standard uncertainties are propagated linearly from the function's covariance, u of the
 *           own parts is not included. All widths zero: everything 0. */
void lw_width_figure_at(const lw_width_function *function, double two_theta_deg, double own_gauss_variance,
                        double own_lorentz_deg, lw_width_figure *figure);

#endif
