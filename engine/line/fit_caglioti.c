/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Gaussian part U tan^2 + V tan + W while it is fitted. A negative V can take it below zero between or at the lines,
 * where there is no model: a wall that no damping gets along. Written as U (tan - t)^2 + c with t > 0 it is the same
 * function, and what keeps it positive are the bounds U >= 0, c >= 0 that the least squares knows how to follow. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

/* Rows of U, V and W in the parameters; false unless all three are there and free. */
static bool find_rows(const lw_fit_state *fit, size_t row[3])
{
    size_t first = lw_model_border(&fit->model) + fit->model.n_background, found = 0;
    for (size_t i = 0; i < fit->model.n_globals; i++) {
        int parameter = fit->model.global[i].parameter;
        if (fit->model.global[i].of_instrument || parameter > LW_W || fit->fixed[first + i])
            continue;
        row[parameter - LW_U] = first + i;
        found++;
    }
    return found == 3;
}

bool lw__fit_enter_form(lw_fit_state *fit, lw_width_form *form, lw_error *err)
{
    size_t *row = form->row;
    *form = (lw_width_form){.fit = fit};
    if (fit->steep_upwards || !find_rows(fit, row) || fit->p[row[1]] > 0)
        return false;
    form->p = lw_arena_take(&fit->scratch, fit->n_parameters, sizeof *form->p, err);
    if (form->p == NULL)
        return false;
    double low = tan(fit->position[0] * M_PI / 360), high = tan(fit->position[fit->n - 1] * M_PI / 360);
    double *u = &fit->p[row[0]], *v = &fit->p[row[1]], *w = &fit->p[row[2]];
    double middle = 0.5 * (low + high);
    if (!(*u > 0)) /* without it t would move nothing */
        *u = 0.1 * *w / (middle * middle);
    double t = fmin(-*v / (2 * *u), 2 * high);
    *w = fmax(*w - *u * t * t, 0);
    *v = t;
    fit->lower[row[1]] = 0;
    fit->upper[row[1]] = 2 * high;
    return true;
}

/* U, V, W of the parameters in the form, at p[]. */
static void plain(const lw_width_form *form, const double *p, double *to)
{
    double u = p[form->row[0]], t = p[form->row[1]], c = p[form->row[2]];
    to[form->row[1]] = -2 * u * t;
    to[form->row[2]] = c + u * t * t;
}

void lw__fit_leave_form(lw_fit_state *fit, const lw_width_form *form)
{
    /* at t = 0 with the bottom to its left: V may have to be positive */
    if (fit->at_bound[form->row[1]] && fit->p[form->row[1]] <= 0)
        fit->steep_upwards = true;
    plain(form, fit->p, fit->p);
    fit->lower[form->row[1]] = -INFINITY;
    fit->upper[form->row[1]] = INFINITY;
}

static double *h_at(lw_normal *normal, size_t i, size_t j)
{
    return i >= j ? &normal->h[i * normal->n + j] : &normal->h[j * normal->n + i];
}

lw_status lw__fit_evaluate_form(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    const lw_width_form *form = user;
    const size_t *row = form->row;
    memcpy(form->p, p, normal->n * sizeof *p);
    plain(form, p, form->p);
    lw_status status = lw__fit_evaluate(form->fit, form->p, want_normal, normal, err);
    if (status != LW_OK || !want_normal || !isfinite(normal->chi2))
        return status;
    double u = p[row[0]], t = p[row[1]];
    /* derivatives of U, V, W (columns) to U, t, c (rows) */
    const double slope[3][3] = {{1, -2 * t, t * t}, {0, -2 * u, 2 * u * t}, {0, 0, 1}};
    double block[3][3], half[3][3], g[3];
    for (int a = 0; a < 3; a++) {
        g[a] = normal->g[row[a]];
        for (int b = 0; b < 3; b++)
            block[a][b] = *h_at(normal, row[a], row[b]);
    }
    for (size_t j = 0; j < normal->n; j++) {
        if (j == row[0] || j == row[1] || j == row[2])
            continue;
        double old[3];
        for (int a = 0; a < 3; a++)
            old[a] = *h_at(normal, row[a], j);
        for (int a = 0; a < 3; a++)
            *h_at(normal, row[a], j) = slope[a][0] * old[0] + slope[a][1] * old[1] + slope[a][2] * old[2];
    }
    for (int a = 0; a < 3; a++) {
        normal->g[row[a]] = slope[a][0] * g[0] + slope[a][1] * g[1] + slope[a][2] * g[2];
        for (int b = 0; b < 3; b++)
            half[a][b] = slope[a][0] * block[0][b] + slope[a][1] * block[1][b] + slope[a][2] * block[2][b];
    }
    for (int a = 0; a < 3; a++)
        for (int b = 0; b < 3; b++)
            *h_at(normal, row[a], row[b]) = slope[b][0] * half[a][0] + slope[b][1] * half[a][1] + slope[b][2] * half[a][2];
    return LW_OK;
}
