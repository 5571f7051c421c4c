/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The fit of all lines of a scan, in stages: areas and background; common widths and places; everything with widths
 * as smooth functions of angle; then, where the data carry it, widths line by line. Each stage is one call of the
 * same least squares with other parameters held. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

enum { WIDTHS_AUTO, WIDTHS_FREE, WIDTHS_SMOOTH };

static bool is_fixed(const lw_fit_options *options, const char *name)
{
    for (size_t i = 0; i < options->fixed.n; i++)
        if (strcmp(options->fixed.item[i], name) == 0)
            return true;
    return false;
}

/* Lines inside the scan, ascending; of lines closer than `closest` degrees the one of larger multiplicity. */
static lw_status choose_reflections(lw_fit_state *fit, const lw_reflection *all, size_t n_all, double closest,
                                    lw_error *err)
{
    const lw_scan *scan = fit->scan;
    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[scan->n - 1];
    fit->reflection = lw_arena_take(&fit->scratch, n_all, sizeof *fit->reflection, err);
    fit->start = lw_arena_take(&fit->scratch, n_all, sizeof *fit->start, err);
    fit->remark = lw_arena_take(&fit->scratch, n_all, sizeof *fit->remark, err);
    if (!fit->reflection || !fit->start || !fit->remark)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n_all; i++) {
        double expected = all[i].two_theta_deg + (fit->options->expected_shift ? fit->options->expected_shift[i] : 0);
        /* a line whose top is cut off tells nothing about its shape */
        if (expected < low + fit->options->search_deg || expected > high - fit->options->search_deg)
            continue;
        size_t n = fit->n;
        if (n > 0 && expected < fit->start[n - 1].expected_deg)
            return lw_fail(err, LW_BAD_ARGUMENT, "sort them by 2theta", "reflections do not ascend in 2theta");
        if (n > 0 && expected - fit->start[n - 1].expected_deg < closest) {
            fit->remark[n - 1] = "a neighbour of nearly the same place is contained in it";
            if (all[i].multiplicity <= fit->reflection[n - 1].multiplicity)
                continue;
            n = --fit->n;
        } else
            fit->remark[n] = "";
        fit->reflection[n] = all[i];
        fit->start[n] = (lw_line_start){.expected_deg = expected};
        fit->n++;
    }
    if (fit->n == 0)
        return lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0, "check material, radiation and range of the scan",
                          "no reflection of the list lies inside the scan (%.2f to %.2f deg)", low, high);
    return LW_OK;
}

/* Background scan at the points of this scan, with the variance of one unit of it. */
static lw_status take_background_scan(lw_fit_state *fit, lw_error *err)
{
    const lw_scan *empty = fit->options->background_scan, *scan = fit->scan;
    if (empty == NULL)
        return LW_OK;
    fit->extra = lw_arena_take(&fit->scratch, scan->n, sizeof *fit->extra, err);
    fit->extra_variance = lw_arena_take(&fit->scratch, scan->n, sizeof *fit->extra_variance, err);
    if (!fit->extra || !fit->extra_variance)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < scan->n; i++) {
        bool inside;
        fit->extra[i] = lw_scan_at(empty, scan->two_theta_deg[i], &inside);
        if (!inside)
            return lw_fail_at(err, LW_BAD_ARGUMENT, empty->file, 0, "crop the scan with range, or measure the holder further",
                              "the background scan does not reach %.3f deg", scan->two_theta_deg[i]);
        fit->extra_variance[i] = empty->variance_factor * fmax(fit->extra[i], 0);
    }
    return LW_OK;
}

