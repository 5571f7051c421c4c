/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/model.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

/* What one line needs at every point of an evaluation. */
typedef struct lw_line_state {
    double position, area;
    double variance, lorentz;                            /* totals, emission left out */
    double merged_variance;                              /* with the axial copies' variance */
    double slope_variance[LW_GLOBALS_MOST], slope_lorentz[LW_GLOBALS_MOST];
    double along, across;                                /* x = along sin(theta) - across, degrees */
    double tangent_over_cosine, secant2;
    double factor, factor_slope;                         /* intensity factor at the position; relative slope */
    const double *local;
} line_state;

/* Columns of one line over a run of points: value, then derivatives. */
typedef struct columns {
    double value[LW_BLOCK], position[LW_BLOCK], local[LW_LOCAL_MOST][LW_BLOCK], shape[LW_VOIGT_SHAPES][LW_BLOCK];
} columns;

size_t lw_model_row(const lw_model *model, size_t line)
{
    return line * (2 + model->n_local);
}

size_t lw_model_border(const lw_model *model)
{
    return model->n_lines * (2 + model->n_local);
}

size_t lw_model_parameters(const lw_model *model)
{
    return lw_model_border(model) + model->n_background + model->n_globals;
}

/* Dot product in eight partial sums: the compiler may use any vector width without changing the result. */
static double dot(const double *a, const double *b, size_t n)
{
    double sum[8] = {0};
    for (size_t i = 0; i < n; i += 8)
        for (size_t k = 0; k < 8; k++)
            sum[k] += a[i + k] * b[i + k];
    return ((sum[0] + sum[4]) + (sum[2] + sum[6])) + ((sum[1] + sum[5]) + (sum[3] + sum[7]));
}

double lw_model_factor(const lw_model *model, double two_theta_deg, double *relative_slope)
{
    if (!model->with_factor) {
        *relative_slope = 0;
        return 1;
    }
    double theta = two_theta_deg * degree / 2, c = cos(2 * theta), s = sin(2 * theta);
    double sine = sin(theta);
    double polarisation = model->constant_polarisation + model->cos2_monochromator * c * c;
    /* d/d(2theta) of ln(P/sin^2 theta) = P'/P - cot(theta) */
    *relative_slope = (-2 * model->cos2_monochromator * c * s / polarisation - cos(theta) / sine) * degree;
    return polarisation / (sine * sine);
}

