/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What is held true of a pattern's curve before it is fitted: that it is smooth, as a penalty strength x p'Mp
 * on the rows of its parameters (Phillips 1962 J. ACM 9, 84; Tikhonov 1963 Sov. Math. Dokl. 4, 1035). The
 * strength is the one for which the data are most probable: strength = g/p'Mp, where g counts the parameters
 * that the data determine (MacKay 1992 Neural Comput. 4, 415). */
#ifndef LW_SAMPLE_PATTERN_PRIOR_H
#define LW_SAMPLE_PATTERN_PRIOR_H

#include "numeric/least_squares.h"

#define LW_PATTERN_PRIOR_MOST 32

typedef struct lw_pattern_prior {
    size_t row, n;  /* first row of the parameters and how many; n = 0: no prior */
    size_t freedom; /* of the penalty where nothing is at a bound: n less what it leaves free */
    double strength;
    double pin; /* strength of a second penalty, (sum - 1)^2; 0 = none */
    double matrix[LW_PATTERN_PRIOR_MOST * LW_PATTERN_PRIOR_MOST]; /* [n n] */
} lw_pattern_prior;

/* Second differences of n values with zeros beyond both ends. */
void lw_pattern_prior_bends(lw_pattern_prior *prior, size_t row, size_t n, double strength);

/* The matrix for the first value and the steps from one to the next, in place of the values. */
void lw_pattern_prior_by_steps(lw_pattern_prior *prior);

/* The penalty at p, and with normal->h its parts of the normal equations added. */
double lw_pattern_prior_add(const lw_pattern_prior *prior, const double *p, lw_normal *normal);

/* The strength that is due, from the inverse of the normal matrix [size size] (rows at a bound zero,
 * held[row]). *counted receives how many of the penalised directions the data determine. */
double lw_pattern_prior_due(const lw_pattern_prior *prior, const double *p, const double *inverse,
                            size_t size, const bool *held, double *counted);

/* slope[size], zeroed: of half the penalty to the parameters, strength x M p. The parameters move with the
 * logarithm of the strength by minus the inverse normal matrix times this, and that logarithm is known to
 * sqrt(2/g) (MacKay 1992). */
void lw_pattern_prior_slope(const lw_pattern_prior *prior, const double *p, double *slope);

#endif
