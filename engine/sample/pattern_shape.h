/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What size and strain make of the Fourier coefficients, the same for every line: curves over the column length with
 * their slopes to the parameters. */
#ifndef LW_SAMPLE_PATTERN_SHAPE_H
#define LW_SAMPLE_PATTERN_SHAPE_H

#include "base/arena.h"
#include "physics/size_distribution.h"
#include "physics/strain.h"

#define LW_PATTERN_STRAIN_MOST 8
#define LW_PATTERN_SIZE_MOST 32

/* Rows of the parameters that all lines share. */
enum {
    LW_PATTERN_STRAIN, /* first of the strain's */
    LW_PATTERN_ANISOTROPY = LW_PATTERN_STRAIN + LW_PATTERN_STRAIN_MOST, /* q */
    LW_PATTERN_FALL, /* of the scattering power across a line, exp(-fall (s^2 - s0^2)), nm^2 */
    LW_PATTERN_SIZE, /* first of the size's. Lognormal spheres: */
    LW_PATTERN_INVERSE_SIZE = LW_PATTERN_SIZE, /* of the area-weighted size, nm^-1: what the lines say best */
    LW_PATTERN_SIGMA                           /* of ln(diameter) */
};
#define LW_PATTERN_SHARED_MOST (LW_PATTERN_SIZE + LW_PATTERN_SIZE_MOST)

typedef struct lw_pattern_shape {
    const lw_strain_form *strain;
    size_t n_size, n_strain; /* parameters */
    /* curves over lengths 0, step, 2 step ...: [n] */
    double step;
    size_t n;
    double *log_length;                          /* of all but the first */
    double *size, *size_slope[LW_PATTERN_SIZE_MOST];
    double *displacement, *strained[LW_PATTERN_STRAIN_MOST]; /* slopes of the displacement, times size */
    /* fall of the size coefficient and of <Delta^2>/L at L = 0, nm^-1 and nm, and their slopes */
    double size_kink, size_kink_slope[LW_PATTERN_SIZE_MOST];
    double strain_kink, strain_kink_slope[LW_PATTERN_STRAIN_MOST];
    double combine[LW_PATTERN_STRAIN_MOST]; /* <Delta^2> is the sum of its slopes times these */
} lw_pattern_shape;

/* Takes the curves of n lengths. */
lw_status lw_pattern_shape_begin(lw_pattern_shape *shape, size_t n, double step, lw_arena *arena, lw_error *err);
void lw_pattern_shape_set_strain(lw_pattern_shape *shape, const lw_strain_form *strain);

/* The curves for the parameters p[LW_PATTERN_SIZE + n_size]; slopes only if asked for. */
void lw_pattern_shape_fill(lw_pattern_shape *shape, const double *p, bool slopes);

/* Whether the parameters describe anything. */
bool lw_pattern_shape_possible(const lw_pattern_shape *shape, const double *p);

/* <Delta^2> of columns of one length, nm^2. */
double lw_pattern_shape_displacement(const lw_pattern_shape *shape, const double *p, double length_nm);

/* The spheres that the parameters p describe. */
lw_spheres lw_pattern_spheres(const double *p);

#endif