lw_status lw_model_points(lw_model *model, const lw_scan *scan, size_t terms, bool hyperbola, const double *extra,
                          lw_arena *arena, lw_error *err)
{
    size_t n = scan->n, blocks = (n + LW_BLOCK - 1) / LW_BLOCK, padded = blocks * LW_BLOCK;
    size_t n_background = terms + hyperbola + (extra != NULL);
    double *angle = lw_arena_take(arena, padded, sizeof *angle, err);
    double *sine = lw_arena_take(arena, padded, sizeof *sine, err);
    double *factor = lw_arena_take(arena, padded, sizeof *factor, err);
    double *y = lw_arena_take(arena, padded, sizeof *y, err);
    double *weight = lw_arena_take(arena, padded, sizeof *weight, err);
    double *curve = lw_arena_take(arena, padded, sizeof *curve, err);
    double *basis = lw_arena_take(arena, padded * n_background, sizeof *basis, err);
    double *to_nodes = lw_arena_take(arena, padded * LW_FAR_NODES, sizeof *to_nodes, err);
    double *node_angle = lw_arena_take(arena, blocks * LW_FAR_NODES, sizeof *node_angle, err);
    if (!angle || !sine || !factor || !y || !weight || !curve || !basis || !to_nodes || !node_angle)
        return LW_OUT_OF_MEMORY;
    double step = n > 1 ? (scan->two_theta_deg[n - 1] - scan->two_theta_deg[0]) / (double)(n - 1) : 1;
    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[n - 1];
    for (size_t i = 0; i < padded; i++) {
        double slope;
        angle[i] = i < n ? scan->two_theta_deg[i] : high + step * (double)(i - n + 1);
        sine[i] = sin(fmin(angle[i], 179.99) * degree / 2);
        factor[i] = lw_model_factor(model, fmin(angle[i], 179.9), &slope);
        y[i] = i < n ? scan->intensity[i] : 0;
        double t = 2 * (angle[i] - low) / (high - low) - 1, before = 1, now = t;
        for (size_t k = 0; k < terms; k++) {
            basis[k * padded + i] = k == 0 ? 1 : now;
            if (k >= 1) {
                double next = 2 * t * now - before;
                before = now;
                now = next;
            }
        }
        if (hyperbola)
            basis[terms * padded + i] = 10 / fmax(angle[i], 0.1);
        if (extra != NULL)
            basis[(terms + hyperbola) * padded + i] = i < n ? extra[i] : 0;
    }
    double t_node[LW_FAR_NODES];
    for (int k = 0; k < LW_FAR_NODES; k++)
        t_node[k] = -cos(M_PI * (k + 0.5) / LW_FAR_NODES);
    for (size_t b = 0; b < blocks; b++) {
        double from = angle[b * LW_BLOCK], to = angle[b * LW_BLOCK + LW_BLOCK - 1];
        for (int k = 0; k < LW_FAR_NODES; k++) {
            node_angle[b * LW_FAR_NODES + (size_t)k] = 0.5 * (from + to) + 0.5 * (to - from) * t_node[k];
            for (size_t i = 0; i < LW_BLOCK; i++) {
                double t = (2 * angle[b * LW_BLOCK + i] - from - to) / (to - from), product = 1;
                for (int m = 0; m < LW_FAR_NODES; m++)
                    if (m != k)
                        product *= (t - t_node[m]) / (t_node[k] - t_node[m]);
                to_nodes[(b * LW_FAR_NODES + (size_t)k) * LW_BLOCK + i] = product;
            }
        }
    }
    model->n = n;
    model->n_blocks = blocks;
    model->two_theta = angle;
    model->sine = sine;
    model->factor = factor;
    model->y = y;
    model->weight = weight;
    model->curve = curve;
    model->n_background = n_background;
    model->basis = basis;
    model->to_nodes = to_nodes;
    model->node_angle = node_angle;
    return LW_OK;
}

lw_status lw_model_prepare(lw_model *model, lw_arena *arena, lw_error *err)
{
    size_t n = model->n_lines, m = 2 + model->n_local;
    model->near_columns = lw_arena_take(arena, n * m * LW_BLOCK, sizeof(double), err);
    model->far_columns = lw_arena_take(arena, n * m * LW_FAR_NODES, sizeof(double), err);
    model->nodes = lw_arena_take(arena, n * LW_NODES_MOST, sizeof(lw_voigt_node), err);
    model->merged = lw_arena_take(arena, n * LW_EMISSION_MOST, sizeof(lw_voigt_node), err);
    model->n_nodes = lw_arena_take(arena, n, sizeof(size_t), err);
    model->n_merged = lw_arena_take(arena, n, sizeof(size_t), err);
    model->near = lw_arena_take(arena, n, sizeof(size_t), err);
    model->far = lw_arena_take(arena, n, sizeof(size_t), err);
    model->state = lw_arena_take(arena, n, sizeof(line_state), err);
    if (!model->near_columns || !model->far_columns || !model->nodes || !model->merged || !model->n_nodes ||
        !model->n_merged || !model->near || !model->far || !model->state)
        return LW_OUT_OF_MEMORY;
    return LW_OK;
}

