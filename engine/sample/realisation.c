/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/realisation.h"

#include <math.h>
#include <string.h>

#define PHYSICAL_MOST 30 /* lines: as where a deconvolution completes lines by these shapes of its own accord */
#define REACH_FWHM 3.0 /* residuals this near to a line are the line's */

void lw__square_root(const double *covariance, size_t n, double *factor)
{
    memset(factor, 0, n * n * sizeof *factor);
    for (size_t j = 0; j < n; j++) {
        double pivot = covariance[j * n + j];
        for (size_t k = 0; k < j; k++)
            pivot -= factor[j * n + k] * factor[j * n + k];
        if (!(pivot > 1e-12 * covariance[j * n + j]))
            continue;
        factor[j * n + j] = sqrt(pivot);
        for (size_t i = j + 1; i < n; i++) {
            double sum = covariance[i * n + j];
            for (size_t k = 0; k < j; k++)
                sum -= factor[i * n + k] * factor[j * n + k];
            factor[i * n + j] = sum / factor[j * n + j];
        }
    }
}

static void take_calibration(lw__draws *draws)
{
    const lw_width_function *profile = &draws->profiles->lines->instrument;
    const lw_calibration *calibration = draws->profiles->calibration;
    double c[sizeof draws->factor / sizeof *draws->factor] = {0};
    for (size_t i = 0; i < LW_WIDTH_PARAMETERS; i++)
        if (profile->covariance[i][i] > 0)
            draws->width[draws->n_widths++] = i;
    size_t widths = draws->n_widths, n = widths + (calibration != NULL ? calibration->aberrations.n : 0);
    draws->n_parameters = n;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            if (i < widths && j < widths)
                c[i * n + j] = profile->covariance[draws->width[i]][draws->width[j]];
            else if (i >= widths && j >= widths)
                c[i * n + j] = calibration->aberrations.covariance[i - widths][j - widths];
    lw__square_root(c, n, draws->factor);
}

/* Length of a block of residuals with correlation rho of next neighbours, n of them: that which makes the variance of
 * a mean come out best for a process of first order, (6 rho^2/(1 - rho^2)^2)^(1/3) n^(1/3). Carlstein (1986) Ann. Stat.
 * 14, 1171, with the factor 3/2 of overlapping blocks (Hall, Horowitz & Jing 1995 Biometrika 82, 561). */
static size_t block_length(double rho, size_t n)
{
    if (!(rho > 0))
        return 1;
    double r = fmin(rho, 0.95), length = cbrt(6 * r * r / ((1 - r * r) * (1 - r * r)) * (double)n);
    return (size_t)fmin(fmax(ceil(length), 1), fmax((double)n / 4, 1));
}

static void mark_places(lw__draws *draws)
{
    const lw_lines *lines = draws->profiles->lines;
    for (size_t i = 0; i < lines->scan->n; i++) {
        draws->place[i] = LW__BETWEEN_LINES;
        for (size_t k = 0; k < lines->n && draws->place[i] != LW__UNDER_LINES; k++)
            if (fabs(lines->scan->two_theta_deg[i] - lines->line[k].two_theta.value) <
                REACH_FWHM * lines->line[k].fwhm.value)
                draws->place[i] = LW__UNDER_LINES;
    }
}

/* Where blocks of one place may begin, and how long they are. */
static lw_status take_blocks(lw__draws *draws, unsigned char place, lw_arena *arena, lw_error *err)
{
    size_t n = draws->profiles->lines->scan->n, count = 0, run = 0, longest = 0;
    double sum = 0, square = 0, cross = 0;
    for (size_t i = 0; i < n; i++) {
        bool here = draws->place[i] == place;
        run = here ? run + 1 : 0;
        longest = run > longest ? run : longest;
        sum += here ? draws->residual[i] : 0;
        count += here;
    }
    if (count == 0)
        return LW_OK;
    double mean = sum / (double)count, before = 0;
    for (size_t i = 0; i < n; i++) {
        if (draws->place[i] != place)
            continue;
        draws->residual[i] -= mean;
        square += draws->residual[i] * draws->residual[i];
        if (i > 0 && draws->place[i - 1] == place)
            cross += draws->residual[i] * before;
        before = draws->residual[i];
    }
    draws->correlation[place] = square > 0 ? cross / square : 0;
    size_t block = block_length(draws->correlation[place], count);
    draws->block[place] = block < longest ? block : longest;
    draws->start[place] = lw_arena_take(arena, count, sizeof(size_t), err);
    if (draws->start[place] == NULL)
        return LW_OUT_OF_MEMORY;
    run = 0;
    for (size_t i = 0; i < n; i++) {
        run = draws->place[i] == place ? run + 1 : 0;
        if (run >= draws->block[place])
            draws->start[place][draws->n_starts[place]++] = i + 1 - draws->block[place];
    }
    return LW_OK;
}

