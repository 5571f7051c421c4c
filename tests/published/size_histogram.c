/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Histogram of sphere diameters and strain at knots against closed forms: one narrow hat is one sphere, hats
 * that follow a lognormal distribution give its coefficients and means; the natural cubic spline of three and
 * four knots by hand. */
#include "check.h"
#include "physics/size_distribution.h"
#include "physics/size_histogram.h"
#include "physics/strain_knots.h"

static void one_sphere(void)
{
    lw_size_histogram narrow = {1, log(10.0), 1e-4};
    for (double l = 0; l < 12; l += 0.7) {
        double t = l / 10; /* common volume of a sphere and its ghost: Wilson 1962 X-ray Optics */
        CHECK_NEAR(lw_size_histogram_coefficient(&narrow, 0, l), t < 1 ? 1 - 1.5 * t + 0.5 * t * t * t : 0,
                   1e-8);
    }
    CHECK_RELATIVE(lw_size_histogram_moment(&narrow, 0, 1), 10, 1e-8);
    CHECK_RELATIVE(lw_size_histogram_moment(&narrow, 0, -3), 1e-3, 1e-7);
}

/* The mean of D^k over a hat of ln D, by the closed integral of (1 - |x|) exp(k step x) over -1..1. */
static void moments(void)
{
    lw_size_histogram h = {5, 1, 0.3};
    for (int k = -3; k <= 4; k++) {
        double x = 0.3 * k, mean = k == 0 ? 1 : 2 * (cosh(x) - 1) / (x * x);
        CHECK_RELATIVE(lw_size_histogram_moment(&h, 2, k), exp(1.6 * k) * mean, 1e-12);
    }
    /* as the initial slope has it: 1.5 <1/D> */
    double l = 1e-6;
    CHECK_RELATIVE((1 - lw_size_histogram_coefficient(&h, 2, l)) / l,
                   1.5 * lw_size_histogram_moment(&h, 2, -1), 1e-6);
}

/* Volume over ln D is normal about ln(median) + 3 sigma^2 (Hatch & Choate 1929 J. Franklin Inst. 207, 369);
 * hats of step h follow a curve to h^2/12 of its second derivative, here 7e-5. */
static void lognormal(void)
{
    lw_spheres spheres = {10, 0.4};
    lw_size_histogram h = {301, log(10.0) + 3 * 0.16 - 6 * 0.4, 0.016};
    static double share[301];
    double all = 0, volume = 0, area = 0;
    for (size_t b = 0; b < h.n; b++) {
        double z = (log(lw_size_histogram_diameter(&h, b) / 10) - 0.48) / 0.4;
        all += share[b] = exp(-0.5 * z * z);
    }
    for (size_t b = 0; b < h.n; b++) {
        volume += 0.75 * share[b] / all * lw_size_histogram_moment(&h, b, 1);
        area += 1.5 * share[b] / all * lw_size_histogram_moment(&h, b, -1);
    }
    CHECK_RELATIVE(volume, lw_spheres_size_volume(&spheres, NULL), 1e-4);
    CHECK_RELATIVE(1 / area, lw_spheres_size_area(&spheres, NULL), 1e-4);
    for (double l = 0.5; l < 60; l *= 1.4) {
        double sum = 0;
        for (size_t b = 0; b < h.n; b++)
            sum += share[b] / all * lw_size_histogram_coefficient(&h, b, l);
        CHECK_NEAR(sum, lw_spheres_coefficient(&spheres, l, NULL), 1e-4);
    }
}

static double at(const lw_strain_knots *k, const double *y, double x)
{
    return log(lw_strain_knots_square(k, y, k->scale * expm1(x), NULL));
}

static void splines(void)
{
    lw_strain_knots three, four;
    lw_strain_knots_make(3, 2, 2 * expm1(2), &three); /* knots at x = 0, 1, 2 */
    CHECK_NEAR(lw_strain_knots_length(&three, 1), 2 * expm1(1), 1e-12);
    double line[3] = {-3, -4, -5}, bent[3] = {0, 1, 0}, matrix[16];
    for (double x = 0; x < 4; x += 0.3) /* beyond the last knot too */
        CHECK_NEAR(at(&three, line, x), -3 - x, 1e-12);
    /* 0, 1, 0 at unit steps: second derivative -3 in the middle, s(x) = x (3 - x^2)/2 up to it; slope -3/2 at
     * the end */
    for (double x = 0; x <= 1; x += 0.125)
        CHECK_NEAR(at(&three, bent, x), 0.5 * x * (3 - x * x), 1e-12);
    CHECK_NEAR(at(&three, bent, 1.5), 0.5 * 0.5 * (3 - 0.25), 1e-12);
    CHECK_NEAR(at(&three, bent, 3), -1.5, 1e-12);
    lw_strain_knots_roughness(&three, matrix); /* 2 int_0^1 (3x)^2 dx */
    CHECK_NEAR(matrix[1 * 3 + 1], 6, 1e-12);
    double slopes[4];
    lw_strain_knots_square(&three, bent, 2 * expm1(0.5), slopes);
    CHECK_NEAR(slopes[1], 0.5 * 0.5 * (3 - 0.25), 1e-12);
    CHECK_NEAR(slopes[0] + slopes[1] + slopes[2], 1, 1e-12);
    /* no faster than 1/L, from atoms 0.25 nm apart on */
    CHECK_NEAR(lw_strain_knots_least_step(&three, 2, 0.25), log(expm1(1) / expm1(2)), 1e-12);
    CHECK_NEAR(lw_strain_knots_least_step(&three, 1, 0.25), log(0.25 / (2 * expm1(1))), 1e-12);
    /* four knots, 0, 1, 0, 0: 2/3 M1 + 1/6 M2 = -2, 1/6 M1 + 2/3 M2 = 1 give M1 = -18/5, M2 = 12/5 */
    lw_strain_knots_make(4, 2, 2 * expm1(3), &four);
    CHECK_NEAR(four.bend[1][1], -3.6, 1e-12);
    CHECK_NEAR(four.bend[2][1], 2.4, 1e-12);
    double four_values[4] = {0, 1, 0, 0}, rough = 0;
    lw_strain_knots_roughness(&four, matrix);
    for (int i = 0; i < 4; i++)
        for (int j = 0; j < 4; j++)
            rough += four_values[i] * matrix[i * 4 + j] * four_values[j];
    CHECK_NEAR(rough, (3.6 * 3.6 + (3.6 * 3.6 - 3.6 * 2.4 + 2.4 * 2.4) + 2.4 * 2.4) / 3, 1e-12);
}

int main(void)
{
    one_sphere();
    moments();
    lognormal();
    splines();
    return lw_checks_end();
}
