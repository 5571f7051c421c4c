/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/voigt_image.h"

#include "numeric/voigt.h"

#include <math.h>
#include <stdbool.h>

#define POINTS 41 /* from the top to REACH breadths: lines are symmetric */
#define REACH 4.0
#define ROUNDS 40

enum { AREA, LEVEL, GAUSS, LORENTZ, PARAMETERS }; /* GAUSS: square of the FWHM */

/* Simpson's rule of A cos(2 pi s L). */
static double profile(size_t n, const double *coefficient, double step, double s)
{
    double turn = 2 * cos(2 * M_PI * s * step), before = 0.5 * turn, now = 1, sum = 0;
    for (size_t i = 0; i < n; i++) {
        sum += coefficient[i] * now * (i == 0 || i + 1 == n ? 1 : i % 2 == 1 ? 4 : 2);
        double next = turn * now - before;
        before = now;
        now = next;
    }
    return 2 * sum * step / 3;
}

/* Solves a symmetric system by elimination; false if it is singular. */
static bool solve(double a[PARAMETERS][PARAMETERS], double *b)
{
    for (int i = 0; i < PARAMETERS; i++) {
        if (!(a[i][i] > 0))
            return false;
        for (int j = i + 1; j < PARAMETERS; j++) {
            double f = a[j][i] / a[i][i];
            for (int k = i; k < PARAMETERS; k++)
                a[j][k] -= f * a[i][k];
            b[j] -= f * b[i];
        }
    }
    for (int i = PARAMETERS - 1; i >= 0; i--) {
        for (int k = i + 1; k < PARAMETERS; k++)
            b[i] -= a[i][k] * b[k];
        b[i] /= a[i][i];
    }
    return isfinite(b[0] + b[1] + b[2] + b[3]);
}

/* Sum of squares; with `a`, its curvature and gradient. x in breadths. */
static double misfit(const double *p, const double *y, const double *weight, double a[PARAMETERS][PARAMETERS], double *g)
{
    double sum = 0;
    for (int i = 0; i < PARAMETERS && a != NULL; i++) {
        g[i] = 0;
        for (int j = 0; j < PARAMETERS; j++)
            a[i][j] = 0;
    }
    for (int k = 0; k < POINTS; k++) {
        double d[4];
        lw_voigt_derivatives(REACH * k / (POINTS - 1), p[GAUSS], p[LORENTZ], d);
        double r = y[k] - p[AREA] * d[0] - p[LEVEL], slope[PARAMETERS] = {d[0], 1, p[AREA] * d[3], p[AREA] * d[2]};
        double w = weight[k] * (k == 0 ? 0.5 : 1);
        sum += w * r * r;
        for (int i = 0; i < PARAMETERS && a != NULL; i++) {
            g[i] += w * slope[i] * r;
            for (int j = 0; j < PARAMETERS; j++)
                a[i][j] += w * slope[i] * slope[j];
        }
    }
    return sum;
}

double lw_voigt_image(size_t n, const double *coefficient, double step, double background)
{
    double top = profile(n, coefficient, step, 0), beta = 1 / top, y[POINTS], weight[POINTS];
    for (int k = 0; k < POINTS; k++) {
        y[k] = profile(n, coefficient, step, REACH * beta * k / (POINTS - 1)) / top;
        weight[k] = 1 / (fmax(y[k], 0) + fmax(background, 1e-3));
    }
    double p[PARAMETERS] = {1, 0, 0.4, 0.3}, damping = 1e-3; /* breadth 1, half way between Gaussian and Lorentzian */
    double a[PARAMETERS][PARAMETERS], g[PARAMETERS], now = misfit(p, y, weight, a, g);
    for (int round = 0; round < ROUNDS; round++) {
        double m[PARAMETERS][PARAMETERS], step_of[PARAMETERS], tried[PARAMETERS];
        for (int i = 0; i < PARAMETERS; i++) {
            step_of[i] = g[i];
            for (int j = 0; j < PARAMETERS; j++)
                m[i][j] = a[i][j] * (i == j ? 1 + damping : 1);
        }
        if (!solve(m, step_of))
            return 1;
        double moved = 0;
        for (int i = 0; i < PARAMETERS; i++) {
            tried[i] = p[i] + step_of[i];
            if (i >= GAUSS && tried[i] < 0.1 * p[i]) /* widths end at 0, which they may approach */
                tried[i] = 0.1 * p[i];
            moved = fmax(moved, fabs(tried[i] - p[i]));
        }
        double then = misfit(tried, y, weight, NULL, NULL);
        if (then <= now) {
            for (int i = 0; i < PARAMETERS; i++)
                p[i] = tried[i];
            now = misfit(p, y, weight, a, g);
            damping = fmax(0.2 * damping, 1e-9);
            if (moved < 1e-7)
                return lw_voigt_breadth(sqrt(p[GAUSS]), p[LORENTZ]);
        } else {
            if (moved < 1e-9)
                return lw_voigt_breadth(sqrt(p[GAUSS]), p[LORENTZ]);
            damping *= 8;
        }
    }
    return 1;
}
