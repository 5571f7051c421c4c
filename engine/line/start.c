/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/start.h"

#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

size_t lw_point_at(const lw_scan *scan, double angle)
{
    const double *x = scan->two_theta_deg;
    size_t n = scan->n;
    /* most scans are even: look first where the point would be then */
    double share = (angle - x[0]) / (x[n - 1] - x[0]);
    if (share > 0 && share < 1) {
        size_t guess = (size_t)(share * (double)(n - 1));
        for (size_t i = guess; i < guess + 3 && i < n; i++)
            if (x[i] >= angle) {
                if (i == 0 || x[i - 1] < angle)
                    return i;
                break;
            }
    }
    return lw_first_not_below(x, n, angle);
}

static double mean_step(const lw_scan *scan)
{
    return (scan->two_theta_deg[scan->n - 1] - scan->two_theta_deg[0]) / (double)(scan->n - 1);
}

/* Moving average over 2 half + 1 points. */
static void smooth(const double *from, size_t n, size_t half, double *to)
{
    for (size_t i = 0; i < n; i++) {
        size_t a = i > half ? i - half : 0, b = i + half < n ? i + half : n - 1;
        double sum = 0;
        for (size_t j = a; j <= b; j++)
            sum += from[j];
        to[i] = sum / (double)(b - a + 1);
    }
}

/* Each point at most the mean of the points `width` to both sides; near the ends these are as far as the scan goes. */
static void clip(const double *restrict from, size_t n, size_t width, double *restrict to)
{
    for (size_t i = 0; i < n; i++) {
        if (i == width && n > 2 * width) {
            size_t middle = n - width;
            for (; i < middle; i++) {
                double across = 0.5 * (from[i - width] + from[i + width]);
                to[i] = across < from[i] ? across : from[i];
            }
        }
        size_t reach = i < n - 1 - i ? i : n - 1 - i;
        if (reach > width)
            reach = width;
        double across = 0.5 * (from[i - reach] + from[i + reach]);
        to[i] = reach > 0 && across < from[i] ? across : from[i];
    }
}

lw_status lw_start_background(const lw_scan *scan, double window_deg, double *background, lw_arena *scratch,
                              lw_error *err)
{
    size_t n = scan->n;
    double *root = lw_arena_take_raw(scratch, n, sizeof *root, err), *next = lw_arena_take_raw(scratch, n, sizeof *next, err);
    if (root == NULL || next == NULL)
        return LW_OUT_OF_MEMORY;
    smooth(scan->intensity, n, 2, next);
    for (size_t i = 0; i < n; i++)
        root[i] = sqrt(fmax(next[i], 0)); /* even noise, so that clipping is even too */
    size_t widest = (size_t)fmax(window_deg / mean_step(scan), 3);
    for (size_t width = widest; width >= 1; width = width * 3 / 4) {
        clip(root, n, width, next);
        double *swap = root;
        root = next;
        next = swap;
        if (width == 1)
            break;
    }
    for (size_t i = 0; i < n; i++)
        background[i] = root[i] * root[i];
    return LW_OK;
}

/* Noise of one point, intensity. */
static double noise_at(const lw_scan *scan, const double *background, size_t i)
{
    if (scan->sigma != NULL)
        return scan->sigma[i];
    double level = fmax(fmax(background[i], scan->intensity[i]), 1e-300);
    return sqrt(fmax(level, scan->noise == LW_NOISE_COUNTS ? 1 : 0) * scan->variance_factor);
}

/* Sum over the expected places, each counted by its logarithm so that no strong line decides alone. */
static double score(const lw_scan *scan, const double *excess, const lw_line_start *start, const double *cosine, size_t n,
                    double shift, double shift_cos)
{
    double sum = 0, product = 1;
    for (size_t k = 0; k < n; k++) {
        double place = start[k].expected_deg + shift + shift_cos * cosine[k];
        size_t i = lw_point_at(scan, place);
        if (i > 0 && i < scan->n)
            product *= 1 + fmax(excess[i], 0);
        if (product > 1e100 || k + 1 == n) {
            sum += log(product);
            product = 1;
        }
    }
    return sum;
}

