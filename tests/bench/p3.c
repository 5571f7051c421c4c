/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Benchmark P3: windows of many scans, one line each, and how its answers scatter.
 * usage: bench_p3 FOLDER fit SCANS RUNG
 *            fits the 12 windows of SCANS scans of FOLDER/counts.bin (doubles [scan][12][500]), weights 1/max(counts, 1);
 *            prints one JSON line: seconds a scan, mean chi2 of a window
 *        bench_p3 FOLDER bound SEEDS SCALE
 *            draws counts from the truth times SCALE, fits with weights 1/model, iterated; prints scatter over the
 *            Cramer-Rao bound and bias in units of the bound, for position, area, Gaussian and Lorentzian FWHM
 * FOLDER/true.txt and FOLDER/start.txt have 12 lines: position (deg), area, Gaussian FWHM, Lorentzian FWHM (deg), level
 * and slope of the background as Chebyshev terms on the window of 500 points of 0.01 deg around the true position. */
#include "bench.h"
#include "line/model.h"
#include "numeric/random.h"

#include <math.h>

#define WINDOWS 12
#define POINTS 500
#define OWN 6
#define SHOWN 4

typedef struct window {
    lw_model model;
    double angle[POINTS], counts[POINTS];
    double *y; /* the model's copy of the counts, padded */
} window;

static void begin(window *w, lw_engine *engine, const lw_radiation *radiation, double middle, lw_arena *arena)
{
    lw_error err = LW_ERROR_NONE;
    for (size_t i = 0; i < POINTS; i++)
        w->angle[i] = middle + 0.01 * ((double)i - POINTS / 2);
    lw_scan scan = {.n = POINTS, .two_theta_deg = w->angle, .intensity = w->counts};
    w->model = (lw_model){.engine = engine,
                          .kernel = lw_voigt_kernel_for(engine->cpu),
                          .radiation = radiation,
                          .shape = lw_line_shape_list[0],
                          .n_lines = 1,
                          .n_local = 2};
    w->model.line = lw_arena_take(arena, 1, sizeof *w->model.line, &err);
    if (w->model.line == NULL || lw_model_points(&w->model, &scan, 2, arena, &err) != LW_OK ||
        lw_model_prepare(&w->model, arena, &err) != LW_OK)
        bench_stop(&err);
    lw_model_background(&w->model, 2, false, NULL);
    w->model.line[0].nominal_deg = middle;
    w->y = bench_take(w->model.n_blocks * LW_BLOCK, sizeof(double));
    w->model.y = w->y;
}

static void to_parameters(const double *line, double *p)
{
    memcpy(p, line, OWN * sizeof *p);
    p[2] *= p[2]; /* the parameter is the square */
}

/* Fits the counts that w->y holds; `rounds` times more with weights from the model. */
static lw_fit_outcome fit(window *w, const double *start, int rounds, double *p)
{
    static const double lower[OWN] = {-INFINITY, -INFINITY, 0, 0, -INFINITY, -INFINITY};
    lw_error err = LW_ERROR_NONE;
    lw_problem problem = {.n = OWN, .lower = lower, .evaluate = lw_model_evaluate, .user = &w->model};
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-8; /* as the baseline */
    control.step_tolerance = 1e-2;
    lw_fit_outcome outcome = {0};
    to_parameters(start, p);
    for (size_t i = 0; i < POINTS; i++)
        w->model.weight[i] = 1 / fmax(w->y[i], 1);
    for (int round = 0; round <= rounds; round++) {
        for (size_t i = 0; i < POINTS && round > 0; i++)
            w->model.weight[i] = 1 / fmax(w->model.curve[i], 1e-3);
        w->model.weighed = false;
        lw_model_windows(&w->model, p, 20);
        if (lw_least_squares(w->model.engine, &problem, &control, p, NULL, &outcome, &err) != LW_OK)
            bench_stop(&err);
    }
    return outcome;
}

static double *read_counts(const char *folder, size_t scans)
{
    char path[4096];
    snprintf(path, sizeof path, "%s/counts.bin", folder);
    FILE *file = fopen(path, "rb");
    size_t n = scans * WINDOWS * POINTS;
    double *counts = bench_take(n, sizeof *counts);
    if (file == NULL || fread(counts, sizeof *counts, n, file) != n) {
        perror(path);
        exit(2);
    }
    fclose(file);
    return counts;
}

static void time_fits(window *w, const char *folder, const double *start, size_t scans)
{
    double *counts = read_counts(folder, scans), chi2 = 0, began = bench_now(), p[OWN];
    size_t evaluations = 0;
    for (size_t s = 0; s < scans; s++)
        for (size_t k = 0; k < WINDOWS; k++) {
            memcpy(w[k].y, counts + (s * WINDOWS + k) * POINTS, POINTS * sizeof(double));
            lw_fit_outcome outcome = fit(&w[k], start + OWN * k, 0, p);
            chi2 += outcome.chi2;
            evaluations += outcome.evaluations;
        }
    printf("{\"rung\": \"%s\", \"seconds\": %.9g, \"chi2\": %.6f, \"evaluations\": %.2f}\n", w[0].model.kernel->rung,
           (bench_now() - began) / (double)scans, chi2 / (double)(scans * WINDOWS),
           (double)evaluations / (double)(scans * WINDOWS));
    free(counts);
}

