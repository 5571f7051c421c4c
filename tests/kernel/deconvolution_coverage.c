/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Deconvolution of counts: intervals cover the truth as often as they say, seeds repeat, and what does not
 * refold is refused. The truth is in closed form (see deconvolution_made.h). */
#include "kernel/deconvolution_made.h"

static double voigt(double length, double s, const void *user)
{
    const double *beta = user;
    (void)s;
    return exp(-2 * beta[0] * length - M_PI * beta[1] * beta[1] * length * length);
}

#define TRIALS 200

/* 95 % intervals of the breadth, 200 realisations of one line at two levels of counts. Of 200, between 180
 * and 198 may hold the truth. */
static void coverage(void)
{
    static const double beta[2] = {0.04, 0.03}, height[2] = {800, 12000};
    static const char *const methods[] = {"convolution", "stokes", "tikhonov", "maximum_entropy"};
    double per_breadth = sqrt(M_PI) * beta[1] * erfc(beta[0] / (sqrt(M_PI) * beta[1])) /
                         (sqrt(M_PI) * exp(-beta[0] * beta[0] / (M_PI * beta[1] * beta[1])));
    /* beta_G exp(-k^2)/erfc(k) (Langford 1978 J. Appl. Cryst. 11, 10) */
    double truth = beta[1] * beta[1] / per_breadth;
    for (int level = 0; level < 2; level++) {
        made m;
        made_begin(&m, 0.3615, 0.06, 0.03);
        made_scan(&m, 36, 49, 0.025, height[level], 100, 0, voigt, beta);
        for (int k = 0; k < 4; k++) {
            int trials = k < 2 ? TRIALS : 3 * TRIALS / 10, hits = 0, refused = 0;
            double u = 0, error = 0, square = 0;
            for (int t = 0; t < trials; t++) {
                lw_error err = LW_ERROR_NONE;
                lw_random random;
                lw_random_begin(&random, 20260101, (uint64_t)t);
                lw_deconvolve_options options = lw_deconvolve_defaults();
                options.method = made_method(methods[k]);
                options.completion = 1;
                lw_scan *scan = NULL;
                lw_lines *lines;
                lw_profiles *p;
                if (made_deconvolve(&m, &random, &m.instrument, &options, &scan, &lines, &p, &err) != LW_OK) {
                    refused++;
                } else {
                    lw_quantity b = p->profile[0].breadth_s;
                    hits += fabs(b.value - truth) < 1.96 * b.u;
                    u += b.u / trials;
                    error += (b.value - truth) / trials;
                    square += (b.value - truth) * (b.value - truth) / trials;
                }
                made_free(scan, lines, p);
            }
            printf("%-16s %6.0f counts: %3d of %d hold the truth; mean u %.2f %%, error %+.2f %%, scatter "
                   "%.2f %%\n",
                   methods[k], height[level], hits, trials, 100 * u / truth, 100 * error / truth,
                   100 * sqrt(square) / truth);
            CHECK(refused == 0);
            CHECK(hits >= 0.90 * trials && hits <= 0.99 * trials + 1);
        }
        made_end(&m);
    }
}

/* Lognormal spheres x Gaussian strain, median 10 nm, sigma 0.3, rms strain 0.002: Krill & Birringer (1998)
 * Philos. Mag. A 77, 621; Stokes & Wilson (1944) Proc. Phys. Soc. 56, 174. Exact breadths by mpmath. */
static double spheres(double length, double s, const void *user)
{
    const double *p = user;
    double v = p[1] * p[1], sum = 0, moment[4];
    static const double factor[4] = {0.5, 0, -1.5, 1};
    for (int n = 0; n < 4; n++)
        moment[n] = pow(p[0], n) * exp(0.5 * n * n * v);
    for (int n = 0; n < 4; n++) {
        double x = length > 0 ? (log(length / p[0]) - n * v) / (p[1] * sqrt(2)) : -30;
        sum += factor[n] * pow(length, 3 - n) * moment[n] * 0.5 * erfc(x);
    }
    return sum / moment[3] * exp(-2 * M_PI * M_PI * p[2] * p[2] * s * s * length * length);
}

