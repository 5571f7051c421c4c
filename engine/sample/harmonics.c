/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/harmonics.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PI 3.14159265358979323846
#define WINDOW 8 /* breadths each side that a line's Fourier sums commonly reach */

static bool usable(const lw_profile *profile)
{
    return profile->resolved && profile->n_coefficients > 8 && profile->truncated_at > 8 && profile->length_nm != NULL &&
           profile->length_nm[1] > 0;
}

static int common_divisor(int a, int b)
{
    while (b != 0) {
        int rest = a % b;
        a = b;
        b = rest;
    }
    return abs(a);
}

static void direction_of(const lw_profiles *profiles, const lw_reflection *r, int out[3])
{
    int h[3] = {r->h, r->k, r->l}, d = common_divisor(common_divisor(h[0], h[1]), h[2]);
    for (int i = 0; i < 3; i++)
        out[i] = d > 0 ? h[i] / d : 0;
    if (profiles->lines->material == NULL || profiles->lines->material->system != LW_CUBIC)
        return;
    for (int i = 0; i < 3; i++)
        out[i] = abs(out[i]);
    for (int i = 0; i < 2; i++) /* descending: any order of indices is the same direction */
        for (int j = 0; j < 2 - i; j++)
            if (out[j] < out[j + 1]) {
                int t = out[j];
                out[j] = out[j + 1];
                out[j + 1] = t;
            }
}

size_t lw_orders_find(const lw_profiles *profiles, lw_orders *out, size_t most)
{
    size_t found = 0;
    for (size_t i = 0; i < profiles->n && found < most; i++) {
        const lw_profile *first = &profiles->profile[i];
        int a[3], b[3];
        bool seen = false;
        if (!usable(first) || first->line->reflection.families > 1)
            continue;
        direction_of(profiles, &first->line->reflection, a);
        for (size_t j = 0; j < i; j++) {
            direction_of(profiles, &profiles->profile[j].line->reflection, b);
            seen = seen || (usable(&profiles->profile[j]) && profiles->profile[j].line->reflection.families <= 1 &&
                            memcmp(a, b, sizeof a) == 0);
        }
        if (seen)
            continue;
        lw_orders *orders = &out[found];
        orders->n = 0;
        for (size_t j = i; j < profiles->n && orders->n < LW_ORDERS_MOST; j++) {
            direction_of(profiles, &profiles->profile[j].line->reflection, b);
            if (usable(&profiles->profile[j]) && profiles->profile[j].line->reflection.families <= 1 &&
                memcmp(a, b, sizeof a) == 0)
                orders->profile[orders->n++] = &profiles->profile[j];
        }
        if (orders->n < 2)
            continue;
        lw_hkl_text(a[0], a[1], a[2], orders->direction, sizeof orders->direction);
        found++;
    }
    return found;
}

lw_status lw_orders_named(const lw_profiles *profiles, const lw_option_list *names, lw_orders *out, lw_error *err)
{
    out->n = 0;
    snprintf(out->direction, sizeof out->direction, "%s", "all");
    bool all = names->n == 1 && strcmp(names->item[0], "all") == 0;
    for (size_t k = 0; k < names->n && !all; k++) {
        bool there = false;
        for (size_t i = 0; i < profiles->n; i++) {
            const lw_reflection *r = &profiles->profile[i].line->reflection;
            char hkl[24];
            there = there || (usable(&profiles->profile[i]) &&
                              strcmp(names->item[k], lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl)) == 0);
        }
        if (!there)
            return lw_fail(err, LW_BAD_ARGUMENT, "name lines that were fitted and resolved",
                           "there is no resolved line %s with coefficients", names->item[k]);
    }
    for (size_t i = 0; i < profiles->n && out->n < LW_ORDERS_MOST; i++) {
        const lw_reflection *r = &profiles->profile[i].line->reflection;
        char hkl[24];
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        bool wanted = all;
        for (size_t k = 0; k < names->n; k++)
            wanted = wanted || strcmp(names->item[k], hkl) == 0;
        if (wanted && usable(&profiles->profile[i]))
            out->profile[out->n++] = &profiles->profile[i];
    }
    if (out->n < 2)
        return lw_fail(err, LW_BAD_ARGUMENT, "name at least two lines", "%zu line%s cannot tell size from strain", out->n,
                       out->n == 1 ? "" : "s");
    return LW_OK;
}

/* Cubic through the four nearest nodes; exact at nodes. */
static double between(const double *y, size_t n, double x)
{
    double nearest = round(x);
    if (fabs(x - nearest) < 1e-9 && nearest >= 0 && nearest < (double)n)
        return y[(size_t)nearest];
    double from = fmin(fmax(floor(x) - 1, 0), (double)n - 4), t = x - from;
    const double *a = y + (size_t)from;
    return -a[0] * (t - 1) * (t - 2) * (t - 3) / 6 + a[1] * t * (t - 2) * (t - 3) / 2 - a[2] * t * (t - 1) * (t - 3) / 2 +
           a[3] * t * (t - 1) * (t - 2) / 6;
}

