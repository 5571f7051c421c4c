/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/effects.h"

#include "line/nodes.h"
#include "numeric/random.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;
#define LARGEST_NM 1e4 /* a size beyond it can't be told from none */

/* A sample's own widths at an angle, degrees 2theta: size gives the Lorentzian an integral breadth of
 * lambda/(D cos theta), normally distributed strain the Gaussian a standard deviation of 2 e tan theta. */
static void own_widths(double wavelength_nm, double size_nm, double strain, double two_theta_deg,
                       double *gauss_variance, double *lorentz)
{
    double theta = two_theta_deg * degree / 2;
    *lorentz = size_nm > 0 ? 2 / M_PI * wavelength_nm / (size_nm * cos(theta)) / degree : 0;
    double deviation = 2 * strain * tan(theta) / degree;
    *gauss_variance = 8 * M_LN2 * deviation * deviation;
}

static double factor_at(double polarised, double two_theta_deg)
{
    double c = cos(two_theta_deg * degree), s = sin(two_theta_deg * degree / 2);
    return (1 - polarised + polarised * c * c) / (s * s);
}

/* Adds one line to the counts, on the axis of sin(theta) on which a line is symmetric. */
static void add_line(const lw_calibration *instrument, const lw_voigt_kernel *kernel, const lw_effect_scan *how,
                     double place, double height, size_t n, const double *angle, double *x, double *line,
                     lw_voigt_node *node, double *counts)
{
    const lw_width_function *profile = &instrument->profile;
    double gauss_variance, lorentz, theta = place * degree / 2;
    own_widths(lw_radiation_wavelength(&instrument->radiation), how->size_nm, how->strain, place, &gauss_variance,
               &lorentz);
    gauss_variance += lw_width_gauss_variance(profile->value, place, NULL);
    lorentz += lw_width_lorentz(profile->value, place, NULL);
    lw_node_recipe recipe = {.radiation = &instrument->radiation,
                             .on_s_axis = true,
                             .spectral_widths = true,
                             .axial = profile->axial,
                             .table = profile->table,
                             .table_deg = place,
                             .parameter = {profile->value[LW_AXIAL_1], profile->value[LW_AXIAL_2]}};
    recipe.copies = lw_recipe_copies(&recipe, place, lw_voigt_fwhm(sqrt(fmax(gauss_variance, 1e-12)), lorentz));
    size_t n_nodes = lw_line_nodes(&recipe, place, node);
    for (size_t i = 0; i < n; i++)
        x[i] = 2 * (sin(angle[i] * degree / 2) / cos(theta) - tan(theta)) / degree;
    lw_voigt_sums sums = {.value = line};
    kernel->sum(n, x, node, n_nodes, gauss_variance, lorentz, 1, &sums);
    double top = 0, factor = factor_at(how->polarised, place);
    for (size_t i = 0; i < n; i++) {
        line[i] *= factor_at(how->polarised, angle[i]) / factor;
        top = fmax(top, line[i]);
    }
    for (size_t i = 0; i < n; i++)
        counts[i] += how->counts * height * line[i] / top;
}

