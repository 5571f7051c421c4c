/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern.h"

#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

#define PI 3.14159265358979323846
#define EDGE 4 /* grid cells at each end that no point uses */

/* One evaluation. */
typedef struct evaluation {
    lw_pattern *m;
    const double *p;
    bool slopes;
    bool anisotropy, variation, fall; /* their rows are wanted */
    double *first, *second;           /* [n] sums over lines of area x profile, and the same x s0^2 */
} evaluation;

static bool wanted(const lw_pattern *m, size_t row)
{
    return m->fixed == NULL || !m->fixed[row];
}

static double *shared(const lw_pattern *m, size_t row)
{
    return m->shared + row * m->n;
}

/* A curve's grid from its coefficients. */
static const double *grid_of(lw_pattern *m, size_t which, const double *curve, size_t count, double tail)
{
    double *grid = m->grid + which * m->n_fft;
    m->rung->product(count, curve, m->falls, m->spectrum);
    memset(m->spectrum + 2 * count, 0, (m->n_fft + 2 - 2 * count) * sizeof(double));
    lw_fft_back(m->plan, m->spectrum, grid);
    if (tail != 0)
        m->rung->take_off(m->n_fft, tail, m->neighbours, grid);
    return grid;
}

/* How the line's coefficients fall with strain, into m->falls; returns after how many nothing is left. Where
 * strain varies between crystals m->exponent takes ln(1 + kappa x)/kappa, m->thinned its slope to x, 1/(1 +
 * kappa x). */
static size_t set_falls(lw_pattern *m, const lw_pattern_line *line, double strength, double kappa, bool thin)
{
    if (!thin)
        return m->rung->falls(m->n_lengths, strength, m->shape.displacement, line->g, m->falls);
    for (size_t j = 0; j < m->n_lengths; j++) {
        double x = strength * m->shape.displacement[j];
        m->exponent[j] = kappa > 0 ? log1p(kappa * x) / kappa : x;
        m->thinned[j] = 1 / (1 + kappa * x);
    }
    return m->rung->falls(m->n_lengths, 1, m->exponent, line->g, m->falls);
}

/* Slope of the coefficient to kappa over its fall: size times (ln(1 + y) - y/(1 + y))/kappa^2, y = kappa x. */
static const double *by_kappa(lw_pattern *m, double strength, double kappa)
{
    for (size_t j = 0; j < m->n_lengths; j++) {
        double x = strength * m->shape.displacement[j], y = kappa * x, slope;
        if (y < 1e-3)
            slope = x * x * (0.5 + y * (-2.0 / 3 + y * (0.75 - 0.8 * y)));
        else
            slope = (log1p(y) - y / (1 + y)) / (kappa * kappa);
        m->work[j] = m->shape.size[j] * slope;
    }
    return m->work;
}

