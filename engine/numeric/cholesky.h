/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Cholesky factor of a small dense symmetric matrix, A = U'U, U upper triangular. Matrices are row-major
 * with a stride `ld` >= n in numbers; only the upper triangle is read or written. */
#ifndef LW_NUMERIC_CHOLESKY_H
#define LW_NUMERIC_CHOLESKY_H

#include <stddef.h>

/* Factors in place. Returns n, or the index of the first pivot that is not above `least` (the rows
 * above it are then finished). */
size_t lw_cholesky(double *u, size_t n, size_t ld, double least);

/* Solves U'U x = b in place of b[n]; the two halves alone: U'y = b and U x = y. */
void lw_cholesky_solve(const double *u, size_t n, size_t ld, double *b);
void lw_cholesky_forward(const double *u, size_t n, size_t ld, double *b);
void lw_cholesky_back(const double *u, size_t n, size_t ld, double *b);

/* Replaces U by its inverse V (upper); the inverse of A is then V V'. */
void lw_cholesky_invert_factor(double *u, size_t n, size_t ld);

/* Sum of a[i] b[i], in eight running sums. */
double lw_dot(const double *a, const double *b, size_t n);

#endif
