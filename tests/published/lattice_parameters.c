/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Cells from positions: closed forms of 1/d^2 for every crystal system, the certified LaB6 line table, and
 * the specimen's displacement. */
#include "check.h"
#include "published/by_hand.h"

#include <stdlib.h>

#define CU 0.15405929

static lw_engine engine;
static lw_arena arena;
static by_hand h;

static lw_node *run_lattice(const char *displacement, lw_status want)
{
    int options[4] = {0};
    const lw_method *method = lw_method_named("lattice");
    lw_error err = LW_ERROR_NONE;
    lw_node *node = lw_tree_new(&arena, &err);
    method->defaults(options);
    CHECK(lw_option_text(lw_option_find(method->options, "lattice", "displacement", &err), "lattice", options,
                         displacement, &err) == LW_OK);
    lw_status status = lw_method_run(&engine, method, &h.profiles, options, node, &err);
    if (status != want)
        fprintf(stderr, "lattice: %s\n", err.message);
    CHECK(status == want);
    return node;
}

/* Puts a line where the observer sees it. */
static void line_at(int a, int b, int c, double two_theta, double u)
{
    double s = 2 * sin(two_theta / 2 * HAND_DEGREE) / h.wavelength;
    hand_line(&h, a, b, c, s, 0.02, 0.01, 0.015, 1e-4);
    h.line[h.n - 1].two_theta = lw_quantity_of(two_theta, u, "deg");
}

static double degrees_of(double inverse_d_squared)
{
    return 2 * asin(0.5 * h.wavelength * sqrt(inverse_d_squared)) / HAND_DEGREE;
}

/* 1/d^2 by the textbook form of each system (International Tables, vol. A; Giacovazzo, Fundamentals of
 * Crystallography, table 2.1). */
static double inverse_square(lw_crystal_system system, bool rhombohedral, const lw_cell *x, int h_, int k_,
                             int l_)
{
    double H = h_, K = k_, L = l_, a = x->a, b = x->b, c = x->c;
    double ca = cos(x->alpha * HAND_DEGREE), cb = cos(x->beta * HAND_DEGREE),
           cg = cos(x->gamma * HAND_DEGREE);
    double sa = sin(x->alpha * HAND_DEGREE), sb = sin(x->beta * HAND_DEGREE),
           sg = sin(x->gamma * HAND_DEGREE);
    switch (system) {
    case LW_CUBIC: return (H * H + K * K + L * L) / (a * a);
    case LW_TETRAGONAL: return (H * H + K * K) / (a * a) + L * L / (c * c);
    case LW_ORTHORHOMBIC: return H * H / (a * a) + K * K / (b * b) + L * L / (c * c);
    case LW_TRIGONAL:
        if (rhombohedral)
            return ((H * H + K * K + L * L) * sa * sa + 2 * (H * K + K * L + H * L) * (ca * ca - ca)) /
                   (a * a * (1 - 3 * ca * ca + 2 * ca * ca * ca));
        return 4.0 / 3 * (H * H + H * K + K * K) / (a * a) + L * L / (c * c);
    case LW_HEXAGONAL: return 4.0 / 3 * (H * H + H * K + K * K) / (a * a) + L * L / (c * c);
    case LW_MONOCLINIC:
        return (H * H / (a * a) + K * K * sb * sb / (b * b) + L * L / (c * c) - 2 * H * L * cb / (a * c)) /
               (sb * sb);
    case LW_TRICLINIC:
        return (H * H / (a * a) * sa * sa + K * K / (b * b) * sb * sb + L * L / (c * c) * sg * sg +
                2 * H * K / (a * b) * (ca * cb - cg) + 2 * K * L / (b * c) * (cb * cg - ca) +
                2 * H * L / (a * c) * (cg * ca - cb)) /
               (1 - ca * ca - cb * cb - cg * cg + 2 * ca * cb * cg);
    }
    return NAN;
}

