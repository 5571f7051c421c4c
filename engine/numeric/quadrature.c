/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/quadrature.h"

#include <math.h>

void lw_gauss_legendre(size_t n, double *x, double *w)
{
    const double pi = 3.14159265358979323846, count = (double)n;
    for (size_t i = 0; 2 * i < n; i++) {
        /* Tricomi's estimate; Newton then takes three or four rounds */
        double t = cos(pi * ((double)i + 0.75) / (count + 0.5)), slope = 1;
        for (int round = 0; round < 10; round++) {
            double before = 1, p = t; /* P_0, P_1 */
            for (size_t k = 2; k <= n; k++) {
                double next = ((2 * (double)k - 1) * t * p - ((double)k - 1) * before) / (double)k;
                before = p;
                p = next;
            }
            slope = count * (before - t * p) / (1 - t * t);
            double step = p / slope;
            t -= step;
            if (fabs(step) < 1e-16)
                break;
        }
        if (2 * i + 1 == n)
            t = 0;
        /* weight at the final node */
        double before = 1, p = t;
        for (size_t k = 2; k <= n; k++) {
            double next = ((2 * (double)k - 1) * t * p - ((double)k - 1) * before) / (double)k;
            before = p;
            p = next;
        }
        slope = count * (before - t * p) / (1 - t * t);
        x[i] = -t;
        x[n - 1 - i] = t;
        w[i] = w[n - 1 - i] = 2 / ((1 - t * t) * slope * slope);
    }
}
