/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/intensity.h"

#include <math.h>

static const double DEGREE = 3.14159265358979323846 / 180.0;

static double square(double x)
{
    return x * x;
}

double lw_polarisation(double two_theta_deg, double monochromator_deg)
{
    double share = square(cos(monochromator_deg * DEGREE));
    return (1 + share * square(cos(two_theta_deg * DEGREE))) / (1 + share);
}

double lw_lorentz(double two_theta_deg)
{
    double theta = 0.5 * two_theta_deg * DEGREE;
    return 1 / (square(sin(theta)) * cos(theta));
}

double lw_lorentz_polarisation(double two_theta_deg, double monochromator_deg)
{
    return lw_polarisation(two_theta_deg, monochromator_deg) * lw_lorentz(two_theta_deg);
}

double lw_line_factor(double two_theta_deg, double monochromator_deg)
{
    return lw_polarisation(two_theta_deg, monochromator_deg) / square(sin(0.5 * two_theta_deg * DEGREE));
}

double lw_line_factor_slope(double two_theta_deg, double monochromator_deg)
{
    double two_theta = two_theta_deg * DEGREE;
    double share = square(cos(monochromator_deg * DEGREE));
    double polarisation = -share * sin(2 * two_theta) / (1 + share * square(cos(two_theta)));
    return (polarisation - 1 / tan(0.5 * two_theta)) * DEGREE;
}