void lw_model_widths(const lw_model *model, const double *p, size_t line, double *gauss_variance, double *lorentz)
{
    double own[LW_WIDTH_PARAMETERS], instrument[LW_WIDTH_PARAMETERS], nominal = model->line[line].nominal_deg;
    memcpy(own, model->own, sizeof own);
    memcpy(instrument, model->instrument, sizeof instrument);
    const double *global = p + lw_model_border(model) + model->n_background;
    for (size_t i = 0; i < model->n_globals; i++)
        (model->global[i].of_instrument ? instrument : own)[model->global[i].parameter] = global[i];
    const double *local = p + lw_model_row(model, line) + 2;
    *gauss_variance = lw_width_gauss_variance(own, nominal, NULL) + lw_width_gauss_variance(instrument, nominal, NULL);
    *lorentz = lw_width_lorentz(own, nominal, NULL) + lw_width_lorentz(instrument, nominal, NULL);
    if (model->shape->is_voigt && model->n_local == 2) {
        *gauss_variance += local[0];
        *lorentz += local[1];
    } else if (!model->shape->is_voigt) {
        double fwhm, breadth, d_fwhm[LW_LOCAL_MOST], d_breadth[LW_LOCAL_MOST];
        model->shape->breadths(local, &fwhm, &breadth, d_fwhm, d_breadth);
        *gauss_variance = fwhm * fwhm;
        *lorentz = 0;
    }
}

/* Axial parameters that hold at p: the instrument's or the lines' own. */
static void axial_parameters(const lw_model *model, const double *p, double axial[2])
{
    for (int i = 0; i < 2; i++)
        axial[i] = model->instrument[LW_AXIAL_1 + i] + model->own[LW_AXIAL_1 + i];
    const double *global = p + lw_model_border(model) + model->n_background;
    for (size_t i = 0; i < model->n_globals; i++) {
        if (model->global[i].parameter == LW_AXIAL_1)
            axial[0] = global[i];
        if (model->global[i].parameter == LW_AXIAL_2 || model->global[i].tied)
            axial[1] = global[i];
    }
}

/* How the nodes of line k are made. */
static lw_node_recipe recipe_of(const lw_model *model, size_t k, const double axial[2], const bool slopes[2])
{
    return (lw_node_recipe){.radiation = model->radiation,
                            .on_s_axis = model->on_s_axis,
                            .spectral_widths = model->shape->is_voigt,
                            .axial = model->axial,
                            .parameter = {axial[0], axial[1]},
                            .slopes = {slopes[0], slopes[1]},
                            .copies = model->line[k].copies};
}

void lw_model_windows(lw_model *model, const double *p, double window)
{
    double axial[2];
    const bool no_slopes[2] = {false, false};
    axial_parameters(model, p, axial);
    for (size_t k = 0; k < model->n_lines; k++) {
        lw_model_line *line = &model->line[k];
        const double *own = p + lw_model_row(model, k);
        double variance, lorentz;
        lw_model_widths(model, p, k, &variance, &lorentz);
        double width = lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), lorentz);
        line->copies = lw_axial_copies(model->axial, axial, line->nominal_deg, width);
        lw_node_recipe recipe = recipe_of(model, k, axial, no_slopes);
        lw_voigt_node *node = model->nodes;
        size_t n = lw_line_nodes(&recipe, own[0], node);
        double low = 0, high = 0, spectral = 0;
        for (size_t i = 0; i < n; i++) {
            low = fmin(low, node[i].offset);
            high = fmax(high, node[i].offset);
            spectral = fmax(spectral, node[i].lorentz);
        }
        double reach = window * (width + spectral);
        line->near_first = model->n_blocks;
        line->near_end = 0;
        for (size_t b = 0; b < model->n_blocks; b++) {
            double from = model->two_theta[b * LW_BLOCK], to = model->two_theta[b * LW_BLOCK + LW_BLOCK - 1];
            double margin = fmax(reach, to - from); /* a tail is smooth on the scale of its distance */
            if (to < own[0] + low - margin || from > own[0] + high + margin)
                continue;
            if (line->near_first > b)
                line->near_first = b;
            line->near_end = b + 1;
        }
        if (line->near_first > line->near_end)
            line->near_first = line->near_end;
    }
}

