/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Bench A through the whole chain: a scan of lognormal spheres (median 10 nm, sigma 0.3) with Gaussian strain 0.002, fcc
 * a = 0.3615 nm, Voigt instrument, by Fourier synthesis; lines fitted, instrument taken out, methods run. The truth is in
 * closed form (Krill & Birringer 1998 Philos. Mag. A 77, 621; Stokes & Wilson 1944 Proc. Phys. Soc. 56, 174): L_A
 * 8.348818 nm, L_V 10.276945 nm, strain 0.002. So are the wrong answers that straight lines through the two exact breadths
 * of 111 and 222 give (arithmetic on breadths by mpmath): linear D 11.135152 nm, e 0.0012646756; quadratic 10.251055,
 * 0.0030823533; Halder-Wagner 10.286152, 0.0022856216. */
#include "kernel/deconvolution_made.h"
#include "physics/size_distribution.h"
#include "sample/method.h"

#include <string.h>

static const double L_A = 8.348818107945762, L_V = 10.27694483217747, STRAIN = 0.002, RMS = 0.79788456080286535588;

static double bench_a(double length, double s, const void *user)
{
    const lw_spheres spheres = {10, 0.3};
    (void)user;
    return lw_spheres_coefficient(&spheres, length, NULL) *
           exp(-2 * M_PI * M_PI * STRAIN * STRAIN * s * s * length * length);
}

static const lw_node *at(const lw_node *node, const char *a, const char *b)
{
    node = node != NULL ? lw_node_get(node, a) : NULL;
    return b != NULL && node != NULL ? lw_node_get(node, b) : node;
}

static lw_quantity quantity(const lw_node *node, const char *name)
{
    const lw_node *found = at(node, name, NULL);
    return found != NULL && found->kind == LW_NODE_QUANTITY ? found->quantity : lw_quantity_of(NAN, NAN, "");
}

/* Results of a way and methods; NULL if something failed, which is told. */
static lw_node *results(made *m, const char *way, const char *const *methods, size_t n, lw_random *random, lw_arena *arena)
{
    lw_error err = LW_ERROR_NONE;
    char text[600];
    lw_deconvolve_options options = lw_deconvolve_defaults();
    options.method = made_method(way);
    options.completion = 2; /* by the physical shape */
    lw_scan *scan = NULL;
    lw_lines *lines = NULL;
    lw_profiles *profiles = NULL;
    lw_node *tree = lw_tree_new(arena, &err);
    lw_status status = made_deconvolve(m, random, &m->instrument, &options, &scan, &lines, &profiles, &err);
    if (status == LW_OK)
        status = lw_separate(&m->engine, profiles, methods, n, tree, &err);
    if (status != LW_OK)
        fprintf(stderr, "%s: %s\n", way, lw_error_text(&err, text, sizeof text));
    CHECK(status == LW_OK);
    made_free(scan, lines, profiles);
    return status == LW_OK ? tree : NULL;
}

static const lw_node *direction(const lw_node *tree, const char *hkl)
{
    const lw_node *list = at(lw_node_get(tree, "methods"), "williamson_hall", "directions");
    for (const lw_node *one = list != NULL ? list->first : NULL; one != NULL; one = one->next)
        if (strcmp(lw_node_text(one, "direction", ""), hkl) == 0)
            return one;
    return NULL;
}

/* Without noise: right where the method is right, wrong as stated where it is wrong. */
static void exact(void)
{
    static const char *const names[] = {"williamson_hall", "warren_averbach", "variance"};
    made m;
    made_begin(&m, 0.3615, 0.05, 0.03);
    made_scan(&m, 36, 120, 0.03, 1e6, 100, 1e-7, bench_a, NULL);
    lw_arena arena;
    lw_arena_begin(&arena, &m.engine);
    lw_node *tree = results(&m, "physical", names, 3, NULL, &arena);
    /* the leading form of all lines is that of the direction; two orders leave no choice */
    const lw_node *one = tree != NULL ? direction(tree, "111") : NULL;
    const lw_node *whole = tree != NULL ? at(tree, "methods", "williamson_hall") : NULL;
    CHECK(one != NULL && whole != NULL);
    const char *form = whole != NULL ? lw_node_text(whole, "form", "") : "";
    lw_quantity D = quantity(one, "size_volume"), e = quantity(one, "strain_apparent");
    if (strcmp(form, "gaussian") == 0) {
        CHECK_RELATIVE(D.value, 10.251055, 1e-4);
        CHECK_RELATIVE(e.value, 0.0030823533, 1e-4);
    } else if (strcmp(form, "lorentzian") == 0) {
        CHECK_RELATIVE(D.value, 11.135152, 1e-4);
        CHECK_RELATIVE(e.value, 0.0012646756, 1e-4);
    } else { /* the Voigt of the answer has the two breadths */
        CHECK(strcmp(form, "mixed") == 0);
    }
    CHECK(fabs(D.value - L_V) < 2 * D.u && fabs(RMS * e.value - STRAIN) < 2 * RMS * e.u);
    const lw_node *columns = tree != NULL ? at(tree, "methods", "warren_averbach") : NULL;
    CHECK_RELATIVE(quantity(columns, "size_area").value, L_A, 5e-3); /* range of the slope: see column_methods.c */
    CHECK_RELATIVE(quantity(columns, "size_volume").value, L_V, 5e-3);
    CHECK_RELATIVE(quantity(columns, "strain_rms").value, STRAIN, 1e-3);
    lw_arena_end(&arena);
    made_end(&m);
}

/* With counting noise: whatever a method tells of size and strain, the truth is within 2 u in 19 of 20, over RUNS seeds.
 * By chance fewer than 0.95 RUNS - 3 sqrt(0.95 0.05 RUNS) inside happens once in some hundred. */
#define RUNS 24
static void noisy(void)
{
    static const char *const names[] = {"williamson_hall", "halder_wagner", "double_voigt", "warren_averbach", "variance"};
    static const char *const fields[] = {"size_volume", "size_area", "strain_rms"};
    const double truth[3] = {L_V, L_A, STRAIN};
    int inside[5][3] = {{0}}, told[5][3] = {{0}};
    made m;
    made_begin(&m, 0.3615, 0.05, 0.03);
    made_scan(&m, 36, 120, 0.03, 2e4, 100, 0, bench_a, NULL);
    lw_random random;
    lw_random_begin(&random, 20261201, 0);
    for (int run = 0; run < RUNS; run++) {
        lw_arena arena;
        lw_arena_begin(&arena, &m.engine);
        lw_node *tree = results(&m, "stokes", names, 5, &random, &arena);
        for (int i = 0; tree != NULL && i < 5; i++)
            for (int j = 0; j < 3; j++) {
                lw_quantity q = quantity(at(tree, "methods", names[i]), fields[j]);
                if (!isfinite(q.value) || q.kind != LW_VALUE)
                    continue;
                told[i][j]++;
                inside[i][j] += fabs(q.value - truth[j]) < 2 * q.u;
            }
        lw_arena_end(&arena);
    }
    for (int i = 0; i < 5; i++)
        for (int j = 0; j < 3; j++)
            if (told[i][j] > 0) {
                printf("%-16s %-12s %d of %d within 2 u\n", names[i], fields[j], inside[i][j], told[i][j]);
                CHECK(inside[i][j] >= 0.95 * told[i][j] - 3 * sqrt(0.95 * 0.05 * told[i][j]));
            }
    made_end(&m);
}

int main(void)
{
    exact();
    noisy();
    return lw_checks_end();
}
