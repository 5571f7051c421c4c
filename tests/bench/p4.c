/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Benchmark P4: the whole pattern in Fourier space, sample and instrument.
 * usage: bench_p4 FOLDER REPEATS [plain|avx2|avx512]
 * 12 lines of a face-centred cubic cell, ideal Cu K-alpha doublet, 6,000 points from 25 to 150 deg, lognormal
 * spheres, a strain that is the same over every length, anisotropy, 8 background terms. Times the value with
 * chi2, and value with the normal equations of all parameters. Writes what the baseline needs to do the same
 * to FOLDER/pattern.bin (lengths, their step, s of the lines, H of the lines, kinks, parameters),
 * FOLDER/instrument.bin (G of the lines) and FOLDER/curve.bin; prints one JSON line. */
#include "bench.h"
#include "sample/pattern.h"

#include <math.h>

#define POINTS 6000
#define LINES 12
#define TERMS 8
#define DEGREE (3.14159265358979323846 / 180)

static double angle[POINTS], counts[POINTS], background[POINTS], variance[POINTS];

static void write_doubles(const char *folder, const char *name, const double *value, size_t n,
                          const char *how)
{
    char path[4096];
    snprintf(path, sizeof path, "%s/%s", folder, name);
    FILE *file = fopen(path, how);
    if (file == NULL || fwrite(value, sizeof *value, n, file) != n || fclose(file) != 0) {
        perror(path);
        exit(2);
    }
}

/* Twelve lines as broad as crystals of 9 nm make them, with an instrument of 0.05 deg. */
static void set_lines(lw_lines *lines, lw_line *line, lw_profiles *profiles, lw_profile *profile)
{
    static const int hkl[LINES][3] = {{1, 1, 1}, {2, 0, 0}, {2, 2, 0}, {3, 1, 1}, {2, 2, 2}, {4, 0, 0},
                                      {3, 3, 1}, {4, 2, 0}, {4, 2, 2}, {5, 1, 1}, {4, 4, 0}, {5, 3, 1}};
    double wavelength = lw_radiation_wavelength(&lines->radiation);
    for (size_t k = 0; k < LINES; k++) {
        int h = hkl[k][0], m = hkl[k][1], l = hkl[k][2];
        double s = sqrt(h * h + m * m + l * l) / 0.541, at = 2 * asin(s * wavelength / 2) / DEGREE;
        double per = DEGREE * cos(at * DEGREE / 2) / wavelength,
               lorentz = 2 / 3.14159265358979323846 * 0.11 / per;
        line[k] = (lw_line){.reflection = {.h = h, .k = m, .l = l, .d_nm = 1 / s, .two_theta_deg = at},
                            .supported = true,
                            .remark = "",
                            .two_theta = {.value = at},
                            .area = {.value = 300.0 * (double)(1 + k % 4)},
                            .breadth = {.value = 0.12 / per},
                            .nominal_deg = at,
                            .own_lorentz_deg = lorentz};
        profile[k] = (lw_profile){.line = &line[k], .s_per_nm = s, .theta_deg = at / 2};
    }
    *profiles = (lw_profiles){.lines = lines, .n = LINES, .profile = profile};
}

static void check(lw_status status, const lw_error *err)
{
    if (status != LW_OK)
        bench_stop(err);
}

