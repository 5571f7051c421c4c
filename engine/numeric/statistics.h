/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distributions and robust summaries. Out-of-range arguments give NaN, never an abort. */
#ifndef LW_NUMERIC_STATISTICS_H
#define LW_NUMERIC_STATISTICS_H

#include "base/engine.h"

#include <stddef.h>

#define LW_ONE_SIDED_95 1.6448536269514722 /* 95 % quantile of the normal distribution: a limit is so many u away */

/* Probability that chi-square with dof > 0 degrees of freedom exceeds chi2 >= 0, to 1e-12 relative
 * (incomplete gamma function: series and continued fraction). */
double lw_chi2_tail(double chi2, double dof);
/* Normal distribution: P(Z <= z), and z for a probability 0 < p < 1. */
double lw_normal_probability(double z);
double lw_normal_quantile(double p);

/* Durbin-Watson statistic of residuals in order: 2 for none, below 2 for positive serial correlation
 * (Durbin & Watson 1950 Biometrika 37, 409; the weighted residuals of a scan: Hill & Flack 1987 J. Appl.
 * Cryst. 20, 356). NaN for fewer than 2 or for residuals that are all 0. */
double lw_durbin_watson(const double *residual, size_t n);

/* Mean and, if sd is not NULL, the sample standard deviation (n - 1); NaN where n is too small. */
double lw_mean(const double *values, size_t n, double *sd);
/* Median, by partial ordering in place: values are permuted. NaN for n = 0. */
double lw_median(double *values, size_t n);
/* Standard deviation of normal data from the median absolute deviation, 1.482602 x MAD; values are
 * overwritten. */
double lw_robust_sd(double *values, size_t n);
/* Quantile of values in ascending order, linear between order statistics (type 7 of Hyndman & Fan 1996). */
double lw_quantile_of_sorted(const double *sorted, size_t n, double p);
/* Place of the first of sorted[n], ascending, that is not below a value; n if all are. */
size_t lw_first_not_below(const double *sorted, size_t n, double value);
/* Sorts ascending. */
void lw_sort(double *values, size_t n);
/* Running median over 2 half + 1 points, fewer at the ends; out[n] may not be y. */
lw_status lw_running_median(lw_engine *engine, const double *y, size_t n, size_t half, double *out,
                            lw_error *err);

#endif
