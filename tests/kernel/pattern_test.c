/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole pattern's model: curve and normal equations of every rung beside the plain one, the slopes beside
 * differences of the curve, the vector exponential beside the system's. */
#include "check.h"
#include "base/arena.h"
#include "sample/pattern.h"

#include <stdlib.h>

#define PI 3.14159265358979323846
#define DEGREE (PI / 180)
#define POINTS 2003 /* no multiple of a block or of the lanes */
#define LINES 6
#define TERMS 3
#define LAMBDA 0.15405929

static double angle[POINTS], counts[POINTS], background[POINTS], variance[POINTS];

typedef struct made {
    lw_engine *engine;
    lw_arena arena;
    lw_scan scan;
    lw_material material;
    lw_line line[LINES];
    lw_profile profile[LINES];
    lw_profiles profiles;
    lw_lines lines;
} made;

/* Lines of a face-centred cubic cell, measured with a doublet. */
static void make(made *m, lw_engine *engine)
{
    static const int hkl[LINES][3] = {{1, 1, 1}, {2, 0, 0}, {2, 2, 0}, {3, 1, 1}, {2, 2, 2}, {4, 0, 0}};
    *m = (made){.engine = engine, .material = {.system = LW_CUBIC, .lattice = 'F'}};
    for (size_t i = 0; i < POINTS; i++) {
        angle[i] = 30 + 110.0 * (double)i / POINTS + 0.01 * sin((double)i); /* uneven */
        background[i] = 20;
        variance[i] = 50 + (double)(i % 7);
        counts[i] = 60 + 10 * cos(0.1 * (double)i);
    }
    m->scan = (lw_scan){.n = POINTS, .two_theta_deg = angle, .intensity = counts};
    m->lines =
        (lw_lines){.scan = &m->scan,
                   .material = &m->material,
                   .radiation = {.n = 2, .component = {{LAMBDA, 0, 2.0 / 3}, {0.15444274, 0, 1.0 / 3}}},
                   .has_instrument = true,
                   .instrument = {.value = {[LW_W] = 0.0016, [LW_Z] = 0.02}},
                   .shape = "voigt",
                   .n = LINES,
                   .line = m->line,
                   .n_background = TERMS,
                   .background = background,
                   .variance = variance};
    for (size_t k = 0; k < LINES; k++) {
        int h = hkl[k][0], l = hkl[k][1], n = hkl[k][2];
        double s = sqrt(h * h + l * l + n * n) / 0.36, at = 2 * asin(s * LAMBDA / 2) / DEGREE;
        double per = DEGREE * cos(at * DEGREE / 2) / LAMBDA;
        m->line[k] = (lw_line){.reflection = {.h = h, .k = l, .l = n, .d_nm = 1 / s, .two_theta_deg = at},
                               .supported = true,
                               .remark = "",
                               .two_theta = {.value = at},
                               .area = {.value = 100.0 * (double)(1 + k)},
                               .breadth = {.value = 0.12 / per},
                               .nominal_deg = at,
                               .own_lorentz_deg = 2 / PI * 0.11 / per};
        m->profile[k] = (lw_profile){.line = &m->line[k], .s_per_nm = s, .theta_deg = at / 2};
    }
    m->profiles = (lw_profiles){.lines = &m->lines, .n = LINES, .profile = m->profile};
    lw_arena_begin(&m->arena, engine);
    lw_arena_begin(&m->lines.arena, engine);
}

static void start(const lw_pattern *pattern, double *p)
{
    lw_spheres spheres = {9, 0.35};
    lw_pattern_start(pattern, &spheres, p);
    for (size_t i = 0; i < pattern->shape.n_strain && pattern->shape.knots != NULL; i++)
        p[LW_PATTERN_STRAIN + i] = i == 0 ? -11.5 : -0.2 - 0.05 * (double)i;
    if (pattern->shape.strain != NULL) {
        p[LW_PATTERN_STRAIN] = 6e-6;
        p[LW_PATTERN_STRAIN + 1] = pattern->shape.strain->linear ? 1e-5 : 1.2;
    }
    p[LW_PATTERN_ANISOTROPY] = 0.5;
    p[LW_PATTERN_VARIATION] = 0.3;
    p[LW_PATTERN_FALL] = 0.004;
    for (size_t j = 0; j < pattern->n_background; j++)
        p[lw_pattern_background_row(pattern) + j] = 1 - 0.3 * (double)j;
}

