/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Benchmark P1: the least-squares solve of all lines of a scan at once.
 * usage: bench_p1 CASE REPEATS RUNG [soller]   (RUNG: auto, plain, avx2, avx512)
 * reads CASE/scan.txt (2theta, counts), CASE/start.txt (position, area, Gaussian FWHM, Lorentzian FWHM a line),
 * CASE/emission.txt (wavelength nm, width nm, share) and CASE/background.txt (Chebyshev terms); prints one JSON line.
 * Weights are 1/max(counts, 1), the axis is 2theta, no intensity factor. With `soller` the axial divergence of both
 * beams is refined as well (two parameters more), on counts drawn from the model itself at CASE/truth.txt,
 * CASE/level.txt and apertures of 0.04 rad. */
#include "bench.h"
#include "line/model.h"
#include "numeric/random.h"

#include <math.h>

#define APERTURE_TRUE 0.04
#define APERTURE_START 0.03

/* Counts of the model at p, into counts[n]. */
static void draw(lw_model *model, lw_normal *normal, const double *p, double *counts)
{
    lw_error err = LW_ERROR_NONE;
    lw_random random;
    lw_random_begin(&random, 660, 0);
    lw_model_windows(model, p, 20);
    if (lw_model_evaluate(model, p, false, normal, &err) != LW_OK)
        bench_stop(&err);
    for (size_t i = 0; i < model->n; i++)
        counts[i] = lw_random_poisson(&random, fmax(model->curve[i], 0));
}

