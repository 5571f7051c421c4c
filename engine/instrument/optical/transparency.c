/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Transparency: rays from the depth z are shifted by -2 z cos(theta)/R and weakened by exp(-2 mu z/sin(theta)): density
 * exp(e/d)/d for e < 0, d = sin(2theta)/(2 mu R), cut off at the specimen's back, e = -2 T cos(theta)/R. */
#include "instrument/optical/aberration.h"

#include <math.h>

static void transform(const lw_geometry *g, double two_theta_deg, double k, double *re, double *im)
{
    *re = 1;
    *im = 0;
    if (!(g->attenuation > 0))
        return;
    double d = sin(two_theta_deg * (M_PI / 180)) / (2 * g->attenuation * g->radius) * (180 / M_PI);
    /* integral of exp(e/d - i k e)/d from -back to 0 = (1 - exp(-back/d + i k back))/(1 - i k d) */
    double norm = 1 + k * k * d * d, top_re = 1, top_im = 0, share = 1;
    if (g->thickness > 0) {
        double back = 2 * g->thickness * cos(two_theta_deg * (M_PI / 360)) / g->radius * (180 / M_PI);
        double rest = exp(-back / d);
        top_re = 1 - rest * cos(k * back);
        top_im = -rest * sin(k * back);
        share = 1 - rest;
    }
    *re = (top_re - top_im * k * d) / (norm * share);
    *im = (top_im + top_re * k * d) / (norm * share);
}

const lw_optical lw_optical_transparency = {
    .name = "transparency",
    .definition = "density exp(e/d)/d for e < 0, d = sin(2theta)/(2 mu R), cut off at -2 T cos(theta)/R",
    .source = "Keating & Warren (1952) Rev. Sci. Instrum. 23, 519; Cheary & Coelho (1992) J. Appl. Cryst. 25, 109",
    .transform = transform};
