/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Column-length methods on exact coefficients. Bench A: lognormal spheres (median 10 nm, sigma 0.3) with Gaussian strain
 * 0.002, fcc a = 0.3615 nm: A = A_size exp(-2 pi^2 L^2 eps^2 N/a^2) in closed form (Krill & Birringer 1998; Warren &
 * Averbach 1950), figures by mpmath. Bench D: the same crystals with dislocations (Wilkens 1970) in place of the strain. */
#include "check.h"
#include "published/by_hand.h"

#include "numeric/random.h"
#include "physics/size_distribution.h"
#include "physics/strain.h"
#include "sample/column_lengths.h"
#include "sample/harmonics.h"

#include <stdlib.h>

#define PI 3.14159265358979323846
#define CU 0.15405929
#define A_FCC 0.3615
#define POINTS 120
static const lw_cell FCC = {.a = A_FCC, .b = A_FCC, .c = A_FCC, .alpha = 90, .beta = 90, .gamma = 90};
static by_hand h;
static double length[POINTS], cosine[HAND_MOST][POINTS], u_cosine[HAND_MOST][POINTS], zero[POINTS];

typedef struct line {
    int h, k, l;
} line;

/* Lines with coefficients; noise: u of each coefficient, with seeded errors of that size when seed > 0. */
static const lw_profiles *make(const line *lines, size_t n, double step, const lw_strain_form *strain, const double *p,
                               double noise, unsigned seed)
{
    lw_spheres spheres = {10, 0.3};
    lw_random random;
    lw_random_begin(&random, seed, 0);
    hand_begin(&h, LW_CUBIC, FCC, CU);
    for (size_t i = 0; i < POINTS; i++)
        length[i] = step * (double)i;
    for (size_t k = 0; k < n; k++) {
        double N = lines[k].h * lines[k].h + lines[k].k * lines[k].k + lines[k].l * lines[k].l, s2 = N / (A_FCC * A_FCC);
        lw_profile *profile = hand_line(&h, lines[k].h, lines[k].k, lines[k].l, sqrt(s2), 0.1, 0.05, 0.05, 1e-4);
        for (size_t i = 0; i < POINTS; i++) {
            cosine[k][i] = lw_spheres_coefficient(&spheres, length[i], NULL) *
                           exp(-2 * PI * PI * s2 * strain->displacement(p, length[i], NULL));
            if (seed > 0 && i > 0)
                cosine[k][i] += noise * lw_random_normal(&random);
            u_cosine[k][i] = i > 0 ? noise : 0;
        }
        profile->n_coefficients = profile->truncated_at = POINTS;
        profile->length_nm = length;
        profile->cosine = cosine[k];
        profile->u_cosine = u_cosine[k];
        profile->sine = profile->u_sine = zero;
    }
    hand_end(&h, 0);
    h.profiles.method = "stokes";
    return &h.profiles;
}

static const lw_node *run(lw_engine *engine, const lw_profiles *profiles, const void *options, lw_arena *arena, lw_error *err)
{
    lw_node *tree = lw_tree_new(arena, err);
    *err = LW_ERROR_NONE;
    return lw_method_run(engine, lw_method_named("warren_averbach"), profiles, options, tree, err) == LW_OK ? tree : NULL;
}

