/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Deconvolution against transform pairs in closed form, without noise.
 * Lorentzian and exponential columns: A = exp(-2 beta L) = exp(-L/D), L_A = D, L_V = 2 D. Gaussian: exp(-pi
 * beta^2 L^2). Lognormal spheres: A(L), L_A and L_V of Krill & Birringer (1998) Philos. Mag. A 77, 621;
 * digits by mpmath. With Gaussian strain: Stokes & Wilson (1944) Proc. Phys. Soc. 56, 174. Voigts: integral
 * breadths of Lorentzian parts add, of Gaussian parts add in squares (Langford 1978 J. Appl. Cryst. 11, 10).
 */
#include "kernel/deconvolution_made.h"

static double voigt(double length, double s, const void *user)
{
    const double *beta = user; /* Lorentzian, Gaussian, nm^-1 */
    (void)s;
    return exp(-2 * beta[0] * length - M_PI * beta[1] * beta[1] * length * length);
}

static lw_profiles *run(made *m, const char *method, int completion, lw_scan **scan, lw_lines **lines)
{
    lw_error err = LW_ERROR_NONE;
    char text[600];
    lw_deconvolve_options options = lw_deconvolve_defaults();
    options.method = made_method(method);
    options.completion = completion;
    lw_profiles *profiles;
    if (made_deconvolve(m, NULL, &m->instrument, &options, scan, lines, &profiles, &err) != LW_OK)
        fprintf(stderr, "%s: %s\n", method, lw_error_text(&err, text, sizeof text));
    CHECK(profiles != NULL);
    return profiles;
}

/* Lorentzian sample: breadth, column means; Gaussian sample: breadth. */
static void simple_pairs(void)
{
    static const struct {
        double beta[2];
    } sample[2] = {{{0.05, 0}}, {{0, 0.06}}};
    for (int i = 0; i < 2; i++) {
        made m;
        made_begin(&m, 0.3615, 0.05, 0.02);
        made_scan(&m, 30, 47, 0.02, 1e5, 50, 1e-5, voigt, sample[i].beta);
        const char *const methods[] = {"convolution", "stokes", "tikhonov", "maximum_entropy"};
        for (int k = 0; k < 4; k++) {
            lw_scan *scan;
            lw_lines *lines;
            lw_profiles *p = run(&m, methods[k], 1, &scan, &lines);
            if (p != NULL) {
                const lw_profile *line = &p->profile[0];
                double beta = sample[i].beta[i];
                CHECK_RELATIVE(line->breadth_s.value, beta, 1e-6);
                CHECK_NEAR(line->cosine[1], voigt(line->length_nm[1], 0, sample[i].beta), 1e-6);
                CHECK_NEAR(line->cosine[8], voigt(line->length_nm[8], 0, sample[i].beta), 1e-6);
                if (i == 0) { /* columns: L_A from the initial slope, L_V from the breadth */
                    CHECK_RELATIVE(1 / (2 * line->lorentz_s.value), 10, 2e-6);
                    CHECK_RELATIVE(1 / line->breadth_s.value, 20, 1e-6);
                }
                CHECK(line->resolved && !line->refold_failed);
            }
            made_free(scan, lines, p);
        }
        made_end(&m);
    }
}

typedef struct spheres {
    double median, sigma, strain;
} spheres;

static double spheres_coefficient(double length, double s, const void *user)
{
    const spheres *p = user;
    double v = p->sigma * p->sigma, sum = 0, moment[4];
    for (int n = 0; n < 4; n++)
        moment[n] = pow(p->median, n) * exp(0.5 * n * n * v);
    static const double factor[4] = {0.5, 0, -1.5, 1};
    for (int n = 0; n < 4; n++) {
        double x = length > 0 ? (log(length / p->median) - n * v) / (p->sigma * sqrt(2)) : -30;
        sum += factor[n] * pow(length, 3 - n) * moment[n] * 0.5 * erfc(x);
    }
    return sum / moment[3] * exp(-2 * M_PI * M_PI * p->strain * p->strain * s * s * length * length);
}

/* Median 10 nm, sigma 0.3, rms strain 0.002, a = 0.3615 nm: exact breadths of 111 and 222 (mpmath), and
 * coefficients. */
