/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Transform pairs of line profiles in closed form, by both roads of numeric/fft: the Fourier coefficients
 * A(L) of a sampled profile, and the profile from its coefficients. Sources at each pair. */
#include "check.h"
#include "numeric/fft.h"
#include "numeric/voigt.h"

#include <stdlib.h>

#define N 4096
static const double PI = 3.14159265358979323846, LN2 = 0.69314718055994530942;
static lw_engine engine;
static double x[N], c[N + 2], a[N / 2 + 1];

static lw_fft *plan_for(lw_fft_use use)
{
    lw_error err = LW_ERROR_NONE;
    lw_fft *plan = lw_fft_plan(&engine, N, LW_FFT_REAL, use, &err);
    if (plan == NULL)
        abort();
    return plan;
}

/* Samples f at s = (j - N for the upper half) ds, transforms, and compares A_k ds with want(L), L = k/(N ds).
 */
static double worst_of(lw_fft *plan, double ds, double (*f)(double), double (*want)(double))
{
    double worst = 0;
    for (int j = 0; j < N; j++)
        x[j] = f((j < N / 2 ? j : j - N) * ds);
    lw_fft_forward(plan, x, c);
    for (int k = 0; k <= N / 2; k++)
        worst = fmax(worst, hypot(c[2 * k] * ds - want(k / (N * ds)), c[2 * k + 1] * ds));
    return worst;
}

/* Gauss of integral breadth 1: exp(-pi s^2) <-> exp(-pi L^2) */
static double gauss(double s)
{
    return exp(-PI * s * s);
}

/* Voigt <-> exp(-2 beta_L L - pi beta_G^2 L^2) */
static const double beta_l = 0.3, beta_g = 0.8;

static double voigt_transform(double length)
{
    return exp(-2 * beta_l * length - PI * beta_g * beta_g * length * length);
}

/* The profile from the coefficients a(L): I(s) = sum a_0 + 2 sum a_k cos(2 pi s L_k), times dL. */
static void profile_of(lw_fft *plan, double dl, double (*coefficient)(double))
{
    for (int k = 0; k <= N / 2; k++)
        a[k] = coefficient(k * dl);
    lw_fft_cosine(plan, a, x);
    for (int j = 0; j < N; j++)
        x[j] *= dl;
}

/* Exponential columns <-> Lorentz; decays to 1e-17 within the range */
static double exponential(double length)
{
    return exp(-length / 5);
}

/* A sphere of diameter 10: A = 1 - 3 l/2 + l^3/2 with l = L/D (Stokes & Wilson 1942); its transform is
 * sphere_profile() below */
static const double sphere_d = 10;

static double sphere(double length)
{
    double l = length / sphere_d;
    return l < 1 ? 1 - 1.5 * l + 0.5 * l * l * l : 0;
}

/* 2 int_0^D A cos(2 pi s L) dL, with t = 2 pi s D: the integral by parts, 3 D (1/t^2)(1 + 2/t^2 - 2 sin t/t
 * - 2 cos t/t^2); near t = 0 its series 3 D (1/4 - t^2/72...) = (3/4) D (1 - t^2/18 + t^4/1080 ...). */
static double sphere_profile(double s)
{
    double t = 2 * PI * s * sphere_d, t2 = t * t;
    if (fabs(t) < 0.1)
        return 0.75 * sphere_d * (1 - t2 / 18 * (1 - 3 * t2 / 80));
    return 3 * sphere_d / t2 * (1 + 2 / t2 - 2 * sin(t) / t - 2 * cos(t) / t2);
}

static void test_road(lw_fft_use use)
{
    lw_fft *plan = plan_for(use);
    /* both ends of the Gauss are below 1e-300 at this step: no aliasing */
    CHECK_NEAR(worst_of(plan, 0.01, gauss, gauss), 0, 1e-14);

    /* A Voigt's profile from its transform, periodic: the sum over all images s + m/dL, of which a closed
     * form exists for the Lorentz alone; 1/dL = 200 breadths. */
    double dl = 1.0 / 256;
    profile_of(plan, dl, voigt_transform);
    double worst = 0, fwhm_g = beta_g * 2 * sqrt(LN2 / PI), fwhm_l = beta_l * 2 / PI;
    for (int j = 0; j <= N / 4; j++) {
        double s = j / (N * dl), want = 0;
        for (int m = -400; m <= 400; m++)
            want += lw_voigt(s + m / dl, fwhm_g, fwhm_l);
        /* images beyond are Lorentzian tails: sum of gamma/(pi s^2) */
        want += 2 * 0.5 * fwhm_l / PI * dl * dl / 400.5;
        worst = fmax(worst, fabs(x[j] - want));
    }
    CHECK_NEAR(worst, 0, 1e-10);

    /* exponential: the discrete sum is the Poisson kernel, dL (1 - q^2)/(1 - 2 q cos + q^2), q = exp(-dL/5)
     */
    dl = 0.1;
    profile_of(plan, dl, exponential);
    double q = exp(-dl / 5);
    worst = 0;
    for (int j = 0; j < N; j++) {
        /* 1 - 2 q cos t + q^2 = (1 - q)^2 + 4 q sin^2(t/2), which keeps its digits */
        double p = -expm1(-dl / 5), t = sin(PI * j / N), want = dl * p * (1 + q) / (p * p + 4 * q * t * t);
        worst = fmax(worst, fabs(x[j] - want));
    }
    CHECK_NEAR(worst, 0, 1e-12);
    /* and the Lorentz of breadth 1/(2 D), D = 5, is approached as dL^2/12 of its curvature at the cusp */
    CHECK_NEAR(x[0], 2 * 5, 2 * dl * dl / 12 / 5 * 1.01);

    /* sphere: Euler-Maclaurin's terms for the cusp at L = 0: -h^2/6 f1 + h^4/360 f3, the first and third
     * derivative of f = A cos(wL), w = 2 pi s: f1 = A1 = -3/(2 D), f3 = A3 - 3 A1 w^2, A3 = 3/D^3 */
    dl = 0.01;
    profile_of(plan, dl, sphere);
    worst = 0;
    for (int j = 0; j < 400; j++) {
        double s = j / (N * dl), w = 2 * PI * s, cusp = -1.5 / sphere_d;
        double third = 3 / (sphere_d * sphere_d * sphere_d) - 3 * cusp * w * w;
        double want = sphere_profile(s) - dl * dl / 6 * cusp + dl * dl * dl * dl / 360 * third;
        worst = fmax(worst, fabs(x[j] - want));
    }
    CHECK_NEAR(worst, 0, 2e-9);
    /* area of the column-length function: the height is L_V = (3/4) D */
    CHECK_RELATIVE(sphere_profile(0), 7.5, 1e-15);

    /* back(forward) = n */
    for (int j = 0; j < N; j++)
        x[j] = gauss(0.003 * j);
    double first = x[7];
    lw_fft_forward(plan, x, c);
    lw_fft_back(plan, c, x);
    CHECK_RELATIVE(x[7], N * first, 1e-14);
}

int main(void)
{
    lw_engine_begin(&engine);
    test_road(LW_FFT_FEW);
    test_road(LW_FFT_MANY);
    lw_engine_end(&engine);
    return lw_checks_end();
}
