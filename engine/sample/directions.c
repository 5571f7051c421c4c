/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/directions.h"

#include "sample/reading.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static int divisor(int a, int b)
{
    a = abs(a);
    b = abs(b);
    while (b != 0) {
        int rest = a % b;
        a = b;
        b = rest;
    }
    return a;
}

void lw_direction_of(const lw_profile *profile, bool cubic, int out[3])
{
    const lw_reflection *r = &profile->line->reflection;
    out[0] = r->h;
    out[1] = r->k;
    out[2] = r->l;
    int common = divisor(divisor(out[0], out[1]), out[2]);
    for (int i = 0; i < 3; i++) {
        if (common > 1)
            out[i] /= common;
        if (cubic)
            out[i] = abs(out[i]);
    }
    for (int i = 0; cubic && i < 2; i++)
        for (int j = 0; j < 2; j++)
            if (out[j] < out[j + 1]) {
                int keep = out[j];
                out[j] = out[j + 1];
                out[j + 1] = keep;
            }
}

/* The breadths of one direction, that of line `first`; empty if an earlier line has it. */
static lw_status orders_of(const lw_breadths *all, size_t first, lw_arena *arena, lw_breadths *out, lw_error *err)
{
    int mine[3], other[3];
    size_t *at = lw_arena_take(arena, all->n, sizeof *at, err), n = 0;
    *out = (lw_breadths){.cubic = all->cubic, .values_only = all->values_only, .by_voigts = all->by_voigts};
    if (at == NULL)
        return LW_OUT_OF_MEMORY;
    lw_direction_of(all->profile[first], all->cubic, mine);
    for (size_t i = 0; i < all->n; i++) {
        lw_direction_of(all->profile[i], all->cubic, other);
        if (memcmp(mine, other, sizeof mine) != 0)
            continue;
        if (i < first)
            return LW_OK;
        at[n++] = i;
    }
    out->profile = lw_arena_take(arena, n, sizeof *out->profile, err);
    out->s = lw_arena_take(arena, n, sizeof(double), err);
    out->beta = lw_arena_take(arena, n, sizeof(double), err);
    out->covariance = lw_arena_take(arena, n * n, sizeof(double), err);
    if (all->background != NULL)
        out->background = lw_arena_take(arena, n, sizeof(double), err);
    if (all->s_covariance != NULL)
        out->s_covariance = lw_arena_take(arena, n * n, sizeof(double), err);
    if (err->status != LW_OK)
        return err->status;
    out->n = n;
    for (size_t i = 0; i < n; i++) {
        out->profile[i] = all->profile[at[i]];
        out->s[i] = all->s[at[i]];
        out->beta[i] = all->beta[at[i]];
        if (all->background != NULL)
            out->background[i] = all->background[at[i]];
        for (size_t j = 0; j < n; j++) {
            out->covariance[i * n + j] = all->covariance[at[i] * all->n + at[j]];
            if (all->s_covariance != NULL)
                out->s_covariance[i * n + j] = all->s_covariance[at[i] * all->n + at[j]];
        }
    }
    return LW_OK;
}

static const char *name_of(const lw_profile *profile, bool cubic, char *text, size_t size)
{
    int hkl[3];
    lw_direction_of(profile, cubic, hkl);
    return lw_hkl_text(hkl[0], hkl[1], hkl[2], text, size);
}

static void add_series(lw_node *list, const char *kind, const char *label, const double *x, const double *y, const double *u,
                       size_t n, lw_error *err)
{
    lw_node *series = lw_add_group(list, NULL, err);
    lw_add_text(series, "kind", kind, err);
    lw_add_text(series, "label", label, err);
    lw_add_vector(series, "x", x, n, "", err);
    lw_add_vector(series, "y", y, n, "", err);
    if (u != NULL)
        lw_add_vector(series, "u_y", u, n, "", err);
}

#define CURVE_POINTS 41

