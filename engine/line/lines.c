/* SPDX-License-Identifier: GPL-3.0-or-later */
/* From a converged fit to lines with uncertainties. */
#include "line/fit_state.h"
#include "numeric/cholesky.h"
#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

/* Normal matrix at the present point, with every line's own blocks complete; the lower triangle. */
static lw_status normal_matrix(lw_fit_state *fit, const double *p, size_t n, lw_normal *normal, lw_error *err)
{
    normal->n = n;
    normal->h = lw_arena_take(&fit->scratch, n * n, sizeof(double), err);
    normal->g = lw_arena_take(&fit->scratch, n, sizeof(double), err);
    if (normal->h == NULL || normal->g == NULL)
        return LW_OUT_OF_MEMORY;
    fit->model.whole_normal = true;
    lw_status status = lw__fit_evaluate(fit, p, true, normal, err);
    fit->model.whole_normal = false;
    return status;
}

static lw_status undetermined(const lw_fit_state *fit, const char *name, lw_error *err)
{
    return lw_fail_at(err, LW_NOT_SUPPORTED, fit->scan->file, 0,
                      "is it the right material and radiation? if so hold it (fixed), use widths = \"smooth\", or leave the "
                      "line out",
                      "the data do not determine the parameter '%s'", name);
}

static const char *name_of(lw_fit_state *fit, lw_arena *arena, size_t row, lw_error *err)
{
    const lw_model *model = &fit->model;
    size_t border = lw_model_border(model), m = 2 + model->n_local;
    if (row < border) {
        const lw_reflection *r = &fit->reflection[row / m];
        char hkl[24];
        size_t field = row % m;
        return lw_arena_print(arena, err, row / m < fit->n ? "%s %s" : "%s %s, beyond the scan", lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl),
                              field == 0 ? "position" : field == 1 ? "area" : model->shape->local[field - 2]);
    }
    row -= border;
    if (row < fit->terms)
        return lw_arena_print(arena, err, "background %zu", row);
    if (row < model->n_background)
        return fit->extra && row == model->n_background - 1 ? "background scan" : "background hyperbola";
    const lw_global *global = &model->global[row - model->n_background];
    return lw_width_name[global->parameter];
}

/* The shared width function with its covariance c[n*n] of the present layout. */
static void take_shared(const lw_fit_state *fit, const double *c, size_t n, lw_width_function *shared)
{
    const lw_model *model = &fit->model;
    size_t first = lw_model_border(model) + model->n_background;
    int rows[LW_GLOBALS_MOST][2];
    for (size_t i = 0; i < model->n_globals; i++) {
        rows[i][0] = model->global[i].parameter;
        rows[i][1] = model->global[i].tied ? LW_AXIAL_2 : -1;
        for (int a = 0; a < 2; a++)
            if (rows[i][a] >= 0) {
                shared->value[rows[i][a]] = fit->global[i];
                shared->refined[rows[i][a]] = !fit->fixed[first + i];
            }
    }
    for (size_t i = 0; i < model->n_globals; i++)
        for (size_t j = 0; j < model->n_globals; j++)
            for (int a = 0; a < 2; a++)
                for (int b = 0; b < 2; b++)
                    if (rows[i][a] >= 0 && rows[j][b] >= 0)
                        shared->covariance[rows[i][a]][rows[j][b]] = c[(first + i) * n + first + j];
}

/* The stage before ended loosely, but what is read off now is kept: the inverse gives the step to its end. A step of more
 * than one u is not one to the end, and is left out, as is one over a bound. */
static void last_step(lw_fit_state *fit, const double *c, const double *g)
{
    size_t n = fit->n_parameters;
    for (int pass = 0; pass < 2; pass++)
        for (size_t i = 0; i < n; i++) {
            double step = lw_dot(c + i * n, g, n), to = fit->p[i] + step;
            if (pass == 0 && step * step > c[i * n + i])
                return;
            if (pass == 1 && to > fit->lower[i] && to < fit->upper[i])
                fit->p[i] = to;
        }
    lw__fit_unpack(fit);
}

