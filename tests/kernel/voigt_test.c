/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Voigt kernel: the scalar twin against a 120-digit table, every rung against the same table and
 * against the twin over a wide grid, against libcerf where it is installed, and the ragged ends. */
#include "check.h"
#include "kernel/voigt_table.h"
#include "numeric/voigt.h"

#include <stdlib.h>

#ifdef LW_HAVE_CERF
#include <cerf.h>
#endif

#define COUNT(array) (sizeof(array) / sizeof(*(array)))
#define MOST 1201

static const double LN2 = 0.69314718055994530942;

static const lw_voigt_kernel *rungs[3];
static int n_rungs;

/* Arrays for n <= MOST points with guards of 16 around each. */
typedef struct sums_room {
    double room[6][MOST + 32];
} sums_room;

static const double GUARD = -7.25e77;

static lw_voigt_sums room_sums(sums_room *r)
{
    for (int a = 0; a < 6; a++)
        for (size_t i = 0; i < MOST + 32; i++)
            r->room[a][i] = GUARD;
    return (lw_voigt_sums){r->room[0] + 16,
                           r->room[1] + 16,
                           r->room[2] + 16,
                           r->room[3] + 16,
                           {r->room[4] + 16, r->room[5] + 16}};
}

/* Largest |V| and slopes over the line: value at the centre, and slopes' maxima on a fine grid. */
static void largest(double g2, double l, double peak[4])
{
    double width = sqrt(g2) + l;
    for (int q = 0; q < 4; q++)
        peak[q] = 0;
    for (int i = 0; i <= 200; i++) {
        double d[4];
        lw_voigt_derivatives(i * width / 100, g2, l, d);
        for (int q = 0; q < 4; q++)
            peak[q] = fmax(peak[q], fabs(d[q]));
    }
}

static void test_faddeeva(void)
{
    double worst = 0;
    for (size_t i = 0; i < COUNT(faddeeva_table); i++) {
        const double *t = faddeeva_table[i];
        double re, im;
        lw_faddeeva(t[0], t[1], &re, &im);
        double off = hypot(re - t[2], im - t[3]) / hypot(t[2], t[3]);
        worst = fmax(worst, off);
        CHECK_NEAR(off, 0, 1e-13);
        lw_faddeeva(-t[0], t[1], &re, &im);
        CHECK_NEAR(hypot(re - t[2], im + t[3]) / hypot(t[2], t[3]), 0, 1e-13);
    }
    printf("faddeeva, against 120 digits: %.1e of |w|\n", worst);
}

static void test_scalar_table(void)
{
    double worst[4] = {0}, tail = 0;
    for (size_t i = 0; i < COUNT(voigt_table); i++) {
        const double *t = voigt_table[i];
        double d[4], peak[4];
        if (t[1] == 0 && t[2] == 0)
            continue;
        largest(t[1], t[2], peak);
        lw_voigt_derivatives(t[0], t[1], t[2], d);
        for (int q = 0; q < 4; q++) {
            double off = fabs(d[q] - t[3 + q]) / peak[q];
            worst[q] = fmax(worst[q], off);
            CHECK_NEAR(off, 0, q == 3 ? 1e-11 : 1e-12);
        }
        CHECK_NEAR((lw_voigt(t[0], sqrt(t[1]), t[2]) - t[3]) / peak[0], 0, 1e-14);
        if (t[2] > 0) /* a Lorentzian tail is right to its own digits */
            tail = fmax(tail, fabs(lw_voigt(t[0], sqrt(t[1]), t[2]) / t[3] - 1));
    }
    printf("scalar, against 120 digits, of the largest: %.1e %.1e %.1e %.1e; value relative %.1e\n", worst[0],
           worst[1], worst[2], worst[3], tail);
}

static void test_rung_table(const lw_voigt_kernel *kernel)
{
    static sums_room r;
    double worst[4] = {0};
    for (size_t i = 0; i < COUNT(voigt_table); i++) {
        const double *t = voigt_table[i];
        double peak[4];
        largest(t[1], t[2], peak);
        lw_voigt_sums out = room_sums(&r);
        lw_voigt_node node = {.weight = 1};
        kernel->sum(1, &t[0], &node, 1, t[1], t[2], 0, &out);
        double got[4] = {out.value[0], -out.d_position[0], out.d_lorentz[0], out.d_variance[0]};
        for (int q = 0; q < 4; q++) {
            double off = fabs(got[q] - t[3 + q]) / peak[q];
            worst[q] = fmax(worst[q], off);
            CHECK_NEAR(off, 0, q == 0 ? 1e-12 : 1e-10);
        }
    }
    printf("%s, against 120 digits, of the largest: %.1e %.1e %.1e %.1e\n", kernel->rung, worst[0], worst[1],
           worst[2], worst[3]);
}

