/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/budget_parts.h"

#include "numeric/cholesky.h"
#include "sample/method.h"
#include "sample/positions.h"

#include <math.h>
#include <string.h>

#define STEP 0.1 /* in u: small against where functions bend, large against rounding */

enum { POSITION, GAUSS, LORENTZ, SHARED, ABERRATION };

/* One number that the quantities depend on. */
typedef struct input {
    int kind;
    size_t at;  /* line, width parameter or aberration */
    size_t row; /* in the fit's covariance, or LW_NO_PARAMETER */
    double u;
    bool is_wavelength;
} input;

typedef struct inputs {
    size_t n;
    input *input;
    double *part[LW__PARTS]; /* [n][n] covariance of the inputs by part */
} inputs;

static void add_input(inputs *all, int kind, size_t at, size_t row, double variance)
{
    if (variance > 0 && isfinite(variance))
        all->input[all->n++] = (input){.kind = kind, .at = at, .row = row, .u = sqrt(variance)};
}

static void gather_inputs(const lw_profiles *profiles, inputs *all)
{
    const lw_lines *lines = profiles->lines;
    size_t n = lines->n_parameters;
    bool shared = false;
    for (size_t k = 0; k < lines->n; k++) {
        const lw_line *line = &lines->line[k];
        size_t row[] = {line->at_position, line->at_gauss, line->at_lorentz};
        for (int kind = POSITION; kind <= LORENTZ && line->supported; kind++)
            if (row[kind] != LW_NO_PARAMETER)
                add_input(all, kind, k, row[kind], lines->covariance[row[kind] * (n + 1)]);
        shared |= line->supported && line->shared_width;
    }
    for (size_t i = 0; i < LW_AXIAL_1 && shared; i++)
        if (lines->smooth.refined[i])
            add_input(all, SHARED, i, lw_lines_row(lines, lw_width_name[i]), lines->smooth.covariance[i][i]);
    const lw_aberrations *set = profiles->calibration != NULL ? &profiles->calibration->aberrations : NULL;
    for (size_t i = 0; set != NULL && i < set->n; i++) {
        size_t before = all->n;
        add_input(all, ABERRATION, i, LW_NO_PARAMETER, set->covariance[i][i]);
        if (all->n > before)
            all->input[before].is_wavelength = strcmp(set->kind[i]->name, "wavelength") == 0;
    }
}

/* What freeing the background adds to the covariance of the fit's parameters: C_pb C_bb^-1 C_bp of the covariance by
 * counting. counting[n*n] is that, out[n*n] receives the part. */
static lw_status background_part(const lw_lines *lines, const double *counting, lw_arena *arena, double *out,
                                 lw_error *err)
{
    size_t n = lines->n_parameters, first = lines->at_background, end = first, kept = 0;
    while (end < n && strncmp(lines->parameter_name[end], "background", 10) == 0)
        end++;
    size_t *row = lw_arena_take(arena, n, sizeof *row, err);
    double *bb = lw_arena_take(arena, n * n, sizeof *bb, err), *x = lw_arena_take(arena, n, sizeof *x, err);
    if (!row || !bb || !x)
        return LW_OUT_OF_MEMORY;
    for (size_t i = first; i < end; i++)
        if (counting[i * (n + 1)] > 0)
            row[kept++] = i;
    for (size_t i = 0; i < kept; i++)
        for (size_t j = 0; j < kept; j++)
            bb[i * kept + j] =
                counting[row[i] * n + row[j]] / sqrt(counting[row[i] * (n + 1)] * counting[row[j] * (n + 1)]);
    if (kept == 0 || lw_cholesky(bb, kept, kept, 1e-13) != kept)
        return LW_OK; /* terms that can't be told apart: their part stays with counting */
    for (size_t j = 0; j < n; j++) {
        for (size_t k = 0; k < kept; k++)
            x[k] = counting[row[k] * n + j] / sqrt(counting[row[k] * (n + 1)]);
        lw_cholesky_solve(bb, kept, kept, x);
        for (size_t i = 0; i < n; i++)
            for (size_t k = 0; k < kept; k++)
                out[i * n + j] += counting[i * n + row[k]] / sqrt(counting[row[k] * (n + 1)]) * x[k];
    }
    return LW_OK;
}