static void add_line(const evaluation *e, size_t k)
{
    lw_pattern *m = e->m;
    lw_pattern_shape *shape = &m->shape;
    lw_pattern_line *line = &m->line[k];
    size_t row = lw_pattern_position_row(m, k);
    double moved = e->p[row], area = e->p[row + 1], s0 = line->s_start + moved;
    double squared = line->s_corrected + moved, strain = 2 * PI * PI * squared * squared;
    double scale = 1 - e->p[LW_PATTERN_ANISOTROPY] * line->hkl_sum, unit = 1 / (2 * PI * PI);
    double lift = line->lift = exp(e->p[LW_PATTERN_FALL] * s0 * s0);
    double kappa = e->p[LW_PATTERN_VARIATION];
    bool thin = kappa > 0 || e->variation;
    size_t count = set_falls(m, line, strain * scale, kappa, thin);

    lw_pattern_channel channel[2 + LW_PATTERN_SIZE_MOST + LW_PATTERN_STRAIN_MOST];
    double tail = unit * (shape->size_kink + strain * scale * shape->strain_kink + line->kink);
    channel[0] = (lw_pattern_channel){.grid = grid_of(m, 0, shape->size, count, tail),
                                      .tail = tail,
                                      .sum = e->first,
                                      .share = lift * area,
                                      .also = e->fall ? e->second : NULL,
                                      .also_share = lift * area * s0 * s0,
                                      .value = e->slopes ? m->own + (2 * k + 1) * m->n : NULL,
                                      .slope = e->slopes ? m->own + 2 * k * m->n : NULL};
    size_t n = 1;
    for (size_t i = 0; i < shape->n_size && e->slopes; i++) {
        if (!wanted(m, LW_PATTERN_SIZE + i))
            continue;
        tail = unit * shape->size_kink_slope[i];
        channel[n] = (lw_pattern_channel){.grid = grid_of(m, n, shape->size_slope[i], count, tail),
                                          .tail = tail,
                                          .sum = shared(m, LW_PATTERN_SIZE + i),
                                          .share = lift * area};
        n++;
    }
    bool turned = e->anisotropy && line->hkl_sum != 0;
    for (size_t i = 0; i < shape->n_strain && e->slopes; i++) {
        bool own = wanted(m, LW_PATTERN_STRAIN + i);
        if (!own && !(turned && shape->combine[i] != 0))
            continue;
        /* the slope to ln of the coefficient is -strain scale x slope of the displacement, and the
         * anisotropy's slope a combination of these */
        tail = -unit * shape->strain_kink_slope[i];
        double by_strain = -strain * scale * lift * area;
        const double *curve = shape->strained[i];
        for (size_t j = 0; j < count && thin; j++)
            m->work[j] = curve[j] * m->thinned[j];
        channel[n] =
            (lw_pattern_channel){.grid = grid_of(m, n, thin ? m->work : curve, count, tail),
                                 .tail = tail,
                                 .sum = own ? shared(m, LW_PATTERN_STRAIN + i) : NULL,
                                 .share = by_strain,
                                 .also = turned ? shared(m, LW_PATTERN_ANISOTROPY) : NULL,
                                 .also_share = -line->hkl_sum / scale * shape->combine[i] * by_strain};
        n++;
    }
    if (e->variation) {
        const double *curve = by_kappa(m, strain * scale, kappa);
        channel[n] = (lw_pattern_channel){.grid = grid_of(m, n, curve, count, 0),
                                          .sum = shared(m, LW_PATTERN_VARIATION),
                                          .share = lift * area};
        n++;
    }
    double per_cell = (double)m->n_fft * m->length_step, half = ((double)(m->n_fft / 2) - EDGE) / per_cell;
    m->rung->spread(m->n, m->s, s0, per_cell, m->n_fft, lw_first_not_below(m->s, m->n, s0 - half),
                    lw_first_not_below(m->s, m->n, s0 + half), channel, n);
}

static bool possible(const lw_pattern *m, const double *p)
{
    for (size_t k = 0; k < m->n_lines; k++)
        if (!(1 - p[LW_PATTERN_ANISOTROPY] * m->line[k].hkl_sum > 0))
            return false;
    return lw_pattern_shape_possible(&m->shape, p);
}

/* Where the columns of the normal equations come from. */
static size_t list_sources(const evaluation *e, lw_pattern_source *source)
{
    const lw_pattern *m = e->m;
    size_t n = 0, background = lw_pattern_background_row(m), lines = lw_pattern_position_row(m, 0);
    for (size_t row = 0; row < m->n_parameters; row++) {
        if (!wanted(m, row))
            continue;
        if (row < background) {
            if ((row < LW_PATTERN_ANISOTROPY && row >= m->shape.n_strain) ||
                (row == LW_PATTERN_ANISOTROPY && !e->anisotropy))
                continue;
            source[n++] = (lw_pattern_source){shared(m, row), row, 1, true};
        } else if (row < lines) {
            source[n++] = (lw_pattern_source){m->basis + (row - background) * m->n, row, 1, false};
        } else {
            size_t own = row - lines;
            double lift = m->line[own / 2].lift;
            source[n++] = (lw_pattern_source){m->own + own * m->n, row,
                                              own % 2 == 0 ? lift * e->p[row + 1] : lift, true};
        }
    }
    return n;
}

