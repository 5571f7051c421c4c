/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The places where a model is evaluated, how values get from one kind of place to the next, and the background. */
#include "line/model_state.h"
#include "numeric/cholesky.h"

#include <math.h>

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
    places->two_theta = lw_arena_take(arena, n, sizeof(double), err);
    places->sine = lw_arena_take(arena, n, sizeof(double), err);
    places->factor = lw_arena_take(arena, n, sizeof(double), err);
    return places->two_theta && places->sine && places->factor ? LW_OK : LW_OUT_OF_MEMORY;
}

static void set_place(const lw_model *model, lw_model_places *places, size_t i, double two_theta_deg)
{
    double slope;
    places->two_theta[i] = two_theta_deg;
    places->sine[i] = sin(fmin(two_theta_deg, 179.99) * degree / 2);
    places->factor[i] = lw_model_factor(model, fmin(two_theta_deg, 179.9), &slope);
}

/* Chebyshev nodes between -1 and 1, ascending. */
static void chebyshev_nodes(size_t n, double *t)
{
    for (size_t k = 0; k < n; k++)
        t[k] = -cos(M_PI * ((double)k + 0.5) / (double)n);
}

/* Lagrange's polynomial of node k of n at t. */
static double lagrange(const double *node, size_t n, size_t k, double t)
{
    double product = 1;
    for (size_t m = 0; m < n; m++)
        if (m != k)
            product *= (t - node[m]) / (node[k] - node[m]);
    return product;
}

/* Nodes of every bundle and block, and the interpolation from bundle to block to point. */
static void lay_out_nodes(lw_model *model, double *from_nodes, double *from_bundle)
{
    const double *angle = model->points.two_theta;
    double t_block[LW_FAR_NODES], t_bundle[LW_BUNDLE_NODES];
    chebyshev_nodes(LW_FAR_NODES, t_block);
    chebyshev_nodes(LW_BUNDLE_NODES, t_bundle);
    for (size_t s = 0; s < model->n_bundles; s++) {
        size_t first = s * LW_BUNDLE, end = first + LW_BUNDLE < model->n_blocks ? first + LW_BUNDLE : model->n_blocks;
        double low = angle[first * LW_BLOCK], high = angle[end * LW_BLOCK - 1];
        for (size_t k = 0; k < LW_BUNDLE_NODES; k++)
            set_place(model, &model->bundle_nodes, s * LW_BUNDLE_NODES + k,
                      0.5 * (low + high) + 0.5 * (high - low) * t_bundle[k]);
        for (size_t b = first; b < end; b++) {
            double from = angle[b * LW_BLOCK], to = angle[b * LW_BLOCK + LW_BLOCK - 1];
            for (size_t k = 0; k < LW_FAR_NODES; k++) {
                double node = 0.5 * (from + to) + 0.5 * (to - from) * t_block[k];
                set_place(model, &model->nodes, b * LW_FAR_NODES + k, node);
                for (size_t j = 0; j < LW_BUNDLE_NODES; j++)
                    from_bundle[(b * LW_BUNDLE_NODES + j) * LW_FAR_NODES + k] =
                        lagrange(t_bundle, LW_BUNDLE_NODES, j, (2 * node - low - high) / (high - low));
                for (size_t i = 0; i < LW_BLOCK; i++) {
                    double t = (2 * angle[b * LW_BLOCK + i] - from - to) / (to - from);
                    from_nodes[(b * LW_FAR_NODES + k) * LW_BLOCK + i] = lagrange(t_block, LW_FAR_NODES, k, t);
                }
            }
        }
    }
}

/* Chebyshev polynomials on the scan's range, then 1/2theta and the extra column. */
static void set_basis(const lw_model *model, size_t terms, bool hyperbola, const double *extra, double *basis)
{
    size_t n = model->n, padded = model->n_blocks * LW_BLOCK;
    const double *angle = model->points.two_theta;
    double low = angle[0], high = angle[n - 1];
    for (size_t i = 0; i < padded; i++) {
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
}

lw_status lw_model_points(lw_model *model, const lw_scan *scan, size_t terms, bool hyperbola, const double *extra,
                          lw_arena *arena, lw_error *err)
{
    size_t n = scan->n, blocks = (n + LW_BLOCK - 1) / LW_BLOCK, padded = blocks * LW_BLOCK;
    size_t bundles = (blocks + LW_BUNDLE - 1) / LW_BUNDLE, n_background = terms + hyperbola + (extra != NULL);
    double *y = lw_arena_take(arena, padded, sizeof *y, err);
    double *basis = lw_arena_take(arena, padded * n_background, sizeof *basis, err);
    double *from_nodes = lw_arena_take(arena, padded * LW_FAR_NODES, sizeof *from_nodes, err);
    double *from_bundle = lw_arena_take(arena, blocks * LW_BUNDLE_NODES * LW_FAR_NODES, sizeof *from_bundle, err);
    model->weight = lw_arena_take(arena, padded, sizeof(double), err);
    model->curve = lw_arena_take(arena, padded, sizeof(double), err);
    model->basis_square = lw_arena_take(arena, n_background * n_background, sizeof(double), err);
    model->basis_moment = lw_arena_take(arena, bundles * n_background * LW_BLOCK, sizeof(double), err);
    model->bundle_moment = lw_arena_take(arena, bundles * n_background * LW_BUNDLE_NODES, sizeof(double), err);
    if (!y || !basis || !from_nodes || !from_bundle || !model->weight || !model->curve || !model->basis_square ||
        !model->basis_moment || !model->bundle_moment || take_places(&model->points, padded, arena, err) != LW_OK ||
        take_places(&model->nodes, blocks * LW_FAR_NODES, arena, err) != LW_OK ||
        take_places(&model->bundle_nodes, bundles * LW_BUNDLE_NODES, arena, err) != LW_OK)
        return LW_OUT_OF_MEMORY;
    model->n = n;
    model->n_blocks = blocks;
    model->n_bundles = bundles;
    model->n_background = n_background;
    model->weighed = false;
    double step = n > 1 ? (scan->two_theta_deg[n - 1] - scan->two_theta_deg[0]) / (double)(n - 1) : 1;
    for (size_t i = 0; i < padded; i++) {
        double beyond = scan->two_theta_deg[n - 1] + step * (double)(i - n + 1);
        set_place(model, &model->points, i, i < n ? scan->two_theta_deg[i] : beyond);
        y[i] = i < n ? scan->intensity[i] : 0;
    }
    lay_out_nodes(model, from_nodes, from_bundle);
    set_basis(model, terms, hyperbola, extra, basis);
    model->y = y;
    model->basis = basis;
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
    for (size_t b = 0; b < model->n_blocks; b++) {
        const double *weight = model->weight + b * LW_BLOCK, *from_nodes = model->from_nodes + b * LW_FAR_NODES * LW_BLOCK;
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
