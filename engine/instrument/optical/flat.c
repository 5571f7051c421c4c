/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Flat specimen: a ray at the equatorial angle phi, -alpha/2..alpha/2, meets the specimen off the focusing circle and is
 * shifted by -2 phi^2 cot(theta); on a specimen turned by t out of the 2:1 setting it meets it R phi t/sin(theta) higher
 * still and is shifted by -2 phi t cot(theta) more. Together e = -2 cot(theta) ((phi + t/2)^2 - t^2/4). Without a turn
 * the density is 1/(2 sqrt(e e_M)) between e_M = -(alpha^2/2) cot(theta) and 0, its mean e_M/3. */
#include "instrument/optical/aberration.h"

#include "numeric/voigt.h"

#include <math.h>
#include <stddef.h>

/* Mean of exp(i size u^2) over u = 0..1, a Fresnel integral (Abramowitz & Stegun 7.3): its power series
 * sum (i size)^n/(n! (2n + 1)) where that is short, the asymptotic series of its tail where that is exact to 1e-7, and
 * between them sqrt(pi/size)/2 exp(i pi/4) (1 - exp(i size) w((1 + i) sqrt(size/2))) with the Faddeeva function w (7.3.22). */
static void fresnel(double size, double *re, double *im)
{
    if (size < 6) {
        double term = 1, sum[4] = {1, 0, 0, 0}; /* n mod 4: +re, +im, -re, -im */
        for (int n = 1; term > 1e-16; n++) {
            term *= size / n;
            sum[n % 4] += term / (2 * n + 1);
        }
        *re = sum[0] - sum[2];
        *im = sum[1] - sum[3];
        return;
    }
    double c = cos(size), d = sin(size);
    if (size > 20) {
        double x = 1 / (2 * size), x2 = x * x, whole = 0.5 * sqrt(0.5 * M_PI / size);
        double even = x * (1 - x2 * (3 - 105 * x2)), odd = x2 * (1 - x2 * (15 - 945 * x2));
        *re = whole + even * d - odd * c;
        *im = whole - even * c - odd * d;
        return;
    }
    double x = sqrt(0.5 * size), a, b;
    lw_faddeeva(x, x, &a, &b);
    double real = 1 - (c * a - d * b), imaginary = -(c * b + d * a), scale = 0.5 * sqrt(0.5 * M_PI / size);
    *re = scale * (real - imaginary);
    *im = scale * (real + imaginary);
}

/* The parabola's apex lies at -t/2: the mean over the beam is that of its parts on both sides of the apex. */
static void transform(const lw_geometry *g, double two_theta_deg, double k, double *re, double *im)
{
    double alpha = g->divergence_deg * (M_PI / 180), turn = g->tilt_deg * (M_PI / 180);
    double scale = 2 * k / tan(two_theta_deg * (M_PI / 360)) * (180 / M_PI); /* phase per rad^2 */
    *re = 1;
    *im = 0;
    if (!(alpha > 0))
        return;
    double side[2] = {0.5 * (alpha + turn), 0.5 * (alpha - turn)}, a = 0, b = 0;
    for (int i = 0; i < (turn > 0 || turn < 0 ? 2 : 1); i++) {
        double c, d, share = turn > 0 || turn < 0 ? side[i] / alpha : 1;
        fresnel(scale * side[i] * side[i], &c, &d);
        a += share * c;
        b += share * d;
    }
    double back = -0.25 * scale * turn * turn;
    *re = a * cos(back) - b * sin(back);
    *im = a * sin(back) + b * cos(back);
}

const lw_optical lw_optical_flat = {
    .name = "flat_specimen",
    .definition = "e = -2 cot(theta) (phi^2 + phi t), phi evenly in -alpha/2..alpha/2: divergence alpha, specimen turned by "
                  "t out of the 2:1 setting",
    .source = "Cheary & Coelho (1992) J. Appl. Cryst. 25, 109; Wilson (1963) Mathematical Theory of X-ray Powder "
              "Diffractometry",
    .transform = transform};
