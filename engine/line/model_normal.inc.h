/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Body of one rung of the model's evaluation: curve, chi-square and normal equations, bundle by bundle and block by
 * block. The includer sets LW_LANES (points done at once) and LW_RUNG_EVALUATE (name of the function). No include
 * guard: each rung is one translation unit. */
#include "line/model_lines.inc.h"
#include "line/model_rows.inc.h"

#include <math.h>

#define CLOSE_NODES (LW_BUNDLE * LW_FAR_NODES)

/* Sizes and targets of one evaluation. */
typedef struct evaluation {
    lw_model *model;
    const double *p;
    bool want_normal;
    lw_normal *normal;
    size_t n;              /* parameters */
    size_t m;              /* of a line */
    size_t border, nb, ng; /* row of the first background term; background terms; globals */
    size_t padded;         /* points, whole blocks */
    double *square;        /* sum of weighted squares of the curve */
} evaluation;

/* What the lines far from a bundle give at its nodes, and the sums over its points on the way back to them. */
typedef struct bundle {
    size_t at, first, end;  /* its number and blocks */
    size_t n_far, n_close;  /* lines seen only through the bundle's nodes; others */
    double value[LW_BUNDLE_NODES], global[LW_GLOBALS_MOST][LW_BUNDLE_NODES];
    /* sums of weighted residuals and weighted columns of the globals against the interpolation columns: at the nodes
     * of the blocks, and handed on to the bundle's */
    double close_residual[CLOSE_NODES], close_global[LW_GLOBALS_MOST][CLOSE_NODES];
    double residual[LW_BUNDLE_NODES], border[LW_GLOBALS_MOST][LW_BUNDLE_NODES];
    double square[LW_BUNDLE_NODES][LW_BUNDLE_NODES];   /* sums of weighted pairs of interpolation columns */
} bundle;

/* One block of points. */
typedef struct block {
    size_t at, in_bundle; /* its number, and the same counted from the bundle's first */
    size_t n_near;
    const double *weight, *from_nodes, *from_bundle;
    double curve[LW_BLOCK], weighted[LW_BLOCK];  /* model; weighted residual */
    double global[LW_GLOBALS_MOST][LW_BLOCK];    /* columns of the globals */
} block;

static double *near_column(const evaluation *e, size_t which)
{
    return e->model->near_columns + which * LW_COLUMNS * LW_BLOCK;
}

static double *close_column(const evaluation *e, size_t which)
{
    return e->model->close_columns + which * LW_COLUMNS * CLOSE_NODES;
}

static double *bundle_column(const evaluation *e, size_t which)
{
    return e->model->bundle_columns + which * LW_COLUMNS * LW_BUNDLE_NODES;
}

static bool is_near(const lw_model_line *line, size_t block)
{
    return block >= line->near_first && block < line->near_end;
}

static bool is_core(const lw_model_line *line, size_t block)
{
    return block >= line->core_first && block < line->core_end;
}

static inline double short_dot(const double *a, const double *b, size_t n)
{
    double sum = 0;
    for (size_t i = 0; i < n; i++)
        sum += a[i] * b[i];
    return sum;
}

static size_t clamp(size_t value, size_t low, size_t high)
{
    return value < low ? low : value > high ? high : value;
}

/* Line k at the nodes of the bundle's blocks, save those of its core. */
static void close_tails(const evaluation *e, const bundle *u, size_t k, double *column)
{
    const lw_model *model = e->model;
    const lw_model_line *line = &model->line[k];
    const size_t edge[6] = {u->first, line->near_first, line->core_first, line->core_end, line->near_end, u->end};
    static const struct {
        size_t from, to;
        bool near;
    } range[4] = {{0, 1, false}, {1, 2, true}, {3, 4, true}, {4, 5, false}};
    for (size_t j = 0; j < LW_COLUMNS && u->end - u->first < LW_BUNDLE; j++) /* a short last bundle */
        memset(column + j * CLOSE_NODES, 0, CLOSE_NODES * sizeof *column);
    for (int i = 0; i < 4; i++) {
        size_t from = clamp(edge[range[i].from], u->first, u->end), to = clamp(edge[range[i].to], u->first, u->end);
        if (from < to)
            line_columns(model, k, range[i].near, &model->nodes, from * LW_FAR_NODES, (to - from) * LW_FAR_NODES,
                             e->want_normal, column + (from - u->first) * LW_FAR_NODES, CLOSE_NODES);
    }
}

