/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/physical_model.h"

#include "line/curve.h"
#include "numeric/chebyshev.h"
#include "numeric/voigt.h"
#include "physics/intensity.h"

#include <math.h>
#include <string.h>

#define BEYOND_MOST 8
#define NEAR 10  /* half-width of what counts for the curvature while iterating, in FWHM */
#define REACH 40 /* half-width of the grid in FWHM */

static const double degree = M_PI / 180;

static lw_status prepare_line(lw__physical *f, lw__physical_line *line, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = f->profiles->lines;
    const lw_profile *profile = line->profile;
    lw_status status = lw__take_instrument(f->profiles, profile, arena, &line->instrument, err);
    if (status != LW_OK)
        return status;
    double d = line->instrument.per_degree, centre = 0;
    line->place = lw_arena_take(arena, f->n, sizeof(double), err);
    line->factor = lw_arena_take(arena, f->n, sizeof(double), err);
    line->tail = lw_arena_take(arena, f->n, sizeof(double), err);
    if (line->place == NULL || line->factor == NULL || line->tail == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < line->instrument.n; i++) {
        centre += line->instrument.node[i].weight * line->instrument.node[i].offset * d;
        line->kink += line->instrument.node[i].weight * M_PI * d *
                      (line->instrument.lorentz + line->instrument.node[i].lorentz);
    }
    /* The grid covers the line; further out the tail is what the kink of the coefficients at L = 0 makes of
     * it, kink/(2 pi^2 s^2). The six-point interpolation needs steps that are small against the narrowest
     * feature. */
    double width = d * lw_voigt_fwhm(sqrt(line->instrument.variance + profile->line->own_variance_deg2),
                                     line->instrument.lorentz + profile->line->own_lorentz_deg);
    line->grid = width / LW__PHYSICAL_STEPS;
    line->n_fft = lw_fft_length((size_t)(2 * (REACH * width + fabs(centre)) / line->grid));
    line->period = (double)line->n_fft * line->grid;
    line->first = f->n;
    for (size_t i = 0; i < f->n; i++) {
        double x = lines->scan->two_theta_deg[i], s = d * lw_line_offset(lines, profile->line, x);
        line->place[i] = s / line->grid;
        line->factor[i] = d * lw_line_relative_factor(lines, profile->line, x);
        bool inside = fabs(s) < 0.48 * line->period;
        s -= centre;
        if (inside) {
            double t = M_PI * s / line->period,
                   images = fabs(t) < 1e-2 ? 1 + t * t / 5 : 3 / (sin(t) * sin(t)) - 3 / (t * t);
            line->tail[i] = -images / (6 * line->period * line->period);
            line->first = i < line->first ? i : line->first;
            line->end = i + 1;
            if (fabs(s) < NEAR * width) {
                line->near_first = line->near_end == 0 ? i : line->near_first;
                line->near_end = i + 1;
            }
        } else {
            line->tail[i] = 1 / (2 * M_PI * M_PI * s * s);
        }
    }
    if (line->end == 0)
        line->first = 0;
    if ((line->plan = lw_fft_plan(f->engine, line->n_fft, LW_FFT_REAL, LW_FFT_MANY, err)) == NULL)
        return err->status;
    size_t most = line->n_fft / 2;
    line->g = lw_arena_take(arena, 2 * most, sizeof(double), err);
    double *re = lw_arena_take(arena, most, sizeof(double), err),
           *im = lw_arena_take(arena, most, sizeof(double), err);
    if (line->g == NULL || re == NULL || im == NULL)
        return LW_OUT_OF_MEMORY;
    lw__instrument_transform(&line->instrument, 1 / line->period, most, re, im);
    for (size_t k = 0; k < most; k++) {
        line->g[2 * k] = re[k];
        line->g[2 * k + 1] = -im[k];
        line->n_lengths = k + 1;
        if (fabs(re[k]) + fabs(im[k]) < 1e-11 && k > 8)
            break;
    }
    return LW_OK;
}

/* Lines that stand beyond the ends of the scan but reach into it: their places follow from the nearest line
 * by the cell, their shape is its, and their area is expected from multiplicity and geometry, at equal
 * structure factors, within a half: a tail alone hardly tells it from background. */
