/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Young's moduli and Zener ratios. Cubic values follow from the closed form 1/E = s11 - 2 (s11 - s12 - s44/2)
 * H, H = (h2k2 + h2l2 + k2l2)/(h2 + k2 + l2)^2 (Nye 1957, ch. VIII) and the constants of each row. */
#include "check.h"
#include "physics/elasticity.h"
#include "physics/space_group.h"

static lw_material of(int space_group, const char *setting, lw_cell cell)
{
    lw_material m;
    lw_error err = LW_ERROR_NONE;
    memset(&m, 0, sizeof m);
    snprintf(m.name, sizeof m.name, "sample");
    m.cell = cell;
    CHECK(lw_space_group_setting(space_group, setting, &m.hall_number, &err) == LW_OK);
    CHECK(lw_material_settle(&m, &err) == LW_OK);
    return m;
}

static lw_status give(lw_material *m, const char *const *names, const double *values, int n, lw_error *err)
{
    for (int i = 0; i < n; i++) {
        lw_status status = lw_stiffness_set(m, names[i], values[i], err);
        if (status != LW_OK)
            return status;
    }
    return lw_stiffness_complete(m, err);
}

static double young(const lw_material *m, int h, int k, int l)
{
    double gpa = NAN;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_young_modulus(m, h, k, l, &gpa, &err) == LW_OK);
    return gpa;
}

static const char *const CUBIC[] = {"c11", "c12", "c44"};

static void check_cubic(void)
{
    static const struct {
        double c[3], zener, e100, e110, e111, e311;
    } row[] = {{{168.4, 121.4, 75.4}, 3.2085, 66.69, 130.34, 191.15, 96.19},    /* Cu */
               {{246.5, 147.3, 124.7}, 2.5141, 136.31, 232.51, 304.03, 184.17}, /* Ni */
               {{107.3, 60.9, 28.3}, 1.2198, 63.20, 72.04, 75.57, 68.48},       /* Al */
               {{231.4, 134.7, 116.4}, 2.4074, 132.28, 220.41, 283.34, 176.64}, /* Fe */
               {{522.4, 204.4, 160.8}, 1.0113, 407.43, 410.37, 411.37, 409.28}, /* W */
               {{165.7, 63.9, 79.6}, 1.5639, 130.13, 169.10, 187.85, 152.16},   /* Si */
               {{124.0, 93.7, 46.1}, 3.0429, 43.34, 83.38, 120.47, 62.06},      /* Ag */
               {{192.9, 163.8, 41.5}, 2.8522, 42.46, 80.70, 115.31, 60.45},     /* Au */
               {{297.0, 95.2, 155.7}, 1.5431, 250.78, 320.98, 354.01, 290.72},  /* MgO */
               {{403, 105, 60}, 0.4027, 359.59, 189.76, 163.95, 230.20},        /* CeO2 */
               {{453.3, 18.2, 90.1}, 0.4142, 451.89, 260.52, 228.30, 309.22},   /* LaB6 */
               {{248.1, 154.9, 124.2}, 2.6652, 129.02, 227.34, 304.76, 177.14}, /* Ni, another handbook */
               {{226, 140, 116}, 2.6977, 118.90, 210.44, 283.10, 163.60}};      /* Fe, another handbook */
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        lw_material m = of(225, NULL, (lw_cell){.a = 0.4});
        lw_error err = LW_ERROR_NONE;
        CHECK(give(&m, CUBIC, row[i].c, 3, &err) == LW_OK);
        CHECK_NEAR(lw_zener_ratio(&m), row[i].zener, 6e-5);
        CHECK_NEAR(young(&m, 2, 0, 0), row[i].e100, 6e-3);
        CHECK_NEAR(young(&m, 0, 1, -1), row[i].e110, 6e-3);
        CHECK_NEAR(young(&m, 1, 1, 1), row[i].e111, 6e-3);
        CHECK_NEAR(young(&m, 1, 3, -1), row[i].e311, 6e-3);
    }
}

/* An isotropic body of E = 200 GPa, nu = 0.3 has one modulus in every direction of every cell. */
static void check_isotropic(void)
{
    const double e = 200, nu = 0.3;
    const double c11 = e * (1 - nu) / ((1 + nu) * (1 - 2 * nu)), c12 = e * nu / ((1 + nu) * (1 - 2 * nu));
    const double c44 = e / (2 * (1 + nu));
    static const char *const names[] = {"c11", "c12", "c13", "c22", "c23", "c33", "c44", "c55", "c66"};
    const double values[] = {c11, c12, c12, c11, c12, c11, c44, c44, c44};
    lw_material m =
        of(2, NULL, (lw_cell){.a = 0.61, .b = 1.07, .c = 0.6, .alpha = 82, .beta = 107, .gamma = 103});
    lw_error err = LW_ERROR_NONE;
    CHECK(give(&m, names, values, 9, &err) == LW_OK);
    for (int h = -2; h <= 2; h++)
        for (int k = -2; k <= 2; k++)
            CHECK_NEAR(young(&m, h, k, 3), e, 1e-9);
}

