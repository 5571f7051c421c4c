/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Double Voigt on exact Voigts: breadths from known size and strain parts must give them back, with L_V = exp(k^2) erfc(k)
 * / beta_SG, k = beta_SL/(sqrt(pi) beta_SG) (Langford 1978 J. Appl. Cryst. 11, 10), L_A = 1/(2 beta_SL) and <eps^2(L)> =
 * [beta_DG^2/(2 pi) + beta_DL/(pi^2 L)]/s0^2 (Balzar & Ledbetter 1993 J. Appl. Cryst. 26, 97). */
#include "check.h"
#include "published/by_hand.h"

#include "numeric/random.h"
#include "physics/size_distribution.h"
#include "physics/strain.h"
#include "sample/voigt_image.h"

#define CU 0.15405929
#define PI 3.14159265358979323846
static const lw_cell NICKEL = {.a = 0.35238, .b = 0.35238, .c = 0.35238, .alpha = 90, .beta = 90, .gamma = 90};
static by_hand h;

static const lw_profiles *make(double sl, double dl, double sg, double dg, double u, unsigned seed)
{
    static const int hkl[6][3] = {{1, 1, 1}, {2, 0, 0}, {2, 2, 0}, {3, 1, 1}, {2, 2, 2}, {4, 0, 0}};
    lw_random random;
    lw_random_begin(&random, seed, 0);
    hand_begin(&h, LW_CUBIC, NICKEL, CU);
    for (int i = 0; i < 6; i++) {
        double s2 = (hkl[i][0] * hkl[i][0] + hkl[i][1] * hkl[i][1] + hkl[i][2] * hkl[i][2]) / (0.35238 * 0.35238);
        double gauss = sqrt(sg * sg + dg * dg * s2), lorentz = sl + dl * s2;
        if (seed > 0) {
            gauss += u * lw_random_normal(&random);
            lorentz += u * lw_random_normal(&random);
        }
        hand_line(&h, hkl[i][0], hkl[i][1], hkl[i][2], sqrt(s2), gauss + lorentz, gauss, lorentz, u);
    }
    return hand_end(&h, 0);
}

static const lw_node *run(lw_engine *engine, const lw_profiles *profiles, lw_arena *arena)
{
    lw_error err = LW_ERROR_NONE;
    lw_node *tree = lw_tree_new(arena, &err);
    CHECK(lw_method_run(engine, lw_method_named("double_voigt"), profiles, NULL, tree, &err) == LW_OK);
    return tree;
}

/* What a Voigt makes of lines: of a Voigt nothing; of lognormal spheres (median 10 nm, sigma 0.3) and of spheres with
 * strain (size_volume 24 nm, sigma 0.3, at s = 9.4 nm^-1 strain 0.0044 correlated over 5 nm) what a fit by SciPy 1.10
 * (least_squares, voigt_profile) makes of the same points with the same weights. */
static void images(void)
{
    enum { N = 4001 };
    static double A[N];
    static const double parts[3][2] = {{0.05, 0.04}, {0.05, 0}, {0, 0.06}}; /* Lorentzian, Gaussian */
    for (int kind = 0; kind < 3; kind++) {
        for (int i = 0; i < N; i++)
            A[i] = exp(-2 * parts[kind][0] * 0.05 * i - PI * pow(parts[kind][1] * 0.05 * i, 2));
        CHECK_NEAR(lw_voigt_image(N, A, 0.05, 0.05), 1, 1e-4);
    }
    lw_spheres spheres = {10, 0.3};
    for (int i = 0; i < N; i++)
        A[i] = i == 0 ? 1 : lw_spheres_coefficient(&spheres, 0.015 * i, NULL);
    CHECK_NEAR(lw_voigt_image(N, A, 0.015, 0.02), 0.9927813873, 2e-5);
    CHECK_NEAR(lw_voigt_image(N, A, 0.015, 0.1), 0.9922876515, 2e-5);
    spheres.median_nm = 32 * exp(-3.5 * 0.09);
    double strain[2] = {0.0044 * 0.0044, log(5)};
    for (int i = 0; i < N; i++)
        A[i] = i == 0 ? 1
                      : lw_spheres_coefficient(&spheres, 0.02 * i, NULL) *
                            exp(-2 * PI * PI * 9.4 * 9.4 * lw_strain_correlated.displacement(strain, 0.02 * i, NULL));
    CHECK_NEAR(lw_voigt_image(N, A, 0.02, 0.05), 1.0514650962, 5e-5);
}

