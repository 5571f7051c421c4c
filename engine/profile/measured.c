/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/measured.h"

#include "line/curve.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define LEAST 0.02 /* of the calibration's coefficient: a division by less makes anything of nothing */
#define OVERLAP                                                                                              \
    0.25 /* share of a line under its neighbours from which on it is no measurement of a profile */

lw_status lw__take_standard(const lw_profiles *profiles, const lw_lines *standard, lw_arena *arena,
                            lw__standard *out, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    const char *file = standard->scan->file;
    if (!lw_radiation_same(&standard->radiation, &lines->radiation))
        return lw_fail_at(err, LW_BAD_ARGUMENT, file, 0, "measure both with one radiation",
                          "the standard was measured with %s (%.6f nm), the sample with %s (%.6f nm)",
                          standard->radiation.name, lw_radiation_wavelength(&standard->radiation),
                          lines->radiation.name, lw_radiation_wavelength(&lines->radiation));
    if (strcmp(standard->shape, "voigt") != 0)
        return lw_fail_at(err, LW_BAD_ARGUMENT, file, 0, "fit the standard's lines with shape = voigt",
                          "the standard's lines of shape %s have no closed transform", standard->shape);
    const lw_calibration *calibration = profiles->calibration;
    const lw_node *certified = calibration != NULL && calibration->record != NULL
                                   ? lw_node_get(calibration->record, "standard")
                                   : NULL;
    double edge = standard->material != NULL ? standard->material->cell.a : 0;
    double asked = certified != NULL ? lw_node_number(certified, "a", 0) : 0;
    if (asked > 0 && fabs(edge / asked - 1) > 1e-7)
        return lw_fail_at(
            err, LW_BAD_ARGUMENT, file, 0,
            "give the fitted lines of the standard that the instrument was calibrated with",
            "the calibration is from %s (a = %.7f nm), the lines given as its standard are of %s "
            "(a = %.7f nm)",
            lw_node_text(certified, "name", "a standard"), asked,
            standard->material != NULL ? standard->material->name : "no known material", edge);
    *out = (lw__standard){.shown = {.lines = standard, .calibration = calibration}};
    out->shown.profile = lw_arena_take(arena, standard->n + 1, sizeof *out->shown.profile, err);
    out->line = lw_arena_take(arena, standard->n + 1, sizeof *out->line, err);
    if (out->shown.profile == NULL || out->line == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < standard->n; k++) {
        const lw_line *line = &standard->line[k];
        if (line->supported && line->overlap < OVERLAP)
            out->shown.profile[out->shown.n++] =
                (lw_profile){.line = line, .theta_deg = 0.5 * line->two_theta.value};
    }
    return LW_OK;
}

/* Points of a line's window, its transform as fitted and the calibration's at its angle. */
static lw_status prepare(const lw_profiles *profiles, lw__standard *standard, size_t which, lw_arena *arena,
                         lw_error *err)
{
    const lw_profile *shown = &standard->shown.profile[which];
    const lw_lines *lines = standard->shown.lines;
    const lw_scan *scan = lines->scan;
    lw__standard_line *out = lw_arena_take(arena, 1, sizeof *out, err);
    lw_line *at = lw_arena_copy(arena, shown->line, 1, sizeof *at, err);
    lw_voigt_node *node = lw_arena_take(arena, LW_NODES_MOST, sizeof *node, err);
    lw__separation apart = {.line = lw_arena_take(arena, standard->shown.n, sizeof *apart.line, err),
                            .background = lines->background,
                            .residual = lw_arena_take(arena, scan->n, sizeof(double), err)};
    double *curve = lw_arena_take(arena, scan->n, sizeof *curve, err);
    if (!out || !at || !node || !apart.line || !apart.residual || !curve)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < scan->n; i++)
        apart.residual[i] = scan->intensity[i] - lines->fitted[i];
    lw_status status = lw_line_curve(lines, shown->line, scan->n, scan->two_theta_deg, curve, err);
    apart.line[which].curve = curve;
    if (status == LW_OK)
        status = lw__take_window(&standard->shown, which, &apart, 0, arena, &out->data, err);
    if (status != LW_OK)
        return status;
    double per_degree = lw__s_per_degree(&standard->shown, shown);
    for (size_t i = 0; i < out->data.n; i++) {
        out->data.s[i] /= per_degree;
        out->data.step[i] /= per_degree;
    }
    at->nominal_deg = out->angle_deg = shown->line->two_theta.value;
    lw_profile sample = {.line = at, .theta_deg = shown->theta_deg};
    if ((status = lw__take_instrument(profiles, &sample, arena, &out->model, err)) != LW_OK)
        return status;
    out->fitted.node = node;
    out->fitted.n =
        lw_line_all_nodes(lines, shown->line, false, node, &out->fitted.variance, &out->fitted.lorentz);
    out->fitted.per_degree = out->model.per_degree = 1;
    lw_width_figure figure;
    lw_width_figure_at(&profiles->lines->instrument, out->angle_deg, 0, 0, &figure);
    out->breadth_deg = figure.breadth_deg;
    out->area = shown->line->area.value;
    enum { n = 400 };
    double re[n], im[n], step = 0.02 / fmax(out->model.fwhm_deg, 1e-6);
    lw__instrument_transform(&out->model, step, n, re, im);
    size_t k = 1;
    while (k < n && hypot(re[k], im[k]) > LEAST)
        k++;
    out->end = step * (double)(k - 1);
    standard->line[which] = out;
    return LW_OK;
}