/* Several nodes, all derivatives, over |x| <= 200, against sums of the scalar twin. */
static void test_rung_grid(const lw_voigt_kernel *kernel)
{
    static const double variances[] = {0, 1e-30, 1e-14, 1e-9, 1e-6, 1e-4, 0.0025, 0.09, 1, 7};
    static const double lorentz[] = {0, 1e-8, 1e-5, 1e-3, 0.02, 0.3, 1, 10, 100};
    static const lw_voigt_node nodes[] = {
        {.offset = 0, .weight = 0.6, .d_weight = {0.3, -2}, .d_offset = {-0.7, 0.1}},
        {.offset = 0.013,
         .weight = 0.3,
         .lorentz = 1e-4,
         .offset_slope = 0.0025,
         .lorentz_slope = 0.001,
         .d_weight = {-0.3, 1},
         .d_offset = {0.2, 0.5}},
        {.offset = -0.21,
         .weight = 0.1,
         .lorentz = 0.01,
         .offset_slope = -0.01,
         .lorentz_slope = -0.02,
         .d_weight = {0, 1},
         .d_offset = {0.4, 0.01}}};
    static sums_room r, only;
    static double x[MOST];
    double worst[6] = {0}, worst_value = 0;
    for (int i = 0; i < MOST; i++) { /* dense at the centre, to +-200 */
        double t = (i - MOST / 2) / (double)(MOST / 2);
        x[i] = copysign(200 * pow(fabs(t), 4) + 0.05 * fabs(t), t);
    }
    for (size_t a = 0; a < COUNT(variances); a++)
        for (size_t b = 0; b < COUNT(lorentz); b++) {
            double g2 = variances[a], l = lorentz[b], most[6] = {0}, off[6] = {0}, off_value = 0;
            /* the first node takes no width of its own: it may not vanish altogether */
            if (sqrt(g2) + l < 1e-7)
                continue;
            lw_voigt_sums out = room_sums(&r), alone = room_sums(&only);
            kernel->sum(MOST, x, nodes, COUNT(nodes), g2, l, 0, &out);
            kernel->sum(MOST, x, nodes, COUNT(nodes), g2, l, 1, &alone);
            for (int i = 0; i < MOST; i++) {
                double want[6] = {0}, d[4];
                for (size_t j = 0; j < COUNT(nodes); j++) {
                    const lw_voigt_node *node = &nodes[j];
                    lw_voigt_derivatives(x[i] - node->offset, g2, l + node->lorentz, d);
                    want[0] += node->weight * d[0];
                    want[1] += node->weight * (-d[1] * (1 + node->offset_slope) + d[2] * node->lorentz_slope);
                    want[2] += node->weight * d[3];
                    want[3] += node->weight * d[2];
                    for (int k = 0; k < 2; k++)
                        want[4 + k] += node->d_weight[k] * d[0] - node->weight * d[1] * node->d_offset[k];
                }
                double got[6] = {out.value[i],     out.d_position[i], out.d_variance[i],
                                 out.d_lorentz[i], out.d_shape[0][i], out.d_shape[1][i]};
                for (int q = 0; q < 6; q++) {
                    most[q] = fmax(most[q], fabs(want[q]));
                    off[q] = fmax(off[q], fabs(got[q] - want[q]));
                    if (!(fabs(got[q]) < 1e300))
                        off[q] = INFINITY;
                }
                off_value = fmax(off_value, fabs(alone.value[i] - out.value[i]));
            }
            for (int q = 0; q < 6; q++) {
                worst[q] = fmax(worst[q], off[q] / most[q]);
                CHECK_NEAR(off[q] / most[q], 0, q == 0 ? 1e-12 : 1e-10);
            }
            worst_value = fmax(worst_value, off_value / most[0]);
            CHECK_NEAR(off_value / most[0], 0, 1e-15);
            CHECK(alone.d_position[0] == GUARD && alone.d_variance[3] == GUARD &&
                  alone.d_shape[0][5] == GUARD);
        }
    printf("%s, against the twin: value %.1e position %.1e variance %.1e lorentz %.1e shapes %.1e %.1e\n",
           kernel->rung, worst[0], worst[1], worst[2], worst[3], worst[4], worst[5]);
}

