/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The places where a model is evaluated, how values get from one kind of place to the next, and the background. */
#include "line/model_state.h"
#include "numeric/cholesky.h"

#include <assert.h>
#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

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

static lw_status take_places(lw_model_places *places, size_t n, lw_arena *arena, lw_error *err)
{
    places->two_theta = lw_arena_take_raw(arena, n, sizeof(double), err);
    places->sine = lw_arena_take_raw(arena, n, sizeof(double), err);
    places->factor = lw_arena_take_raw(arena, n, sizeof(double), err);
    return places->two_theta && places->sine && places->factor ? LW_OK : LW_OUT_OF_MEMORY;
}

static void set_place(const lw_model *model, lw_model_places *places, size_t i, double two_theta_deg)
{
    places->two_theta[i] = two_theta_deg;
    places->factor[i] = 1;
    if (!model->on_s_axis && !model->with_factor)
        return; /* the sine is not used then */
    double sine = places->sine[i] = sin(fmin(two_theta_deg, 179.99) * degree / 2);
    if (model->with_factor) {
        double c = 1 - 2 * sine * sine;
        places->factor[i] = (model->constant_polarisation + model->cos2_monochromator * c * c) / (sine * sine);
    }
}

/* Chebyshev nodes between -1 and 1, ascending, and what the products of Lagrange's polynomials are divided by. */
typedef struct nodes_between {
    double at[LW_FAR_NODES], scale[LW_FAR_NODES];
} nodes_between;

static_assert(LW_BUNDLE_NODES == LW_FAR_NODES, "blocks and bundles share their nodes");

static void chebyshev_nodes(nodes_between *nodes)
{
    for (size_t k = 0; k < LW_FAR_NODES; k++)
        nodes->at[k] = -cos(M_PI * ((double)k + 0.5) / LW_FAR_NODES);
    for (size_t k = 0; k < LW_FAR_NODES; k++) {
        nodes->scale[k] = 1;
        for (size_t m = 0; m < LW_FAR_NODES; m++)
            if (m != k)
                nodes->scale[k] /= nodes->at[k] - nodes->at[m];
    }
}

/* Lagrange's polynomials of all nodes at t. */
static void lagrange(const nodes_between *nodes, double t, double value[LW_FAR_NODES])
{
    double before[LW_FAR_NODES], after = 1;
    before[0] = 1;
    for (size_t k = 1; k < LW_FAR_NODES; k++)
        before[k] = before[k - 1] * (t - nodes->at[k - 1]);
    for (size_t k = LW_FAR_NODES; k-- > 0;) {
        value[k] = before[k] * after * nodes->scale[k];
        after *= t - nodes->at[k];
    }
}

/* Where point i of a block stands between the block's first and last, -1 to 1. */
static double place_in(const double *angle, size_t i)
{
    return 2 * (angle[i] - angle[0]) / (angle[LW_BLOCK - 1] - angle[0]) - 1;
}

/* All blocks alike to a part in 1e10 of a block, far below what the interpolation loses. */
static bool step_is_even(const lw_model *model)
{
    for (size_t b = 1; b < model->n_blocks; b++)
        for (size_t i = 0; i < LW_BLOCK; i++)
            if (!(fabs(place_in(model->points.two_theta + b * LW_BLOCK, i) - place_in(model->points.two_theta, i)) < 1e-10))
                return false;
    return true;
}