static void all_systems(void)
{
    static const struct {
        lw_crystal_system system;
        bool rhombohedral;
        lw_cell cell;
        const char *names[7];
    } cases[] = {
        {LW_CUBIC, false, {0.35238, 0.35238, 0.35238, 90, 90, 90, 0, 0, 0}, {"a"}},
        {LW_TETRAGONAL, false, {0.459365, 0.459365, 0.295874, 90, 90, 90, 0, 0, 0}, {"a", "c"}},
        {LW_ORTHORHOMBIC, false, {0.49614, 0.79671, 0.57404, 90, 90, 90, 0, 0, 0}, {"a", "b", "c"}},
        {LW_HEXAGONAL, false, {0.324981, 0.324981, 0.520653, 90, 90, 120, 0, 0, 0}, {"a", "c"}},
        {LW_TRIGONAL, false, {0.475893, 0.475893, 1.29917, 90, 90, 120, 0, 0, 0}, {"a", "c"}},
        {LW_TRIGONAL, true, {0.5128, 0.5128, 0.5128, 55.28, 55.28, 55.28, 0, 0, 0}, {"a", "alpha"}},
        {LW_MONOCLINIC, false, {0.51505, 0.52116, 0.53173, 90, 99.23, 90, 0, 0, 0}, {"a", "b", "c", "beta"}},
        {LW_TRICLINIC,
         false,
         {0.8145, 1.2787, 0.71604, 94.3, 116.6, 87.7, 0, 0, 0},
         {"a", "b", "c", "alpha", "beta", "gamma"}},
    };
    static const int hkl[16][3] = {{1, 1, 1}, {2, 0, 0}, {0, 2, 0}, {0, 0, 2},  {1, 1, 0},  {1, 0, 1},
                                   {0, 1, 1}, {2, 1, 0}, {1, 2, 1}, {1, -1, 2}, {-2, 1, 1}, {2, 2, 0},
                                   {0, 2, 2}, {3, 0, 0}, {1, 1, 3}, {-1, 2, 2}};
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        hand_begin(&h, cases[i].system, cases[i].cell, CU);
        for (int j = 0; j < 16; j++) {
            double square = inverse_square(cases[i].system, cases[i].rhombohedral, &cases[i].cell, hkl[j][0],
                                           hkl[j][1], hkl[j][2]);
            if (0.5 * CU * sqrt(square) < 0.99)
                line_at(hkl[j][0], hkl[j][1], hkl[j][2], degrees_of(square), 0.002);
        }
        hand_end(&h, 0);
        const double truth[6] = {cases[i].cell.a,     cases[i].cell.b,    cases[i].cell.c,
                                 cases[i].cell.alpha, cases[i].cell.beta, cases[i].cell.gamma};
        static const char *const all[6] = {"a", "b", "c", "alpha", "beta", "gamma"};
        /* the fit begins away from the answer, without breaking the system */
        h.material.cell.a *= 1.003;
        h.material.cell.b *= cases[i].system >= LW_TETRAGONAL || cases[i].rhombohedral ? 1.003 : 0.998;
        h.material.cell.c *= cases[i].rhombohedral || cases[i].system == LW_CUBIC ? 1.003 : 1.001;
        if (cases[i].system <= LW_MONOCLINIC)
            h.material.cell.beta += 0.2;
        lw_node *node = run_lattice("no", LW_OK);
        size_t told = 0;
        for (int j = 0; j < 6; j++) {
            bool is_free = false;
            for (int k = 0; k < 7 && cases[i].names[k] != NULL; k++)
                is_free = is_free || strcmp(cases[i].names[k], all[j]) == 0;
            CHECK(is_free == (lw_node_get(node, all[j]) != NULL)); /* free parameters and no others */
            told += is_free;
            if (is_free)
                CHECK_RELATIVE(hand_quantity(node, all[j], NULL, NULL).value, truth[j], 1e-9);
        }
        CHECK(told > 0 && lw_node_number(node, "degrees_of_freedom", 0) == (double)(h.n - told));
    }
}

/* LaB6 SRM 660c, a = 0.4156826 nm (certificate; Black et al. 2020 Powder Diffr. 35): the line table at
 * 0.15405929 nm, printed to 0.0001 deg. */
