/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/window.h"

#include "line/curve.h"
#include "numeric/chebyshev.h"
#include "numeric/voigt.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

lw_status lw__take_instrument(const lw_profiles *profiles, const lw_profile *profile, lw_arena *arena,
                              lw__instrument *out, lw_error *err)
{
    lw_voigt_node *node = lw_arena_take(arena, LW_NODES_MOST, sizeof *node, err);
    if (node == NULL)
        return LW_OUT_OF_MEMORY;
    out->node = node;
    out->n = lw_line_all_nodes(profiles->lines, profile->line, true, node, &out->variance, &out->lorentz);
    out->per_degree = lw__s_per_degree(profiles, profile);
    out->fwhm_deg = lw_voigt_fwhm(sqrt(out->variance), out->lorentz + (out->n > 0 ? node[0].lorentz : 0));
    return LW_OK;
}

void lw__instrument_transform(const lw__instrument *instrument, double step, size_t n, double *re, double *im)
{
    double d = instrument->per_degree;
    for (size_t k = 0; k < n; k++)
        re[k] = im[k] = 0;
    for (size_t i = 0; i < instrument->n; i++) {
        const lw_voigt_node *node = &instrument->node[i];
        /* equal steps of length: each copy turns and falls by the same factor from one to the next */
        double fall = exp(-M_PI * (instrument->lorentz + node->lorentz) * d * step),
               phase = 2 * M_PI * step * d * node->offset;
        double turn_re = fall * cos(phase), turn_im = fall * sin(phase), x = node->weight, y = 0;
        for (size_t k = 0; k < n; k++) {
            re[k] += x;
            im[k] += y;
            double next = x * turn_re - y * turn_im;
            y = x * turn_im + y * turn_re;
            x = next;
        }
    }
    double gauss = M_PI * M_PI / (4 * M_LN2) * instrument->variance * d * d * step * step;
    for (size_t k = 0; k < n; k++) {
        double fall = exp(-gauss * (double)k * (double)k);
        re[k] *= fall;
        im[k] *= fall;
    }
}

/* How far the window reaches, degrees: to the middle of the gap to a neighbour, at most `most`. */
static void reach(const lw_lines *lines, const lw_line *line, double most, double *low, double *high)
{
    double at = line->two_theta.value, doublet = 0;
    const lw_radiation *r = &lines->radiation;
    for (size_t i = 1; i < r->n; i++)
        doublet =
            fmax(doublet, 2 * tan(at * degree / 2) *
                              (r->component[i].wavelength_nm / r->component[0].wavelength_nm - 1) / degree);
    *low = at - most;
    *high = at + doublet + most;
    for (size_t k = 0; k < lines->n; k++) {
        double other = lines->line[k].two_theta.value;
        if (other < at)
            *low = fmax(*low, 0.5 * (at + other + doublet));
        if (other > at)
            *high = fmin(*high, 0.5 * (at + doublet + other));
    }
}

/* Covariance of two parameters of the line fit by counting alone. */
static double counting(const lw_lines *lines, size_t a, size_t b)
{
    size_t at = a * lines->n_parameters + b;
    double factor = lines->misfit_factor > 1 ? lines->misfit_factor : 1;
    return (lines->covariance[at] - (lines->from_instrument != NULL ? lines->from_instrument[at] : 0)) /
           (factor * factor);
}

/* Of the level of the fitted background under a line: its variance, and its covariance with the counts of the
 * window, C J' for parameters of covariance C that counts of unit weight change as J: those of the background
 * and of the line itself. */
static lw_status level_under(const lw_lines *lines, const lw_line *line, size_t n, const double *two_theta,
                             const double *curve, double *variance, double *with_counts, lw_arena *arena,
                             lw_error *err)
{
    double here[LW_BACKGROUND_MOST], there[LW_BACKGROUND_MOST], by_term[LW_BACKGROUND_MOST] = {0}, by_line[3] = {0};
    double low = lines->scan->two_theta_deg[0], high = lines->scan->two_theta_deg[lines->scan->n - 1];
    size_t n_terms = lines->n_background, stride = lines->n_parameters;
    size_t of_line[3] = {line->at_area, line->at_gauss, line->at_lorentz};
    double *wider = lw_arena_take(arena, 2 * n + 1, sizeof *wider, err);
    if (wider == NULL)
        return LW_OUT_OF_MEMORY;
    lw_chebyshev(line->two_theta.value, low, high, n_terms, here, NULL);
    *variance = 0;
    for (size_t a = 0; a < n_terms; a++) {
        size_t row = lines->at_background + a;
        for (size_t b = 0; b < n_terms; b++) {
            *variance += here[a] * here[b] * lines->covariance[row * stride + lines->at_background + b];
            by_term[b] += here[a] * counting(lines, row, lines->at_background + b);
        }
        for (int b = 0; b < 3; b++)
            if (of_line[b] != LW_NO_PARAMETER)
                by_line[b] += here[a] * counting(lines, row, of_line[b]);
    }
    *variance = fmax(*variance, 0);
    /* differences over a fiftieth of the width: far from rounding, and the curve is nearly linear over it */
    double step[3] = {0, 0.02 * line->fwhm.value * line->fwhm.value, 0.02 * line->fwhm.value};
    for (int b = 1; b < 3; b++) {
        if (of_line[b] == LW_NO_PARAMETER)
            continue;
        lw_line other = *line;
        *(b == 1 ? &other.own_variance_deg2 : &other.own_lorentz_deg) += step[b];
        lw_status status = lw_line_curve(lines, &other, n, two_theta, wider + (b - 1) * (long)n, err);
        if (status != LW_OK)
            return status;
    }
    for (size_t i = 0; i < n; i++) {
        double sum = 0;
        lw_chebyshev(two_theta[i], low, high, n_terms, there, NULL);
        for (size_t a = 0; a < n_terms; a++)
            sum += by_term[a] * there[a];
        if (line->area.value > 0)
            sum += by_line[0] * curve[i] / line->area.value;
        for (int b = 1; b < 3; b++)
            if (of_line[b] != LW_NO_PARAMETER)
                sum += by_line[b] * (wider[(size_t)(b - 1) * n + i] - curve[i]) / step[b];
        with_counts[i] = sum;
    }
    return LW_OK;
}