/* Hexagonal: 1/E = (1 - c^2)^2 s11 + c^4 s33 + c^2 (1 - c^2)(2 s13 + s44), c the cosine to the axis (Nye
 * 1957). Trigonal (3m classes), plane normals in the y-z plane at the angle with cosine c and sine of x2 =
 * n2: 1/E = (1 - n3^2)^2 s11 + n3^4 s33 + n3^2 (1 - n3^2)(2 s13 + s44) + 2 n2 n3 (3 n1^2 - n2^2) s14. */
static void check_uniaxial(void)
{
    static const char *const names[] = {"c11", "c12", "c13", "c33", "c44"};
    const double c[] = {162.4, 92.0, 69.0, 180.7, 46.7};
    lw_material m = of(194, NULL, (lw_cell){.a = 0.295, .c = 0.468});
    lw_error err = LW_ERROR_NONE;
    CHECK(give(&m, names, c, 5, &err) == LW_OK);
    CHECK_NEAR(m.stiffness_gpa[5][5], 0.5 * (162.4 - 92.0), 1e-12);
    /* Compliances of a hexagonal crystal in closed form (Nye 1957, p. 147). */
    const double det = c[3] * (c[0] + c[1]) - 2 * c[2] * c[2];
    const double s11 = 0.5 * (c[3] / det + 1 / (c[0] - c[1])), s33 = (c[0] + c[1]) / det, s13 = -c[2] / det;
    for (int l = 0; l <= 3; l++) {
        /* Tilt of the normal of 10l from the axis: tan = (2/sqrt(3) / a) / (l / c). */
        double up = l / 0.468, out = 2 / sqrt(3.0) / 0.295, n3 = up * up / (up * up + out * out);
        double want = 1 / ((1 - n3) * (1 - n3) * s11 + n3 * n3 * s33 + n3 * (1 - n3) * (2 * s13 + 1 / c[4]));
        CHECK_NEAR(young(&m, 1, 0, l), want, 1e-9);
        CHECK_NEAR(young(&m, 0, -1, l), want, 1e-9); /* isotropic about the axis */
    }
    CHECK_NEAR(young(&m, 0, 0, 2), 1 / s33, 1e-9);

    /* Alumina, on hexagonal and on rhombohedral axes: the same planes, the same moduli. Obverse setting:
     * h_R = (2h + k + l)/3, k_R = (-h + k + l)/3, l_R = (-h - 2k + l)/3 (International Tables A, 5.1.3). */
    static const char *const trigonal[] = {"c11", "c12", "c13", "c14", "c33", "c44"};
    const double t[] = {497.3, 162.8, 116.0, -21.9, 500.9, 146.8};
    const double a = 0.4759, height = 1.2992;
    lw_material hex = of(167, "H", (lw_cell){.a = a, .c = height});
    double edge = sqrt(a * a / 3 + height * height / 9);
    double alpha = 2 * asin(0.5 * a / edge) * 180 / 3.14159265358979323846;
    lw_material rhomb = of(167, "R", (lw_cell){.a = edge, .alpha = alpha});
    CHECK(hex.lattice == 'R' && rhomb.lattice == 'P' && rhomb.system == LW_TRIGONAL);
    CHECK(give(&hex, trigonal, t, 6, &err) == LW_OK && give(&rhomb, trigonal, t, 6, &err) == LW_OK);
    static const int plane[4][3] = {{0, 1, 2}, {1, 0, 4}, {1, 1, 0}, {1, 1, 6}};
    for (int i = 0; i < 4; i++) {
        int h = plane[i][0], k = plane[i][1], l = plane[i][2];
        CHECK_NEAR(young(&rhomb, (2 * h + k + l) / 3, (-h + k + l) / 3, (-h - 2 * k + l) / 3),
                   young(&hex, h, k, l), 1e-6);
    }
    /* c14 tells 012 from 102, which an R lattice does not even have: its sign counts. */
    double with = young(&hex, 0, 1, 2), mirrored = young(&hex, 1, 0, 2);
    CHECK(fabs(with - mirrored) > 10);
    /* Closed form at 012: b* is y, so n1 = 0. Compliances by the 2 x 2 blocks: with
     * p = c11 - c12, s44 = p/(p c44 - 2 c14^2), s14 = -c14/(p c44 - 2 c14^2). */
    double p = t[0] - t[1], block = p * t[5] - 2 * t[3] * t[3], D = t[4] * (t[0] + t[1]) - 2 * t[2] * t[2];
    double r44 = p / block, r14 = -t[3] / block, r33 = (t[0] + t[1]) / D, r13 = -t[2] / D;
    double r11 = 0.5 * (t[4] / D + t[5] / block);
    double y = 2 / sqrt(3.0) / a, z = 2 / height, norm = sqrt(y * y + z * z), n2 = y / norm, n3 = z / norm;
    double inverse = n2 * n2 * n2 * n2 * r11 + n3 * n3 * n3 * n3 * r33 + n2 * n2 * n3 * n3 * (2 * r13 + r44) -
                     2 * n2 * n2 * n2 * n3 * r14;
    CHECK_NEAR(with, 1 / inverse, 1e-9);
}