static void bench_a(lw_engine *engine)
{
    static const line both[2][2] = {{{1, 1, 1}, {2, 2, 2}}, {{2, 0, 0}, {4, 0, 0}}};
    /* mpmath: A_111, A_222, A_200, A_400 at 1, 5, 10 nm */
    static const double at_1[4] = {0.87896143320355, 0.87419487159576, 0.87843053438691, 0.87208470526990};
    static const double at_10[4] = {0.094603250442032, 0.054922403354555, 0.089056668470876, 0.043131153959235};
    double p[2] = {4e-6, 0};
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    for (int d = 0; d < 2; d++) {
        const lw_profiles *profiles = make(both[d], 2, 0.25, &lw_strain_constant, p, 0, 0);
        for (int k = 0; k < 2; k++) {
            CHECK_NEAR(cosine[k][4], at_1[2 * d + k], 1e-13);
            CHECK_NEAR(cosine[k][40], at_10[2 * d + k], 1e-13);
        }
        lw_orders orders[4];
        CHECK(lw_orders_find(profiles, orders, 4) == 1 && orders[0].n == 2);
        CHECK(strcmp(orders[0].direction, d == 0 ? "111" : "100") == 0);
        lw_harmonics harmonics;
        CHECK(lw_harmonics_separate(profiles, orders, LW_HARMONIC_LOG, 0, &arena, &harmonics, &err) == LW_OK);
        lw_spheres spheres = {10, 0.3};
        for (size_t i = 1; i < harmonics.n; i++) {
            CHECK_NEAR(sqrt(harmonics.square[i]), 0.002, 1e-9);
            CHECK_NEAR(harmonics.size[i], lw_spheres_coefficient(&spheres, length[i], NULL), 1e-12);
        }
        /* the linear form is a first approximation: right at short lengths, too small a strain at long ones */
        lw_harmonics linear;
        CHECK(lw_harmonics_separate(profiles, orders, LW_HARMONIC_LINEAR, 10, &arena, &linear, &err) == LW_OK);
        CHECK_RELATIVE(sqrt(linear.square[1]), 0.002, 2e-3);
        CHECK(linear.square[40] < 0.9 * 4e-6);
    }
    /* size_area 8.348818 from the slope at lengths at which every sphere still counts (below a fifth of the size) */
    const lw_profiles *profiles = make(both[0], 2, 0.02, &lw_strain_constant, p, 0, 0);
    lw_orders orders[1];
    lw_harmonics fine;
    lw_initial_slope slope;
    lw_orders_find(profiles, orders, 1);
    CHECK(lw_harmonics_separate(profiles, orders, LW_HARMONIC_LOG, 0, &arena, &fine, &err) == LW_OK);
    lw_size_coefficients size = {fine.n, 0.02, fine.size, fine.size_covariance};
    double narrow[2] = {0.01, 0.2};
    /* the coefficients end at 2.38 nm: the first idea of the size needs the fall to 0.6, so it is refused by name */
    CHECK(lw_columns_slope(&size, narrow, &arena, &slope, &err) == LW_NOT_SUPPORTED);
    CHECK_CONTAINS(err.message, "before they fall to 0.6");
    err = LW_ERROR_NONE;
    profiles = make(both[0], 2, 0.05, &lw_strain_constant, p, 0, 0);
    lw_orders_find(profiles, orders, 1);
    CHECK(lw_harmonics_separate(profiles, orders, LW_HARMONIC_LOG, 0, &arena, &fine, &err) == LW_OK);
    size = (lw_size_coefficients){fine.n, 0.05, fine.size, fine.size_covariance};
    CHECK(lw_columns_slope(&size, narrow, &arena, &slope, &err) == LW_OK);
    CHECK_RELATIVE(slope.size_area, 8.348818107945762, 1e-6);
    CHECK_NEAR(slope.hook, 0, 1e-7);

    /* the method as called: default range of the slope, the integral, the strain */
    profiles = make(both[0], 2, 0.3, &lw_strain_constant, p, 0, 0);
    const lw_node *tree = run(engine, profiles, NULL, &arena, &err);
    CHECK(tree != NULL);
    CHECK_RELATIVE(hand_quantity(tree, "size_area", NULL, NULL).value, 8.348818, 2e-3);
    CHECK_RELATIVE(hand_quantity(tree, "size_volume", NULL, NULL).value, 10.276945, 2e-3);
    CHECK_NEAR(hand_quantity(tree, "strain_rms", NULL, NULL).value, 0.002, 1e-9);
    CHECK(lw_node_get(tree, "strain_rms_at")->n >= 4);
    for (const lw_node *row = lw_node_get(tree, "strain_rms_at")->first; row != NULL; row = row->next) {
        CHECK_NEAR(lw_node_number(row, "value", 0), 0.002, 1e-9);
        CHECK(lw_node_number(row, "length", 0) >= 4); /* 0.1 between the orders' logarithms: 4.3 nm */
    }
    /* column lengths against the closed density, where it is more than a tenth of its maximum */
    lw_spheres spheres = {10, 0.3};
    double worst = 0, count = 0, most = lw_spheres_columns(&spheres, 8);
    for (const lw_node *row = lw_node_get(tree, "columns")->first; row != NULL; row = row->next) {
        double l = lw_node_number(row, "length", 0), density = lw_node_number(row, "value", -1);
        CHECK(density >= 0);
        count += 0.3 * density;
        if (l > 1)
            worst = fmax(worst, fabs(density - lw_spheres_columns(&spheres, l)) / most);
    }
    CHECK(count < 1 && count > 0.98); /* the columns longer than the last coefficient are counted, not told */
    CHECK(worst < 0.03);
    lw_arena_end(&arena);
}

