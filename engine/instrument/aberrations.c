/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/aberrations.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

static double zero_shift(double two_theta_deg, double radius_mm)
{
    (void)two_theta_deg;
    (void)radius_mm;
    return 1;
}

static double displacement(double two_theta_deg, double radius_mm)
{
    return -2 * cos(two_theta_deg * degree / 2) / radius_mm / degree;
}

static double flat_specimen(double two_theta_deg, double radius_mm)
{
    (void)radius_mm;
    return -1 / tan(two_theta_deg * degree / 2);
}

static double transparency(double two_theta_deg, double radius_mm)
{
    (void)radius_mm;
    return sin(two_theta_deg * degree);
}

/* dtheta = tan(theta) dlambda/lambda at fixed spacing */
static double wavelength(double two_theta_deg, double radius_mm)
{
    (void)radius_mm;
    return 2 * tan(two_theta_deg * degree / 2) / degree;
}

static const lw_aberration aberration_zero = {
    .name = "zero_shift",
    .unit = "deg",
    .definition = "reported 2theta minus true 2theta, the same at every angle",
    .source = "Wilson (1963) Mathematical Theory of X-ray Powder Diffractometry",
    .slope = zero_shift};
static const lw_aberration aberration_displacement = {
    .name = "displacement",
    .unit = "mm",
    .definition = "specimen surface outside (+) or inside (-) the focusing circle; lines move by -2 s cos(theta)/R",
    .source = "Wilson (1963) Mathematical Theory of X-ray Powder Diffractometry",
    .of_specimen = true,
    .slope = displacement};
static const lw_aberration aberration_flat_specimen = {
    .name = "flat_specimen",
    .unit = "deg",
    .definition = "coefficient of -cot(theta): a flat specimen leaves the focusing circle; the square of the full "
                  "equatorial divergence over 6 (in degrees: times 57.3) for an even beam",
    .source = "Wilson (1963); Cheary & Coelho (1992) J. Appl. Cryst. 25, 109",
    .slope = flat_specimen};
static const lw_aberration aberration_transparency = {
    .name = "transparency",
    .unit = "deg",
    .definition = "coefficient of sin(2theta): penetration into the specimen (negative), and what of the axial and "
                  "flat-specimen shifts has the same course",
    .source = "Keating & Warren (1952) Rev. Sci. Instrum. 23, 519: -sin(2theta)/(2 mu R) for a thick specimen",
    .of_specimen = true,
    .slope = transparency};
static const lw_aberration aberration_wavelength = {
    .name = "wavelength",
    .unit = "",
    .definition = "relative excess of the true wavelength over the nominal one; lines move by 2 tan(theta) per unit",
    .source = "Bragg's law, differentiated",
    .slope = wavelength};

const lw_aberration *const lw_aberration_list[] = {&aberration_zero, &aberration_displacement, &aberration_flat_specimen,
                                                   &aberration_transparency, &aberration_wavelength, NULL};

const lw_aberration *lw_aberration_named(const char *name)
{
    for (size_t i = 0; lw_aberration_list[i] != NULL; i++)
        if (strcmp(lw_aberration_list[i]->name, name) == 0)
            return lw_aberration_list[i];
    return NULL;
}

double lw_aberrations_shift(const lw_aberrations *set, double two_theta_deg, double *u)
{
    double slope[LW_ABERRATION_MOST], shift = 0, variance = 0;
    for (size_t i = 0; i < set->n; i++) {
        slope[i] = set->kind[i]->slope(two_theta_deg, set->radius_mm);
        shift += slope[i] * set->value[i];
    }
    for (size_t i = 0; i < set->n; i++)
        for (size_t j = 0; j < set->n; j++)
            variance += slope[i] * set->covariance[i][j] * slope[j];
    if (u != NULL)
        *u = sqrt(fmax(variance, 0));
    return shift;
}
