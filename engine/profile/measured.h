/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The instrument's profile as a measured standard shows it, carried to a sample's line (private to profile/).
 * Of each neighbouring line of the standard's scan the transform is taken as measured: background and
 * neighbours off, tails beyond its window by its own fitted curve. Over the transform that the calibration
 * has at that very angle, emission included, it is a factor R, one where the calibration is right: the
 * emission spectrum, whose spread goes as tan(theta), stands in both and falls out, and so does what the
 * calibration knows of the trend of widths and of axial divergence. The calibration's transform at the
 * sample's angle times R is the instrument there. R goes with the width of the profile: at the standard's
 * line it is read at a length, per degree, that is longer by the ratio of the calibration's breadths at the
 * two angles. Lines of the standard on either side are weighted by their distance.
 * Source: Stokes (1948) Proc. Phys. Soc. London 61, 382, for the standard's own line as divisor. */
#ifndef LW_PROFILE_MEASURED_H
#define LW_PROFILE_MEASURED_H

#include "profile/window.h"

typedef struct lw__standard_line {
    lw__window data;               /* its axis in degrees */
    lw__instrument fitted, model;  /* the line as it was fitted; the calibration's profile at its angle */
    double angle_deg, breadth_deg; /* where it stands; the calibration's breadth there, one wavelength */
    double area;                   /* intensity x deg, of the fitted curve */
    double end;                    /* 1/deg: the factor is told up to here and held beyond it */
} lw__standard_line;

typedef struct lw__standard {
    lw_profiles shown;        /* its supported lines, as far as a window needs them */
    lw__standard_line **line; /* [shown.n], taken as they are wanted */
} lw__standard;

typedef struct lw__measured {
    size_t n;
    lw__standard_line *line[2];
    double weight[2];
    double stretch[2]; /* length there over length at the sample's line, both per degree */
} lw__measured;

/* Checks that the standard's lines belong to the sample's (LW_BAD_ARGUMENT: another radiation, another
 * standard than the calibration's, no sums of Voigts). */
lw_status lw__take_standard(const lw_profiles *profiles, const lw_lines *standard, lw_arena *arena,
                            lw__standard *out, lw_error *err);

/* The neighbours of a sample's line within reach_deg; *how says in words which. LW_OUT_OF_RANGE says how near
 * the nearest is. */
lw_status lw__take_measured(const lw_profiles *profiles, const lw_profile *profile, lw__standard *standard,
                            double reach_deg, lw_arena *arena, lw__measured *out, const char **how,
                            lw_error *err);

/* Multiplies G at L = 0, step ... (re, im [n]) by the factor. */
lw_status lw__carry_measured(const lw__measured *measured, double per_degree, double step, size_t n,
                             double *re, double *im, lw_arena *scratch, lw_error *err);

/* What the points of a neighbour's window do to G at L = 0, step ..., relative: out[n] takes arrays of
 * [2 data.n], real and imaginary parts of d ln G / d(intensity). */
lw_status lw__measured_responses(const lw__measured *measured, size_t neighbour, double per_degree,
                                 double step, size_t n, double **out, lw_arena *scratch, lw_error *err);

/* Adds to u_cosine, u_sine of the profile what the noise of the standard's scan makes. */
lw_status lw__add_measured(const lw__measured *measured, double per_degree, lw_profile *profile,
                           lw_arena *scratch, lw_error *err);

/* Slopes of the breadth 1/(2 int A dL) to the points of each neighbour's window: by[j][data.n], taken from
 * the arena. Coefficients from truncated_at on hold nothing of the standard. */
lw_status lw__measured_slopes(const lw__measured *measured, double per_degree, const lw_profile *profile,
                              double breadth_s, lw_arena *arena, double *by[2], lw_error *err);

/* Covariance that two such breadths have through the lines of the standard that they share. */
double lw__measured_covariance(const lw__measured *a, double *const by_a[2], const lw__measured *b,
                               double *const by_b[2], double correlation);

#endif
