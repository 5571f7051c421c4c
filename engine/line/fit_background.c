/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The background of a fit: how many terms, and a scan of the empty holder. */
#include "line/fit_state.h"
#include "numeric/chebyshev.h"
#include "numeric/cholesky.h"

#include <math.h>
#include <string.h>

lw_status lw__fit_take_background_scan(lw_fit_state *fit, lw_error *err)
{
    const lw_scan *empty = fit->options->background_scan, *scan = fit->scan;
    if (empty == NULL)
        return LW_OK;
    fit->extra = lw_arena_take(&fit->scratch, scan->n, sizeof *fit->extra, err);
    fit->extra_variance = lw_arena_take(&fit->scratch, scan->n, sizeof *fit->extra_variance, err);
    if (!fit->extra || !fit->extra_variance)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < scan->n; i++) {
        bool inside;
        fit->extra[i] = lw_scan_at(empty, scan->two_theta_deg[i], &inside);
        if (!inside)
            return lw_fail_at(err, LW_BAD_ARGUMENT, empty->file, 0, "crop the scan with range, or measure the holder further",
                              "the background scan does not reach %.3f deg", scan->two_theta_deg[i]);
        fit->extra_variance[i] = empty->variance_factor * fmax(fit->extra[i], 0);
    }
    return LW_OK;
}

size_t lw__fit_background_room(const lw_fit_options *options)
{
    return (options->background_terms > 0 ? (size_t)options->background_terms : LW_BACKGROUND_CHOICE) + 2;
}

void lw__fit_set_background(lw_fit_state *fit, size_t terms)
{
    if (fit->model.n_background > 0 && terms == fit->terms)
        return;
    bool hyperbola = fit->options->background_hyperbola;
    double special[2] = {0, 0};
    size_t n_special = (size_t)hyperbola + (fit->extra != NULL);
    if (fit->model.n_background > 0)
        memcpy(special, fit->background + fit->terms, n_special * sizeof(double));
    for (size_t i = fit->terms; i < terms; i++)
        fit->background[i] = 0;
    memcpy(fit->background + terms, special, n_special * sizeof(double));
    fit->terms = terms;
    lw_model_background(&fit->model, terms, hyperbola, fit->extra);
}

lw_status lw__fit_start_background(lw_fit_state *fit, const double *level, lw_error *err)
{
    const lw_scan *scan = fit->scan;
    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[scan->n - 1], span = high - low;
    size_t terms = (size_t)fit->options->background_terms;
    if (terms == 0)
        terms = span > 60 ? 6 : span > 15 ? 4 : 2;
    size_t ld = (terms + 7) / 8 * 8, stride = scan->n / 1024 + 1;
    double *u = lw_arena_take(&fit->scratch, terms * ld, sizeof *u, err);
    if (u == NULL)
        return LW_OUT_OF_MEMORY;
    double t[LW_BACKGROUND_MOST], z[LW_BACKGROUND_MOST] = {0};
    for (size_t i = stride / 2; i < scan->n; i += stride) {
        lw_chebyshev(scan->two_theta_deg[i], low, high, terms, t, NULL);
        for (size_t a = 0; a < terms; a++) {
            z[a] += t[a] * level[i];
            for (size_t b = 0; b <= a; b++)
                u[b * ld + a] += t[a] * t[b];
        }
    }
    size_t done = lw_cholesky(u, terms, ld, 1e-12 * u[0]);
    lw_cholesky_forward(u, done, ld, z);
    lw_cholesky_back(u, done, ld, z);
    lw__fit_set_background(fit, terms);
    memcpy(fit->background, z, done * sizeof *z);
    return LW_OK;
}

/* Terms beyond which the background would follow the lines' tails: its shortest wave, twice the span over the order,
 * stays six times as long as the lines are wide on average. */
static size_t most_terms(const lw_fit_state *fit)
{
    double sum = 0, span = fit->scan->two_theta_deg[fit->scan->n - 1] - fit->scan->two_theta_deg[0];
    for (size_t k = 0; k < fit->n; k++) {
        double variance, lorentz;
        lw_model_widths(&fit->model, fit->p, k, &variance, &lorentz);
        sum += lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), lorentz);
    }
    return (size_t)fmin(fmax(span / (3 * sum / (double)fit->n), 4), LW_BACKGROUND_CHOICE);
}

/* The normal equations at a point, factorised, the background's terms from `first` on last. */
typedef struct term_system {
    size_t first, others; /* number of the first term that is last; of parameters before it */
    size_t known;         /* of the terms behind, before the matrix becomes singular */
    size_t ld, *at;       /* which parameter each row is */
    double *u, *z, *scale; /* factor; right-hand side after the forward substitution; of a row */
} term_system;

