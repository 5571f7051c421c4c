/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model of a scan: its gradient against central differences for every kind of parameter, the interpolation of
 * tails against the evaluation of every line at every point, and the rungs against one another. */
#include "check.h"
#include "line/model.h"

#include <stdlib.h>

enum { LINES = 5, POINTS = 2500, TERMS = 4 };
static const double place[LINES] = {23.1, 30.4, 31.1, 52.0, 77.3};

typedef struct setup {
    lw_engine engine;
    lw_arena arena;
    lw_radiation radiation;
    lw_model model;
    size_t n;
    double *p, *h, *g;
} setup;

static void begin(setup *s, int shape, bool s_axis, lw_axial_kind axial, const double axial_value[2], lw_cpu cpu)
{
    static double angle[POINTS], counts[POINTS];
    lw_error err = LW_ERROR_NONE;
    memset(s, 0, sizeof *s);
    lw_engine_begin(&s->engine);
    lw_arena_begin(&s->arena, &s->engine);
    /* Cu K-alpha, Holzer et al. (1997) Phys. Rev. A 56, 4554 */
    lw_radiation_add_energy(&s->radiation, 8047.8372, 2.285, 957, 0, &err);
    lw_radiation_add_energy(&s->radiation, 8045.3672, 3.358, 90, 0, &err);
    lw_radiation_add_energy(&s->radiation, 8027.9935, 2.667, 334, 0, &err);
    lw_radiation_add_energy(&s->radiation, 8026.5041, 3.571, 111, 0, &err);
    lw_radiation_settle(&s->radiation, &err);
    for (int i = 0; i < POINTS; i++) {
        angle[i] = 20 + 0.025 * i;
        counts[i] = 100;
    }
    lw_scan scan = {.n = POINTS, .two_theta_deg = angle, .intensity = counts};
    lw_model *m = &s->model;
    *m = (lw_model){.engine = &s->engine,
                    .kernel = lw_voigt_kernel_for(cpu),
                    .radiation = &s->radiation,
                    .shape = lw_line_shape_list[shape],
                    .on_s_axis = s_axis,
                    .with_factor = s_axis,
                    .cos2_monochromator = 0.4,
                    .constant_polarisation = 0.5,
                    .n_lines = LINES,
                    .n_local = (size_t)lw_line_shape_list[shape]->n_local,
                    .axial = axial};
    for (int i = 0; i < 2; i++)
        m->own[LW_AXIAL_1 + i] = axial_value[i];
    m->line = lw_arena_take(&s->arena, LINES, sizeof *m->line, &err);
    CHECK(lw_model_points(m, &scan, TERMS + 1, &s->arena, &err) == LW_OK);
    lw_model_background(m, TERMS, true, NULL);
    for (int k = 0; k < LINES; k++)
        m->line[k].nominal_deg = place[k];
}

/* Takes arrays for the layout chosen since begin(), and parameters: local[] of every line, the globals' values. */
static void lay_out(setup *s, const double *local, const double *global, double window)
{
    lw_error err = LW_ERROR_NONE;
    lw_model *m = &s->model;
    CHECK(lw_model_prepare(m, &s->arena, &err) == LW_OK);
    s->n = lw_model_parameters(m);
    s->p = lw_arena_take(&s->arena, s->n, sizeof(double), &err);
    s->h = lw_arena_take(&s->arena, s->n * s->n, sizeof(double), &err);
    s->g = lw_arena_take(&s->arena, s->n, sizeof(double), &err);
    for (size_t k = 0; k < LINES; k++) {
        double *own = s->p + lw_model_row(m, k);
        own[0] = place[k] + 0.003 * (double)k;
        own[1] = 300 + 200 * (double)(k * k);
        for (size_t j = 0; j < m->n_local; j++)
            own[2 + j] = local[j] * (1 + 0.1 * (double)k);
    }
    double *border = s->p + lw_model_border(m);
    static const double background[TERMS + 1] = {120, -30, 12, 4, 20};
    memcpy(border, background, sizeof background);
    for (size_t i = 0; i < m->n_globals; i++)
        border[TERMS + 1 + i] = global[i];
    lw_model_windows(m, s->p, window);
}

static double evaluate(setup *s, const double *p, bool want)
{
    lw_error err = LW_ERROR_NONE;
    lw_normal normal = {.n = s->n, .h = s->h, .g = s->g};
    if (want) {
        memset(s->h, 0, s->n * s->n * sizeof(double));
        memset(s->g, 0, s->n * sizeof(double));
    }
    CHECK(lw_model_evaluate(&s->model, p, want, &normal, &err) == LW_OK);
    return normal.chi2;
}

