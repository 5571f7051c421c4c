/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Optical aberrations of a Bragg-Brentano diffractometer: what each does to a line at one wavelength, from the
 * geometry. Each is one file that ends in one constant; optics.c convolves them by multiplying their transforms.
 * Cheary & Coelho (1992) J. Appl. Cryst. 25, 109; (1998) 31, 851 and 862. */
#ifndef LW_INSTRUMENT_OPTICAL_ABERRATION_H
#define LW_INSTRUMENT_OPTICAL_ABERRATION_H

/* The geometry. Lengths in mm, angles in degrees but the Soller slits'; 0 leaves an aberration out. */
typedef struct lw_geometry {
    double radius;           /* source to axis and axis to receiving slit */
    double source_width;     /* as seen from the specimen */
    double slit_width;       /* receiving slit */
    double divergence_deg;   /* full equatorial divergence */
    double source_length, specimen_length, slit_length; /* axial */
    double soller_incident, soller_diffracted;          /* rad: foil distance over foil length */
    double attenuation;      /* linear, 1/mm, of the specimen with its pores */
    double thickness;        /* of the specimen; 0 = thick */
    double tilt_deg;         /* misset 2:1 angle of the specimen */
    double gauss_deg;        /* FWHM of what else is Gaussian, for refinement */
} lw_geometry;

typedef struct lw_optical {
    const char *name;
    const char *definition;
    const char *source;
    /* Transform of the density of the shift e (degrees 2theta): mean of exp(-i k e), k in 1/deg >= 0. */
    void (*transform)(const lw_geometry *geometry, double two_theta_deg, double k, double *re, double *im);
} lw_optical;

extern const lw_optical lw_optical_source, lw_optical_slit, lw_optical_flat, lw_optical_transparency;

#endif