static lw_status fit_parts(const lw_profiles *profiles, inputs *all, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    size_t n = lines->n_parameters, m = all->n;
    /* noise whose neighbours go together is no misfit, though the fit widens for both at once */
    double together = (1 + lines->scan->correlation) / (1 - lines->scan->correlation);
    double widened = fmax(lines->misfit_factor * lines->misfit_factor / together, 1);
    double *counting = lw_arena_take(arena, n * n, sizeof *counting, err);
    double *background = lw_arena_take(arena, n * n, sizeof *background, err);
    if (counting == NULL || background == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n * n; i++)
        counting[i] =
            (lines->covariance[i] - (lines->from_instrument != NULL ? lines->from_instrument[i] : 0)) / widened;
    lw_status status = background_part(lines, counting, arena, background, err);
    for (size_t i = 0; i < m; i++)
        for (size_t j = 0; j < m; j++) {
            const input *a = &all->input[i], *b = &all->input[j];
            size_t to = i * m + j, from = a->row * n + b->row;
            if (a->row != LW_NO_PARAMETER && b->row != LW_NO_PARAMETER) {
                all->part[LW__COUNTING][to] = counting[from] - background[from];
                all->part[LW__BACKGROUND][to] = background[from];
                all->part[LW__MISFIT][to] = (widened - 1) * counting[from];
                if (lines->from_instrument != NULL)
                    all->part[LW__CALIBRATION][to] = lines->from_instrument[from];
            } else if (a->kind == SHARED && b->kind == SHARED) { /* from a stage of its own: counting alone */
                double c = lines->smooth.covariance[a->at][b->at];
                all->part[LW__COUNTING][to] = c / widened;
                all->part[LW__MISFIT][to] = c - c / widened;
            }
        }
    return status;
}