/* Data that the model misses by a wave of a few standard deviations, so that the gradient is not zero. */
static void make_data(setup *s)
{
    lw_model *m = &s->model;
    evaluate(s, s->p, false);
    double *y = (double *)m->y;
    for (size_t i = 0; i < m->n; i++) {
        m->weight[i] = 1 / m->curve[i];
        y[i] = m->curve[i] + 2 * sqrt(m->curve[i]) * sin(0.37 * (double)i) + 0.01 * m->curve[i];
    }
    m->weighed = false;
}

/* Every gradient, in units of 1/u of its parameter, against a central difference of chi-square. */
static void check_gradient(setup *s, double tolerance)
{
    make_data(s);
    evaluate(s, s->p, true);
    double *g = malloc(s->n * sizeof *g), *d = malloc(s->n * sizeof *d), *p = malloc(s->n * sizeof *p), largest = 0;
    for (size_t i = 0; i < s->n; i++) {
        d[i] = s->h[i * s->n + i];
        g[i] = s->g[i];
        largest = fmax(largest, fabs(g[i]) / sqrt(d[i]));
    }
    CHECK(largest > 1);
    memcpy(p, s->p, s->n * sizeof *p);
    for (size_t i = 0; i < s->n; i++) {
        double step = 3e-3 / sqrt(d[i]);
        p[i] = s->p[i] + step;
        double up = evaluate(s, p, false);
        p[i] = s->p[i] - step;
        double down = evaluate(s, p, false);
        p[i] = s->p[i];
        CHECK_NEAR(g[i] / sqrt(d[i]), -(up - down) / (4 * step) / sqrt(d[i]), tolerance * largest);
        if (fabs(g[i] / sqrt(d[i]) + (up - down) / (4 * step) / sqrt(d[i])) > tolerance * largest)
            fprintf(stderr, "  parameter %zu of %zu, shape %s\n", i, s->n, s->model.shape->name);
    }
    free(g);
    free(d);
    free(p);
}

static void end(setup *s)
{
    lw_arena_end(&s->arena);
    lw_engine_end(&s->engine);
}

static const double no_axial[2] = {0, 0};

static void gradients_of_local_shapes(void)
{
    static const double local[7][4] = {{0.003, 0.04}, {0.004, 0}, {0, 0.06},      {0.08, 0.4},
                                       {0.08, 1.7},   {0.07, 0.1, 0.3, 0.6}, {0.07, 0.1, 1.4, 2.5}};
    for (int shape = 0; shape < 7; shape++)
        for (int s_axis = 0; s_axis < 2; s_axis++) {
            if (shape == 1 || shape == 2)
                continue; /* limits of the Voigt, on its bounds */
            setup s;
            begin(&s, shape, s_axis, LW_AXIAL_NONE, no_axial, LW_CPU_AUTO);
            lay_out(&s, local[shape], NULL, 20);
            check_gradient(&s, 2e-5);
            end(&s);
        }
}

static void gradients_of_width_functions(void)
{
    static const int kind[7] = {LW_U, LW_V, LW_W, LW_P, LW_X, LW_Y, LW_Z};
    static const double value[7] = {0.002, -0.0005, 0.002, 0.0004, 0.01, 0.02, 0.004};
    for (int of_instrument = 0; of_instrument < 2; of_instrument++) {
        setup s;
        begin(&s, 0, true, LW_AXIAL_NONE, no_axial, LW_CPU_AUTO);
        s.model.n_local = 0;
        s.model.n_globals = 7;
        for (int i = 0; i < 7; i++)
            s.model.global[i] = (lw_global){.of_instrument = of_instrument, .parameter = kind[i]};
        (of_instrument ? s.model.own : s.model.instrument)[LW_W] = 0.001;
        lay_out(&s, NULL, value, 20);
        check_gradient(&s, 2e-5);
        end(&s);
    }
}

static void gradients_of_axial_parameters(void)
{
    static const double at[2] = {0.045, 0.03};
    for (int kind = LW_AXIAL_FINGER; kind <= LW_AXIAL_SOLLER; kind++)
        for (int tied = 0; tied < 2; tied++) {
            if (tied && kind == LW_AXIAL_SOLLER)
                continue;
            setup s;
            begin(&s, 0, false, (lw_axial_kind)kind, tied ? (const double[2]){0.03, 0.03} : at, LW_CPU_AUTO);
            s.model.n_local = 0;
            s.model.n_globals = tied ? 3 : 4;
            s.model.global[0] = (lw_global){.parameter = LW_W};
            s.model.global[1] = (lw_global){.parameter = LW_Y};
            s.model.global[2] = (lw_global){.parameter = LW_AXIAL_1, .tied = tied};
            s.model.global[3] = (lw_global){.parameter = LW_AXIAL_2};
            lay_out(&s, NULL, (const double[4]){0.001, 0.02, tied ? 0.03 : at[0], at[1]}, 1000);
            check_gradient(&s, 2e-5);
            end(&s);
        }
}

