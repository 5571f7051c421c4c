/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Cholesky factor of a small dense symmetric matrix, A = U'U, U upper triangular. Matrices are row-major
 * with a stride `ld` >= n in numbers; only the upper triangle is read or written. */
#ifndef LW_NUMERIC_CHOLESKY_H
#define LW_NUMERIC_CHOLESKY_H

#include <stdbool.h>
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

/* The same for a matrix whose rows but the last `border` ones reach only so far: lines of a scan meet their neighbours,
 * and all of them the background.
 * Given:    first[n - border]  column of the first number that is not zero in the lower row i, at most i
 * Returned: end[n - border]    one past the last column, before the border, that row k of the factor can have
 * True where it pays: below half of the dense operations. */
bool lw_cholesky_envelope(const size_t *first, size_t n, size_t border, size_t *end);

/* lw_cholesky() within an envelope; what lies outside has to be zero, and stays so. */
size_t lw_cholesky_bordered(double *u, size_t n, size_t ld, const size_t *end, size_t border, double least);

/* Full inverse c[n*n] of the factorised matrix, row by row from the last: U C = U'^-1 read for the upper half needs of
 * row i only the columns that U has there. Takahashi, Fagan & Chin (1973) Proc. 8th PICA Conf., 63. */
void lw_cholesky_bordered_inverse(const double *u, size_t n, size_t ld, const size_t *end, size_t border, double *c);

#endif
