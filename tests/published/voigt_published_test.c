/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Voigt densities, widths and breadths: 40-digit values (mpmath) of the published definitions, and the
 * published approximations within the errors that they are known to have. */
#include "check.h"
#include "numeric/voigt.h"

static const double PI = 3.14159265358979323846, LN2 = 0.69314718055994530942;

/* x, sigma of the Gauss, half width gamma of the Lorentz, density */
static const double density[][4] = {
    {0, 1, 1, 0.2087092805203676891488},      {1, 1, 1, 0.1657956626891664570736},
    {2, 1, 1, 0.09071519942627542976993},     {5, 1, 1, 0.01388492128857124759803},
    {10, 1, 1, 0.003248734859769095230958},   {0, 1, 0.1, 0.3690046824797880191698},
    {1, 1, 0.1, 0.2332320942779386594103},    {3, 1, 0.1, 0.009964702131201453226958},
    {0, 0.1, 1, 0.3152178127185752236889},    {1, 0.1, 1, 0.1599384936582573153345},
    {10, 0.1, 1, 0.003152507232867993113623}, {0.5, 0.25, 0.02, 0.2424851543531784530541}};

/* Lorentz FWHM r, Gauss FWHM 1 - r: FWHM, breadth, their ratio, beta_L/beta, beta_G/beta */
static const double widths[][6] = {
    {0.01, 0.9953369066175128, 1.063842670870762, 0.935605361461, 0.01476531, 0.99058101},
    {0.1, 0.9545070533544124, 1.060208939481831, 0.900300891465, 0.14815913, 0.90361464},
    {0.3, 0.8739831422550766, 1.068774567319007, 0.817743207015, 0.44091515, 0.69717875},
    {0.5, 0.8187976798137410, 1.113310668480467, 0.735461990076, 0.70546181, 0.47806378},
    {0.7, 0.8172322519827123, 1.220423085420311, 0.669630279651, 0.90096413, 0.26166344},
    {0.9, 0.9118419379422037, 1.426091721840544, 0.639399222348, 0.99132242, 0.07464226}};

static void test_density(void)
{
    for (size_t i = 0; i < sizeof density / sizeof *density; i++) {
        const double *t = density[i];
        double gauss = t[1] * sqrt(8 * LN2);
        CHECK_RELATIVE(lw_voigt(t[0], gauss, 2 * t[2]), t[3], 1e-14);
        for (int cpu = LW_CPU_PLAIN; cpu <= LW_CPU_AVX512; cpu++) {
            double value;
            lw_voigt_sums out = {.value = &value};
            lw_voigt_node node = {.weight = 1};
            lw_voigt_kernel_for((lw_cpu)cpu)->sum(1, &t[0], &node, 1, gauss * gauss, 2 * t[2], 1, &out);
            CHECK_RELATIVE(value, t[3], 2e-12);
        }
    }
}

static void test_widths(void)
{
    for (size_t i = 0; i < sizeof widths / sizeof *widths; i++) {
        double r = widths[i][0], fwhm = lw_voigt_fwhm(1 - r, r), breadth = lw_voigt_breadth(1 - r, r);
        CHECK_RELATIVE(fwhm, widths[i][1], 1e-12);
        CHECK_RELATIVE(breadth, widths[i][2], 2e-15);
        CHECK_NEAR(fwhm / breadth, widths[i][3], 1e-12);
        CHECK_NEAR(0.5 * PI * r / breadth, widths[i][4], 6e-9);
        CHECK_NEAR(0.5 * (1 - r) * sqrt(PI / LN2) / breadth, widths[i][5], 6e-9);
        /* scale */
        CHECK_RELATIVE(lw_voigt_fwhm(1e-7 * (1 - r), 1e-7 * r), 1e-7 * fwhm, 1e-13);
        /* Olivero & Longbothum (1977) JQSRT 17, 233: within 2.4e-4 */
        double olivero = 0.5346 * r + sqrt(0.2166 * r * r + (1 - r) * (1 - r));
        CHECK_RELATIVE(olivero, fwhm, 2.4e-4);
        /* Thompson, Cox & Hastings (1987) J. Appl. Cryst. 20, 79: within 0.43 % */
        double g = 1 - r, tch = pow(pow(g, 5) + 2.69269 * pow(g, 4) * r + 2.42843 * g * g * g * r * r +
                                        4.47163 * g * g * r * r * r + 0.07842 * g * pow(r, 4) + pow(r, 5),
                                    0.2);
        CHECK_RELATIVE(tch, fwhm, 4.4e-3);
    }
    /* the ends: FWHM/breadth = 2/pi (Lorentz) and 2 sqrt(ln 2/pi) (Gauss) */
    CHECK_RELATIVE(lw_voigt_fwhm(0, 0.3) / lw_voigt_breadth(0, 0.3), 0.6366197723675813430755, 1e-15);
    CHECK_RELATIVE(lw_voigt_fwhm(0.3, 0) / lw_voigt_breadth(0.3, 0), 0.9394372786996513337723, 1e-15);
    /* and smoothly towards them */
    CHECK_RELATIVE(lw_voigt_fwhm(1e-9, 0.3), 0.3, 1e-14);
    CHECK_RELATIVE(lw_voigt_breadth(1e-9, 0.3), 0.15 * PI, 1e-14);
    CHECK_RELATIVE(lw_voigt_fwhm(0.3, 1e-12), 0.3, 1e-11);
    CHECK_RELATIVE(lw_voigt_breadth(1e-40, 0.3), 0.15 * PI, 1e-15);
}