/* Interpolation: the same with another step for the second order. */
static void other_steps(lw_engine *engine)
{
    static const line both[2] = {{1, 1, 1}, {2, 2, 2}};
    static double other[POINTS];
    double p[2] = {4e-6, 0};
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    make(both, 2, 0.3, &lw_strain_constant, p, 0, 0);
    lw_spheres spheres = {10, 0.3};
    for (size_t i = 0; i < POINTS; i++) {
        other[i] = 0.23 * (double)i;
        cosine[1][i] = lw_spheres_coefficient(&spheres, other[i], NULL) *
                       exp(-2 * PI * PI * 12 / (A_FCC * A_FCC) * 4e-6 * other[i] * other[i]);
    }
    h.profile[1].length_nm = other;
    lw_orders orders[1];
    lw_harmonics harmonics;
    lw_orders_find(&h.profiles, orders, 1);
    CHECK(lw_harmonics_separate(&h.profiles, orders, LW_HARMONIC_LOG, 0, &arena, &harmonics, &err) == LW_OK);
    CHECK_NEAR(harmonics.step_nm, 0.3, 1e-15);
    for (size_t i = 10; i < harmonics.n && 0.3 * (double)i < 15; i++)
        CHECK_NEAR(sqrt(harmonics.square[i]), 0.002, 2e-6);
    lw_arena_end(&arena);
}

/* Bench D: strain of dislocations at every length; three orders test the model. */
static void bench_d(lw_engine *engine)
{
    static const line three[3] = {{1, 1, 1}, {2, 2, 2}, {3, 1, 1}};
    double b = A_FCC / sqrt(2.0), p[2] = {5e-3 * 0.1 * b * b / (4 * PI), log(10)};
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    const lw_profiles *profiles = make(three, 2, 0.25, &lw_strain_dislocations, p, 0, 0);
    lw_orders orders[2];
    lw_harmonics harmonics;
    CHECK(lw_orders_find(profiles, orders, 2) == 1);
    CHECK(lw_harmonics_separate(profiles, orders, LW_HARMONIC_LOG, 0, &arena, &harmonics, &err) == LW_OK);
    /* mpmath: rms strain of 111 at 1, 5, 10 nm */
    CHECK_RELATIVE(sqrt(harmonics.square[4]), 0.0029560479, 1e-7);
    CHECK_RELATIVE(sqrt(harmonics.square[20]), 0.0021548577, 1e-7);
    CHECK_RELATIVE(sqrt(harmonics.square[40]), 0.0017509303, 1e-7);

    /* 311 as a third "order": no misfit where strain is the same in every direction, and one where it isn't */
    unsigned char space[LW_METHOD_OPTIONS_MOST] = {0};
    const lw_method *method = lw_method_named("warren_averbach");
    method->defaults(space);
    lw_error own = LW_ERROR_NONE;
    CHECK(lw_option_item(lw_option_find(method->options, "t", "lines", &own), "t", space, "all", &own) == LW_OK);
    profiles = make(three, 3, 0.25, &lw_strain_dislocations, p, 1e-3, 0);
    const lw_node *tree = run(engine, profiles, space, &arena, &err);
    CHECK(tree != NULL && lw_node_number(lw_node_get(tree, "test_of_orders"), "chi2", 9) < 1e-6);
    double contrast = 0.20578512 / 0.1; /* of 311 over 111 for q = 2 */
    for (size_t i = 0; i < POINTS; i++)
        cosine[2][i] *= exp(-2 * PI * PI * 11 / (A_FCC * A_FCC) * (contrast - 1) *
                            lw_strain_dislocations.displacement(p, length[i], NULL));
    tree = run(engine, profiles, space, &arena, &err);
    CHECK(tree != NULL && lw_node_number(lw_node_get(tree, "test_of_orders"), "probability", 1) < 1e-6);
    CHECK(hand_list_has(lw_node_get(tree, "remarks"), "don't lie on one line"));
    memset(space, 0, sizeof space);
    method->defaults(space);
    CHECK(lw_option_item(lw_option_find(method->options, "t", "lines", &own), "t", space, "531", &own) == LW_OK);
    CHECK(run(engine, profiles, space, &arena, &err) == NULL);
    CHECK_CONTAINS(err.message, "531");
    lw_arena_end(&arena);
}