static lw_status take_residuals(lw__draws *draws, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = draws->profiles->lines;
    size_t n = lines->scan->n, spent = 0;
    draws->residual = lw_arena_take(arena, n, sizeof(double), err);
    draws->place = lw_arena_take(arena, n, sizeof *draws->place, err);
    if (draws->residual == NULL || draws->place == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < lines->n_parameters; i++)
        spent += lines->covariance[i * (lines->n_parameters + 1)] > 0;
    double scale = spent < n ? sqrt((double)n / (double)(n - spent)) : 1;
    for (size_t i = 0; i < n; i++)
        draws->residual[i] = scale * (lines->scan->intensity[i] - draws->model[i]) / sqrt(lines->variance[i]);
    mark_places(draws);
    lw_status status = LW_OK;
    for (unsigned char place = 0; place < LW__PLACES && status == LW_OK; place++)
        status = take_blocks(draws, place, arena, err);
    return status;
}

lw_status lw__draws_begin(const lw_profiles *profiles, bool bootstrap, lw_arena *arena, lw__draws *draws,
                          lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    *draws = (lw__draws){.profiles = profiles, .bootstrap = bootstrap, .counting = true, .calibration = true,
                         .wavelength = true};
    if (lines->scan == NULL || lines->options == NULL || lines->fitted == NULL || profiles->options == NULL)
        return lw_fail(err, LW_NOT_SUPPORTED, "fit the lines of a scan with fit_lines, and deconvolve them",
                       "there are no counts to draw from: these profiles don't come from the fit of a scan");
    double most = 0;
    for (size_t i = 0; i < lines->scan->n; i++)
        most = fmax(most, lines->scan->intensity[i]);
    if (lines->scan->noise == LW_NOISE_COUNTS && most < 2)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0,
                          "read it with noise = \"scaled\", or give its sigma",
                          "intensities that never reach 2 are no counts: nothing can be drawn from them");
    draws->by_physics = profiles->model != NULL;
    draws->model = profiles->model != NULL ? profiles->model : lines->fitted;
    take_calibration(draws);
    return bootstrap ? take_residuals(draws, arena, err) : LW_OK;
}

static double chi2_of(const lw_lines *lines, const double *model)
{
    double sum = 0;
    for (size_t i = 0; i < lines->scan->n; i++) {
        double r = lines->scan->intensity[i] - model[i];
        sum += r * r / lines->variance[i];
    }
    return sum;
}

lw_status lw__draws_choose_model(lw_engine *engine, lw__draws *draws, lw_arena *arena, lw_error *err)
{
    const lw_profiles *profiles = draws->profiles;
    if (draws->by_physics || profiles->n > PHYSICAL_MOST)
        return LW_OK;
    lw_deconvolve_options options = lw_deconvolve_defaults();
    for (const lw_option *o = lw_deconvolve_option_table; o->key != NULL; o++)
        for (int i = 0; strcmp(o->key, "method") == 0 && o->choices[i] != NULL; i++)
            if (strcmp(o->choices[i], "physical") == 0)
                options.method = i;
    options.accept_refold = true;
    lw_profiles *physical = NULL;
    lw_error each = LW_ERROR_NONE;
    lw_status status = lw_deconvolve(engine, profiles->lines, profiles->calibration, &options, &physical, &each);
    if (status == LW_OUT_OF_MEMORY || status == LW_CANCELLED) {
        *err = each;
        return status;
    }
    if (status == LW_OK && physical->model != NULL &&
        chi2_of(profiles->lines, physical->model) < chi2_of(profiles->lines, draws->model)) {
        const double *kept =
            lw_arena_copy(arena, physical->model, profiles->lines->scan->n, sizeof *physical->model, err);
        draws->by_physics = kept != NULL;
        draws->model = kept != NULL ? kept : draws->model;
    }
    lw_profiles_free(physical);
    return err->status;
}