lw_status lw__take_measured(const lw_profiles *profiles, const lw_profile *profile, lw__standard *standard,
                            double reach_deg, lw_arena *arena, lw__measured *out, const char **how,
                            lw_error *err)
{
    double angle = profile->line->two_theta.value, away[2] = {INFINITY, INFINITY};
    size_t at[2] = {0, 0};
    const lw_lines *lines = standard->shown.lines;
    char hkl[2][24], own[24], text[120];
    const lw_reflection *r = &profile->line->reflection;
    lw_hkl_text(r->h, r->k, r->l, own, sizeof own);
    for (size_t k = 0; k < standard->shown.n; k++) {
        double d = standard->shown.profile[k].line->two_theta.value - angle;
        int side = d > 0;
        if (fabs(d) < away[side]) {
            away[side] = fabs(d);
            at[side] = k;
        }
    }
    *out = (lw__measured){0};
    for (int side = 0; side < 2; side++) {
        if (!(away[side] <= reach_deg))
            continue;
        size_t k = at[side];
        if (standard->line[k] == NULL) {
            lw_status status = prepare(profiles, standard, k, arena, err);
            if (status != LW_OK)
                return status;
        }
        if (standard->line[k]->data.n < 8)
            continue;
        r = &standard->shown.profile[k].line->reflection;
        lw_hkl_text(r->h, r->k, r->l, hkl[out->n], sizeof hkl[0]);
        out->weight[out->n] = away[1 - side]; /* of a line on one side alone: 1, below */
        out->stretch[out->n] = standard->line[k]->breadth_deg > 0
                                   ? profile->line->instrument_breadth_deg / standard->line[k]->breadth_deg
                                   : 1;
        out->line[out->n++] = standard->line[k];
    }
    if (out->n == 0) {
        int near = away[1] < away[0];
        if (!isfinite(away[near]))
            return lw_fail_at(err, LW_OUT_OF_RANGE, lines->scan->file, 0, "measure the standard longer",
                              "no line of the standard stands alone and out of the noise");
        r = &standard->shown.profile[at[near]].line->reflection;
        return lw_fail_at(
            err, LW_OUT_OF_RANGE, lines->scan->file, 0,
            "measure the standard over the sample's range, say standard_reach = more, or leave "
            "the instrument to the calibration",
            "no line of the standard within %.3g deg of %s at %.2f deg: the nearest, %s, is %.2f "
            "deg away",
            reach_deg, own, angle, lw_hkl_text(r->h, r->k, r->l, hkl[0], sizeof hkl[0]), away[near]);
    }
    if (out->n == 1) {
        out->weight[0] = 1;
        snprintf(text, sizeof text, "%s, %.2f deg away", hkl[0], fabs(out->line[0]->angle_deg - angle));
    } else {
        double sum = out->weight[0] + out->weight[1];
        for (int j = 0; j < 2; j++)
            out->weight[j] = sum > 0 ? out->weight[j] / sum : 0.5;
        snprintf(text, sizeof text, "%s and %s, %.2f and %.2f deg away (weights %.2f, %.2f)", hkl[0], hkl[1],
                 away[0], away[1], out->weight[0], out->weight[1]);
    }
    *how = lw_arena_print(
        arena, err, "instrument as measured on the standard's %s, taken as free of broadening of its own",
        text);
    return *how == NULL ? LW_OUT_OF_MEMORY : LW_OK;
}

/* Of one neighbour at lengths 0, step ... (1/deg): its transform as measured, over its area, and the
 * calibration's; both stay what they are from `end` on. wave (or NULL): [n][2 data.n] cosines and sines. */
