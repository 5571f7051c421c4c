/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/width_figure.h"

#include "line/nodes.h"

#include <math.h>

typedef struct profile {
    const lw_voigt_kernel *kernel;
    lw_voigt_node node[LW_TABLE_MOST];
    size_t n;
    double variance, lorentz;
} profile;

/* The profile at one place, and its derivatives to the place and to the widths and axial parameters. */
enum { OF_VARIANCE, OF_LORENTZ, OF_AXIAL, OF_ALL = OF_AXIAL + LW_VOIGT_SHAPES };
typedef struct point {
    double value, slope, curvature, by[OF_ALL];
} point;

static point at(const profile *of, double x)
{
    point p;
    double position;
    lw_voigt_sums sums = {&p.value, &position, &p.by[OF_VARIANCE], &p.by[OF_LORENTZ], {NULL}};
    for (int k = 0; k < LW_VOIGT_SHAPES; k++)
        sums.d_shape[k] = &p.by[OF_AXIAL + k];
    of->kernel->sum(1, &x, of->node, of->n, of->variance, of->lorentz, 0, &sums);
    p.slope = -position;
    p.curvature = 16 * M_LN2 * p.by[OF_VARIANCE]; /* the Voigt obeys the heat equation */
    return p;
}

/* Zero of the slope (top) or of value - level between a and b, where it is positive at a and not at b. Newton's
 * method, halving where that leaves the bracket. */
static double zero_of(const profile *of, bool top, double level, double a, double b)
{
    double x = 0.5 * (a + b), least = 1e-15 * fabs(b - a);
    for (int i = 0; i < 100; i++) {
        point p = at(of, x);
        double f = top ? p.slope : p.value - level, d = top ? p.curvature : p.slope;
        if (f > 0)
            a = x;
        else
            b = x;
        double next = x - f / d;
        if (!(next > fmin(a, b) && next < fmax(a, b)))
            next = 0.5 * (a + b);
        if (fabs(next - x) <= least)
            return next;
        x = next;
    }
    return x;
}

/* Highest place; the profile has one top, between its outermost copies. */
static double top_of(const profile *of, double width)
{
    enum { RUN = 64 };
    double low = 0, high = 0, place[RUN], value[RUN], best = -1, top = 0, step = 0.25 * width;
    for (size_t i = 0; i < of->n; i++) {
        low = fmin(low, of->node[i].offset);
        high = fmax(high, of->node[i].offset);
    }
    lw_voigt_sums sums = {.value = value};
    for (double from = low - step; from < high + 2 * step; from += RUN * step) {
        for (int i = 0; i < RUN; i++)
            place[i] = from + i * step;
        of->kernel->sum(RUN, place, of->node, of->n, of->variance, of->lorentz, 1, &sums);
        for (int i = 0; i < RUN; i++)
            if (value[i] > best) {
                best = value[i];
                top = place[i];
            }
    }
    return zero_of(of, true, 0, top - step, top + step);
}

/* Where the profile falls through half its height, going outwards from the top. */
static double crossing(const profile *of, double level, double top, double step)
{
    double inside = top, outside = top + step;
    while (at(of, outside).value > level) {
        inside = outside;
        outside += step;
    }
    return zero_of(of, false, level, inside, outside);
}

void lw_width_figure_at(const lw_width_function *function, double two_theta_deg, double own_gauss_variance,
                        double own_lorentz_deg, lw_width_figure *figure)
{
    double by_variance[LW_WIDTH_PARAMETERS], by_lorentz[LW_WIDTH_PARAMETERS];
    /* the plain rung, so that the figure is the same on every processor */
    profile of = {.kernel = lw_voigt_kernel_for(LW_CPU_PLAIN)};
    of.variance = lw_width_gauss_variance(function->value, two_theta_deg, by_variance) + own_gauss_variance;
    of.lorentz = lw_width_lorentz(function->value, two_theta_deg, by_lorentz) + own_lorentz_deg;
    *figure = (lw_width_figure){0};
    if (!(of.variance > 0 || of.lorentz > 0))
        return;
    const double *axial = function->value + LW_AXIAL_1;
    double width = lw_voigt_fwhm(sqrt(of.variance), of.lorentz);
    const bool slopes[LW_VOIGT_SHAPES] = {function->covariance[LW_AXIAL_1][LW_AXIAL_1] > 0 && axial[0] > 0,
                                          function->covariance[LW_AXIAL_2][LW_AXIAL_2] > 0 && axial[1] > 0};
    lw_node_recipe recipe = {.axial = function->axial,
                             .parameter = {axial[0], axial[1]},
                             .slopes = {slopes[0], slopes[1]},
                             .table = function->table,
                             .table_deg = two_theta_deg};
    recipe.copies = lw_recipe_copies(&recipe, two_theta_deg, width);
    of.n = lw_profile_nodes(&recipe, two_theta_deg, of.node);
    for (size_t i = 0; i < of.n; i++) {
        figure->centroid_deg += of.node[i].weight * of.node[i].offset;
        of.node[i].offset_slope = 0; /* the angle is held here */
    }
    figure->top_deg = top_of(&of, width);
    point top = at(&of, figure->top_deg);
    double right = crossing(&of, 0.5 * top.value, figure->top_deg, 0.25 * width);
    double left = crossing(&of, 0.5 * top.value, figure->top_deg, -0.25 * width);
    point at_right = at(&of, right), at_left = at(&of, left);
    figure->fwhm_deg = right - left;
    figure->middle_deg = 0.5 * (left + right);
    figure->breadth_deg = 1 / top.value;
    /* a place of half height moves so that the value there stays half the top's */
    double fwhm_by[OF_ALL], breadth_by[OF_ALL];
    for (int k = 0; k < OF_ALL; k++) {
        fwhm_by[k] = (0.5 * top.by[k] - at_right.by[k]) / at_right.slope - (0.5 * top.by[k] - at_left.by[k]) / at_left.slope;
        breadth_by[k] = -top.by[k] / (top.value * top.value);
    }
    for (int k = 0; k < 2; k++) {
        figure->d_fwhm[k] = fwhm_by[OF_VARIANCE + k];
        figure->d_breadth[k] = breadth_by[OF_VARIANCE + k];
    }
    double slope_fwhm[LW_WIDTH_PARAMETERS], slope_breadth[LW_WIDTH_PARAMETERS], var_fwhm = 0, var_breadth = 0;
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++) {
        bool is_axial = i >= LW_AXIAL_1;
        int k = is_axial ? OF_AXIAL + i - LW_AXIAL_1 : 0;
        slope_fwhm[i] = is_axial ? fwhm_by[k] : fwhm_by[OF_VARIANCE] * by_variance[i] + fwhm_by[OF_LORENTZ] * by_lorentz[i];
        slope_breadth[i] =
            is_axial ? breadth_by[k] : breadth_by[OF_VARIANCE] * by_variance[i] + breadth_by[OF_LORENTZ] * by_lorentz[i];
    }
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
        for (int j = 0; j < LW_WIDTH_PARAMETERS; j++) {
            var_fwhm += slope_fwhm[i] * function->covariance[i][j] * slope_fwhm[j];
            var_breadth += slope_breadth[i] * function->covariance[i][j] * slope_breadth[j];
        }
    figure->u_fwhm = sqrt(fmax(var_fwhm, 0));
    figure->u_breadth = sqrt(fmax(var_breadth, 0));
}