static void begin_bundle(const evaluation *e, size_t at, bundle *u)
{
    lw_model *model = e->model;
    memset(u, 0, sizeof *u);
    u->at = at;
    u->first = at * LW_BUNDLE;
    u->end = u->first + LW_BUNDLE < model->n_blocks ? u->first + LW_BUNDLE : model->n_blocks;
    for (size_t k = 0; k < model->n_lines; k++) {
        const lw_model_line *line = &model->line[k];
        if (at >= line->close_first && at < line->close_end) {
            close_tails(e, u, k, close_column(e, u->n_close));
            model->close[u->n_close++] = k;
            continue;
        }
        double *column = bundle_column(e, u->n_far);
        line_columns(model, k, false, &model->bundle_nodes, at * LW_BUNDLE_NODES, LW_BUNDLE_NODES, e->want_normal,
                         column, LW_BUNDLE_NODES);
        for (size_t j = 0; j < LW_BUNDLE_NODES; j++)
            u->value[j] += model->state[k].area * column[LW_BUNDLE_NODES + j];
        if (e->want_normal)
            add_globals(model, k, column, LW_BUNDLE_NODES, LW_BUNDLE_NODES, u->global[0], LW_BUNDLE_NODES);
        model->far[u->n_far++] = k;
    }
}

/* All tails together at the block's nodes, from there to its points: curve and columns of the globals. */
static void far_tails(const evaluation *e, const bundle *u, block *k)
{
    const lw_model *model = e->model;
    double value[LW_FAR_NODES] = {0}, global[LW_GLOBALS_MOST][LW_FAR_NODES];
    size_t n_global = e->want_normal ? e->ng : 0;
    memset(global, 0, n_global * sizeof global[0]);
    for (size_t j = 0; j < LW_BUNDLE_NODES; j++)
        for (size_t i = 0; i < LW_FAR_NODES; i++) {
            double factor = k->from_bundle[j * LW_FAR_NODES + i];
            value[i] += u->value[j] * factor;
            for (size_t q = 0; q < n_global; q++)
                global[q][i] += u->global[q][j] * factor;
        }
    for (size_t c = 0; c < u->n_close; c++) {
        size_t line = model->close[c];
        if (is_core(&model->line[line], k->at))
            continue;
        const double *column = close_column(e, c) + k->in_bundle * LW_FAR_NODES;
        for (size_t i = 0; i < LW_FAR_NODES; i++)
            value[i] += model->state[line].area * column[CLOSE_NODES + i];
        if (e->want_normal)
            add_globals(model, line, column, CLOSE_NODES, LW_FAR_NODES, global[0], LW_FAR_NODES);
    }
    memset(k->curve, 0, sizeof k->curve);
    memset(k->global, 0, n_global * sizeof k->global[0]);
    add_rows(value, 1, k->from_nodes, LW_BLOCK, LW_FAR_NODES, k->curve);
    for (size_t q = 0; q < n_global; q++)
        add_rows(global[q], 1, k->from_nodes, LW_BLOCK, LW_FAR_NODES, k->global[q]);
}

static void add_background(const evaluation *e, block *k)
{
    add_rows(e->p + e->border, 1, e->model->basis + k->at * LW_BLOCK, e->padded, e->nb, k->curve);
}