static const struct {
    int h, k, l;
    double two_theta;
} lab6[] = {{1, 0, 0, 21.3583},  {1, 1, 0, 30.3854},  {1, 1, 1, 37.4425},  {2, 0, 0, 43.5074},
            {2, 1, 0, 48.9584},  {2, 1, 1, 53.9899},  {2, 2, 0, 63.2197},  {3, 0, 0, 67.5491},
            {3, 1, 0, 71.7470},  {3, 1, 1, 75.8457},  {2, 2, 2, 79.8716},  {3, 2, 0, 83.8474},
            {3, 2, 1, 87.7937},  {4, 0, 0, 95.6735},  {4, 1, 0, 99.6447},  {4, 1, 1, 103.6634},
            {3, 3, 1, 107.7519}, {4, 2, 0, 111.9362}, {4, 2, 1, 116.2477}, {3, 3, 2, 120.7259},
            {4, 2, 2, 130.4127}, {5, 0, 0, 135.8047}, {5, 1, 0, 141.7805}, {5, 1, 1, 148.6852}};
#define LAB6_LINES (sizeof lab6 / sizeof *lab6)
static const lw_cell LAB6 = {.a = 0.4157, .b = 0.4157, .c = 0.4157, .alpha = 90, .beta = 90, .gamma = 90};

/* Rounding to 0.0001 deg is a rectangular distribution of 0.0001/sqrt(12). */
#define ROUNDING (1e-4 / 3.4641016151377546)

static void certified_table(void)
{
    hand_begin(&h, LW_CUBIC, LAB6, CU);
    for (size_t i = 0; i < LAB6_LINES; i++)
        line_at(lab6[i].h, lab6[i].k, lab6[i].l, lab6[i].two_theta, ROUNDING);
    hand_end(&h, 0);
    lw_node *node = run_lattice("auto", LW_OK);
    lw_quantity a = hand_quantity(node, "a", NULL, NULL);
    CHECK(a.u > 0 && a.u < 5e-8);
    CHECK_NEAR(a.value, 0.4156826, 3 * a.u);
    CHECK(!lw_node_get(node, "displacement_refined")->flag); /* a capillary has none */
    CHECK_RELATIVE(hand_quantity(node, "volume", NULL, NULL).value, pow(a.value, 3), 1e-12);
    CHECK_RELATIVE(hand_quantity(node, "volume", NULL, NULL).u, 3 * a.value * a.value * a.u, 1e-7);
    /* chi-square of 23 degrees of freedom: below its 0.1 % point, above its 99.9 % point */
    double chi2 = lw_node_number(node, "chi2", 0);
    CHECK(chi2 > 7.53 && chi2 < 49.7);
}

/* -2 s cos(theta)/R in radians 2theta (Wilson 1963): s = 0.1 mm, R = 200 mm: -0.0564253, -0.0496196,
 * -0.0286479 deg at 20, 60, 120 deg, confirmed by tracing rays. */
static double shift_of(double s_mm, double two_theta)
{
    return -2 * s_mm * cos(two_theta / 2 * HAND_DEGREE) / 200 / HAND_DEGREE;
}

