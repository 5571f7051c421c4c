/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Chebyshev polynomials of the first kind on an interval: T_k(t), t = (2 x - low - high)/(high - low). */
#ifndef LW_NUMERIC_CHEBYSHEV_H
#define LW_NUMERIC_CHEBYSHEV_H

#include <stddef.h>

/* T_0..T_(n-1) at x into value[n], and their derivatives to x into slope[n] (or NULL). high > low; x may
 * lie outside, where the polynomials grow. */
void lw_chebyshev(double x, double low, double high, size_t n, double *value, double *slope);

/* Sum of c[k] T_k(x) over k < n (Clenshaw 1955), and its derivative to x (slope may be NULL). */
double lw_chebyshev_sum(double x, double low, double high, size_t n, const double *c, double *slope);

#endif
