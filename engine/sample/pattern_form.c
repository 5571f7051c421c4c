/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_fitter.h"

#include <math.h>
#include <string.h>

#define ATOMS 0.25 /* nm, between neighbours: no column is shorter */

static void set_form(lw_pattern_fitter *f, const lw_pattern_form *form)
{
    lw_pattern_shape_set_strain(&f->pattern.shape, form->strain,
                                form->strain == NULL ? &f->answer->knots : NULL);
}

lw_status lw_pattern_fitter_invert(lw_pattern_fitter *f, lw_error *err)
{
    size_t n = f->pattern.n_parameters;
    lw_normal normal = {.n = n, .h = f->normal_h, .g = f->normal_g};
    memset(f->normal_h, 0, n * n * sizeof(double));
    memset(f->normal_g, 0, n * sizeof(double));
    lw_status status = lw_pattern_evaluate(&f->pattern, f->p, true, &normal, err);
    if (status != LW_OK)
        return status;
    for (size_t i = 0; i < n; i++) {
        /* no size, no strain and the utmost anisotropy are bounds with an uncertainty: their limits come from
         * it */
        bool told = (i == LW_PATTERN_INVERSE_SIZE && f->pattern.shape.histogram == NULL) ||
                    i == LW_PATTERN_ANISOTROPY || (i == LW_PATTERN_STRAIN && f->pattern.shape.n_strain == 1);
        f->skip[i] = f->fixed[i] || (f->at_bound[i] && !told) || !(f->normal_h[i * n + i] > 0);
    }
    for (int held = 0; held < 4; held++) {
        lw_error own = LW_ERROR_NONE;
        size_t weakest = n;
        status = lw_invert_normal(f->pattern.engine, f->normal_h, n, f->skip, f->inverse, &weakest, &own);
        if (status != LW_NOT_SUPPORTED || weakest >= n) {
            if (status != LW_OK)
                *err = own;
            return status;
        }
        f->skip[weakest] = true;
    }
    return lw_fail(err, LW_NOT_SUPPORTED, "measure more lines, or longer",
                   "the whole pattern does not determine its parameters");
}

/* Smoothing for the form, with a strength to begin with. */
static void set_priors(lw_pattern_fitter *f, const lw_pattern_form *form)
{
    lw_pattern *m = &f->pattern;
    memset(m->prior, 0, sizeof m->prior);
    if (m->shape.histogram != NULL) {
        /* a share of the mean size moves by its own size at most from node to node */
        double mean = 1 / (double)m->shape.n_size;
        lw_pattern_prior_bends(&m->prior[0], LW_PATTERN_SIZE, m->shape.n_size, 1 / (mean * mean));
        m->prior[0].pin = 1e6; /* only ratios of the shares count: their sum is kept at 1 */
    }
    if (form->strain == NULL) {
        size_t n = m->shape.n_strain;
        m->prior[1] = (lw_pattern_prior){.row = LW_PATTERN_STRAIN, .n = n, .freedom = n - 2, .strength = 1};
        lw_strain_knots_roughness(&f->answer->knots, m->prior[1].matrix);
        lw_pattern_prior_by_steps(&m->prior[1]);
    }
}

static lw_status descend(lw_pattern_fitter *f, lw_pattern_form *form, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    lw_problem problem = {.n = m->n_parameters,
                          .lower = f->lower,
                          .upper = f->upper,
                          .fixed = f->fixed,
                          .evaluate = lw_pattern_evaluate,
                          .user = m};
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-8;
    control.step_tolerance = 1e-3;
    control.iterations_most = 60;
    lw_fit_outcome outcome;
    lw_status status = lw_least_squares(m->engine, &problem, &control, f->p, f->at_bound, &outcome, err);
    if (status == LW_OK) {
        form->chi2 = outcome.chi2;
        form->iterations += outcome.iterations;
        form->fitted = isfinite(outcome.chi2);
    }
    return status;
}

#define ROUNDS 20   /* for the strength of the smoothing */
#define SETTLED 0.1 /* change of its logarithm */

/* Fits, and asks anew for the strength of the smoothing until it settles. */
static lw_status descend_smoothed(lw_pattern_fitter *f, lw_pattern_form *form, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    for (int round = 0; round < ROUNDS; round++) {
        lw_status status = descend(f, form, err);
        if (status == LW_OK && form->fitted)
            status = lw_pattern_fitter_invert(f, err);
        if (status != LW_OK || !form->fitted)
            return status;
        double change = 0, determined = 0, all = 0;
        for (int i = 0; i < 2; i++) {
            lw_pattern_prior *prior = &m->prior[i];
            if (prior->n == 0)
                continue;
            double counted,
                due = lw_pattern_prior_due(prior, f->p, f->inverse, m->n_parameters, f->skip, &counted);
            change = fmax(change, fabs(log(due / prior->strength)));
            determined += counted - (prior->pin > 0);
            all += (double)prior->freedom;
            form->strength[i] = prior->strength;
            if (round + 1 < ROUNDS)
                prior->strength = due;
        }
        form->parameters = determined - all;
        if (change < SETTLED || round + 1 == ROUNDS) {
            for (int i = 0; i < 2; i++)
                m->prior[i].strength = form->strength[i];
            return LW_OK;
        }
    }
    return LW_OK;
}