/* Columns of one line from the block's nodes to its points. */
static void interpolate(const evaluation *e, const block *k, const double *at_nodes, double *column)
{
    for (size_t j = 0; j < e->m; j++) {
        double *to = column + j * LW_BLOCK;
        memset(to, 0, LW_BLOCK * sizeof *to);
        add_rows(at_nodes + j * CLOSE_NODES, 1, k->from_nodes, LW_BLOCK, LW_FAR_NODES, to);
    }
}

/* Lines in their core, point by point; of the other near ones, already in the curve with the tails, the columns. */
static void add_near_lines(const evaluation *e, const bundle *u, block *k)
{
    lw_model *model = e->model;
    k->n_near = 0;
    for (size_t c = 0; c < u->n_close; c++) {
        size_t line = model->close[c];
        bool core = is_core(&model->line[line], k->at);
        if (!core && !(e->want_normal && is_near(&model->line[line], k->at)))
            continue;
        double *column = near_column(e, k->n_near), area = model->state[line].area;
        if (core) {
            line_columns(model, line, true, &model->points, k->at * LW_BLOCK, LW_BLOCK, e->want_normal, column,
                             LW_BLOCK);
            add_rows(&area, 1, column + LW_BLOCK, LW_BLOCK, 1, k->curve);
            if (e->want_normal)
                add_globals(model, line, column, LW_BLOCK, LW_BLOCK, k->global[0], LW_BLOCK);
        } else
            interpolate(e, k, close_column(e, c) + k->in_bundle * LW_FAR_NODES, column);
        model->near[k->n_near++] = line;
    }
}

static void take_residual(const evaluation *e, block *k)
{
    lw_model *model = e->model;
    size_t at = k->at * LW_BLOCK;
    double residual[LW_BLOCK];
    memcpy(model->curve + at, k->curve, sizeof k->curve);
    for (size_t i = 0; i < LW_BLOCK; i++) {
        residual[i] = k->weight[i] > 0 ? model->y[at + i] - k->curve[i] : 0;
        k->weighted[i] = k->weight[i] * residual[i];
    }
    e->normal->chi2 += block_dot(residual, k->weighted);
    multiply(k->weight, k->curve, residual);
    *e->square += block_dot(residual, k->curve);
}

/* Hands sums at a block's nodes on to the nodes of its bundle. */
static void hand_on(const block *k, const double *moment, double *of_bundle)
{
    add_node_dots(moment, k->from_bundle, LW_FAR_NODES, LW_BUNDLE_NODES, of_bundle, 1);
}

/* Sums over the block's points against its interpolation columns. */
static void moments(const block *k, const double *scaled, double *moment)
{
    memset(moment, 0, LW_FAR_NODES * sizeof *moment);
    add_dots(scaled, k->from_nodes, LW_BLOCK, LW_FAR_NODES, moment, 1);
}

/* Background and globals: gradient, among themselves, and sums for their products with the lines seen through nodes. */
static void border_products(const evaluation *e, bundle *u, const block *k)
{
    const lw_model *model = e->model;
    double *h = e->normal->h, *g = e->normal->g, scaled[LW_BLOCK];
    const double *basis = model->basis + k->at * LW_BLOCK;
    add_dots(k->weighted, basis, e->padded, e->nb, g + e->border, 1);
    for (size_t q = 0; q < e->ng; q++) {
        size_t row = e->border + e->nb + q;
        g[row] += block_dot(k->global[q], k->weighted);
        multiply(k->weight, k->global[q], scaled);
        add_dots(scaled, basis, e->padded, e->nb, h + row * e->n + e->border, 1);
        add_dots(scaled, k->global[0], LW_BLOCK, q + 1, h + row * e->n + e->border + e->nb, 1);
        double *moment = u->close_global[q] + k->in_bundle * LW_FAR_NODES;
        moments(k, scaled, moment);
        hand_on(k, moment, u->border[q]);
    }
}