void lw_fit_weigh(lw_fit_state *fit, bool from_model)
{
    const lw_scan *scan = fit->scan;
    double *variance = fit->lines->variance, scale = fit->extra ? fit->background[fit->model.n_background - 1] : 0;
    double least = 1; /* counts: a model below one count has the noise of one */
    if (scan->noise == LW_NOISE_SCALED) {
        double sum = 0;
        for (size_t i = 0; i < scan->n; i++)
            sum += fabs(scan->intensity[i]);
        least = 1e-4 * sum / (double)scan->n;
    }
    for (size_t i = 0; i < scan->n; i++) {
        double level = scan->intensity[i];
        if (from_model)
            level = fit->model.curve[i];
        else {
            /* five points together: single low counts would pull the first fit down */
            size_t a = i > 2 ? i - 2 : 0, b = i + 2 < scan->n ? i + 2 : scan->n - 1;
            double sum = 0;
            for (size_t j = a; j <= b; j++)
                sum += scan->intensity[j];
            level = sum / (double)(b - a + 1);
        }
        if (scan->noise == LW_NOISE_SIGMA)
            variance[i] = scan->sigma[i] * scan->sigma[i];
        else
            variance[i] = scan->variance_factor * fmax(level, least);
        if (fit->extra != NULL)
            variance[i] += scale * scale * fit->extra_variance[i];
        fit->model.weight[i] = 1 / variance[i];
    }
    fit->model.weighed = false;
}

/* Takes arrays for the layout that the model now has, and fills them from the state. */
static lw_status pack(lw_fit_state *fit, lw_error *err)
{
    lw_model *model = &fit->model;
    size_t n = lw_model_parameters(model), border = lw_model_border(model);
    if (n != fit->n_parameters || fit->p == NULL) {
        fit->p = lw_arena_take(&fit->scratch, n, sizeof *fit->p, err);
        fit->lower = lw_arena_take(&fit->scratch, n, sizeof *fit->lower, err);
        fit->upper = lw_arena_take(&fit->scratch, n, sizeof *fit->upper, err);
        fit->fixed = lw_arena_take(&fit->scratch, n, sizeof *fit->fixed, err);
        fit->at_bound = lw_arena_take(&fit->scratch, n, sizeof *fit->at_bound, err);
        if (!fit->p || !fit->lower || !fit->upper || !fit->fixed || !fit->at_bound)
            return LW_OUT_OF_MEMORY;
        fit->n_parameters = n;
    }
    for (size_t i = 0; i < n; i++) {
        fit->lower[i] = -INFINITY;
        fit->upper[i] = INFINITY;
        fit->fixed[i] = false;
    }
    bool positions_fixed = is_fixed(fit->options, "positions");
    for (size_t k = 0; k < fit->n; k++) {
        size_t row = lw_model_row(model, k);
        fit->p[row] = fit->position[k];
        fit->fixed[row] = fit->hold_position[k] || positions_fixed;
        fit->lower[row] = fit->start[k].expected_deg - 1.5 * fit->options->search_deg;
        fit->upper[row] = fit->start[k].expected_deg + 1.5 * fit->options->search_deg;
        fit->p[row + 1] = fit->area[k];
        fit->fixed[row + 1] = fit->hold_areas;
        for (size_t j = 0; j < model->n_local; j++) {
            fit->p[row + 2 + j] = fit->local[k][j];
            fit->fixed[row + 2 + j] = fit->hold_local[k] || model->shape->held[j];
            fit->lower[row + 2 + j] = model->shape->lower[j];
            fit->upper[row + 2 + j] = model->shape->upper[j];
        }
    }
    for (size_t i = 0; i < model->n_background; i++) {
        fit->p[border + i] = fit->background[i];
        fit->fixed[border + i] = fit->hold_background;
    }
    for (size_t i = 0; i < model->n_globals; i++) {
        fit->p[border + model->n_background + i] = fit->global[i];
        fit->fixed[border + model->n_background + i] =
            fit->hold_global[i] || is_fixed(fit->options, lw_width_name[model->global[i].parameter]);
        fit->lower[border + model->n_background + i] = fit->global_lower[i];
        if (model->global[i].parameter >= LW_AXIAL_1)
            fit->upper[border + model->n_background + i] = 0.25;
    }
    return LW_OK;
}