static void physical_coverage(void)
{
    static const double sample[3] = {10, 0.3, 0.002},
                        truth[2] = {0.101924542322, 0.103386069622}; /* 111, 200 */
    static const double height[2] = {800, 12000};
    static const char *const methods[] = {"physical", "stokes"};
    for (int level = 0; level < 2; level++) {
        made m;
        made_begin(&m, 0.3615, 0.06, 0.03);
        made_scan(&m, 36, 58, 0.04, height[level], 100, 0, spheres, sample);
        for (int k = 0; k < 2; k++) {
            int hits = 0, of = 0;
            double error = 0, u = 0, square = 0;
            for (int t = 0; t < TRIALS / 2; t++) {
                lw_error err = LW_ERROR_NONE;
                lw_random random;
                lw_random_begin(&random, 20260102, (uint64_t)t);
                lw_deconvolve_options options = lw_deconvolve_defaults();
                options.method = made_method(methods[k]);
                options.completion = 2;
                lw_scan *scan = NULL;
                lw_lines *lines;
                lw_profiles *p;
                CHECK(made_deconvolve(&m, &random, &m.instrument, &options, &scan, &lines, &p, &err) ==
                      LW_OK);
                for (size_t i = 0; p != NULL && i < p->n && i < 2; i++) {
                    lw_quantity b = p->profile[i].breadth_s;
                    hits += fabs(b.value - truth[i]) < 1.96 * b.u;
                    of++;
                    u += b.u / truth[i];
                    error += b.value / truth[i] - 1;
                    square += (b.value / truth[i] - 1) * (b.value / truth[i] - 1);
                }
                made_free(scan, lines, p);
            }
            printf("%-16s %6.0f counts: %3d of %d hold the truth (spheres); mean u %.2f %%, error %+.2f %%, "
                   "scatter %.2f %%\n",
                   methods[k], height[level], hits, of, 100 * u / of, 100 * error / of,
                   100 * sqrt(square / of));
            CHECK(hits >= 0.90 * of && hits <= 0.99 * of + 1);
        }
        made_end(&m);
    }
}

/* A wrong calibration, twice as wide, and a scan that ends within a line are refused; the override works. */
static void refusals(void)
{
    static const double beta[2] = {0.002, 0.002};
    lw_error err = LW_ERROR_NONE;
    lw_deconvolve_options options = lw_deconvolve_defaults();
    lw_scan *scan = NULL;
    lw_lines *lines;
    lw_profiles *p;
    made m;
    char text[600];
    made_begin(&m, 0.3615, 0.08, 0.05);
    made_scan(&m, 38, 47, 0.02, 20000, 100, 0, voigt, beta);
    lw_width_function wide = m.instrument;
    wide.value[LW_W] *= 4;
    wide.value[LW_Z] *= 2;
    static const char *const methods[] = {"convolution", "stokes", "tikhonov", "richardson_lucy",
                                          "maximum_entropy"};
    for (int k = 0; k < 5; k++) {
        lw_random random;
        lw_random_begin(&random, 7, 0);
        err = LW_ERROR_NONE;
        options.method = made_method(methods[k]);
        options.completion = 1;
        options.realisations = 2;
        lw_status status = made_deconvolve(&m, &random, &wide, &options, &scan, &lines, &p, &err);
        if (status != LW_REFOLD_FAILED)
            fprintf(stderr, "%s: %s\n", methods[k], lw_error_text(&err, text, sizeof text));
        CHECK(status == LW_REFOLD_FAILED);
        CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), "111");
        CHECK_CONTAINS(text, "check the calibration");
        CHECK_CONTAINS(text, "accept_refold = true");
        made_free(scan, lines, p);
        options.accept_refold = true;
        err = LW_ERROR_NONE;
        scan = NULL;
        CHECK(made_deconvolve(&m, &random, &wide, &options, &scan, &lines, &p, &err) == LW_OK);
        if (p != NULL)
            CHECK(p->profile[0].refold_failed && p->profile[0].refold_p < 1e-6);
        made_free(scan, lines, p);
        options.accept_refold = false;
        scan = NULL;
    }
    made_end(&m);
    /* the scan ends a third of a width beyond the line's top */
    static const double broad[2] = {0.15, 0.1};
    made_begin(&m, 0.3615, 0.08, 0.05);
    made_scan(&m, 36, 43.8, 0.02, 20000, 100, 0, voigt, broad);
    for (int k = 0; k < 2; k++) {
        lw_random random;
        lw_random_begin(&random, 8, 0);
        err = LW_ERROR_NONE;
        scan = NULL;
        options.method = made_method(methods[k]);
        CHECK(made_deconvolve(&m, &random, &m.instrument, &options, &scan, &lines, &p, &err) ==
              LW_REFOLD_FAILED);
        CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), "the scan ends within 111");
        CHECK_CONTAINS(text, "accept_refold = true");
        made_free(scan, lines, p);
    }
    made_end(&m);
}

