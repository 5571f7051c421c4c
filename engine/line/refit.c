/* SPDX-License-Identifier: GPL-3.0-or-later */
/* lw_refit_lines: the last stages of a fit once more, on other counts or with another instrument. What the first fit
 * chose (lines, background terms, which widths are shared) stands, so that only the numbers move. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

static lw_status check(const lw_lines *from, const lw_scan *scan, const lw_scan *background, lw_error *err)
{
    const lw_scan *first = from->scan;
    if (from->options == NULL || !from->has_instrument || strcmp(from->shape, "voigt") != 0)
        return lw_fail(err, LW_BAD_ARGUMENT, "fit them with fit_lines, shape = \"voigt\" and an instrument",
                       "only lines of that kind can be fitted again");
    bool same = scan->n == first->n &&
                memcmp(scan->two_theta_deg, first->two_theta_deg, scan->n * sizeof *scan->two_theta_deg) == 0;
    if (!same || (background != NULL) > (from->options->background_scan != NULL))
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "a fit can be repeated on the same points only");
    return LW_OK;
}

/* The state as the first fit left it. */
static lw_status take_over(lw_fit_state *fit, const lw_lines *from, lw_error *err)
{
    size_t n = from->n;
    fit->n = n;
    fit->n_beyond = from->n_beyond;
    fit->reflection = lw_arena_take(&fit->scratch, n + LW_BEYOND_MOST, sizeof *fit->reflection, err);
    fit->start = lw_arena_take(&fit->scratch, n + LW_BEYOND_MOST, sizeof *fit->start, err);
    fit->remark = lw_arena_take(&fit->scratch, n + LW_BEYOND_MOST, sizeof *fit->remark, err);
    lw_status status = lw__fit_take_state(fit, err);
    if (!fit->reflection || !fit->start || !fit->remark || status != LW_OK)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < n; k++) {
        const lw_line *line = &from->line[k];
        fit->reflection[k] = line->reflection;
        fit->start[k] = (lw_line_start){.expected_deg = line->nominal_deg, .visible = !line->held_position};
        fit->remark[k] = line->shared_width || line->held_position || !line->supported ? "" : line->remark;
        fit->position[k] = line->two_theta.value;
        fit->area[k] = line->area.value;
        fit->local[k][0] = line->own_variance_deg2;
        fit->local[k][1] = line->own_lorentz_deg;
        fit->hold_position[k] = line->held_position;
        fit->hold_local[k] = line->shared_width;
        fit->model.line[k].nominal_deg = line->nominal_deg;
    }
    for (size_t b = 0; b < from->n_beyond; b++) {
        const lw_line_beyond *line = &from->beyond[b];
        size_t k = n + b;
        fit->reflection[k] = line->reflection;
        fit->start[k] = (lw_line_start){.expected_deg = line->two_theta_deg};
        fit->remark[k] = "";
        fit->position[k] = fit->model.line[k].nominal_deg = line->two_theta_deg;
        fit->area[k] = line->area;
        fit->local[k][0] = line->own_variance_deg2;
        fit->local[k][1] = line->own_lorentz_deg;
        fit->hold_position[k] = fit->hold_local[k] = true;
        fit->tie[b] = (lw_area_tie){.mean = line->area_expected, .weight = line->area_weight};
    }
    fit->model.n_lines = n + from->n_beyond;
    fit->model.shape = lw_line_shape_list[fit->options->shape];
    memcpy(fit->lines->variance, from->variance, from->scan->n * sizeof(double));
    status = lw_model_points(&fit->model, fit->scan, from->n_background + 2, &fit->scratch, err);
    if (status != LW_OK)
        return status;
    lw__fit_set_background(fit, from->n_background);
    memcpy(fit->background, from->parameter + from->at_background, fit->model.n_background * sizeof(double));
    for (size_t i = 0; i < from->scan->n; i++)
        fit->model.weight[i] = 1 / from->variance[i];
    fit->model.weighed = false;
    return LW_OK;
}