/* All slopes of the curve against its differences, through their products with every column. Strain of a form
 * or, with NULL, at knots. */
static void slopes(made *m, const lw_strain_form *form, const lw_size_histogram *histogram)
{
    lw_error err = LW_ERROR_NONE;
    lw_pattern pattern;
    lw_strain_knots knots;
    lw_strain_knots_make(5, 2, 15, &knots);
    CHECK(lw_pattern_begin(&pattern, m->engine, &m->profiles, histogram, &m->arena, &err) == LW_OK);
    lw_pattern_shape_set_strain(&pattern.shape, form, form == NULL ? &knots : NULL);
    size_t n = pattern.n_parameters;
    double *p = calloc(n, sizeof *p), *g = calloc(n, sizeof *g), *up = calloc(POINTS, sizeof *up);
    lw_normal normal = {.n = n, .h = calloc(n * n, sizeof(double)), .g = calloc(n, sizeof(double))},
              none = {.n = n};
    start(&pattern, p);
    lw_pattern_evaluate(&pattern, p, true, &normal, &err);
    if (histogram != NULL) { /* the fall at L = 0, which the tails beyond the grid go by, is that of the hats */
        double all = 0, fall = 0, length = 1e-6;
        for (size_t b = 0; b < histogram->n; b++) {
            all += p[LW_PATTERN_SIZE + b];
            fall += p[LW_PATTERN_SIZE + b] * (1 - lw_size_histogram_coefficient(histogram, b, length)) / length;
        }
        CHECK_RELATIVE(pattern.shape.size_kink, fall / all, 1e-5);
    }
    for (size_t a = 0; a < n; a++) {
        bool unused = a >= LW_PATTERN_STRAIN + pattern.shape.n_strain && a < LW_PATTERN_ANISOTROPY;
        if (unused) {
            CHECK(normal.h[a * n + a] == 0);
            continue;
        }
        double size = fabs(p[a]) > 0 ? fabs(p[a]) : 0.01, step = 1e-4 * size, kept = p[a];
        p[a] = kept + step;
        lw_pattern_evaluate(&pattern, p, false, &none, &err);
        memcpy(up, pattern.curve, sizeof angle);
        p[a] = kept - step;
        lw_pattern_evaluate(&pattern, p, false, &none, &err);
        for (size_t i = 0; i < POINTS; i++)
            up[i] = (up[i] - pattern.curve[i]) / (2 * step);
        p[a] = kept;
        memset(g, 0, n * sizeof *g);
        lw_pattern_project(&pattern, p, up, g, &err);
        bool position =
            a >= lw_pattern_position_row(&pattern, 0) && (a - lw_pattern_position_row(&pattern, 0)) % 2 == 0;
        for (size_t b = 0; b <= a; b++) {
            double scale = sqrt(normal.h[a * n + a] * normal.h[b * n + b]);
            /* differences lose step^2; strain at the place that a line had, not where it moves, costs
             * positions 2e-3 */
            CHECK_NEAR((g[b] - normal.h[a * n + b]) / fmax(scale, 1e-300), 0, position ? 4e-3 : 2e-6);
        }
    }
    free(p);
    free(g);
    free(up);
    free(normal.h);
    free(normal.g);
}