/* Tetragonal (4/mmm classes): 1/E = (n1^4 + n2^4) s11 + n3^4 s33 + n1^2 n2^2 (2 s12 + s66) + n3^2 (1 - n3^2)(2 s13 + s44)
 * (Nye 1957, p. 145), compliances by the 2 x 2 blocks of the stiffness; rutile's constants. */
static void check_tetragonal(void)
{
    static const char *const names[] = {"c11", "c12", "c13", "c33", "c44", "c66"};
    const double c[] = {268, 175, 147, 484.2, 123.8, 190.2}, a = 0.4594, height = 0.2959;
    lw_material m = of(136, NULL, (lw_cell){.a = a, .c = height});
    lw_error err = LW_ERROR_NONE;
    CHECK(give(&m, names, c, 6, &err) == LW_OK);
    double det = c[3] * (c[0] + c[1]) - 2 * c[2] * c[2], half = 1 / (c[0] - c[1]);
    double s11 = 0.5 * (c[3] / det + half), s12 = 0.5 * (c[3] / det - half), s13 = -c[2] / det, s33 = (c[0] + c[1]) / det;
    static const int plane[6][3] = {{1, 1, 0}, {1, 0, 1}, {2, 0, 0}, {2, 1, 1}, {0, 0, 2}, {3, 1, 2}};
    for (int i = 0; i < 6; i++) {
        double n[3] = {plane[i][0] / a, plane[i][1] / a, plane[i][2] / height}, all = 0;
        for (int j = 0; j < 3; j++)
            all += n[j] * n[j];
        double x = n[0] * n[0] / all, y = n[1] * n[1] / all, z = n[2] * n[2] / all;
        double inverse = (x * x + y * y) * s11 + z * z * s33 + x * y * (2 * s12 + 1 / c[5]) + z * (1 - z) * (2 * s13 + 1 / c[4]);
        CHECK_NEAR(young(&m, plane[i][0], plane[i][1], plane[i][2]), 1 / inverse, 1e-9);
    }
}

/* Equivalent planes must have equal moduli, in every symmetry class that has its own set of constants:
 * this holds each relation between constants, and the axes, against the operations of the group. */
