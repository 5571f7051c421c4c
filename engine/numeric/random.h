/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Seeded random numbers: xoshiro256++ (Blackman & Vigna 2021 ACM Trans. Math. Softw. 47, 36), its state in a
 * struct, so that a seed gives the same numbers on every machine. */
#ifndef LW_NUMERIC_RANDOM_H
#define LW_NUMERIC_RANDOM_H

#include <stdbool.h>
#include <stdint.h>

typedef struct lw_random {
    uint64_t state[4];
    double spare; /* second normal deviate of a pair */
    bool has_spare;
} lw_random;

/* Starts from a seed; streams of one seed are independent (the state is filled by SplitMix64 from both). */
void lw_random_begin(lw_random *random, uint64_t seed, uint64_t stream);

uint64_t lw_random_bits(lw_random *random);
/* Uniform in the open interval (0, 1), 52 bits. */
double lw_random_uniform(lw_random *random);
/* Standard normal (polar method, Marsaglia & Bray 1964). */
double lw_random_normal(lw_random *random);
/* Poisson with the given mean >= 0: by inversion below 10, above by transformed rejection with squeeze
 * (Hoermann 1993 Insur. Math. Econ. 12, 39); above 1e10, where the logarithms of the acceptance test
 * would lose their digits and the skewness is below 1e-5, a rounded normal deviate. */
double lw_random_poisson(lw_random *random, double mean);
/* Whole number 0..n-1 without bias, n > 0. */
uint64_t lw_random_below(lw_random *random, uint64_t n);

#endif
