/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/shape.h"

#include <math.h>
#include <stddef.h>

/* An empirical shape is built on a side of unit height with half-height at w/2 and one form parameter s. */
typedef struct side {
    double height, d_x, d_width, d_form;
} side;

/* Pseudo-Voigt: s = eta weighs the areas of Lorentzian and Gaussian. */
static double pseudo_voigt_breadth(double eta, double *slope)
{
    const double lorentz = 2 / M_PI, gauss = 2 * sqrt(M_LN2 / M_PI);
    double top = eta * lorentz + (1 - eta) * gauss; /* height times width of the unit area */
    *slope = -(lorentz - gauss) / (top * top);
    return 1 / top;
}

static side pseudo_voigt_side(double x, const lw_shape_side *of)
{
    const double lorentz = 2 / M_PI, gauss = 2 * sqrt(M_LN2 / M_PI);
    double eta = of->form, u = x / of->width;
    double l = 1 / (1 + 4 * u * u), g = exp(-4 * M_LN2 * u * u);
    double sum = eta * lorentz * l + (1 - eta) * gauss * g;
    double d_u = -8 * u * (eta * lorentz * l * l + (1 - eta) * gauss * M_LN2 * g);
    return (side){.height = of->breadth * sum,
                  .d_x = of->breadth * d_u / of->width,
                  .d_width = -of->breadth * d_u * u / of->width,
                  .d_form = of->breadth_slope * sum + of->breadth * (lorentz * l - gauss * g)};
}

/* Pearson VII: s = m, the exponent; m = 1 is Lorentzian, m to infinity Gaussian. */
static double pearson_breadth_only(double m)
{
    return sqrt(M_PI) / (2 * sqrt(exp2(1 / m) - 1)) * exp(lgamma(m - 0.5) - lgamma(m));
}

static double pearson_breadth(double m, double *slope)
{
    /* central difference: the digamma function would gain nothing at 1e-9 */
    double step = 1e-5 * m;
    *slope = (pearson_breadth_only(m + step) - pearson_breadth_only(m - step)) / (2 * step);
    return pearson_breadth_only(m);
}

static side pearson_side(double x, const lw_shape_side *of)
{
    double m = of->form, u = x / of->width, base = 1 + of->pearson * u * u, logarithm = log(base);
    double height = exp(-m * logarithm), d_u = -2 * m * of->pearson * u * height / base;
    double d_c = -(of->pearson + 4) * M_LN2 / (m * m);
    return (side){.height = height,
                  .d_x = d_u / of->width,
                  .d_width = -d_u * u / of->width,
                  .d_form = height * (-logarithm - m * u * u * d_c / base)};
}

typedef double breadth_fn(double form, double *slope);

/* What is the same at all points; local = {w, s} or {w left, w right, s left, s right}. */
static void ready(breadth_fn *breadth, bool split, bool pearson, const double *local, lw_shape_ready *to)
{
    to->split = split;
    to->area = 0;
    for (int k = 0; k < 2; k++) {
        lw_shape_side *at = &to->side[k];
        if (k == 1 && !split) {
            *at = to->side[0];
        } else {
            at->width = local[k];
            at->form = local[split ? 2 + k : 1];
            at->breadth = breadth(at->form, &at->breadth_slope);
            at->pearson = pearson ? 4 * (exp2(1 / at->form) - 1) : 0;
        }
        to->area += 0.5 * at->width * at->breadth;
    }
}

typedef side side_fn(double x, const lw_shape_side *of);

/* Unit area from two sides of equal height. */
static double build(side_fn *fn, double x, const lw_shape_ready *of, double *d_x, double *d_local)
{
    int here = of->split && x >= 0 ? 1 : 0;
    side at = fn(x, &of->side[here]);
    double area = of->area, value = at.height / area;
    *d_x = at.d_x / area;
    if (!of->split) {
        const lw_shape_side *s = &of->side[0];
        d_local[0] = at.d_width / area - value / s->width;
        d_local[1] = at.d_form / area - value * s->width * s->breadth_slope / area;
        return value;
    }
    for (int k = 0; k < 2; k++) {
        const lw_shape_side *s = &of->side[k];
        d_local[k] = -value * 0.5 * s->breadth / area + (k == here ? at.d_width / area : 0);
        d_local[2 + k] = -value * 0.5 * s->width * s->breadth_slope / area + (k == here ? at.d_form / area : 0);
    }
    return value;
}