static void unpack(lw_fit_state *fit)
{
    lw_model *model = &fit->model;
    size_t border = lw_model_border(model);
    for (size_t k = 0; k < fit->n; k++) {
        size_t row = lw_model_row(model, k);
        fit->position[k] = fit->p[row];
        fit->area[k] = fit->p[row + 1];
        for (size_t j = 0; j < model->n_local; j++)
            fit->local[k][j] = fit->p[row + 2 + j];
    }
    memcpy(fit->background, fit->p + border, model->n_background * sizeof(double));
    memcpy(fit->global, fit->p + border + model->n_background, model->n_globals * sizeof(double));
}

/* One stage: least squares, then weights and windows from the new model, until both agree. */
static lw_status iterate(lw_fit_state *fit, int rounds, bool final, lw_error *err)
{
    bool from_model = fit->options->weights == 0;
    for (int round = 0; round < rounds; round++) {
        lw_status status = pack(fit, err);
        if (status != LW_OK)
            return status;
        lw_model_windows(&fit->model, fit->p, fit->options->window);
        lw_problem problem = {.n = fit->n_parameters, .lower = fit->lower, .upper = fit->upper, .fixed = fit->fixed,
                              .evaluate = lw_model_evaluate, .user = &fit->model};
        lw_fit_control control = lw_fit_control_defaults();
        control.iterations_most = final ? 200 : 60;
        control.chi2_tolerance = final ? 1e-9 : 1e-4;
        control.step_tolerance = final ? 1e-3 : 0.1; /* a stage on the way need not end sharper than it is used */
        lw_fit_outcome outcome;
        status = lw_least_squares(fit->engine, &problem, &control, fit->p, fit->at_bound, &outcome, err);
        if (status != LW_OK)
            return status;
        double before = fit->chi2;
        fit->iterations += outcome.iterations;
        fit->converged = outcome.converged;
        fit->stopped = outcome.reason;
        fit->chi2 = outcome.chi2;
        unpack(fit);
        if (from_model && fit->scan->noise != LW_NOISE_SIGMA) {
            lw_normal look = {.n = fit->n_parameters};
            status = lw_model_evaluate(&fit->model, fit->p, false, &look, err);
            if (status != LW_OK)
                return status;
            lw_fit_weigh(fit, true);
        }
        if (!final && round > 0)
            break;
        if (round > 0 && fabs(fit->chi2 - before) < 1e-5 * before)
            break;
    }
    return LW_OK;
}

/* Width parameters that the lines can carry: no more than there are visible lines. */
static void choose_globals(lw_fit_state *fit, double fwhm)
{
    lw_model *model = &fit->model;
    bool sample = fit->options->instrument != NULL;
    size_t visible = 0;
    double secant = 0;
    for (size_t k = 0; k < fit->n; k++)
        if (fit->start[k].visible) {
            double t = tan(fit->position[k] * M_PI / 360);
            secant += sqrt(1 + t * t);
            visible++;
        }
    if (visible == 0)
        visible = 1;
    secant = secant > 0 ? secant / (double)visible : 1;
    bool gauss = !model->shape->held[0] || !model->shape->is_voigt;
    bool lorentz = !model->shape->held[1] || !model->shape->is_voigt;
    static const int of_sample[] = {LW_P, LW_Y, LW_U, LW_X}, of_standard[] = {LW_W, LW_Y, LW_U, LW_X, LW_V};
    const int *order = sample ? of_sample : of_standard;
    size_t count = sample ? 4 : 5;
    size_t n = 0;
    for (size_t i = 0; i < count; i++) {
        bool is_lorentz = order[i] >= LW_X;
        if ((is_lorentz && !lorentz) || (!is_lorentz && !gauss))
            continue;
        if ((i >= 2 && visible < 3) || (i == 4 && visible < 5))
            continue;
        /* V is the mark of a monochromator's dispersion; under the flat-specimen geometry of a tube it only takes up
         * what the axial divergence leaves */
        if (order[i] == LW_V && fit->options->axial == LW_AXIAL_SOLLER)
            continue;
        bool both = gauss && lorentz;
        double part = both ? 0.6 : 1;
        model->global[n] = (lw_global){.parameter = order[i]};
        fit->global[n] = 0;
        if (order[i] == LW_W)
            fit->global[n] = part * part * fwhm * fwhm;
        if (order[i] == LW_P)
            fit->global[n] = part * part * fwhm * fwhm / (secant * secant);
        if (order[i] == LW_Y)
            fit->global[n] = part * fwhm / secant;
        fit->global_lower[n] = order[i] == LW_V ? -INFINITY : 0;
        fit->hold_global[n] = false;
        n++;
    }
    /* at zero their derivatives vanish, so they start at usual values; specimen and slit length can't be told apart
     * by one standard, and move together */
    int axial = sample ? LW_AXIAL_NONE : fit->options->axial;
    for (int i = 0; i < (axial == LW_AXIAL_NONE ? 0 : axial == LW_AXIAL_FINGER ? 1 : 2); i++) {
        model->global[n] = (lw_global){.parameter = LW_AXIAL_1 + i, .tied = axial == LW_AXIAL_FINGER};
        fit->global[n] = axial == LW_AXIAL_FINGER ? 0.025 : 0.04;
        fit->global_lower[n] = 1e-4;
        fit->hold_global[n] = false;
        n++;
    }
    model->n_globals = n;
}