/* Hook: coefficients normalised with an area that lost 4 % of its tail. The sizes must not follow. */
static void hook(lw_engine *engine)
{
    static const line both[2] = {{1, 1, 1}, {2, 2, 2}};
    double p[2] = {4e-6, 0};
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    const lw_profiles *profiles = make(both, 2, 0.3, &lw_strain_constant, p, 0, 0);
    for (int k = 0; k < 2; k++)
        for (size_t i = 1; i < POINTS; i++)
            cosine[k][i] /= 0.96;
    const lw_node *tree = run(engine, profiles, NULL, &arena, &err);
    CHECK(tree != NULL);
    CHECK_NEAR(hand_quantity(tree, "hook", NULL, NULL).value, 1 / 0.96 - 1, 2e-4);
    CHECK_RELATIVE(hand_quantity(tree, "size_area", NULL, NULL).value, 8.348818, 2e-3);
    CHECK_RELATIVE(hand_quantity(tree, "size_volume", NULL, NULL).value, 10.276945, 2e-3);
    CHECK(hand_list_has(lw_node_get(tree, "remarks"), "hook"));
    /* and what can't be said isn't: coefficients that end early */
    for (int k = 0; k < 2; k++)
        h.profile[k].truncated_at = 24;
    tree = run(engine, profiles, NULL, &arena, &err);
    CHECK(tree != NULL && lw_node_get(tree, "size_volume") == NULL);
    CHECK(strlen(lw_node_text(tree, "size_volume_not_determined", "")) > 10);
    lw_arena_end(&arena);
}

/* 300 seeded sets of noise, independent from length to length (breadths of 1 nm^-1 make the window's correlation
 * vanish): the scatter of size and strain is what the method says, and 95 % intervals hold the truth. */
static void coverage(lw_engine *engine)
{
    static const line both[2] = {{1, 1, 1}, {2, 2, 2}};
    double p[2] = {4e-6, 0}, truth[2] = {8.348818, 0.002}, sum[2] = {0}, sum2[2] = {0}, u_sum[2] = {0};
    int inside[2] = {0}, runs = 300;
    for (int seed = 1; seed <= runs; seed++) {
        lw_arena arena;
        lw_error err = LW_ERROR_NONE;
        lw_arena_begin(&arena, engine);
        const lw_profiles *profiles = make(both, 2, 0.3, &lw_strain_constant, p, 2e-3, (unsigned)seed);
        for (int k = 0; k < 2; k++)
            h.profile[k].breadth_s.value = 1;
        const lw_node *tree = run(engine, profiles, NULL, &arena, &err);
        CHECK(tree != NULL);
        lw_quantity q[2] = {hand_quantity(tree, "size_area", NULL, NULL), hand_quantity(tree, "strain_rms", NULL, NULL)};
        for (int j = 0; j < 2; j++) {
            double off = q[j].value - truth[j];
            sum[j] += off;
            sum2[j] += off * off;
            u_sum[j] += q[j].u;
            inside[j] += fabs(off) < 1.96 * q[j].u;
        }
        lw_arena_end(&arena);
    }
    for (int j = 0; j < 2; j++) {
        double scatter = sqrt(sum2[j] / runs), u = u_sum[j] / runs;
        CHECK(fabs(sum[j] / runs) < 0.3 * scatter);
        CHECK(scatter < 1.15 * u && scatter > (j == 0 ? 0.5 : 0.8) * u); /* size: u holds the range's choice, too */
        CHECK(inside[j] > 0.92 * runs);
    }
}

/* Memory that refuses after so many requests; blocks are the system's, as before and after. */
typedef struct refusing {
    long left;
} refusing;

static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    refusing *r = user;
    (void)old_size;
    if (new_size == 0) {
        free(block);
        return NULL;
    }
    return r->left-- > 0 ? realloc(block, new_size) : NULL;
}

static void refused_memory(void)
{
    static const line both[2] = {{1, 1, 1}, {2, 2, 2}};
    static const char *const names[] = {"warren_averbach", "double_voigt"};
    double p[2] = {4e-6, 0};
    for (int k = 0; k < 2; k++) {
        bool done = false;
        int refusals = 0;
        for (long n = 0; !done && n < 1000; n++) {
            refusing r = {.left = n};
            lw_engine engine;
            lw_engine_begin(&engine);
            engine.allocator = (lw_allocator){.resize = resize, .user = &r};
            lw_arena arena;
            lw_error err = LW_ERROR_NONE;
            lw_arena_begin(&arena, &engine);
            const lw_profiles *profiles = make(both, 2, 0.3, &lw_strain_constant, p, 1e-3, 1);
            lw_node *tree = lw_tree_new(&arena, &err);
            lw_status status = tree == NULL ? err.status
                                            : lw_method_run(&engine, lw_method_named(names[k]), profiles, NULL, tree, &err);
            done = status == LW_OK;
            refusals += !done;
            CHECK(done || status == LW_OUT_OF_MEMORY);
            lw_arena_end(&arena);
            lw_engine_end(&engine);
        }
        CHECK(done && refusals > 3);
    }
}

int main(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    bench_a(&engine);
    other_steps(&engine);
    bench_d(&engine);
    hook(&engine);
    coverage(&engine);
    refused_memory();
    lw_engine_end(&engine);
    return lw_checks_end();
}
