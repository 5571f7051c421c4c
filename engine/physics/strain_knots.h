/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Mean square strain as a free function of the column length: ln <eps^2(L)> is a natural cubic spline through
 * values at a few knots, on the axis x = ln(1 + L/scale), which is linear in short and logarithmic in long
 * columns, so that the strain is finite at L = 0 and goes as a power beyond the last knot. The logarithm
 * keeps it positive. Source: natural cubic splines and their roughness: Green & Silverman (1994)
 * Nonparametric Regression and Generalized Linear Models, ch. 2. */
#ifndef LW_PHYSICS_STRAIN_KNOTS_H
#define LW_PHYSICS_STRAIN_KNOTS_H

#include <stddef.h>

#define LW_STRAIN_KNOTS_MOST 8

typedef struct lw_strain_knots {
    size_t n;           /* 3 to LW_STRAIN_KNOTS_MOST; the first at L = 0 */
    double scale, step; /* nm, and between knots on the axis x */
    double bend[LW_STRAIN_KNOTS_MOST]
               [LW_STRAIN_KNOTS_MOST]; /* second derivatives at the knots, of the values */
} lw_strain_knots;

/* n knots from L = 0 to `longest` (nm), equally spaced in x. */
void lw_strain_knots_make(size_t n, double scale, double longest, lw_strain_knots *knots);

/* Column length of a knot, nm. */
double lw_strain_knots_length(const lw_strain_knots *knots, size_t knot);

/* <eps^2(L)> for values y[n] = ln <eps^2> at the knots; slopes[n] of ln <eps^2> to the values (NULL = not
 * wanted). */
double lw_strain_knots_square(const lw_strain_knots *knots, const double *y, double length_nm,
                              double *slopes);

/* Steps y[k] - y[k-1], k > 0, lie between *least and 0 where displacements along a column are not against
 * each other: then <Delta^2> grows at least as L and at most as L^2 (the mean square strain falls, but not
 * faster than 1/L). Columns are not shorter than neighbouring atoms, `spacing` (nm). */
double lw_strain_knots_least_step(const lw_strain_knots *knots, size_t knot, double spacing);

/* matrix[n n], row-major, such that y' matrix y is the integral of the squared second derivative over x. */
void lw_strain_knots_roughness(const lw_strain_knots *knots, double *matrix);

#endif
