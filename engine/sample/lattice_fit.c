/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/lattice_fit.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define RADIAN (3.14159265358979323846 / 180)
#define SHARED_MOST 0.98 /* multiple correlation above which a displacement can't be told from the cell */
#define LINES_FOR_DISPLACEMENT 4
#define FALL_CHANCE                                                                                          \
    1e-3 /* a fall of chi-square by one parameter rarer than this is evidence of it */

static double radius_of(const lw_lattice *m)
{
    return m->profiles->calibration->aberrations.radius_mm;
}

/* Shift at a true 2theta by the calibration and by this specimen's own aberrations (last of p), and its
 * derivative to 2theta by a central difference: without it, a short range converges slowly. */
static double shift_at(const lw_lattice *m, const double *p, double two_theta, double *derivative)
{
    static const double step = 0.01;
    double at[3];
    for (int i = 0; i < 3; i++) {
        double x = two_theta + (i - 1) * step;
        at[i] = lw_position_shift(m->profiles, m->own, m->n_own, x);
        for (size_t k = 0; k < m->n_own; k++)
            at[i] += p[m->free.n + k] * m->own[k]->slope(x, radius_of(m));
    }
    *derivative = (at[2] - at[0]) / (2 * step);
    return at[1];
}

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    lw_lattice *m = user;
    (void)x_slope;
    size_t n_free = m->free.n, columns = n_free + m->n_own;
    lw_cell_free_set(&m->free, p, &m->cell);
    for (size_t i = 0; i < m->n; i++) {
        const lw_reflection *r = &m->profiles->profile[m->use[i]].line->reflection;
        double s = lw_cell_s(&m->cell, r->h, r->k, r->l), d[6];
        double sine = 0.5 * m->wavelength * s;
        if (!(sine > 0 && sine < 1)) {
            value[i] = NAN;
            continue;
        }
        double theta = asin(sine) / RADIAN, two_theta = 2 * theta;
        double d_shift, shift = shift_at(m, p, two_theta, &d_shift);
        double u_scattering;
        value[i] = two_theta + shift + lw_position_scattering(m->profiles, m->use[i], &u_scattering);
        lw_cell_s_slopes(&m->cell, r->h, r->k, r->l, d);
        double per_s = (1 + d_shift) / lw_position_s_slope(s, theta);
        for (size_t j = 0; j < n_free; j++)
            for (int k = 0; k < 6; k++)
                if (m->free.moves[j][k])
                    slopes[i * columns + j] += per_s * d[k];
        for (size_t k = 0; k < m->n_own; k++)
            slopes[i * columns + n_free + k] = m->own[k]->slope(two_theta, radius_of(m));
    }
}

const lw_line *lw__lattice_line(const lw_lattice *m, size_t i)
{
    return m->profiles->profile[m->use[i]].line;
}

size_t lw__lattice_row(const lw_lattice *m, const lw_lattice_answer *answer, const char *name)
{
    for (size_t k = 0; k < answer->n_own; k++)
        if (strcmp(answer->own[k]->name, name) == 0)
            return m->free.n + k;
    return LW_NO_PARAMETER;
}