/* Normal equations (or, with normal NULL, only J' W residual into g), block by block. */
static void add_columns(const evaluation *e, const double *residual, lw_normal *normal, double *g)
{
    lw_pattern *m = e->m;
    lw_pattern_source *list = m->source;
    size_t count = list_sources(e, list),
           padded = (count + LW_PATTERN_TILE - 1) / LW_PATTERN_TILE * LW_PATTERN_TILE;
    memset(m->total, 0, lw_pattern_total_size(padded) * sizeof(double));
    for (size_t a = count; a < padded; a++) {
        memset(m->column + a * LW_PATTERN_BLOCK, 0, LW_PATTERN_BLOCK * sizeof(double));
        memset(m->weighted + a * LW_PATTERN_BLOCK, 0, LW_PATTERN_BLOCK * sizeof(double));
    }
    for (size_t first = 0; first < m->n; first += LW_PATTERN_BLOCK) {
        size_t points = m->n - first < LW_PATTERN_BLOCK ? m->n - first : LW_PATTERN_BLOCK;
        m->rung->columns(points, first, list, count, m->fallen, m->weight, residual, m->column, m->weighted,
                         g);
        if (normal != NULL)
            m->rung->multiply(padded, m->weighted, m->column, m->total);
    }
    for (size_t a = 0; a < count && normal != NULL; a++)
        for (size_t b = 0; b <= a; b++)
            normal->h[list[a].row * m->n_parameters + list[b].row] += m->rung->product_of(m->total, a, b);
}

/* The points' factor with the fall of the scattering power, anew only where that has changed. */
static void set_fall(lw_pattern *m, double fall)
{
    if (m->fallen_at == fall)
        return;
    for (size_t i = 0; i < m->n; i++)
        m->fallen[i] = m->factor[i] * exp(-fall * m->s[i] * m->s[i]);
    m->fallen_at = fall;
}

static lw_status evaluate(lw_pattern *m, const double *p, bool slopes, lw_normal *normal,
                          const double *difference, double *g, lw_error *err)
{
    if (normal != NULL && !possible(m, p)) {
        normal->chi2 = INFINITY;
        return LW_OK;
    }
    lw_status status = lw_engine_poll(m->engine, err);
    if (status != LW_OK)
        return status;
    size_t n = m->n;
    evaluation e = {
        .m = m, .p = p, .slopes = slopes, .first = m->of_lines, .second = shared(m, LW_PATTERN_SHARED_MOST)};
    for (size_t k = 0; k < m->n_lines && wanted(m, LW_PATTERN_ANISOTROPY); k++)
        e.anisotropy |= slopes && m->line[k].hkl_sum != 0;
    e.variation = slopes && wanted(m, LW_PATTERN_VARIATION);
    e.fall = slopes && wanted(m, LW_PATTERN_FALL);
    lw_pattern_shape_fill(&m->shape, p, slopes);
    set_fall(m, p[LW_PATTERN_FALL]);
    memset(m->of_lines, 0, n * sizeof(double));
    for (size_t row = 0; row < lw_pattern_background_row(m) && slopes; row++)
        memset(shared(m, row), 0, n * sizeof(double));
    if (e.fall)
        memset(e.second, 0, n * sizeof(double));
    for (size_t k = 0; k < m->n_lines; k++)
        add_line(&e, k);
    if (e.fall) {
        double *by_fall = shared(m, LW_PATTERN_FALL);
        for (size_t i = 0; i < n; i++)
            by_fall[i] = e.second[i] - m->s[i] * m->s[i] * m->of_lines[i];
    }
    const lw_lines *lines = m->profiles->lines;
    const double *background = p + lw_pattern_background_row(m);
    memcpy(m->curve, lines->background, n * sizeof(double));
    for (size_t j = 0; j < m->n_background; j++)
        if (background[j] != 0)
            for (size_t i = 0; i < n; i++)
                m->curve[i] += background[j] * m->basis[j * n + i];
    double chi2 = 0;
    for (size_t i = 0; i < n; i++) {
        m->of_lines[i] *= m->fallen[i];
        m->curve[i] += m->of_lines[i];
        m->residual[i] = difference != NULL ? difference[i] : lines->scan->intensity[i] - m->curve[i];
        chi2 += m->residual[i] * m->residual[i] * m->weight[i];
    }
    if (slopes)
        add_columns(&e, m->residual, normal, normal != NULL ? normal->g : g);
    m->penalty = 0;
    for (size_t i = 0; i < sizeof m->prior / sizeof *m->prior && normal != NULL; i++)
        if (m->prior[i].n > 0)
            m->penalty +=
                lw_pattern_prior_add(&m->prior[i], p, slopes ? normal : &(lw_normal){.n = m->n_parameters});
    if (normal != NULL)
        normal->chi2 = chi2 + m->penalty;
    return LW_OK;
}

lw_status lw_pattern_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    return evaluate(user, p, want_normal, normal, NULL, NULL, err);
}

lw_status lw_pattern_project(lw_pattern *pattern, const double *p, const double *difference, double *g,
                             lw_error *err)
{
    return evaluate(pattern, p, true, NULL, difference, g, err);
}