lw_status lw_pattern_fitter_minimise(lw_pattern_fitter *f, lw_pattern_form *form, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    set_form(f, form);
    set_priors(f, form);
    for (size_t i = 0; i < LW_PATTERN_STRAIN_MOST; i++) {
        size_t row = LW_PATTERN_STRAIN + i;
        bool used = !form->none && i < m->shape.n_strain;
        f->fixed[row] = !used;
        f->lower[row] = used && form->strain != NULL ? form->strain->least[i] : -INFINITY;
        f->upper[row] = used && form->strain != NULL ? form->strain->most[i] : INFINITY;
        if (used && form->strain == NULL) {
            f->lower[row] =
                i == 0 ? -41 : lw_strain_knots_least_step(&f->answer->knots, i, ATOMS); /* strain 1e-9 */
            f->upper[row] = 0; /* strain 1, and no rise */
        }
        if (!used)
            f->p[row] = 0;
        f->p[row] = fmin(fmax(f->p[row], f->lower[row]), f->upper[row]);
    }
    f->fixed[LW_PATTERN_VARIATION] = !form->varying;
    f->p[LW_PATTERN_VARIATION] = !form->varying                   ? 0
                                 : f->p[LW_PATTERN_VARIATION] > 0 ? f->p[LW_PATTERN_VARIATION]
                                                                  : 0.1;
    form->iterations = 0;
    form->parameters = 0;
    bool smoothed = m->prior[0].n > 0 || m->prior[1].n > 0;
    lw_status status = smoothed ? descend_smoothed(f, form, err) : descend(f, form, err);
    if (status != LW_OK)
        return status;
    lw_normal normal = {.n = m->n_parameters};
    status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    if (status != LW_OK)
        return status;
    double square = 0, product = 0, last = 0;
    for (size_t i = 0; i < m->n; i++) {
        double r = (m->profiles->lines->scan->intensity[i] - m->curve[i]) * sqrt(m->weight[i]);
        square += r * r;
        product += r * last;
        last = r;
    }
    form->correlation = square > 0 ? product / square : 0;
    form->chi2 = normal.chi2 - m->penalty;
    form->why = form->fitted ? "" : "the fit found no start";
    for (size_t i = 0; i < m->n_parameters; i++)
        form->parameters += !f->fixed[i];
    memcpy(form->shape, f->p, lw_pattern_background_row(m) * sizeof *form->shape);
    return LW_OK;
}

lw_status lw_pattern_fitter_weigh(lw_pattern_fitter *f, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    const lw_lines *lines = m->profiles->lines;
    if (lines->scan->noise == LW_NOISE_SIGMA || lines->fitted == NULL)
        return LW_OK;
    lw_normal normal = {.n = m->n_parameters};
    lw_status status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    for (size_t i = 0; i < m->n && status == LW_OK; i++) {
        double ratio = lines->fitted[i] > 0 ? m->curve[i] / lines->fitted[i] : 1;
        if (lines->variance[i] > 0)
            m->weight[i] = 1 / (lines->variance[i] * fmin(fmax(ratio, 0.5), 2));
    }
    return status;
}

void lw_pattern_fitter_restart_strain(lw_pattern_fitter *f, const lw_strain_form *from,
                                      const lw_pattern_form *to)
{
    double p[LW_PATTERN_STRAIN_MOST] = {0}, *own = f->p + LW_PATTERN_STRAIN;
    if (to->strain != NULL) {
        lw_spheres spheres = lw_pattern_spheres(f->p);
        double length = fmin(0.5 * lw_spheres_size_volume(&spheres, NULL), f->half_length);
        double square = from->displacement(own, length, NULL) / (length * length);
        to->strain->start(fmax(square, 1e-9), length, p);
    } else {
        const lw_strain_knots *knots = &f->answer->knots;
        for (size_t i = 0; i < knots->n; i++) {
            double length = fmax(lw_strain_knots_length(knots, i), 0.1 * knots->scale);
            p[i] = log(fmax(from->displacement(own, length, NULL) / (length * length), 1e-12));
        }
        for (size_t i = knots->n - 1; i > 0; i--)
            p[i] -= p[i - 1];
    }
    memcpy(own, p, sizeof p);
}

lw_status lw_pattern_fitter_save(lw_pattern_fitter *f, lw_pattern_saved *to, lw_error *err)
{
    size_t n = f->pattern.n_parameters;
    to->p = lw_arena_copy(f->arena, f->p, n, sizeof(double), err);
    to->fixed = lw_arena_copy(f->arena, f->fixed, n, sizeof(bool), err);
    to->at_bound = lw_arena_copy(f->arena, f->at_bound, n, sizeof(bool), err);
    memcpy(to->prior, f->pattern.prior, sizeof to->prior);
    return to->p && to->fixed && to->at_bound ? LW_OK : LW_OUT_OF_MEMORY;
}