/* Fills the line states and nodes at p; false where the model does not exist. */
static bool set_lines(const lw_model *model, const double *p, line_state *state)
{
    double own[LW_WIDTH_PARAMETERS], instrument[LW_WIDTH_PARAMETERS], axial[2];
    memcpy(own, model->own, sizeof own);
    memcpy(instrument, model->instrument, sizeof instrument);
    const double *global = p + lw_model_border(model) + model->n_background;
    bool slopes[LW_VOIGT_SHAPES] = {false};
    for (size_t i = 0; i < model->n_globals; i++) {
        const lw_global *g = &model->global[i];
        (g->of_instrument ? instrument : own)[g->parameter] = global[i];
        slopes[0] |= g->parameter == LW_AXIAL_1;
        slopes[1] |= g->parameter == LW_AXIAL_2 || g->tied;
    }
    axial_parameters(model, p, axial);
    for (size_t k = 0; k < model->n_lines; k++) {
        line_state *line = &state[k];
        const double *own_p = p + lw_model_row(model, k);
        double nominal = model->line[k].nominal_deg, slope_own[LW_WIDTH_PARAMETERS], slope_ins[LW_WIDTH_PARAMETERS];
        line->position = own_p[0];
        line->area = own_p[1];
        line->local = own_p + 2;
        if (!(line->position > 0 && line->position < 179.5))
            return false;
        line->variance = lw_width_gauss_variance(own, nominal, slope_own);
        if (!(line->variance > 0) && own[LW_W] > 0)
            return false; /* V took a real variance below zero */
        line->variance += lw_width_gauss_variance(instrument, nominal, slope_ins);
        for (size_t i = 0; i < model->n_globals; i++)
            line->slope_variance[i] =
                (model->global[i].of_instrument ? slope_ins : slope_own)[model->global[i].parameter];
        line->lorentz = lw_width_lorentz(own, nominal, slope_own) + lw_width_lorentz(instrument, nominal, slope_ins);
        for (size_t i = 0; i < model->n_globals; i++)
            line->slope_lorentz[i] =
                (model->global[i].of_instrument ? slope_ins : slope_own)[model->global[i].parameter];
        if (model->shape->is_voigt && model->n_local == 2) {
            line->variance += line->local[0];
            line->lorentz += line->local[1];
        }
        if (!isfinite(line->area) || !(line->variance >= 0) || !(line->lorentz >= 0))
            return false;
        double theta = line->position * degree / 2, cosine = cos(theta), tangent = tan(theta);
        line->along = 2 / (degree * cosine);
        line->across = 2 * tangent / degree;
        line->tangent_over_cosine = tangent / cosine;
        line->secant2 = 1 / (cosine * cosine);
        line->factor = lw_model_factor(model, line->position, &line->factor_slope);
        lw_node_recipe recipe = recipe_of(model, k, axial, slopes);
        lw_voigt_node *node = model->nodes + k * LW_NODES_MOST;
        model->n_nodes[k] = lw_line_nodes(&recipe, line->position, node);
        double extra = 0;
        lw_voigt_node *merged = model->merged + k * LW_EMISSION_MOST;
        model->n_merged[k] = lw_line_nodes_merged(&recipe, line->position, merged, &extra);
        line->merged_variance = line->variance + extra;
        double narrowest = line->lorentz;
        for (size_t i = 0; i < model->n_nodes[k] && model->shape->is_voigt; i++)
            narrowest = fmin(narrowest, line->lorentz + node[i].lorentz);
        if (model->shape->is_voigt && !(line->variance > 0) && !(narrowest > 0))
            return false; /* a line without any width */
    }
    return true;
}

