/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The fit of all lines of a scan, in stages: areas and background; common widths and places; everything with widths
 * as smooth functions of angle; then, where the data carry it, widths line by line. Each stage is one call of the
 * same least squares with other parameters held. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

/* a x0 + b x1 through y[n], none of them negative, by relative least squares, once more without what lies far off. Returned:
 * root mean square of the relative misses. */
static double through(const double *x0, const double *x1, const double *y, size_t n, double *a, double *b)
{
    double limit = INFINITY, rms = INFINITY;
    for (int pass = 0; pass < 2; pass++) {
        double h00 = 0, h01 = 0, h11 = 0, g0 = 0, g1 = 0, sum = 0, count = 0;
        for (size_t i = 0; i < n; i++) {
            double p = x0[i] / y[i], q = x1[i] / y[i];
            if (pass > 0 && fabs(1 - *a * p - *b * q) > limit)
                continue;
            h00 += p * p;
            h01 += p * q;
            h11 += q * q;
            g0 += p;
            g1 += q;
        }
        double determinant = h00 * h11 - h01 * h01;
        bool two = determinant > 1e-9 * h00 * h11;
        *a = two ? (g0 * h11 - g1 * h01) / determinant : g0 / h00;
        *b = two ? (g1 * h00 - g0 * h01) / determinant : 0;
        if (*b < 0 || *a < 0) {
            bool rising = *a < 0;
            *a = rising ? 0 : g0 / h00;
            *b = rising ? g1 / h11 : 0;
        }
        for (size_t i = 0; i < n; i++) {
            double miss = 1 - (*a * x0[i] + *b * x1[i]) / y[i];
            if (fabs(miss) > limit)
                continue;
            sum += miss * miss;
            count++;
        }
        rms = sqrt(sum / fmax(count, 1));
        limit = 2.5 * rms;
    }
    return rms;
}