void lw_pattern_fitter_restore(lw_pattern_fitter *f, const lw_pattern_saved *from,
                               const lw_pattern_form *form)
{
    size_t n = f->pattern.n_parameters;
    memcpy(f->p, from->p, n * sizeof(double));
    memcpy(f->fixed, from->fixed, n * sizeof(bool));
    memcpy(f->at_bound, from->at_bound, n * sizeof(bool));
    memcpy(f->pattern.prior, from->prior, sizeof from->prior);
    set_form(f, form);
}

lw_status lw_pattern_fitter_instrument(lw_pattern_fitter *f, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    const lw_width_function *instrument = &m->profiles->lines->instrument;
    lw_normal normal = {.n = m->n_parameters};
    lw_status status = lw_pattern_evaluate(m, f->p, false, &normal, err);
    double *base = lw_arena_copy(f->arena, m->curve, m->n, sizeof *base, err);
    if (base == NULL)
        return LW_OUT_OF_MEMORY;
    for (int q = 0; q < LW_WIDTH_PARAMETERS && status == LW_OK; q++) {
        double u = sqrt(fmax(instrument->covariance[q][q], 0));
        if (!(u > 0))
            continue;
        lw_width_function moved = *instrument;
        moved.value[q] += 0.1 * u;
        f->by_instrument[q] = lw_arena_take(f->arena, m->n, sizeof(double), err);
        if (f->by_instrument[q] == NULL)
            return LW_OUT_OF_MEMORY;
        status = lw_pattern_instrument(m, &moved, err);
        if (status == LW_OK)
            status = lw_pattern_evaluate(m, f->p, false, &normal, err);
        for (size_t i = 0; i < m->n; i++)
            f->by_instrument[q][i] =
                (base[i] - m->curve[i]) / 0.1; /* what the fit would have to make up for */
    }
    if (status == LW_OK)
        status = lw_pattern_instrument(m, instrument, err);
    return status;
}

/* What the uncertainty of the smoothing's strength adds. work: [n]. */
static void add_strength(lw_pattern_fitter *f, const lw_pattern_prior *prior, double *work,
                         double *covariance)
{
    size_t n = f->pattern.n_parameters, shared = lw_pattern_background_row(&f->pattern);
    double counted, moved[LW_PATTERN_SHARED_MOST];
    lw_pattern_prior_due(prior, f->p, f->inverse, n, f->skip, &counted);
    memset(work, 0, n * sizeof *work);
    lw_pattern_prior_slope(prior, f->p, work);
    for (size_t i = 0; i < shared; i++) {
        moved[i] = 0;
        for (size_t j = 0; j < shared; j++)
            moved[i] += f->inverse[i * n + j] * work[j];
    }
    for (size_t i = 0; i < shared; i++)
        for (size_t j = 0; j < shared; j++)
            covariance[i * n + j] += moved[i] * moved[j] * 2 / counted;
}

lw_status lw_pattern_fitter_covariance(lw_pattern_fitter *f, double misfit, double *covariance, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    size_t n = m->n_parameters, shared = lw_pattern_background_row(m);
    const lw_width_function *instrument = &m->profiles->lines->instrument;
    lw_status status = lw_pattern_fitter_invert(f, err);
    if (status != LW_OK)
        return status;
    double *shift[LW_WIDTH_PARAMETERS] = {NULL}, *g = lw_arena_take(f->arena, n, sizeof *g, err);
    for (int q = 0; q < LW_WIDTH_PARAMETERS; q++) {
        if (f->by_instrument[q] == NULL)
            continue;
        shift[q] = lw_arena_take(f->arena, n, sizeof(double), err);
        if (g == NULL || shift[q] == NULL)
            return LW_OUT_OF_MEMORY;
        memset(g, 0, n * sizeof *g);
        status = lw_pattern_project(m, f->p, f->by_instrument[q], g, err);
        if (status != LW_OK)
            return status;
        for (size_t i = 0; i < shared; i++)
            for (size_t j = 0; j < n; j++)
                shift[q][i] += f->inverse[i * n + j] * g[j];
    }
    for (size_t i = 0; i < shared; i++)
        for (size_t j = 0; j < shared; j++) {
            double sum = misfit * misfit * f->inverse[i * n + j];
            for (int a = 0; a < LW_WIDTH_PARAMETERS; a++)
                for (int b = 0; b < LW_WIDTH_PARAMETERS; b++)
                    if (shift[a] != NULL && shift[b] != NULL)
                        sum += shift[a][i] * shift[b][j] * instrument->covariance[a][b] /
                               sqrt(instrument->covariance[a][a] * instrument->covariance[b][b]);
            covariance[i * n + j] = sum;
        }
    for (int i = 0; i < 2; i++)
        if (m->prior[i].n > 0)
            add_strength(f, &m->prior[i], g, covariance);
    return m->prior[0].n > 0 ? lw_pattern_fitter_positive(f, misfit, covariance, err) : LW_OK;
}
