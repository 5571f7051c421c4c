/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_fitter.h"

#include <math.h>
#include <string.h>

#define NODES 30 /* of the histogram */

bool lw_pattern_fitter_directions(const lw_pattern_fitter *f)
{
    const lw_material *material = f->pattern.profiles->lines->material;
    double least = 1, most = 0;
    for (size_t k = 0; k < f->pattern.n_lines; k++)
        if (f->pattern.line[k].line->supported) {
            least = fmin(least, f->pattern.line[k].hkl_sum);
            most = fmax(most, f->pattern.line[k].hkl_sum);
        }
    return material != NULL && material->system == LW_CUBIC && f->pattern.profiles->n >= 4 &&
           most - least > 0.1;
}

/* beta^2 = 1/D^2 + 4 e^2 s^2, weighted: near enough to begin with. */
static void start_from_breadths(const lw_profiles *profiles, double *size, double *square_strain,
                                double *narrowest)
{
    double w = 0, x = 0, y = 0, xx = 0, xy = 0;
    *narrowest = INFINITY;
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_profile *profile = &profiles->profile[i];
        double beta = profile->breadth_s.value, s2 = profile->s_per_nm * profile->s_per_nm;
        if (!(beta > 0) || !isfinite(beta))
            continue;
        *narrowest = fmin(*narrowest, beta);
        double u = profile->breadth_s.kind == LW_VALUE ? profile->breadth_s.u : beta;
        double weight = 1 / (4 * beta * beta * (u * u + 4e-4 * beta * beta));
        w += weight;
        x += weight * s2;
        y += weight * beta * beta;
        xx += weight * s2 * s2;
        xy += weight * s2 * beta * beta;
    }
    if (!isfinite(*narrowest))
        *narrowest = 1e-3;
    double determinant = w * xx - x * x, slope = 0, intercept = w > 0 ? y / w : *narrowest * *narrowest;
    if (determinant > 1e-12 * w * xx) {
        slope = (w * xy - x * y) / determinant;
        intercept = (y - slope * x) / w;
    }
    double least = 0.01 * *narrowest * *narrowest;
    *size = 1 / sqrt(fmax(intercept, least));
    /* 2/pi: mean square strain over squared apparent strain, slope = 4 e^2 */
    *square_strain = fmax(slope, 0) / (2 * M_PI);
}

/* Fall of the scattering power: slope of ln(area over multiplicity, Lorentz factor and polarisation) against
 * s^2, by least squares. Structure factors that differ scatter about it; what remains is how atoms and their
 * vibration fall off. Kept within what atoms do (0 to 0.03 nm^2). */
static double fall_of_areas(const lw_profiles *profiles)
{
    const lw_lines *lines = profiles->lines;
    double w = 0, x = 0, y = 0, xx = 0, xy = 0;
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_line *line = profiles->profile[i].line;
        double theta = line->two_theta.value * M_PI / 360, c = cos(2 * theta);
        double factor = (lines->constant_polarisation + lines->cos2_polarisation * c * c) /
                        (sin(theta) * sin(theta) * cos(theta));
        if (!lines->with_factor || !(line->area.value > 0) || line->reflection.multiplicity < 1 ||
            !(factor > 0))
            continue;
        double s2 = profiles->profile[i].s_per_nm * profiles->profile[i].s_per_nm;
        double value = log(line->area.value / (factor * line->reflection.multiplicity));
        w += 1;
        x += s2;
        y += value;
        xx += s2 * s2;
        xy += s2 * value;
    }
    double determinant = w * xx - x * x;
    if (w < 3 || !(determinant > 0))
        return 0;
    return fmin(fmax(-(w * xy - x * y) / determinant, 0), 0.03);
}

