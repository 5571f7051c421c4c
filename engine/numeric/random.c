/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/random.h"

#include <math.h>

static uint64_t split_mix(uint64_t *state)
{
    uint64_t z = *state += UINT64_C(0x9e3779b97f4a7c15);
    z = (z ^ (z >> 30)) * UINT64_C(0xbf58476d1ce4e5b9);
    z = (z ^ (z >> 27)) * UINT64_C(0x94d049bb133111eb);
    return z ^ (z >> 31);
}

void lw_random_begin(lw_random *random, uint64_t seed, uint64_t stream)
{
    uint64_t mix = seed, other = stream;
    /* stream 0 is plain SplitMix64 of the seed */
    if (stream != 0)
        mix ^= split_mix(&other);
    for (int i = 0; i < 4; i++)
        random->state[i] = split_mix(&mix);
    random->has_spare = false;
    random->spare = 0;
}

static uint64_t turned_left(uint64_t value, int by)
{
    return (value << by) | (value >> (64 - by));
}

uint64_t lw_random_bits(lw_random *random)
{
    uint64_t *s = random->state, result = turned_left(s[0] + s[3], 23) + s[0], t = s[1] << 17;
    s[2] ^= s[0];
    s[3] ^= s[1];
    s[1] ^= s[2];
    s[0] ^= s[3];
    s[2] ^= t;
    s[3] = turned_left(s[3], 45);
    return result;
}

double lw_random_uniform(lw_random *random)
{
    return ((double)(lw_random_bits(random) >> 12) + 0.5) * 0x1p-52;
}

double lw_random_normal(lw_random *random)
{
    if (random->has_spare) {
        random->has_spare = false;
        return random->spare;
    }
    double u, v, square;
    do {
        u = 2 * lw_random_uniform(random) - 1;
        v = 2 * lw_random_uniform(random) - 1;
        square = u * u + v * v;
    } while (square >= 1 || square == 0);
    double factor = sqrt(-2 * log(square) / square);
    random->spare = v * factor;
    random->has_spare = true;
    return u * factor;
}

double lw_random_poisson(lw_random *random, double mean)
{
    if (!(mean > 0))
        return 0;
    if (mean > 1e10)
        return floor(mean + sqrt(mean) * lw_random_normal(random) + 0.5);
    if (mean < 10) {
        double k = 0, product = exp(-mean), u = lw_random_uniform(random);
        while (u > product && k < 200) {
            u -= product;
            k++;
            product *= mean / k;
        }
        return k;
    }
    double b = 0.931 + 2.53 * sqrt(mean), a = -0.059 + 0.02483 * b, inverse = 1.1239 + 1.1328 / (b - 3.4);
    double limit = 0.9277 - 3.6224 / (b - 2), log_mean = log(mean);
    for (;;) {
        double u = lw_random_uniform(random) - 0.5, v = lw_random_uniform(random), us = 0.5 - fabs(u);
        double k = floor((2 * a / us + b) * u + mean + 0.43);
        if (us >= 0.07 && v <= limit)
            return k;
        if (k < 0 || (us < 0.013 && v > us))
            continue;
        if (log(v) + log(inverse) - log(a / (us * us) + b) <= -mean + k * log_mean - lgamma(k + 1))
            return k;
    }
}

uint64_t lw_random_below(lw_random *random, uint64_t n)
{
    /* the highest part of the range that n does not divide is thrown away */
    uint64_t limit = UINT64_MAX - (UINT64_MAX % n + 1) % n, bits;
    do
        bits = lw_random_bits(random);
    while (bits > limit);
    return bits % n;
}
