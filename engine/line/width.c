/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/width.h"

#include "line/nodes.h"

#include <math.h>
#include <stddef.h>

const char *const lw_width_name[LW_WIDTH_PARAMETERS] = {"U", "V", "W", "P", "X", "Y", "Z", "axial 1", "axial 2"};
const char *const lw_axial_names[] = {"none", "finger_cox_jephcoat", "soller", NULL};

static double radians(double degrees)
{
    return degrees * (M_PI / 180);
}

double lw_width_gauss_variance(const double *value, double two_theta_deg, double *slopes)
{
    double t = tan(radians(two_theta_deg / 2)), sec2 = 1 + t * t;
    double variance = (value[LW_U] * t + value[LW_V]) * t + value[LW_W] + value[LW_P] * sec2;
    bool clipped = variance < 0; /* fits refuse such a point; a calibration is not asked outside its range */
    if (slopes != NULL) {
        for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
            slopes[i] = 0;
        if (!clipped) {
            slopes[LW_U] = t * t;
            slopes[LW_V] = t;
            slopes[LW_W] = 1;
            slopes[LW_P] = sec2;
        }
    }
    return clipped ? 0 : variance;
}

double lw_width_lorentz(const double *value, double two_theta_deg, double *slopes)
{
    double t = tan(radians(two_theta_deg / 2)), sec = sqrt(1 + t * t);
    double width = value[LW_X] * t + value[LW_Y] * sec + value[LW_Z];
    bool clipped = width < 0;
    if (slopes != NULL) {
        for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
            slopes[i] = 0;
        if (!clipped) {
            slopes[LW_X] = t;
            slopes[LW_Y] = sec;
            slopes[LW_Z] = 1;
        }
    }
    return clipped ? 0 : width;
}

/* Value of the profile at x; the profile is the sum of the nodes. */
static double height_at(const lw_voigt_node *node, size_t n, double gauss_fwhm, double lorentz, double x)
{
    double sum = 0;
    for (size_t i = 0; i < n; i++)
        sum += node[i].weight * lw_voigt(x - node[i].offset, gauss_fwhm, lorentz);
    return sum;
}

/* Where the profile falls through `level` between `inside` (above it) and outwards by steps of `step`. */
static double crossing(const lw_voigt_node *node, size_t n, double gauss_fwhm, double lorentz, double level,
                       double inside, double step)
{
    double outside = inside + step;
    while (height_at(node, n, gauss_fwhm, lorentz, outside) > level) {
        inside = outside;
        outside += step;
    }
    for (int i = 0; i < 50; i++) {
        double middle = 0.5 * (inside + outside);
        if (height_at(node, n, gauss_fwhm, lorentz, middle) > level)
            inside = middle;
        else
            outside = middle;
    }
    return 0.5 * (inside + outside);
}

/* FWHM, breadth, centroid and top for given parameter values. */
static void figure_of(lw_axial_kind axial, const double *value, double two_theta_deg, double own_variance, double own_lorentz,
                      lw_width_figure *figure)
{
    lw_voigt_node node[LW_AXIAL_NODES_MOST];
    double variance = lw_width_gauss_variance(value, two_theta_deg, NULL) + own_variance;
    double lorentz = lw_width_lorentz(value, two_theta_deg, NULL) + own_lorentz;
    double gauss = sqrt(variance), width = lw_voigt_fwhm(gauss, lorentz);
    size_t n = lw_axial_nodes(axial, value + LW_AXIAL_1, two_theta_deg, width, node);
    double centroid = 0, low = -0.1 * width, high = 0.1 * width, best = 0, at = 0;
    for (size_t i = 0; i < n; i++) {
        centroid += node[i].weight * node[i].offset;
        low = fmin(low, node[i].offset);
        high = fmax(high, node[i].offset);
    }
    /* the profile has one top, between its outermost copies */
    int steps = 24 + (int)(8 * (high - low) / width);
    for (int i = 0; i <= steps; i++) {
        double x = low + (high - low) * i / steps, h = height_at(node, n, gauss, lorentz, x);
        if (h > best) {
            best = h;
            at = x;
        }
    }
    double a = at - (high - low) / steps, b = at + (high - low) / steps;
    const double golden = 0.3819660112501051;
    for (int i = 0; i < 60; i++) {
        double left = a + golden * (b - a), right = b - golden * (b - a);
        if (height_at(node, n, gauss, lorentz, left) > height_at(node, n, gauss, lorentz, right))
            b = right;
        else
            a = left;
    }
    at = 0.5 * (a + b);
    best = height_at(node, n, gauss, lorentz, at);
    double right = crossing(node, n, gauss, lorentz, best / 2, at, 0.25 * width);
    double left = crossing(node, n, gauss, lorentz, best / 2, at, -0.25 * width);
    figure->fwhm_deg = right - left;
    figure->breadth_deg = 1 / best;
    figure->centroid_deg = centroid;
    figure->top_deg = at;
}

void lw_width_figure_at(const lw_width_function *function, double two_theta_deg, double own_gauss_variance,
                        double own_lorentz_deg, lw_width_figure *figure)
{
    figure_of(function->axial, function->value, two_theta_deg, own_gauss_variance, own_lorentz_deg, figure);
    double slope_fwhm[LW_WIDTH_PARAMETERS] = {0}, slope_breadth[LW_WIDTH_PARAMETERS] = {0};
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++) {
        double u = sqrt(function->covariance[i][i]);
        if (!(u > 0))
            continue;
        /* central difference over a tenth of the parameter's own uncertainty */
        double value[LW_WIDTH_PARAMETERS], step = 0.1 * u;
        lw_width_figure up, down;
        for (int j = 0; j < LW_WIDTH_PARAMETERS; j++)
            value[j] = function->value[j];
        value[i] = function->value[i] + step;
        figure_of(function->axial, value, two_theta_deg, own_gauss_variance, own_lorentz_deg, &up);
        value[i] = function->value[i] - step;
        figure_of(function->axial, value, two_theta_deg, own_gauss_variance, own_lorentz_deg, &down);
        slope_fwhm[i] = (up.fwhm_deg - down.fwhm_deg) / (2 * step);
        slope_breadth[i] = (up.breadth_deg - down.breadth_deg) / (2 * step);
    }
    double var_fwhm = 0, var_breadth = 0;
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
        for (int j = 0; j < LW_WIDTH_PARAMETERS; j++) {
            var_fwhm += slope_fwhm[i] * function->covariance[i][j] * slope_fwhm[j];
            var_breadth += slope_breadth[i] * function->covariance[i][j] * slope_breadth[j];
        }
    figure->u_fwhm = sqrt(fmax(var_fwhm, 0));
    figure->u_breadth = sqrt(fmax(var_breadth, 0));
}
