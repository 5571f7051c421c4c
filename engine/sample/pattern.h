/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model of all lines of a scan at once: crystals of spherical shape with lognormal diameters, strained, seen through
 * the instrument, on a background. A line's profile on the axis s = 2 sin(theta)/lambda is the Fourier transform of
 *   A(L) = A_size(L) exp(-2 pi^2 s0^2 (1 - q H) <Delta^2(L)>) G(L),
 * G(L) the instrument's closed transform; H tells the direction in a cubic crystal. The transform is summed on a grid of L
 * by an FFT. Sums over a grid repeat with a period in s; what the neighbouring periods add is taken off by the
 * closed sum of their 1/s^2 tails, whose strength is the kink of A(L) at L = 0, and beyond half a period the tail
 * itself is used. Source: Scardi & Leoni (2002) Acta Cryst. A 58, 190; Warren & Averbach (1950). */
#ifndef LW_SAMPLE_PATTERN_H
#define LW_SAMPLE_PATTERN_H

#include "numeric/fft.h"
#include "numeric/least_squares.h"
#include "physics/size_distribution.h"
#include "physics/strain.h"
#include "profile/profiles.h"

enum {
    LW_PATTERN_INVERSE_SIZE, /* of the area-weighted size, nm^-1: what the lines say best, whatever sigma is */
    LW_PATTERN_SIGMA,        /* of ln(diameter) */
    LW_PATTERN_STRAIN_1,
    LW_PATTERN_STRAIN_2,
    LW_PATTERN_ANISOTROPY, /* q */
    LW_PATTERN_SHAPES,
    LW_PATTERN_FALL = LW_PATTERN_SHAPES, /* of the scattering power across a line, exp(-fall (s^2 - s0^2)), nm^2 */
    LW_PATTERN_BACKGROUND                /* first Chebyshev term added to the line fit's background */
};

typedef struct lw_pattern_line {
    const lw_line *line;
    double s_start;      /* nm^-1, where the line fit has it, aberrations included */
    double s_corrected;  /* nm^-1, of the lattice: scales strain */
    double hkl_sum;      /* H = (h2k2 + h2l2 + k2l2)/(h2 + k2 + l2)^2 of a cubic crystal, else 0 */
    double kink;         /* fall of ln|G| at L = 0, nm^-1 */
    double *g;           /* [2 n_lengths] G(L), re and im */
} lw_pattern_line;

typedef struct lw_pattern {
    lw_engine *engine;
    const lw_profiles *profiles;
    const lw_strain_form *strain;
    size_t n, n_lines, n_background, n_parameters;
    double *s;        /* [n] 2 sin(theta)/lambda of the points */
    double *factor;   /* [n] intensity factor of the points */
    double *weight;   /* [n] 1/variance */
    double *basis;    /* [n_background][n] */
    double *curve;    /* [n] model at the last evaluation */
    double *of_lines; /* [n] its part without the background */
    lw_pattern_line *line;
    /* grids */
    double length_step;
    size_t n_lengths, n_fft;
    lw_fft *plan;
    double *size, *size_slopes[2], *displacement, *displacement_slopes[2]; /* [n_lengths] */
    double *spectrum, *profile[1 + LW_PATTERN_SHAPES];
    double *column; /* [n_parameters][64] */
} lw_pattern;

/* Lays out a pattern for the scan behind the profiles. Voigt lines with an instrument on the s axis only:
 * LW_NOT_SUPPORTED otherwise. p[n_parameters] receives the start: lines and background of the line fit, and the given
 * median diameter, sigma and mean square strain. n_parameters = LW_PATTERN_BACKGROUND + n_background + 2 n_lines. */
lw_status lw_pattern_begin(lw_pattern *pattern, lw_engine *engine, const lw_profiles *profiles, lw_arena *arena,
                           lw_error *err);
/* The spheres that the parameters p describe. */
lw_spheres lw_pattern_spheres(const double *p);

void lw_pattern_start(const lw_pattern *pattern, const lw_spheres *spheres, double *p);
size_t lw_pattern_position_row(const lw_pattern *pattern, size_t line); /* nm^-1 from s_start; the area is the next */

/* G(L) of every line, for the instrument's width function or another one. */
lw_status lw_pattern_instrument(lw_pattern *pattern, const lw_width_function *instrument, lw_error *err);

/* The callback of lw_problem; user is the pattern. */
lw_status lw_pattern_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);

/* Sum of J' W difference[n] at p, into g[n_parameters]. */
lw_status lw_pattern_project(lw_pattern *pattern, const double *p, const double *difference, double *g, lw_error *err);

#endif