int main(void)
{
    images();
    lw_engine engine;
    lw_engine_begin(&engine);
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    double sl = 0.04, dl = 2e-4, sg = 0.03, dg = 6e-3;
    const lw_node *tree = run(&engine, make(sl, dl, sg, dg, 1e-5, 0), &arena);
    double k = sl / (sqrt(PI) * sg), volume = exp(k * k) * erfc(k) / sg;
    CHECK_RELATIVE(hand_quantity(tree, "size_volume", NULL, NULL).value, volume, 1e-6);
    CHECK_RELATIVE(hand_quantity(tree, "size_area", NULL, NULL).value, 12.5, 1e-6);
    CHECK_RELATIVE(hand_quantity(tree, "strain_rms", NULL, NULL).value,
                   sqrt(dg * dg / (2 * PI) + dl / (PI * PI * volume / 2)), 1e-6);
    /* mpmath: beta_SL = 0.05, beta_SG = 0.04 nm^-1 */
    CHECK_RELATIVE(hand_quantity(run(&engine, make(0.05, dl, 0.04, dg, 1e-5, 0), &arena), "size_volume", NULL, NULL).value,
                   13.097097902967, 1e-6);
    CHECK(lw_node_get(tree, "strain_rms_at")->n > 5);
    for (const lw_node *row = lw_node_get(tree, "strain_rms_at")->first; row != NULL; row = row->next)
        CHECK_RELATIVE(lw_node_number(row, "value", 0),
                       sqrt(dg * dg / (2 * PI) + dl / (PI * PI * lw_node_number(row, "length", 0))), 1e-6);
    CHECK_NEAR(lw_node_number(lw_node_get(tree, "statistics"), "chi2", 1), 0, 1e-6);

    /* a Lorentzian of exponential columns: L_V = 2 L_A */
    tree = run(&engine, make(0.05, 1e-4, 0, 5e-3, 1e-6, 0), &arena);
    CHECK_RELATIVE(hand_quantity(tree, "size_area", NULL, NULL).value, 10, 1e-6);
    CHECK_RELATIVE(hand_quantity(tree, "size_volume", NULL, NULL).value, 20, 1e-4);

    /* no size: limits, not numbers; no strain: the same */
    tree = run(&engine, make(0, 2e-4, 0, 6e-3, 2e-4, 0), &arena);
    CHECK(hand_quantity(tree, "size_area", NULL, NULL).kind == LW_LOWER_LIMIT);
    tree = run(&engine, make(sl, 0, sg, 0, 2e-4, 0), &arena);
    CHECK(hand_quantity(tree, "strain_rms", NULL, NULL).kind == LW_UPPER_LIMIT);

    /* seeded noise: scatter as the method says, 95 % intervals that hold the truth */
    double truth[3] = {volume, 12.5, sqrt(dg * dg / (2 * PI) + dl / (PI * PI * volume / 2))}, sum2[3] = {0}, u_sum[3] = {0};
    int inside[3] = {0}, runs = 400;
    static const char *const names[] = {"size_volume", "size_area", "strain_rms"};
    for (int seed = 1; seed <= runs; seed++) {
        tree = run(&engine, make(sl, dl, sg, dg, 1e-4, (unsigned)seed), &arena);
        for (int j = 0; j < 3; j++) {
            lw_quantity q = hand_quantity(tree, names[j], NULL, NULL);
            /* these lines are Voigts, so the part of u for lines that are none stands apart */
            double part = hand_quantity(tree, "model_difference", names[j], NULL).value, u = sqrt(q.u * q.u - part * part);
            sum2[j] += pow(q.value - truth[j], 2);
            u_sum[j] += u;
            inside[j] += fabs(q.value - truth[j]) < 1.96 * u;
        }
    }
    for (int j = 0; j < 3; j++) {
        /* u is enlarged by scatter, so that it is rather too large; the strain's is for a fixed length, while half the size
         * found moves against it */
        double scatter = sqrt(sum2[j] / runs), u = u_sum[j] / runs;
        CHECK(scatter < 1.05 * u && scatter > 0.7 * u);
        CHECK(inside[j] > 0.93 * runs);
    }
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
