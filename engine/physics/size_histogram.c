/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/size_histogram.h"

#include <math.h>

double lw_size_histogram_diameter(const lw_size_histogram *histogram, size_t node)
{
    return exp(histogram->first + histogram->step * (double)node);
}

double lw_size_histogram_moment(const lw_size_histogram *histogram, size_t node, double power)
{
    double x = 0.5 * power * histogram->step, ratio = fabs(x) < 1e-4 ? 1 + x * x / 6 : sinh(x) / x;
    return pow(lw_size_histogram_diameter(histogram, node), power) * ratio * ratio;
}

/* Integral of the side of a hat that rises from 0 at `foot` to 1 at `top` (ln D, either may be the larger)
 * times the coefficient of a sphere, over what lies above ln L; five points of Gauss and Legendre, the
 * integrand being smooth there. */
static double side(double foot, double top, double log_length)
{
    static const double node[5] = {-0.9061798459386639928, -0.5384693101056830910, 0, 0.5384693101056830910,
                                   0.9061798459386639928};
    static const double weight[5] = {0.2369268850561890875, 0.4786286704993664680, 0.5688888888888888889,
                                     0.4786286704993664680, 0.2369268850561890875};
    double low = fmax(fmin(foot, top), log_length), high = fmax(foot, top), sum = 0;
    if (!(low < high))
        return 0;
    for (int i = 0; i < 5; i++) {
        double x = 0.5 * (low + high) + 0.5 * (high - low) * node[i], t = exp(log_length - x);
        sum += weight[i] * (x - foot) / (top - foot) * (1 - 1.5 * t + 0.5 * t * t * t);
    }
    return 0.5 * (high - low) * sum;
}

double lw_size_histogram_coefficient(const lw_size_histogram *histogram, size_t node, double length_nm)
{
    if (!(length_nm > 0))
        return 1;
    double top = histogram->first + histogram->step * (double)node, log_length = log(length_nm);
    return (side(top - histogram->step, top, log_length) + side(top + histogram->step, top, log_length)) /
           histogram->step;
}