/* Near lines: gradient, with the border, and among themselves. */
static void near_products(const evaluation *e, const block *k)
{
    const lw_model *model = e->model;
    double *h = e->normal->h, *g = e->normal->g, scaled[LW_BLOCK];
    for (size_t a = 0; a < k->n_near; a++)
        for (size_t j = 0; j < e->m; j++) {
            const double *column = near_column(e, a) + j * LW_BLOCK;
            size_t row = model->near[a] * e->m + j;
            g[row] += block_dot(column, k->weighted);
            multiply(k->weight, column, scaled);
            add_dots(scaled, model->basis + k->at * LW_BLOCK, e->padded, e->nb, h + e->border * e->n + row, e->n);
            add_dots(scaled, k->global[0], LW_BLOCK, e->ng, h + (e->border + e->nb) * e->n + row, e->n);
            for (size_t b = 0; b <= a; b++)
                add_dots(scaled, near_column(e, b), LW_BLOCK, b == a ? j + 1 : e->m, h + row * e->n + model->near[b] * e->m,
                         1);
        }
}

/* A far line's own block of the normal matrix from the weighted pairs of interpolation columns. */
static void own_products(const evaluation *e, size_t line, const double *column, size_t stride, const double *square,
                         size_t n)
{
    for (size_t j = 0; j < e->m; j++)
        for (size_t c = 0; c <= j; c++) {
            double sum = 0;
            for (size_t i = 0; i < n; i++)
                sum += column[j * stride + i] * short_dot(square + i * n, column + c * stride, n);
            e->normal->h[(line * e->m + j) * e->n + line * e->m + c] += sum;
        }
}

/* Lines seen through nodes: sums for the gradient, and their own blocks where these are wanted. */
static void far_products(const evaluation *e, bundle *u, const block *k)
{
    const lw_model *model = e->model;
    double *moment = u->close_residual + k->in_bundle * LW_FAR_NODES;
    moments(k, k->weighted, moment);
    hand_on(k, moment, u->residual);
    if (!model->whole_normal)
        return;
    double square[LW_FAR_NODES][LW_FAR_NODES], scaled[LW_BLOCK], half[LW_FAR_NODES][LW_BUNDLE_NODES] = {{0}};
    for (size_t j = 0; j < LW_FAR_NODES; j++) {
        multiply(k->weight, k->from_nodes + j * LW_BLOCK, scaled);
        moments(k, scaled, square[j]);
        hand_on(k, square[j], half[j]);
    }
    for (size_t a = 0; a < LW_BUNDLE_NODES; a++)
        for (size_t c = 0; c < LW_BUNDLE_NODES; c++)
            for (size_t j = 0; j < LW_FAR_NODES; j++)
                u->square[a][c] += k->from_bundle[a * LW_FAR_NODES + j] * half[j][c];
    for (size_t c = 0; c < u->n_close; c++)
        if (!is_near(&model->line[model->close[c]], k->at))
            own_products(e, model->close[c], close_column(e, c) + k->in_bundle * LW_FAR_NODES, CLOSE_NODES, square[0],
                         LW_FAR_NODES);
}

/* Gradient and border products of the lines seen through the nodes of blocks; near blocks were taken from the points. */
static void end_close(const evaluation *e, const bundle *u)
{
    const lw_model *model = e->model;
    const double *of_basis = model->basis_moment + u->at * e->nb * CLOSE_NODES;
    for (size_t c = 0; c < u->n_close; c++) {
        const lw_model_line *line = &model->line[model->close[c]];
        size_t from = clamp(line->near_first, u->first, u->end), to = clamp(line->near_end, u->first, u->end);
        if (from == u->first && to == u->end)
            continue;
        for (size_t j = 0; j < e->m; j++) {
            double *column = close_column(e, c) + j * CLOSE_NODES;
            size_t row = model->close[c] * e->m + j;
            double *h = e->normal->h + e->border * e->n + row;
            if (from < to)
                memset(column + (from - u->first) * LW_FAR_NODES, 0, (to - from) * LW_FAR_NODES * sizeof *column);
            add_dots(column, u->close_residual, CLOSE_NODES, 1, e->normal->g + row, 1);
            add_dots(column, of_basis, CLOSE_NODES, e->nb, h, e->n);
            add_dots(column, u->close_global[0], CLOSE_NODES, e->ng, h + e->nb * e->n, e->n);
        }
    }
}