static void spheres_with_strain(void)
{
    static const spheres sample = {10, 0.3, 0.002};
    static const double breadth[2] = {0.101924542322, 0.114043393741};
    static const double at_5nm[2] = {0.42316560374114, 0.36937817253268};
    made m;
    made_begin(&m, 0.3615, 0.05, 0.03);
    made_scan(&m, 36, 120, 0.03, 1e6, 100, 1e-7, spheres_coefficient, &sample);
    const char *const methods[] = {"physical", "stokes", "tikhonov"};
    for (int k = 0; k < 3; k++) {
        lw_scan *scan;
        lw_lines *lines;
        lw_profiles *p = run(&m, methods[k], 2, &scan, &lines);
        if (p == NULL)
            continue;
        double tolerance = k == 0 ? 2e-6 : 2e-5;
        for (size_t i = 0; i < p->n; i++) {
            const lw_profile *line = &p->profile[i];
            const lw_reflection *r = &line->line->reflection;
            int which = r->h == 1 && r->l == 1 ? 0 : r->h == 2 && r->k == 2 && r->l == 2 ? 1 : -1;
            if (which < 0)
                continue;
            CHECK_RELATIVE(line->breadth_s.value, breadth[which], tolerance);
            for (size_t j = 0; j + 1 < line->n_coefficients && j < line->truncated_at; j++)
                CHECK_NEAR(line->cosine[j], spheres_coefficient(line->length_nm[j], 1 / r->d_nm, &sample),
                           10 * tolerance);
        }
        made_free(scan, lines, p);
    }
    CHECK_NEAR(spheres_coefficient(5, sqrt(3) / 0.3615, &sample), at_5nm[0], 1e-11);
    CHECK_NEAR(spheres_coefficient(5, sqrt(12) / 0.3615, &sample), at_5nm[1], 1e-11);
    made_end(&m);
}

/* Spheres without strain: L_V = 10.27694483217747 nm, L_A = 8.348818107945762 nm (mpmath). */
static void spheres_alone(void)
{
    static const spheres sample = {10, 0.3, 0};
    made m;
    made_begin(&m, 0.3615, 0.05, 0.03);
    made_scan(&m, 36, 62, 0.02, 1e6, 100, 1e-7, spheres_coefficient, &sample);
    lw_scan *scan;
    lw_lines *lines;
    lw_profiles *p = run(&m, "physical", 2, &scan, &lines);
    for (size_t i = 0; p != NULL && i < p->n; i++) {
        CHECK_RELATIVE(1 / p->profile[i].breadth_s.value, 10.27694483217747, 2e-6);
        /* slope between 0 and a small length, less the cubic term that follows */
        double length = p->profile[i].length_nm[1];
        CHECK_RELATIVE(length / (1 - p->profile[i].cosine[1] + pow(length, 3) * 0.5 * exp(-4.5 * 0.09) / 1e3),
                       8.348818107945762, 1e-4);
    }
    made_free(scan, lines, p);
    made_end(&m);
}

/* Instrument g_L, g_G = 0.02, 0.06 deg; sample f = 0.15, 0.08 (breadth 0.194043563368); observed 0.17, 0.10
 * (breadth 0.227782479346): fitting, Stokes and subtraction of breadths agree. */
static void voigts_add(void)
{
    made m;
    double to_gauss = 2 * sqrt(M_LN2 / M_PI), to_lorentz = 2 / M_PI;
    made_begin(&m, 0.3615, 0.06 * to_gauss, 0.02 * to_lorentz);
    double s0 = sqrt(3) / 0.3615, theta0 = asin(0.5 * MADE_WAVELENGTH * s0);
    double d = made_degree * cos(theta0) / MADE_WAVELENGTH, beta[2] = {0.15 * d, 0.08 * d};
    made_scan(&m, 34, 50, 0.02, 1e5, 20, 1e-4, voigt, beta);
    const char *const methods[] = {"convolution", "stokes"};
    for (int k = 0; k < 2; k++) {
        lw_scan *scan;
        lw_lines *lines;
        lw_profiles *p = run(&m, methods[k], 1, &scan, &lines);
        if (p == NULL)
            continue;
        const lw_profile *line = &p->profile[0];
        CHECK_RELATIVE(line->breadth_deg.value, 0.194043563368, 1e-6);
        CHECK_RELATIVE(line->line->breadth.value, 0.227782479346, 1e-6);
        CHECK_RELATIVE(line->line->instrument_breadth_deg, 0.0732852147041, 1e-6);
        CHECK_RELATIVE(line->lorentz_s.value / d, 0.17 - 0.02, 3e-6);
        CHECK_RELATIVE(line->gauss_s.value / d, sqrt(0.1 * 0.1 - 0.06 * 0.06), 1e-5);
        made_free(scan, lines, p);
    }
    made_end(&m);
}

int main(void)
{
    simple_pairs();
    spheres_with_strain();
    spheres_alone();
    voigts_add();
    return lw_checks_end();
}
