/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern.h"

#include "line/curve.h"
#include "numeric/chebyshev.h"

#include <math.h>
#include <string.h>

#define PI 3.14159265358979323846
#define BLOCK 64

static const double degree = PI / 180;

size_t lw_pattern_position_row(const lw_pattern *pattern, size_t line)
{
    return LW_PATTERN_BACKGROUND + pattern->n_background + 2 * line;
}

lw_spheres lw_pattern_spheres(const double *p)
{
    double sigma = p[LW_PATTERN_SIGMA];
    return (lw_spheres){1.5 * exp(-2.5 * sigma * sigma) / p[LW_PATTERN_INVERSE_SIZE], sigma};
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
        double a = PI * PI / (4 * M_LN2) * variance, b = PI * lorentz;
        double most = a > 1e-14 ? (-b + sqrt(b * b + 64 * a)) / (2 * a) : b > 0 ? 16 / b : 5000;
        longest = fmax(longest, most);
    }
    pattern->length_step = fmin(fmax(1 / (40 * widest), 0.02), 2);
    longest = fmin(longest, 6000);
    pattern->n_lengths = (size_t)fmin(ceil(longest / pattern->length_step) + 1, 16384);
    size_t n = 512;
    while (n < 8 * pattern->n_lengths)
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
            double fall = PI * (lorentz + node[i].lorentz) * per;
            line->kink += node[i].weight * fall;
            /* steps of one length: a rotation and a shrinking, renewed every 64 against rounding */
            double angle = 2 * PI * per * node[i].offset * pattern->length_step;
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
            double gauss = exp(-PI * PI / (4 * M_LN2) * variance * per * per * length * length);
            line->g[2 * j] *= gauss;
            line->g[2 * j + 1] *= gauss;
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

lw_status lw_pattern_begin(lw_pattern *pattern, lw_engine *engine, const lw_profiles *profiles,
                           lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    const lw_scan *scan = lines->scan;
    *pattern = (lw_pattern){.engine = engine,
                            .profiles = profiles,
                            .n = scan->n,
                            .n_lines = lines->n,
                            .n_background = lines->n_background,
                            .strain = &lw_strain_constant};
    pattern->n_parameters = lw_pattern_position_row(pattern, lines->n);
    choose_lengths(pattern);
    size_t n = pattern->n, m = pattern->n_lengths, f = pattern->n_fft;
    double **array[] = {&pattern->s, &pattern->factor, &pattern->weight, &pattern->curve, &pattern->of_lines};
    for (size_t i = 0; i < sizeof array / sizeof *array; i++)
        *array[i] = take(arena, n, err);
    double **by_length[] = {
        &pattern->size,         &pattern->size_slopes[0],         &pattern->size_slopes[1],
        &pattern->displacement, &pattern->displacement_slopes[0], &pattern->displacement_slopes[1]};
    for (size_t i = 0; i < sizeof by_length / sizeof *by_length; i++)
        *by_length[i] = take(arena, m, err);
    for (size_t i = 0; i < 1 + LW_PATTERN_SHAPES; i++)
        pattern->profile[i] = take(arena, f, err);
    pattern->spectrum = take(arena, f + 2, err);
    pattern->column = take(arena, pattern->n_parameters * BLOCK, err);
    pattern->basis = take(arena, (pattern->n_background + 1) * n, err);
    pattern->line = lw_arena_take(arena, lines->n, sizeof *pattern->line, err);
    for (size_t k = 0; k < lines->n && err->status == LW_OK; k++)
        pattern->line[k].g = take(arena, 2 * m, err);
    if (err->status != LW_OK)
        return err->status;
    pattern->plan = lw_fft_plan(engine, f, LW_FFT_REAL, LW_FFT_MANY, err);
    if (pattern->plan == NULL)
        return err->status;

    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[n - 1];
    double term[64];
    if (pattern->n_background > 64)
        return lw_fail(err, LW_NOT_SUPPORTED, "fit with fewer background terms",
                       "%zu background terms are too many", pattern->n_background);
    for (size_t i = 0; i < n; i++) {
        pattern->s[i] = s_of(pattern, scan->two_theta_deg[i]);
        pattern->factor[i] =
            lines->n > 0 ? lw_line_relative_factor(lines, &lines->line[0], scan->two_theta_deg[i]) : 1;
        pattern->weight[i] = lines->variance[i] > 0 ? 1 / lines->variance[i] : 0;
        lw_chebyshev(scan->two_theta_deg[i], low, high, pattern->n_background, term, NULL);
        for (size_t j = 0; j < pattern->n_background; j++)
            pattern->basis[j * n + i] = term[j];
    }
        /* P/sin^2(theta) is for lines that are narrow against s. The mean over orientations of a crystal whose transform is
     * round is exactly profile(s - s0)/(s s0): across a line the factor goes as 1/s (Guinier 1963 X-ray Diffraction,
     * ch. 5, from the integral over the sphere of radius s) */
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
    p[LW_PATTERN_INVERSE_SIZE] = 1 / lw_spheres_size_area(spheres, NULL);
    p[LW_PATTERN_SIGMA] = spheres->sigma;
    for (size_t k = 0; k < pattern->n_lines; k++) {
        const lw_line *line = pattern->line[k].line;
        double per = degree * cos(line->two_theta.value * degree / 2) /
                     lw_radiation_wavelength(&pattern->profiles->lines->radiation);
        /* the fit's area is over degrees of the line's own axis; its factor was 1 at the line, here at line 0
         */
        double factor =
            lw_line_relative_factor(pattern->profiles->lines, pattern->line[0].line, line->two_theta.value);
        if (pattern->profiles->lines->with_factor)
            factor *= pattern->line[k].s_start / pattern->line[0].s_start;
        p[lw_pattern_position_row(pattern, k) + 1] = line->area.value * per / factor;
    }
}

