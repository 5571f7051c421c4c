/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern.h"

#include "line/curve.h"
#include "numeric/chebyshev.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

size_t lw_pattern_background_row(const lw_pattern *pattern)
{
    return LW_PATTERN_SIZE + pattern->shape.n_size;
}

size_t lw_pattern_position_row(const lw_pattern *pattern, size_t line)
{
    return lw_pattern_background_row(pattern) + pattern->n_background + 2 * line;
}

/* The step of length, the middle of the grid by alternating signs, and the spline: its values at the points
 * are those of the coefficients' transform times (2 + cos)/3 (Unser et al. 1993). */
double lw_pattern_lift(const lw_pattern *pattern, size_t j)
{
    double spline = (2 + cos(2 * M_PI * (double)j / (double)pattern->n_fft)) / 3;
    return (j % 2 == 0 ? 1 : -1) * pattern->length_step / spline;
}

static double s_of(const lw_pattern *pattern, double two_theta_deg)
{
    return 2 * sin(two_theta_deg * degree / 2) /
           lw_radiation_wavelength(&pattern->profiles->lines->radiation);
}

static double *take(lw_arena *arena, size_t n, lw_error *err)
{
    return lw_arena_take(arena, n, sizeof(double), err);
}

/* Step and number of lengths. Half a period in s holds 20 of the largest breadth; the lengths end where the
 * narrowest sample line would have died (Voigt coefficient 1e-7), with a margin for the fit to move. */
static void choose_lengths(lw_pattern *pattern)
{
    double widest = 0, longest = 0;
    for (size_t k = 0; k < pattern->profiles->n; k++) {
        const lw_profile *profile = &pattern->profiles->profile[k];
        const lw_line *line = profile->line;
        double cosine = cos(line->two_theta.value * degree / 2);
        double per_degree = degree * cosine / lw_radiation_wavelength(&pattern->profiles->lines->radiation);
        double variance =
            lw_width_gauss_variance(pattern->profiles->lines->instrument.value, line->nominal_deg, NULL);
        double lorentz =
            lw_width_lorentz(pattern->profiles->lines->instrument.value, line->nominal_deg, NULL);
        variance = (fmax(variance, 0) + 0.5 * line->own_variance_deg2) * per_degree * per_degree;
        lorentz = (fmax(lorentz, 0) + 0.7 * line->own_lorentz_deg) * per_degree;
        widest = fmax(widest, line->breadth.value * per_degree);
        /* pi lorentz L + (pi^2/(4 ln 2)) variance L^2 = 16 */
        double a = M_PI * M_PI / (4 * M_LN2) * variance, b = M_PI * lorentz;
        double most = a > 1e-14 ? (-b + sqrt(b * b + 64 * a)) / (2 * a) : b > 0 ? 16 / b : 5000;
        longest = fmax(longest, most);
    }
    pattern->length_step = fmin(fmax(1 / (40 * widest), 0.02), 2);
    longest = fmin(longest, 6000);
    pattern->n_lengths = (size_t)fmin(ceil(longest / pattern->length_step) + 1, 16384);
    size_t n = 512;
    while (n < 4 * pattern->n_lengths) /* the spline is then as exact as the sum's end */
        n *= 2;
    pattern->n_fft = n;
}

lw_status lw_pattern_instrument(lw_pattern *pattern, const lw_width_function *instrument, lw_error *err)
{
    lw_lines lines = *pattern->profiles->lines; /* borrowed parts only, for the nodes of another instrument */
    lines.instrument = *instrument;
    lw_voigt_node *node = lw_take(pattern->engine, LW_NODES_MOST * sizeof *node, err);
    if (node == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < pattern->n_lines; k++) {
        lw_pattern_line *line = &pattern->line[k];
        double variance, lorentz;
        size_t n = lw_line_all_nodes(&lines, line->line, true, node, &variance, &lorentz);
        double per = degree * cos(line->line->two_theta.value * degree / 2) /
                     lw_radiation_wavelength(&lines.radiation);
        line->kink = 0;
        memset(line->g, 0, 2 * pattern->n_lengths * sizeof(double));
        for (size_t i = 0; i < n; i++) {
            double fall = M_PI * (lorentz + node[i].lorentz) * per;
            line->kink += node[i].weight * fall;
            /* steps of one length: a rotation and a shrinking, renewed every 64 against rounding */
            double angle = 2 * M_PI * per * node[i].offset * pattern->length_step;
            double turn_re = exp(-fall * pattern->length_step) * cos(angle);
            double turn_im = exp(-fall * pattern->length_step) * sin(angle), re = 0, im = 0;
            for (size_t j = 0; j < pattern->n_lengths; j++) {
                if (j % 64 == 0) {
                    double size = node[i].weight * exp(-fall * pattern->length_step * (double)j);
                    re = size * cos(angle * (double)j);
                    im = size * sin(angle * (double)j);
                }
                line->g[2 * j] += re;
                line->g[2 * j + 1] += im;
                double next = re * turn_re - im * turn_im;
                im = re * turn_im + im * turn_re;
                re = next;
            }
        }
        for (size_t j = 0; j < pattern->n_lengths; j++) {
            double length = pattern->length_step * (double)j;
            double gauss = exp(-M_PI * M_PI / (4 * M_LN2) * variance * per * per * length * length);
            gauss *= lw_pattern_lift(pattern, j);
            line->g[2 * j] *= gauss;
            line->g[2 * j + 1] *= -gauss; /* the FFT has exp(+2 pi i L s), the profile exp(-2 pi i L s) */
        }
    }
    lw_give(pattern->engine, node, LW_NODES_MOST * sizeof *node);
    return LW_OK;
}