/* The breadth by a fit from s = 0 to beyond the last line, as far as the form exists. */
static void add_curve(lw_node *list, const char *label, const lw_breadth_fit *fit, double most, lw_error *err)
{
    double x[CURVE_POINTS], y[CURVE_POINTS], slopes[2], s_slope;
    size_t n = 0;
    for (size_t i = 0; i < CURVE_POINTS; i++) {
        x[n] = 1.08 * most * (double)i / (CURVE_POINTS - 1);
        y[n] = lw_form_breadth(fit->form, fit->p, x[n], slopes, &s_slope);
        n += isfinite(y[n]) ? 1 : 0;
    }
    add_series(list, "line", label, x, y, NULL, n, err);
}

/* Starts the description of the figure with the points and the line of all; returns its list of series. */
static lw_node *start_figure(const lw_breadths *breadths, const lw_breadth_fit *whole, double most, lw_node *group,
                             lw_error *err)
{
    lw_node *figure = lw_add_group(group, "figure", err);
    lw_add_text(figure, "name", "williamson_hall", err);
    lw_add_text(figure, "title", "Williamson-Hall", err);
    lw_add_text(figure, "caption",
                "Integral breadths of the sample's lines with their standard uncertainty, the line through all, and the lines "
                "through the orders of one direction.",
                err);
    static const char *const axes[] = {"x", "y"}, *const labels[] = {"s = 2 sin(theta)/lambda", "integral breadth in s"};
    for (int i = 0; i < 2; i++) {
        lw_node *axis = lw_add_group(figure, axes[i], err);
        lw_add_text(axis, "label", labels[i], err);
        lw_add_text(axis, "unit", "nm^-1", err);
    }
    lw_node *notes = lw_add_list(figure, "notes", err);
    for (size_t i = 0; i < breadths->n; i++) {
        const lw_reflection *r = &breadths->profile[i]->line->reflection;
        char text[24];
        lw_node *note = lw_add_group(notes, NULL, err);
        lw_add_number(note, "x", breadths->s[i], err);
        lw_add_number(note, "y", breadths->beta[i], err);
        lw_add_text(note, "text", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
    }
    lw_node *series = lw_add_list(figure, "series", err);
    add_series(series, "points", "lines", breadths->s, breadths->beta, whole->fit.u, breadths->n, err);
    if (breadths->scale == NULL) /* a scaled plot has another abscissa a line */
        add_curve(series, "all", whole, most, err);
    return series;
}

lw_status lw_directions_tell(const lw_breadths *breadths, const lw_breadth_fit *whole, lw_arena *arena, lw_node *group,
                             lw_error *err)
{
    lw_node *list = lw_add_list(group, "directions", err), *series = NULL;
    double most = 0;
    for (size_t i = 0; i < breadths->n; i++)
        most = fmax(most, breadths->s[i]);
    for (size_t i = 0; i < breadths->n; i++) {
        lw_breadths own;
        lw_status status = orders_of(breadths, i, arena, &own, err);
        if (status != LW_OK)
            return status;
        if (own.n < 2 || own.s[own.n - 1] < 1.01 * own.s[0])
            continue;
        char text[24], label[32];
        lw_node *node = lw_add_group(list, NULL, err);
        lw_add_text(node, "direction", name_of(own.profile[0], own.cubic, text, sizeof text), err);
        lw_add_number(node, "lines", (double)own.n, err);
        lw_breadth_fit fit;
        lw_readings readings;
        lw_error each = LW_ERROR_NONE;
        status = lw_breadths_fit(&own, whole->form, arena, &fit, &each);
        if (status == LW_NOT_SUPPORTED || status == LW_NO_CONVERGENCE) {
            lw_add_text(node, "not_determined", each.message, err);
            continue;
        }
        if (status != LW_OK) {
            *err = each;
            return status;
        }
        status = lw_breadths_read(&own, arena, &readings, err);
        if (status != LW_OK)
            return status;
        lw_readings_widen_fit(&readings, (double[2]){0, 0}, &fit, node, err);
        lw_breadths_tell(&fit, node, err);
        if (series == NULL)
            series = start_figure(breadths, whole, most, group, err);
        snprintf(label, sizeof label, "along %s", text);
        add_curve(series, label, &fit, own.s[own.n - 1], err);
    }
    return err->status;
}