lw_status lw_effect_simulate(lw_engine *engine, const lw_calibration *instrument, const lw_effect_lines *lines,
                             const lw_effect_scan *how, lw_scan **scan, lw_error *err)
{
    *scan = NULL;
    if (!(how->step_deg > 0 && how->high_deg > how->low_deg && how->low_deg > 0 && how->high_deg < 180))
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "a scan from %g to %g deg in steps of %g deg can't be made",
                       how->low_deg, how->high_deg, how->step_deg);
    size_t n = (size_t)floor((how->high_deg - how->low_deg) / how->step_deg + 1.5);
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    double *angle = lw_arena_take(&scratch, n, sizeof *angle, err);
    double *counts = lw_arena_take(&scratch, n, sizeof *counts, err);
    double *x = lw_arena_take(&scratch, n, sizeof *x, err);
    double *line = lw_arena_take(&scratch, n, sizeof *line, err);
    lw_voigt_node *node = lw_arena_take(&scratch, LW_NODES_MOST, sizeof *node, err);
    lw_status status = angle && counts && x && line && node ? LW_OK : LW_OUT_OF_MEMORY;
    if (status == LW_OK) {
        for (size_t i = 0; i < n; i++) {
            angle[i] = how->low_deg + how->step_deg * (double)i;
            counts[i] = how->background;
        }
        for (size_t k = 0; k < lines->n; k++)
            add_line(instrument, lw_voigt_kernel_for(engine->cpu), how, lines->reflection[k].two_theta_deg,
                     lines->height ? lines->height[k] : 1, n, angle, x, line, node, counts);
        /* whole counts, as a detector gives: their rounding is far below counting noise, and tells the fit how
         * sharp its end need be */
        lw_random random;
        lw_random_begin(&random, how->seed, 0);
        for (size_t i = 0; i < n; i++)
            counts[i] = how->seed > 0 ? lw_random_poisson(&random, counts[i]) : round(counts[i]);
        lw_scan_options options = lw_scan_defaults();
        options.radiation = &instrument->radiation;
        status = lw_scan_make(engine, "computed scan of a sample", n, angle, counts, NULL, &options, scan, err);
    }
    lw_arena_end(&scratch);
    return status;
}

static lw_status fit(lw_engine *engine, const lw_scan *scan, const lw_calibration *with, const lw_effect_lines *lines,
                     double polarised, int widths, lw_lines **out, lw_error *err)
{
    lw_fit_options options = lw_fit_defaults();
    options.instrument = &with->profile;
    options.widths = widths;
    options.polarised = polarised;
    options.background_terms = 2;
    options.misfit = false; /* without noise a misfit is the answer, not a doubt */
    return lw_fit_lines(engine, scan, lines->reflection, lines->n, NULL, &options, out, err);
}

/* What breadths line by line give: mean of lambda/(beta cos theta), and the straight line beta* = 1/D + 2 e s of
 * Williamson & Hall (1953) Acta Metall. 1, 22, all lines alike. */
static lw_effect_breadths by_breadths(const lw_lines *lines)
{
    double wavelength = lw_radiation_wavelength(&lines->radiation), n = (double)lines->n;
    double size = 0, sx = 0, sy = 0, sxx = 0, sxy = 0;
    bool broad = true;
    for (size_t k = 0; k < lines->n; k++) {
        const lw_line *line = &lines->line[k];
        double theta = line->nominal_deg * degree / 2;
        double breadth = lw_voigt_breadth(sqrt(fmax(line->own_variance_deg2, 0)), line->own_lorentz_deg);
        double x = 2 * sin(theta) / wavelength, y = breadth * degree * cos(theta) / wavelength;
        broad = broad && y > 0;
        size += y > 0 ? 1 / y : 0;
        sx += x;
        sy += y;
        sxx += x * x;
        sxy += x * y;
    }
    double slope = (n * sxy - sx * sy) / (n * sxx - sx * sx), intercept = (sy - slope * sx) / n;
    return (lw_effect_breadths){.scherrer_nm = broad ? size / n : 0,
                                .williamson_hall_nm = intercept > 1 / LARGEST_NM ? 1 / intercept : 0,
                                .williamson_hall_strain = fmax(slope, 0) / 2 * sqrt(2 / M_PI)};
}

enum { WIDTHS_FREE = 1, WIDTHS_SMOOTH = 2 };

/* Breadths of lines with widths of their own. Where that fit finds no end the figures stay 0. */
static lw_status line_by_line(lw_engine *engine, const lw_scan *scan, const lw_calibration *with,
                              const lw_effect_lines *lines, double polarised, lw_effect_breadths *breadths, lw_error *err)
{
    lw_lines *fitted = NULL;
    lw_error why = LW_ERROR_NONE;
    *breadths = (lw_effect_breadths){0};
    lw_status status = fit(engine, scan, with, lines, polarised, WIDTHS_FREE, &fitted, &why);
    if (status == LW_OK)
        *breadths = by_breadths(fitted);
    else if (status != LW_NO_CONVERGENCE)
        return lw_fail(err, status, why.remedy, "%s", why.message);
    lw_lines_free(fitted);
    return LW_OK;
}

