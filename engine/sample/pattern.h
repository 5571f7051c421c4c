/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model of all lines of a scan at once: crystals of spherical shape with lognormal diameters, strained,
 * seen through the instrument, on a background. A line's profile on the axis s = 2 sin(theta)/lambda is the
 * Fourier transform of A(L) = A_size(L) exp(-x) G(L),    x = 2 pi^2 s0^2 (1 - q H) <Delta^2(L)>, G(L) the
 * instrument's closed transform; H tells the direction in a cubic crystal. Where the mean square strain
 * varies from crystal to crystal as a gamma distribution of relative variance kappa, exp(-x) becomes (1 +
 * kappa x)^(-1/kappa) (Madan & Seneta 1990 J. Business 63, 511). The transform is summed on a grid of L by an
 * FFT. Sums over a grid repeat with a period in s; what the neighbouring periods add is taken off by the
 * closed sum of their 1/s^2 tails, whose strength is the kink of A(L) at L = 0, and beyond half a period the
 * tail itself is used. Between the FFT's points stands a cubic spline, whose coefficients come out of the
 * same FFT. Source: Scardi & Leoni (2002) Acta Cryst. A 58, 190; Warren & Averbach (1950); splines: Unser,
 * Aldroubi & Eden (1993) IEEE Trans. Signal Process. 41, 821. */
#ifndef LW_SAMPLE_PATTERN_H
#define LW_SAMPLE_PATTERN_H

#include "numeric/fft.h"
#include "numeric/least_squares.h"
#include "profile/profiles.h"
#include "sample/pattern_prior.h"
#include "sample/pattern_rung.h"
#include "sample/pattern_shape.h"

typedef struct lw_pattern_line {
    const lw_line *line;
    double s_start;     /* nm^-1, where the line fit has it, aberrations included */
    double s_corrected; /* nm^-1, of the lattice: scales strain */
    double hkl_sum;     /* H = (h2k2 + h2l2 + k2l2)/(h2 + k2 + l2)^2 of a cubic crystal, else 0 */
    double kink;        /* fall of ln|G| at L = 0, nm^-1 */
    double lift; /* at the last evaluation, what makes the fall of the scattering power 1 at the line */
    double *g;   /* [2 n_lengths] G(L), re and im, times lw_pattern_lift() */
} lw_pattern_line;

typedef struct lw_pattern {
    lw_engine *engine;
    const lw_profiles *profiles;
    const lw_pattern_rung *rung;
    lw_pattern_shape shape;
    lw_pattern_prior prior[2]; /* of size and strain; chi-square has their penalties */
    double penalty;            /* at the last evaluation */
    size_t n, n_lines, n_background, n_parameters;
    const bool *fixed;         /* [n_parameters] or NULL: rows that the normal equations may leave at zero */
    double *s;                 /* [n] 2 sin(theta)/lambda of the points */
    double *factor;            /* [n] intensity factor of the points */
    double *fallen, fallen_at; /* [n] the same with the fall of the scattering power, and for which fall */
    double *weight;            /* [n] 1/variance */
    double *basis;             /* [n_background][n] */
    double *curve;             /* [n] model at the last evaluation */
    double *of_lines;          /* [n] its part without the background */
    lw_pattern_line *line;
    /* grids */
    double length_step;
    size_t n_lengths, n_fft;
    lw_fft *plan;
    double *falls, *spectrum, *grid;   /* [2 n_lengths], [n_fft + 2], [channels][n_fft] */
    double *exponent, *thinned, *work; /* [n_lengths] each, where strain varies between crystals */
    double *neighbours; /* [n_fft] spline of what the other periods' tails add, a unit of tail */
    /* work of one evaluation */
    double *residual;          /* [n] */
    double *shared;            /* [LW_PATTERN_SHARED_MOST + 1][n]: slopes to the shared rows */
    double *own;               /* [n_lines][2][n]: position and area */
    double *column, *weighted; /* [n_parameters, padded][LW_PATTERN_BLOCK] */
    double *total;
    lw_pattern_source *source; /* [n_parameters] */
} lw_pattern;

/* Lays out a pattern for the scan behind the profiles, with a histogram of sizes (borrowed) or, where that is
 * NULL, lognormal spheres. Voigt lines with an instrument on the s axis only: LW_NOT_SUPPORTED otherwise.
 * n_parameters = lw_pattern_position_row(pattern, n_lines). */
lw_status lw_pattern_begin(lw_pattern *pattern, lw_engine *engine, const lw_profiles *profiles,
                           const lw_size_histogram *histogram, lw_arena *arena, lw_error *err);

/* p[n_parameters] receives the start: lines and background of the line fit, the given spheres (a histogram
 * takes their shares), no strain. */
void lw_pattern_start(const lw_pattern *pattern, const lw_spheres *spheres, double *p);
size_t lw_pattern_background_row(
    const lw_pattern *pattern); /* first Chebyshev term added to the line fit's background */
size_t lw_pattern_position_row(const lw_pattern *pattern,
                               size_t line); /* nm^-1 from s_start; the area is the next */

/* G(L) of every line, for the instrument's width function or another one. */
lw_status lw_pattern_instrument(lw_pattern *pattern, const lw_width_function *instrument, lw_error *err);

/* What G at length j is multiplied with, so that the FFT gives the spline's coefficients with the line in the
 * middle. */
double lw_pattern_lift(const lw_pattern *pattern, size_t j);

/* The callback of lw_problem; user is the pattern. */
lw_status lw_pattern_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal,
                              lw_error *err);

/* Sum of J' W difference[n] at p, into g[n_parameters]. */
lw_status lw_pattern_project(lw_pattern *pattern, const double *p, const double *difference, double *g,
                             lw_error *err);

#endif
