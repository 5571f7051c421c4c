/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fourier transforms. Plans are kept by the engine, one for each length, kind and use, and given back by
 * lw_engine_end().
 *
 * Two roads lead to the same numbers (to rounding): a plain mixed-radix transform that is ready at once,
 * and FFTW, whose planner takes 2 to 4 ms for a new length and pays only for many transforms. The
 * caller says which; the choice never depends on what ran before, so that results are reproducible.
 *
 * Threads: a plan holds work arrays, so it serves one thread at a time (as its engine does). FFTW's
 * planner is one for the whole process: where several threads have engines, no two of them may be in
 * lw_fft_plan() with LW_FFT_MANY, or in lw_engine_end(), at the same time. Transforms may run side by side.
 */
#ifndef LW_NUMERIC_FFT_H
#define LW_NUMERIC_FFT_H

#include "base/engine.h"

#include <stddef.h>

typedef struct lw_fft lw_fft;

typedef enum lw_fft_kind { LW_FFT_REAL, LW_FFT_COMPLEX } lw_fft_kind;
typedef enum lw_fft_use {
    LW_FFT_FEW, /* up to a few hundred transforms: the plain transform */
    LW_FFT_MANY /* FFTW, estimated plan */
} lw_fft_use;

/* The smallest even length 2^a 3^b 5^c that is at least `least` (2 at least): lengths that both roads
 * transform fast. */
size_t lw_fft_length(size_t least);

/* The plan for n points, made when it is asked for first. LW_FFT_FEW falls back to FFTW where n is not
 * a product of 2, 3 and 5 (for LW_FFT_REAL: an even one). NULL with err set: n is 0 or above 2^26, or memory
 * was refused. The plan belongs to the engine. */
lw_fft *lw_fft_plan(lw_engine *engine, size_t n, lw_fft_kind kind, lw_fft_use use, lw_error *err);

/* Transforms of an LW_FFT_REAL plan. Complex numbers are pairs re, im; c holds n/2 + 1 of them (2 (n/2 + 1)
 * doubles). In and out may not overlap. Arrays aligned to 64 bytes (those of an arena) are fastest.
 *   forward: c_k = sum over j of x_j exp(-2 pi i j k/n), k = 0..n/2
 *   back:    x_j = sum over all n k of c_k exp(+2 pi i j k/n), where c_(n-k) = conj(c_k); c is overwritten.
 * So back(forward(x)) = n x. */
void lw_fft_forward(lw_fft *plan, const double *x, double *c);
void lw_fft_back(lw_fft *plan, double *c, double *x);

/* Cosine series: x_j = a_0 + 2 sum a_k cos(2 pi j k/n) over k = 1.. with the last term, for even n, once;
 * a[n/2 + 1] is the transform of a symmetric function. An LW_FFT_REAL plan. */
void lw_fft_cosine(lw_fft *plan, const double *a, double *x);

/* Transform of an LW_FFT_COMPLEX plan: out_k = sum of in_j exp(-+2 pi i j k/n), minus for forward. 2n doubles
 * each, which may not overlap. */
void lw_fft_complex(lw_fft *plan, const double *in, double *out, bool forward);

#endif
