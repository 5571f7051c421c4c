/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The scalar Faddeeva function, by another road than the vector kernel so that each checks the other:
 * the trapezoidal and midpoint rules with their pole terms, of Al Azah & Chandler-Wilde (2021)
 * SIAM J. Numer. Anal. 59, 2346. With TERMS = 11 the rule's own error is exp(-12 pi) = 4e-17. */
#include "numeric/voigt.h"

#include <math.h>

#define TERMS 11
#define PI 3.14159265358979323846
#define STEP 0.5116633539732442442 /* sqrt(pi/(TERMS + 1)) */

/* exp(-t^2) at t = (k + 1/2) STEP and at t = (k + 1) STEP; the squares themselves are exact multiples
 * of pi/12. */
static const double at_middle[TERMS + 1] = {
    0.9366460212365959063,   0.5548549101598534088,    0.1947095780852902987,     0.04047614460380574236,
    0.004984423132468586502, 0.0003636089863893044697, 0.00001571296901780047981, 4.022405421564813854e-7,
    6.099824915912159607e-9, 5.479650239757527089e-11, 2.916031755179499393e-13,  9.192541525134372742e-16};
static const double at_step[TERMS] = {
    0.7696654124932398076,    0.3509198071784109676,     0.09478022484215485279,  0.01516461986454656995,
    0.001437306080407531768,  0.00008069951757030459924, 2.684086793096743346e-6, 5.288422116944157332e-8,
    6.172478865224309567e-10, 4.267731135455224686e-12,  1.747987940565501288e-14};

/* C's complex type would call the library at every product and quotient, and CMPLX is not everywhere. */
typedef struct number {
    double re, im;
} number;

static number plus(number a, number b)
{
    return (number){a.re + b.re, a.im + b.im};
}

static number times(number a, number b)
{
    return (number){a.re * b.re - a.im * b.im, a.re * b.im + a.im * b.re};
}

static number i_times(double c, number a)
{
    return (number){-c * a.im, c * a.re};
}

static number over(double c, number a)
{
    double size = hypot(a.re, a.im);
    return (number){c / size * (a.re / size), -c / size * (a.im / size)};
}

/* exp(-z^2) for z = x + iy, x, y >= 0. */
static number exp_minus_square(double x, double y)
{
    double size = exp((y - x) * (y + x)), angle = -2 * x * y;
    return (number){size * cos(angle), size * sin(angle)};
}

/* (2 i h z/pi) sum weight[k]/(z^2 - t2[k]), t2[k] = (k + shift)^2 h^2. */
static number rule(number z, const double *weight, int count, double shift)
{
    number sum = {0, 0};
    /* far out z^2 would overflow; the sum is then its leading term to every digit */
    if (hypot(z.re, z.im) > 1e30) {
        double total = 0;
        for (int k = 0; k < count; k++)
            total += weight[k];
        return i_times(2 * STEP * total / PI, over(1, z));
    }
    number z2 = times(z, z);
    for (int k = 0; k < count; k++) {
        double t2 = (k + shift) * (k + shift) * (PI / (TERMS + 1));
        sum = plus(sum, over(weight[k], (number){z2.re - t2, z2.im}));
    }
    return i_times(2 * STEP / PI, times(z, sum));
}

static number first_quadrant(double x, double y)
{
    number z = {x, y};
    if (y >= fmax(x, PI / STEP))
        return rule(z, at_middle, TERMS + 1, 0.5);
    double place = x / STEP - floor(x / STEP);
    /* exp(-2 i pi z/h); the phase by the fraction of x/h, which keeps its digits */
    double size = exp(2 * PI * y / STEP);
    number pole = {size * cos(2 * PI * place), -size * sin(2 * PI * place)};
    number edge = exp_minus_square(x, y);
    if (y < x && place >= 0.25 && place <= 0.75) {
        /* the point z is near a midpoint: the trapezoidal rule keeps away from it */
        number sum = plus(rule(z, at_step, TERMS, 1.0), i_times(STEP / PI, over(1, z)));
        return isinf(size) ? sum : plus(sum, times(edge, over(2, (number){1 - pole.re, -pole.im})));
    }
    number sum = rule(z, at_middle, TERMS + 1, 0.5);
    return isinf(size) ? sum : plus(sum, times(edge, over(2, (number){1 + pole.re, pole.im})));
}

void lw_faddeeva(double x, double y, double *re, double *im)
{
    number w = first_quadrant(fabs(x), y);
    *re = w.re;
    *im = x < 0 ? -w.im : w.im;
}