static lw_status transforms(const lw__standard_line *line, double step, size_t n, double *measured[2],
                            double *model[2], double **wave, double *area, lw_arena *scratch, lw_error *err)
{
    const lw__window *data = &line->data;
    size_t m = data->n, last = n;
    double *turn = lw_arena_take(scratch, 4 * m + 1, sizeof *turn, err);
    for (int i = 0; i < 2; i++) {
        measured[i] = lw_arena_take(scratch, n, sizeof(double), err);
        model[i] = lw_arena_take(scratch, n, sizeof(double), err);
    }
    if (!turn || !measured[0] || !measured[1] || !model[0] || !model[1])
        return LW_OUT_OF_MEMORY;
    lw__instrument_transform(&line->model, step, n, model[0], model[1]);
    lw__instrument_transform(&line->fitted, step, n, measured[0], measured[1]);
    if (step > 0 && line->end / step < (double)n)
        last = (size_t)fmax(line->end / step, 1);
    *area = line->area;
    for (size_t i = 0; i < m; i++) {
        double phase = 2 * M_PI * step * data->s[i];
        turn[4 * i] = 1;
        turn[4 * i + 2] = cos(phase);
        turn[4 * i + 3] = sin(phase);
        *area += data->step[i] * data->residual[i];
    }
    for (size_t k = 0; k < n; k++) {
        if (k > last) { /* held */
            for (int i = 0; i < 2; i++) {
                measured[i][k] = measured[i][last];
                model[i][k] = model[i][last];
            }
            if (wave != NULL)
                memcpy(wave[k], wave[last], 2 * m * sizeof(double));
            continue;
        }
        double sum[2] = {0, 0};
        for (size_t i = 0; i < m; i++) {
            double *t = turn + 4 * i, x = data->step[i] * data->residual[i], next;
            sum[0] += x * t[0];
            sum[1] += x * t[1];
            if (wave != NULL) {
                wave[k][2 * i] = t[0];
                wave[k][2 * i + 1] = t[1];
            }
            next = t[0] * t[2] - t[1] * t[3];
            t[1] = t[0] * t[3] + t[1] * t[2];
            t[0] = next;
        }
        for (int i = 0; i < 2; i++)
            measured[i][k] = (line->area * measured[i][k] + sum[i]) / *area;
    }
    return LW_OK;
}