/* Value and derivative columns of line k at n points (scan points or the far nodes). */
static void line_columns(const lw_model *model, const line_state *line, size_t k, bool near, size_t n,
                         const double *two_theta, const double *sine, const double *factor, bool slopes, columns *out)
{
    double x[LW_BLOCK], slope[LW_BLOCK];
    for (size_t i = 0; i < n; i++) {
        if (model->on_s_axis) {
            x[i] = line->along * sine[i] - line->across;
            slope[i] = line->secant2 - line->tangent_over_cosine * sine[i]; /* -dx/d(position) */
        } else {
            x[i] = two_theta[i] - line->position;
            slope[i] = 1;
        }
    }
    const lw_voigt_node *node = near ? model->nodes + k * LW_NODES_MOST
                                     : model->merged + k * LW_EMISSION_MOST;
    size_t n_nodes = near ? model->n_nodes[k] : model->n_merged[k];
    if (model->shape->is_voigt) {
        bool shapes = false;
        for (size_t i = 0; i < model->n_globals; i++)
            shapes |= model->global[i].parameter >= LW_AXIAL_1;
        shapes = shapes && near && slopes;
        lw_voigt_sums sums = {out->value, out->position, out->local[0], out->local[1],
                              {shapes ? out->shape[0] : NULL, shapes ? out->shape[1] : NULL}};
        model->kernel->sum(n, x, node, n_nodes, near ? line->variance : line->merged_variance, line->lorentz, !slopes,
                           &sums);
        if (slopes && !shapes)
            memset(out->shape, 0, sizeof out->shape);
    } else {
        double *local[LW_LOCAL_MOST];
        for (int i = 0; i < LW_LOCAL_MOST; i++)
            local[i] = out->local[i];
        lw_line_shape_sum(model->shape, n, x, node, n_nodes, line->local, out->value, out->position, local);
        memset(out->shape, 0, sizeof out->shape);
    }
    /* intensity factor across the line, normalised at its position */
    size_t n_local = model->shape->is_voigt ? 2 : model->n_local;
    for (size_t i = 0; i < n; i++) {
        double relative = factor[i] / line->factor;
        out->value[i] *= relative;
        if (slopes)
            out->position[i] = line->area * (relative * slope[i] * out->position[i] - out->value[i] * line->factor_slope);
    }
    if (!slopes)
        return;
    for (size_t j = 0; j < n_local; j++)
        for (size_t i = 0; i < n; i++)
            out->local[j][i] *= line->area * factor[i] / line->factor;
    for (size_t j = 0; j < LW_VOIGT_SHAPES; j++)
        for (size_t i = 0; i < n; i++)
            out->shape[j][i] *= line->area * factor[i] / line->factor;
}

/* Adds a line's share to the columns of the globals. */
static void add_globals(const lw_model *model, const line_state *line, const columns *from, size_t n, size_t stride,
                        double *into)
{
    for (size_t q = 0; q < model->n_globals; q++) {
        const lw_global *global = &model->global[q];
        double *column = into + q * stride;
        if (global->parameter == LW_AXIAL_1 || global->parameter == LW_AXIAL_2) {
            for (size_t i = 0; i < n; i++)
                column[i] += from->shape[global->parameter - LW_AXIAL_1][i] + (global->tied ? from->shape[1][i] : 0);
            continue;
        }
        double variance = line->slope_variance[q], lorentz = line->slope_lorentz[q];
        for (size_t i = 0; i < n; i++)
            column[i] += variance * from->local[0][i] + lorentz * from->local[1][i];
    }
}

