/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The background of a fit: how many terms, and a scan of the empty holder. */
#include "line/fit_state.h"

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

void lw__fit_set_background(lw_fit_state *fit, size_t terms)
{
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
    return (size_t)fmin(fmax(span / (3 * sum / (double)fit->n), 4), 20);
}

lw_status lw__fit_choose_background(lw_fit_state *fit, lw_error *err)
{
    if (fit->options->background_terms > 0)
        return LW_OK;
    size_t kept = fit->terms, misses = 0;
    double best = fit->chi2, keep[LW_BACKGROUND_MOST];
    memcpy(keep, fit->background, sizeof keep);
    size_t most = most_terms(fit);
    while (fit->terms + 2 <= most && misses < 2) {
        double scale = fmax(1, best / (double)fit->scan->n);
        lw__fit_set_background(fit, fit->terms + 2);
        lw_status status = lw__fit_stage(fit, 1, false, err);
        if (status != LW_OK)
            return status;
        double gain = (best - fit->chi2) / scale, price = (double)(fit->terms - kept) * log((double)fit->scan->n);
        if (gain > price) {
            kept = fit->terms;
            best = fit->chi2;
            memcpy(keep, fit->background, sizeof keep);
            misses = 0;
        } else
            misses++;
    }
    if (fit->terms != kept) {
        /* the special terms stand behind the Chebyshev ones: put the kept vector back as it was */
        lw__fit_set_background(fit, kept);
        memcpy(fit->background, keep, sizeof keep);
    }
    return LW_OK;
}
