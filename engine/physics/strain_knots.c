/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/strain_knots.h"

#include <math.h>
#include <string.h>

void lw_strain_knots_make(size_t n, double scale, double longest, lw_strain_knots *knots)
{
    *knots = (lw_strain_knots){.n = n, .scale = scale, .step = log1p(longest / scale) / (double)(n - 1)};
    double square = knots->step * knots->step;
    /* (1/6) M[i-1] + (2/3) M[i] + (1/6) M[i+1] = second difference/step^2, M = 0 at both ends: elimination
     * for the values 1 at one knot and 0 at the others */
    for (size_t j = 0; j < n; j++) {
        double up[LW_STRAIN_KNOTS_MOST] = {0}, right[LW_STRAIN_KNOTS_MOST] = {0};
        for (size_t i = 1; i + 1 < n; i++) {
            double second = ((i == j + 1) - 2 * (i == j) + (i + 1 == j)) / square;
            double pivot = 2.0 / 3 - (i > 1 ? up[i - 1] / 6 : 0);
            up[i] = 1 / (6 * pivot);
            right[i] = (second - (i > 1 ? right[i - 1] / 6 : 0)) / pivot;
        }
        for (size_t i = n - 2; i >= 1; i--)
            knots->bend[i][j] = right[i] - (i + 2 < n ? up[i] * knots->bend[i + 1][j] : 0);
    }
}

double lw_strain_knots_length(const lw_strain_knots *knots, size_t knot)
{
    return knots->scale * expm1(knots->step * (double)knot);
}

double lw_strain_knots_square(const lw_strain_knots *knots, const double *y, double length_nm, double *slopes)
{
    double x = log1p(fmax(length_nm, 0) / knots->scale) / knots->step, sum = 0;
    size_t last = knots->n - 1, i = x < (double)last ? (size_t)x : last - 1;
    double b = x - (double)i, a = 1 - b, square = knots->step * knots->step / 6;
    double bend_a = (a * a * a - a) * square, bend_b = (b * b * b - b) * square;
    if (b >
        1) { /* a straight line: slope of the last interval at its end, where the second derivative is 0 */
        bend_a = square * (b - 1);
        bend_b = 0;
    }
    for (size_t j = 0; j <= last; j++) {
        double by = (j == i ? a : 0) + (j == i + 1 ? b : 0) + bend_a * knots->bend[i][j] +
                    bend_b * knots->bend[i + 1][j];
        sum += by * y[j];
        if (slopes != NULL)
            slopes[j] = by;
    }
    return exp(sum);
}

double lw_strain_knots_least_step(const lw_strain_knots *knots, size_t knot, double spacing)
{
    return -log(fmax(lw_strain_knots_length(knots, knot), spacing) /
                fmax(lw_strain_knots_length(knots, knot - 1), spacing));
}

void lw_strain_knots_roughness(const lw_strain_knots *knots, double *matrix)
{
    size_t n = knots->n;
    memset(matrix, 0, n * n * sizeof *matrix);
    /* the second derivative is linear between knots: the integral of a product of two such pieces */
    for (size_t i = 0; i + 1 < n; i++)
        for (size_t a = 0; a < n; a++)
            for (size_t b = 0; b < n; b++) {
                const double *left = knots->bend[i], *right = knots->bend[i + 1];
                matrix[a * n + b] += knots->step / 6 *
                                     (2 * left[a] * left[b] + left[a] * right[b] + right[a] * left[b] +
                                      2 * right[a] * right[b]);
            }
}
