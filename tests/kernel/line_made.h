/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Made-up scans with known lines for the tests of the line fit. The curve is summed point by point from formulas
 * written out here, not by the engine's kernels. */
#ifndef LW_TESTS_LINE_MADE_H
#define LW_TESTS_LINE_MADE_H

#include "line/lines.h"
#include "line/shape.h"
#include "numeric/random.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#define MADE_LINES_MOST 12

typedef struct made {
    int shape; /* index in lw_line_shape_list */
    size_t n, n_lines;
    double low, step;
    double position[MADE_LINES_MOST], area[MADE_LINES_MOST], local[MADE_LINES_MOST][LW_LOCAL_MOST];
    double background[3]; /* constant, slope and curvature on the scan's range, -1 to 1 */
    lw_radiation radiation;
} made;

/* Cu K-alpha as a doublet of ideal lines, or one ideal line. */
static inline void made_radiation(made *m, bool doublet)
{
    lw_error err = LW_ERROR_NONE;
    memset(&m->radiation, 0, sizeof m->radiation);
    lw_radiation_add_wavelength(&m->radiation, 0.15405929, 0, doublet ? 2 : 1, &err);
    if (doublet)
        lw_radiation_add_wavelength(&m->radiation, 0.15444274, 0, 1, &err);
    lw_radiation_settle(&m->radiation, &err);
}

/* Half of a shape of unit height at x for a full width w: Gaussian share by formula. */
static inline double made_pseudo(double u, double eta)
{
    double gauss = 2 * sqrt(log(2) / M_PI), lorentz = 2 / M_PI;
    return (eta * lorentz / (1 + 4 * u * u) + (1 - eta) * gauss * exp(-4 * log(2) * u * u)) /
           (eta * lorentz + (1 - eta) * gauss);
}

static inline double made_pearson(double u, double m)
{
    return pow(1 + 4 * (pow(2, 1 / m) - 1) * u * u, -m);
}

/* Area under one half (x > 0) of unit height and full width 1. */
static inline double made_half_area(bool pearson, double form)
{
    if (pearson)
        return sqrt(M_PI) * tgamma(form - 0.5) / (4 * tgamma(form) * sqrt(pow(2, 1 / form) - 1));
    return 0.5 / (form * 2 / M_PI + (1 - form) * 2 * sqrt(log(2) / M_PI));
}

/* Unit-area profile of a shape. */
static inline double made_profile(int shape, const double *local, double x)
{
    if (shape <= 2)
        return lw_voigt(x, sqrt(local[0]), local[1]);
    bool pearson = shape == 4 || shape == 6, split = shape >= 5;
    int side = split && x >= 0;
    double width[2] = {local[0], split ? local[1] : local[0]};
    double form[2] = {split ? local[2] : local[1], split ? local[3] : local[1]};
    double area = width[0] * made_half_area(pearson, form[0]) + width[1] * made_half_area(pearson, form[1]);
    double u = x / width[side];
    return (pearson ? made_pearson(u, form[side]) : made_pseudo(u, form[side])) / area;
}

static inline double made_curve(const made *m, double x)
{
    double t = 2 * (x - m->low) / (m->step * (double)(m->n - 1)) - 1;
    double sum = m->background[0] + m->background[1] * t + m->background[2] * t * t;
    for (size_t k = 0; k < m->n_lines; k++)
        for (size_t c = 0; c < m->radiation.n; c++) {
            double ratio = m->radiation.component[c].wavelength_nm / m->radiation.component[0].wavelength_nm;
            double place = 2 * asin(ratio * sin(m->position[k] * M_PI / 360)) * 180 / M_PI;
            sum += m->area[k] * m->radiation.component[c].weight * made_profile(m->shape, m->local[k], x - place);
        }
    return sum;
}

/* The scan, with Poisson noise of a seed, or exact for seed 0. Areas are counts x deg. */
static inline lw_scan *made_scan(lw_engine *engine, const made *m, unsigned seed, lw_error *err)
{
    double *x = malloc(m->n * sizeof *x), *y = malloc(m->n * sizeof *y);
    lw_random random;
    lw_random_begin(&random, seed, 1);
    for (size_t i = 0; i < m->n; i++) {
        x[i] = m->low + m->step * (double)i;
        y[i] = made_curve(m, x[i]);
        y[i] = seed ? lw_random_poisson(&random, y[i]) : y[i];
    }
    lw_scan_options options = lw_scan_defaults();
    options.radiation = &m->radiation;
    options.noise = seed ? 0 : 3;
    lw_scan *scan = NULL;
    lw_scan_make(engine, "made", m->n, x, y, NULL, &options, &scan, err);
    free(x);
    free(y);
    return scan;
}

/* Reflections where the lines are. */
static inline void made_reflections(const made *m, lw_reflection *reflection)
{
    for (size_t k = 0; k < m->n_lines; k++)
        reflection[k] = (lw_reflection){.h = (int)k + 1, .two_theta_deg = m->position[k], .multiplicity = 6, .families = 1,
                                        .d_nm = 0.15405929 / (2 * sin(m->position[k] * M_PI / 360))};
}

/* Options under which the made scans are exactly the model. */
static inline lw_fit_options made_options(const made *m)
{
    lw_fit_options options = lw_fit_defaults();
    options.shape = m->shape;
    options.widths = 1;
    options.axis = 1;
    options.intensity_factor = 1;
    options.background_terms = 3;
    return options;
}

#endif
