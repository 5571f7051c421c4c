/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/size_distribution.h"

#include <math.h>
#include <stddef.h>

#define ROOT_2 1.41421356237309504880
#define TWO_PER_ROOT_PI 1.12837916709551257390

double lw_spheres_moment(const lw_spheres *spheres, double n)
{
    return exp(n * log(spheres->median_nm) + 0.5 * n * n * spheres->sigma * spheres->sigma);
}

/* Of t = L/median: the share of <D^n> above D = L, times <D^n>/<D^3> in units of the median, and its slope to
 * sigma at constant t. */
static double upper(double log_t, double n, double sigma, double *by_sigma)
{
    double ratio = exp(0.5 * (n * n - 9) * sigma * sigma);
    double x = (log_t - n * sigma * sigma) / (sigma * ROOT_2);
    double share = 0.5 * erfc(x);
    double dx = -log_t / (sigma * sigma * ROOT_2) - n / ROOT_2;
    *by_sigma = ratio * ((n * n - 9) * sigma * share - 0.5 * TWO_PER_ROOT_PI * exp(-x * x) * dx);
    return ratio * share;
}

double lw_spheres_coefficient(const lw_spheres *spheres, double length_nm, double slopes[2])
{
    if (!(length_nm > 0)) {
        if (slopes != NULL)
            slopes[0] = slopes[1] = 0;
        return 1;
    }
    double sigma = spheres->sigma, t = length_nm / spheres->median_nm, log_t = log(t), s3, s2, s0;
    double m3 = upper(log_t, 3, sigma, &s3), m2 = upper(log_t, 2, sigma, &s2), m0 = upper(log_t, 0, sigma, &s0);
    if (slopes != NULL) {
        /* what the edge D = L adds vanishes, because spheres of that diameter share no volume any more */
        slopes[0] = 1.5 * t * m2 - 1.5 * t * t * t * m0;
        slopes[1] = s3 - 1.5 * t * s2 + 0.5 * t * t * t * s0;
    }
    double value = m3 - 1.5 * t * m2 + 0.5 * t * t * t * m0;
    return value > 0 ? value : 0; /* far out only rounding is left */
}

/* factor x median x exp(power sigma^2) and its slopes. */
static double mean_of(const lw_spheres *spheres, double factor, double power, double slopes[2])
{
    double value = factor * spheres->median_nm * exp(power * spheres->sigma * spheres->sigma);
    if (slopes != NULL) {
        slopes[0] = value;
        slopes[1] = 2 * power * spheres->sigma * value;
    }
    return value;
}

double lw_spheres_size_volume(const lw_spheres *spheres, double slopes[2])
{
    return mean_of(spheres, 0.75, 3.5, slopes);
}

double lw_spheres_size_area(const lw_spheres *spheres, double slopes[2])
{
    return mean_of(spheres, 2.0 / 3, 2.5, slopes);
}

double lw_spheres_diameter_mean(const lw_spheres *spheres, double slopes[2])
{
    return mean_of(spheres, 1, 0.5, slopes);
}

double lw_spheres_diameter_dispersion(const lw_spheres *spheres, double slopes[2])
{
    double square = spheres->sigma * spheres->sigma;
    if (slopes != NULL) {
        slopes[0] = 0;
        slopes[1] = 2 * spheres->sigma * exp(square);
    }
    return expm1(square);
}

double lw_spheres_columns(const lw_spheres *spheres, double length_nm)
{
    if (!(length_nm > 0))
        return 0;
    /* a sphere of diameter D holds columns with density 2 L/D^2 and as many as its section, D^2: the densities add
     * up to 2 L (number of spheres above L)/<D^2> */
    double x = log(length_nm / spheres->median_nm) / (spheres->sigma * ROOT_2);
    return length_nm * erfc(x) / lw_spheres_moment(spheres, 2);
}
