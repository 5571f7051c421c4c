/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sizes of crystals and what they do to a line: Fourier coefficients and mean column lengths of spheres with
 * lognormal diameters. */
#ifndef LW_PHYSICS_SIZE_DISTRIBUTION_H
#define LW_PHYSICS_SIZE_DISTRIBUTION_H

/* Diameters D of spheres, number weighted: ln D is normal with mean ln(median_nm) and standard deviation sigma.
 * median_nm > 0, sigma > 0. Slopes below are always to ln(median_nm) and to sigma; NULL = not wanted.
 * Source of all: Krill & Birringer (1998) Philos. Mag. A 77, 621; Langford, Louer & Scardi (2000) J. Appl. Cryst.
 * 33, 964. */
typedef struct lw_spheres {
    double median_nm, sigma;
} lw_spheres;

/* Fourier coefficient at a column length L >= 0 (nm), 1 at L = 0: the mean common volume of a sphere and the same
 * sphere shifted by L, over its volume. */
double lw_spheres_coefficient(const lw_spheres *spheres, double length_nm, double slopes[2]);

/* Volume-weighted mean column length (3/4) <D^4>/<D^3>, nm: the reciprocal of the integral breadth. */
double lw_spheres_size_volume(const lw_spheres *spheres, double slopes[2]);
/* Area-weighted mean column length (2/3) <D^3>/<D^2>, nm: the reciprocal of the initial slope. */
double lw_spheres_size_area(const lw_spheres *spheres, double slopes[2]);
/* Number-weighted mean diameter, nm, and variance of the diameter over the squared mean. */
double lw_spheres_diameter_mean(const lw_spheres *spheres, double slopes[2]);
double lw_spheres_diameter_dispersion(const lw_spheres *spheres, double slopes[2]);
/* n-th moment of the diameter <D^n>, nm^n. */
double lw_spheres_moment(const lw_spheres *spheres, double n);
/* Density of column lengths p(L), nm^-1, number of columns weighted, integral 1: the second derivative of the
 * coefficient times the area-weighted size. */
double lw_spheres_columns(const lw_spheres *spheres, double length_nm);

#endif
