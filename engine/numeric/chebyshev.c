/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/chebyshev.h"

void lw_chebyshev(double x, double low, double high, size_t n, double *value, double *slope)
{
    double t = ((x - low) + (x - high)) / (high - low), dt = 2 / (high - low);
    for (size_t k = 0; k < n; k++) {
        if (k < 2) {
            value[k] = k == 0 ? 1 : t;
            if (slope != NULL)
                slope[k] = k == 0 ? 0 : dt;
            continue;
        }
        value[k] = 2 * t * value[k - 1] - value[k - 2];
        if (slope != NULL)
            slope[k] = 2 * (dt * value[k - 1] + t * slope[k - 1]) - slope[k - 2];
    }
}

double lw_chebyshev_sum(double x, double low, double high, size_t n, const double *c, double *slope)
{
    double t = ((x - low) + (x - high)) / (high - low), dt = 2 / (high - low);
    double b1 = 0, b2 = 0, d1 = 0, d2 = 0; /* the recurrence and its derivative to t */
    for (size_t k = n; k-- > 1;) {
        double b = c[k] + 2 * t * b1 - b2, d = 2 * b1 + 2 * t * d1 - d2;
        b2 = b1;
        b1 = b;
        d2 = d1;
        d1 = d;
    }
    if (slope != NULL)
        *slope = dt * (b1 + t * d1 - d2);
    return n == 0 ? 0 : c[0] + t * b1 - b2;
}