static lw_status take_system(lw_fit_state *fit, size_t first, size_t most, term_system *s, lw_error *err)
{
    *s = (term_system){.first = first};
    lw__fit_set_background(fit, most);
    lw_status status = lw__fit_pack(fit, err);
    if (status != LW_OK)
        return status;
    size_t n = fit->n_parameters, border = lw_model_border(&fit->model), m = 0;
    s->ld = (n + 7) / 8 * 8;
    lw_normal normal = {.n = n};
    normal.h = lw_arena_take(&fit->scratch, n * n, sizeof(double), err);
    normal.g = lw_arena_take(&fit->scratch, n, sizeof(double), err);
    s->u = lw_arena_take(&fit->scratch, n * s->ld, sizeof(double), err);
    s->z = lw_arena_take(&fit->scratch, n, sizeof(double), err);
    s->scale = lw_arena_take(&fit->scratch, n, sizeof(double), err);
    s->at = lw_arena_take(&fit->scratch, n, sizeof(size_t), err);
    if (!normal.h || !normal.g || !s->u || !s->z || !s->scale || !s->at)
        return LW_OUT_OF_MEMORY;
    lw_model_windows(&fit->model, fit->p, fit->options->window);
    status = lw__fit_evaluate(fit, fit->p, true, &normal, err);
    if (status != LW_OK)
        return status;
    fit->chi2 = normal.chi2;
    if (!isfinite(normal.chi2))
        return LW_OK; /* no term is known then */
    for (int pass = 0; pass < 2; pass++) {
        for (size_t i = 0; i < n; i++) {
            bool term = i >= border + first && i < border + most;
            double g = normal.g[i];
            bool pressed = (fit->p[i] <= fit->lower[i] && g <= 0) || (fit->p[i] >= fit->upper[i] && g >= 0);
            if (term == (pass == 1) && !fit->fixed[i] && !pressed && normal.h[i * n + i] > 0)
                s->at[m++] = i;
        }
        if (pass == 0)
            s->others = m;
    }
    for (size_t a = 0; a < m; a++) {
        s->scale[a] = 1 / sqrt(normal.h[s->at[a] * n + s->at[a]]);
        s->z[a] = normal.g[s->at[a]] * s->scale[a];
        for (size_t b = 0; b <= a; b++) {
            size_t i = s->at[a] > s->at[b] ? s->at[a] : s->at[b], j = s->at[a] > s->at[b] ? s->at[b] : s->at[a];
            s->u[b * s->ld + a] = normal.h[i * n + j] * s->scale[a] * s->scale[b];
        }
    }
    size_t done = lw_cholesky(s->u, m, s->ld, 1e-13);
    lw_cholesky_forward(s->u, done, s->ld, s->z);
    s->known = done > s->others ? done - s->others : 0;
    if (done < s->others)
        s->others = 0; /* nothing can be said */
    return LW_OK;
}

/* By how much chi-square falls with the next two of the terms, everything else following: the squares of the forward
 * substitution, as if each number of terms had been fitted. */
static double fall_of_two(const term_system *s, size_t terms)
{
    const double *z = s->z + s->others + terms - s->first;
    return z[0] * z[0] + z[1] * z[1];
}

lw_status lw__fit_linear_start(lw_fit_state *fit, lw_error *err)
{
    size_t first = fit->terms, kept = first, most = fit->options->background_terms > 0 ? first : LW_BACKGROUND_CHOICE;
    term_system s;
    lw_arena_mark mark = lw_arena_mark_now(&fit->scratch);
    lw_status status = take_system(fit, first, most, &s, err);
    if (status != LW_OK)
        return status;
    /* The shapes are rough as yet, and terms would follow what they miss. Only a background so crooked that more than half
     * of chi-square is its own gets more of them now; without them the lines would be drawn into it. */
    double least = fit->chi2;
    for (size_t i = 0; i < s.others + s.known; i++)
        least -= s.z[i] * s.z[i];
    double now = least;
    for (size_t i = 0; i < s.known; i++)
        now += s.z[s.others + i] * s.z[s.others + i];
    while (least < 0.4 * now && now > 1.5 * least && kept + 2 <= first + s.known) {
        now -= fall_of_two(&s, kept);
        kept += 2;
    }
    size_t m = s.others > 0 ? s.others + kept - first : 0;
    lw_cholesky_back(s.u, m, s.ld, s.z);
    for (size_t a = 0; a < m; a++)
        fit->p[s.at[a]] += s.z[a] * s.scale[a];
    lw__fit_unpack(fit);
    lw__fit_set_background(fit, kept);
    lw_arena_rewind(&fit->scratch, mark);
    fit->p = NULL; /* its arrays went with the scratch */
    return lw__fit_pack(fit, err);
}

lw_status lw__fit_choose_background(lw_fit_state *fit, bool *more, lw_error *err)
{
    size_t first = fit->terms, kept = first, misses = 0, most = most_terms(fit);
    *more = false;
    if (fit->options->background_terms > 0 || most < first + 2)
        return LW_OK;
    term_system s;
    lw_arena_mark mark = lw_arena_mark_now(&fit->scratch);
    lw_status status = take_system(fit, first, most, &s, err);
    if (status != LW_OK)
        return status;
    double best = fit->chi2, gain = 0;
    for (size_t terms = first; terms + 2 <= first + s.known && misses < 2; terms += 2) {
        gain += fall_of_two(&s, terms);
        if (gain / fmax(1, best / (double)fit->scan->n) > (double)(terms + 2 - kept) * log((double)fit->scan->n)) {
            kept = terms + 2;
            best -= gain;
            gain = 0;
            misses = 0;
        } else
            misses++;
    }
    lw__fit_set_background(fit, kept);
    lw_arena_rewind(&fit->scratch, mark);
    fit->p = NULL;
    *more = kept > first;
    return lw__fit_pack(fit, err);
}