/* Every rung against the plain one: they sum in another order and fuse products. */
static void rungs(made *m)
{
    static const lw_cpu cpu[3] = {LW_CPU_PLAIN, LW_CPU_AVX2, LW_CPU_AVX512};
    lw_error err = LW_ERROR_NONE;
    double *h[3] = {NULL}, *g[3] = {NULL}, *curve[3], chi2[3];
    size_t n = 0;
    for (int r = 0; r < 3; r++) {
        lw_pattern pattern;
        m->engine->cpu = cpu[r];
        CHECK(lw_pattern_begin(&pattern, m->engine, &m->profiles, NULL, &m->arena, &err) == LW_OK);
        lw_pattern_shape_set_strain(&pattern.shape, &lw_strain_voigt, NULL); /* with tails of its own */
        n = pattern.n_parameters;
        double *p = calloc(n, sizeof *p);
        lw_normal normal = {.n = n, .h = calloc(n * n, sizeof(double)), .g = calloc(n, sizeof(double))};
        start(&pattern, p);
        lw_pattern_evaluate(&pattern, p, true, &normal, &err);
        h[r] = normal.h;
        g[r] = normal.g;
        chi2[r] = normal.chi2;
        curve[r] = pattern.curve;
        printf("rung asked for %d: %s\n", (int)cpu[r], pattern.rung->name);
        free(p);
    }
    for (int r = 1; r < 3; r++) {
        double most = 0, largest = 0;
        for (size_t i = 0; i < POINTS; i++) {
            most = fmax(most, fabs(curve[0][i]));
            largest = fmax(largest, fabs(curve[r][i] - curve[0][i]));
        }
        CHECK(most > 100 && largest < 1e-12 * most);
        CHECK_RELATIVE(chi2[r], chi2[0], 1e-12);
        largest = 0;
        for (size_t a = 0; a < n; a++)
            for (size_t b = 0; b <= a; b++)
                if (h[0][a * n + a] > 0 && h[0][b * n + b] > 0)
                    largest = fmax(largest, fabs(h[r][a * n + b] - h[0][a * n + b]) /
                                                sqrt(h[0][a * n + a] * h[0][b * n + b]));
        CHECK(largest < 1e-10);
        printf("largest difference of a scaled product: %.2g\n", largest);
    }
    for (int r = 0; r < 3; r++) {
        free(h[r]);
        free(g[r]);
    }
    m->engine->cpu = LW_CPU_AUTO;
}

/* exp(-x) through `falls`, of x from 0 to where it ends: 2 units in the last place, and what the fusing may
 * add. */
static void exponential(void)
{
    static const lw_cpu cpu[3] = {LW_CPU_PLAIN, LW_CPU_AVX2, LW_CPU_AVX512};
    enum { N = 1003 };
    static double x[N], g[2 * N], falls[2 * N];
    for (size_t i = 0; i < N; i++) {
        x[i] = 69.0 * (double)i / N + 1e-3 * sin((double)i);
        g[2 * i] = 1;
        g[2 * i + 1] = -0.5;
    }
    for (int r = 0; r < 3; r++) {
        const lw_pattern_rung *rung = lw_pattern_rung_for(cpu[r]);
        CHECK(rung->falls(N, 1, x, g, falls) == N);
        double largest = 0;
        for (size_t i = 0; i < N; i++) {
            largest = fmax(largest, fabs(falls[2 * i] / exp(-x[i]) - 1));
            CHECK(falls[2 * i + 1] == -0.5 * falls[2 * i]);
        }
        CHECK(largest < 5e-16);
        size_t last = rung->falls(N, 20, x, g, falls); /* ends early, where nothing is left */
        CHECK(last < N / 15 && falls[2 * last - 2] < 1e-30);
    }
}

int main(void)
{
    lw_engine engine;
    made m;
    lw_engine_begin(&engine);
    make(&m, &engine);
    exponential();
    for (int i = 0; lw_strain_form_list[i] != NULL; i++)
        slopes(&m, lw_strain_form_list[i], NULL);
    slopes(&m, NULL, NULL);
    lw_size_histogram histogram = {12, log(3.0), 0.25};
    slopes(&m, &lw_strain_correlated, &histogram);
    rungs(&m);
    lw_arena_end(&m.arena);
    lw_arena_end(&m.lines.arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