/* u of the shown quantities by the normal matrix at the truth, weights 1/expected counts. */
static void bound(window *w, const double *p, double *u)
{
    lw_error err = LW_ERROR_NONE;
    double h[OWN * OWN] = {0}, g[OWN] = {0}, c[OWN * OWN];
    lw_normal normal = {.n = OWN, .h = h, .g = g};
    size_t weakest;
    lw_model_windows(&w->model, p, 20);
    w->model.whole_normal = true;
    lw_status status = lw_model_evaluate(&w->model, p, false, &normal, &err);
    for (size_t i = 0; i < POINTS; i++)
        w->model.weight[i] = 1 / w->model.curve[i];
    w->model.weighed = false;
    memset(g, 0, sizeof g);
    if (status == LW_OK)
        status = lw_model_evaluate(&w->model, p, true, &normal, &err);
    w->model.whole_normal = false;
    if (status == LW_OK)
        status = lw_invert_normal(w->model.engine, h, OWN, NULL, c, &weakest, &err);
    if (status != LW_OK)
        bench_stop(&err);
    for (size_t i = 0; i < SHOWN; i++)
        u[i] = sqrt(c[i * OWN + i]);
    u[2] /= 2 * sqrt(p[2]); /* of the square to the FWHM */
}

static void scatter(window *w, const double *truth, const double *start, size_t seeds, double scale)
{
    double ratio[SHOWN] = {0}, bias[SHOWN] = {0}, worst[SHOWN] = {0};
    for (size_t k = 0; k < WINDOWS; k++) {
        double right[OWN], from[OWN], p[OWN], u[SHOWN], expected[POINTS], sum[SHOWN] = {0}, square[SHOWN] = {0};
        memcpy(right, truth + OWN * k, sizeof right);
        memcpy(from, start + OWN * k, sizeof from);
        right[1] *= scale, right[4] *= scale, right[5] *= scale;
        from[1] *= scale, from[4] *= scale, from[5] *= scale;
        to_parameters(right, p);
        bound(&w[k], p, u);
        memcpy(expected, w[k].model.curve, sizeof expected);
        for (size_t s = 0; s < seeds; s++) {
            lw_random random;
            lw_random_begin(&random, s + 1, k);
            for (size_t i = 0; i < POINTS; i++)
                w[k].y[i] = lw_random_poisson(&random, expected[i]);
            fit(&w[k], from, 4, p);
            p[2] = sqrt(p[2]);
            for (size_t i = 0; i < SHOWN; i++) {
                double off = (p[i] - right[i]) / u[i];
                sum[i] += off;
                square[i] += off * off;
            }
        }
        for (size_t i = 0; i < SHOWN; i++) {
            double mean = sum[i] / (double)seeds;
            ratio[i] += sqrt((square[i] - mean * sum[i]) / (double)(seeds - 1)) / WINDOWS;
            bias[i] += mean / WINDOWS;
            worst[i] = fabs(mean) > fabs(worst[i]) ? mean : worst[i];
        }
    }
    printf("{\"scale\": %g, \"ratio\": [%.4f, %.4f, %.4f, %.4f], \"bias\": [%.4f, %.4f, %.4f, %.4f], "
           "\"worst_bias\": [%.3f, %.3f, %.3f, %.3f]}\n",
           scale, ratio[0], ratio[1], ratio[2], ratio[3], bias[0], bias[1], bias[2], bias[3], worst[0], worst[1], worst[2],
           worst[3]);
}

int main(int argc, char **argv)
{
    if (argc != 5 || (strcmp(argv[2], "fit") != 0 && strcmp(argv[2], "bound") != 0)) {
        fprintf(stderr, "usage: bench_p3 FOLDER fit SCANS RUNG | bench_p3 FOLDER bound SEEDS SCALE\n");
        return 2;
    }
    bool timing = strcmp(argv[2], "fit") == 0;
    size_t n, m, count = strtoul(argv[3], NULL, 10);
    double *truth = bench_numbers(argv[1], "true.txt", &n), *start = bench_numbers(argv[1], "start.txt", &m);
    if (n != WINDOWS * OWN || m != n || count < 2) {
        fprintf(stderr, "true.txt and start.txt need 12 lines of 6 numbers, and at least 2 scans or seeds\n");
        return 2;
    }
    lw_radiation radiation = {.n = 2, .component = {{0.15405929, 0, 2.0 / 3}, {0.15444274, 0, 1.0 / 3}}};
    lw_engine engine;
    lw_engine_begin(&engine);
    engine.cpu = timing ? bench_rung(argv[4]) : LW_CPU_AUTO;
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    window *w = bench_take(WINDOWS, sizeof *w);
    for (size_t k = 0; k < WINDOWS; k++)
        begin(&w[k], &engine, &radiation, truth[OWN * k], &arena);
    if (timing)
        time_fits(w, argv[1], start, count);
    else
        scatter(w, truth, start, count, strtod(argv[4], NULL));
    for (size_t k = 0; k < WINDOWS; k++)
        free(w[k].y);
    free(w);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    free(truth);
    free(start);
    return 0;
}