static double direction_of(const lw_material *material, const lw_reflection *r)
{
    if (material == NULL || material->system != LW_CUBIC)
        return 0;
    double h = r->h * r->h, k = r->k * r->k, l = r->l * r->l;
    return (h * k + h * l + k * l) / ((h + k + l) * (h + k + l));
}

/* What the 1/s^2 tails of the neighbouring periods add at s, a unit of tail. */
static double neighbours(double s, double period)
{
    double x = M_PI * s / period;
    if (fabs(x) < 1e-2)
        return (M_PI / period) * (M_PI / period) * (1.0 / 3 + x * x / 15);
    double sine = sin(x);
    return (M_PI / period) * (M_PI / period) * (1 / (sine * sine) - 1 / (x * x));
}

/* Their spline's coefficients: the values less a sixth of their second difference (the next term is below
 * 1e-10). */
static void set_neighbours(lw_pattern *pattern)
{
    double period = 1 / pattern->length_step, cell = period / (double)pattern->n_fft;
    for (size_t i = 0; i < pattern->n_fft; i++) {
        double s = cell * ((double)i - (double)(pattern->n_fft / 2)), here = neighbours(s, period);
        if (i == 0)
            s = here = 0; /* a pole's neighbour, never used */
        double bend = i == 0 ? 0 : neighbours(s + cell, period) - 2 * here + neighbours(s - cell, period);
        pattern->neighbours[i] = here - bend / 6;
    }
}