static void displacement(void)
{
    CHECK_NEAR(shift_of(0.1, 20), -0.0564253, 5e-8);
    CHECK_NEAR(shift_of(0.1, 60), -0.0496196, 5e-8);
    CHECK_NEAR(shift_of(0.1, 120), -0.0286479, 5e-8);
    enum {
        WIDE,
        NARROW,
        STILL,
        CASES
    }; /* a long range; one that hardly tells it from the cell; the same, and the
          specimen lies where the standard lay */
    for (int which = WIDE; which < CASES; which++) {
        bool narrow = which != WIDE, still = which == STILL;
        double height = still ? -0.04 : 0.1;
        hand_begin(&h, LW_CUBIC, LAB6, CU);
        strcpy(h.calibration.geometry, "reflection");
        /* the standard lay elsewhere, and there is a zero error of the calibration */
        lw_aberrations *set = &h.calibration.aberrations;
        set->n = 2;
        set->kind[0] = lw_aberration_named("zero_shift");
        set->kind[1] = lw_aberration_named("displacement");
        set->value[0] = 0.013;
        set->value[1] = -0.04;
        set->covariance[1][1] = 0.001 * 0.001;
        for (size_t i = narrow ? 10 : 0; i < (narrow ? 14 : LAB6_LINES); i++) {
            int n = lab6[i].h * lab6[i].h + lab6[i].k * lab6[i].k + lab6[i].l * lab6[i].l;
            double truth = degrees_of(n / (0.4156826 * 0.4156826));
            line_at(lab6[i].h, lab6[i].k, lab6[i].l, truth + shift_of(height, truth) + 0.013, 0.001);
        }
        hand_end(&h, 0);
        lw_node *node = run_lattice("auto", LW_OK);
        lw_node *asked = run_lattice("yes", LW_OK);
        CHECK_RELATIVE(hand_quantity(asked, "a", NULL, NULL).value, 0.4156826, 1e-9);
        CHECK_NEAR(hand_quantity(asked, "displacement", NULL, NULL).value, height, narrow ? 1e-5 : 1e-6);
        CHECK(lw_node_get(node, "displacement_refined")->flag == !still);
        if (narrow) {
            lw_quantity kept = hand_quantity(node, "a", NULL, NULL),
                        freed = hand_quantity(asked, "a", NULL, NULL);
            CHECK(hand_list_has(lw_node_get(node, "remarks"),
                                still ? "and fit without it" : "do not fit without it"));
            CHECK_RELATIVE(kept.value, 0.4156826, 1e-8);
            CHECK(still ? kept.u < 0.2 * freed.u : kept.u >= freed.u * (1 - 1e-9));
            continue;
        }
        CHECK_RELATIVE(hand_quantity(node, "a", NULL, NULL).value, 0.4156826, 1e-9);
        CHECK_NEAR(hand_quantity(node, "displacement", NULL, NULL).value, 0.1, 1e-6);
        CHECK(hand_list_has(lw_node_get(node, "remarks"), "displacement was refined"));
        /* held where the standard lay, the cell is wrong and the residuals say so */
        node = run_lattice("no", LW_OK);
        CHECK(fabs(hand_quantity(node, "a", NULL, NULL).value / 0.4156826 - 1) > 1e-5);
    }
}

/* One line of a cubic cell: u(a) = a cot(theta) u(theta), with the zero shift's uncertainty in it (Bragg's
 * law differentiated). */
static void uncertainty(void)
{
    hand_begin(&h, LW_CUBIC, LAB6, CU);
    double truth = degrees_of(9 / (0.4156826 * 0.4156826));
    line_at(2, 2, 1, truth, 0.003);
    lw_aberrations *set = &h.calibration.aberrations;
    set->n = 1;
    set->kind[0] = lw_aberration_named("zero_shift");
    set->covariance[0][0] = 0.004 * 0.004;
    hand_end(&h, 0);
    lw_quantity a = hand_quantity(run_lattice("no", LW_OK), "a", NULL, NULL);
    CHECK_RELATIVE(a.value, 0.4156826, 1e-12);
    CHECK_RELATIVE(a.u, 0.4156826 / tan(truth / 2 * HAND_DEGREE) * 0.005 / 2 * HAND_DEGREE, 1e-9);
}

/* What the lines cannot carry is refused with a reason. */
static void refusals(void)
{
    lw_cell hexagonal = {.a = 0.325, .b = 0.325, .c = 0.52, .alpha = 90, .beta = 90, .gamma = 120};
    hand_begin(&h, LW_HEXAGONAL, hexagonal, CU);
    for (int i = 1; i <= 3; i++)
        line_at(0, 0, 2 * i, degrees_of(pow(2 * i / 0.52, 2)), 0.002);
    hand_end(&h, 0);
    run_lattice("no", LW_NOT_SUPPORTED); /* 00l says nothing of a */
    h.profiles.n = 1;
    run_lattice("no", LW_NOT_SUPPORTED); /* one line, two parameters */
    h.lines.material = NULL;
    run_lattice("no", LW_NOT_SUPPORTED);
}

int main(void)
{
    lw_engine_begin(&engine);
    lw_arena_begin(&arena, &engine);
    all_systems();
    certified_table();
    displacement();
    uncertainty();
    refusals();
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