lw_status lw_fit_survey(lw_fit_state *fit, double *u, lw_error *err)
{
    size_t n = fit->n_parameters, weakest = 0;
    lw_normal normal;
    lw_status status = normal_matrix(fit, fit->p, n, &normal, err);
    if (status != LW_OK)
        return status;
    double *c = lw_arena_take(&fit->scratch, n * n, sizeof *c, err);
    bool *skip = lw_arena_take(&fit->scratch, n, sizeof *skip, err);
    if (c == NULL || skip == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        skip[i] = fit->fixed[i] || fit->at_bound[i];
    status = lw_invert_bordered(fit->engine, normal.h, n, n - lw_model_border(&fit->model), skip, c, &weakest, err);
    if (status == LW_NOT_SUPPORTED && err != NULL)
        *err = LW_ERROR_NONE;
    for (size_t k = 0; k < fit->n; k++) {
        size_t row = lw_model_row(&fit->model, k) + 1;
        /* without an inverse the diagonal alone gives the least possible uncertainty */
        u[k] = status == LW_OK ? sqrt(c[row * n + row]) : sqrt(1 / fmax(normal.h[row * n + row], 1e-300));
    }
    if (status == LW_OK) {
        last_step(fit, c, normal.g);
        take_shared(fit, c, n, &fit->shared);
    }
    return status == LW_NOT_SUPPORTED ? LW_OK : status;
}

/* Covariance of the fitted parameters: counting, then the instrument's part by
 * p(q) = -H_pp^-1 H_pq dq for the instrument's parameters q with their own covariance. */
static lw_status covariance(lw_fit_state *fit, lw_error *err)
{
    lw_lines *lines = fit->lines;
    lw_model *model = &fit->model;
    size_t n = fit->n_parameters, nuisance = 0, which[LW_WIDTH_PARAMETERS];
    if (lines->has_instrument)
        for (size_t i = 0; i < LW_WIDTH_PARAMETERS; i++)
            if (lines->instrument.covariance[i][i] > 0)
                which[nuisance++] = i;
    size_t own_globals = model->n_globals, whole = n + nuisance, weakest = 0;
    double *p = lw_arena_take(&fit->scratch, whole, sizeof *p, err);
    bool *skip = lw_arena_take(&fit->scratch, whole, sizeof *skip, err);
    double *c = lw_arena_take(&lines->arena, n * n, sizeof *c, err);
    double *pp = lw_arena_take(&fit->scratch, n * n, sizeof *pp, err);
    if (!p || !skip || !c || !pp)
        return LW_OUT_OF_MEMORY;
    memcpy(p, fit->p, n * sizeof *p);
    for (size_t i = 0; i < nuisance; i++) {
        p[n + i] = lines->instrument.value[which[i]];
        model->global[own_globals + i] = (lw_global){.of_instrument = true, .parameter = (int)which[i]};
    }
    model->n_globals = own_globals + nuisance;
    lw_model_windows(model, p, 1.5 * fit->options->window);
    lw_normal normal;
    lw_status status = normal_matrix(fit, p, whole, &normal, err);
    model->n_globals = own_globals;
    if (status != LW_OK)
        return status;
    lines->chi2 = normal.chi2;
    for (size_t i = 0; i < n; i++) {
        /* a width at 0 still has an uncertainty; an axial tail at 0 has none to first order and would only blur the places */
        bool axial = i >= lw_model_border(model) + model->n_background &&
                     model->global[i - lw_model_border(model) - model->n_background].parameter >= LW_AXIAL_1;
        skip[i] = fit->fixed[i] || (axial && fit->at_bound[i]);
        memcpy(pp + i * n, normal.h + i * whole, n * sizeof *pp);
    }
    status = lw_invert_bordered(fit->engine, pp, n, n - lw_model_border(model), skip, c, &weakest, err);
    if (status == LW_NOT_SUPPORTED) {
        /* a parameter on its bound may be the one that can't be told: it then counts as held */
        bool helped = false;
        for (size_t i = 0; i < n; i++) {
            helped |= fit->at_bound[i] && !skip[i];
            skip[i] |= fit->at_bound[i];
        }
        if (helped && err != NULL)
            *err = LW_ERROR_NONE;
        if (helped)
            status = lw_invert_bordered(fit->engine, pp, n, n - lw_model_border(model), skip, c, &weakest, err);
        if (status == LW_NOT_SUPPORTED) {
            if (err != NULL)
                *err = LW_ERROR_NONE;
            return undetermined(fit, name_of(fit, &fit->scratch, weakest, err), err);
        }
    }
    if (status != LW_OK)
        return status;
    double factor2 = lines->misfit_factor * lines->misfit_factor;
    for (size_t i = 0; i < n * n; i++)
        c[i] *= factor2;
    lines->covariance = c;
    if (nuisance == 0)
        return LW_OK;
    double *part = lw_arena_take(&lines->arena, n * n, sizeof *part, err);
    double *s = lw_arena_take(&fit->scratch, n * nuisance, sizeof *s, err);
    double *slope = lw_arena_take(&lines->arena, n * LW_WIDTH_PARAMETERS, sizeof *slope, err);
    if (part == NULL || s == NULL || slope == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        for (size_t q = 0; q < nuisance; q++) {
            double sum = 0;
            for (size_t j = 0; j < n; j++)
                sum -= c[i * n + j] / factor2 * normal.h[(n + q) * whole + j];
            s[i * nuisance + q] = slope[i * LW_WIDTH_PARAMETERS + which[q]] = sum;
        }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j <= i; j++) {
            double sum = 0;
            for (size_t q = 0; q < nuisance; q++)
                for (size_t r = 0; r < nuisance; r++)
                    sum += s[i * nuisance + q] * lines->instrument.covariance[which[q]][which[r]] * s[j * nuisance + r];
            part[i * n + j] = part[j * n + i] = sum;
        }
    for (size_t i = 0; i < n * n; i++)
        c[i] += part[i];
    lines->from_instrument = part;
    lines->to_instrument = slope;
    return LW_OK;
}

/* Chi-square, agreement factors and what the residuals say about the model. */
static lw_status statistics(lw_fit_state *fit, lw_error *err)
{
    lw_lines *lines = fit->lines;
    const lw_scan *scan = fit->scan;
    size_t n = scan->n, free_parameters = 0;
    lw_normal look = {.n = fit->n_parameters};
    lw_model_windows(&fit->model, fit->p, fit->options->window);
    lw_status status = lw_model_evaluate(&fit->model, fit->p, false, &look, err);
    if (status != LW_OK)
        return status;
    for (size_t i = 0; i < fit->n_parameters; i++)
        free_parameters += !fit->fixed[i];
    lines->fitted = lw_arena_copy(&lines->arena, fit->model.curve, n, sizeof(double), err);
    lines->background = lw_arena_take(&lines->arena, n, sizeof(double), err);
    if (lines->fitted == NULL || lines->background == NULL)
        return LW_OUT_OF_MEMORY;
    size_t padded = fit->model.n_blocks * LW_BLOCK;
    double residual = 0, total = 0, step = 0, square = 0, before = 0;
    for (size_t i = 0; i < n; i++) {
        for (size_t k = 0; k < fit->model.n_background; k++)
            lines->background[i] += fit->background[k] * fit->model.basis[k * padded + i];
        double weight = 1 / lines->variance[i], r = scan->intensity[i] - lines->fitted[i], z = r * sqrt(weight);
        residual += weight * r * r;
        total += weight * scan->intensity[i] * scan->intensity[i];
        if (i > 0)
            step += (z - before) * (z - before);
        square += z * z;
        before = z;
    }
    double missed = 0, lines_square = 0;
    for (size_t i = 0; i < n; i++) {
        double r = scan->intensity[i] - lines->fitted[i], net = scan->intensity[i] - lines->background[i];
        missed += r * r - lines->variance[i];
        lines_square += net * net - lines->variance[i];
    }
    if (lines_square > 0 && missed > 0.25 * lines_square)
        return lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0,
                          "is it the right material and radiation, and is it alone in the specimen?",
                          "the reflections describe only %.0f %% of what stands above the background",
                          100 * (1 - sqrt(missed / lines_square)));
    double freedom = (double)n - (double)free_parameters;
    if (!(freedom > 0))
        return lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0, "use fewer lines or a longer scan",
                          "more parameters (%zu) than points (%zu)", free_parameters, n);
    lines->chi2 = residual;
    lines->n_points = n;
    lines->rwp = sqrt(residual / total);
    lines->rexp = sqrt(freedom / total);
    lines->goodness = sqrt(residual / freedom);
    lines->durbin_watson = step / square;
    lines->misfit_p = lw_chi2_tail(residual, freedom);
    /* neighbours' residuals of the right model are independent (scaled noise: correlated by the instrument) */
    double rho = 1 - lines->durbin_watson / 2 - scan->correlation, rho_u = 1 / sqrt((double)n);
    bool correlated = rho > 3 * rho_u, large = lines->misfit_p < 1e-3;
    lines->misfit_factor = 1;
    /* noise that is itself correlated makes all uncertainties larger by the long-run variance */
    double factor2 = (1 + scan->correlation) / (1 - scan->correlation);
    if (fit->options->misfit && (large || correlated)) {
        if (large)
            factor2 *= residual / freedom;
        if (correlated)
            factor2 *= (1 + fmin(rho, 0.9)) / (1 - fmin(rho, 0.9));
    }
    lines->misfit_factor = sqrt(fmax(factor2, 1));
    if (large || correlated) {
        const char *text = lw_arena_print(&lines->arena, err,
                                          "the shape misses the data: goodness of fit %.3f (p = %.1e), Durbin-Watson %.2f "
                                          "(2 = no pattern left); all uncertainties were multiplied by %.2f",
                                          lines->goodness, lines->misfit_p, lines->durbin_watson, lines->misfit_factor);
        if (text == NULL)
            return LW_OUT_OF_MEMORY;
        lines->misfit = text;
    }
    return LW_OK;
}

