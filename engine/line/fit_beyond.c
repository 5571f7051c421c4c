/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lines beyond the ends of the scan whose tails reach into it. Left out, they would widen the last lines inside and bend
 * the background. Their tops are not seen, so that they can't be fitted like the others: place and width follow what the
 * others show, and the area is tied to what they have for their multiplicity, as loosely as they scatter about it. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

/* Straight line y = a + b x by weighted least squares, b = 0 where x does not spread. */
typedef struct trend {
    double a, b, weight, middle, spread; /* sums: weight; weighted mean of x and sum of squares about it */
    double variance;                     /* of a point about the line */
} trend;

static trend trend_of(const double *x, const double *y, const double *weight, size_t n)
{
    trend t = {0};
    double mean_y = 0, cross = 0, rest = 0;
    for (size_t i = 0; i < n; i++) {
        t.weight += weight[i];
        t.middle += weight[i] * x[i];
        mean_y += weight[i] * y[i];
    }
    t.middle /= t.weight;
    mean_y /= t.weight;
    for (size_t i = 0; i < n; i++) {
        t.spread += weight[i] * (x[i] - t.middle) * (x[i] - t.middle);
        cross += weight[i] * (x[i] - t.middle) * (y[i] - mean_y);
    }
    t.b = n > 2 && t.spread > 0 ? cross / t.spread : 0;
    t.a = mean_y - t.b * t.middle;
    for (size_t i = 0; i < n; i++)
        rest += (y[i] - t.a - t.b * x[i]) * (y[i] - t.a - t.b * x[i]);
    t.variance = n > 2 ? rest / (double)(n - 2) : 0;
    return t;
}

/* Intensity of one family's plane without structure: multiplicity, polarisation and Lorentz factor of a powder. */
static double geometry_of(const lw_fit_state *fit, const lw_reflection *r)
{
    double theta = r->two_theta_deg * M_PI / 360, c = cos(2 * theta), s = sin(theta);
    double polarisation = fit->model.constant_polarisation + fit->model.cos2_monochromator * c * c;
    return (double)r->multiplicity * polarisation / (s * s * cos(theta));
}

/* Weighted sum over the scan of the squared tail of a line of unit area. */
static double seen_of(const lw_fit_state *fit, double position, double variance, double lorentz)
{
    const lw_scan *scan = fit->scan;
    size_t stride = scan->n / 512 + 1;
    double sum = 0;
    for (size_t i = 0; i < scan->n; i += stride) {
        double value = lw_voigt(scan->two_theta_deg[i] - position, sqrt(variance), lorentz);
        sum += (double)stride * fit->model.weight[i] * value * value;
    }
    return sum;
}

/* What the lines inside tell: their shift against tan(theta), and their areas over what the geometry gives against s or
 * s^2 (*power), whichever they follow better. */
static bool take_trends(const lw_fit_state *fit, trend *shift, trend *strength, double *power, double *work)
{
    size_t n = 0;
    double *t = work, *moved = work + fit->n, *weight = work + 2 * fit->n, *s = work + 3 * fit->n, *area = work + 4 * fit->n;
    double *even = work + 5 * fit->n;
    for (size_t k = 0; k < fit->n; k++) {
        const lw_reflection *r = &fit->reflection[k];
        double variance, lorentz;
        if (!fit->start[k].visible || !(fit->area[k] > 0))
            continue;
        lw_model_widths(&fit->model, fit->p, k, &variance, &lorentz);
        t[n] = tan(r->two_theta_deg * M_PI / 360);
        moved[n] = fit->position[k] - r->two_theta_deg;
        weight[n] = fit->area[k] / (variance + lorentz * lorentz); /* as 1/u^2 of a place goes */
        s[n] = 1 / r->d_nm;
        area[n] = log(fit->area[k] / geometry_of(fit, r));
        even[n] = 1;
        n++;
    }
    if (n < 3)
        return false; /* no scatter to go by */
    *shift = trend_of(t, moved, weight, n);
    *strength = trend_of(s, area, even, n);
    *power = 1;
    for (size_t i = 0; i < n; i++)
        s[i] *= s[i];
    trend square = trend_of(s, area, even, n);
    if (square.variance < strength->variance) {
        *strength = square;
        *power = 2;
    }
    return true;
}

lw_status lw__fit_tie_beyond(lw_fit_state *fit, lw_error *err)
{
    lw_arena_mark mark = lw_arena_mark_now(&fit->scratch);
    double *work = lw_arena_take(&fit->scratch, 6 * fit->n, sizeof *work, err);
    if (work == NULL)
        return LW_OUT_OF_MEMORY;
    trend shift, strength;
    double power;
    bool known = take_trends(fit, &shift, &strength, &power, work);
    for (size_t b = 0; b < fit->n_beyond && known; b++) {
        size_t k = fit->n + b;
        const lw_reflection *r = &fit->reflection[k];
        double x = pow(r->d_nm, -power), off = x - strength.middle;
        double part = strength.variance * (1 + 1 / strength.weight + (strength.spread > 0 ? off * off / strength.spread : 0));
        fit->position[k] = r->two_theta_deg + shift.a + shift.b * tan(r->two_theta_deg * M_PI / 360);
        fit->model.line[k].nominal_deg = fit->position[k];
        /* lognormal about the trend: its mean and variance */
        double mean = exp(strength.a + strength.b * x) * geometry_of(fit, r);
        fit->tie[b] = (lw_area_tie){.mean = mean, .weight = 1 / (mean * mean * fmax(expm1(part), 1e-6))};
    }
    lw_arena_rewind(&fit->scratch, mark);
    return LW_OK;
}

