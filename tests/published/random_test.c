/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Random numbers: the generator against its authors' published first numbers, distributions by moments and
 * exact probabilities, the sum of four rectangular quantities of JCGM 101:2008, 9.2. Seeds are fixed; bounds
 * are 4 to 5 standard deviations of the statistic, stated at each. */
#include "check.h"
#include "numeric/random.h"
#include "numeric/statistics.h"

#include <stdlib.h>

static void test_generator(void)
{
    /* State 1, 2, 3, 4 gives these numbers by hand: result = rotl(s0 + s3, 23) + s0 (Blackman & Vigna 2021),
     * so first rotl(5, 23) + 1 = 41943041; the next ones are those of the reference implementation. */
    static const uint64_t want[6] = {UINT64_C(41943041),
                                     UINT64_C(58720359),
                                     UINT64_C(3588806011781223),
                                     UINT64_C(3591011842654386),
                                     UINT64_C(9228616714210784205),
                                     UINT64_C(9973669472204895162)};
    lw_random random = {.state = {1, 2, 3, 4}};
    for (int i = 0; i < 6; i++)
        CHECK(lw_random_bits(&random) == want[i]);
    /* SplitMix64 from 0 begins with 0xe220a8397b1dcdaf (its authors' reference) */
    lw_random_begin(&random, 0, 0);
    CHECK(random.state[0] == UINT64_C(0xe220a8397b1dcdaf));
    /* the same seed repeats, another stream differs */
    lw_random one, two, other;
    lw_random_begin(&one, 42, 0);
    lw_random_begin(&two, 42, 0);
    lw_random_begin(&other, 42, 1);
    for (int i = 0; i < 100; i++) {
        double u = lw_random_uniform(&one);
        CHECK(u == lw_random_uniform(&two) && u > 0 && u < 1);
        CHECK(u != lw_random_uniform(&other));
    }
}

/* JCGM 101:2008, 9.2.3: Y = X1 + X2 + X3 + X4, each rectangular with mean 0 and standard deviation 1: the
 * exact 95 % interval is +-2 sqrt(3) (2 - (3/5)^(1/4)) = +-3.879406741347821; 9.2.2: normal:
 * +-3.919927969080108. */
static void test_jcgm_101(void)
{
    enum { M = 1000000 };
    double *y = malloc(M * sizeof *y), sd;
    if (y == NULL)
        abort();
    lw_random random;
    lw_random_begin(&random, 101, 0);
    for (int i = 0; i < M; i++) {
        y[i] = 0;
        for (int k = 0; k < 4; k++)
            y[i] += sqrt(12) * (lw_random_uniform(&random) - 0.5);
    }
    /* mean 0 with u = 2/sqrt(M) = 0.002; sd 2, u = sqrt((kurtosis - 1)/4 M) 2 = 0.0013 */
    CHECK_NEAR(lw_mean(y, M, &sd), 0, 0.009);
    CHECK_NEAR(sd, 2, 0.006);
    lw_sort(y, M);
    /* u of a quantile is sqrt(p (1 - p)/M)/density = 0.0047 (density at the end: 0.033) */
    CHECK_NEAR(lw_quantile_of_sorted(y, M, 0.025), -3.879406741347821, 0.022);
    CHECK_NEAR(lw_quantile_of_sorted(y, M, 0.975), 3.879406741347821, 0.022);
    for (int i = 0; i < M; i++) {
        y[i] = 0;
        for (int k = 0; k < 4; k++)
            y[i] += lw_random_normal(&random);
    }
    lw_sort(y, M);
    CHECK_NEAR(lw_quantile_of_sorted(y, M, 0.025), -3.919927969080108, 0.025);
    CHECK_NEAR(lw_quantile_of_sorted(y, M, 0.975), 3.919927969080108, 0.025);
    /* Kolmogorov's distance from the exact normal; 1.95/sqrt(M) is exceeded once in 1000 seeds */
    double distance = 0;
    for (int i = 0; i < M; i++)
        distance = fmax(distance, fabs(lw_normal_probability(y[i] / 2) - (i + 0.5) / M));
    CHECK_NEAR(distance, 0, 1.95e-3);
    free(y);
}

/* Poisson: mean m, variance m, third central moment m; and frequencies by chi-square over the values that are
 * expected 20 times or more. */
static void test_poisson(void)
{
    static const double means[] = {0.05, 0.9, 3.7, 9.99, 10, 10.3, 25, 77.7, 1000, 1e5, 3e8};
    enum { M = 400000 };
    lw_random random;
    lw_random_begin(&random, 5, 0);
    for (size_t k = 0; k < sizeof means / sizeof *means; k++) {
        double m = means[k], s1 = 0, s2 = 0, s3 = 0;
        static double count[4000];
        memset(count, 0, sizeof count);
        for (int i = 0; i < M; i++) {
            double n = lw_random_poisson(&random, m), off = n - m;
            if (n < 4000 && n >= 0)
                count[(int)n]++;
            s1 += off / M;
            s2 += off * off / M;
            s3 += off * off * off / M;
        }
        CHECK_NEAR(s1, 0, 4.5 * sqrt(m / M));
        CHECK_NEAR(s2, m, 4.5 * sqrt((m + 2 * m * m) / M));
        /* variance of the third moment: mu6 - mu3^2 = m + 25 m^2 + 15 m^3 - m^2 */
        CHECK_NEAR(s3, m, 4.5 * sqrt((m + 24 * m * m + 15 * m * m * m) / M));
        double chi2 = 0, cells = 0;
        for (int n = 0; n < 4000 && m < 2000; n++) {
            double want = M * exp(n * log(m) - m - lgamma(n + 1.0));
            if (want < 20)
                continue;
            chi2 += (count[n] - want) * (count[n] - want) / want;
            cells++;
        }
        if (cells > 1)
            CHECK(lw_chi2_tail(chi2, cells) > 1e-4);
    }
    CHECK(lw_random_poisson(&random, 0) == 0 && lw_random_poisson(&random, NAN) == 0);
    CHECK_NEAR(lw_random_poisson(&random, 1e14), 1e14, 6e7);
    /* below(n): each value as often */
    double seen[7] = {0}, chi2 = 0;
    for (int i = 0; i < 70000; i++)
        seen[lw_random_below(&random, 7)]++;
    for (int i = 0; i < 7; i++)
        chi2 += (seen[i] - 1e4) * (seen[i] - 1e4) / 1e4;
    CHECK(lw_chi2_tail(chi2, 6) > 1e-4);
}

int main(void)
{
    test_generator();
    test_jcgm_101();
    test_poisson();
    return lw_checks_end();
}
