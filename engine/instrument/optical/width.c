/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Widths of source and receiving slit: boxes of w/R. */
#include "instrument/optical/aberration.h"

#include <math.h>

static void box(double width_deg, double k, double *re, double *im)
{
    double x = 0.5 * k * width_deg;
    *re = fabs(x) < 1e-4 ? 1 - x * x / 6 : sin(x) / x;
    *im = 0;
}

static void source(const lw_geometry *g, double two_theta_deg, double k, double *re, double *im)
{
    (void)two_theta_deg;
    box(g->source_width / g->radius * (180 / M_PI), k, re, im);
}

static void slit(const lw_geometry *g, double two_theta_deg, double k, double *re, double *im)
{
    (void)two_theta_deg;
    box(g->slit_width / g->radius * (180 / M_PI), k, re, im);
}

const lw_optical lw_optical_source = {
    .name = "source_width",
    .definition = "box of the width w/R",
    .source = "Cheary & Coelho (1992) J. Appl. Cryst. 25, 109",
    .transform = source};
const lw_optical lw_optical_slit = {
    .name = "slit_width",
    .definition = "box of the width w/R",
    .source = "Cheary & Coelho (1992) J. Appl. Cryst. 25, 109",
    .transform = slit};
