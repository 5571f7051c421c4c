/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Distributions against the GNU Scientific Library, robust summaries against plain sorting, Chebyshev
 * polynomials against their trigonometric form, quadrature against exact integrals. */
#include "check.h"
#include "numeric/chebyshev.h"
#include "numeric/quadrature.h"
#include "numeric/random.h"
#include "numeric/statistics.h"

#include <gsl/gsl_cdf.h>
#include <gsl/gsl_errno.h>
#include <gsl/gsl_integration.h>

static void test_distributions(void)
{
    double worst[2] = {0};
    /* the reference loses digits from 80000 degrees of freedom on: there a 40-digit continued fraction */
    static const double large[][3] = {{87480, 87166.288348957198, 0.7731630332191852},
                                      {787320, 786378.86504687159, 0.7733026943674963},
                                      {2361960, 2368480.3742223894, 0.001360793730919298}};
    for (int i = 0; i < 3; i++)
        CHECK_RELATIVE(lw_chi2_tail(large[i][1], large[i][0]), large[i][2], 1e-13);
    for (double dof = 1; dof < 3e4; dof = dof < 40 ? dof + 1 : 3 * dof)
        for (double k = -6; k <= 12; k += 0.75) {
            double chi2 = fmax(dof * 0.02, dof + k * sqrt(2 * dof)), want = gsl_cdf_chisq_Q(chi2, dof);
            double off = fabs(lw_chi2_tail(chi2, dof) - want) / want;
            worst[0] = fmax(worst[0], off);
            CHECK_NEAR(off, 0, 1e-12);
        }
    CHECK(lw_chi2_tail(0, 3) == 1 && lw_chi2_tail(INFINITY, 3) == 0);
    CHECK(isnan(lw_chi2_tail(-1, 3)) && isnan(lw_chi2_tail(1, 0)) && isnan(lw_chi2_tail(NAN, 2)));
    for (double p = 1e-300; p < 1; p = p < 1e-3 ? 31 * p : p + 0.0137) {
        double z = lw_normal_quantile(p), want = gsl_cdf_ugaussian_Pinv(p);
        worst[1] = fmax(worst[1], fabs(z - want) / (1 + fabs(want)));
        CHECK_NEAR(z, want, 1e-13 * (1 + fabs(want)));
        CHECK_RELATIVE(lw_normal_probability(z), p, 1e-12 * (1 + z * z));
    }
    printf("chi-square %.1e, normal quantile %.1e\n", worst[0], worst[1]);
    CHECK(isnan(lw_normal_quantile(1)));
}

static void test_summaries(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    lw_error err = LW_ERROR_NONE;
    lw_random random;
    lw_random_begin(&random, 3, 0);
    for (size_t n = 1; n < 120; n++) {
        double v[120], sorted[120], out[120], w[120];
        for (size_t i = 0; i < n; i++) /* many ties */
            v[i] = sorted[i] = floor(7 * lw_random_normal(&random)) * (n % 3 ? 1 : 0.001);
        lw_sort(sorted, n);
        for (size_t i = 1; i < n; i++)
            if (sorted[i] < sorted[i - 1])
                CHECK(sorted[i] >= sorted[i - 1]);
        for (size_t half = 0; half < 9; half += 2) {
            CHECK(lw_running_median(&engine, v, n, half, out, &err) == LW_OK);
            for (size_t i = 0; i < n; i++) {
                size_t low = i > half ? i - half : 0, high = i + half < n ? i + half : n - 1;
                memcpy(w, v + low, (high - low + 1) * sizeof *v);
                lw_sort(w, high - low + 1);
                double want = lw_quantile_of_sorted(w, high - low + 1, 0.5);
                if (fabs(out[i] - want) > 1e-15)
                    CHECK_NEAR(out[i], want, 1e-15);
            }
        }
        memcpy(w, v, n * sizeof *v);
        CHECK_NEAR(lw_median(w, n), n % 2 ? sorted[n / 2] : 0.5 * (sorted[n / 2 - 1] + sorted[n / 2]), 1e-15);
    }
    double bad[3] = {1, NAN, 2}, out[3];
    CHECK(lw_running_median(&engine, bad, 3, 1, out, &err) == LW_BAD_DATA);
    CHECK(isnan(lw_median(bad, 3)) && isnan(lw_median(bad, 0)));
    /* 1e9 + {1, 2, 3, 4}: sd = sqrt(5/3) */
    double large[4] = {1e9 + 1, 1e9 + 2, 1e9 + 3, 1e9 + 4}, sd;
    CHECK(lw_mean(large, 4, &sd) == 1e9 + 2.5);
    CHECK_RELATIVE(sd, 1.2909944487358056, 1e-14);
    /* {-1, 0, 1, 2, 100}: median 1, deviations 2 1 0 1 99, their median 1 */
    double outlier[5] = {100, -1, 2, 0, 1};
    CHECK_RELATIVE(lw_robust_sd(outlier, 5), 1.482602218505602, 1e-15);
    /* alternating residuals: each change is 2, so (n - 1) 4/n; equal residuals: 0 */
    double alternating[6] = {1, -1, 1, -1, 1, -1}, equal[3] = {2, 2, 2}, none[3] = {0, 0, 0};
    CHECK_NEAR(lw_durbin_watson(alternating, 6), 20.0 / 6, 1e-15);
    CHECK(lw_durbin_watson(equal, 3) == 0 && isnan(lw_durbin_watson(none, 3)));
    /* type 7 of {1, 2, 4}: at 0.25 between the first two, at 0.75 between the last two */
    double three[3] = {1, 2, 4};
    CHECK(lw_quantile_of_sorted(three, 3, 0.25) == 1.5 && lw_quantile_of_sorted(three, 3, 0.75) == 3);
    CHECK(lw_quantile_of_sorted(three, 3, 0) == 1 && lw_quantile_of_sorted(three, 3, 1) == 4);
    lw_engine_end(&engine);
}

