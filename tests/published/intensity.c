/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lorentz and polarisation factors against values from their formulas, (1 + cos^2 2theta)/(sin^2 theta
 * cos theta) and with (1 + A cos^2 2theta)/(1 + A), A = cos^2 26.6 deg (Klug & Alexander 1974, ch. 3), at ten
 * digits. */
#include "check.h"
#include "physics/intensity.h"

int main(void)
{
    static const double at[5] = {20, 40, 90, 120, 150};
    static const double plain[5] = {63.41084290, 14.43575820, 2.82842712, 3.33333333, 7.24693326};
    static const double graphite[5] = {31.92486134, 7.42726620, 1.57177470, 1.77807922, 3.68113801};
    for (int i = 0; i < 5; i++) {
        /* Ours is normalised to P = 1 at 2theta = 0, so twice it is the plain form. */
        CHECK_NEAR(2 * lw_lorentz_polarisation(at[i], 0), plain[i], 6e-9);
        CHECK_NEAR(lw_lorentz_polarisation(at[i], 26.6), graphite[i], 6e-9);
        /* P/sin^2 = LP cos(theta). */
        double cosine = cos(0.5 * at[i] * 3.14159265358979323846 / 180);
        CHECK_RELATIVE(lw_line_factor(at[i], 26.6), graphite[i] * cosine, 4e-9);
        /* The slope against a central difference, whose error is of order step^2. */
        double step = 1e-3;
        double difference =
            (log(lw_line_factor(at[i] + step, 26.6)) - log(lw_line_factor(at[i] - step, 26.6))) / (2 * step);
        CHECK_NEAR(lw_line_factor_slope(at[i], 26.6), difference, 1e-8);
    }
    CHECK_NEAR(lw_polarisation(0, 26.6), 1, 1e-15);
    CHECK_NEAR(lw_polarisation(90, 0), 0.5, 1e-15);
    CHECK_NEAR(lw_polarisation(180, 90), 1, 1e-15); /* A = 0: fully polarised, no dependence */
    /* 1/(sin^2 45 cos 45) = 2 sqrt(2) */
    CHECK_NEAR(lw_lorentz(90), 2.82842712474619, 1e-13);
    return lw_checks_end();
}