/* Profile of one line and its slopes to the shape parameters on the grid of s, period 1/length_step; returns
 * the strength of the 1/s^2 tail in tail[0] and its slopes in tail[1..]. */
static void line_profiles(lw_pattern *pattern, const lw_pattern_line *line, double moved, const double *p,
                          bool slopes, double *tail)
{
    double s0 = line->s_corrected + moved, strain = 2 * PI * PI * s0 * s0;
    double scale = 1 - p[LW_PATTERN_ANISOTROPY] * line->hkl_sum;
    int n_strain = pattern->strain->n, curves = slopes ? 1 + LW_PATTERN_SHAPES : 1;
    double *c = pattern->spectrum;
    size_t n_c = 2 * (pattern->n_fft / 2 + 1);
    for (int which = 0; which < curves; which++) {
        if (which == 1 + LW_PATTERN_STRAIN_2 && n_strain < 2)
            continue;
        if (which == 1 + LW_PATTERN_ANISOTROPY && line->hkl_sum == 0)
            continue;
        size_t last = 0;
        for (size_t j = 0; j < pattern->n_lengths; j++) {
            double a = exp(-strain * scale * pattern->displacement[j]);
            switch (which - 1) {
            case -1: a *= pattern->size[j]; break;
            case LW_PATTERN_INVERSE_SIZE: a *= pattern->size_slopes[0][j]; break;
            case LW_PATTERN_SIGMA: a *= pattern->size_slopes[1][j]; break;
            case LW_PATTERN_STRAIN_1:
            case LW_PATTERN_STRAIN_2:
                a *= -strain * scale * pattern->size[j] *
                     pattern->displacement_slopes[which - 1 - LW_PATTERN_STRAIN_1][j];
                break;
            default: a *= strain * line->hkl_sum * pattern->size[j] * pattern->displacement[j]; break;
            }
            c[2 * j] = a * line->g[2 * j] * pattern->length_step;
            /* the sum below has exp(+2 pi i L s), the profile exp(-2 pi i L s) */
            c[2 * j + 1] = -a * line->g[2 * j + 1] * pattern->length_step;
            last = j + 1;
        }
        memset(c + 2 * last, 0, (n_c - 2 * last) * sizeof *c);
        lw_fft_back(pattern->plan, c, pattern->profile[which]);
    }
    double kink_slopes[2] = {0, 0};
    double kink = pattern->strain->kink(p + LW_PATTERN_STRAIN_1, kink_slopes);
    double unit = 1 / (2 * PI * PI);
    tail[0] = unit * (p[LW_PATTERN_INVERSE_SIZE] + strain * scale * kink + line->kink);
    tail[1 + LW_PATTERN_INVERSE_SIZE] = unit;
    tail[1 + LW_PATTERN_SIGMA] = 0;
    tail[1 + LW_PATTERN_STRAIN_1] = unit * strain * scale * kink_slopes[0];
    tail[1 + LW_PATTERN_STRAIN_2] = unit * strain * scale * kink_slopes[1];
    tail[1 + LW_PATTERN_ANISOTROPY] = -unit * strain * line->hkl_sum * kink;
}