/* Slopes by central differences of sixth order; step 1e-2 of the width, truncation about 1e-12. */
static double slope_of(double (*f)(double, double), double g, double l, int of_lorentz)
{
    static const double weight[3] = {45.0 / 60, -9.0 / 60, 1.0 / 60};
    double sum = 0, h = 4e-3 * (of_lorentz ? l : g);
    for (int k = 1; k <= 3; k++)
        sum += weight[k - 1] *
               (of_lorentz ? f(g, l + k * h) - f(g, l - k * h) : f(g + k * h, l) - f(g - k * h, l)) / h;
    return sum;
}

static void test_slopes(void)
{
    for (size_t i = 0; i < sizeof widths / sizeof *widths; i++) {
        double r = widths[i][0], g = 0.2 * (1 - r), l = 0.2 * r, d[2];
        lw_voigt_fwhm_slopes(g, l, d);
        CHECK_NEAR(d[0], slope_of(lw_voigt_fwhm, g, l, 0), 1e-9);
        CHECK_NEAR(d[1], slope_of(lw_voigt_fwhm, g, l, 1), 1e-9);
        /* the width is homogeneous of degree 1 (Euler) */
        CHECK_RELATIVE(g * d[0] + l * d[1], lw_voigt_fwhm(g, l), 1e-12);
        lw_voigt_breadth_slopes(g, l, d);
        CHECK_NEAR(d[0], slope_of(lw_voigt_breadth, g, l, 0), 1e-9);
        CHECK_NEAR(d[1], slope_of(lw_voigt_breadth, g, l, 1), 1e-9);
        CHECK_RELATIVE(g * d[0] + l * d[1], lw_voigt_breadth(g, l), 1e-12);
    }
    double d[2];
    lw_voigt_breadth_slopes(0, 0.3, d); /* pure Lorentz: d beta/dl = pi/2, and no first-order effect of g */
    CHECK_NEAR(d[0], 0, 1e-14);
    CHECK_RELATIVE(d[1], 0.5 * PI, 1e-14);
    lw_voigt_fwhm_slopes(0, 0.3, d);
    CHECK_NEAR(d[0], 0, 1e-14);
    CHECK_RELATIVE(d[1], 1, 1e-13);
    /* pure Gauss, first order in l: 2/sqrt(pi) (2 D(t) - 1/(2 t)), t = sqrt(ln 2), D Dawson's integral (from
     * w(t) = exp(-t^2) + 2i D(t)/sqrt(pi)); 40-digit evaluation */
    lw_voigt_fwhm_slopes(0.3, 0, d);
    CHECK_RELATIVE(d[0], 1, 1e-13);
    CHECK_RELATIVE(d[1], 0.532547118429612103, 1e-13);
    lw_voigt_breadth_slopes(0.3, 0, d);
    CHECK_RELATIVE(d[0], 0.5 * sqrt(PI / LN2), 1e-14);
    /* beta_G/erfc(k) to first order in k = sqrt(ln 2) l/g: beta_G 2 k/sqrt(pi) = l exactly */
    CHECK_RELATIVE(d[1], 1, 1e-13);
}

int main(void)
{
    test_density();
    test_widths();
    test_slopes();
    return lw_checks_end();
}