static lw_status lines_beyond(lw__physical *f, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = f->profiles->lines;
    const lw_scan *scan = lines->scan;
    f->n_all = f->n_lines;
    if (lines->material == NULL)
        return LW_OK;
    double wavelength = lw_radiation_wavelength(&lines->radiation);
    lw_reflection *all;
    size_t n;
    lw_status status = lw_reflections(lines->material, wavelength, 2, 178, arena, &all, &n, err);
    for (size_t i = 0; i < n && status == LW_OK && f->n_all < f->n_lines + BEYOND_MOST; i++) {
        bool above = all[i].two_theta_deg > scan->two_theta_deg[scan->n - 1];
        if (!above && all[i].two_theta_deg > scan->two_theta_deg[0])
            continue;
        const lw__physical_line *near = &f->line[above ? f->n_lines - 1 : 0];
        const lw_line *from = near->profile->line;
        double ratio = sin(from->two_theta.value * degree / 2) * 2 * from->reflection.d_nm / wavelength;
        double sine = wavelength / (2 * all[i].d_nm) * ratio,
               per_degree = lw__s_per_degree(f->profiles, near->profile);
        if (!(sine < 0.9998) ||
            fabs(near->profile->s_per_nm - 2 * sine / wavelength) > 4 * from->breadth.value * per_degree)
            continue;
        lw_line *line = lw_arena_copy(arena, from, 1, sizeof *line, err);
        lw_profile *profile = lw_arena_copy(arena, near->profile, 1, sizeof *profile, err);
        if (line == NULL || profile == NULL)
            return LW_OUT_OF_MEMORY;
        line->reflection = all[i];
        line->two_theta.value = line->nominal_deg = 2 * asin(sine) / degree;
        if (line->two_theta.value > scan->two_theta_deg[0] &&
            line->two_theta.value < scan->two_theta_deg[scan->n - 1])
            continue; /* a line of the scan that was not looked for */
        profile->line = line;
        profile->theta_deg = near->profile->theta_deg + 0.5 * (line->two_theta.value - from->two_theta.value);
        profile->s_per_nm = near->profile->s_per_nm * from->reflection.d_nm / all[i].d_nm;
        if (!(profile->theta_deg > 0 && profile->theta_deg < 89))
            continue;
        lw__physical_line *added = &f->line[f->n_all++];
        added->profile = profile;
        added->area_prior = from->area.value * all[i].multiplicity / from->reflection.multiplicity *
                            lw_lorentz_polarisation(line->two_theta.value, 0) /
                            lw_lorentz_polarisation(from->two_theta.value, 0);
        added->area_u = 0.5 * added->area_prior;
    }
    return status;
}