/* Memory, bounds and what is held, for a pattern that stands. */
static lw_status lay_out(lw_pattern_fitter *f, double narrowest, lw_error *err)
{
    lw_pattern *m = &f->pattern;
    size_t n = m->n_parameters;
    double **vector[] = {&f->p, &f->lower, &f->upper, &f->normal_g};
    for (size_t i = 0; i < sizeof vector / sizeof *vector; i++)
        *vector[i] = lw_arena_take(f->arena, n, sizeof(double), err);
    f->inverse = lw_arena_take(f->arena, n * n, sizeof(double), err);
    f->normal_h = lw_arena_take(f->arena, n * n, sizeof(double), err);
    f->fixed = lw_arena_take(f->arena, n, sizeof(bool), err);
    f->at_bound = lw_arena_take(f->arena, n, sizeof(bool), err);
    f->skip = lw_arena_take(f->arena, n, sizeof(bool), err);
    if (err->status != LW_OK)
        return err->status;
    m->fixed = f->fixed;
    for (size_t i = 0; i < n; i++) {
        f->lower[i] = -INFINITY;
        f->upper[i] = INFINITY;
    }
    if (m->shape.histogram == NULL) {
        /* from a millimetre, which no line shows, to two cells of a metal */
        f->lower[LW_PATTERN_INVERSE_SIZE] = 1e-6;
        f->upper[LW_PATTERN_INVERSE_SIZE] = 2;
        f->lower[LW_PATTERN_SIGMA] = 0.02;
        f->upper[LW_PATTERN_SIGMA] = 1.2;
    }
    for (size_t b = 0; m->shape.histogram != NULL && b < m->shape.n_size; b++)
        f->lower[LW_PATTERN_SIZE + b] = 0; /* no volume is negative */
    f->lower[LW_PATTERN_ANISOTROPY] = -20;
    f->upper[LW_PATTERN_ANISOTROPY] = 2.99; /* H is 1/3 at most: from q = 3 on 1 - q H is negative along <111> */
    f->fixed[LW_PATTERN_ANISOTROPY] = f->request->anisotropy != 2 || !lw_pattern_fitter_directions(f);
    f->lower[LW_PATTERN_VARIATION] = 0;
    f->upper[LW_PATTERN_VARIATION] = 5;
    f->lower[LW_PATTERN_FALL] = -0.02;
    f->upper[LW_PATTERN_FALL] = 0.1;
    f->fixed[LW_PATTERN_FALL] = f->request->fall != 1;
    for (size_t k = 0; k < m->n_lines; k++) {
        size_t row = lw_pattern_position_row(m, k);
        f->fixed[row] = !m->line[k].line->supported;
        f->lower[row] = -narrowest;
        f->upper[row] = narrowest;
    }
    return LW_OK;
}

lw_status lw_pattern_fitter_begin(lw_pattern_fitter *f, lw_engine *engine, const lw_profiles *profiles,
                                  lw_error *err)
{
    lw_status status = lw_pattern_begin(&f->pattern, engine, profiles, NULL, f->arena, err);
    if (status != LW_OK)
        return status;
    double size, square, narrowest;
    start_from_breadths(profiles, &size, &square, &narrowest);
    f->half_length = 0.5 / narrowest;
    status = lay_out(f, narrowest, err);
    if (status != LW_OK)
        return status;
    lw_spheres spheres = {.sigma = 0.35};
    spheres.median_nm = fmin(fmax(size / (0.75 * exp(3.5 * spheres.sigma * spheres.sigma)), 0.6), 1e4);
    lw_pattern_start(&f->pattern, &spheres, f->p);
    f->p[LW_PATTERN_STRAIN] = square;
    memcpy(f->start_shape, f->p + LW_PATTERN_SIZE, sizeof f->start_shape);
    if (f->request->fall != 2)
        f->p[LW_PATTERN_FALL] = fall_of_areas(profiles);
    return LW_OK;
}

lw_status lw_pattern_fitter_begin_histogram(lw_pattern_fitter *f, const lw_pattern_fitter *from,
                                            lw_error *err)
{
    /* nodes where lognormal spheres have all their volume, and beyond it where they are narrow */
    lw_size_histogram *histogram = &f->answer->histogram;
    lw_spheres spheres = lw_pattern_spheres(from->p);
    double middle = log(spheres.median_nm) + 3 * spheres.sigma * spheres.sigma;
    double down = fmax(3 * spheres.sigma, log(5)), up = fmax(2.5 * spheres.sigma, log(3));
    *histogram = (lw_size_histogram){.n = NODES, .first = middle - down, .step = (down + up) / (NODES - 1)};
    lw_status status =
        lw_pattern_begin(&f->pattern, from->pattern.engine, from->pattern.profiles, histogram, f->arena, err);
    if (status == LW_OK)
        status = lay_out(f, from->upper[lw_pattern_position_row(&from->pattern, 0)], err);
    if (status != LW_OK)
        return status;
    f->half_length = from->half_length;
    memcpy(f->pattern.weight, from->pattern.weight, f->pattern.n * sizeof(double));
    lw_pattern_fitter_carry(f, from, from->p);
    return LW_OK;
}

void lw_pattern_fitter_carry(lw_pattern_fitter *f, const lw_pattern_fitter *from, const double *p)
{
    lw_spheres spheres = lw_pattern_spheres(p);
    lw_pattern_start(&f->pattern, &spheres, f->p);
    memcpy(f->p, p, LW_PATTERN_SIZE * sizeof *p);
    size_t to_row = lw_pattern_background_row(&f->pattern),
           from_row = lw_pattern_background_row(&from->pattern);
    memcpy(f->p + to_row, p + from_row, (from->pattern.n_parameters - from_row) * sizeof *p);
}