/* Value (and slope to s) of the profile `which` at s from the line. */
static inline double at(const double *grid, size_t n, double x, double *slope)
{
    double whole = floor(x), t = x - whole;
    size_t mask = n - 1, i = (size_t)((long long)whole + (long long)n) & mask; /* n is a power of 2 */
    double a = grid[(i + n - 1) & mask], b = grid[i], c = grid[(i + 1) & mask], d = grid[(i + 2) & mask];
    double c1 = c - a / 3 - b / 2 - d / 6, c2 = 0.5 * (a + c) - b, c3 = (d - a) / 6 + 0.5 * (b - c);
    if (slope != NULL)
        *slope = c1 + t * (2 * c2 + t * 3 * c3);
    return b + t * (c1 + t * (c2 + t * c3));
}

/* What the 1/s^2 tails of the neighbouring periods add at s, a unit of tail. */
static inline double neighbours(double s, double period)
{
    double x = PI * s / period;
    if (fabs(x) < 1e-2)
        return (PI / period) * (PI / period) * (1.0 / 3 + x * x / 15);
    double sine = sin(x);
    return (PI / period) * (PI / period) * (1 / (sine * sine) - 1 / (x * x));
}

static lw_status evaluate(lw_pattern *pattern, const double *p, bool slopes, lw_normal *normal,
                          const double *difference, double *g, lw_error *err);

static bool possible(const lw_pattern *pattern, const double *p)
{
    if (!(p[LW_PATTERN_INVERSE_SIZE] > 0) || !(p[LW_PATTERN_SIGMA] > 0))
        return false;
    for (size_t k = 0; k < pattern->n_lines; k++)
        if (!(1 - p[LW_PATTERN_ANISOTROPY] * pattern->line[k].hkl_sum >= 0))
            return false;
    return true;
}

lw_status lw_pattern_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    return evaluate(user, p, want_normal, normal, NULL, NULL, err);
}

lw_status lw_pattern_project(lw_pattern *pattern, const double *p, const double *difference, double *g,
                             lw_error *err)
{
    return evaluate(pattern, p, true, NULL, difference, g, err);
}

/* The parts of one line that all its points share. */
typedef struct line_values {
    double tail[1 + LW_PATTERN_SHAPES];
    double *curve[2 + LW_PATTERN_SHAPES]; /* [n] unit-area profile, its slopes to the shapes, and to the
                                             position */
} line_values;