/* Background with `terms` Chebyshev terms; keeps the coefficients there are. */
static lw_status set_background(lw_fit_state *fit, size_t terms, lw_error *err)
{
    bool hyperbola = fit->options->background_hyperbola;
    double special[2] = {0, 0};
    size_t n_special = (size_t)hyperbola + (fit->extra != NULL);
    if (fit->model.n_background > 0)
        memcpy(special, fit->background + fit->terms, n_special * sizeof(double));
    for (size_t i = fit->terms; i < terms; i++)
        fit->background[i] = 0;
    memcpy(fit->background + terms, special, n_special * sizeof(double));
    fit->terms = terms;
    double *weight = fit->model.weight, *curve = fit->model.curve;
    lw_status status = lw_model_points(&fit->model, fit->scan, terms, hyperbola, fit->extra, &fit->scratch, err);
    if (status == LW_OK && weight != NULL) {
        memcpy(fit->model.weight, weight, fit->scan->n * sizeof *weight);
        memcpy(fit->model.curve, curve, fit->scan->n * sizeof *curve);
    }
    return status;
}

/* Terms beyond which the background would follow the lines' tails: its shortest wave, twice the span over the order,
 * stays six times as long as the lines are wide on average. */
static size_t most_terms(const lw_fit_state *fit)
{
    double sum = 0, span = fit->scan->two_theta_deg[fit->scan->n - 1] - fit->scan->two_theta_deg[0];
    for (size_t k = 0; k < fit->n; k++) {
        double variance, lorentz;
        lw_model_widths(&fit->model, fit->p, k, &variance, &lorentz);
        sum += lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), lorentz);
    }
    return (size_t)fmin(fmax(span / (3 * sum / (double)fit->n), 4), 20);
}

/* More background terms while the Bayesian information criterion falls (Schwarz 1978 Ann. Stat. 6, 461). */
static lw_status choose_background(lw_fit_state *fit, lw_error *err)
{
    if (fit->options->background_terms > 0 || fit->hold_background)
        return LW_OK;
    size_t kept = fit->terms, misses = 0;
    double best = fit->chi2, keep[LW_BACKGROUND_MOST];
    memcpy(keep, fit->background, sizeof keep);
    size_t most = most_terms(fit);
    while (fit->terms + 2 <= most && misses < 2) {
        double scale = fmax(1, best / (double)fit->scan->n);
        lw_status status = set_background(fit, fit->terms + 2, err);
        if (status == LW_OK)
            status = iterate(fit, 1, false, err);
        if (status != LW_OK)
            return status;
        double gain = (best - fit->chi2) / scale, price = (double)(fit->terms - kept) * log((double)fit->scan->n);
        if (gain > price) {
            kept = fit->terms;
            best = fit->chi2;
            memcpy(keep, fit->background, sizeof keep);
            misses = 0;
        } else
            misses++;
    }
    if (fit->terms != kept) {
        /* the special terms stand behind the Chebyshev ones: put the kept vector back as it was */
        lw_status status = set_background(fit, kept, err);
        memcpy(fit->background, keep, sizeof keep);
        return status;
    }
    return LW_OK;
}