/* All tails by nodes against everything point by point (a window wider than the scan): same curve, gradient and own
 * blocks of the normal matrix. */
static void tails_are_interpolated_well(void)
{
    static const double local[2] = {0.001, 0.06};
    for (int s_axis = 0; s_axis < 2; s_axis++) {
        setup near, far;
        begin(&near, 0, s_axis, LW_AXIAL_NONE, no_axial, LW_CPU_AUTO);
        lay_out(&near, local, NULL, 20);
        make_data(&near);
        begin(&far, 0, s_axis, LW_AXIAL_NONE, no_axial, LW_CPU_AUTO);
        lay_out(&far, local, NULL, 20);
        make_data(&far);
        for (int k = 0; k < LINES; k++) { /* every block in the core */
            far.model.line[k].core_first = far.model.line[k].near_first = far.model.line[k].close_first = 0;
            far.model.line[k].core_end = far.model.line[k].near_end = far.model.n_blocks;
            far.model.line[k].close_end = far.model.n_bundles;
        }
        memcpy((double *)far.model.y, near.model.y, near.model.n * sizeof(double));
        memcpy(far.model.weight, near.model.weight, near.model.n * sizeof(double));
        near.model.whole_normal = far.model.whole_normal = true;
        double a = evaluate(&near, near.p, true), b = evaluate(&far, far.p, true), peak = 0, worst = 0;
        for (size_t i = 0; i < near.model.n; i++)
            peak = fmax(peak, far.model.curve[i]);
        for (size_t i = 0; i < near.model.n; i++)
            worst = fmax(worst, fabs(near.model.curve[i] - far.model.curve[i]));
        CHECK(worst < 1e-8 * peak);
        CHECK(worst > 0);
        CHECK_RELATIVE(a, b, 1e-7);
        for (size_t i = 0; i < near.n; i++) {
            CHECK_NEAR(near.g[i] / sqrt(far.h[i * far.n + i]), far.g[i] / sqrt(far.h[i * far.n + i]), 1e-4);
            CHECK_RELATIVE(near.h[i * near.n + i], far.h[i * far.n + i], 1e-6);
            for (size_t j = lw_model_border(&near.model); j < near.n; j++)
                if (j > i)
                    CHECK_NEAR(near.h[j * near.n + i], far.h[j * far.n + i],
                               1e-6 * sqrt(far.h[i * far.n + i] * far.h[j * far.n + j]));
        }
        end(&near);
        end(&far);
    }
}

static void rungs_agree(void)
{
    static const double local[2] = {0.002, 0.05};
    static const double soller[2] = {0.04, 0.03};
    setup s[3];
    static const lw_cpu cpu[3] = {LW_CPU_PLAIN, LW_CPU_AVX2, LW_CPU_AVX512};
    double chi2[3];
    for (int i = 0; i < 3; i++) {
        begin(&s[i], 0, true, LW_AXIAL_SOLLER, soller, cpu[i]);
        s[i].model.n_globals = 2;
        s[i].model.global[0] = (lw_global){.parameter = LW_AXIAL_1};
        s[i].model.global[1] = (lw_global){.parameter = LW_AXIAL_2};
        lay_out(&s[i], local, soller, 20);
        if (i == 0)
            make_data(&s[0]);
        memcpy((double *)s[i].model.y, s[0].model.y, s[0].model.n * sizeof(double));
        memcpy(s[i].model.weight, s[0].model.weight, s[0].model.n * sizeof(double));
        chi2[i] = evaluate(&s[i], s[i].p, true);
    }
    for (int i = 1; i < 3; i++) {
        CHECK_RELATIVE(chi2[i], chi2[0], 1e-10);
        for (size_t a = 0; a < s[0].n; a++)
            for (size_t b = 0; b <= a; b++)
                CHECK_NEAR(s[i].h[a * s[0].n + b], s[0].h[a * s[0].n + b],
                           1e-9 * sqrt(s[0].h[a * s[0].n + a] * s[0].h[b * s[0].n + b]));
    }
    for (int i = 0; i < 3; i++)
        end(&s[i]);
}

int main(void)
{
    gradients_of_local_shapes();
    gradients_of_width_functions();
    gradients_of_axial_parameters();
    tails_are_interpolated_well();
    rungs_agree();
    return lw_checks_end();
}