lw_status lw_start_lines(const lw_scan *scan, const double *background, double search_deg, lw_line_start *start,
                         size_t n, double *explained, lw_arena *scratch, lw_error *err)
{
    size_t m = scan->n;
    double step = mean_step(scan);
    double *net = lw_arena_take_raw(scratch, m, sizeof *net, err), *even = lw_arena_take_raw(scratch, m, sizeof *even, err);
    double *excess = lw_arena_take_raw(scratch, m, sizeof *excess, err);
    double *cos_theta = lw_arena_take_raw(scratch, n, sizeof *cos_theta, err);
    if (net == NULL || even == NULL || excess == NULL || cos_theta == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < n; k++)
        cos_theta[k] = cos(start[k].expected_deg * degree / 2);
    for (size_t i = 0; i < m; i++)
        net[i] = scan->intensity[i] - background[i];
    smooth(net, m, 2, even);
    double strongest = 0;
    for (size_t i = 0; i < m; i++) {
        excess[i] = even[i] / noise_at(scan, background, i);
        strongest = fmax(strongest, even[i]);
    }
    /* a shift of all lines, constant and with cos(theta): zero and displacement */
    double best = -1, shift = 0, shift_cos = 0;
    int steps = (int)fmin(fmax(2 * search_deg / step, 8), 120);
    for (int i = -steps / 2; i <= steps / 2; i++)
        for (int j = -4; j <= 4; j++) {
            double constant = search_deg * 2 * i / steps, cosine = search_deg * j / 8;
            if (fabs(constant + cosine) > search_deg)
                continue;
            double now = score(scan, excess, start, cos_theta, n, constant, cosine) *
                         (1 - 0.02 * (fabs(constant) + fabs(cosine)) / search_deg); /* the least shift of equals */
            if (now > best) {
                best = now;
                shift = constant;
                shift_cos = cosine;
            }
        }
    double fallback = 0;
    for (size_t k = 0; k < n; k++) {
        lw_line_start *line = &start[k];
        double place = line->expected_deg + shift + shift_cos * cos(line->expected_deg * degree / 2);
        double reach = 0.5 * search_deg;
        if (k > 0)
            reach = fmin(reach, 0.45 * (line->expected_deg - start[k - 1].expected_deg));
        if (k + 1 < n)
            reach = fmin(reach, 0.45 * (start[k + 1].expected_deg - line->expected_deg));
        size_t from = lw_point_at(scan, place - reach), to = lw_point_at(scan, place + reach);
        if (to >= m)
            to = m - 1;
        size_t top = from < m ? from : m - 1;
        for (size_t i = from; i <= to && i < m; i++)
            if (even[i] > even[top])
                top = i;
        line->position_deg = scan->two_theta_deg[top];
        line->height = fmax(even[top], 0);
        line->visible = excess[top] > 4 && even[top] > 1e-4 * strongest;
        if (!line->visible)
            line->position_deg = place;
        /* twice the half-width on the low-angle side, where no second component stands */
        size_t left = top;
        while (left > 0 && even[left] > 0.5 * even[top])
            left--;
        double place_left = scan->two_theta_deg[left], half = 0.5 * even[top];
        if (left < top && even[left + 1] > even[left])
            place_left += (half - even[left]) / (even[left + 1] - even[left]) *
                          (scan->two_theta_deg[left + 1] - scan->two_theta_deg[left]);
        /* a mean of five points has a variance of two squared steps, which adds to the line's */
        double wide = 2 * (scan->two_theta_deg[top] - place_left), taken = 2 * 8 * M_LN2 * step * step;
        line->fwhm_deg = sqrt(fmax(wide * wide - taken, 4 * step * step));
        if (line->visible && line->height > 0.05 * strongest)
            fallback = fallback > 0 ? fmin(fallback, line->fwhm_deg) : line->fwhm_deg;
    }
    if (!(fallback > 0))
        fallback = 6 * step;
    for (size_t k = 0; k < n; k++) {
        start[k].width_seen = start[k].visible && start[k].fwhm_deg <= 4 * fallback;
        if (!start[k].width_seen)
            start[k].fwhm_deg = fallback;
    }
    /* do the strong peaks of the scan stand where lines are expected? */
    double there = 0, all = 0;
    for (size_t i = 2; i + 2 < m; i++) {
        if (even[i] < 0.1 * strongest || excess[i] < 6 || even[i] < even[i - 1] || even[i] <= even[i + 1])
            continue;
        double nearest = 1e9, angle = scan->two_theta_deg[i];
        for (size_t k = 0; k < n; k++)
            nearest = fmin(nearest, fabs(angle - start[k].position_deg));
        all += even[i];
        /* the second emission component, up to 0.3 % longer, belongs to its line */
        double doublet = 0.006 / degree * tan(angle * degree / 2);
        if (nearest < fmax(0.25 * search_deg, fallback) + doublet)
            there += even[i];
    }
    *explained = all > 0 ? there / all : 0;
    return LW_OK;
}