lw_status lw__physical_prepare(lw__physical *f, lw_engine *engine, const lw_profiles *profiles,
                               lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    *f = (lw__physical){.engine = engine, .profiles = profiles, .n = lines->scan->n, .n_lines = profiles->n};
    f->n_terms = lines->n_background > 0 ? lines->n_background : 1;
    f->line = lw_arena_take(arena, f->n_lines + BEYOND_MOST, sizeof *f->line, err);
    f->curve = lw_arena_take(arena, f->n_lines + BEYOND_MOST, sizeof *f->curve, err);
    double **column[] = {&f->fixed, &f->weight, &f->model};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(arena, f->n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    f->term = lw_arena_take(arena, f->n * f->n_terms, sizeof(double), err);
    if (f->line == NULL || f->curve == NULL || f->term == NULL)
        return LW_OUT_OF_MEMORY;
    /* rows: area and place of each line, sizes and strains (one for all lines that were widened together),
     * terms of the background, sigma, correlation length */
    for (size_t k = 0; k < f->n_lines; k++)
        f->line[k].profile = &profiles->profile[k];
    lw_status status = lines_beyond(f, arena, err);
    size_t row = 2 * f->n_all, shared = 0, longest = 0, lengths = 0;
    double breadth_sum = 0;
    for (size_t k = 0; k < f->n_all && status == LW_OK; k++) {
        lw__physical_line *line = &f->line[k];
        status = prepare_line(f, line, arena, err);
        if ((f->curve[k] = lw_arena_take(arena, f->n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
        longest = line->n_fft > longest ? line->n_fft : longest;
        lengths = line->n_lengths > lengths ? line->n_lengths : lengths;
        if (k >= f->n_lines) { /* shapes of the nearest line */
            line->at_size =
                f->line[line->profile->s_per_nm > f->line[0].profile->s_per_nm ? f->n_lines - 1 : 0].at_size;
            line->at_strain = line->at_size + 1;
            continue;
        }
        if (!line->profile->line->shared_width || shared == 0) {
            line->at_size = row++;
            line->at_strain = row++;
            if (line->profile->line->shared_width)
                shared = line->at_size;
        } else {
            line->at_size = shared;
            line->at_strain = shared + 1;
        }
        breadth_sum += log(fmax(lw__physical_voigt_breadth(line), 1e-4));
    }
    if (status != LW_OK)
        return status;
    f->at_terms = row;
    f->at_sigma = row + f->n_terms;
    f->at_length = f->at_sigma + 1;
    f->at_common = f->at_length + 1;
    f->n_parameters = f->at_common + 2;
    f->row_first = lw_arena_take(arena, f->n_parameters, sizeof(size_t), err);
    f->row_end = lw_arena_take(arena, f->n_parameters, sizeof(size_t), err);
    if (f->row_first == NULL || f->row_end == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < f->n_parameters; i++) {
        f->row_first[i] = i < f->at_terms ? f->n : 0;
        f->row_end[i] = i < f->at_terms || i >= f->at_common ? 0 : f->n;
    }
    for (size_t k = 0; k < f->n_all; k++) {
        const lw__physical_line *line = &f->line[k];
        size_t rows[4] = {2 * k, 2 * k + 1, line->at_size, line->at_strain};
        for (int i = 0; i < 4; i++) {
            size_t r = rows[i];
            f->row_first[r] = line->near_first < f->row_first[r] ? line->near_first : f->row_first[r];
            f->row_end[r] = line->near_end > f->row_end[r] ? line->near_end : f->row_end[r];
        }
    }
    /* What is known of the two shared parameters beforehand: milled and precipitated powders have sigma near
     * 0.35 (Langford, Louer & Scardi 2000 J. Appl. Cryst. 33, 964, and their like); strain is correlated over
     * less than a crystal. Wide enough for the data to overrule. */
    f->sigma_prior = 0.35;
    f->sigma_u = 0.15;
    f->size_prior = -breadth_sum / (double)f->n_lines;
    f->length_u = 1;
    f->jacobian = lw_arena_take(arena, f->n * f->n_parameters, sizeof(double), err);
    f->spectrum = lw_arena_take(arena, longest + 2, sizeof(double), err);
    f->scratch = lw_arena_take(arena, (5 * lengths > f->n ? 5 * lengths : f->n) + 1, sizeof(double), err);
    for (int c = 0; c < LW__PHYSICAL_COLUMNS; c++)
        if ((f->column[c] = lw_arena_take(arena, longest, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    if (f->jacobian == NULL || f->spectrum == NULL || f->scratch == NULL)
        return LW_OUT_OF_MEMORY;
    /* lines too weak to be widened by themselves stay as they were fitted */
    double *voigt = lw_arena_take(arena, f->n, sizeof *voigt, err);
    if (voigt == NULL)
        return LW_OUT_OF_MEMORY;
    memcpy(f->fixed, lines->background, f->n * sizeof(double));
    for (size_t k = 0; k < lines->n; k++) {
        if (lines->line[k].supported)
            continue;
        lw_status status =
            lw_line_curve(lines, &lines->line[k], f->n, lines->scan->two_theta_deg, voigt, err);
        if (status != LW_OK)
            return status;
        for (size_t i = 0; i < f->n; i++)
            f->fixed[i] += voigt[i];
    }
    double first = lines->scan->two_theta_deg[0], last = lines->scan->two_theta_deg[f->n - 1];
    for (size_t i = 0; i < f->n; i++) {
        double term[LW_BACKGROUND_MOST];
        f->weight[i] = 1 / lines->variance[i];
        lw_chebyshev(lines->scan->two_theta_deg[i], first, last, f->n_terms, term, NULL);
        for (size_t j = 0; j < f->n_terms; j++)
            f->term[j * f->n + i] = term[j];
    }
    return LW_OK;
}
