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
