/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/strain.h"

#include <math.h>
#include <stddef.h>
#include <string.h>

#define PI 3.14159265358979323846
#define ROOT_HALF_PI 1.25331413731550025121

static double no_kink(const double *p, double *slopes)
{
    (void)p;
    if (slopes != NULL)
        slopes[0] = slopes[1] = 0;
    return 0;
}

/* ------------------------------------------------------------------------------------------------ constant */

static double constant(const double *p, double length_nm, double *slopes)
{
    if (slopes != NULL)
        slopes[0] = length_nm * length_nm;
    return p[0] * length_nm * length_nm;
}

static void constant_start(double square, double length_nm, double *p)
{
    (void)length_nm;
    p[0] = square;
}

const lw_strain_form lw_strain_constant = {
    .name = "constant",
    .title = "the same over every length",
    .source = "Stokes & Wilson (1944) Proc. Phys. Soc. 56, 174, with a normal distribution of strains",
    .n = 1,
    .parameter = {"mean_square_strain"},
    .unit = {""},
    .least = {0},
    .most = {INFINITY},
    .displacement = constant,
    .kink = no_kink,
    .start = constant_start,
};

/* ---------------------------------------------------------------------------------------------- correlated */

/* <Delta^2> = 2 int_0^L (L - t) K(t) dt, K the correlation of strain along the column; here K = eps0^2 exp(-t/xi). */
static double correlated(const double *p, double length_nm, double *slopes)
{
    double xi = exp(p[1]), x = length_nm / xi, fall = exp(-x), shape, by_xi;
    if (x < 0.02) { /* the closed forms would cancel */
        shape = x * x * (0.5 + x * (-1.0 / 6 + x * (1.0 / 24 + x * (-1.0 / 120 + x / 720))));
        by_xi = x * x * x * (1.0 / 6 + x * (-1.0 / 12 + x * (1.0 / 40 - x / 180)));
    } else {
        shape = x - 1 + fall;
        by_xi = x - 2 + (2 + x) * fall;
    }
    if (slopes != NULL) {
        slopes[0] = 2 * xi * xi * shape;
        slopes[1] = 2 * p[0] * xi * xi * by_xi;
    }
    return 2 * p[0] * xi * xi * shape;
}

static void correlated_start(double square, double length_nm, double *p)
{
    p[0] = 1.5 * square;
    p[1] = log(length_nm);
}

const lw_strain_form lw_strain_correlated = {
    .name = "correlated",
    .title = "strain correlated exponentially along the column",
    .source = "mean square displacement of Ornstein & Uhlenbeck (1930) Phys. Rev. 36, 823, for a strain whose "
              "correlation falls exponentially",
    .n = 2,
    .parameter = {"mean_square_strain_at_0", "log_correlation_length"},
    .unit = {"", ""},
    .least = {0, -1.6},
    .most = {INFINITY, 6},
    .displacement = correlated,
    .kink = no_kink,
    .start = correlated_start,
};

static double gaussian_correlated(const double *p, double length_nm, double *slopes)
{
    double xi = exp(p[1]), x = length_nm / xi, fall = exp(-0.5 * x * x), shape, by_xi;
    if (x < 0.05) {
        double y = x * x;
        shape = y * (0.5 + y * (-1.0 / 24 + y * (1.0 / 240 - y / 2688)));
        by_xi = y * y * (1.0 / 12 + y * (-1.0 / 60 + y / 448));
    } else {
        double middle = x * ROOT_HALF_PI * erf(x * sqrt(0.5));
        shape = middle - (1 - fall);
        by_xi = middle - 2 * (1 - fall);
    }
    if (slopes != NULL) {
        slopes[0] = 2 * xi * xi * shape;
        slopes[1] = 2 * p[0] * xi * xi * by_xi;
    }
    return 2 * p[0] * xi * xi * shape;
}

const lw_strain_form lw_strain_gaussian_correlated = {
    .name = "gaussian_correlated",
    .title = "strain correlated as a Gaussian along the column",
    .source = "twice the double integral of the correlation of strain along the column, as Taylor (1921) Proc. London "
              "Math. Soc. 20, 196, for a Gaussian correlation",
    .n = 2,
    .parameter = {"mean_square_strain_at_0", "log_correlation_length"},
    .unit = {"", ""},
    .least = {0, -1.6},
    .most = {INFINITY, 6},
    .displacement = gaussian_correlated,
    .kink = no_kink,
    .start = correlated_start,
};

/* --------------------------------------------------------------------------------------------------- voigt */

static double voigt(const double *p, double length_nm, double *slopes)
{
    if (slopes != NULL) {
        slopes[0] = length_nm * length_nm;
        slopes[1] = length_nm;
    }
    return p[0] * length_nm * length_nm + p[1] * length_nm;
}

static double voigt_kink(const double *p, double *slopes)
{
    if (slopes != NULL) {
        slopes[0] = 0;
        slopes[1] = 1;
    }
    return p[1];
}