lw_status lw_model_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    lw_model *model = user;
    size_t n_par = lw_model_parameters(model), m = 2 + model->n_local, border = lw_model_border(model);
    size_t nb = model->n_background, ng = model->n_globals, n_border = nb + ng, padded = model->n_blocks * LW_BLOCK;
    line_state *state = model->state;
    normal->chi2 = 0;
    if (!set_lines(model, p, state)) {
        normal->chi2 = INFINITY;
        return LW_OK;
    }
    double *h = normal->h, *g = normal->g;
    size_t *near = model->near, *far = model->far;
    for (size_t b = 0; b < model->n_blocks; b++) {
        size_t at = b * LW_BLOCK, n_near = 0, n_far = 0;
        const double *to_nodes = model->to_nodes + b * LW_FAR_NODES * LW_BLOCK;
        const double *weight = model->weight + at;
        double curve[LW_BLOCK], border_column[LW_GLOBALS_MOST][LW_BLOCK];
        double far_value[LW_FAR_NODES] = {0}, far_global[LW_GLOBALS_MOST][LW_FAR_NODES];
        double node_angle[LW_FAR_NODES], node_sine[LW_FAR_NODES], node_factor[LW_FAR_NODES];
        memset(far_global, 0, sizeof far_global);
        for (int j = 0; j < LW_FAR_NODES; j++) {
            double unused;
            node_angle[j] = model->node_angle[b * LW_FAR_NODES + (size_t)j];
            node_sine[j] = sin(fmin(node_angle[j], 179.99) * degree / 2);
            node_factor[j] = lw_model_factor(model, fmin(node_angle[j], 179.9), &unused);
        }
        columns own;
        for (size_t k = 0; k < model->n_lines; k++) {
            if (b >= model->line[k].near_first && b < model->line[k].near_end) {
                near[n_near++] = k;
                continue;
            }
            line_columns(model, &state[k], k, false, LW_FAR_NODES, node_angle, node_sine, node_factor, want_normal, &own);
            for (int j = 0; j < LW_FAR_NODES; j++)
                far_value[j] += state[k].area * own.value[j];
            if (want_normal) {
                add_globals(model, &state[k], &own, LW_FAR_NODES, LW_FAR_NODES, far_global[0]);
                double *column = model->far_columns + n_far * m * LW_FAR_NODES;
                memcpy(column, own.position, LW_FAR_NODES * sizeof(double));
                memcpy(column + LW_FAR_NODES, own.value, LW_FAR_NODES * sizeof(double));
                for (size_t j = 0; j < model->n_local; j++)
                    memcpy(column + (2 + j) * LW_FAR_NODES, own.local[j], LW_FAR_NODES * sizeof(double));
            }
            far[n_far++] = k;
        }
        memset(curve, 0, sizeof curve);
        for (int j = 0; j < LW_FAR_NODES; j++)
            for (size_t i = 0; i < LW_BLOCK; i++)
                curve[i] += far_value[j] * to_nodes[(size_t)j * LW_BLOCK + i];
        for (size_t k = 0; k < nb; k++) {
            const double *basis = model->basis + k * padded + at;
            double scale = p[border + k];
            for (size_t i = 0; i < LW_BLOCK; i++)
                curve[i] += scale * basis[i];
        }
        if (want_normal)
            for (size_t q = 0; q < ng; q++) {
                memset(border_column[q], 0, sizeof border_column[q]);
                for (int j = 0; j < LW_FAR_NODES; j++)
                    for (size_t i = 0; i < LW_BLOCK; i++)
                        border_column[q][i] += far_global[q][j] * to_nodes[(size_t)j * LW_BLOCK + i];
            }
        for (size_t e = 0; e < n_near; e++) {
            const line_state *line = &state[near[e]];
            line_columns(model, line, near[e], true, LW_BLOCK, model->two_theta + at, model->sine + at,
                         model->factor + at, want_normal, &own);
            for (size_t i = 0; i < LW_BLOCK; i++)
                curve[i] += line->area * own.value[i];
            if (want_normal) {
                add_globals(model, line, &own, LW_BLOCK, LW_BLOCK, border_column[0]);
                double *column = model->near_columns + e * m * LW_BLOCK;
                memcpy(column, own.position, sizeof own.position);
                memcpy(column + LW_BLOCK, own.value, sizeof own.value);
                for (size_t j = 0; j < model->n_local; j++)
                    memcpy(column + (2 + j) * LW_BLOCK, own.local[j], sizeof own.local[j]);
            }
        }
        memcpy(model->curve + at, curve, sizeof curve);
        double residual[LW_BLOCK], weighted[LW_BLOCK];
        for (size_t i = 0; i < LW_BLOCK; i++) {
            residual[i] = weight[i] > 0 ? model->y[at + i] - curve[i] : 0;
            weighted[i] = weight[i] * residual[i];
        }
        normal->chi2 += dot(residual, weighted, LW_BLOCK);
        if (!want_normal)
            continue;
        /* border with border, border with near lines, near lines among themselves */
        double scaled[LW_BLOCK];
        for (size_t r = 0; r < n_border; r++) {
            const double *row = r < nb ? model->basis + r * padded + at : border_column[r - nb];
            g[border + r] += dot(row, weighted, LW_BLOCK);
            for (size_t i = 0; i < LW_BLOCK; i++)
                scaled[i] = weight[i] * row[i];
            double *h_row = h + (border + r) * n_par;
            for (size_t c = 0; c <= r; c++)
                h_row[border + c] += dot(scaled, c < nb ? model->basis + c * padded + at : border_column[c - nb], LW_BLOCK);
            for (size_t e = 0; e < n_near; e++)
                for (size_t j = 0; j < m; j++)
                    h_row[near[e] * m + j] += dot(scaled, model->near_columns + (e * m + j) * LW_BLOCK, LW_BLOCK);
            if (n_far > 0) {
                double moment[LW_FAR_NODES];
                for (size_t j = 0; j < LW_FAR_NODES; j++)
                    moment[j] = dot(scaled, to_nodes + j * LW_BLOCK, LW_BLOCK);
                for (size_t f = 0; f < n_far; f++)
                    for (size_t j = 0; j < m; j++) {
                        const double *column = model->far_columns + (f * m + j) * LW_FAR_NODES;
                        double sum = 0;
                        for (size_t i = 0; i < LW_FAR_NODES; i++)
                            sum += moment[i] * column[i];
                        h_row[far[f] * m + j] += sum;
                    }
            }
        }
        for (size_t e = 0; e < n_near; e++)
            for (size_t j = 0; j < m; j++) {
                const double *column = model->near_columns + (e * m + j) * LW_BLOCK;
                size_t row = near[e] * m + j;
                g[row] += dot(column, weighted, LW_BLOCK);
                for (size_t i = 0; i < LW_BLOCK; i++)
                    scaled[i] = weight[i] * column[i];
                for (size_t f = 0; f <= e; f++) {
                    size_t last = f == e ? j + 1 : m;
                    for (size_t c = 0; c < last; c++)
                        h[row * n_par + near[f] * m + c] +=
                            dot(scaled, model->near_columns + (f * m + c) * LW_BLOCK, LW_BLOCK);
                }
            }
        if (n_far > 0) {
            double moment[LW_FAR_NODES], square[LW_FAR_NODES][LW_FAR_NODES] = {{0}};
            for (size_t j = 0; j < LW_FAR_NODES; j++)
                moment[j] = dot(weighted, to_nodes + j * LW_BLOCK, LW_BLOCK);
            for (size_t j = 0; j < LW_FAR_NODES && model->whole_normal; j++) {
                for (size_t i = 0; i < LW_BLOCK; i++)
                    scaled[i] = weight[i] * to_nodes[j * LW_BLOCK + i];
                for (size_t c = 0; c < LW_FAR_NODES; c++)
                    square[j][c] = dot(scaled, to_nodes + c * LW_BLOCK, LW_BLOCK);
            }
            for (size_t f = 0; f < n_far; f++)
                for (size_t j = 0; j < m; j++) {
                    const double *column = model->far_columns + (f * m + j) * LW_FAR_NODES;
                    size_t row = far[f] * m + j;
                    for (size_t i = 0; i < LW_FAR_NODES; i++)
                        g[row] += moment[i] * column[i];
                    for (size_t c = 0; c <= j && model->whole_normal; c++) {
                        const double *other = model->far_columns + (f * m + c) * LW_FAR_NODES;
                        double sum = 0;
                        for (size_t i = 0; i < LW_FAR_NODES; i++)
                            for (size_t t = 0; t < LW_FAR_NODES; t++)
                                sum += column[i] * square[i][t] * other[t];
                        h[row * n_par + far[f] * m + c] += sum;
                    }
                }
        }
    }
    if (!isfinite(normal->chi2))
        normal->chi2 = INFINITY;
    return lw_engine_poll(model->engine, err);
}