/* Width functions through the widths that were seen. True if these follow them well enough to go on from. */
static lw_status start_widths(lw_fit_state *fit, bool *good, lw_error *err)
{
    lw_model *model = &fit->model;
    lw_arena_mark mark = lw_arena_mark_now(&fit->scratch);
    double *work = lw_arena_take(&fit->scratch, 4 * fit->n, sizeof *work, err), *y = work, *flat = work + fit->n;
    double *steep = work + 2 * fit->n;
    size_t at[LW_WIDTH_PARAMETERS], n = 0;
    *good = false;
    if (work == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < LW_WIDTH_PARAMETERS; i++)
        at[i] = LW_GLOBALS_MOST;
    for (size_t i = 0; i < model->n_globals; i++)
        at[model->global[i].parameter] = i;
    bool both = at[LW_Y] < LW_GLOBALS_MOST && (at[LW_W] < LW_GLOBALS_MOST || at[LW_P] < LW_GLOBALS_MOST);
    double part = both ? 0.6 : 1, miss = 0;
    for (int lorentz = 0; lorentz < 2; lorentz++) {
        size_t first = lorentz ? at[LW_Y] : at[LW_W] < LW_GLOBALS_MOST ? at[LW_W] : at[LW_P], second = at[lorentz ? LW_X : LW_U];
        if (first == LW_GLOBALS_MOST || second == LW_GLOBALS_MOST)
            continue;
        n = 0;
        for (size_t k = 0; k < fit->n; k++) {
            if (!fit->start[k].width_seen)
                continue;
            double angle = fit->position[k], t = tan(angle * M_PI / 360), wide = part * fit->start[k].fwhm_deg;
            if (lorentz) {
                y[n] = fmax(wide - lw_width_lorentz(model->instrument, angle, NULL), 0.2 * wide);
                flat[n] = sqrt(1 + t * t);
                steep[n] = t;
            } else {
                y[n] = fmax(wide * wide - lw_width_gauss_variance(model->instrument, angle, NULL), 0.04 * wide * wide);
                flat[n] = model->global[first].parameter == LW_P ? 1 + t * t : 1;
                steep[n] = t * t;
            }
            n++;
        }
        double a, b, off = through(flat, steep, y, n, &a, &b);
        miss = fmax(miss, lorentz ? off : 0.5 * off);
        fit->global[first] = a;
        fit->global[second] = b;
    }
    *good = n >= 5 && miss < 0.2;
    lw_arena_rewind(&fit->scratch, mark);
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

double lw_fit_overlap(const lw_fit_state *fit, size_t line)
{
    enum { PLACES = 61 };
    const lw_model *model = &fit->model;
    const lw_voigt_kernel *kernel = lw_voigt_kernel_for(LW_CPU_PLAIN); /* the same on every processor */
    const lw_voigt_node node = {.weight = 1};
    double variance, lorentz, share = 0, sum = 0, x[PLACES], own[PLACES], others[PLACES] = {0};
    lw_model_widths(model, fit->p, line, &variance, &lorentz);
    double width = lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), lorentz), reach = 15 * width + 1;
    for (size_t k = 0; k < fit->n + fit->n_beyond; k++) {
        double away = fit->position[k] - fit->position[line], value[PLACES], v, l;
        if (fabs(away) > reach)
            continue;
        lw_model_widths(model, fit->p, k, &v, &l);
        for (int i = 0; i < PLACES; i++)
            x[i] = 0.1 * (i - PLACES / 2) * width - away;
        lw_voigt_sums sums = {.value = value};
        kernel->sum(PLACES, x, &node, 1, fmax(v, 1e-12), l, 1, &sums);
        for (int i = 0; i < PLACES; i++)
            if (k == line)
                own[i] = fabs(fit->area[k]) * value[i];
            else if (fabs(x[i]) <= 12 * width + 1)
                others[i] += fabs(fit->area[k]) * value[i];
    }
    for (int i = 0; i < PLACES; i++)
        if (own[i] + others[i] > 0) {
            share += own[i] * others[i] / (own[i] + others[i]);
            sum += own[i];
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

/* A line's own part of the width that the smooth function gives it. */
static void own_widths(lw_fit_state *fit, size_t k)
{
    const lw_model *model = &fit->model;
    double variance, lorentz, nominal = model->line[k].nominal_deg;
    lw_model_widths(model, fit->p, k, &variance, &lorentz);
    fit->local[k][0] = fmax(variance - lw_width_gauss_variance(model->instrument, nominal, NULL), 0);
    fit->local[k][1] = fmax(lorentz - lw_width_lorentz(model->instrument, nominal, NULL), 0);
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
    status = lw__fit_tie_beyond(fit, err);
    if (status != LW_OK)
        return status;
    for (size_t k = fit->n; k < fit->n + fit->n_beyond; k++)
        own_widths(fit, k);
    bool automatic = fit->options->widths == LW_WIDTHS_AUTO;
    for (size_t k = 0; k < fit->n; k++) {
        double significance = fit->area[k] / u_area[k], overlap = lw_fit_overlap(fit, k);
        fit->hold_local[k] = significance < (automatic ? 20 : 4) || (automatic && overlap > 0.3);
        if (significance < 3 || overlap > 0.75)
            fit->hold_position[k] = true;
        double variance, lorentz;
        lw_model_widths(model, fit->p, k, &variance, &lorentz);
        if (shape->is_voigt)
            own_widths(fit, k);
        else {
            /* the smooth function may miss a line by far where the Voigt does; then what was seen of it is a better start */
            double fwhm = lw_voigt_fwhm(sqrt(variance), lorentz), seen = fit->start[k].fwhm_deg;
            if (fit->start[k].width_seen && overlap < 0.2) {
                fwhm = fmin(fmax(fwhm, 0.8 * seen), 1.25 * seen);
                fit->position[k] = fit->start[k].position_deg;
            }
            shape->start(fwhm, fit->local[k]);
        }
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
        status = lw__fit_stage(fit, LW_FINAL_ROUNDS, true, err);
    return status;
}

/* Places, areas and a typical width from the scan alone; refuses a scan whose lines are others. */
static lw_status start_values(lw_fit_state *fit, double *background, double *typical_fwhm, lw_error *err)
{
    const lw_scan *scan = fit->scan;
    double span = scan->two_theta_deg[scan->n - 1] - scan->two_theta_deg[0], explained;
    lw_status status = lw_start_background(scan, fmin(4, span / 15), background, &fit->scratch, err);
    if (status == LW_OK)
        status = lw_start_lines(scan, background, fit->options->search_deg, fit->start, fit->n, &explained,
                                &fit->scratch, err);
    if (status != LW_OK)
        return status;
    size_t visible = 0;
    *typical_fwhm = 0;
    for (size_t k = 0; k < fit->n; k++)
        if (fit->start[k].visible) {
            *typical_fwhm += fit->start[k].fwhm_deg;
            visible++;
        }
    if (visible == 0 || explained < 0.3)
        return lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0,
                          "is it the right standard or material, and the right radiation?",
                          "the lines of the scan are not where the reflections are expected (%zu of %zu reflections "
                          "seen, %.0f %% of the strong peaks explained)",
                          visible, fit->n, 100 * explained);
    *typical_fwhm /= (double)visible;
    for (size_t k = 0; k < fit->n; k++) {
        fit->position[k] = fit->start[k].position_deg;
        fit->area[k] = 2 * fit->start[k].height * fit->start[k].fwhm_deg;
        fit->hold_position[k] = true;
        fit->model.line[k].nominal_deg = fit->start[k].position_deg;
    }
    return LW_OK;
}

/* The model with widths as smooth functions, at its starting values. */
static lw_status start_model(lw_fit_state *fit, bool *good_widths, lw_error *err)
{
    lw_model *model = &fit->model;
    const lw_scan *scan = fit->scan;
    const lw_line_shape *shape = lw_line_shape_list[fit->options->shape];
    lw_status status = lw_model_points(model, scan, lw__fit_background_room(fit->options), &fit->scratch, err);
    if (status != LW_OK)
        return status;
    lw_arena_mark mark = lw_arena_mark_now(&fit->scratch);
    double fwhm, *background = lw_arena_take_raw(&fit->scratch, scan->n, sizeof *background, err);
    if (background == NULL)
        return LW_OUT_OF_MEMORY;
    status = start_values(fit, background, &fwhm, err);
    if (status == LW_OK)
        status = lw__fit_start_background(fit, background, err);
    if (status != LW_OK)
        return status;
    lw_arena_rewind(&fit->scratch, mark);
    model->n_lines = fit->n;
    model->shape = shape->is_voigt ? shape : lw_line_shape_list[0];
    model->n_local = 0;
    choose_globals(fit, fwhm);
    status = start_widths(fit, good_widths, err);
    if (status == LW_OK)
        status = lw_model_prepare(model, &fit->scratch, err);
    if (status == LW_OK)
        lw_fit_weigh(fit, false);
    return status;
}

/* Holds all width parameters, all but the widest ones, or none. */
enum { HOLD_ALL, HOLD_FINE, HOLD_NONE };
static void hold_globals(lw_fit_state *fit, int which)
{
    for (size_t i = 0; i < fit->model.n_globals; i++) {
        int parameter = fit->model.global[i].parameter;
        bool coarse = parameter == LW_W || parameter == LW_P || parameter == LW_Y;
        fit->hold_global[i] = which == HOLD_ALL || (which == HOLD_FINE && !coarse);
    }
}

/* A stage on the way: once more where it did not come to an end. */
static lw_status stage_on_the_way(lw_fit_state *fit, lw_error *err)
{
    lw_status status = lw__fit_stage(fit, 1, false, err);
    return status != LW_OK || fit->converged ? status : lw__fit_stage(fit, 1, false, err);
}

lw_status lw__fit_run(lw_fit_state *fit, lw_error *err)
{
    const lw_line_shape *shape = lw_line_shape_list[fit->options->shape];
    bool smooth = fit->options->widths == LW_WIDTHS_SMOOTH && shape->is_voigt;
    bool whole_scan = !(fit->options->range[1] > fit->options->range[0]);
    bool good_widths = false;
    lw_status status = start_model(fit, &good_widths, err);
    lw_engine_progress(fit->engine, "line fit", 0.1);
    hold_globals(fit, HOLD_ALL);
    if (status == LW_OK)
        status = lw__fit_linear_start(fit, err);
    lw_engine_progress(fit->engine, "line fit", 0.25);
    for (size_t k = 0; k < fit->n; k++)
        fit->hold_position[k] = !fit->start[k].visible;
    hold_globals(fit, HOLD_FINE);
    if (status == LW_OK && !good_widths)
        status = stage_on_the_way(fit, err);
    if (status == LW_OK && whole_scan && (fit->crop_deg = overlap_begins(fit)) > 0)
        return LW_OK;
    hold_globals(fit, HOLD_NONE);
    if (status == LW_OK)
        status = stage_on_the_way(fit, err);
    lw_engine_progress(fit->engine, "line fit", 0.5);
    if (status == LW_OK)
        status = lw__fit_add_beyond(fit, err);
    bool more = true;
    for (int round = 0; round < 3 && more && status == LW_OK; round++) {
        status = lw__fit_choose_background(fit, &more, err);
        if (status == LW_OK && more)
            status = stage_on_the_way(fit, err);
    }
    lw_engine_progress(fit->engine, "line fit", 0.7);
    if (status == LW_OK && smooth)
        status = lw__fit_tie_beyond(fit, err);
    if (status == LW_OK && smooth)
        status = lw__fit_stage(fit, LW_FINAL_ROUNDS, true, err);
    if (status == LW_OK && !smooth)
        status = free_widths(fit, err);
    if (status == LW_OK && !fit->converged)
        return lw_fail_at(err, LW_NO_CONVERGENCE, fit->scan->file, 0,
                          "hold some parameters (fixed), use widths = \"smooth\", or crop the scan with range",
                          "the line fit did not converge in %zu iterations: %s", fit->iterations, fit->stopped);
    lw_engine_progress(fit->engine, "line fit", 1);
    return status;
}
