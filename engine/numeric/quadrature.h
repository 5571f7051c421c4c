/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Gauss-Legendre quadrature. */
#ifndef LW_NUMERIC_QUADRATURE_H
#define LW_NUMERIC_QUADRATURE_H

#include <stddef.h>

/* Nodes x[n], ascending, and weights w[n] on [-1, 1]: exact for polynomials of degree 2n - 1; to rounding for
 * n up to some hundreds. Newton's method on the Legendre recurrence. */
void lw_gauss_legendre(size_t n, double *x, double *w);

#endif