/* Share of a line's own counts among those in the window of its Fourier sums; 0 where the counts are not there. */
static double share_of_net(const lw_profiles *profiles, const lw_profile *profile)
{
    const lw_lines *lines = profiles->lines;
    const lw_line *line = profile->line;
    if (lines->scan == NULL || lines->background == NULL)
        return 0;
    size_t at = 0;
    while (at + 1 < lines->scan->n && lines->scan->two_theta_deg[at] < line->two_theta.value)
        at++;
    double own = line->area.value, under = lines->background[at] * 2 * WINDOW * line->breadth.value;
    return own > 0 && under >= 0 ? own / (own + under) : 0;
}

/* The line's coefficient as observed, instrument in it: that of the sample further out, by the breadths. */
static double observed(const lw_profile *profile, double length)
{
    double wider = profile->breadth_deg.value > 0 ? profile->line->breadth.value / profile->breadth_deg.value : 1;
    double x = fabs(length) * fmax(wider, 1) / profile->length_nm[1];
    return x < (double)(profile->n_coefficients - 1) ? between(profile->cosine, profile->n_coefficients, x) : 0;
}

/* Covariance by counting of two normalised cosine sums, to a factor: counts vary as the line does (share net) and as the
 * background under it (the rest), and sum var cos(a) cos(b) is half the transform of var at the difference and at the sum
 * of the lengths; the area that both are divided by takes its part off. */
static double counted(const lw_profile *profile, double net, double l1, double l2)
{
    double wide = 2 * PI * WINDOW * profile->breadth_s.value, x = (l1 - l2) * wide, y = (l1 + l2) * wide;
    double flat[2] = {exp(-x * x / 6), exp(-y * y / 6)}; /* as sin(x)/x to second order, and positive */
    if (!(net > 0))
        return flat[0];
    double h1 = observed(profile, l1), h2 = observed(profile, l2), z1 = l1 * wide, z2 = l2 * wide;
    double own = 0.5 * (observed(profile, l1 - l2) + observed(profile, l1 + l2)) - h1 * h2;
    double rest = 0.5 * (flat[0] + flat[1]) - h1 * exp(-z2 * z2 / 6) - h2 * exp(-z1 * z1 / 6) + h1 * h2;
    return net * own + (1 - net) * rest;
}

/* Covariance of one line's coefficients at two lengths, given both uncertainties. */
static double covariance_of(const lw_profiles *profiles, const lw_profile *profile, double l1, double a1, double u1,
                            double l2, double a2, double u2)
{
    if (profiles->method != NULL && strcmp(profiles->method, "convolution") == 0 && profiles->covariance != NULL) {
        const double *c = profiles->covariance;
        size_t n = profiles->n_covariance, g = profile->at_gauss, l = profile->at_lorentz;
        double gauss = profile->gauss_s.value, pg = -2 * PI * gauss * l1 * l1 * a1, pl = -2 * l1 * a1;
        double qg = -2 * PI * gauss * l2 * l2 * a2, ql = -2 * l2 * a2;
        double c1 = pg * pg * c[g * n + g] + 2 * pg * pl * c[g * n + l] + pl * pl * c[l * n + l];
        double c2 = qg * qg * c[g * n + g] + 2 * qg * ql * c[g * n + l] + ql * ql * c[l * n + l];
        double both = pg * qg * c[g * n + g] + (pg * ql + pl * qg) * c[g * n + l] + pl * ql * c[l * n + l];
        return c1 > 0 && c2 > 0 ? u1 * u2 * both / sqrt(c1 * c2) : l1 == l2 ? u1 * u2 : 0;
    }
    if (profiles->method != NULL && strcmp(profiles->method, "physical") == 0) {
        /* few parameters move all lengths together, the choice of form moves them against each other: half each */
        double x = (l1 - l2) * 2 * PI * WINDOW * profile->breadth_s.value;
        return 0.5 * u1 * u2 * (1 + exp(-x * x / 6));
    }
    double net = share_of_net(profiles, profile);
    double k12 = counted(profile, net, l1, l2), k11 = counted(profile, net, l1, l1), k22 = counted(profile, net, l2, l2);
    return k11 > 0 && k22 > 0 ? u1 * u2 * k12 / sqrt(k11 * k22) : l1 == l2 ? u1 * u2 : 0;
}