static lw_status gather_parts(const lw_profiles *profiles, inputs *all, lw_arena *arena, lw_error *err)
{
    size_t most = 3 * profiles->lines->n + LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST;
    all->input = lw_arena_take(arena, most, sizeof *all->input, err);
    if (all->input == NULL)
        return LW_OUT_OF_MEMORY;
    gather_inputs(profiles, all);
    size_t m = all->n;
    for (int p = 0; p < LW__PARTS; p++)
        if ((all->part[p] = lw_arena_take(arena, m * m, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    lw_status status = fit_parts(profiles, all, arena, err);
    for (size_t i = 0; i < m; i++)
        for (size_t j = 0; j < m; j++) {
            const input *a = &all->input[i], *b = &all->input[j];
            if (a->kind == ABERRATION && b->kind == ABERRATION) {
                bool alone = a->is_wavelength && b->is_wavelength;
                all->part[alone ? LW__WAVELENGTH : LW__CALIBRATION][i * m + j] =
                    profiles->calibration->aberrations.covariance[a->at][b->at];
            }
        }
    double *u = lw_arena_take(arena, m, sizeof *u, err);
    if (u == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < m; i++)
        for (size_t k = 0; k < profiles->n && all->input[i].kind == POSITION; k++)
            if (profiles->profile[k].line == &profiles->lines->line[all->input[i].at])
                lw_position_scattering(profiles, k, &u[i]);
    for (size_t i = 0; i < m; i++)
        for (size_t j = 0; j < m; j++)
            all->part[LW__SCATTERING][i * m + j] = u[i] * u[j];
    return status;
}

/* ------------------------------------------------------------------------------------------------- slopes */

typedef struct moved {
    lw_engine *engine;
    const lw_profiles *profiles;
    const char *const *methods;
    size_t n_methods;
    lw_lines lines; /* copy with lines of its own */
    lw_calibration calibration;
} moved;

/* Moves one input by a number of its u; false where it can't go. */
static bool move(moved *m, const input *in, double by)
{
    const lw_lines *from = m->profiles->lines;
    memcpy(m->lines.line, from->line, from->n * sizeof *from->line);
    m->lines.smooth = from->smooth;
    if (m->profiles->calibration != NULL)
        m->calibration.aberrations = m->profiles->calibration->aberrations;
    lw_line *line = &m->lines.line[in->kind <= LORENTZ ? in->at : 0];
    double step = by * in->u;
    switch (in->kind) {
    case POSITION: line->two_theta.value += step; return true;
    case GAUSS: line->own_variance_deg2 += step; return line->own_variance_deg2 >= 0;
    case LORENTZ: line->own_lorentz_deg += step; return line->own_lorentz_deg >= 0;
    case ABERRATION: m->calibration.aberrations.value[in->at] += step; return true;
    default: break;
    }
    double *value = m->lines.smooth.value;
    value[in->at] += step;
    for (size_t k = 0; k < from->n; k++)
        if (from->line[k].shared_width) {
            m->lines.line[k].own_variance_deg2 = lw_width_gauss_variance(value, from->line[k].nominal_deg, NULL);
            m->lines.line[k].own_lorentz_deg = lw_width_lorentz(value, from->line[k].nominal_deg, NULL);
        }
    return value[in->at] >= 0;
}

/* The quantities with the input moved; NAN for each that is then missing or a limit. */
static lw_status look(moved *m, const lw__collection *collection, double *value, lw_error *err)
{
    lw_arena arena;
    lw_error each = LW_ERROR_NONE;
    lw_arena_begin(&arena, m->engine);
    lw_profiles *profiles = NULL;
    lw_deconvolve_options options = *m->profiles->options;
    options.accept_refold = true;
    lw_node *tree = lw_tree_new(&arena, &each);
    if (tree != NULL)
        lw_deconvolve(m->engine, &m->lines, m->profiles->calibration != NULL ? &m->calibration : NULL, &options, &profiles,
                      &each);
    if (each.status == LW_OK) {
        profiles->values_only = true;
        /* the stated u are those of the methods' weights as they are, so these don't move with the breadths */
        if (profiles->n_covariance == m->profiles->n_covariance)
            memcpy(profiles->covariance, m->profiles->covariance,
                   profiles->n_covariance * profiles->n_covariance * sizeof *profiles->covariance);
        lw_run_methods(m->engine, profiles, m->methods, m->n_methods, tree, &each);
    }
    for (size_t q = 0; q < collection->n; q++) {
        const lw_node *node = each.status == LW_OK ? lw__node_at_path(tree, collection->entry[q].path) : NULL;
        bool there = node != NULL && node->kind == LW_NODE_QUANTITY && node->quantity.kind == LW_VALUE;
        value[q] = there ? node->quantity.value : NAN;
    }
    lw_profiles_free(profiles);
    lw_arena_end(&arena);
    if (each.status != LW_OUT_OF_MEMORY && each.status != LW_CANCELLED)
        return LW_OK; /* what the data can't carry there is missing there */
    *err = each;
    return each.status;
}

/* Of the slopes to both sides: their mean; where they differ a lot, a method has changed its mind on one side (another
 * direction or range leads), and the gentler one is that of what it had chosen. */
static double slope_of(double up, double down, const bool can[2])
{
    if (!can[0] || !can[1])
        return can[0] ? up : down;
    double gentle = fabs(up) < fabs(down) ? up : down, steep = fabs(up) < fabs(down) ? down : up;
    return fabs(steep) > 3 * fabs(gentle) ? gentle : 0.5 * (up + down);
}

/* slope[input][quantity] = change of the quantity for one u of the input. */
static lw_status slopes(moved *m, const inputs *all, const lw__collection *collection, double *scratch, double *slope,
                        lw_error *err)
{
    size_t n = collection->n;
    lw_status status = LW_OK;
    for (size_t i = 0; i < all->n && status == LW_OK; i++) {
        double *up = slope + i * n;
        bool can[2] = {move(m, &all->input[i], STEP), false};
        if (can[0])
            status = look(m, collection, up, err);
        can[1] = move(m, &all->input[i], -STEP);
        if (status == LW_OK && can[1])
            status = look(m, collection, scratch, err);
        for (size_t q = 0; q < n && status == LW_OK; q++) {
            double here = collection->entry[q].node->quantity.value;
            up[q] = slope_of(can[0] ? (up[q] - here) / STEP : 0, can[1] ? (here - scratch[q]) / STEP : 0, can);
        }
    }
    return status;
}

lw_status lw__budget_parts(lw_engine *engine, const lw_profiles *profiles, const char *const *methods, size_t n_methods,
                           const lw__collection *collection, lw_arena *arena, double *variance, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    inputs all = {0};
    lw_status status = gather_parts(profiles, &all, arena, err);
    if (status != LW_OK)
        return status;
    moved m = {.engine = engine, .profiles = profiles, .methods = methods, .n_methods = n_methods, .lines = *lines};
    m.lines.line = lw_arena_take(arena, lines->n, sizeof *lines->line, err);
    if (profiles->calibration != NULL)
        m.calibration = *profiles->calibration;
    size_t n = collection->n;
    double *slope = lw_arena_take(arena, all.n * n, sizeof *slope, err);
    double *scratch = lw_arena_take(arena, n, sizeof *scratch, err);
    if (!m.lines.line || !slope || !scratch)
        return LW_OUT_OF_MEMORY;
    void (*listener)(void *, const char *, double) = engine->progress;
    engine->progress = NULL;
    status = slopes(&m, &all, collection, scratch, slope, err);
    engine->progress = listener;
    for (size_t q = 0; q < n && status == LW_OK; q++)
        for (int p = 0; p < LW__PARTS; p++) {
            double sum = 0;
            for (size_t i = 0; i < all.n; i++)
                for (size_t j = 0; j < all.n; j++)
                    sum += slope[i * n + q] / all.input[i].u * all.part[p][i * all.n + j] * slope[j * n + q] /
                           all.input[j].u;
            variance[q * LW__PARTS + (size_t)p] = isnan(sum) ? NAN : fmax(sum, 0);
        }
    return status;
}
