/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The repeated line fit against the whole one: on the same counts it stays where it is, and on other counts of the same
 * powder it ends where the fit from scratch does. */
#include "kernel/deconvolution_made.h"

static double voigt(double length, double s, const void *user)
{
    const double *beta = user;
    (void)s;
    return exp(-2 * beta[0] * length - M_PI * beta[1] * beta[1] * length * length);
}

/* A fit ends when chi-square falls by less than 1e-5 of itself, which leaves each parameter within the root of that
 * fall of its place, in u. */
static void compare(const lw_lines *a, const lw_lines *b)
{
    double most = sqrt(1e-5 * a->chi2);
    CHECK(a->n == b->n && a->n_parameters == b->n_parameters);
    for (size_t i = 0; i < a->n_parameters && i < b->n_parameters; i++) {
        double u = sqrt(a->covariance[i * (a->n_parameters + 1)]);
        CHECK(strcmp(a->parameter_name[i], b->parameter_name[i]) == 0);
        if (strstr(a->parameter_name[i], "beyond") != NULL)
            continue; /* held, or tied, to what the lines of the first fit show: it stands */
        CHECK_NEAR(b->parameter[i], a->parameter[i], most * u);
        if (u > 0)
            CHECK_RELATIVE(sqrt(b->covariance[i * (a->n_parameters + 1)]), u, 1e-2);
    }
    CHECK_RELATIVE(b->chi2, a->chi2, 1e-5);
}

/* widths: 0 auto, 1 free, 2 smooth */
static lw_lines *fit(made *m, lw_scan *scan, const lw_width_function *instrument, int widths)
{
    lw_error err = LW_ERROR_NONE;
    lw_lines *lines = NULL;
    lw_fit_options options = lw_fit_defaults();
    options.instrument = instrument;
    options.intensity_factor = 1;
    options.widths = widths;
    options.background_terms = 3;
    CHECK(lw_fit_lines(&m->engine, scan, m->reflection, m->n_reflections, &m->material, &options, &lines, &err) == LW_OK);
    return lines;
}

static lw_scan *counts(made *m, uint64_t stream)
{
    lw_error err = LW_ERROR_NONE;
    lw_scan *scan = NULL;
    lw_random random;
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &m->radiation;
    lw_random_begin(&random, 77, stream);
    for (size_t i = 0; i < m->n; i++)
        m->noisy[i] = lw_random_poisson(&random, m->clean[i]);
    CHECK(lw_scan_make(&m->engine, "made", m->n, m->two_theta, m->noisy, NULL, &reading, &scan, &err) == LW_OK);
    return scan;
}

static void repeated(int widths, double height)
{
    static const double beta[2] = {0.04, 0.03};
    lw_error err = LW_ERROR_NONE;
    made m;
    made_begin(&m, 0.3615, 0.06, 0.03);
    made_scan(&m, 36, 100, 0.03, height, 100, 0, voigt, beta);
    lw_width_function wider = m.instrument;
    wider.value[LW_W] *= 1.1;
    wider.covariance[LW_W][LW_W] = m.instrument.covariance[LW_W][LW_W] = 1e-8;
    lw_scan *first = counts(&m, 1), *second = counts(&m, 2);
    lw_lines *a = fit(&m, first, &m.instrument, widths), *b = fit(&m, second, &wider, widths), *again = NULL;
    CHECK(lw_refit_lines(&m.engine, a, first, NULL, NULL, &again, &err) == LW_OK);
    if (again != NULL)
        compare(a, again);
    lw_lines_free(again);
    CHECK(lw_refit_lines(&m.engine, a, second, &wider, NULL, &again, &err) == LW_OK);
    if (again != NULL)
        compare(b, again);
    if (again != NULL) /* what was made so can be made again */
        CHECK(again->options != NULL && again->options->instrument == &again->instrument);
    lw_lines_free(again);
    again = NULL;

    lw_scan *part = NULL;
    CHECK(lw_scan_crop(second, 40, 90, &part, &err) == LW_OK);
    CHECK(lw_refit_lines(&m.engine, a, part, NULL, NULL, &again, &err) == LW_BAD_ARGUMENT && again == NULL);
    lw_scan_free(part);
    lw_lines_free(a);
    lw_lines_free(b);
    lw_scan_free(first);
    lw_scan_free(second);
    made_end(&m);
}

int main(void)
{
    repeated(1, 20000);
    repeated(2, 20000);
    repeated(0, 300); /* weak lines share their widths */
    return lw_checks_end();
}