lw_status lw_harmonics_separate(const lw_profiles *profiles, const lw_orders *orders, lw_harmonic_form form,
                                double length_most_nm, lw_arena *arena, lw_harmonics *out, lw_error *err)
{
    *out = (lw_harmonics){.orders = orders};
    double longest = length_most_nm > 0 ? length_most_nm : INFINITY;
    /* where a fitted Voigt has died its shape is no measurement; measured coefficients have their uncertainty */
    double least = profiles->method != NULL && strcmp(profiles->method, "convolution") == 0 ? 0.01 : 1e-4;
    for (size_t k = 0; k < orders->n; k++) {
        const lw_profile *p = orders->profile[k];
        size_t end = p->truncated_at < p->n_coefficients ? p->truncated_at : p->n_coefficients;
        size_t last = 0;
        while (last + 1 < end && (form == LW_HARMONIC_LINEAR ||
                                  (p->cosine[last + 1] > least && p->cosine[last + 1] > 2 * p->u_cosine[last + 1])))
            last++;
        out->step_nm = fmax(out->step_nm, p->length_nm[1]);
        longest = fmin(longest, p->length_nm[last]);
    }
    size_t m = orders->n, n = (size_t)floor(longest / out->step_nm + 1e-9) + 1;
    out->n = n;
    if (n < 8)
        return lw_fail(err, LW_NOT_SUPPORTED, "take a smaller length_step when the instrument is taken out",
                       "only %zu lengths have coefficients above the noise in every order of %s", n, orders->direction);
    out->coefficient = lw_arena_take(arena, m * n, sizeof(double), err);
    out->u = lw_arena_take(arena, m * n, sizeof(double), err);
    out->size = lw_arena_take(arena, n, sizeof(double), err);
    out->square = lw_arena_take(arena, n, sizeof(double), err);
    out->contrast = lw_arena_take(arena, n, sizeof(double), err);
    out->chi2 = lw_arena_take(arena, n, sizeof(double), err);
    out->size_covariance = lw_arena_take(arena, n * n, sizeof(double), err);
    out->square_covariance = lw_arena_take(arena, n * n, sizeof(double), err);
    double *to_size = lw_arena_take(arena, m * n, sizeof(double), err); /* d(A_size)/d(A) */
    double *to_square = lw_arena_take(arena, m * n, sizeof(double), err);
    if (err->status != LW_OK)
        return err->status;
    for (size_t k = 0; k < m; k++) {
        const lw_profile *p = orders->profile[k];
        for (size_t i = 0; i < n; i++) {
            double x = out->step_nm * (double)i / p->length_nm[1];
            out->coefficient[k * n + i] = between(p->cosine, p->n_coefficients, x);
            out->u[k * n + i] = fabs(between(p->u_cosine, p->n_coefficients, x));
        }
    }
    out->size[0] = 1;
    for (size_t i = 1; i < n; i++) {
        double l = out->step_nm * (double)i, factor = -2 * PI * PI * l * l;
        double w = 0, wx = 0, wy = 0, wxx = 0, wxy = 0, weight[LW_ORDERS_MOST], y[LW_ORDERS_MOST], x[LW_ORDERS_MOST];
        for (size_t k = 0; k < m; k++) {
            double a = out->coefficient[k * n + i], u = out->u[k * n + i], s = orders->profile[k]->s_per_nm;
            x[k] = s * s;
            y[k] = form == LW_HARMONIC_LOG ? log(a) : a;
            double u_y = form == LW_HARMONIC_LOG ? u / a : u;
            weight[k] = 1 / (u_y * u_y + 1e-20);
            w += weight[k];
            wx += weight[k] * x[k];
            wy += weight[k] * y[k];
            wxx += weight[k] * x[k] * x[k];
            wxy += weight[k] * x[k] * y[k];
        }
        double d = w * wxx - wx * wx, slope = (w * wxy - wx * wy) / d, start = (wxx * wy - wx * wxy) / d;
        for (size_t k = 0; k < m; k++) {
            double r = y[k] - start - slope * x[k];
            out->chi2[i] += r * r * weight[k];
            double by_y = form == LW_HARMONIC_LOG ? 1 / out->coefficient[k * n + i] : 1;
            double c_start = weight[k] * (wxx - wx * x[k]) / d * by_y, c_slope = weight[k] * (w * x[k] - wx) / d * by_y;
            to_size[k * n + i] = form == LW_HARMONIC_LOG ? exp(start) * c_start : c_start;
            to_square[k * n + i] = form == LW_HARMONIC_LOG
                                       ? c_slope / factor
                                       : (c_slope - slope / start * c_start) / (factor * start);
        }
        out->size[i] = form == LW_HARMONIC_LOG ? exp(start) : start;
        out->square[i] = form == LW_HARMONIC_LOG ? slope / factor : slope / (factor * start);
        out->contrast[i] = -out->square[i] * factor * (x[m - 1] - x[0]);
    }
    for (size_t k = 0; k < m; k++)
        for (size_t i = 1; i < n; i++)
            for (size_t j = 1; j < n; j++) {
                double c = covariance_of(profiles, orders->profile[k], out->step_nm * (double)i, out->coefficient[k * n + i],
                                         out->u[k * n + i], out->step_nm * (double)j, out->coefficient[k * n + j],
                                         out->u[k * n + j]);
                out->size_covariance[i * n + j] += to_size[k * n + i] * c * to_size[k * n + j];
                out->square_covariance[i * n + j] += to_square[k * n + i] * c * to_square[k * n + j];
            }
    return LW_OK;
}