/* Every length up to three chunks: the same numbers as one by one, and nothing beyond n is touched. */
static void test_ragged(const lw_voigt_kernel *kernel)
{
    static sums_room r;
    for (size_t n = 0; n <= 26; n++) {
        double *x = malloc((n ? n : 1) * sizeof *x); /* exact size: a reader beyond it is caught by ASan */
        if (x == NULL)
            abort();
        for (size_t i = 0; i < n; i++)
            x[i] = -0.4 + 0.037 * (double)i;
        lw_voigt_node node[60];
        for (int j = 0; j < 60; j++)
            node[j] = (lw_voigt_node){.offset = 0.002 * j, .weight = 1 / 60.0, .lorentz = 1e-4 * j};
        lw_voigt_sums out = room_sums(&r);
        kernel->sum(n, x, node, 60, 0.01, 0.02, 0, &out);
        for (int a = 0; a < 6; a++)
            for (size_t i = 0; i < MOST + 32; i++)
                if (i < 16 || i >= 16 + n)
                    if (r.room[a][i] != GUARD)
                        CHECK(r.room[a][i] == GUARD); /* one count each would drown the others */
        for (size_t i = 0; i < n; i++) {
            double want = 0, d[4];
            for (int j = 0; j < 60; j++) {
                lw_voigt_derivatives(x[i] - node[j].offset, 0.01, 0.02 + node[j].lorentz, d);
                want += node[j].weight * d[0];
            }
            CHECK_RELATIVE(out.value[i], want, 1e-11);
        }
        out.d_shape[0] = out.d_shape[1] = NULL;
        kernel->sum(n, x, node, 0, 0.01, 0.02, 0, &out);
        for (size_t i = 0; i < n; i++)
            CHECK(out.value[i] == 0 && out.d_position[i] == 0 && out.d_variance[i] == 0);
        free(x);
    }
    CHECK(1);
}

/* The area by the trapezoidal sum, which is exact to exp(-2 pi (gamma + ...)/step) for a Voigt, plus the
 * Lorentzian tail in closed form to the order 1/x^3: unit area is what every intensity rests on. */
static void test_area(const lw_voigt_kernel *kernel)
{
    static sums_room r;
    static double x[MOST];
    for (int i = 0; i < MOST; i++)
        x[i] = (i - MOST / 2) * 0.01;
    lw_voigt_sums out = room_sums(&r);
    lw_voigt_node node = {.weight = 1};
    kernel->sum(MOST, x, &node, 1, 0.0036, 0.05, 1, &out);
    double area = 0, edge = (MOST / 2 + 0.5) * 0.01, g = 0.025, variance = 0.0036 / (8 * LN2);
    for (int i = 0; i < MOST; i++)
        area += 0.01 * out.value[i];
    area += 2 * (atan(g / edge) + g * (variance) / (edge * edge * edge)) / 3.14159265358979323846;
    CHECK_NEAR(area, 1, 1e-7);
}

#ifdef LW_HAVE_CERF
static void test_cerf(const lw_voigt_kernel *kernel)
{
    static sums_room r;
    static double x[MOST];
    double worst = 0;
    for (int i = 0; i < MOST; i++) {
        double t = (i - MOST / 2) / (double)(MOST / 2);
        x[i] = copysign(200 * pow(fabs(t), 3), t);
    }
    for (double y = 1e-8; y <= 101; y *= 10) {
        /* v = 1: z = x + iy */
        lw_voigt_sums out = room_sums(&r);
        lw_voigt_node node = {.weight = 1};
        kernel->sum(MOST, x, &node, 1, 4 * LN2, 2 * y, 1, &out);
        double peak = creal(w_of_z(I * y));
        for (int i = 0; i < MOST; i++) {
            double off = fabs(out.value[i] * 1.7724538509055160273 - creal(w_of_z(x[i] + I * y))) / peak;
            worst = fmax(worst, off);
            CHECK_NEAR(off, 0, 1e-12);
        }
    }
    printf("%s, against libcerf: %.1e of the peak\n", kernel->rung, worst);
}
#endif

int main(void)
{
    static const lw_cpu asked[] = {LW_CPU_PLAIN, LW_CPU_AVX2, LW_CPU_AVX512};
    for (int i = 0; i < 3; i++) {
        const lw_voigt_kernel *kernel = lw_voigt_kernel_for(asked[i]);
        if (n_rungs == 0 || rungs[n_rungs - 1] != kernel)
            rungs[n_rungs++] = kernel;
        else
            printf("skipped: this processor lacks a rung\n");
    }
    CHECK(strcmp(rungs[0]->rung, "plain") == 0);
    CHECK(lw_voigt_kernel_for(LW_CPU_AUTO) == rungs[n_rungs - 1]);
    test_faddeeva();
    test_scalar_table();
    for (int i = 0; i < n_rungs; i++) {
        test_rung_table(rungs[i]);
        test_rung_grid(rungs[i]);
        test_ragged(rungs[i]);
        test_area(rungs[i]);
#ifdef LW_HAVE_CERF
        test_cerf(rungs[i]);
#endif
    }
#ifndef LW_HAVE_CERF
    printf("skipped: libcerf is not installed, no comparison with it\n");
#endif
    return lw_checks_end();
}