/* Fits the cell with some of this specimen's own aberrations. */
static lw_status fit_cell(lw_lattice *m, const lw_aberration *const *own, size_t n_own, lw_arena *arena,
                          lw_lattice_answer *out, lw_error *err)
{
    size_t n = m->n;
    memset(out, 0, sizeof *out);
    m->n_own = out->n_own = n_own;
    for (size_t k = 0; k < n_own; k++)
        m->own[k] = out->own[k] = own[k];
    double *y = lw_arena_take(arena, n, sizeof *y, err);
    double *covariance = lw_arena_take(arena, n * n, sizeof *covariance, err);
    const double *all = lw_position_covariance(m->profiles, m->own, n_own, arena, err);
    if (y == NULL || covariance == NULL || all == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++) {
        y[i] = lw__lattice_line(m, i)->two_theta.value;
        for (size_t j = 0; j < n; j++)
            covariance[i * n + j] = all[m->use[i] * m->profiles->n + m->use[j]];
    }
    m->cell = m->profiles->lines->material->cell;
    lw_cell_free_read(&m->free, &m->cell, out->p);
    lw_generalised problem = {.n = n,
                              .m = m->free.n + n_own,
                              .y = y,
                              .covariance = covariance,
                              .model = model,
                              .user = m};
    size_t weakest = 0;
    lw_error each = LW_ERROR_NONE;
    lw_status status = lw_generalised_solve(&problem, arena, out->p, &out->fit, &weakest, &each);
    if (status == LW_NOT_SUPPORTED && n >= problem.m && out->fit.iterations == 0 && weakest > 0)
        return lw_fail(err, status, "measure lines of other directions",
                       "the lines measured do not determine %s of the cell",
                       weakest < m->free.n ? m->free.name[weakest] : "what the specimen adds beside the parameters");
    if (status != LW_OK)
        *err = each;
    return status;
}

static bool is_flat(const lw_calibration *calibration)
{
    return calibration != NULL && strcmp(calibration->geometry, "reflection") == 0;
}

/* Chance that chi-square falls as far as from `without` to `with` by chance. The fall counts in units of what
 * scatters about the better fit (F test, its denominator's own scatter left out, which the strict limit
 * covers). */
static double chance_of_fall(const lw_lattice_answer *without, const lw_lattice_answer *with)
{
    double scatter = with->fit.scatter;
    return lw_generalised_p((without->fit.chi2 - with->fit.chi2) / (scatter * scatter), with->n_own - without->n_own);
}

/* Chooses between the two fits by what the lines can tell and by how well each stands. */
static lw_status choose(lw_lattice *m, const lw_aberration *displacement, lw_arena *arena, lw_lattice_answer *out,
                        lw_error *err)
{
    lw_lattice_answer with, without;
    lw_error each = LW_ERROR_NONE;
    size_t needed = m->free.n + 2 > LINES_FOR_DISPLACEMENT ? m->free.n + 2 : LINES_FOR_DISPLACEMENT;
    lw_status status = m->n < needed ? LW_NOT_SUPPORTED : fit_cell(m, &displacement, 1, arena, &with, &each);
    if (status == LW_OUT_OF_MEMORY) {
        *err = each;
        return status;
    }
    if (status == LW_OK && with.fit.shared[m->free.n] < SHARED_MOST) {
        *out = with;
        out->why = "this specimen's displacement was refined";
        return LW_OK;
    }
    lw_status plain = fit_cell(m, NULL, 0, arena, &without, err);
    if (plain != LW_OK)
        return plain;
    if (status == LW_OK && chance_of_fall(&without, &with) < FALL_CHANCE) {
        *out = with;
        out->why = "this specimen's displacement was refined: the lines hardly tell it from the cell, which "
                   "enlarges the uncertainty, but do not fit without it";
        return LW_OK;
    }
    *out = without;
    out->why = m->n < needed
                   ? "too few lines to refine this specimen's displacement: the calibration's was used, "
                     "a difference is not in the uncertainty"
                   : "the lines cannot tell this specimen's displacement from the cell and fit without "
                     "it: the calibration's was used, a difference is not in the uncertainty";
    return LW_OK;
}

/* n ln(chi2/n) + 2 K + 2 K (K + 1)/(n - K - 1), K parameters with the scale: Hurvich & Tsai (1989) Biometrika 76, 297. */
static double aicc(const lw_lattice *m, const lw_lattice_answer *a)
{
    double points = (double)a->fit.rank, k = (double)(m->free.n + a->n_own) + 1;
    return points - k - 1 > 0 ? points * log(a->fit.chi2 / points) + 2 * k + 2 * k * (k + 1) / (points - k - 1) : INFINITY;
}

