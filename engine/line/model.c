/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Layout of the model, and the state of its lines at a point. */
#include "line/model_state.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;
/* Interpolation from the nodes of a part whose distance from the line is this many times its own length loses 1e-7 of
 * the tail there (5e-8, 1e-7 of a Lorentzian for a block and a bundle); a Gaussian is over, or smooth, at CORE times
 * the FWHM. */
#define BLOCK_MARGIN 1.75
#define BUNDLE_MARGIN 1.25
#define CORE 6

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

lw_status lw_model_prepare(lw_model *model, lw_arena *arena, lw_error *err)
{
    size_t n = model->n_lines, shapes = 1;
    if (model->table != NULL)
        shapes = model->table->n;
    else if (model->axial != LW_AXIAL_NONE)
        shapes = LW_AXIAL_NODES_MOST;
    model->nodes_most = shapes * model->radiation->n;
    /* written before they are read: zeroing them would only touch memory */
    model->near_columns = lw_arena_take_raw(arena, n * LW_COLUMNS * LW_BLOCK, sizeof(double), err);
    model->close_columns = lw_arena_take_raw(arena, n * LW_COLUMNS * LW_BUNDLE * LW_FAR_NODES, sizeof(double), err);
    model->bundle_columns = lw_arena_take_raw(arena, n * LW_COLUMNS * LW_BUNDLE_NODES, sizeof(double), err);
    model->line_nodes = lw_arena_take_raw(arena, n * model->nodes_most, sizeof(lw_voigt_node), err);
    model->merged = lw_arena_take_raw(arena, n * LW_EMISSION_MOST, sizeof(lw_voigt_node), err);
    model->n_line_nodes = lw_arena_take(arena, n, sizeof(size_t), err);
    model->n_merged = lw_arena_take(arena, n, sizeof(size_t), err);
    model->near = lw_arena_take(arena, n, sizeof(size_t), err);
    model->far = lw_arena_take(arena, n, sizeof(size_t), err);
    model->close = lw_arena_take(arena, n, sizeof(size_t), err);
    model->state = lw_arena_take(arena, n, sizeof(lw_line_state), err);
    if (!model->near_columns || !model->close_columns || !model->bundle_columns || !model->line_nodes ||
        !model->merged || !model->n_line_nodes || !model->n_merged || !model->near || !model->far || !model->close ||
        !model->state)
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
                            .table = model->table,
                            .table_deg = model->line[k].nominal_deg,
                            .parameter = {axial[0], axial[1]},
                            .slopes = {slopes[0], slopes[1]},
                            .copies = model->line[k].copies};
}

/* First and last block or bundle (from, end) of `size` points each that comes within the reach of low..high. */
static void reach_of(const lw_model *model, size_t n_parts, size_t size, double low, double high, double reach,
                     double margin_lengths, size_t *first, size_t *end)
{
    size_t padded = model->n_blocks * LW_BLOCK;
    *first = n_parts;
    *end = 0;
    for (size_t i = 0; i < n_parts; i++) {
        size_t last = (i + 1) * size < padded ? (i + 1) * size - 1 : padded - 1;
        double from = model->points.two_theta[i * size], to = model->points.two_theta[last];
        double margin = fmax(reach, margin_lengths * (to - from));
        if (to < low - margin || from > high + margin)
            continue;
        if (*first > i)
            *first = i;
        *end = i + 1;
    }
    if (*first > *end)
        *first = *end;
}

bool lw_model_windows(lw_model *model, const double *p, double window)
{
    bool changed = false;
    double axial[2];
    const bool no_slopes[2] = {false, false};
    axial_parameters(model, p, axial);
    for (size_t k = 0; k < model->n_lines; k++) {
        lw_model_line *line = &model->line[k], before = *line;
        const double *own = p + lw_model_row(model, k);
        double variance, lorentz;
        lw_model_widths(model, p, k, &variance, &lorentz);
        double width = lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), lorentz);
        lw_node_recipe recipe = recipe_of(model, k, axial, no_slopes);
        recipe.copies = line->copies = lw_recipe_copies(&recipe, line->nominal_deg, width);
        lw_voigt_node *node = model->line_nodes;
        size_t n = lw_line_nodes(&recipe, own[0], node);
        double low = 0, high = 0, spectral = 0;
        for (size_t i = 0; i < n; i++) {
            low = fmin(low, node[i].offset);
            high = fmax(high, node[i].offset);
            spectral = fmax(spectral, node[i].lorentz);
        }
        double reach = window * (width + spectral);
        reach_of(model, model->n_blocks, LW_BLOCK, own[0] + low, own[0] + high, fmin(window, CORE) * (width + spectral),
                 BLOCK_MARGIN, &line->core_first, &line->core_end);
        reach_of(model, model->n_blocks, LW_BLOCK, own[0] + low, own[0] + high, reach, BLOCK_MARGIN,
                 &line->near_first, &line->near_end);
        reach_of(model, model->n_bundles, LW_BLOCK * LW_BUNDLE, own[0] + low, own[0] + high, reach, BUNDLE_MARGIN,
                 &line->close_first, &line->close_end);
        changed |= line->core_first != before.core_first || line->core_end != before.core_end ||
                   line->near_first != before.near_first || line->near_end != before.near_end ||
                   line->close_first != before.close_first || line->close_end != before.close_end ||
                   line->copies.part[0] != before.copies.part[0] || line->copies.part[1] != before.copies.part[1];
    }
    return changed;
}

bool lw_model_set_lines(const lw_model *model, const double *p)
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
        lw_line_state *line = &model->state[k];
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
        lw_voigt_node *node = model->line_nodes + k * model->nodes_most;
        model->n_line_nodes[k] = lw_line_nodes(&recipe, line->position, node);
        double extra = 0;
        lw_voigt_node *merged = model->merged + k * LW_EMISSION_MOST;
        model->n_merged[k] = lw_line_nodes_merged(&recipe, line->position, merged, &extra);
        line->merged_variance = line->variance + extra;
        double narrowest = line->lorentz;
        for (size_t i = 0; i < model->n_line_nodes[k] && model->shape->is_voigt; i++)
            narrowest = fmin(narrowest, line->lorentz + node[i].lorentz);
        if (model->shape->is_voigt && !(line->variance > 0) && !(narrowest > 0))
            return false; /* a line without any width */
    }
    return true;
}

lw_status lw_model_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
#ifdef LW_RUNGS_X86
    const char *rung = ((const lw_model *)user)->kernel->rung;
    if (strcmp(rung, "avx512") == 0)
        return lw_model_evaluate_avx512(user, p, want_normal, normal, err);
    if (strcmp(rung, "avx2") == 0)
        return lw_model_evaluate_avx2(user, p, want_normal, normal, err);
#endif
    return lw_model_evaluate_plain(user, p, want_normal, normal, err);
}