/* u of a function of the line's own Gaussian FWHM^2 and Lorentzian FWHM, given its slopes. With
 * `counting` the instrument's part is left out: it cancels in the width of the whole line. */
static double u_of_widths(const lw_lines *lines, const lw_line *line, const double slopes[2], bool counting)
{
    size_t at[2] = {line->at_gauss, line->at_lorentz}, n = lines->n_parameters;
    double sum = 0;
    for (int i = 0; i < 2; i++)
        for (int j = 0; j < 2; j++)
            if (at[i] != LW_NO_PARAMETER && at[j] != LW_NO_PARAMETER) {
                double c = lines->covariance[at[i] * n + at[j]];
                if (counting && lines->from_instrument != NULL)
                    c -= lines->from_instrument[at[i] * n + at[j]];
                sum += slopes[i] * slopes[j] * c;
            }
    return sqrt(fmax(sum, 0));
}

/* u of the same function when the widths are the smooth function of angle. */
static double u_of_smooth(const lw_lines *lines, double two_theta, const double slopes[2])
{
    double g[LW_WIDTH_PARAMETERS], l[LW_WIDTH_PARAMETERS], sum = 0;
    lw_width_gauss_variance(lines->smooth.value, two_theta, g);
    lw_width_lorentz(lines->smooth.value, two_theta, l);
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
        for (int j = 0; j < LW_WIDTH_PARAMETERS; j++)
            sum += (slopes[0] * g[i] + slopes[1] * l[i]) * lines->smooth.covariance[i][j] *
                   (slopes[0] * g[j] + slopes[1] * l[j]);
    return sqrt(fmax(sum, 0));
}