/* The same of the lines seen only through the bundle's nodes. */
static void end_far(const evaluation *e, const bundle *u)
{
    const lw_model *model = e->model;
    const double *of_basis = model->bundle_moment + u->at * e->nb * LW_BUNDLE_NODES;
    for (size_t f = 0; f < u->n_far; f++) {
        for (size_t j = 0; j < e->m; j++) {
            const double *column = bundle_column(e, f) + j * LW_BUNDLE_NODES;
            size_t row = model->far[f] * e->m + j;
            double *h = e->normal->h + e->border * e->n + row;
            add_node_dots(column, u->residual, LW_BUNDLE_NODES, 1, e->normal->g + row, 1);
            add_node_dots(column, of_basis, LW_BUNDLE_NODES, e->nb, h, e->n);
            add_node_dots(column, u->border[0], LW_BUNDLE_NODES, e->ng, h + e->nb * e->n, e->n);
        }
        if (model->whole_normal)
            own_products(e, model->far[f], bundle_column(e, f), LW_BUNDLE_NODES, u->square[0], LW_BUNDLE_NODES);
    }
}

static void evaluate_block(const evaluation *e, bundle *u, size_t at)
{
    const lw_model *model = e->model;
    block k;
    k.at = at;
    k.in_bundle = at - u->first;
    k.weight = model->weight + at * LW_BLOCK;
    k.from_nodes = model->from_nodes + at * model->from_nodes_stride;
    k.from_bundle = model->from_bundle + at * LW_BUNDLE_NODES * LW_FAR_NODES;
    far_tails(e, u, &k);
    add_background(e, &k);
    add_near_lines(e, u, &k);
    take_residual(e, &k);
    if (!e->want_normal)
        return;
    border_products(e, u, &k);
    near_products(e, &k);
    far_products(e, u, &k);
}

lw_status LW_RUNG_EVALUATE(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    lw_model *model = user;
    evaluation e = {.model = model,
                    .p = p,
                    .want_normal = want_normal,
                    .normal = normal,
                    .n = lw_model_parameters(model),
                    .m = 2 + model->n_local,
                    .border = lw_model_border(model),
                    .nb = model->n_background,
                    .ng = model->n_globals,
                    .padded = model->n_blocks * LW_BLOCK};
    normal->chi2 = 0;
    double square = 0;
    e.square = &square;
    if (!lw_model_set_lines(model, p)) {
        normal->chi2 = INFINITY;
        return LW_OK;
    }
    if (want_normal && !model->weighed)
        lw_model_weigh(model);
    for (size_t r = 0; r < e.nb && want_normal; r++)
        for (size_t c = 0; c <= r; c++)
            normal->h[(e.border + r) * e.n + e.border + c] += model->basis_square[r * e.nb + c];
    for (size_t s = 0; s < model->n_bundles; s++) {
        bundle u;
        begin_bundle(&e, s, &u);
        for (size_t b = u.first; b < u.end; b++)
            evaluate_block(&e, &u, b);
        if (want_normal) {
            end_close(&e, &u);
            end_far(&e, &u);
        }
    }
    if (!isfinite(normal->chi2))
        normal->chi2 = INFINITY;
    /* a value of the curve is sure to a part in 1e13 of it */
    const double unsure = 1e-13;
    normal->rounding = unsure * (2 * sqrt(square * normal->chi2) + unsure * square);
    return lw_engine_poll(model->engine, err);
}