static void build_breadths(breadth_fn *breadth, bool split, const double *local, double *fwhm, double *integral,
                           double *d_fwhm, double *d_integral)
{
    double slope[2];
    if (!split) {
        double b = breadth(local[1], &slope[0]);
        *fwhm = local[0];
        *integral = local[0] * b;
        d_fwhm[0] = 1;
        d_fwhm[1] = 0;
        d_integral[0] = b;
        d_integral[1] = local[0] * slope[0];
        return;
    }
    *fwhm = 0.5 * (local[0] + local[1]);
    *integral = 0;
    for (int k = 0; k < 2; k++) {
        double b = breadth(local[2 + k], &slope[k]);
        *integral += 0.5 * local[k] * b;
        d_fwhm[k] = 0.5;
        d_fwhm[2 + k] = 0;
        d_integral[k] = 0.5 * b;
        d_integral[2 + k] = 0.5 * local[k] * slope[k];
    }
}

static void ready_pseudo_voigt(const double *local, lw_shape_ready *to)
{
    ready(pseudo_voigt_breadth, false, false, local, to);
}
static void ready_split_pseudo_voigt(const double *local, lw_shape_ready *to)
{
    ready(pseudo_voigt_breadth, true, false, local, to);
}
static void ready_pearson(const double *local, lw_shape_ready *to)
{
    ready(pearson_breadth, false, true, local, to);
}
static void ready_split_pearson(const double *local, lw_shape_ready *to)
{
    ready(pearson_breadth, true, true, local, to);
}
static double at_pseudo_voigt(double x, const lw_shape_ready *of, double *d_x, double *d_local)
{
    return build(pseudo_voigt_side, x, of, d_x, d_local);
}
static double at_pearson(double x, const lw_shape_ready *of, double *d_x, double *d_local)
{
    return build(pearson_side, x, of, d_x, d_local);
}
static void breadths_pseudo_voigt(const double *local, double *fwhm, double *breadth, double *d_fwhm, double *d_breadth)
{
    build_breadths(pseudo_voigt_breadth, false, local, fwhm, breadth, d_fwhm, d_breadth);
}
static void breadths_split_pseudo_voigt(const double *local, double *fwhm, double *breadth, double *d_fwhm,
                                        double *d_breadth)
{
    build_breadths(pseudo_voigt_breadth, true, local, fwhm, breadth, d_fwhm, d_breadth);
}
static void breadths_pearson(const double *local, double *fwhm, double *breadth, double *d_fwhm, double *d_breadth)
{
    build_breadths(pearson_breadth, false, local, fwhm, breadth, d_fwhm, d_breadth);
}
static void breadths_split_pearson(const double *local, double *fwhm, double *breadth, double *d_fwhm,
                                   double *d_breadth)
{
    build_breadths(pearson_breadth, true, local, fwhm, breadth, d_fwhm, d_breadth);
}
static void start_pseudo_voigt(double fwhm, double *local)
{
    local[0] = fwhm;
    local[1] = 0.5;
}
static void start_split_pseudo_voigt(double fwhm, double *local)
{
    local[0] = local[1] = fwhm;
    local[2] = local[3] = 0.5;
}
static void start_pearson(double fwhm, double *local)
{
    local[0] = fwhm;
    local[1] = 1.5;
}
static void start_split_pearson(double fwhm, double *local)
{
    local[0] = local[1] = fwhm;
    local[2] = local[3] = 1.5;
}

#define WIDTH_LEAST 1e-5 /* deg */

static const lw_line_shape voigt = {.name = "voigt",
                               .source = "Langford (1978) J. Appl. Cryst. 11, 10",
                               .is_voigt = true,
                               .n_local = 2,
                               .local = {"gauss fwhm^2", "lorentz fwhm"},
                               .lower = {0, 0},
                               .upper = {INFINITY, INFINITY}};
static const lw_line_shape gaussian = {.name = "gaussian",
                                  .source = "Caglioti, Paoletti & Ricci (1958) Nucl. Instrum. 3, 223",
                                  .is_voigt = true,
                                  .n_local = 2,
                                  .local = {"gauss fwhm^2", "lorentz fwhm"},
                                  .lower = {0, 0},
                                  .upper = {INFINITY, INFINITY},
                                  .held = {false, true}};