double lw_fit_overlap(const lw_fit_state *fit, size_t line)
{
    const lw_model *model = &fit->model;
    double variance, lorentz, share = 0, sum = 0;
    lw_model_widths(model, fit->p, line, &variance, &lorentz);
    double gauss = sqrt(variance), width = lw_voigt_fwhm(gauss, lorentz);
    for (int i = -30; i <= 30; i++) {
        double x = fit->position[line] + 0.1 * i * width;
        double own = fabs(fit->area[line]) * lw_voigt(x - fit->position[line], gauss, lorentz), others = 0;
        for (size_t k = 0; k < fit->n; k++) {
            if (k == line || fabs(fit->position[k] - x) > 12 * width + 1)
                continue;
            double v, l;
            lw_model_widths(model, fit->p, k, &v, &l);
            others += fabs(fit->area[k]) * lw_voigt(x - fit->position[k], sqrt(v), l);
        }
        if (own + others > 0) {
            share += own * others / (own + others);
            sum += own;
        }
    }
    return sum > 0 ? share / sum : 1;
}

/* Where three lines in a row lie for three tenths or more under their neighbours, the data tell neither their widths nor
 * their background: 0 if nowhere, else an angle in the gap before them. */
static double overlap_begins(const lw_fit_state *fit)
{
    size_t run = 0;
    for (size_t k = 3; k < fit->n; k++) {
        run = lw_fit_overlap(fit, k) > 0.3 ? run + 1 : 0;
        if (run < 3)
            continue;
        /* cut in a gap of two widths at least, or the last line kept would lose its neighbour and take its area */
        for (size_t j = k - 2; j < fit->n; j++) {
            double variance, lorentz, gap = fit->position[j] - fit->position[j - 1];
            lw_model_widths(&fit->model, fit->p, j, &variance, &lorentz);
            if (gap > 2 * lw_voigt_fwhm(sqrt(variance), lorentz))
                return fit->position[j - 1] + 0.55 * gap;
        }
        return 0;
    }
    return 0;
}