/* The factor at lengths 0, step ... (1/deg at the sample's line). */
static lw_status factor(const lw__measured *measured, double step, size_t n, double *out[2],
                        lw_arena *scratch, lw_error *err)
{
    for (int i = 0; i < 2; i++)
        if ((out[i] = lw_arena_take(scratch, n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < measured->n; j++) {
        double *g[2], *c[2], area;
        lw_status status =
            transforms(measured->line[j], step * measured->stretch[j], n, g, c, NULL, &area, scratch, err);
        if (status != LW_OK)
            return status;
        for (size_t k = 0; k < n; k++) {
            double square = c[0][k] * c[0][k] + c[1][k] * c[1][k];
            out[0][k] += measured->weight[j] * (g[0][k] * c[0][k] + g[1][k] * c[1][k]) / square;
            out[1][k] += measured->weight[j] * (g[1][k] * c[0][k] - g[0][k] * c[1][k]) / square;
        }
    }
    return LW_OK;
}

lw_status lw__carry_measured(const lw__measured *measured, double per_degree, double step, size_t n,
                             double *re, double *im, lw_arena *scratch, lw_error *err)
{
    double *by[2];
    lw_status status = factor(measured, step * per_degree, n, by, scratch, err);
    for (size_t k = 0; k < n && status == LW_OK; k++) {
        double x = re[k] * by[0][k] - im[k] * by[1][k];
        im[k] = re[k] * by[1][k] + im[k] * by[0][k];
        re[k] = x;
    }
    return status;
}

lw_status lw__measured_responses(const lw__measured *measured, size_t j, double per_degree, double step,
                                 size_t n, double **out, lw_arena *scratch, lw_error *err)
{
    const lw__window *data = &measured->line[j]->data;
    double *g[2], *c[2], *r[2], area;
    for (size_t k = 0; k < n; k++)
        if ((out[k] = lw_arena_take(scratch, 2 * data->n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    lw_status status = factor(measured, step * per_degree, n, r, scratch, err);
    if (status == LW_OK)
        status = transforms(measured->line[j], step * per_degree * measured->stretch[j], n, g, c, out, &area,
                            scratch, err);
    for (size_t k = 0; k < n && status == LW_OK; k++) {
        /* weight / (area x model x factor), a complex number */
        double x = c[0][k] * r[0][k] - c[1][k] * r[1][k], y = c[0][k] * r[1][k] + c[1][k] * r[0][k];
        double scale = measured->weight[j] / (area * (x * x + y * y));
        for (size_t i = 0; i < data->n; i++) {
            double u = out[k][2 * i] - g[0][k], v = out[k][2 * i + 1] - g[1][k];
            out[k][2 * i] = scale * data->step[i] * (u * x + v * y);
            out[k][2 * i + 1] = scale * data->step[i] * (v * x - u * y);
        }
    }
    return status;
}

lw_status lw__add_measured(const lw__measured *measured, double per_degree, lw_profile *profile,
                           lw_arena *scratch, lw_error *err)
{
    size_t n = profile->n_coefficients;
    double **by = lw_arena_take(scratch, n, sizeof *by, err);
    if (by == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < measured->n; j++) {
        const lw__window *data = &measured->line[j]->data;
        double *x = lw_arena_take(scratch, data->n, sizeof *x, err),
               *y = lw_arena_take(scratch, data->n, sizeof *y, err);
        if (x == NULL || y == NULL)
            return LW_OUT_OF_MEMORY;
        lw_status status =
            lw__measured_responses(measured, j, per_degree, profile->length_nm[1], n, by, scratch, err);
        if (status != LW_OK)
            return status;
        for (size_t k = 1; k < n; k++) {
            double re = profile->cosine[k], im = profile->sine[k];
            for (size_t i = 0; i < data->n; i++) { /* A = H/G: dA = -A d ln G */
                double u = by[k][2 * i], v = by[k][2 * i + 1];
                x[i] = re * u - im * v;
                y[i] = re * v + im * u;
            }
            profile->u_cosine[k] =
                hypot(profile->u_cosine[k], sqrt(lw__window_variance(data, x, data->own_variance)));
            profile->u_sine[k] =
                hypot(profile->u_sine[k], sqrt(lw__window_variance(data, y, data->own_variance)));
        }
    }
    return LW_OK;
}

lw_status lw__measured_slopes(const lw__measured *measured, double per_degree, const lw_profile *profile,
                              double breadth_s, lw_arena *arena, double *slopes[2], lw_error *err)
{
    size_t n =
        profile->truncated_at < profile->n_coefficients ? profile->truncated_at : profile->n_coefficients;
    lw_arena scratch;
    lw_arena_begin(&scratch, arena->engine);
    double **by = lw_arena_take(&scratch, n + 1, sizeof *by, err), step = profile->length_nm[1];
    lw_status status = by == NULL ? LW_OUT_OF_MEMORY : LW_OK;
    for (size_t j = 0; j < measured->n && status == LW_OK; j++) {
        const lw__window *data = &measured->line[j]->data;
        if ((slopes[j] = lw_arena_take(arena, data->n, sizeof(double), err)) == NULL)
            status = LW_OUT_OF_MEMORY;
        else
            status = lw__measured_responses(measured, j, per_degree, step, n, by, &scratch, err);
        for (size_t k = 1; k < n && status == LW_OK; k++)
            for (size_t i = 0; i < data->n; i++)
                slopes[j][i] += breadth_s * breadth_s * 2 * step *
                                (profile->cosine[k] * by[k][2 * i] - profile->sine[k] * by[k][2 * i + 1]);
    }
    lw_arena_end(&scratch);
    return status;
}

double lw__measured_covariance(const lw__measured *a, double *const by_a[2], const lw__measured *b,
                               double *const by_b[2], double correlation)
{
    double sum = 0;
    for (size_t i = 0; i < a->n; i++)
        for (size_t j = 0; j < b->n; j++) {
            if (a->line[i] != b->line[j] || by_a[i] == NULL || by_b[j] == NULL)
                continue;
            const lw__window *data = &a->line[i]->data;
            double level[2] = {0, 0}, with[2] = {0, 0};
            for (size_t k = 0; k < data->n; k++) {
                sum +=
                    by_a[i][k] * by_b[j][k] * data->own_variance[k] * (1 + correlation) / (1 - correlation);
                level[0] += by_a[i][k];
                level[1] += by_b[j][k];
                with[0] += by_a[i][k] * data->with_level[k];
                with[1] += by_b[j][k] * data->with_level[k];
            }
            sum += level[0] * level[1] * data->background_variance - level[0] * with[1] - level[1] * with[0];
        }
    return sum;
}
