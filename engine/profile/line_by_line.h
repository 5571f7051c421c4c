/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The common road of methods that take the instrument out of one line's data at a time (private to profile/).
 */
#ifndef LW_PROFILE_LINE_BY_LINE_H
#define LW_PROFILE_LINE_BY_LINE_H

#include "profile/measured.h"

enum { LW__BY_MISFIT, LW__BY_VOIGTS, LW__BY_PHYSICS }; /* the option completion */

typedef struct lw__job {
    lw_engine *engine;
    lw_profiles *profiles;
    lw_profile *profile; /* its arrays of lengths and coefficients are taken */
    const lw_deconvolve_options *options;
    const lw__separation *separation;
    const lw__separated *line;
    lw__window data;
    lw__instrument instrument; /* with which the line's curve was made */
    lw__measured measured;     /* by the standard's lines; n = 0 without them */
    lw_arena *keep;            /* for what outlives the line in hand */
    double shape_breadth,
        shape_variance; /* breadth of the completing shape and its variance by the fit, nm^-1 */
} lw__job;

/* What a method hands back. On a second call, with an instrument slightly changed, `choice` says how the
 * first chose (truncation, regularisation, iterations), and only the breadth is wanted. */
typedef struct lw__answer {
    double breadth;  /* nm^-1 */
    double variance; /* of it, by counting, background and what the data do not show; not by the instrument */
    double choice;
    double *by_point[2]; /* slopes to the points of the standard's lines' windows; NULL: from the coefficients */
    bool from_shape; /* the data carry no departure from the shape: the fit's breadth stands */
} lw__answer;

/* first: fill the profile's coefficients, truncation, refold, curve and what was assumed. */
typedef lw_status lw__solve_fn(const lw__job *job, const lw__instrument *instrument, bool first,
                               lw_arena *scratch, lw__answer *answer, lw_error *err);

/* Separates the scan as the options say, runs `solve` on every line, and puts breadths and covariances
 * together: each line's own part, and the instrument's, which lines share. */
lw_status lw__line_by_line(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                           lw__solve_fn *solve, const char *name, lw_error *err);

/* Variance, relative, that the tails beyond the window add to the area: the shape's share of area out there,
 * known no better than the shape is right in the outer half of the window. *share receives that share. */
double lw__tail_variance(const lw__job *job, double *share);

#endif
