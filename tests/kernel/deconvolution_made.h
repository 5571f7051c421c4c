/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Makes scans of one powder by Fourier synthesis, apart from the engine's line profiles: the coefficients of
 * the sample times those of a Voigt instrument, summed over lengths at every point. */
#ifndef LW_TESTS_DECONVOLUTION_MADE_H
#define LW_TESTS_DECONVOLUTION_MADE_H

#include "check.h"
#include "numeric/random.h"
#include "profile/profiles.h"

#include <stdlib.h>

#define MADE_WAVELENGTH 0.15405929 /* nm */
static const double made_degree = 3.14159265358979323846 / 180;

typedef double made_coefficient(double length_nm, double s, const void *user);

typedef struct made {
    lw_engine engine;
    lw_material material;
    lw_radiation radiation;
    lw_width_function instrument;
    lw_calibration calibration;
    size_t n;
    double *two_theta, *clean, *noisy, *sigma;
    lw_arena arena;
    lw_reflection *reflection;
    size_t n_reflections;
} made;

/* Face-centred cubic powder of edge a (nm), instrument with constant Gaussian and Lorentzian FWHM (deg). */
static inline void made_begin(made *m, double a, double gauss_deg, double lorentz_deg)
{
    lw_error err = LW_ERROR_NONE;
    *m = (made){.material = {.name = "made", .space_group = 225, .cell = {a, a, a, 90, 90, 90, 0, 0, 0}}};
    lw_engine_begin(&m->engine);
    lw_arena_begin(&m->arena, &m->engine);
    CHECK(lw_material_settle(&m->material, &err) == LW_OK);
    CHECK(lw_radiation_plain(MADE_WAVELENGTH, &m->radiation, &err) == LW_OK);
    m->instrument = (lw_width_function){.low_deg = 5, .high_deg = 175};
    m->instrument.value[LW_W] = gauss_deg * gauss_deg;
    m->instrument.value[LW_Z] = lorentz_deg;
}

/* Noise-free scan from low to high (deg); `height` counts on the strongest line over `background`; u: the
 * standard uncertainty of every point relative to `height` (0: counts). */
static inline void made_scan(made *m, double low, double high, double step, double height, double background,
                             double u, made_coefficient *coefficient, const void *user)
{
    lw_error err = LW_ERROR_NONE;
    m->n = (size_t)((high - low) / step + 1.5);
    double **column[] = {&m->two_theta, &m->clean, &m->noisy, &m->sigma};
    for (int i = 0; i < 4; i++)
        *column[i] = lw_arena_take(&m->arena, m->n, sizeof(double), &err);
    CHECK(lw_reflections(&m->material, MADE_WAVELENGTH, low, high, &m->arena, &m->reflection,
                         &m->n_reflections, &err) == LW_OK);
    const double delta = 0.02; /* nm: the synthesis repeats every 50 nm^-1 */
    double top = 0;
    for (size_t k = 0; k < m->n_reflections; k++) {
        double s0 = 1 / m->reflection[k].d_nm, theta0 = asin(0.5 * MADE_WAVELENGTH * s0);
        double d = made_degree * cos(theta0) / MADE_WAVELENGTH, pi = M_PI;
        size_t terms = 0;
        double *a = malloc(200000 * sizeof *a);
        for (; terms < 200000; terms++) {
            double length = delta * (double)terms;
            a[terms] = coefficient(length, s0, user) *
                       exp(-pi * m->instrument.value[LW_Z] * d * length -
                           pi * pi / (4 * M_LN2) * m->instrument.value[LW_W] * d * d * length * length);
            if (a[terms] < 1e-15)
                break;
        }
        for (size_t i = 0; i < m->n; i++) {
            m->two_theta[i] = low + step * (double)i;
            double s = 2 * sin(m->two_theta[i] * made_degree / 2) / MADE_WAVELENGTH - s0;
            double c = 2 * cos(2 * pi * delta * s), before = 0.5 * c, now = 1, sum = 0;
            for (size_t j = 0; j < terms; j++) {
                sum += (j == 0 ? 1 : 2) * delta * a[j] * now;
                double next = c * now - before;
                before = now;
                now = next;
            }
            m->clean[i] += sum * d;
        }
        free(a);
    }
    for (size_t i = 0; i < m->n; i++)
        top = fmax(top, m->clean[i]);
    for (size_t i = 0; i < m->n; i++) {
        m->clean[i] = background + height * m->clean[i] / top;
        m->sigma[i] = u * height;
    }
}

/* Fits the made scan (or noisy counts of it) and deconvolves. random NULL: noise-free. Returns the status of
 * lw_deconvolve; *lines and *profiles are the caller's, as is *scan. */
static inline lw_status made_deconvolve(made *m, lw_random *random, const lw_width_function *instrument,
                                        const lw_deconvolve_options *options, lw_scan **scan,
                                        lw_lines **lines, lw_profiles **profiles, lw_error *err)
{
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &m->radiation;
    *lines = NULL;
    *profiles = NULL;
    for (size_t i = 0; i < m->n; i++)
        m->noisy[i] = random != NULL ? lw_random_poisson(random, m->clean[i]) : m->clean[i];
    lw_status status =
        lw_scan_make(&m->engine, "made", m->n, m->two_theta, m->noisy,
                     random != NULL || m->sigma[0] == 0 ? NULL : m->sigma, &reading, scan, err);
    lw_fit_options fit = lw_fit_defaults();
    fit.instrument = instrument;
    fit.intensity_factor = 1; /* none */
    fit.widths = 1;           /* free */
    fit.background_terms = 2;
    if (status == LW_OK)
        status =
            lw_fit_lines(&m->engine, *scan, m->reflection, m->n_reflections, &m->material, &fit, lines, err);
    if (status == LW_OK)
        status = lw_deconvolve(&m->engine, *lines, NULL, options, profiles, err);
    return status;
}

static inline void made_free(lw_scan *scan, lw_lines *lines, lw_profiles *profiles)
{
    lw_profiles_free(profiles);
    if (lines != NULL)
        lw_lines_free(lines);
    lw_scan_free(scan);
}

static inline void made_end(made *m)
{
    lw_arena_end(&m->arena);
    lw_engine_end(&m->engine);
}

/* The method of a name, as an index of the option. */
static inline int made_method(const char *name)
{
    for (const lw_option *option = lw_deconvolve_option_table; option->key != NULL; option++)
        for (int i = 0; strcmp(option->key, "method") == 0 && option->choices[i] != NULL; i++)
            if (strcmp(option->choices[i], name) == 0)
                return i;
    fprintf(stderr, "no method %s\n", name);
    exit(1);
}

#endif