lw_status lw_pattern_begin(lw_pattern *pattern, lw_engine *engine, const lw_profiles *profiles,
                           const lw_size_histogram *histogram, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    const lw_scan *scan = lines->scan;
    *pattern = (lw_pattern){.engine = engine,
                            .profiles = profiles,
                            .n = scan->n,
                            .n_lines = lines->n,
                            .n_background = lines->n_background,
                            .rung = lw_pattern_rung_for(engine->cpu)};
    choose_lengths(pattern);
    if (lw_pattern_shape_begin(&pattern->shape, pattern->n_lengths, pattern->length_step, histogram, arena,
                               err) != LW_OK)
        return err->status;
    pattern->n_parameters = lw_pattern_position_row(pattern, lines->n);
    size_t n = pattern->n, m = pattern->n_lengths, f = pattern->n_fft;
    double **array[] = {&pattern->s,     &pattern->factor,   &pattern->fallen,  &pattern->weight,
                        &pattern->curve, &pattern->of_lines, &pattern->residual};
    for (size_t i = 0; i < sizeof array / sizeof *array; i++)
        *array[i] = take(arena, n, err);
    size_t channels = 2 + pattern->shape.n_size + LW_PATTERN_STRAIN_MOST;
    size_t padded = pattern->n_parameters + LW_PATTERN_TILE;
    pattern->falls = take(arena, 2 * m, err);
    pattern->exponent = take(arena, m, err);
    pattern->thinned = take(arena, m, err);
    pattern->work = take(arena, m, err);
    pattern->spectrum = take(arena, f + 2, err);
    pattern->grid = take(arena, channels * f, err);
    pattern->neighbours = take(arena, f, err);
    pattern->shared = take(arena, (LW_PATTERN_SHARED_MOST + 1) * n, err);
    pattern->own = take(arena, 2 * lines->n * n, err);
    pattern->column = take(arena, padded * LW_PATTERN_BLOCK, err);
    pattern->weighted = take(arena, padded * LW_PATTERN_BLOCK, err);
    pattern->total = take(arena, lw_pattern_total_size(padded), err);
    pattern->source = lw_arena_take(arena, pattern->n_parameters, sizeof *pattern->source, err);
    pattern->fallen_at = NAN;
    pattern->basis = take(arena, (pattern->n_background + 1) * n, err);
    pattern->line = lw_arena_take(arena, lines->n, sizeof *pattern->line, err);
    for (size_t k = 0; k < lines->n && err->status == LW_OK; k++)
        pattern->line[k].g = take(arena, 2 * m, err);
    if (err->status != LW_OK)
        return err->status;
    pattern->plan = lw_fft_plan(engine, f, LW_FFT_REAL, LW_FFT_MANY, err);
    if (pattern->plan == NULL)
        return err->status;

    set_neighbours(pattern);
    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[n - 1];
    double term[LW_BACKGROUND_MOST];
    for (size_t i = 0; i < n; i++) {
        pattern->s[i] = s_of(pattern, scan->two_theta_deg[i]);
        pattern->factor[i] =
            lines->n > 0 ? lw_line_relative_factor(lines, &lines->line[0], scan->two_theta_deg[i]) : 1;
        pattern->weight[i] = lines->variance[i] > 0 ? 1 / lines->variance[i] : 0;
        lw_chebyshev(scan->two_theta_deg[i], low, high, pattern->n_background, term, NULL);
        for (size_t j = 0; j < pattern->n_background; j++)
            pattern->basis[j * n + i] = term[j];
    }
    /* P/sin^2(theta) is for lines that are narrow against s. The mean over orientations of a crystal whose
     * transform is round is exactly profile(s - s0)/(s s0): across a line the factor goes as 1/s (Guinier
     * 1963 X-ray Diffraction, ch. 5, from the integral over the sphere of radius s) */
    for (size_t i = 0; i < n && lines->n > 0 && lines->with_factor; i++)
        pattern->factor[i] *= pattern->s[i] / s_of(pattern, lines->line[0].two_theta.value);
    for (size_t k = 0; k < lines->n; k++) {
        lw_pattern_line *line = &pattern->line[k];
        line->line = &lines->line[k];
        line->s_start = line->s_corrected = s_of(pattern, line->line->two_theta.value);
        line->hkl_sum = direction_of(lines->material, &line->line->reflection);
        for (size_t j = 0; j < profiles->n; j++)
            if (profiles->profile[j].line == line->line)
                line->s_corrected = profiles->profile[j].s_per_nm;
    }
    return lw_pattern_instrument(pattern, &lines->instrument, err);
}

void lw_pattern_start(const lw_pattern *pattern, const lw_spheres *spheres, double *p)
{
    memset(p, 0, pattern->n_parameters * sizeof *p);
    const lw_size_histogram *histogram = pattern->shape.histogram;
    if (histogram == NULL) {
        p[LW_PATTERN_INVERSE_SIZE] = 1 / lw_spheres_size_area(spheres, NULL);
        p[LW_PATTERN_SIGMA] = spheres->sigma;
    }
    double sum = 0;
    for (size_t b = 0; histogram != NULL && b < histogram->n; b++) {
        /* volume over ln D is normal about ln(median) + 3 sigma^2 (Hatch & Choate 1929 J. Franklin Inst. 207,
         * 369) */
        double middle = log(spheres->median_nm) + 3 * spheres->sigma * spheres->sigma;
        double off = (log(lw_size_histogram_diameter(histogram, b)) - middle) /
                     fmax(spheres->sigma, 0.7 * histogram->step);
        sum += p[LW_PATTERN_SIZE + b] = exp(-0.5 * off * off);
    }
    for (size_t b = 0; histogram != NULL && b < histogram->n; b++)
        p[LW_PATTERN_SIZE + b] /= sum;
    for (size_t k = 0; k < pattern->n_lines; k++) {
        const lw_line *line = pattern->line[k].line;
        double per = degree * cos(line->two_theta.value * degree / 2) /
                     lw_radiation_wavelength(&pattern->profiles->lines->radiation);
        /* the fit's area is over degrees of the line's own axis; its factor was 1 at the line, here at line 0 */
        double factor =
            lw_line_relative_factor(pattern->profiles->lines, pattern->line[0].line, line->two_theta.value);
        if (pattern->profiles->lines->with_factor)
            factor *= pattern->line[k].s_start / pattern->line[0].s_start;
        p[lw_pattern_position_row(pattern, k) + 1] = line->area.value * per / factor;
    }
}
