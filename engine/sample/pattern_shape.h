/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What size and strain make of the Fourier coefficients, the same for every line: curves over the column
 * length with their slopes to the parameters. */
#ifndef LW_SAMPLE_PATTERN_SHAPE_H
#define LW_SAMPLE_PATTERN_SHAPE_H

#include "base/arena.h"
#include "physics/size_distribution.h"
#include "physics/size_histogram.h"
#include "physics/strain.h"
#include "physics/strain_knots.h"

#define LW_PATTERN_STRAIN_MOST 8
#define LW_PATTERN_SIZE_MOST 32

/* Rows of the parameters that all lines share. */
enum {
    LW_PATTERN_STRAIN, /* first of the strain's; at knots: ln <eps^2> at the first, then the steps from knot
                          to knot */
    LW_PATTERN_ANISOTROPY = LW_PATTERN_STRAIN + LW_PATTERN_STRAIN_MOST, /* q */
    LW_PATTERN_VARIATION, /* kappa: variance over squared mean of the mean square strain, from crystal to
                             crystal */
    LW_PATTERN_FALL,      /* of the scattering power across a line, exp(-fall (s^2 - s0^2)), nm^2 */
    LW_PATTERN_SIZE,      /* first of the size's. Lognormal spheres: */
    LW_PATTERN_INVERSE_SIZE = LW_PATTERN_SIZE, /* of the area-weighted size, nm^-1: what the lines say best */
    LW_PATTERN_SIGMA /* of ln(diameter). A histogram instead: the shares of its hats, of which only ratios
                        count */
};
#define LW_PATTERN_SHARED_MOST (LW_PATTERN_SIZE + LW_PATTERN_SIZE_MOST)

typedef struct lw_pattern_shape {
    const lw_strain_form *strain; /* NULL: free at knots */
    const lw_strain_knots *knots;
    const lw_size_histogram *histogram; /* NULL: lognormal spheres */
    size_t n_size, n_strain;            /* parameters */
    /* curves over lengths 0, step, 2 step ...: [n] */
    double step;
    size_t n;
    double *hat[LW_PATTERN_SIZE_MOST]; /* coefficients of each hat */
    double *size, *size_slope[LW_PATTERN_SIZE_MOST];
    double *displacement, *strained[LW_PATTERN_STRAIN_MOST]; /* slopes of the displacement, times size */
    /* fall of the size coefficient and of <Delta^2>/L at L = 0, nm^-1 and nm, and their slopes */
    double size_kink, size_kink_slope[LW_PATTERN_SIZE_MOST];
    double strain_kink, strain_kink_slope[LW_PATTERN_STRAIN_MOST];
    double combine[LW_PATTERN_STRAIN_MOST]; /* <Delta^2> is the sum of its slopes times these */
} lw_pattern_shape;

/* Takes the curves of n lengths, for lognormal spheres or the histogram (borrowed). The strain is constant at
 * first. */
lw_status lw_pattern_shape_begin(lw_pattern_shape *shape, size_t n, double step,
                                 const lw_size_histogram *histogram, lw_arena *arena, lw_error *err);
/* One of these, the other NULL; borrowed. */
void lw_pattern_shape_set_strain(lw_pattern_shape *shape, const lw_strain_form *form,
                                 const lw_strain_knots *knots);

/* The curves for the parameters p[LW_PATTERN_SIZE + n_size]; slopes only if asked for. */
void lw_pattern_shape_fill(lw_pattern_shape *shape, const double *p, bool slopes);

/* Whether the parameters describe anything. */
bool lw_pattern_shape_possible(const lw_pattern_shape *shape, const double *p);

/* <Delta^2> of columns of one length, nm^2. */
double lw_pattern_shape_displacement(const lw_pattern_shape *shape, const double *p, double length_nm);

/* The lognormal spheres that the parameters p describe. */
lw_spheres lw_pattern_spheres(const double *p);

/* ln <eps^2> at the knots, y[n], for the parameters p. */
void lw_pattern_shape_knots(const lw_pattern_shape *shape, const double *p, double *y);

/* Volume-weighted mean of the sphere diameter's power, nm^power: power 1 is 4/3 of size_volume, -1 is 2/3 of
 * its area counterpart's reciprocal, and ratios of -2, -3 and -1 give the mean diameter and its dispersion. */
double lw_pattern_shape_moment(const lw_pattern_shape *shape, const double *p, double power);

#endif
