/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The plain transform: Stockham's self-sorting form with radices 4, 2, 3 and 5 (Temperton 1983
 * J. Comput. Phys. 52, 1). Complex numbers are pairs re, im. */
#ifndef LW_NUMERIC_FFT_PLAIN_H
#define LW_NUMERIC_FFT_PLAIN_H

#include <stdbool.h>
#include <stddef.h>

/* Whether n > 0 is a product of 2, 3 and 5 only. */
bool lw_fft_plain_can(size_t n);

/* Fills root[2n] with exp(-2 pi i k/n), k = 0..n-1. */
void lw_fft_roots(double *root, size_t n);

/* Complex transform of n points. root: those of length n * stride. in[2n] is kept; out[2n] and work[2n] are
 * overwritten, none may overlap. sign -1: exponent -2 pi i (forward); +1: back, unnormalised. */
void lw_fft_plain(const double *root, size_t stride, size_t n, int sign, const double *in, double *out,
                  double *work);

/* Real transforms of even n, as in fft.h; root of length n, work[2n]. back keeps c. */
void lw_fft_plain_forward(const double *root, size_t n, const double *x, double *c, double *work);
void lw_fft_plain_back(const double *root, size_t n, const double *c, double *x, double *work);

#endif