/* Widths of a Voigt line: own parts, whole, and the instrument's. */
static void voigt_widths(lw_fit_state *fit, lw_line *line, size_t k)
{
    lw_lines *lines = fit->lines;
    const lw_model *model = &fit->model;
    double nominal = model->line[k].nominal_deg, own_variance, own_lorentz;
    bool local = model->n_local == 2;
    own_variance = local ? fit->local[k][0] : lw_width_gauss_variance(lines->smooth.value, nominal, NULL);
    own_lorentz = local ? fit->local[k][1] : lw_width_lorentz(lines->smooth.value, nominal, NULL);
    /* axial divergence: the instrument's, or the lines' own */
    lw_width_function base = lines->instrument;
    if (!lines->has_instrument) {
        memset(&base, 0, sizeof base);
        base.axial = lines->smooth.axial;
        base.value[LW_AXIAL_1] = lines->smooth.value[LW_AXIAL_1];
        base.value[LW_AXIAL_2] = lines->smooth.value[LW_AXIAL_2];
    }
    lw_width_figure whole, alone;
    lw_width_function exact = base;
    memset(exact.covariance, 0, sizeof exact.covariance);
    lw_width_figure_at(&exact, nominal, own_variance, own_lorentz, &whole);
    double d_phi[2], phi = whole.fwhm_deg / whole.breadth_deg;
    for (int i = 0; i < 2; i++)
        d_phi[i] = (whole.d_fwhm[i] - phi * whole.d_breadth[i]) / whole.breadth_deg;
    double gauss = sqrt(own_variance), slope_gauss[2] = {gauss > 0 ? 0.5 / gauss : 0, 0}, slope_lorentz[2] = {0, 1};
    double u[5];
    const double *slopes[5] = {whole.d_fwhm, whole.d_breadth, d_phi, slope_gauss, slope_lorentz};
    for (int i = 0; i < 5; i++)
        u[i] = local && !fit->hold_local[k] ? u_of_widths(lines, line, slopes[i], i < 3)
                                            : u_of_smooth(lines, nominal, slopes[i]);
    if (!(gauss > 0)) /* at its bound: the uncertainty of the square says how large it may be */
        u[3] = local && !fit->hold_local[k] ? sqrt(u_of_widths(lines, line, (const double[2]){1, 0}, false)) : 0;
    line->own_variance_deg2 = own_variance;
    line->own_lorentz_deg = own_lorentz;
    line->fwhm = lw_quantity_of(whole.fwhm_deg, u[0], "deg");
    line->breadth = lw_quantity_of(whole.breadth_deg, u[1], "deg");
    line->shape_ratio = lw_quantity_of(phi, u[2], "");
    line->gauss_fwhm = lw_quantity_of(gauss, u[3], "deg");
    line->lorentz_fwhm = lw_quantity_of(own_lorentz, u[4], "deg");
    line->height = lw_quantity_of(line->area.value / whole.breadth_deg, line->area.u / whole.breadth_deg, line->area.unit);
    if (lines->has_instrument) {
        lw_width_figure_at(&base, nominal, 0, 0, &alone);
        line->instrument_fwhm_deg = alone.fwhm_deg;
        line->instrument_breadth_deg = alone.breadth_deg;
        line->u_instrument_breadth_deg = alone.u_breadth;
    }
}