/* Whether the lines beyond are apart by more than they are wide, from one another and from those inside. Where they lie
 * under one another, as behind a place where the scan was cut for its overlaps, places and areas as rough as these tell
 * nothing. */
static bool stand_apart(const lw_fit_state *fit)
{
    for (size_t k = fit->n; k < fit->n + fit->n_beyond; k++) {
        double variance, lorentz;
        lw_model_widths(&fit->model, fit->p, k, &variance, &lorentz);
        double width = lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), lorentz);
        for (size_t j = 0; j < fit->n + fit->n_beyond; j++)
            if (j != k && fabs(fit->position[j] - fit->position[k]) < width)
                return false;
    }
    return true;
}

lw_status lw__fit_add_beyond(lw_fit_state *fit, lw_error *err)
{
    const lw_material *material = fit->lines->material;
    const lw_scan *scan = fit->scan;
    double wavelength = lw_radiation_wavelength(&fit->lines->radiation);
    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[scan->n - 1];
    if (material == NULL || !fit->model.shape->is_voigt || !lw_line_shape_list[fit->options->shape]->is_voigt)
        return LW_OK;
    lw_reflection *near = NULL;
    size_t n_near = 0;
    double from = fmax(low - LW_BEYOND_DEG, 1), to = fmin(high + LW_BEYOND_DEG, 179);
    lw_status status = lw_reflections(material, wavelength, from, to, &fit->scratch, &near, &n_near, err);
    for (size_t i = 0; i < n_near && status == LW_OK && fit->n_beyond < LW_BEYOND_MOST; i++) {
        double place = near[i].two_theta_deg, margin = fit->options->search_deg;
        bool known = place > fit->reflection[0].two_theta_deg - 1e-6 &&
                     place < fit->reflection[fit->n - 1].two_theta_deg + 1e-6;
        if (known || (place > low + margin && place < high - margin))
            continue;
        size_t k = fit->n + fit->n_beyond;
        fit->reflection[k] = near[i];
        fit->start[k] = (lw_line_start){.expected_deg = place, .position_deg = place};
        fit->remark[k] = "";
        fit->n_beyond++;
        status = lw__fit_tie_beyond(fit, err);
        const lw_area_tie *tie = &fit->tie[fit->n_beyond - 1];
        /* widths at its place by the shared function, as the model would have them */
        fit->model.n_lines = k + 1;
        if (status == LW_OK)
            status = lw__fit_pack(fit, err);
        double variance = 0, lorentz = 0;
        if (status == LW_OK)
            lw_model_widths(&fit->model, fit->p, k, &variance, &lorentz);
        /* from further off comes nothing but a slope, which the background takes better */
        double width = lw_voigt_fwhm(sqrt(fmax(variance, 1e-12)), fmax(lorentz, 0));
        bool close = fit->position[k] > low - 5 * width && fit->position[k] < high + 5 * width;
        bool reaches = close && tie->weight > 0 && variance + lorentz > 0 && fit->position[k] > 0 && fit->position[k] < 179 &&
                       tie->mean * tie->mean * seen_of(fit, fit->position[k], variance, lorentz) > 1;
        fit->area[k] = tie->mean;
        fit->hold_position[k] = fit->hold_local[k] = true;
        if (!reaches)
            fit->model.n_lines = fit->n + --fit->n_beyond;
        if (status == LW_OK)
            status = lw__fit_pack(fit, err);
    }
    if (status == LW_OK && !stand_apart(fit)) {
        fit->model.n_lines = fit->n + (fit->n_beyond = 0);
        status = lw__fit_pack(fit, err);
    }
    if (status == LW_OK && fit->n_beyond > 0)
        status = lw_model_prepare(&fit->model, &fit->scratch, err);
    return status;
}

lw_status lw__fit_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    lw_fit_state *fit = user;
    lw_status status = lw_model_evaluate(&fit->model, p, want_normal, normal, err);
    for (size_t b = 0; b < fit->n_beyond && status == LW_OK; b++) {
        size_t row = lw_model_row(&fit->model, fit->n + b) + 1;
        double off = fit->tie[b].mean - p[row];
        normal->chi2 += fit->tie[b].weight * off * off;
        if (want_normal) {
            normal->g[row] += fit->tie[b].weight * off;
            normal->h[row * normal->n + row] += fit->tie[b].weight;
        }
    }
    return status;
}
