/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Columns of one line: its value and derivatives at a run of places. Part of a rung of the model. */
#include "line/model_state.h"

#include <string.h>

/* Offsets from the line and -dx/d(position) at a run of places. */
static void offsets(const lw_model *model, const lw_line_state *line, const lw_model_places *places, size_t from,
                    size_t count, double *x, double *slope)
{
    const double *two_theta = places->two_theta + from, *sine = places->sine + from;
    for (size_t i = 0; i < count; i++) {
        x[i] = model->on_s_axis ? line->along * sine[i] - line->across : two_theta[i] - line->position;
        slope[i] = model->on_s_axis ? line->secant2 - line->tangent_over_cosine * sine[i] : 1;
    }
}

static bool has_axial_slopes(const lw_model *model)
{
    for (size_t i = 0; i < model->n_globals; i++)
        if (model->global[i].parameter >= LW_AXIAL_1)
            return true;
    return false;
}

/* Value and derivatives of line k at `count` places from `from` on, at most LW_BLOCK. The columns, `stride` apart:
 * d/d(position), value (per unit area), d/d(local[...]) and, where axial parameters are fitted, d/d(axial). Without
 * slopes only the value is written. near: with all copies of the axial divergence. */
static void line_columns(const lw_model *model, size_t k, bool near, const lw_model_places *places, size_t from,
                      size_t count, bool slopes, double *column, size_t stride)
{
    const lw_line_state *line = &model->state[k];
    double x[LW_BLOCK], slope[LW_BLOCK], relative[LW_BLOCK];
    double *position = column, *value = column + stride, *local[LW_LOCAL_MOST], *shape[LW_VOIGT_SHAPES];
    for (size_t i = 0; i < LW_LOCAL_MOST; i++)
        local[i] = column + (2 + i) * stride;
    for (size_t i = 0; i < LW_VOIGT_SHAPES; i++)
        shape[i] = column + (2 + LW_LOCAL_MOST + i) * stride;
    offsets(model, line, places, from, count, x, slope);
    const lw_voigt_node *node = near ? model->line_nodes + k * model->nodes_most : model->merged + k * LW_EMISSION_MOST;
    size_t n_nodes = near ? model->n_line_nodes[k] : model->n_merged[k], n_columns = 2 + model->n_local;
    bool axial = slopes && model->shape->is_voigt && has_axial_slopes(model);
    if (model->shape->is_voigt) {
        bool shapes = axial && near; /* the tails of merged copies keep their place */
        lw_voigt_sums sums = {value, position, local[0], local[1],
                              {shapes ? shape[0] : NULL, shapes ? shape[1] : NULL}};
        model->kernel->sum(count, x, node, n_nodes, near ? line->variance : line->merged_variance, line->lorentz,
                           !slopes, &sums);
        n_columns = 4;
        for (size_t j = 0; j < LW_VOIGT_SHAPES && axial && !near; j++)
            memset(shape[j], 0, count * sizeof(double));
    } else
        lw_line_shape_sum(model->shape, count, x, node, n_nodes, line->local, slopes, value, position, local);
    /* intensity factor across the line, normalised at its position */
    for (size_t i = 0; i < count; i++) {
        relative[i] = places->factor[from + i] / line->factor;
        value[i] *= relative[i];
    }
    if (!slopes)
        return;
    for (size_t i = 0; i < count; i++) {
        relative[i] *= line->area;
        position[i] = relative[i] * slope[i] * position[i] - line->area * line->factor_slope * value[i];
    }
    for (size_t j = 2; j < n_columns; j++)
        for (size_t i = 0; i < count; i++)
            column[j * stride + i] *= relative[i];
    for (size_t j = 0; j < LW_VOIGT_SHAPES && axial && near; j++)
        for (size_t i = 0; i < count; i++)
            shape[j][i] *= relative[i];
}

/* Adds a line's share to the columns of the globals: into[q][i], rows `into_stride` apart. */
static void add_globals(const lw_model *model, size_t k, const double *column, size_t stride, size_t count,
                          double *into, size_t into_stride)
{
    const lw_line_state *line = &model->state[k];
    const double *of_variance = column + 2 * stride, *of_lorentz = column + 3 * stride;
    const double *axial = column + (2 + LW_LOCAL_MOST) * stride;
    for (size_t q = 0; q < model->n_globals; q++) {
        const lw_global *global = &model->global[q];
        double *to = into + q * into_stride;
        if (global->parameter >= LW_AXIAL_1) {
            const double *one = axial + (size_t)(global->parameter - LW_AXIAL_1) * stride;
            for (size_t i = 0; i < count; i++)
                to[i] += one[i];
            for (size_t i = 0; i < count && global->tied; i++)
                to[i] += axial[stride + i];
            continue;
        }
        double variance = line->slope_variance[q], lorentz = line->slope_lorentz[q];
        for (size_t i = 0; i < count; i++)
            to[i] += variance * of_variance[i] + lorentz * of_lorentz[i];
    }
}