/* Widths of an empirical shape: from its parameters. */
static void empirical_widths(lw_fit_state *fit, lw_line *line, size_t k)
{
    lw_lines *lines = fit->lines;
    const lw_line_shape *shape = fit->model.shape;
    double fwhm, breadth, d_fwhm[LW_LOCAL_MOST], d_breadth[LW_LOCAL_MOST], var[3] = {0};
    shape->breadths(fit->local[k], &fwhm, &breadth, d_fwhm, d_breadth);
    double phi = fwhm / breadth;
    size_t row = lw_model_row(&fit->model, k) + 2, n = lines->n_parameters;
    for (size_t i = 0; i < (size_t)shape->n_local; i++)
        for (size_t j = 0; j < (size_t)shape->n_local; j++) {
            double c = lines->covariance[(row + i) * n + row + j];
            double phi_i = d_fwhm[i] / breadth - phi / breadth * d_breadth[i];
            double phi_j = d_fwhm[j] / breadth - phi / breadth * d_breadth[j];
            var[0] += d_fwhm[i] * c * d_fwhm[j];
            var[1] += d_breadth[i] * c * d_breadth[j];
            var[2] += phi_i * c * phi_j;
        }
    line->fwhm = lw_quantity_of(fwhm, sqrt(fmax(var[0], 0)), "deg");
    line->breadth = lw_quantity_of(breadth, sqrt(fmax(var[1], 0)), "deg");
    line->shape_ratio = lw_quantity_of(phi, sqrt(fmax(var[2], 0)), "");
    line->height = lw_quantity_of(line->area.value / breadth, line->area.u / breadth, line->area.unit);
    line->gauss_fwhm = line->lorentz_fwhm = lw_quantity_of(NAN, NAN, "deg");
}

static const char *remark_of(lw_fit_state *fit, const lw_line *line, size_t k)
{
    if (!line->supported)
        return "not supported by the data: its area is below three standard uncertainties";
    if (fit->hold_position[k])
        return "buried under its neighbours: its place was held where it is expected";
    if (fit->model.n_local > 0 && fit->hold_local[k])
        return line->overlap > 0.3 ? "overlaps with its neighbours: width taken from the function shared by all lines"
                                   : "weak: width taken from the function shared by all lines";
    return fit->remark[k];
}

static void take_beyond(const lw_fit_state *fit)
{
    fit->lines->n_beyond = fit->n_beyond;
    for (size_t b = 0; b < fit->n_beyond; b++) {
        size_t k = fit->n + b;
        fit->lines->beyond[b] = (lw_line_beyond){.reflection = fit->reflection[k],
                                                 .two_theta_deg = fit->position[k],
                                                 .area = fit->area[k],
                                                 .own_variance_deg2 = fit->local[k][0],
                                                 .own_lorentz_deg = fit->local[k][1],
                                                 .area_expected = fit->tie[b].mean,
                                                 .area_weight = fit->tie[b].weight};
    }
}

