/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A distribution of sphere diameters without a formula: the share of the volume over ln(diameter) is linear
 * between equally spaced nodes, a sum of triangular hats, and 0 beyond the last ones. Every quantity is a sum
 * over the hats of a share times what the hat alone would give. Source: histograms of sizes in line-profile
 * fits: Leoni & Scardi (2004) J. Appl. Cryst. 37, 629 (from memory). */
#ifndef LW_PHYSICS_SIZE_HISTOGRAM_H
#define LW_PHYSICS_SIZE_HISTOGRAM_H

#include <stddef.h>

/* Nodes at ln(D/nm) = first, first + step, ...; n > 0, step > 0. */
typedef struct lw_size_histogram {
    size_t n;
    double first, step;
} lw_size_histogram;

/* Diameter of a node, nm. */
double lw_size_histogram_diameter(const lw_size_histogram *histogram, size_t node);

/* Fourier coefficient at a column length L >= 0 (nm) of spheres whose volume is spread as the hat of one
 * node, 1 at L = 0: the mean over the hat of 1 - 3L/2D + L^3/2D^3 where D > L. */
double lw_size_histogram_coefficient(const lw_size_histogram *histogram, size_t node, double length_nm);

/* Volume-weighted mean of D^power over the hat of one node, nm^power: D_node^power (sinh(x)/x)^2, x = power
 * step/2. */
double lw_size_histogram_moment(const lw_size_histogram *histogram, size_t node, double power);

#endif