static void voigt_start(double square, double length_nm, double *p)
{
    p[0] = 0.5 * square;
    p[1] = 0.5 * square * length_nm;
}

const lw_strain_form lw_strain_voigt = {
    .name = "voigt",
    .title = "constant plus a share that falls as 1/L",
    .source = "Adler & Houska (1979) J. Appl. Phys. 50, 3282; Balzar (1992) J. Appl. Cryst. 25, 559 (Voigt strain)",
    .n = 2,
    .parameter = {"mean_square_strain_at_infinity", "times_length"},
    .unit = {"", "nm"},
    .least = {0, 0},
    .most = {INFINITY, INFINITY},
    .linear = true,
    .displacement = voigt,
    .kink = voigt_kink,
    .start = voigt_start,
};

/* -------------------------------------------------------------------------------------------- dislocations */

/* int_0^eta asin(v)/v dv = int_0^asin(eta) t cot(t) dt: ten points of Gauss and Legendre give 15 digits. */
static double asin_integral(double angle)
{
    static const double node[5] = {0.14887433898163121088, 0.43339539412924719080, 0.67940956829902440623,
                                   0.86506336668898451073, 0.97390652851717172008};
    static const double weight[5] = {0.29552422471475287017, 0.26926671930999635509, 0.21908636251598204400,
                                     0.14945134915058059315, 0.06667134430868813759};
    double sum = 0, half = 0.5 * angle;
    for (int i = 0; i < 5; i++)
        for (int sign = -1; sign <= 1; sign += 2) {
            double t = half * (1 + sign * node[i]);
            sum += weight[i] * t / tan(t);
        }
    return half * sum;
}

double lw_wilkens(double eta, double *slope)
{
    static const double far = 512 / (90 * PI);
    if (eta >= 1) {
        double log_part = 11.0 / 24 + 0.25 * log(2 * eta), square = eta * eta;
        if (slope != NULL)
            *slope = -far / square + (2 * log_part - 0.25) / (square * eta);
        return far / eta - log_part / square;
    }
    if (eta < 2e-3) { /* the closed form would cancel; the next term is about eta^3/20 */
        if (slope != NULL)
            *slope = -1 / eta + eta / 3;
        return -log(eta) + 7.0 / 4 - M_LN2 + eta * eta / 6;
    }
    double square = eta * eta, angle = asin(eta), root = sqrt(1 - square), integral = asin_integral(angle);
    double by_root = 769 / (180 * eta) + 41 * eta / 90 + 2 * eta * square / 90;
    double by_angle = 11 / (12 * square) + 3.5 + square / 3;
    if (slope != NULL)
        *slope = -1 / eta - far / square +
                 2 / PI * (integral / (2 * eta * square) + (1 - 0.25 / square) * angle / eta) -
                 (-769 / (180 * square) + 41.0 / 90 + 6 * square / 90) * root / PI +
                 (by_root * eta - by_angle) / (PI * root) -
                 (-11 / (6 * eta * square) + 2 * eta / 3) * angle / PI + eta / 3;
    return -log(eta) + 7.0 / 4 - M_LN2 + far / eta + 2 / PI * (1 - 0.25 / square) * integral - by_root * root / PI -
           by_angle * angle / PI + square / 6;
}

static double dislocations(const double *p, double length_nm, double *slopes)
{
    if (!(length_nm > 0)) {
        if (slopes != NULL)
            slopes[0] = slopes[1] = 0;
        return 0;
    }
    double eta = length_nm / exp(p[1]), slope, f = lw_wilkens(eta, &slope), square = length_nm * length_nm;
    if (slopes != NULL) {
        slopes[0] = square * f;
        slopes[1] = -p[0] * square * eta * slope;
    }
    return p[0] * square * f;
}

static void dislocations_start(double square, double length_nm, double *p)
{
    p[1] = log(2 * length_nm);
    p[0] = square / lw_wilkens(0.5, NULL);
}

const lw_strain_form lw_strain_dislocations = {
    .name = "dislocations",
    .title = "restrictedly random dislocations",
    .source = "Wilkens (1970) Phys. Status Solidi A 2, 359; Krivoglaz & Ryaboshapka (1963) Fiz. Met. Metalloved. 15, 18",
    .n = 2,
    .parameter = {"density_times_contrast", "log_cut_off_radius"},
    .unit = {"", ""},
    .least = {0, -0.7},
    .most = {INFINITY, 8},
    .displacement = dislocations,
    .kink = no_kink, /* L ln(L) goes to 0: these tails fall as 1/s^3 */
    .start = dislocations_start,
};

const lw_strain_form *const lw_strain_form_list[] = {
    &lw_strain_constant, &lw_strain_correlated,   &lw_strain_gaussian_correlated,
    &lw_strain_voigt,    &lw_strain_dislocations, NULL};

const lw_strain_form *lw_strain_form_named(const char *name)
{
    for (int i = 0; lw_strain_form_list[i] != NULL; i++)
        if (strcmp(lw_strain_form_list[i]->name, name) == 0)
            return lw_strain_form_list[i];
    return NULL;
}