/* All points of one line into values. */
static void spread(const lw_pattern *pattern, double s0, double fall, bool slopes, const bool *wanted,
                   line_values *v)
{
    double period = 1 / pattern->length_step, per_cell = (double)pattern->n_fft / period;
    for (size_t i = 0; i < pattern->n; i++) {
        double s = pattern->s[i] - s0, by_s = 0;
        double factor = pattern->factor[i];
        if (fall != 0)
            factor *= exp(-fall * (pattern->s[i] * pattern->s[i] - s0 * s0));
        if (fabs(s) < 0.5 * period) {
            double others = neighbours(s, period), x = s * per_cell;
            v->curve[0][i] = factor * (at(pattern->profile[0], pattern->n_fft, x, slopes ? &by_s : NULL) -
                                       v->tail[0] * others);
            if (!slopes)
                continue;
            for (int w = 1; w <= LW_PATTERN_SHAPES; w++)
                if (wanted[w])
                    v->curve[w][i] =
                        factor * (at(pattern->profile[w], pattern->n_fft, x, NULL) - v->tail[w] * others);
            v->curve[1 + LW_PATTERN_SHAPES][i] = -factor * by_s * per_cell;
        } else {
            double square = factor / (s * s);
            v->curve[0][i] = v->tail[0] * square;
            if (!slopes)
                continue;
            for (int w = 1; w <= LW_PATTERN_SHAPES; w++)
                if (wanted[w])
                    v->curve[w][i] = v->tail[w] * square;
            v->curve[1 + LW_PATTERN_SHAPES][i] = 2 * v->tail[0] * square / s;
        }
    }
}

/* Adds one block of points to the normal equations; column holds the slopes, block of a parameter after
 * another. */
static void add_block(const lw_pattern *pattern, size_t first, size_t count, const double *residual,
                      lw_normal *normal, double *g)
{
    size_t n = pattern->n_parameters;
    double weighted[BLOCK];
    for (size_t a = 0; a < n; a++) {
        const double *col = pattern->column + a * BLOCK;
        double sum = 0;
        for (size_t i = 0; i < count; i++) {
            weighted[i] = col[i] * pattern->weight[first + i];
            sum += weighted[i] * residual[first + i];
        }
        for (size_t i = count; i < BLOCK; i++)
            weighted[i] = 0;
        g[a] += sum;
        if (normal == NULL)
            continue;
        for (size_t b = 0; b <= a; b++) {
            const double *other = pattern->column + b * BLOCK;
            double part[8] = {0};
            for (size_t i = 0; i < BLOCK; i += 8)
                for (size_t j = 0; j < 8; j++)
                    part[j] += weighted[i + j] * other[i + j];
            normal->h[a * n + b] +=
                ((part[0] + part[1]) + (part[2] + part[3])) + ((part[4] + part[5]) + (part[6] + part[7]));
        }
    }
}