int main(int argc, char **argv)
{
    if (argc < 4) {
        fprintf(stderr, "usage: bench_p1 CASE REPEATS RUNG [soller]\n");
        return 2;
    }
    bool soller = argc > 4 && strcmp(argv[4], "soller") == 0;
    size_t n_scan, n_start, n_emission, n_terms, n_truth, n_level, repeats = strtoul(argv[2], NULL, 10);
    double *scan_text = bench_numbers(argv[1], "scan.txt", &n_scan);
    double *start = bench_numbers(argv[1], "start.txt", &n_start);
    double *emission = bench_numbers(argv[1], "emission.txt", &n_emission);
    double *terms = bench_numbers(argv[1], "background.txt", &n_terms);
    double *truth = bench_numbers(argv[1], "truth.txt", &n_truth), *level = bench_numbers(argv[1], "level.txt", &n_level);
    lw_error err = LW_ERROR_NONE;
    lw_engine engine;
    lw_engine_begin(&engine);
    engine.cpu = bench_rung(argv[3]);
    lw_arena arena;
    lw_arena_begin(&arena, &engine);

    size_t n = n_scan / 2, n_lines = n_start / 4;
    double *angle = lw_arena_take(&arena, n, sizeof *angle, &err), *counts = lw_arena_take(&arena, n, sizeof *counts, &err);
    if (angle == NULL || counts == NULL)
        bench_stop(&err);
    for (size_t i = 0; i < n; i++) {
        angle[i] = scan_text[2 * i];
        counts[i] = scan_text[2 * i + 1];
    }
    lw_scan scan = {.n = n, .two_theta_deg = angle, .intensity = counts};
    lw_radiation radiation = {.n = n_emission / 3};
    for (size_t i = 0; i < radiation.n; i++)
        radiation.component[i] = (lw_emission){emission[3 * i], emission[3 * i + 1], emission[3 * i + 2]};
    lw_model model = {.engine = &engine,
                      .kernel = lw_voigt_kernel_for(engine.cpu),
                      .radiation = &radiation,
                      .shape = lw_line_shape_list[0],
                      .n_lines = n_lines,
                      .n_local = 2};
    if (soller) {
        model.axial = LW_AXIAL_SOLLER;
        model.n_globals = 2;
        model.global[0] = (lw_global){.parameter = LW_AXIAL_1};
        model.global[1] = (lw_global){.parameter = LW_AXIAL_2};
    }
    model.line = lw_arena_take(&arena, n_lines, sizeof *model.line, &err);
    if (model.line == NULL || lw_model_points(&model, &scan, n_terms, &arena, &err) != LW_OK ||
        lw_model_prepare(&model, &arena, &err) != LW_OK)
        bench_stop(&err);
    lw_model_background(&model, n_terms, false, NULL);
    size_t n_par = lw_model_parameters(&model);
    double *p0 = bench_take(n_par, sizeof *p0), *p = bench_take(n_par, sizeof *p), *lower = bench_take(n_par, sizeof *lower);
    double *seconds = bench_take(repeats, sizeof *seconds);
    lw_normal normal = {.n = n_par, .h = bench_take(n_par * n_par, sizeof(double)), .g = bench_take(n_par, sizeof(double))};
    for (size_t i = 0; i < n_par; i++)
        lower[i] = -INFINITY;
    /* first the truth, for drawing counts, then the start */
    for (int round = soller ? 0 : 1; round < 2; round++) {
        const double *lines = round == 0 ? truth : start, *ground = round == 0 ? level : terms;
        for (size_t k = 0; k < n_lines; k++) {
            double *own = p0 + lw_model_row(&model, k), *low = lower + lw_model_row(&model, k);
            memcpy(own, lines + 4 * k, 4 * sizeof *own);
            own[2] *= own[2]; /* the parameter is the square */
            low[2] = low[3] = 0;
            model.line[k].nominal_deg = own[0];
        }
        double *border = p0 + lw_model_border(&model);
        memcpy(border, ground, n_terms * sizeof *border);
        for (size_t i = 0; i < model.n_globals; i++) {
            border[n_terms + i] = round == 0 ? APERTURE_TRUE : APERTURE_START;
            lower[lw_model_border(&model) + n_terms + i] = 1e-3;
        }
        if (round == 0) {
            draw(&model, &normal, p0, counts);
            if (lw_model_points(&model, &scan, n_terms, &arena, &err) != LW_OK)
                bench_stop(&err);
            lw_model_background(&model, n_terms, false, NULL);
        }
    }
    lw_problem problem = {.n = n_par, .border = n_par - lw_model_border(&model), .lower = lower, .evaluate = lw_model_evaluate, .user = &model};
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-9; /* as the baseline; it asks nothing of the steps */
    control.step_tolerance = 1e-2;
    lw_fit_outcome outcome = {0};
    for (size_t r = 0; r < repeats; r++) {
        double from = bench_now();
        memcpy(p, p0, n_par * sizeof *p);
        lw_model_windows(&model, p, 20);
        for (size_t i = 0; i < n; i++)
            model.weight[i] = 1 / (scan.intensity[i] > 1 ? scan.intensity[i] : 1);
        model.weighed = false;
        if (lw_least_squares(&engine, &problem, &control, p, NULL, &outcome, &err) != LW_OK)
            bench_stop(&err);
        seconds[r] = bench_now() - from;
    }
    const double *border = p + lw_model_border(&model);
    printf("{\"rung\": \"%s\", \"points\": %zu, \"lines\": %zu, \"parameters\": %zu, \"seconds\": %.9g, \"chi2\": %.6f, "
           "\"evaluations\": %zu, \"iterations\": %zu, \"converged\": %s, \"axial\": [%.5f, %.5f]}\n",
           model.kernel->rung, n, n_lines, n_par, bench_median(seconds, repeats), outcome.chi2, outcome.evaluations,
           outcome.iterations, outcome.converged ? "true" : "false", soller ? border[n_terms] : 0.0,
           soller ? border[n_terms + 1] : 0.0);
    free(p0);
    free(p);
    free(lower);
    free(seconds);
    free(normal.h);
    free(normal.g);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    free(scan_text);
    free(start);
    free(emission);
    free(terms);
    free(truth);
    free(level);
    return outcome.converged ? 0 : 1;
}