/* From smooth widths to each line's own, where the data carry them. */
static lw_status free_widths(lw_fit_state *fit, lw_error *err)
{
    lw_model *model = &fit->model;
    const lw_line_shape *shape = lw_line_shape_list[fit->options->shape];
    double *u_area = lw_arena_take(&fit->scratch, fit->n, sizeof *u_area, err);
    if (u_area == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = lw_fit_survey(fit, u_area, err);
    if (status != LW_OK)
        return status;
    bool automatic = fit->options->widths == WIDTHS_AUTO;
    for (size_t k = 0; k < fit->n; k++) {
        double significance = fit->area[k] / u_area[k], overlap = lw_fit_overlap(fit, k);
        fit->hold_local[k] = significance < (automatic ? 20 : 4) || (automatic && overlap > 0.3);
        if (significance < 3 || overlap > 0.75)
            fit->hold_position[k] = true;
        double variance, lorentz;
        lw_model_widths(model, fit->p, k, &variance, &lorentz);
        if (shape->is_voigt) {
            double nominal = model->line[k].nominal_deg;
            fit->local[k][0] = fmax(variance - lw_width_gauss_variance(model->instrument, nominal, NULL), 0);
            fit->local[k][1] = fmax(lorentz - lw_width_lorentz(model->instrument, nominal, NULL), 0);
        } else
            shape->start(lw_voigt_fwhm(sqrt(variance), lorentz), fit->local[k]);
    }
    /* only the axial length stays common */
    size_t n = 0;
    for (size_t i = 0; i < model->n_globals; i++)
        if (model->global[i].parameter >= LW_AXIAL_1 && shape->is_voigt) {
            model->global[n] = model->global[i];
            fit->global[n] = fit->global[i];
            fit->global_lower[n] = fit->global_lower[i];
            fit->hold_global[n] = fit->hold_global[i];
            n++;
        }
    model->n_globals = n;
    model->shape = shape;
    model->n_local = (size_t)shape->n_local;
    status = lw_model_prepare(model, &fit->scratch, err);
    if (status == LW_OK)
        status = iterate(fit, 6, true, err);
    return status;
}

/* The stages in their order. */
static lw_status run(lw_fit_state *fit, lw_error *err)
{
    lw_model *model = &fit->model;
    const lw_scan *scan = fit->scan;
    const lw_line_shape *shape = lw_line_shape_list[fit->options->shape];
    double span = scan->two_theta_deg[scan->n - 1] - scan->two_theta_deg[0], explained;
    double *background = lw_arena_take(&fit->scratch, scan->n, sizeof *background, err);
    if (background == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = lw_start_background(scan, fmin(4, span / 15), background, &fit->scratch, err);
    if (status == LW_OK)
        status = lw_start_lines(scan, background, fit->options->search_deg, fit->start, fit->n, &explained,
                                &fit->scratch, err);
    if (status != LW_OK)
        return status;
    size_t visible = 0;
    for (size_t k = 0; k < fit->n; k++)
        visible += fit->start[k].visible;
    if (visible == 0 || explained < 0.3)
        return lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0,
                          "is it the right standard or material, and the right radiation?",
                          "the lines of the scan are not where the reflections are expected (%zu of %zu reflections "
                          "seen, %.0f %% of the strong peaks explained)",
                          visible, fit->n, 100 * explained);
    double fwhm = 0;
    size_t counted = 0;
    for (size_t k = 0; k < fit->n; k++)
        if (fit->start[k].visible) {
            fwhm += fit->start[k].fwhm_deg;
            counted++;
        }
    fwhm /= (double)counted;
    for (size_t k = 0; k < fit->n; k++) {
        fit->position[k] = fit->start[k].position_deg;
        fit->area[k] = 2 * fit->start[k].height * fit->start[k].fwhm_deg;
        fit->hold_position[k] = true;
    }
    model->n_lines = fit->n;
    model->shape = shape->is_voigt ? shape : lw_line_shape_list[0];
    model->n_local = 0;
    for (size_t k = 0; k < fit->n; k++)
        model->line[k].nominal_deg = fit->start[k].position_deg;
    choose_globals(fit, fwhm);
    size_t terms = fit->options->background_terms > 0 ? (size_t)fit->options->background_terms
                                                       : (span > 60 ? 6 : span > 15 ? 4 : 2);
    fit->background[0] = background[scan->n / 2];
    status = set_background(fit, terms, err);
    if (status == LW_OK)
        status = lw_model_prepare(model, &fit->scratch, err);
    if (status != LW_OK)
        return status;
    lw_fit_weigh(fit, false);
    if (is_fixed(fit->options, "background"))
        return lw_fail(err, LW_BAD_ARGUMENT, "give background = a scan of the holder instead",
                       "the background can't be held before it is known");

    lw_engine_progress(fit->engine, "line fit", 0.1);
    for (size_t i = 0; i < model->n_globals; i++)
        fit->hold_global[i] = true;
    status = iterate(fit, 1, false, err); /* areas and background: linear */
    lw_engine_progress(fit->engine, "line fit", 0.25);
    for (size_t k = 0; k < fit->n; k++)
        fit->hold_position[k] = !fit->start[k].visible;
    for (size_t i = 0; i < model->n_globals; i++)
        fit->hold_global[i] = model->global[i].parameter != LW_W && model->global[i].parameter != LW_P &&
                              model->global[i].parameter != LW_Y;
    if (status == LW_OK)
        status = iterate(fit, 2, false, err);
    bool whole_scan = !(fit->options->range[1] > fit->options->range[0]);
    if (status == LW_OK && whole_scan && (fit->crop_deg = overlap_begins(fit)) > 0)
        return LW_OK;
    for (size_t i = 0; i < model->n_globals; i++)
        fit->hold_global[i] = false;
    if (status == LW_OK)
        status = iterate(fit, 2, false, err);
    lw_engine_progress(fit->engine, "line fit", 0.5);
    if (status == LW_OK)
        status = choose_background(fit, err);
    if (status != LW_OK)
        return status;
    lw_engine_progress(fit->engine, "line fit", 0.7);
    bool smooth = fit->options->widths == WIDTHS_SMOOTH && shape->is_voigt;
    status = iterate(fit, smooth ? 6 : 2, smooth, err);
    if (status == LW_OK && !smooth)
        status = free_widths(fit, err);
    if (status == LW_OK && !fit->converged)
        return lw_fail_at(err, LW_NO_CONVERGENCE, scan->file, 0,
                          "hold some parameters (fixed), use widths = \"smooth\", or crop the scan with range",
                          "the line fit did not converge in %zu iterations: %s", fit->iterations, fit->stopped);
    lw_engine_progress(fit->engine, "line fit", 1);
    return status;
}

static lw_status take_state(lw_fit_state *fit, lw_error *err)
{
    size_t n = fit->n;
    fit->position = lw_arena_take(&fit->scratch, n, sizeof *fit->position, err);
    fit->area = lw_arena_take(&fit->scratch, n, sizeof *fit->area, err);
    fit->local = lw_arena_take(&fit->scratch, n, sizeof *fit->local, err);
    fit->hold_position = lw_arena_take(&fit->scratch, n, sizeof *fit->hold_position, err);
    fit->hold_local = lw_arena_take(&fit->scratch, n, sizeof *fit->hold_local, err);
    fit->model.line = lw_arena_take(&fit->scratch, n, sizeof *fit->model.line, err);
    fit->lines->variance = lw_arena_take(&fit->lines->arena, fit->scan->n, sizeof(double), err);
    bool all = fit->position && fit->area && fit->local && fit->hold_position && fit->hold_local &&
               fit->model.line && fit->lines->variance;
    return all ? LW_OK : LW_OUT_OF_MEMORY;
}

static lw_status check_options(const lw_scan *scan, const lw_fit_options *options, lw_error *err)
{
    const lw_line_shape *shape = lw_line_shape_list[options->shape];
    if (!scan->has_radiation)
        return lw_fail_at(err, LW_BAD_ARGUMENT, scan->file, 0, "give radiation = \"Cu Ka\" or a wavelength when reading it",
                          "the scan does not say with which radiation it was measured");
    if (!shape->is_voigt && (options->instrument != NULL || options->axial != LW_AXIAL_NONE))
        return lw_fail(err, LW_BAD_ARGUMENT, "use shape = \"voigt\"",
                       "fit_lines: an instrument or axial divergence can only be folded into a Voigt, not into '%s'",
                       shape->name);
    if (!shape->is_voigt && options->widths == WIDTHS_SMOOTH)
        return lw_fail(err, LW_BAD_ARGUMENT, "use shape = \"voigt\"", "fit_lines: widths = \"smooth\" needs a Voigt");
    if (options->instrument != NULL && options->axial != LW_AXIAL_NONE)
        return lw_fail(err, LW_BAD_ARGUMENT, "leave axial out",
                       "fit_lines: the instrument brings its axial divergence; it can't be refined again");
    return LW_OK;
}

/* One fit of the scan, or of the range that the options name. *crop_deg > 0 and no lines: fit again below it. */
static lw_status fit_once(lw_engine *engine, const lw_scan *scan, const lw_reflection *reflections, size_t n,
                          const lw_material *material, const lw_fit_options *options, lw_lines **out, double *crop_deg,
                          lw_error *err)
{
    lw_lines *lines = lw_take(engine, sizeof *lines, err);
    if (lines == NULL)
        return LW_OUT_OF_MEMORY;
    *lines = (lw_lines){.scan = scan, .radiation = scan->radiation, .misfit = "", .left_out = ""};
    lw_arena_begin(&lines->arena, engine);
    lw_fit_state fit = {.engine = engine, .options = options, .lines = lines};
    lw_arena_begin(&fit.scratch, engine);
    lw_status status = LW_OK;
    if (options->range[1] > options->range[0]) {
        status = lw_scan_crop(scan, options->range[0], options->range[1], &lines->cropped, err);
        lines->scan = lines->cropped;
    }
    fit.scan = lines->scan;
    fit.model = (lw_model){.engine = engine,
                           .kernel = lw_voigt_kernel_for(engine->cpu),
                           .radiation = &lines->radiation,
                           .on_s_axis = options->axis == 0,
                           .with_factor = options->intensity_factor == 0,
                           .axial = (lw_axial_kind)options->axial};
    double mono = cos(options->monochromator_deg * M_PI / 180);
    fit.model.constant_polarisation = 1 - options->polarised;
    fit.model.cos2_monochromator = options->polarised * mono * mono;
    if (options->instrument != NULL) {
        lines->has_instrument = true;
        lines->instrument = *options->instrument;
        memcpy(fit.model.instrument, options->instrument->value, sizeof fit.model.instrument);
        fit.model.axial = options->instrument->axial;
    }
    if (status == LW_OK && material != NULL &&
        (lines->material = lw_arena_copy(&lines->arena, material, 1, sizeof *material, err)) == NULL)
        status = LW_OUT_OF_MEMORY;
    if (status == LW_OK)
        status = choose_reflections(&fit, reflections, n, 1e-6, err);
    if (status == LW_OK)
        status = take_background_scan(&fit, err);
    if (status == LW_OK)
        status = take_state(&fit, err);
    if (status == LW_OK)
        status = run(&fit, err);
    if (status == LW_OK && !(fit.crop_deg > 0))
        status = lw_fit_result(&fit, err);
    *crop_deg = fit.crop_deg;
    lw_arena_end(&fit.scratch);
    if (status != LW_OK || *crop_deg > 0) {
        lw_lines_free(lines);
        return status;
    }
    *out = lines;
    return LW_OK;
}

lw_status lw_fit_lines(lw_engine *engine, const lw_scan *scan, const lw_reflection *reflections, size_t n,
                       const lw_material *material, const lw_fit_options *options, lw_lines **out, lw_error *err)
{
    *out = NULL;
    double crop_deg = 0;
    lw_status status = check_options(scan, options, err);
    if (status == LW_OK)
        status = fit_once(engine, scan, reflections, n, material, options, out, &crop_deg, err);
    if (status != LW_OK || !(crop_deg > 0))
        return status;
    lw_fit_options below = *options;
    below.range[0] = scan->two_theta_deg[0];
    below.range[1] = crop_deg;
    double unused;
    status = fit_once(engine, scan, reflections, n, material, &below, out, &unused, err);
    if (status != LW_OK)
        return status;
    const char *text = lw_arena_print(&(*out)->arena, err,
                                      "beyond %.2f deg the lines overlap so much that their widths can't be told apart: "
                                      "that part of the scan was left out (give range to use it all the same)",
                                      crop_deg);
    if (text == NULL) {
        lw_lines_free(*out);
        *out = NULL;
        return LW_OUT_OF_MEMORY;
    }
    (*out)->left_out = text;
    return LW_OK;
}

void lw_lines_free(lw_lines *lines)
{
    if (lines == NULL)
        return;
    lw_engine *engine = lines->arena.engine;
    lw_scan_free(lines->cropped);
    lw_arena_end(&lines->arena);
    lw_give(engine, lines, sizeof *lines);
}