static void check_classes(void)
{
    static const struct {
        int group;
        const char *setting;
        lw_cell cell;
        const char *names[14];
        double values[14];
    } row[] = {
        {14,
         "b1",
         {.a = 0.51, .b = 0.52, .c = 0.53, .beta = 99},
         {"c11", "c12", "c13", "c15", "c22", "c23", "c25", "c33", "c35", "c44", "c46", "c55", "c66"},
         {300, 90, 70, 21, 280, 85, -13, 250, 17, 90, 11, 80, 100}},
        {14,
         "c1",
         {.a = 0.51, .b = 0.52, .c = 0.53, .gamma = 99},
         {"c11", "c12", "c13", "c16", "c22", "c23", "c26", "c33", "c36", "c44", "c45", "c55", "c66"},
         {300, 90, 70, 21, 280, 85, -13, 250, 17, 90, 11, 80, 100}},
        {14,
         "a1",
         {.a = 0.51, .b = 0.52, .c = 0.53, .alpha = 99},
         {"c11", "c12", "c13", "c14", "c22", "c23", "c24", "c33", "c34", "c44", "c55", "c56", "c66"},
         {300, 90, 70, 21, 280, 85, -13, 250, 17, 90, 80, 11, 100}},
        {62,
         NULL,
         {.a = 0.57, .b = 0.49, .c = 0.79},
         {"c11", "c12", "c13", "c22", "c23", "c33", "c44", "c55", "c66"},
         {300, 90, 70, 280, 85, 250, 90, 80, 100}},
        {88,
         NULL,
         {.a = 0.52, .c = 1.13},
         {"c11", "c12", "c13", "c16", "c33", "c44", "c66"},
         {170, 60, 45, -17, 130, 33, 45}},
        {136,
         NULL,
         {.a = 0.46, .c = 0.3},
         {"c11", "c12", "c13", "c33", "c44", "c66"},
         {268, 175, 147, 484, 124, 190}},
        {148,
         NULL,
         {.a = 0.48, .c = 1.6},
         {"c11", "c12", "c13", "c14", "c15", "c33", "c44"},
         {200, 70, 57, -20, 14, 113, 40}},
        {162,
         NULL,
         {.a = 0.48, .c = 0.9},
         {"c11", "c12", "c13", "c15", "c33", "c44"},
         {200, 70, 57, 20, 113, 40}},
        {164,
         NULL,
         {.a = 0.48, .c = 0.9},
         {"c11", "c12", "c13", "c14", "c33", "c44"},
         {200, 70, 57, 20, 113, 40}},
        {167,
         "R",
         {.a = 0.513, .alpha = 55.3},
         {"c11", "c12", "c13", "c14", "c33", "c44"},
         {497, 163, 116, -22, 501, 147}},
        {176, NULL, {.a = 0.94, .c = 0.69}, {"c11", "c12", "c13", "c33", "c44"}, {140, 13, 69, 180, 36}},
        {205, NULL, {.a = 0.54}, {"c11", "c12", "c44"}, {380, 45, 110}}};
    static const int plane[3][3] = {{1, 2, 3}, {2, -1, 1}, {0, 1, 2}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        lw_material m = of(row[i].group, row[i].setting, row[i].cell);
        lw_error err = LW_ERROR_NONE;
        int n = 0;
        while (row[i].names[n] != NULL)
            n++;
        CHECK(give(&m, row[i].names, row[i].values, n, &err) == LW_OK);
        if (err.status != LW_OK)
            fprintf(stderr, "%s\n", err.message);
        static lw_operations operations;
        CHECK(lw_space_group_operations(m.hall_number, &operations, &err) == LW_OK);
        double largest = 0;
        for (int p = 0; p < 3; p++) {
            double first = young(&m, plane[p][0], plane[p][1], plane[p][2]);
            for (int op = 0; op < operations.n; op++) {
                int h[3];
                for (int j = 0; j < 3; j++)
                    h[j] = plane[p][0] * operations.rotation[op][0][j] +
                           plane[p][1] * operations.rotation[op][1][j] +
                           plane[p][2] * operations.rotation[op][2][j];
                largest = fmax(largest, fabs(young(&m, h[0], h[1], h[2]) - first));
            }
        }
        CHECK_NEAR(largest, 0, 1e-8);
    }
}

static void check_refusals(void)
{
    lw_material m = of(225, NULL, (lw_cell){.a = 0.4});
    lw_error err = LW_ERROR_NONE;
    double gpa;
    CHECK(lw_young_modulus(&m, 1, 1, 1, &gpa, &err) == LW_NOT_SUPPORTED);
    err = LW_ERROR_NONE;
    CHECK(give(&m, CUBIC, (const double[]){246.5, 147.3, 0}, 3, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "c44");
    err = LW_ERROR_NONE;
    CHECK(give(&m, CUBIC, (const double[]){100, 147.3, 50}, 3, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "positive definite");
    CHECK(!m.has_stiffness);
    err = LW_ERROR_NONE;
    m = of(225, NULL, (lw_cell){.a = 0.4});
    static const char *const extra[] = {"c11", "c12", "c44", "c66"};
    CHECK(give(&m, extra, (const double[]){246.5, 147.3, 124.7, 90}, 4, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "c66");
    err = LW_ERROR_NONE;
    CHECK(lw_stiffness_set(&m, "c77", 1, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_stiffness_set(&m, "c11", 246.5e9, &err) == LW_BAD_ARGUMENT); /* Pa by mistake */
    CHECK_CONTAINS(err.remedy, "GPa");
    err = LW_ERROR_NONE;
    m = of(225, NULL, (lw_cell){.a = 0.4});
    static const char *const shear[] = {"c11", "c12", "c44", "c14"};
    CHECK(give(&m, shear, (const double[]){246.5, 147.3, 124.7, 9}, 4, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "c14 must be 0");
    err = LW_ERROR_NONE;
    m = of(225, NULL, (lw_cell){.a = 0.4});
    CHECK(give(&m, CUBIC, (const double[]){246.5, 147.3, 124.7}, 3, &err) == LW_OK);
    CHECK(lw_young_modulus(&m, 0, 0, 0, &gpa, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    m.stiffness_gpa[3][3] = -1;
    CHECK(lw_young_modulus(&m, 1, 0, 0, &gpa, &err) == LW_BAD_ARGUMENT);
}

int main(void)
{
    check_cubic();
    check_isotropic();
    check_uniaxial();
    check_tetragonal();
    check_classes();
    check_refusals();
    return lw_checks_end();
}