/* The width function that lines share: its refined parameters become the model's globals. */
static void take_shared_widths(lw_fit_state *fit, const lw_lines *from)
{
    static const int order[] = {LW_P, LW_Y, LW_U, LW_X}; /* as a sample's fit lays them out */
    size_t n = 0;
    for (size_t k = 0; k < sizeof order / sizeof *order; k++) {
        int i = order[k];
        bool held = lw__fit_is_fixed(fit->options, lw_width_name[i]);
        if (!from->smooth.refined[i] && !held)
            continue;
        fit->model.global[n] = (lw_global){.parameter = i};
        fit->global[n] = from->smooth.value[i];
        fit->global_lower[n] = 0;
        fit->hold_global[n] = held;
        n++;
    }
    fit->model.n_globals = n;
    fit->model.n_local = 0;
}

static lw_status stage(lw_fit_state *fit, bool final, lw_error *err)
{
    lw_status status = lw_model_prepare(&fit->model, &fit->scratch, err);
    return status == LW_OK ? lw__fit_stage(fit, final ? LW_FINAL_ROUNDS : 2, final, err) : status;
}

/* Widths shared by all lines, by some, or by none. */
static lw_status run(lw_fit_state *fit, const lw_lines *from, lw_error *err)
{
    bool smooth = fit->options->widths == LW_WIDTHS_SMOOTH, any = false;
    for (size_t k = 0; k < fit->n; k++)
        any |= fit->hold_local[k];
    lw_status status = LW_OK;
    if (smooth || any) {
        take_shared_widths(fit, from);
        status = stage(fit, smooth, err);
    }
    if (smooth || status != LW_OK)
        return status;
    if (any) {
        double *u_area = lw_arena_take(&fit->scratch, fit->n, sizeof *u_area, err);
        status = u_area != NULL ? lw_fit_survey(fit, u_area, err) : LW_OUT_OF_MEMORY;
        for (size_t k = 0; k < fit->n && status == LW_OK; k++)
            if (fit->hold_local[k]) {
                double nominal = fit->model.line[k].nominal_deg;
                fit->local[k][0] = lw_width_gauss_variance(fit->shared.value, nominal, NULL);
                fit->local[k][1] = lw_width_lorentz(fit->shared.value, nominal, NULL);
            }
    }
    fit->model.n_globals = 0;
    fit->model.n_local = (size_t)fit->model.shape->n_local;
    return status == LW_OK ? stage(fit, true, err) : status;
}

lw_status lw_refit_lines(lw_engine *engine, const lw_lines *from, const lw_scan *scan,
                         const lw_width_function *instrument, const lw_scan *background, lw_lines **out, lw_error *err)
{
    *out = NULL;
    lw_status status = check(from, scan, background, err);
    lw_lines *lines = status == LW_OK ? lw_take(engine, sizeof *lines, err) : NULL;
    if (lines == NULL)
        return status != LW_OK ? status : LW_OUT_OF_MEMORY;
    *lines = (lw_lines){.scan = scan, .radiation = from->radiation, .misfit = "", .left_out = ""};
    lw_arena_begin(&lines->arena, engine);
    lw_fit_options options = *from->options;
    options.instrument = instrument != NULL ? instrument : &from->instrument;
    if (background != NULL)
        options.background_scan = background;
    lw_fit_state fit = {.engine = engine, .options = &options, .lines = lines, .scan = scan};
    lw_arena_begin(&fit.scratch, engine);
    lw__fit_begin(&fit);
    if (from->material != NULL &&
        (lines->material = lw_arena_copy(&lines->arena, from->material, 1, sizeof *from->material, err)) == NULL)
        status = LW_OUT_OF_MEMORY;
    if (status == LW_OK)
        status = lw__fit_take_background_scan(&fit, err);
    if (status == LW_OK)
        status = take_over(&fit, from, err);
    if (status == LW_OK)
        status = run(&fit, from, err);
    if (status == LW_OK && !fit.converged)
        status = lw_fail_at(err, LW_NO_CONVERGENCE, scan->file, 0, NULL,
                            "the repeated line fit did not converge in %zu iterations: %s", fit.iterations, fit.stopped);
    if (status == LW_OK)
        status = lw_fit_result(&fit, err);
    if (status == LW_OK &&
        (lines->options = lw__fit_keep_options(&options, &lines->instrument, &lines->arena, err)) == NULL)
        status = LW_OUT_OF_MEMORY;
    lw_arena_end(&fit.scratch);
    if (status != LW_OK) {
        lw_lines_free(lines);
        return status;
    }
    *out = lines;
    return LW_OK;
}