static lw_status evaluate(lw_pattern *pattern, const double *p, bool slopes, lw_normal *normal,
                          const double *difference, double *g, lw_error *err)
{
    size_t n = pattern->n, m = pattern->n_lines, rows = 2 + LW_PATTERN_SHAPES;
    const lw_scan *scan = pattern->profiles->lines->scan;
    if (normal != NULL && !possible(pattern, p)) {
        normal->chi2 = INFINITY;
        return LW_OK;
    }
    lw_status status = lw_engine_poll(pattern->engine, err);
    if (status != LW_OK)
        return status;
    lw_arena scratch;
    lw_arena_begin(&scratch, pattern->engine);
    /* curves that all lines share: slopes to shapes and to the fall, summed over lines; then two a line */
    double *shared = take(&scratch, (LW_PATTERN_SHAPES + 1) * n, err),
           *own = slopes ? take(&scratch, 2 * m * n, err) : NULL;
    double *work = take(&scratch, rows * n, err), *residual = take(&scratch, n, err);
    if (!shared || (slopes && !own) || !work || !residual) {
        lw_arena_end(&scratch);
        return LW_OUT_OF_MEMORY;
    }
    lw_spheres spheres = lw_pattern_spheres(p);
    for (size_t j = 0; j < pattern->n_lengths; j++) {
        double length = pattern->length_step * (double)j, by_size[2], by_strain[2] = {0, 0};
        pattern->size[j] = lw_spheres_coefficient(&spheres, length, by_size);
        pattern->size_slopes[0][j] = -by_size[0] / p[LW_PATTERN_INVERSE_SIZE];
        pattern->size_slopes[1][j] = by_size[1] - 5 * spheres.sigma * by_size[0];
        pattern->displacement[j] = pattern->strain->displacement(p + LW_PATTERN_STRAIN_1, length, by_strain);
        pattern->displacement_slopes[0][j] = by_strain[0];
        pattern->displacement_slopes[1][j] = by_strain[1];
    }
    memset(pattern->of_lines, 0, n * sizeof(double));
    for (size_t k = 0; k < m; k++) {
        const lw_pattern_line *line = &pattern->line[k];
        line_values v;
        bool wanted[1 + LW_PATTERN_SHAPES];
        for (size_t w = 0; w < rows; w++)
            v.curve[w] = work + w * n;
        if (slopes) {
            v.curve[0] = own + (2 * k + 1) * n;
            v.curve[1 + LW_PATTERN_SHAPES] = own + 2 * k * n;
        }
        for (int w = 0; w <= LW_PATTERN_SHAPES; w++)
            wanted[w] = !(w == 1 + LW_PATTERN_STRAIN_2 && pattern->strain->n < 2) &&
                        !(w == 1 + LW_PATTERN_ANISOTROPY && line->hkl_sum == 0);
        size_t row = lw_pattern_position_row(pattern, k);
        double area = p[row + 1], s0 = line->s_start + p[row];
        line_profiles(pattern, line, p[row], p, slopes, v.tail);
        spread(pattern, s0, p[LW_PATTERN_FALL], slopes, wanted, &v);
        for (size_t i = 0; i < n; i++)
            pattern->of_lines[i] += area * v.curve[0][i];
        if (!slopes)
            continue;
        for (int w = 0; w < LW_PATTERN_SHAPES; w++)
            if (wanted[w + 1])
                for (size_t i = 0; i < n; i++)
                    shared[(size_t)w * n + i] += area * v.curve[w + 1][i];
        double *by_fall = shared + (size_t)LW_PATTERN_FALL * n;
        for (size_t i = 0; i < n; i++) {
            by_fall[i] -= area * v.curve[0][i] * (pattern->s[i] * pattern->s[i] - s0 * s0);
            v.curve[1 + LW_PATTERN_SHAPES][i] *= area;
        }
    }
    double chi2 = 0;
    for (size_t i = 0; i < n; i++) {
        double sum = pattern->profiles->lines->background[i] + pattern->of_lines[i];
        for (size_t j = 0; j < pattern->n_background; j++)
            sum += p[LW_PATTERN_BACKGROUND + j] * pattern->basis[j * n + i];
        pattern->curve[i] = sum;
        residual[i] = difference != NULL ? difference[i] : scan->intensity[i] - sum;
        chi2 += residual[i] * residual[i] * pattern->weight[i];
    }
    if (normal != NULL)
        normal->chi2 = chi2;
    for (size_t first = 0; first < n && slopes; first += BLOCK) {
        size_t count = n - first < BLOCK ? n - first : BLOCK;
        for (size_t a = 0; a < pattern->n_parameters; a++) {
            const double *from = a <= LW_PATTERN_FALL ? shared + a * n
                                 : a < lw_pattern_position_row(pattern, 0)
                                     ? pattern->basis + (a - LW_PATTERN_BACKGROUND) * n
                                     : own + (a - lw_pattern_position_row(pattern, 0)) * n;
            double *to = pattern->column + a * BLOCK;
            memcpy(to, from + first, count * sizeof *to);
            for (size_t i = count; i < BLOCK; i++)
                to[i] = 0;
        }
        add_block(pattern, first, count, residual, normal, normal != NULL ? normal->g : g);
    }
    lw_arena_end(&scratch);
    return LW_OK;
}