static void test_chebyshev(void)
{
    double value[12], slope[12], c[12] = {0.3, -1, 2, 0.7, 0, -0.1, 3, 1, -2, 0.5, 0.25, 1};
    for (double x = 20; x <= 150; x += 6.5) {
        double t = (x - 85) / 65, theta = acos(t), sum = 0, sum_slope = 0, d;
        lw_chebyshev(x, 20, 150, 12, value, slope);
        for (int k = 0; k < 12; k++) {
            CHECK_NEAR(value[k], cos(k * theta), 2e-13);
            if (fabs(t) < 0.999) /* T_k' = k sin(k theta)/sin(theta) */
                CHECK_NEAR(slope[k], k * sin(k * theta) / sin(theta) / 65, 1e-12);
            sum += c[k] * value[k];
            sum_slope += c[k] * slope[k];
        }
        CHECK_NEAR(lw_chebyshev_sum(x, 20, 150, 12, c, &d), sum, 1e-12);
        CHECK_NEAR(d, sum_slope, 1e-11);
    }
    CHECK(lw_chebyshev_sum(3, 0, 1, 0, c, NULL) == 0 && lw_chebyshev_sum(3, 0, 1, 1, c, NULL) == 0.3);
    /* T_2 outside: t = 3, 2 t^2 - 1 = 17 */
    lw_chebyshev(2, 0, 1, 3, value, NULL);
    CHECK_RELATIVE(value[2], 17, 1e-15);
}

static void test_quadrature(void)
{
    /* lengths of which the reference holds tables; others it computes itself to 1e-10 only */
    static const size_t lengths[] = {1,  2,  3,  4,  5,  6,  7,  8,  9,  10, 11,  12, 13,
                                     14, 15, 16, 17, 18, 19, 20, 32, 64, 96, 100, 128};
    for (size_t k = 0; k < sizeof lengths / sizeof *lengths; k++) {
        size_t n = lengths[k];
        double x[200], w[200], sum = 0;
        lw_gauss_legendre(n, x, w);
        gsl_integration_glfixed_table *table = gsl_integration_glfixed_table_alloc(n);
        for (size_t i = 0; i < n; i++) {
            double xi, wi;
            gsl_integration_glfixed_point(-1, 1, i, &xi, &wi, table);
            CHECK_NEAR(x[i], xi, 4e-16);
            CHECK_RELATIVE(w[i], wi, 1e-12);
            sum += w[i] * pow(x[i], (double)(2 * (n - 1))); /* exact: 2/(2n - 1) */
        }
        gsl_integration_glfixed_table_free(table);
        CHECK_RELATIVE(sum, 2 / (2.0 * (double)n - 1), 1e-12);
    }
}

int main(void)
{
    gsl_set_error_handler_off();
    test_distributions();
    test_summaries();
    test_chebyshev();
    test_quadrature();
    return lw_checks_end();
}
