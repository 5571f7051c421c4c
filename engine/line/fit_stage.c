/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One stage of a fit: the state as a parameter vector, least squares, and weights from the new model. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

bool lw__fit_is_fixed(const lw_fit_options *options, const char *name)
{
    for (size_t i = 0; i < options->fixed.n; i++)
        if (strcmp(options->fixed.item[i], name) == 0)
            return true;
    return false;
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
        double level;
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
lw_status lw__fit_pack(lw_fit_state *fit, lw_error *err)
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
    bool positions_fixed = lw__fit_is_fixed(fit->options, "positions");
    for (size_t k = 0; k < fit->n + fit->n_beyond; k++) {
        size_t row = lw_model_row(model, k);
        fit->p[row] = fit->position[k];
        fit->fixed[row] = fit->hold_position[k] || positions_fixed;
        fit->lower[row] = fit->start[k].expected_deg - 1.5 * fit->options->search_deg;
        fit->upper[row] = fit->start[k].expected_deg + 1.5 * fit->options->search_deg;
        fit->p[row + 1] = fit->area[k];
        if (k >= fit->n)
            fit->lower[row + 1] = 0;
        for (size_t j = 0; j < model->n_local; j++) {
            fit->p[row + 2 + j] = fit->local[k][j];
            fit->fixed[row + 2 + j] = fit->hold_local[k] || model->shape->held[j];
            fit->lower[row + 2 + j] = model->shape->lower[j];
            fit->upper[row + 2 + j] = model->shape->upper[j];
        }
    }
    for (size_t i = 0; i < model->n_background; i++)
        fit->p[border + i] = fit->background[i];
    for (size_t i = 0; i < model->n_globals; i++) {
        fit->p[border + model->n_background + i] = fit->global[i];
        fit->fixed[border + model->n_background + i] =
            fit->hold_global[i] || lw__fit_is_fixed(fit->options, lw_width_name[model->global[i].parameter]);
        fit->lower[border + model->n_background + i] = fit->global_lower[i];
        if (model->global[i].parameter >= LW_AXIAL_1)
            fit->upper[border + model->n_background + i] = 0.25;
    }
    for (size_t i = 0; i < n; i++)
        fit->at_bound[i] = !fit->fixed[i] && (fit->p[i] <= fit->lower[i] || fit->p[i] >= fit->upper[i]);
    return LW_OK;
}

void lw__fit_unpack(lw_fit_state *fit)
{
    lw_model *model = &fit->model;
    size_t border = lw_model_border(model);
    for (size_t k = 0; k < fit->n + fit->n_beyond; k++) {
        size_t row = lw_model_row(model, k);
        fit->position[k] = fit->p[row];
        fit->area[k] = fit->p[row + 1];
        for (size_t j = 0; j < model->n_local; j++)
            fit->local[k][j] = fit->p[row + 2 + j];
    }
    memcpy(fit->background, fit->p + border, model->n_background * sizeof(double));
    memcpy(fit->global, fit->p + border + model->n_background, model->n_globals * sizeof(double));
}

lw_status lw__fit_stage(lw_fit_state *fit, int rounds, bool final, lw_error *err)
{
    bool from_model = fit->options->weights == 0 && fit->scan->noise != LW_NOISE_SIGMA;
    /* Weights and model settle together: while the weights still move, a sharp end would be for nothing. */
    bool sharp = final && !from_model;
    for (int round = 0; round < rounds; round++) {
        lw_status status = lw__fit_pack(fit, err);
        if (status != LW_OK)
            return status;
        bool changed = lw_model_windows(&fit->model, fit->p, fit->options->window);
        if (round > 0 && !changed && !from_model)
            break; /* the same least squares once more */
        lw_problem problem = {.n = fit->n_parameters, .lower = fit->lower, .upper = fit->upper, .fixed = fit->fixed,
                              .border = fit->n_parameters - lw_model_border(&fit->model),
                              .evaluate = lw__fit_evaluate, .user = fit};
        lw_width_form form;
        lw_arena_mark mark = lw_arena_mark_now(&fit->scratch);
        bool in_form = lw__fit_enter_form(fit, &form, err);
        if (err != NULL && err->status != LW_OK)
            return err->status;
        if (in_form) {
            problem.evaluate = lw__fit_evaluate_form;
            problem.user = &form;
        }
        lw_fit_control control = lw_fit_control_defaults();
        control.iterations_most = final ? 200 : 60;
        control.chi2_tolerance = sharp ? 1e-9 : 1e-4;
        control.step_tolerance = sharp ? 1e-3 : 0.1; /* what is on the way need not end sharper than it is used */
        control.scratch = &fit->scratch;
        lw_fit_outcome outcome;
        status = lw_least_squares(fit->engine, &problem, &control, fit->p, fit->at_bound, &outcome, err);
        if (status != LW_OK)
            return status;
        if (in_form)
            lw__fit_leave_form(fit, &form);
        lw_arena_rewind(&fit->scratch, mark);
        double before = fit->chi2;
        fit->iterations += outcome.iterations;
        fit->converged = outcome.converged;
        fit->stopped = outcome.reason;
        fit->chi2 = outcome.chi2;
        lw__fit_unpack(fit);
        if (from_model) {
            lw_normal look = {.n = fit->n_parameters};
            if (!outcome.at_last_evaluation)
                status = lw_model_evaluate(&fit->model, fit->p, false, &look, err);
            if (status != LW_OK)
                return status;
            lw_fit_weigh(fit, true);
        }
        if (!final && round > 0)
            break;
        double change = round > 0 ? fabs(fit->chi2 - before) / before : 1;
        if (sharp && fit->converged && change < 1e-5)
            break;
        sharp = final && (sharp || change < 1e-4 || round + 3 >= rounds);
    }
    return LW_OK;
}