static const lw_line_shape lorentzian = {.name = "lorentzian",
                                    .source = "Jones (1938) Proc. R. Soc. London A 166, 16",
                                    .is_voigt = true,
                                    .n_local = 2,
                                    .local = {"gauss fwhm^2", "lorentz fwhm"},
                                    .lower = {0, 0},
                                    .upper = {INFINITY, INFINITY},
                                    .held = {true, false}};
static const lw_line_shape pseudo_voigt = {.name = "pseudo_voigt",
                                      .source = "Wertheim, Butler, West & Buchanan (1974) Rev. Sci. Instrum. 45, 1369",
                                      .n_local = 2,
                                      .local = {"fwhm", "eta"},
                                      .lower = {WIDTH_LEAST, 0},
                                      .upper = {INFINITY, 1.5},
                                      .ready = ready_pseudo_voigt,
                                      .at = at_pseudo_voigt,
                                      .breadths = breadths_pseudo_voigt,
                                      .start = start_pseudo_voigt};
static const lw_line_shape pearson7 = {.name = "pearson7",
                                  .source = "Hall, Veeraraghavan, Rubin & Winchell (1977) J. Appl. Cryst. 10, 66",
                                  .n_local = 2,
                                  .local = {"fwhm", "m"},
                                  .lower = {WIDTH_LEAST, 0.6},
                                  .upper = {INFINITY, 50},
                                  .ready = ready_pearson,
                                  .at = at_pearson,
                                  .breadths = breadths_pearson,
                                  .start = start_pearson};
static const lw_line_shape split_pseudo_voigt = {.name = "split_pseudo_voigt",
                                            .source = "Toraya (1990) J. Appl. Cryst. 23, 485",
                                            .n_local = 4,
                                            .local = {"fwhm left", "fwhm right", "eta left", "eta right"},
                                            .lower = {WIDTH_LEAST, WIDTH_LEAST, 0, 0},
                                            .upper = {INFINITY, INFINITY, 1.5, 1.5},
                                            .ready = ready_split_pseudo_voigt,
                                            .at = at_pseudo_voigt,
                                            .breadths = breadths_split_pseudo_voigt,
                                            .start = start_split_pseudo_voigt};
static const lw_line_shape split_pearson7 = {.name = "split_pearson7",
                                        .source = "Brown & Edmonds (1980) Adv. X-ray Anal. 23, 361; Toraya (1986) "
                                                  "J. Appl. Cryst. 19, 440",
                                        .n_local = 4,
                                        .local = {"fwhm left", "fwhm right", "m left", "m right"},
                                        .lower = {WIDTH_LEAST, WIDTH_LEAST, 0.6, 0.6},
                                        .upper = {INFINITY, INFINITY, 50, 50},
                                        .ready = ready_split_pearson,
                                        .at = at_pearson,
                                        .breadths = breadths_split_pearson,
                                        .start = start_split_pearson};

const lw_line_shape *const lw_line_shape_list[] = {&voigt,    &gaussian,           &lorentzian,     &pseudo_voigt,
                                         &pearson7, &split_pseudo_voigt, &split_pearson7, NULL};
const char *const lw_line_shape_names[] = {"voigt",    "gaussian",           "lorentzian",     "pseudo_voigt",
                                      "pearson7", "split_pseudo_voigt", "split_pearson7", NULL};

double lw_line_shape_value(const lw_line_shape *shape, double x, const double *local, double *d_x, double *d_local)
{
    lw_shape_ready of;
    shape->ready(local, &of);
    return shape->at(x, &of, d_x, d_local);
}

void lw_line_shape_sum(const lw_line_shape *shape, size_t n, const double *x, const lw_voigt_node *node, size_t n_nodes,
                       const double *local, bool slopes, double *value, double *d_position, double *const *d_local)
{
    lw_shape_ready of;
    shape->ready(local, &of);
    for (size_t i = 0; i < n; i++) {
        double sum = 0, sum_position = 0, sum_local[LW_LOCAL_MOST] = {0};
        for (size_t k = 0; k < n_nodes; k++) {
            double d_x, d[LW_LOCAL_MOST];
            sum += node[k].weight * shape->at(x[i] - node[k].offset, &of, &d_x, d);
            sum_position -= node[k].weight * d_x * (1 + node[k].offset_slope);
            for (int j = 0; j < shape->n_local; j++)
                sum_local[j] += node[k].weight * d[j];
        }
        value[i] = sum;
        if (!slopes)
            continue;
        d_position[i] = sum_position;
        for (int j = 0; j < shape->n_local; j++)
            d_local[j][i] = sum_local[j];
    }
}