lw_status lw_fit_result(lw_fit_state *fit, lw_error *err)
{
    lw_lines *lines = fit->lines;
    const lw_model *model = &fit->model;
    lw_status status = statistics(fit, err);
    double chi2 = lines->chi2;
    if (status == LW_OK)
        status = covariance(fit, err);
    if (status != LW_OK)
        return status;
    lines->chi2 = chi2;
    size_t n = fit->n_parameters;
    lines->n_parameters = n;
    lines->shape = model->shape->name;
    lines->iterations = fit->iterations;
    lines->stopped = fit->stopped;
    lines->parameter = lw_arena_copy(&lines->arena, fit->p, n, sizeof(double), err);
    lines->parameter_name = lw_arena_take(&lines->arena, n, sizeof(char *), err);
    lines->line = lw_arena_take(&lines->arena, fit->n, sizeof(lw_line), err);
    lines->beyond = lw_arena_take(&lines->arena, fit->n_beyond, sizeof(lw_line_beyond), err);
    if (!lines->parameter || !lines->parameter_name || !lines->line || !lines->beyond)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        if ((lines->parameter_name[i] = name_of(fit, &lines->arena, i, err)) == NULL)
            return LW_OUT_OF_MEMORY;
    lines->smooth = fit->shared; /* empty, unless lines got widths of their own */
    for (size_t i = 0; i < LW_WIDTH_PARAMETERS; i++)
        for (size_t j = 0; j < LW_WIDTH_PARAMETERS; j++)
            lines->smooth.covariance[i][j] *= lines->misfit_factor * lines->misfit_factor;
    take_shared(fit, lines->covariance, n, &lines->smooth);
    lines->smooth.axial = lines->has_instrument ? LW_AXIAL_NONE : model->axial;
    lines->smooth.low_deg = fit->position[0];
    lines->smooth.high_deg = fit->position[fit->n - 1];
    lines->n = fit->n;
    lines->at_background = lw_model_border(model);
    lines->n_background = fit->terms;
    lines->on_s_axis = model->on_s_axis;
    lines->with_factor = model->with_factor;
    lines->constant_polarisation = model->constant_polarisation;
    lines->cos2_polarisation = model->cos2_monochromator;
    const char *unit = fit->scan->noise == LW_NOISE_COUNTS ? "counts deg" : "deg";
    for (size_t k = 0; k < fit->n; k++) {
        lw_line *line = &lines->line[k];
        size_t row = lw_model_row(model, k);
        line->reflection = fit->reflection[k];
        line->nominal_deg = model->line[k].nominal_deg;
        line->at_position = row;
        line->at_area = row + 1;
        bool free_local = model->shape->is_voigt && model->n_local == 2 && !fit->hold_local[k];
        line->at_gauss = free_local && !model->shape->held[0] ? row + 2 : LW_NO_PARAMETER;
        line->at_lorentz = free_local && !model->shape->held[1] ? row + 3 : LW_NO_PARAMETER;
        line->shared_width = model->n_local == 0 || fit->hold_local[k];
        line->held_position = fit->hold_position[k];
        line->two_theta = lw_quantity_of(fit->position[k], sqrt(lines->covariance[row * n + row]), "deg");
        line->area = lw_quantity_of(fit->area[k], sqrt(lines->covariance[(row + 1) * n + row + 1]), unit);
        line->supported = line->area.value > 3 * line->area.u;
        line->overlap = lw_fit_overlap(fit, k);
        if (model->shape->is_voigt)
            voigt_widths(fit, line, k);
        else
            empirical_widths(fit, line, k);
        line->remark = remark_of(fit, line, k);
        double sum = 0, reach = 1.5 * line->fwhm.value;
        size_t count = 0;
        for (size_t i = lw_point_at(fit->scan, fit->position[k] - reach);
             i < fit->scan->n && fit->scan->two_theta_deg[i] < fit->position[k] + reach; i++) {
            double r = fit->scan->intensity[i] - lines->fitted[i];
            sum += r * r / lines->variance[i];
            count++;
        }
        line->residual_misfit = count > 0 ? sum / (double)count : NAN;
    }
    take_beyond(fit);
    if (fit->extra != NULL) {
        size_t row = lw_model_border(model) + model->n_background - 1;
        lines->background_scan_scale = fit->p[row];
        lines->u_background_scan_scale = sqrt(lines->covariance[row * n + row]);
    }
    return err != NULL && err->status != LW_OK ? err->status : LW_OK;
}
