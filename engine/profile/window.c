/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/window.h"

#include "line/curve.h"
#include "numeric/voigt.h"

#include <math.h>

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

/* Variance of the fitted background at a point, from the covariance of its Chebyshev terms. */
static double background_variance(const lw_lines *lines, double two_theta)
{
    double low = lines->scan->two_theta_deg[0], high = lines->scan->two_theta_deg[lines->scan->n - 1];
    double t = 2 * (two_theta - low) / (high - low) - 1, term[64], sum = 0;
    size_t n = lines->n_background < 64 ? lines->n_background : 64;
    for (size_t i = 0; i < n; i++)
        term[i] = i == 0 ? 1 : i == 1 ? t : 2 * t * term[i - 1] - term[i - 2];
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            sum +=
                term[i] * term[j] *
                lines
                    ->covariance[(lines->at_background + i) * lines->n_parameters + lines->at_background + j];
    return fmax(sum, 0);
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
    double **column[] = {&out->s,        &out->step,     &out->curve,
                         &out->residual, &out->variance, &out->own_variance};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(arena, n + 1, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    out->n = n;
    out->first = first;
    out->background_variance = background_variance(lines, line->two_theta.value);
    const lw__separated *own = &separation->line[which];
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
