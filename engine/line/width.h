/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Width functions: how wide and how skew a profile at one wavelength is at every angle. One form
 * serves the instrument (fitted to a standard, kept in the calibration) and, when a sample's lines
 * overlap too much to be widened one by one, the sample.
 *   Gaussian:   FWHM^2 = U tan^2(theta) + V tan(theta) + W + P/cos^2(theta)   (Caglioti, Paoletti & Ricci
 *               1958 Nucl. Instrum. 3, 223; P: Scherrer-like)
 *   Lorentzian: FWHM   = X tan(theta) + Y/cos(theta) + Z
 *   axial:      one of two published descriptions, each with two parameters, see lw_axial_kind */
#ifndef LW_LINE_WIDTH_H
#define LW_LINE_WIDTH_H

#include <stdbool.h>
#include <stddef.h>

enum {
    LW_U, LW_V, LW_W, LW_P,  /* deg^2 */
    LW_X, LW_Y, LW_Z,        /* deg */
    LW_AXIAL_1, LW_AXIAL_2,  /* the two parameters of the axial description, dimensionless */
    LW_WIDTH_PARAMETERS
};

/* How axial divergence is described. */
typedef enum lw_axial_kind {
    LW_AXIAL_NONE,
    /* Diffracted beam only, as for a parallel incident beam: half-lengths of specimen S/L and slit H/L over the
     * radius. Finger, Cox & Jephcoat (1994) J. Appl. Cryst. 27, 892. */
    LW_AXIAL_FINGER,
    /* Incident and diffracted beam through Soller slits. A ray with axial angles alpha before and beta after the
     * specimen is seen at 2phi with cos(2phi) = (cos(2theta) - sin(alpha) sin(beta))/(cos(alpha) cos(beta)), that is
     * 2phi - 2theta = -m^2 cot(theta) + p^2 tan(theta), m = (alpha - beta)/2, p = (alpha + beta)/2: a tail to low
     * angles that dies with cot(theta), one to high angles that grows with tan(theta). Triangular transmissions make
     * m and p means of four rectangular variables (cubic B-spline); the parameters are their largest values, rad:
     * for both, the Soller slits' aperture where these alone limit the rays. Geometry: Cheary & Coelho (1998)
     * J. Appl. Cryst. 31, 851. */
    LW_AXIAL_SOLLER
} lw_axial_kind;

/* A profile given by numbers instead: its density on a grid of offsets, at evenly spaced angles, to be convolved with
 * the function's Gaussian, which is as wide as the grid needs. Between angles it is interpolated linearly. */
#define LW_TABLE_MOST 128
typedef struct lw_profile_table {
    double first_deg, step_deg;   /* angles 2theta */
    size_t n_angles;
    double low_deg, spacing_deg;  /* offsets from the unaberrated position */
    size_t n;                     /* offsets, at most LW_TABLE_MOST */
    const double *weight;         /* [n_angles][n], each row sums to 1 */
} lw_profile_table;

typedef struct lw_width_function {
    double value[LW_WIDTH_PARAMETERS];
    bool refined[LW_WIDTH_PARAMETERS]; /* false: held, its covariance is 0 */
    double covariance[LW_WIDTH_PARAMETERS][LW_WIDTH_PARAMETERS];
    lw_axial_kind axial;
    const lw_profile_table *table; /* instead of the axial description; NULL = none. Borrowed */
    double low_deg, high_deg;          /* 2theta between which it was fitted */
} lw_width_function;

extern const char *const lw_width_name[LW_WIDTH_PARAMETERS]; /* "U", "V", ... "axial 1", "axial 2" */
extern const char *const lw_axial_names[];                    /* of lw_axial_kind, NULL-terminated */

/* Square of the Gaussian FWHM, deg^2, at 2theta; never negative (clipped at 0). slopes[LW_WIDTH_PARAMETERS]
 * (may be NULL) receives the derivatives to the parameters. */
double lw_width_gauss_variance(const double *value, double two_theta_deg, double *slopes);
/* Lorentzian FWHM, deg, likewise, never negative. */
double lw_width_lorentz(const double *value, double two_theta_deg, double *slopes);

#endif
