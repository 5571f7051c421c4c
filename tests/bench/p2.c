/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Benchmark P2: the quotient of the transforms of a measured line and of the instrument, with the Poisson noise of both
 * propagated to every coefficient, cut where the noise wins, and transformed back.
 * usage: bench_p2 POINTS REPEATS few|many     (road of the transforms, see numeric/fft.h)
 * prints one JSON line: seconds of the first pair of the process (plan included), median seconds of the later ones.
 * Of counts h with Poisson noise, E|dH_k|^2 = sum h and E(dH_k)^2 = H_2k. Source of the quotient: Stokes (1948)
 * Proc. Phys. Soc. London 61, 382. */
#include "base/arena.h"
#include "bench.h"
#include "numeric/fft.h"

#include <math.h>

#define BACKGROUND 100.0
#define BATCH 20

typedef struct pair {
    size_t n, kept;
    double *h, *g, *big_h, *big_g, *f, *var_re, *var_im, *spectrum, *profile;
} pair;

static void quotient(lw_fft *plan, pair *p)
{
    size_t n = p->n, quarter = n / 4;
    /* a constant background is in harmonic 0 alone, so that one transform gives signal and noise */
    lw_fft_forward(plan, p->h, p->big_h);
    lw_fft_forward(plan, p->g, p->big_g);
    double all_h = p->big_h[0], all_g = p->big_g[0], flat = BACKGROUND * (double)n;
    p->kept = 0;
    for (size_t k = 0; k < quarter; k++) {
        double h_re = p->big_h[2 * k] - (k == 0 ? flat : 0), h_im = p->big_h[2 * k + 1];
        double g_re = p->big_g[2 * k] - (k == 0 ? flat : 0), g_im = p->big_g[2 * k + 1];
        double size = 1 / (g_re * g_re + g_im * g_im), c_re = g_re * size, c_im = -g_im * size;
        double f_re = h_re * c_re - h_im * c_im, f_im = h_re * c_im + h_im * c_re;
        double f2_re = f_re * f_re - f_im * f_im, f2_im = 2 * f_re * f_im;
        double c2_re = c_re * c_re - c_im * c_im, c2_im = 2 * c_re * c_im;
        const double *v_h = p->big_h + 4 * k, *v_g = p->big_g + 4 * k;
        double s_re = v_h[0] + f2_re * v_g[0] - f2_im * v_g[1], s_im = v_h[1] + f2_re * v_g[1] + f2_im * v_g[0];
        double sum = size * (all_h + (f_re * f_re + f_im * f_im) * all_g), difference = c2_re * s_re - c2_im * s_im;
        p->f[2 * k] = f_re;
        p->f[2 * k + 1] = f_im;
        p->var_re[k] = 0.5 * (sum + difference);
        p->var_im[k] = 0.5 * (sum - difference);
        if (p->kept == k && f_re * f_re + f_im * f_im > 4 * sum)
            p->kept = k + 1;
    }
    memcpy(p->spectrum, p->f, 2 * p->kept * sizeof(double));
    memset(p->spectrum + 2 * p->kept, 0, (n + 2 - 2 * p->kept) * sizeof(double));
    lw_fft_back(plan, p->spectrum, p->profile);
}

int main(int argc, char **argv)
{
    size_t n = argc == 4 ? strtoul(argv[1], NULL, 10) : 0, repeats = argc == 4 ? strtoul(argv[2], NULL, 10) : 0;
    if (n < 16 || repeats == 0) {
        fprintf(stderr, "usage: bench_p2 POINTS REPEATS few|many\n");
        return 2;
    }
    lw_engine engine;
    lw_engine_begin(&engine);
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    lw_error err = LW_ERROR_NONE;
    pair p = {.n = n};
    double **array[] = {&p.h, &p.g, &p.big_h, &p.big_g, &p.f, &p.var_re, &p.var_im, &p.spectrum, &p.profile};
    for (size_t i = 0; i < sizeof array / sizeof *array; i++)
        if ((*array[i] = lw_arena_take(&arena, n + 8, sizeof(double), &err)) == NULL)
            bench_stop(&err);
    for (size_t i = 0; i < n; i++) {
        double x = 0.01 * ((double)i - (double)n / 2);
        p.h[i] = floor(15000 / (1 + x * x / 0.0121) + BACKGROUND + 0.5);
        p.g[i] = floor(25000 / (1 + x * x / 0.0025) + BACKGROUND + 0.5);
    }
    double began = bench_now();
    lw_fft *plan = lw_fft_plan(&engine, n, LW_FFT_REAL, strcmp(argv[3], "many") == 0 ? LW_FFT_MANY : LW_FFT_FEW, &err);
    if (plan == NULL)
        bench_stop(&err);
    quotient(plan, &p);
    double first = bench_now() - began, *seconds = bench_take(repeats, sizeof *seconds);
    for (size_t i = 0; i < repeats; i++) {
        began = bench_now();
        for (int j = 0; j < BATCH; j++)
            quotient(plan, &p);
        seconds[i] = (bench_now() - began) / BATCH;
    }
    double sum = 0, noise = 0;
    for (size_t k = 0; k < p.kept; k++) {
        sum += hypot(p.f[2 * k], p.f[2 * k + 1]);
        noise += p.var_re[k] + p.var_im[k];
    }
    printf("{\"seconds\": %.9g, \"first\": %.9g, \"kept\": %zu, \"sum\": %.9f, \"noise\": %.9e, \"start\": %.9f}\n",
           bench_median(seconds, repeats), first, p.kept, sum, noise, p.profile[0]);
    free(seconds);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return 0;
}