int main(int argc, char **argv)
{
    size_t repeats = argc == 3 || argc == 4 ? strtoul(argv[2], NULL, 10) : 0;
    if (repeats == 0) {
        fprintf(stderr, "usage: bench_p4 FOLDER REPEATS [RUNG]\n");
        return 2;
    }
    lw_error err = LW_ERROR_NONE;
    lw_engine engine;
    lw_engine_begin(&engine);
    engine.cpu = bench_rung(argc == 4 ? argv[3] : "auto");
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    for (size_t i = 0; i < POINTS; i++) {
        angle[i] = 25 + 125.0 * (double)i / POINTS;
        counts[i] = background[i] = variance[i] = 100;
    }
    lw_scan scan = {.n = POINTS, .two_theta_deg = angle, .intensity = counts};
    lw_material material = {.system = LW_CUBIC, .lattice = 'F'};
    lw_line line[LINES];
    lw_profile profile[LINES];
    lw_profiles profiles;
    lw_lines lines = {
        .scan = &scan,
        .material = &material,
        .radiation = {.n = 2, .component = {{0.15405929, 0, 2.0 / 3}, {0.15444274, 0, 1.0 / 3}}},
        .has_instrument = true,
        .instrument = {.value = {[LW_W] = 0.0016, [LW_Z] = 0.02}},
        .shape = "voigt",
        .n = LINES,
        .line = line,
        .n_background = TERMS,
        .background = background,
        .variance = variance};
    lw_arena_begin(&lines.arena, &engine);
    set_lines(&lines, line, &profiles, profile);
    lw_pattern pattern;
    check(lw_pattern_begin(&pattern, &engine, &profiles, NULL, &arena, &err), &err);
    size_t n = pattern.n_parameters, grid = pattern.n_fft;
    double *p = bench_take(n, sizeof *p), *moved = bench_take(n, sizeof *moved),
           *seconds = bench_take(repeats, sizeof *seconds);
    lw_normal normal = {.n = n, .h = bench_take(n * n, sizeof(double)), .g = bench_take(n, sizeof(double))};
    bool *fixed = bench_take(n, sizeof *fixed); /* the baseline's strain is the same in every crystal */
    fixed[LW_PATTERN_VARIATION] = true;
    pattern.fixed = fixed;
    lw_spheres spheres = {9, 0.35};
    lw_pattern_start(&pattern, &spheres, p);
    p[LW_PATTERN_STRAIN] = 4e-6;
    p[LW_PATTERN_ANISOTROPY] = 0.5;

    /* no two evaluations at the same parameters: what does not change from step to step of a fit may be kept,
     * no more */
    double median[2];
    for (int slopes = 0; slopes < 2; slopes++) {
        for (size_t i = 0; i < repeats; i++) {
            memset(normal.h, 0, n * n * sizeof(double));
            memset(normal.g, 0, n * sizeof(double));
            for (size_t j = 0; j < n; j++)
                moved[j] =
                    j == LW_PATTERN_FALL || p[j] == 0 ? p[j] : p[j] * (1 + 1e-4 * (double)(repeats - 1 - i));
            double began = bench_now();
            check(lw_pattern_evaluate(&pattern, moved, slopes == 1, &normal, &err), &err);
            seconds[i] = bench_now() - began;
        }
        median[slopes] = bench_median(seconds, repeats);
    }
    double trace = 0, facts[] = {(double)pattern.n_lengths, pattern.length_step};
    for (size_t i = 0; i < n; i++)
        trace += normal.h[i * n + i] > 0 ? log(normal.h[i * n + i]) : 0;
    write_doubles(argv[1], "pattern.bin", facts, 2, "wb");
    for (size_t k = 0; k < LINES; k++) {
        double own[] = {pattern.line[k].s_start, pattern.line[k].hkl_sum, pattern.line[k].kink};
        write_doubles(argv[1], "pattern.bin", own, 3, "ab");
        double *g = bench_take(2 * pattern.n_lengths, sizeof *g);
        for (size_t j = 0; j < pattern.n_lengths; j++) {
            g[2 * j] = pattern.line[k].g[2 * j] / lw_pattern_lift(&pattern, j);
            g[2 * j + 1] = -pattern.line[k].g[2 * j + 1] / lw_pattern_lift(&pattern, j);
        }
        write_doubles(argv[1], "instrument.bin", g, 2 * pattern.n_lengths, k == 0 ? "wb" : "ab");
        free(g);
    }
    /* the baseline's parameters: inverse size, sigma, strain, anisotropy, fall, then the others */
    double shared[] = {p[LW_PATTERN_INVERSE_SIZE], p[LW_PATTERN_SIGMA], p[LW_PATTERN_STRAIN],
                       p[LW_PATTERN_ANISOTROPY], p[LW_PATTERN_FALL]};
    write_doubles(argv[1], "pattern.bin", shared, 5, "ab");
    write_doubles(argv[1], "pattern.bin", p + lw_pattern_background_row(&pattern),
                  n - lw_pattern_background_row(&pattern), "ab");
    write_doubles(argv[1], "curve.bin", pattern.curve, POINTS, "wb");
    printf("{\"rung\": \"%s\", \"value\": %.9g, \"seconds\": %.9g, \"lengths\": %zu, \"grid\": %zu, "
           "\"parameters\": %zu, \"chi2\": %.9g, "
           "\"log_diagonal\": %.9g}\n",
           pattern.rung->name, median[0], median[1], pattern.n_lengths, grid, n, normal.chi2, trace);
    free(p);
    free(moved);
    free(fixed);
    free(seconds);
    free(normal.h);
    free(normal.g);
    lw_arena_end(&lines.arena);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return 0;
}