/* With counting noise of a seed, or (0) without noise. */
static lw_status find(lw_engine *engine, const lw_calibration *old, const lw_calibration *now,
                      const lw_effect_lines *lines, uint64_t seed, lw_effect *effect, lw_error *err)
{
    double first = lines->reflection[0].two_theta_deg, last = lines->reflection[lines->n - 1].two_theta_deg;
    double variance, lorentz, wavelength = lw_radiation_wavelength(&now->radiation);
    own_widths(wavelength, effect->size_nm, effect->strain, first, &variance, &lorentz);
    lw_width_figure figure;
    lw_width_figure_at(&now->profile, first, variance, lorentz, &figure);
    double narrow = figure.fwhm_deg;
    own_widths(wavelength, effect->size_nm, effect->strain, last, &variance, &lorentz);
    lw_width_figure_at(&now->profile, last, variance, lorentz, &figure);
    narrow = fmin(narrow, figure.fwhm_deg);
    lw_effect_scan how = {.size_nm = effect->size_nm,
                          .strain = effect->strain,
                          .polarised = strcmp(now->geometry, "capillary") == 0 ? 0.05 : 0.5,
                          .step_deg = fmin(fmax(narrow / 8, 0.002), 0.05),
                          .seed = seed,
                          .counts = seed > 0 ? 1e6 : 1e4,
                          .background = seed > 0 ? 1e4 : 1e2};
    how.low_deg = fmax(first - 6, 0.5 * first);
    how.high_deg = fmin(last + fmax(6, 4 * figure.fwhm_deg), 0.5 * (last + 178));
    lw_scan *scan = NULL;
    lw_lines *fitted = NULL;
    lw_status status = lw_effect_simulate(engine, now, lines, &how, &scan, err);
    if (status == LW_OK)
        status = fit(engine, scan, old, lines, how.polarised, WIDTHS_SMOOTH, &fitted, err);
    if (status == LW_OK) {
        const double *p = fitted->smooth.value;
        double size = lw_voigt_breadth(sqrt(fmax(p[LW_P], 0)), p[LW_Y]) * degree;
        double strain = lw_voigt_breadth(sqrt(fmax(p[LW_U], 0)), p[LW_X]) * degree;
        effect->reported_size_nm = size > wavelength / LARGEST_NM ? wavelength / size : 0;
        effect->reported_strain = strain / 4 * sqrt(2 / M_PI);
        double square = 0, most = 0;
        for (size_t i = 0; i < fitted->scan->n; i++) {
            double residual = fitted->scan->intensity[i] - fitted->fitted[i];
            square += residual * residual;
            most = fmax(most, fitted->scan->intensity[i]);
        }
        effect->misfit = sqrt(square / (double)fitted->scan->n) / most;
    }
    lw_lines_free(fitted);
    if (status == LW_OK)
        status = line_by_line(engine, scan, old, lines, how.polarised, &effect->by_old, err);
    if (status == LW_OK)
        status = line_by_line(engine, scan, now, lines, how.polarised, &effect->by_new, err);
    lw_scan_free(scan);
    return status;
}

lw_status lw_effect_find(lw_engine *engine, const lw_calibration *old, const lw_calibration *now,
                         const lw_effect_lines *lines, lw_effect *effect, lw_error *err)
{
    /* data without noise can hold a fit at the last rounding of chi-square; noise of 1e6 counts frees it, and moves
     * the figures by a thousandth */
    for (uint64_t seed = 0;; seed++) {
        lw_error why = LW_ERROR_NONE;
        lw_status status = find(engine, old, now, lines, seed, effect, &why);
        if (status == LW_OK)
            return LW_OK;
        if (status != LW_NO_CONVERGENCE || seed == 3)
            return lw_fail(err, status, why.remedy, "%s", why.message);
    }
}