lw_status lw__realisation_begin(const lw__draws *draws, lw_arena *arena, lw__realisation *one, lw_error *err)
{
    const lw_lines *lines = draws->profiles->lines;
    const lw_scan *empty = lines->options->background_scan;
    *one = (lw__realisation){.scan = *lines->scan, .instrument = lines->instrument};
    one->intensity = lw_arena_take(arena, lines->scan->n, sizeof(double), err);
    one->scan.intensity = one->intensity;
    if (one->intensity == NULL)
        return LW_OUT_OF_MEMORY;
    if (empty != NULL) {
        one->has_background = true;
        one->background = *empty;
        one->background_intensity = lw_arena_take(arena, empty->n, sizeof(double), err);
        one->background.intensity = one->background_intensity;
        if (one->background_intensity == NULL)
            return LW_OUT_OF_MEMORY;
    }
    if (draws->profiles->calibration != NULL) {
        one->has_calibration = true;
        one->calibration = *draws->profiles->calibration;
    }
    return LW_OK;
}

/* Noise of a scan about what is expected: Poisson for counts; normal with sigma; or normal in proportion to the root of
 * the intensity, next neighbours correlated (a moving average of two has that correlation and no other). */
static void add_noise(lw_random *random, const lw_scan *scan, const double *expected, const double *variance,
                      double *out)
{
    double phase = 0.5 * asin(fmin(2 * scan->correlation, 1)), before = lw_random_normal(random);
    for (size_t i = 0; i < scan->n; i++) {
        if (scan->noise == LW_NOISE_COUNTS) {
            out[i] = lw_random_poisson(random, fmax(expected[i], 0));
            continue;
        }
        double u = scan->noise == LW_NOISE_SIGMA ? scan->sigma[i]
                   : variance != NULL            ? sqrt(variance[i])
                                                 : sqrt(scan->variance_factor * fmax(expected[i], 0));
        double now = lw_random_normal(random);
        out[i] = expected[i] + u * (cos(phase) * now + sin(phase) * before);
        before = now;
    }
}

static void add_blocks(lw_random *random, const lw__draws *draws, double *out)
{
    const lw_lines *lines = draws->profiles->lines;
    size_t n = lines->scan->n;
    for (size_t i = 0; i < n;) {
        unsigned char place = draws->place[i];
        size_t from = draws->start[place][lw_random_below(random, draws->n_starts[place])];
        for (size_t k = 0; k < draws->block[place] && i < n && draws->place[i] == place; k++, i++)
            out[i] = draws->model[i] + sqrt(lines->variance[i]) * draws->residual[from + k];
    }
}

static void draw_calibration(lw_random *random, const lw__draws *draws, lw__realisation *one)
{
    double deviate[LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST];
    size_t n = draws->n_parameters, widths = draws->n_widths;
    for (size_t i = 0; i < n; i++)
        deviate[i] = lw_random_normal(random);
    for (size_t i = 0; i < n; i++) {
        double moved = 0;
        for (size_t k = 0; k <= i; k++)
            moved += draws->factor[i * n + k] * deviate[k];
        if (i < widths && draws->calibration) {
            size_t at = draws->width[i];
            one->instrument.value[at] += moved;
            if (at >= LW_AXIAL_1) /* a length, or an angle */
                one->instrument.value[at] = fabs(one->instrument.value[at]);
        }
        if (i >= widths) {
            lw_aberrations *set = &one->calibration.aberrations;
            bool is_wavelength = strcmp(set->kind[i - widths]->name, "wavelength") == 0;
            if (is_wavelength ? draws->wavelength : draws->calibration)
                set->value[i - widths] += moved;
        }
    }
    one->calibration.profile = one->instrument;
}

void lw__realisation_draw(const lw__draws *draws, uint64_t number, lw__realisation *one)
{
    const lw_lines *lines = draws->profiles->lines;
    lw_random random;
    lw_random_begin(&random, draws->seed, 2 * number);
    if (!draws->counting) /* what is not drawn stays as it was measured */
        memcpy(one->intensity, lines->scan->intensity, lines->scan->n * sizeof(double));
    else if (draws->bootstrap)
        add_blocks(&random, draws, one->intensity);
    else
        add_noise(&random, lines->scan, draws->model, lines->variance, one->intensity);
    if (one->has_background) {
        const lw_scan *empty = lines->options->background_scan;
        if (draws->counting && !draws->bootstrap) /* the residuals hold its noise already */
            add_noise(&random, empty, empty->intensity, NULL, one->background_intensity);
        else
            memcpy(one->background_intensity, empty->intensity, empty->n * sizeof(double));
    }
    one->instrument = lines->instrument;
    if (one->has_calibration)
        one->calibration.aberrations = draws->profiles->calibration->aberrations;
    lw_random_begin(&random, draws->seed, 2 * number + 1);
    draw_calibration(&random, draws, one);
}
