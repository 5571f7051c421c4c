/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lognormal spheres and forms of strain against closed forms evaluated with many digits (mpmath 1.2.1) and against
 * numerical slopes and integrals of themselves. */
#include "check.h"
#include "physics/size_distribution.h"
#include "physics/strain.h"

#define PI 3.14159265358979323846

/* mpmath: A(L) = [m3 - (3/2) L m2 + (1/2) L^3 m0]/M3, confirmed by quadrature over the diameters to 12 digits;
 * L_A = (2/3) D0 exp(5 sigma^2/2), L_V = (3/4) D0 exp(7 sigma^2/2). */
static void spheres(void)
{
    static const double L[6] = {1, 2, 5, 10, 15, 20};
    static const double A[6] = {0.8805560555915, 0.7631130416142, 0.4427821146360,
                                0.1134030930819, 0.01880039577693, 0.002608847837555};
    lw_spheres ten = {10, 0.3}, twenty = {20, 0.4};
    for (int i = 0; i < 6; i++)
        CHECK_NEAR(lw_spheres_coefficient(&ten, L[i], NULL), A[i], 1e-12);
    static const double L2[5] = {1, 5, 10, 20, 40};
    static const double A2[5] = {0.9497564185633, 0.7524326959527, 0.5275822606059, 0.2141547055118, 0.02516831264097};
    for (int i = 0; i < 5; i++)
        CHECK_NEAR(lw_spheres_coefficient(&twenty, L2[i], NULL), A2[i], 1e-12);
    CHECK_NEAR(lw_spheres_size_area(&ten, NULL), 8.348818107945762, 1e-12);
    CHECK_NEAR(lw_spheres_size_volume(&ten, NULL), 10.27694483217747, 1e-12);
    CHECK_NEAR(lw_spheres_diameter_mean(&ten, NULL), 10.46027859908717, 1e-12);
    CHECK_NEAR(lw_spheres_size_area(&twenty, NULL), 19.89099596855, 1e-10);
    CHECK_NEAR(lw_spheres_size_volume(&twenty, NULL), 26.26008750444, 1e-10);
    CHECK_NEAR(lw_spheres_coefficient(&ten, 0, NULL), 1, 0);
    /* Popa & Balzar (2002) J. Appl. Cryst. 35, 338: the same in mean radius and dispersion c */
    double R = lw_spheres_diameter_mean(&ten, NULL) / 2, c = lw_spheres_diameter_dispersion(&ten, NULL);
    CHECK_RELATIVE(1.5 * R * pow(1 + c, 3), lw_spheres_size_volume(&ten, NULL), 1e-12);
    CHECK_RELATIVE(4.0 / 3 * R * pow(1 + c, 2), lw_spheres_size_area(&ten, NULL), 1e-12);
    /* a narrow distribution is one sphere: A = 1 - 1.5 (L/D) + 0.5 (L/D)^3 */
    lw_spheres one = {10, 1e-4};
    CHECK_NEAR(lw_spheres_coefficient(&one, 4, NULL), 1 - 0.6 + 0.5 * 0.064, 1e-7);
    /* integrals: 2 int A = L_V, int p = 1, int L p = L_A; trapezoids of step 0.005 */
    double area = 0, count = 0, mean = 0, step = 0.005;
    for (int i = 0; i < 40000; i++) {
        double l = i * step, p = lw_spheres_columns(&ten, l);
        area += (i == 0 ? 1 : 2) * step * lw_spheres_coefficient(&ten, l, NULL);
        count += step * p;
        mean += step * l * p;
    }
    CHECK_RELATIVE(area, lw_spheres_size_volume(&ten, NULL), 1e-6);
    CHECK_RELATIVE(count, 1, 1e-6);
    CHECK_RELATIVE(mean, lw_spheres_size_area(&ten, NULL), 1e-6);
    /* slopes */
    for (int i = 0; i < 6; i++) {
        double slopes[2], h = 1e-5;
        lw_spheres_coefficient(&ten, L[i], slopes);
        lw_spheres a = {10 * exp(h), 0.3}, b = {10 * exp(-h), 0.3}, d = {10, 0.3 + h}, e = {10, 0.3 - h};
        CHECK_NEAR(slopes[0], (lw_spheres_coefficient(&a, L[i], NULL) - lw_spheres_coefficient(&b, L[i], NULL)) / (2 * h), 1e-8);
        CHECK_NEAR(slopes[1], (lw_spheres_coefficient(&d, L[i], NULL) - lw_spheres_coefficient(&e, L[i], NULL)) / (2 * h), 1e-8);
    }
}