static void note_trial(const lw_lattice *m, const lw_lattice_answer *a, lw_lattice_answer *list)
{
    lw_lattice_trial *trial = &list->tried[list->n_tried++];
    *trial = (lw_lattice_trial){.chi2 = a->fit.chi2, .criterion = aicc(m, a)};
    size_t used = 0;
    for (size_t k = 0; k < a->n_own; k++)
        used += (size_t)snprintf(trial->refined + used, sizeof trial->refined - used, "%s%s", k > 0 ? ", " : "", a->own[k]->name);
}

/* Adds the transparency to the fit at hand, beside the displacement, where the lines give evidence for it: the criterion
 * falls, by more than chance would make it, and the sign is that of a penetration. */
static lw_status deepen(lw_lattice *m, const lw_aberration *displacement, const lw_aberration *transparency, lw_arena *arena,
                        lw_lattice_answer *out, lw_error *err)
{
    const lw_aberration *both[2] = {displacement, transparency};
    if (m->n < m->free.n + 4)
        return LW_OK;
    lw_lattice_answer deep, plain, list = {0};
    lw_error each = LW_ERROR_NONE;
    lw_status status = fit_cell(m, both, 2, arena, &deep, &each);
    if (status == LW_OK && out->n_own == 0) {
        status = fit_cell(m, both, 1, arena, &plain, &each);
        if (status == LW_OK)
            note_trial(m, &plain, &list);
    }
    if (status == LW_OUT_OF_MEMORY)
        *err = each;
    if (status != LW_OK)
        return status == LW_OUT_OF_MEMORY ? status : LW_OK; /* the lines can't carry it: the fit at hand stands */
    note_trial(m, out, &list);
    note_trial(m, &deep, &list);
    size_t row = m->free.n + 1;
    double u = sqrt(deep.fit.covariance[row][row]) * deep.fit.scatter;
    if (aicc(m, &deep) < aicc(m, out) - 2 && chance_of_fall(out, &deep) < FALL_CHANCE && deep.p[row] < -2 * u) {
        *out = deep;
        out->why = "this specimen's displacement was refined";
        out->why_deep = "this specimen's transparency was refined beside it, in place of the standard's: the lines do not fit "
                        "without (AICc); the law -sin(2theta)/(2 mu R) of the centroid was taken for the fitted places";
    }
    memcpy(out->tried, list.tried, sizeof list.tried);
    out->n_tried = list.n_tried;
    return LW_OK;
}

lw_status lw__lattice_fit(lw_lattice *m, int displacement, int transparency, lw_arena *arena, lw_lattice_answer *out,
                          lw_error *err)
{
    const lw_calibration *calibration = m->profiles->calibration;
    const lw_aberration *height = lw_aberration_named("displacement"), *depth = lw_aberration_named("transparency");
    if ((displacement == LW_LATTICE_YES || transparency == LW_LATTICE_YES) && calibration == NULL)
        return lw_fail(err, LW_NOT_SUPPORTED, "give a calibration",
                       "the specimen's displacement and transparency need the goniometer radius of a calibration");
    bool flat = is_flat(calibration), automatic = displacement == LW_LATTICE_AUTO && flat;
    const lw_aberration *own[2] = {0};
    size_t n_own = 0;
    if (displacement == LW_LATTICE_YES || (automatic && transparency == LW_LATTICE_YES))
        own[n_own++] = height;
    if (transparency == LW_LATTICE_YES)
        own[n_own++] = depth;
    lw_status status = automatic && transparency != LW_LATTICE_YES ? choose(m, height, arena, out, err)
                                                                   : fit_cell(m, own, n_own, arena, out, err);
    if (status == LW_OK && automatic && transparency == LW_LATTICE_AUTO)
        status = deepen(m, height, depth, arena, out, err);
    if (status != LW_OK)
        return status;
    m->n_own = out->n_own;
    memcpy(m->own, out->own, sizeof m->own);
    if (displacement == LW_LATTICE_NO && flat)
        out->why =
            "this specimen was taken to lie where the standard lay; a difference is not in the uncertainty";
    return LW_OK;
}
