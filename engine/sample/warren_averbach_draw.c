/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The figures of the Warren-Averbach method. */
#include "sample/warren_averbach.h"

#include <math.h>
#include <stdio.h>

#define PI 3.14159265358979323846

static lw_node *new_figure(lw_node *parent, const char *field, const char *name, const char *title, const char *caption,
                           const char *x_label, const char *x_unit, const char *y_label, const char *y_unit, lw_node **series,
                           lw_error *err)
{
    lw_node *figure = lw_add_group(parent, field, err);
    lw_add_text(figure, "name", name, err);
    lw_add_text(figure, "title", title, err);
    lw_add_text(figure, "caption", caption, err);
    lw_node *x = lw_add_group(figure, "x", err), *y = lw_add_group(figure, "y", err);
    lw_add_text(x, "label", x_label, err);
    lw_add_text(x, "unit", x_unit, err);
    lw_add_text(y, "label", y_label, err);
    lw_add_text(y, "unit", y_unit, err);
    *series = lw_add_list(figure, "series", err);
    return figure;
}

static lw_node *add_series(lw_node *series, const char *kind, const char *label, const double *x, const double *y, size_t n,
                           lw_error *err)
{
    lw_node *one = lw_add_group(series, NULL, err);
    lw_add_text(one, "kind", kind, err);
    lw_add_text(one, "label", label, err);
    lw_add_vector(one, "x", x, n, "", err);
    lw_add_vector(one, "y", y, n, "", err);
    return one;
}

static void add_band(lw_node *series, const char *label, const double *x, const double *y, const double *u, size_t n,
                     double *scratch, lw_error *err)
{
    for (size_t i = 0; i < n; i++)
        scratch[i] = y[i] - 2 * u[i];
    lw_node *band = add_series(series, "band", label, x, scratch, n, err);
    for (size_t i = 0; i < n; i++)
        scratch[i] = y[i] + 2 * u[i];
    lw_add_vector(band, "high", scratch, n, "", err);
}

void lw__averbach_draw(const lw__averbach *set, lw_arena *arena, lw_node *result, lw_error *err)
{
    const lw_harmonics *h = &set->harmonics;
    size_t n = h->n;
    double *x = lw_arena_take(arena, n + 2, sizeof *x, err), *y = lw_arena_take(arena, n + 2, sizeof *y, err);
    double *u = lw_arena_take(arena, n + 2, sizeof *u, err), *scratch = lw_arena_take(arena, n + 2, sizeof *scratch, err);
    if (!x || !y || !u || !scratch)
        return;
    lw_node *series;
    char label[60];
    for (size_t i = 0; i < n; i++) {
        x[i] = h->step_nm * (double)i;
        u[i] = sqrt(fmax(h->size_covariance[i * n + i], 0));
    }
    new_figure(result, "figure", "warren_averbach_coefficients", "Fourier coefficients, Warren-Averbach",
               "Coefficients of the orders against column length, the size coefficients that follow from them with two "
               "standard uncertainties, and the initial slope, whose foot is the area-weighted size.",
               "column length L", "nm", "coefficient A", "", &series, err);
    add_series(series, "line", "size", x, h->size, n, err);
    add_band(series, "2 u", x, h->size, u, n, scratch, err);
    for (size_t k = 0; k < set->orders.n; k++) {
        char hkl[24];
        const lw_reflection *r = &set->orders.profile[k]->line->reflection;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        lw_node *line = add_series(series, "points", hkl, x, h->coefficient + k * n, n, err);
        lw_add_vector(line, "u_y", h->u + k * n, n, "", err);
    }
    if (set->has_slope) {
        double foot[2] = {0, set->slope.size_area}, from[2] = {set->slope.start, 0};
        add_series(series, "line", "initial slope", foot, from, 2, err);
    }

    lw_node *more = lw_add_group(result, "figures", err);
    new_figure(more, "orders", "warren_averbach_orders", "ln A against s\302\262, Warren-Averbach",
               "Logarithms of the orders' coefficients at some column lengths, with one standard uncertainty: the intercepts "
               "are size, the slopes strain. Assumed: the orders see the same columns, and strains over a column are normally "
               "distributed (form log) or small (form linear).",
               "s\302\262 = 1/d\302\262", "nm^-2", "ln A", "", &series, err);
    for (size_t part = 1; part <= 6; part++) {
        size_t i = part * (n - 1) / 6, m = set->orders.n, used = 0;
        double s2[LW_ORDERS_MOST], ln_a[LW_ORDERS_MOST], u_ln[LW_ORDERS_MOST];
        for (size_t k = 0; k < m; k++) {
            double a = h->coefficient[k * n + i], s = set->orders.profile[k]->s_per_nm;
            if (!(a > 0))
                continue;
            s2[used] = s * s;
            ln_a[used] = log(a);
            u_ln[used++] = h->u[k * n + i] / a;
        }
        if (i == 0 || used < 2 || !(h->size[i] > 0))
            continue;
        snprintf(label, sizeof label, "L = %.3g nm", x[i]);
        lw_node *points = add_series(series, "points", label, s2, ln_a, used, err);
        lw_add_vector(points, "u_y", u_ln, used, "", err);
        double ends[2] = {0, s2[used - 1]}, b = -2 * PI * PI * x[i] * x[i] * h->square[i];
        double line[2] = {log(h->size[i]), log(h->size[i]) + b * ends[1]};
        add_series(series, "line", "", ends, line, 2, err);
    }

    size_t first = set->first_strain, count = set->end_strain > first ? set->end_strain - first : 0;
    if (count > 1) {
        new_figure(more, "strain", "warren_averbach_strain", "Strain against column length, Warren-Averbach",
                   "Root mean square strain over columns of a length, where it is determined, with two standard "
                   "uncertainties. Assumed: the same strain for all orders of the direction.",
                   "column length L", "nm", "rms strain", "", &series, err);
        for (size_t i = 0; i < count; i++) {
            y[i] = sqrt(fmax(h->square[first + i], 0));
            u[i] = sqrt(fmax(h->square_covariance[(first + i) * (n + 1)], 0)) / (2 * fmax(y[i], 1e-12));
        }
        add_series(series, "line", "rms strain", x + first, y, count, err);
        add_band(series, "2 u", x + first, y, u, count, scratch, err);
    }
    if (set->has_density) {
        const lw_column_density *d = &set->density;
        new_figure(more, "columns", "warren_averbach_columns", "Column lengths, Warren-Averbach",
                   "Distribution of column lengths (by number): the smoothest that agrees with the size coefficients, with "
                   "two standard uncertainties. Columns longer than the last length are not told.",
                   "column length L", "nm", "density p", "nm^-1", &series, err);
        add_series(series, "line", "p", d->length_nm, d->density, d->n, err);
        add_band(series, "2 u", d->length_nm, d->density, d->u, d->n, scratch, err);
    }
}