/* Monte Carlo uncertainties repeat with their seed and change with another. */
static void seeds(void)
{
    static const double beta[2] = {0.03, 0.02};
    double u[3] = {0};
    made m;
    made_begin(&m, 0.3615, 0.06, 0.03);
    made_scan(&m, 36, 49, 0.025, 5000, 100, 0, voigt, beta);
    for (int i = 0; i < 3; i++) {
        lw_error err = LW_ERROR_NONE;
        lw_random random;
        lw_random_begin(&random, 3, 0);
        lw_deconvolve_options options = lw_deconvolve_defaults();
        options.method = made_method("richardson_lucy");
        options.completion = 1;
        options.seed = i < 2 ? 5 : 6;
        lw_scan *scan = NULL;
        lw_lines *lines;
        lw_profiles *p;
        CHECK(made_deconvolve(&m, &random, &m.instrument, &options, &scan, &lines, &p, &err) == LW_OK);
        if (p != NULL) {
            u[i] = p->profile[0].breadth_s.u;
            CHECK_CONTAINS(p->profile[0].assumed, i < 2 ? "seed 5" : "seed 6");
        }
        made_free(scan, lines, p);
    }
    CHECK(u[0] == u[1] && u[0] != u[2] && u[0] > 0);
    made_end(&m);
}

/* Orders, rules and windows: each gives the closed-form breadth within 3 u, and says what it did. */
static void choices(void)
{
    static const double beta[2] = {0.03, 0.03};
    double k = beta[0] / (sqrt(M_PI) * beta[1]), truth = beta[1] * exp(-k * k) / erfc(k); /* Langford 1978 */
    made m;
    made_begin(&m, 0.3615, 0.06, 0.03);
    made_scan(&m, 36, 50, 0.025, 6000, 100, 0, voigt, beta);
    for (int i = 0; i < 9; i++) {
        lw_error err = LW_ERROR_NONE;
        lw_random random;
        lw_random_begin(&random, 11, 0);
        lw_deconvolve_options options = lw_deconvolve_defaults();
        options.method = made_method(i < 8 ? "tikhonov" : "stokes");
        options.completion = 1;
        options.order = i % 3;
        options.parameter = i / 3 == 1;
        options.non_negative = i == 6;
        options.strength = i == 7 ? 1e-3 : 0;
        options.apodise = i == 8;
        lw_scan *scan = NULL;
        lw_lines *lines;
        lw_profiles *p;
        CHECK(made_deconvolve(&m, &random, &m.instrument, &options, &scan, &lines, &p, &err) == LW_OK);
        if (p != NULL) {
            const lw_profile *line = &p->profile[0];
            char order[40];
            snprintf(order, sizeof order, "derivative of order %d", i % 3);
            CHECK_NEAR(line->breadth_s.value, truth, 3 * line->breadth_s.u);
            CHECK(line->breadth_s.u < 0.03 * truth);
            CHECK(line->refold_p > 1e-3 && line->refold_freedom > 100 &&
                  line->refold_freedom <= (double)line->refold_points);
            if (i < 8) {
                CHECK_CONTAINS(line->assumed, order);
                CHECK_CONTAINS(line->assumed, i == 7       ? "as given"
                                              : i / 3 == 1 ? "cross-validation"
                                                           : "discrepancy principle");
            } else {
                CHECK_CONTAINS(line->assumed, "apodised (Hann): breadth changed by");
                CHECK(fabs(line->cosine[line->truncated_at - 1] -
                           voigt(line->length_nm[line->truncated_at - 1], 0, beta)) < 0.02);
            }
            for (size_t j = 0; i == 6 && j < line->n_curve; j++)
                CHECK(line->curve_intensity[j] > -1e-9);
        }
        made_free(scan, lines, p);
    }
    /* lines fitted alone have no sample's part */
    lw_error err = LW_ERROR_NONE;
    char text[600];
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &m.radiation;
    lw_scan *scan = NULL;
    lw_lines *lines = NULL;
    lw_profiles *p = NULL;
    lw_fit_options fit = lw_fit_defaults();
    fit.shape = 3;
    fit.intensity_factor = 1;
    CHECK(lw_scan_make(&m.engine, "made", m.n, m.two_theta, m.noisy, NULL, &reading, &scan, &err) == LW_OK);
    CHECK(lw_fit_lines(&m.engine, scan, m.reflection, m.n_reflections, &m.material, &fit, &lines, &err) ==
          LW_OK);
    lw_deconvolve_options options = lw_deconvolve_defaults();
    CHECK(lines != NULL && lw_deconvolve(&m.engine, lines, NULL, &options, &p, &err) == LW_NOT_SUPPORTED);
    CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), "without an instrument");
    made_free(scan, lines, p);
    made_end(&m);
}

int main(void)
{
    coverage();
    physical_coverage();
    refusals();
    seeds();
    choices();
    return lw_checks_end();
}
