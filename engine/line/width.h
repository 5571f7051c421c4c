/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Width functions: how wide and how skew a profile at one wavelength is at every angle. One form
 * serves the instrument (fitted to a standard, kept in the calibration) and, when a sample's lines
 * overlap too much to be widened one by one, the sample.
 *   Gaussian:   FWHM^2 = U tan^2(theta) + V tan(theta) + W + P/cos^2(theta)   (Caglioti, Paoletti & Ricci
 *               1958 Nucl. Instrum. 3, 223; P: Scherrer-like)
 *   Lorentzian: FWHM   = X tan(theta) + Y/cos(theta) + Z
 *   axial:      Finger, Cox & Jephcoat 1994 J. Appl. Cryst. 27, 892 with half-lengths S/L, H/L */
#ifndef LW_LINE_WIDTH_H
#define LW_LINE_WIDTH_H

#include <stdbool.h>

enum {
    LW_U, LW_V, LW_W, LW_P,  /* deg^2 */
    LW_X, LW_Y, LW_Z,        /* deg */
    LW_AXIAL_S, LW_AXIAL_H,  /* specimen and slit half-length over radius, dimensionless */
    LW_WIDTH_PARAMETERS
};

typedef struct lw_width_function {
    double value[LW_WIDTH_PARAMETERS];
    bool refined[LW_WIDTH_PARAMETERS]; /* false: held, its covariance is 0 */
    double covariance[LW_WIDTH_PARAMETERS][LW_WIDTH_PARAMETERS];
    double low_deg, high_deg;          /* 2theta between which it was fitted */
} lw_width_function;

extern const char *const lw_width_name[LW_WIDTH_PARAMETERS]; /* "U", "V", ... "S/L", "H/L" */

/* Square of the Gaussian FWHM, deg^2, at 2theta; never negative (clipped at 0). slopes[LW_WIDTH_PARAMETERS]
 * (may be NULL) receives the derivatives to the parameters. */
double lw_width_gauss_variance(const double *value, double two_theta_deg, double *slopes);
/* Lorentzian FWHM, deg, likewise, never negative. */
double lw_width_lorentz(const double *value, double two_theta_deg, double *slopes);

/* Profile at one wavelength with the function's widths plus own parts: value of FWHM, integral breadth
 * (area over height) and shift of the centroid and of the top from the unaberrated position, degrees, with
 * standard uncertainties from the covariance (u of the own parts not included). */
typedef struct lw_width_figure {
    double fwhm_deg, u_fwhm, breadth_deg, u_breadth, centroid_deg, top_deg;
} lw_width_figure;
void lw_width_figure_at(const lw_width_function *function, double two_theta_deg, double own_gauss_variance,
                        double own_lorentz_deg, lw_width_figure *figure);

#endif