/* Nodes of every bundle and block, and the interpolation from bundle to block to point. */
static void lay_out_nodes(lw_model *model, double *from_nodes, double *from_bundle)
{
    const double *angle = model->points.two_theta;
    double value[LW_FAR_NODES];
    nodes_between nodes;
    chebyshev_nodes(&nodes);
    for (size_t s = 0; s < model->n_bundles; s++) {
        size_t first = s * LW_BUNDLE, end = first + LW_BUNDLE < model->n_blocks ? first + LW_BUNDLE : model->n_blocks;
        double low = angle[first * LW_BLOCK], high = angle[end * LW_BLOCK - 1];
        for (size_t k = 0; k < LW_BUNDLE_NODES; k++)
            set_place(model, &model->bundle_nodes, s * LW_BUNDLE_NODES + k,
                      0.5 * (low + high) + 0.5 * (high - low) * nodes.at[k]);
        for (size_t b = first; b < end; b++) {
            double from = angle[b * LW_BLOCK], to = angle[b * LW_BLOCK + LW_BLOCK - 1];
            for (size_t k = 0; k < LW_FAR_NODES; k++) {
                double node = 0.5 * (from + to) + 0.5 * (to - from) * nodes.at[k];
                set_place(model, &model->nodes, b * LW_FAR_NODES + k, node);
                lagrange(&nodes, 2 * (node - low) / (high - low) - 1, value);
                for (size_t j = 0; j < LW_BUNDLE_NODES; j++)
                    from_bundle[(b * LW_BUNDLE_NODES + j) * LW_FAR_NODES + k] = value[j];
            }
        }
    }
    for (size_t b = 0; b < (model->from_nodes_stride == 0 ? 1 : model->n_blocks); b++)
        for (size_t i = 0; i < LW_BLOCK; i++) {
            lagrange(&nodes, place_in(angle + b * LW_BLOCK, i), value);
            for (size_t k = 0; k < LW_FAR_NODES; k++)
                from_nodes[(b * LW_FAR_NODES + k) * LW_BLOCK + i] = value[k];
        }
}

void lw_model_background(lw_model *model, size_t terms, bool hyperbola, const double *extra)
{
    size_t n = model->n, padded = model->n_blocks * LW_BLOCK;
    const double *angle = model->points.two_theta;
    double low = angle[0], high = angle[n - 1], *basis = model->basis;
    for (size_t k = model->n_chebyshev; k < terms; k++) {
        double *row = basis + k * padded;
        for (size_t i = 0; i < padded && k == 0; i++)
            row[i] = 1;
        for (size_t i = 0; i < padded && k == 1; i++)
            row[i] = 2 * (angle[i] - low) / (high - low) - 1;
        for (size_t i = 0; i < padded && k >= 2; i++)
            row[i] = 2 * basis[padded + i] * (row - padded)[i] - (row - 2 * padded)[i];
    }
    double *row = basis + terms * padded;
    for (size_t i = 0; i < padded && hyperbola; i++)
        row[i] = 10 / fmax(angle[i], 0.1);
    row += hyperbola ? padded : 0;
    for (size_t i = 0; i < padded && extra != NULL; i++)
        row[i] = i < n ? extra[i] : 0;
    model->n_background = terms + hyperbola + (extra != NULL);
    /* the columns behind the polynomials lie where further ones will be */
    if (model->n_chebyshev < terms || model->n_background > terms)
        model->n_chebyshev = terms;
    model->weighed = false;
}