double lw__window_variance(const lw__window *data, const double *slope, const double *variance)
{
    double sum = 0, level = 0, with = 0;
    for (size_t i = 0; i < data->n; i++) {
        sum += slope[i] * slope[i] * variance[i];
        level += slope[i];
        with += slope[i] * data->with_level[i];
    }
    return fmax(sum + level * level * data->background_variance - 2 * level * with, 0);
}

lw_status lw__take_window(const lw_profiles *profiles, size_t which, const lw__separation *separation,
                          double breadths, lw_arena *arena, lw__window *out, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    const lw_profile *profile = &profiles->profile[which];
    const lw_line *line = profile->line;
    const lw_scan *scan = lines->scan;
    double low, high, per_degree = lw__s_per_degree(profiles, profile);
    reach(lines, line, (breadths > 0 ? breadths : 8) * line->breadth.value, &low, &high);
    size_t first = 0, end = scan->n;
    while (first < scan->n && scan->two_theta_deg[first] < low)
        first++;
    while (end > first && scan->two_theta_deg[end - 1] > high)
        end--;
    size_t n = end - first;
    double **column[] = {&out->s,        &out->step,         &out->curve,     &out->residual,
                         &out->variance, &out->own_variance, &out->with_level};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(arena, n + 1, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    out->n = n;
    out->first = first;
    const lw__separated *own = &separation->line[which];
    out->background_variance = own->level_variance;
    if (own->with_level == NULL) {
        lw_status status = level_under(lines, line, n, scan->two_theta_deg + first, own->curve + first,
                                       &out->background_variance, out->with_level, arena, err);
        if (status != LW_OK)
            return status;
    } else {
        memcpy(out->with_level, own->with_level + first, n * sizeof(double));
    }
    for (size_t i = 0; i < n; i++) {
        size_t at = first + i;
        double factor = lw_line_relative_factor(lines, line, scan->two_theta_deg[at]);
        out->s[i] = per_degree * lw_line_offset(lines, line, scan->two_theta_deg[at]) - own->shift_s;
        double above = scan->intensity[at] - separation->residual[at] - separation->background[at];
        double share = above > own->curve[at] ? own->curve[at] / above : 1;
        out->curve[i] = own->curve[at] / factor;
        out->residual[i] = share * separation->residual[at] / factor;
        out->variance[i] = lines->variance[at] / (factor * factor);
        out->own_variance[i] = share * share * out->variance[i];
        out->with_level[i] /= factor * factor; /* of level and counts, both over the factor */
    }
    for (size_t i = 0; i < n; i++)
        out->step[i] = 0.5 * (out->s[i + 1 < n ? i + 1 : i] - out->s[i > 0 ? i - 1 : i]);
    return LW_OK;
}

double lw__from_instrument(const lw_profiles *profiles, const lw__leaning *a, const lw__leaning *b)
{
    const lw_width_function *instrument = &profiles->lines->instrument;
    const lw__leaning *of[2] = {a, b};
    double slope[2][LW_WIDTH_PARAMETERS] = {{0}}, sum = 0;
    for (int i = 0; i < 2; i++)
        for (size_t k = 0; k < of[i]->n; k++) {
            double gauss[LW_WIDTH_PARAMETERS], lorentz[LW_WIDTH_PARAMETERS];
            lw_width_gauss_variance(instrument->value, of[i]->angle_deg[k], gauss);
            lw_width_lorentz(instrument->value, of[i]->angle_deg[k], lorentz);
            for (int p = 0; p < LW_WIDTH_PARAMETERS; p++)
                slope[i][p] += of[i]->by[k][0] * gauss[p] + of[i]->by[k][1] * lorentz[p];
        }
    for (int p = 0; p < LW_WIDTH_PARAMETERS; p++)
        for (int q = 0; q < LW_WIDTH_PARAMETERS; q++)
            sum += slope[0][p] * instrument->covariance[p][q] * slope[1][q];
    return sum;
}