/* mpmath quadrature of Wilkens' closed form; the two branches meet at 1 in value and slope. */
static void wilkens(void)
{
    static const double eta[12] = {0.001, 0.01, 0.1, 0.2, 0.5, 0.8, 1, 1.5, 2, 5, 10, 50};
    static const double f[12] = {7.964608265043588, 5.662039626824166,  3.361059317603537,  2.672595528684054,
                                 1.786036954139128, 1.363794461025694,  1.179209446261134,  0.8814479807116976,
                                 0.7041880564639003, 0.3208067306836169, 0.1690102934562270, 0.03557274114275693};
    for (int i = 0; i < 12; i++)
        CHECK_NEAR(lw_wilkens(eta[i], NULL), f[i], 1e-10);
    for (int i = 0; i < 12; i++) {
        double slope, h = 1e-5 * eta[i];
        lw_wilkens(eta[i], &slope);
        CHECK_NEAR(slope * eta[i], (lw_wilkens(eta[i] + h, NULL) - lw_wilkens(eta[i] - h, NULL)) / (2e-5), 1e-6);
    }
    double below, above;
    lw_wilkens(1 - 1e-9, &below);
    lw_wilkens(1, &above);
    CHECK_NEAR(below, above, 1e-6);
    CHECK_NEAR(lw_wilkens(0.00199999, NULL), lw_wilkens(0.00200001, NULL) + 1e-5, 1e-8);
    /* fcc, a = 0.3615 nm, rho = 5e15 m^-2, R = 10 nm, C = 0.30 (1 - 2 H): coefficients of the lines by mpmath */
    double b = 0.3615 / sqrt(2.0), rho = 5e-3, H311 = 19.0 / 121;
    struct { double C, N, A[5], rms[3]; } line[4] = {
        {0.1, 3, {0.996048174373, 0.987484666701, 0.948756470392, 0.870295612988, 0.717601553245},
         {0.0029560479, 0.0021548577, 0.0017509303}},
        {0.3, 4, {0.984286152430, 0.950870651460, 0.810249931477, 0.573676655108, 0.265175551202},
         {0.0051200251, 0.0037323230, 0.0030327002}},
        {0.3 * (1 - 2 * H311), 11, {0.970564522584, 0.909345843278, 0.672391492981, 0.350556915539, 0.0817663326864},
         {0.0042405135, 0.0030911892, 0.0025117467}},
        {0.3, 16, {0.938610700156, 0.817496256444, 0.430998751289, 0.108310038243, 0.00494463138411},
         {0.0051200251, 0.0037323230, 0.0030327002}}};
    static const double L[5] = {1, 2, 5, 10, 20}, L_rms[3] = {1, 5, 10};
    for (int i = 0; i < 4; i++) {
        double p[2] = {rho * line[i].C * b * b / (4 * PI), log(10)}, s2 = line[i].N / (0.3615 * 0.3615);
        for (int j = 0; j < 5; j++)
            CHECK_NEAR(exp(-2 * PI * PI * s2 * lw_strain_dislocations.displacement(p, L[j], NULL)), line[i].A[j], 1e-11);
        for (int j = 0; j < 3; j++)
            CHECK_RELATIVE(sqrt(lw_strain_dislocations.displacement(p, L_rms[j], NULL)) / L_rms[j], line[i].rms[j], 3e-8);
    }
}

/* Every form: slopes against differences; correlated forms against the integral that defines them; limits. */
static void forms(void)
{
    static const double L[7] = {0.01, 0.06, 0.3, 1, 4, 20, 100};
    for (int i = 0; lw_strain_form_list[i] != NULL; i++) {
        const lw_strain_form *form = lw_strain_form_list[i];
        CHECK(lw_strain_form_named(form->name) == form);
        double p[2] = {0};
        form->start(1.6e-5, 6, p);
        CHECK(p[0] > 0);
        CHECK_NEAR(form->displacement(p, 0, NULL), 0, 0);
        double square = form->displacement(p, 6, NULL) / 36; /* starts are of the right size */
        CHECK(square > 0.5e-5 && square < 3e-5);
        for (int j = 0; j < 7; j++) {
            double slopes[2] = {0, 0};
            form->displacement(p, L[j], slopes);
            for (int k = 0; k < form->n; k++) {
                double h = 1e-4 * fabs(p[k]), up[2] = {p[0], p[1]}, down[2] = {p[0], p[1]};
                up[k] += h;
                down[k] -= h;
                double by_difference = (form->displacement(up, L[j], NULL) - form->displacement(down, L[j], NULL)) / (2 * h);
                CHECK_NEAR(slopes[k] / by_difference, 1, 1e-6);
            }
        }
        double slopes[2];
        CHECK_NEAR(form->kink(p, slopes), form->displacement(p, 1e-9, NULL) / 1e-9, 1e-3 * p[0]);
    }
    CHECK(lw_strain_form_named("nothing") == NULL);
    /* 2 int_0^L (L - t) K(t) dt by Simpson's rule */
    for (int kind = 0; kind < 2; kind++)
        for (int j = 0; j < 7; j++) {
            double p[2] = {2e-5, log(5)}, sum = 0, h = L[j] / 2000;
            for (int i = 0; i <= 2000; i++) {
                double t = i * h, K = 2e-5 * (kind == 0 ? exp(-t / 5) : exp(-t * t / 50));
                sum += (i == 0 || i == 2000 ? 1 : i % 2 ? 4 : 2) * h / 3 * 2 * (L[j] - t) * K;
            }
            const lw_strain_form *form = kind == 0 ? &lw_strain_correlated : &lw_strain_gaussian_correlated;
            CHECK_RELATIVE(form->displacement(p, L[j], NULL), sum, 1e-9);
        }
}

int main(void)
{
    spheres();
    wilkens();
    forms();
    return lw_checks_end();
}