lw_status lw_model_points(lw_model *model, const lw_scan *scan, size_t background_room, lw_arena *arena, lw_error *err)
{
    size_t n = scan->n, blocks = (n + LW_BLOCK - 1) / LW_BLOCK, padded = blocks * LW_BLOCK;
    size_t bundles = (blocks + LW_BUNDLE - 1) / LW_BUNDLE;
    model->n = n;
    model->n_blocks = blocks;
    model->n_bundles = bundles;
    model->n_background = model->n_chebyshev = 0;
    model->background_room = background_room;
    model->weighed = false;
    if (take_places(&model->points, padded, arena, err) != LW_OK ||
        take_places(&model->nodes, blocks * LW_FAR_NODES, arena, err) != LW_OK ||
        take_places(&model->bundle_nodes, bundles * LW_BUNDLE_NODES, arena, err) != LW_OK)
        return LW_OUT_OF_MEMORY;
    double step = n > 1 ? (scan->two_theta_deg[n - 1] - scan->two_theta_deg[0]) / (double)(n - 1) : 1;
    for (size_t i = 0; i < padded; i++)
        set_place(model, &model->points, i,
                  i < n ? scan->two_theta_deg[i] : scan->two_theta_deg[n - 1] + step * (double)(i - n + 1));
    model->from_nodes_stride = step_is_even(model) ? 0 : LW_FAR_NODES * LW_BLOCK;
    double *y = lw_arena_take_raw(arena, padded, sizeof *y, err);
    size_t tables = model->from_nodes_stride == 0 ? 1 : blocks;
    double *from_nodes = lw_arena_take_raw(arena, tables * LW_FAR_NODES * LW_BLOCK, sizeof *from_nodes, err);
    double *from_bundle = lw_arena_take_raw(arena, blocks * LW_BUNDLE_NODES * LW_FAR_NODES, sizeof *from_bundle, err);
    model->basis = lw_arena_take_raw(arena, padded * background_room, sizeof(double), err);
    model->weight = lw_arena_take_raw(arena, padded, sizeof(double), err);
    model->curve = lw_arena_take_raw(arena, padded, sizeof(double), err);
    model->basis_square = lw_arena_take(arena, background_room * background_room, sizeof(double), err);
    model->basis_moment = lw_arena_take_raw(arena, bundles * background_room * LW_BLOCK, sizeof(double), err);
    model->bundle_moment = lw_arena_take_raw(arena, bundles * background_room * LW_BUNDLE_NODES, sizeof(double), err);
    if (!y || !model->basis || !from_nodes || !from_bundle || !model->weight || !model->curve || !model->basis_square ||
        !model->basis_moment || !model->bundle_moment)
        return LW_OUT_OF_MEMORY;
    memcpy(y, scan->intensity, n * sizeof *y);
    for (size_t i = n; i < padded; i++)
        y[i] = model->weight[i] = 0;
    for (size_t i = 0; i < n; i++)
        model->weight[i] = 1;
    lay_out_nodes(model, from_nodes, from_bundle);
    model->y = y;
    model->from_nodes = from_nodes;
    model->from_bundle = from_bundle;
    return LW_OK;
}

void lw_model_weigh(lw_model *model)
{
    size_t nb = model->n_background, padded = model->n_blocks * LW_BLOCK;
    for (size_t i = 0; i < nb * nb; i++)
        model->basis_square[i] = 0;
    for (size_t i = 0; i < model->n_bundles * nb * LW_BUNDLE_NODES; i++)
        model->bundle_moment[i] = 0;
    /* a short last bundle has fewer blocks */
    memset(model->basis_moment + (model->n_bundles - 1) * nb * LW_BLOCK, 0, nb * LW_BLOCK * sizeof(double));
    for (size_t b = 0; b < model->n_blocks; b++) {
        const double *weight = model->weight + b * LW_BLOCK, *from_nodes = model->from_nodes + b * model->from_nodes_stride;
        for (size_t r = 0; r < nb; r++) {
            double scaled[LW_BLOCK];
            double *moment = model->basis_moment + (b / LW_BUNDLE * nb + r) * LW_BLOCK + b % LW_BUNDLE * LW_FAR_NODES;
            double *of_bundle = model->bundle_moment + (b / LW_BUNDLE * nb + r) * LW_BUNDLE_NODES;
            for (size_t i = 0; i < LW_BLOCK; i++)
                scaled[i] = weight[i] * model->basis[r * padded + b * LW_BLOCK + i];
            for (size_t c = 0; c <= r; c++)
                model->basis_square[r * nb + c] += lw_dot(scaled, model->basis + c * padded + b * LW_BLOCK, LW_BLOCK);
            for (size_t j = 0; j < LW_FAR_NODES; j++)
                moment[j] = lw_dot(scaled, from_nodes + j * LW_BLOCK, LW_BLOCK);
            for (size_t j = 0; j < LW_BUNDLE_NODES; j++) {
                const double *back = model->from_bundle + (b * LW_BUNDLE_NODES + j) * LW_FAR_NODES;
                for (size_t i = 0; i < LW_FAR_NODES; i++)
                    of_bundle[j] += back[i] * moment[i];
            }
        }
    }
    model->weighed = true;
}
