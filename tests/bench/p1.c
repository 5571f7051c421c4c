/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Benchmark P1: the least-squares solve of all lines of a scan at once.
 * usage: bench_p1 CASE REPEATS RUNG   (RUNG: auto, plain, avx2, avx512)
 * reads CASE/scan.txt (2theta, counts), CASE/start.txt (position, area, Gaussian FWHM, Lorentzian FWHM a line),
 * CASE/emission.txt (wavelength nm, width nm, share) and CASE/background.txt (Chebyshev terms); prints one JSON line.
 * Weights are 1/max(counts, 1), the axis is 2theta, no intensity factor and no axial divergence. */
#include "line/model.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* All numbers of a text file. */
static double *read_numbers(const char *folder, const char *name, size_t *n)
{
    char path[4096];
    snprintf(path, sizeof path, "%s/%s", folder, name);
    FILE *file = fopen(path, "r");
    if (file == NULL) {
        perror(path);
        exit(2);
    }
    size_t room = 1024;
    double *value = malloc(room * sizeof *value);
    *n = 0;
    while (value != NULL && fscanf(file, "%lf", &value[*n]) == 1)
        if (++*n == room)
            value = realloc(value, (room *= 2) * sizeof *value);
    fclose(file);
    return value;
}

static int ascending(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static void stop(const lw_error *err)
{
    char text[2000];
    fprintf(stderr, "%s\n", lw_error_text(err, text, sizeof text));
    exit(1);
}

int main(int argc, char **argv)
{
    if (argc < 4) {
        fprintf(stderr, "usage: bench_p1 CASE REPEATS RUNG\n");
        return 2;
    }
    size_t n_scan, n_start, n_emission, n_terms, repeats = strtoul(argv[2], NULL, 10);
    double *scan_text = read_numbers(argv[1], "scan.txt", &n_scan);
    double *start = read_numbers(argv[1], "start.txt", &n_start);
    double *emission = read_numbers(argv[1], "emission.txt", &n_emission);
    double *terms = read_numbers(argv[1], "background.txt", &n_terms);
    static const char *const rungs[] = {"auto", "plain", "avx2", "avx512"};
    lw_error err = LW_ERROR_NONE;
    lw_engine engine;
    lw_engine_begin(&engine);
    for (int i = 0; i < 4; i++)
        if (strcmp(argv[3], rungs[i]) == 0)
            engine.cpu = (lw_cpu)i;
    lw_arena arena;
    lw_arena_begin(&arena, &engine);

    size_t n = n_scan / 2, n_lines = n_start / 4;
    double *angle = lw_arena_take(&arena, n, sizeof *angle, &err), *counts = lw_arena_take(&arena, n, sizeof *counts, &err);
    if (angle == NULL || counts == NULL)
        stop(&err);
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
    model.line = lw_arena_take(&arena, n_lines, sizeof *model.line, &err);
    if (model.line == NULL || lw_model_points(&model, &scan, n_terms, false, NULL, &arena, &err) != LW_OK ||
        lw_model_prepare(&model, &arena, &err) != LW_OK)
        stop(&err);
    size_t n_par = lw_model_parameters(&model);
    double *p0 = lw_arena_take(&arena, n_par, sizeof *p0, &err), *p = lw_arena_take(&arena, n_par, sizeof *p, &err);
    double *lower = lw_arena_take(&arena, n_par, sizeof *lower, &err);
    double *seconds = lw_arena_take(&arena, repeats, sizeof *seconds, &err);
    if (!p0 || !p || !lower || !seconds)
        stop(&err);
    for (size_t i = 0; i < n_par; i++)
        lower[i] = -INFINITY;
    for (size_t k = 0; k < n_lines; k++) {
        double *own = p0 + lw_model_row(&model, k), *low = lower + lw_model_row(&model, k);
        memcpy(own, start + 4 * k, 4 * sizeof *own);
        own[2] *= own[2]; /* the parameter is the square */
        low[2] = low[3] = 0;
        model.line[k].nominal_deg = own[0];
    }
    memcpy(p0 + lw_model_border(&model), terms, n_terms * sizeof *p0);
    lw_problem problem = {.n = n_par, .lower = lower, .evaluate = lw_model_evaluate, .user = &model};
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-9; /* as the baseline; it asks nothing of the steps */
    control.step_tolerance = 1e-2;
    lw_fit_outcome outcome = {0};
    for (size_t r = 0; r < repeats; r++) {
        double from = now();
        memcpy(p, p0, n_par * sizeof *p);
        lw_model_windows(&model, p, 20);
        for (size_t i = 0; i < n; i++)
            model.weight[i] = 1 / (scan.intensity[i] > 1 ? scan.intensity[i] : 1);
        model.weighed = false;
        if (lw_least_squares(&engine, &problem, &control, p, NULL, &outcome, &err) != LW_OK)
            stop(&err);
        seconds[r] = now() - from;
    }
    qsort(seconds, repeats, sizeof *seconds, ascending);
    printf("{\"program\": \"engine\", \"rung\": \"%s\", \"points\": %zu, \"parameters\": %zu, \"seconds\": %.9g, "
           "\"chi2\": %.6f, \"evaluations\": %zu, \"iterations\": %zu, \"converged\": %s}\n",
           model.kernel->rung, n, n_par, seconds[repeats / 2], outcome.chi2, outcome.evaluations, outcome.iterations,
           outcome.converged ? "true" : "false");
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    free(scan_text);
    free(start);
    free(emission);
    free(terms);
    return outcome.converged ? 0 : 1;
}
