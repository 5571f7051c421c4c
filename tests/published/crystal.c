/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Cells, space groups, multiplicities and absences. Absences are held against the reflection conditions
 * as International Tables for Crystallography A prints them, multiplicities against a plain count. */
#include "check.h"
#include "physics/crystal.h"
#include "physics/space_group.h"

#include <complex.h>
#include <stdlib.h>

static const double WAVELENGTH = 0.15405929;

static lw_material settled(int space_group, lw_cell cell)
{
    lw_material m;
    lw_error err = LW_ERROR_NONE;
    memset(&m, 0, sizeof m);
    snprintf(m.name, sizeof m.name, "group %d", space_group);
    m.space_group = space_group;
    m.cell = cell;
    CHECK(lw_material_settle(&m, &err) == LW_OK);
    if (err.status != LW_OK)
        fprintf(stderr, "%s; %s\n", err.message, err.remedy);
    return m;
}

static bool even(int n)
{
    return n % 2 == 0;
}

/* Reflection conditions, general positions, International Tables A (2002), one function a group. */
static bool p1_bar(int h, int k, int l)
{
    (void)h, (void)k, (void)l;
    return true;
}

static bool p21_c(int h, int k, int l)
{
    return (k != 0 || even(l)) && (h != 0 || l != 0 || even(k));
}

static bool c2_c(int h, int k, int l)
{
    return even(h + k) && (k != 0 || (even(h) && even(l)));
}

static bool pnma(int h, int k, int l)
{
    return (h != 0 || even(k + l)) && (l != 0 || even(h)) && (k != 0 || l != 0 || even(h)) &&
           (h != 0 || l != 0 || even(k)) && (h != 0 || k != 0 || even(l));
}

static bool fddd(int h, int k, int l)
{
    return even(h + k) && even(h + l) && (h != 0 || (k + l) % 4 == 0) && (k != 0 || (h + l) % 4 == 0) &&
           (l != 0 || (h + k) % 4 == 0);
}

static bool p42_mnm(int h, int k, int l)
{
    return (h != 0 || even(k + l)) && (k != 0 || even(h + l));
}

static bool i41_amd(int h, int k, int l)
{
    return even(h + k + l) && (l != 0 || (even(h) && even(k))) && (abs(h) != abs(k) || (2 * h + l) % 4 == 0);
}

static bool r_3c(int h, int k, int l)
{
    if ((-h + k + l) % 3 != 0)
        return false;
    /* h -h 0 l in four indices: h0l, 0kl and h -h l in three; l = 2n. */
    return (h != 0 && k != 0 && h + k != 0) || even(l);
}

/* hh-2hl and its two equivalents: l = 2n (P63/mmc and P63mc have the same conditions). */
static bool p63_mmc(int h, int k, int l)
{
    return (h != k && 2 * h + k != 0 && h + 2 * k != 0) || even(l);
}

static bool p3121(int h, int k, int l)
{
    return h != 0 || k != 0 || l % 3 == 0;
}

static bool fm3m(int h, int k, int l)
{
    return even(h + k) && even(h + l);
}

static bool fd3m(int h, int k, int l)
{
    return fm3m(h, k, l) && (h != 0 || (k + l) % 4 == 0) && (k != 0 || (h + l) % 4 == 0) &&
           (l != 0 || (h + k) % 4 == 0);
}

static bool im3m(int h, int k, int l)
{
    return even(h + k + l);
}

/* Ia-3d: I; 0kl: k, l = 2n; hhl: 2h + l = 4n; h00: h = 4n; and the permutations. */
static bool ia3d(int h, int k, int l)
{
    return im3m(h, k, l) && (h != 0 || (even(k) && even(l))) && (k != 0 || (even(h) && even(l))) &&
           (l != 0 || (even(h) && even(k))) && (abs(h) != abs(k) || (2 * h + l) % 4 == 0) &&
           (abs(h) != abs(l) || (2 * h + k) % 4 == 0) && (abs(k) != abs(l) || (2 * k + h) % 4 == 0);
}

static bool pa3(int h, int k, int l)
{
    return (h != 0 || even(k)) && (k != 0 || even(l)) && (l != 0 || even(h));
}

typedef struct point {
    double s;
} point;

static int ascending(const void *left, const void *right)
{
    double p = ((const point *)left)->s, q = ((const point *)right)->s;
    return (p > q) - (p < q);
}

/* Every point of the reciprocal lattice that the conditions let through, counted by spacing, must be there
 * as lines with these multiplicities, and nothing else. */
static void check_conditions(lw_engine *engine)
{
    static const struct {
        int group;
        bool (*condition)(int h, int k, int l);
        const char *symbol;
        char lattice;
        lw_crystal_system system;
        lw_cell cell;
    } row[] = {
        {2,
         p1_bar,
         "P-1",
         'P',
         LW_TRICLINIC,
         {.a = 0.6141, .b = 1.0736, .c = 0.5986, .alpha = 82.27, .beta = 107.43, .gamma = 102.67}},
        {14, p21_c, "P21/c", 'P', LW_MONOCLINIC, {.a = 0.51505, .b = 0.52116, .c = 0.53173, .beta = 99.23}},
        {15, c2_c, "C2/c", 'C', LW_MONOCLINIC, {.a = 0.97, .b = 0.89, .c = 0.525, .beta = 105.9}},
        {62, pnma, "Pnma", 'P', LW_ORTHORHOMBIC, {.a = 0.5741, .b = 0.4961, .c = 0.7967}},
        {70, fddd, "Fddd:2", 'F', LW_ORTHORHOMBIC, {.a = 0.73, .b = 0.91, .c = 0.62}},
        {136, p42_mnm, "P42/mnm", 'P', LW_TETRAGONAL, {.a = 0.45937, .c = 0.29587}},
        {141, i41_amd, "I41/amd:2", 'I', LW_TETRAGONAL, {.a = 0.37852, .c = 0.95139}},
        {152, p3121, "P3121", 'P', LW_TRIGONAL, {.a = 0.49134, .c = 0.54052}},
        {167, r_3c, "R-3c:H", 'R', LW_TRIGONAL, {.a = 0.4759, .c = 1.2993}},
        {186, p63_mmc, "P63mc", 'P', LW_HEXAGONAL, {.a = 0.32498, .c = 0.52066}},
        {194, p63_mmc, "P63/mmc", 'P', LW_HEXAGONAL, {.a = 0.29508, .c = 0.46855}},
        {205, pa3, "Pa-3", 'P', LW_CUBIC, {.a = 0.5417}},
        {225, fm3m, "Fm-3m", 'F', LW_CUBIC, {.a = 0.5411}},
        {227, fd3m, "Fd-3m:2", 'F', LW_CUBIC, {.a = 1.0496}},
        {229, im3m, "Im-3m", 'I', LW_CUBIC, {.a = 0.5}},
        {230, ia3d, "Ia-3d", 'I', LW_CUBIC, {.a = 1.2}}};
    enum { MOST = 40000 };
    point *points = malloc(MOST * sizeof *points);
    CHECK(points != NULL);
    for (size_t i = 0; points != NULL && i < sizeof row / sizeof row[0]; i++) {
        lw_material m = settled(row[i].group, row[i].cell);
        CHECK(strcmp(m.space_group_symbol, row[i].symbol) == 0);
        CHECK(m.lattice == row[i].lattice && m.system == row[i].system);
        lw_arena arena;
        lw_error err = LW_ERROR_NONE;
        lw_reflection *line;
        size_t n, count = 0;
        lw_arena_begin(&arena, engine);
        const double low = 5, high = 140, degree = 3.14159265358979323846 / 180;
        CHECK(lw_reflections(&m, WAVELENGTH, low, high, &arena, &line, &n, &err) == LW_OK);
        double s_low = 2 * sin(0.5 * low * degree) / WAVELENGTH,
               s_high = 2 * sin(0.5 * high * degree) / WAVELENGTH;
        for (int h = -20; h <= 20; h++)
            for (int k = -20; k <= 20; k++)
                for (int l = -20; l <= 20; l++) {
                    double s = lw_cell_s(&m.cell, h, k, l);
                    if (s >= s_low && s <= s_high && row[i].condition(h, k, l) && count < MOST)
                        points[count++].s = s;
                }
        qsort(points, count, sizeof *points, ascending);
        size_t lines = 0, wrong = 0;
        for (size_t p = 0; p < count; lines++) {
            double s = points[p].s;
            int multiplicity = 0;
            for (; p < count && points[p].s <= s * (1 + 1e-7); p++)
                multiplicity++;
            wrong += lines >= n || line[lines].multiplicity != multiplicity ||
                     fabs(line[lines].d_nm * s - 1) > 1e-7;
        }
        CHECK(lines == n && n > 10);
        CHECK(wrong == 0);
        for (size_t p = 0; p < n; p++)
            wrong +=
                !row[i].condition(line[p].h, line[p].k, line[p].l) ||
                (p > 0 && line[p].two_theta_deg <= line[p - 1].two_theta_deg) ||
                fabs(WAVELENGTH / (2 * sin(0.5 * line[p].two_theta_deg * degree)) - line[p].d_nm) > 1e-12;
        CHECK(wrong == 0);
        lw_arena_end(&arena);
    }
    free(points);
}

/* First lines as every handbook lists them (International Tables C, powder multiplicities). */
static void check_first_lines(lw_engine *engine)
{
    static const struct {
        int group;
        lw_cell cell;
        const char *line[8];
        int multiplicity[8];
    } row[] = {
        {225, {.a = 0.35238}, {"111", "200", "220", "311", "222", "400", "331"}, {8, 6, 12, 24, 8, 6, 24}},
        {229, {.a = 0.28664}, {"110", "200", "211", "220", "310", "222"}, {12, 6, 24, 12, 24, 8}},
        {227,
         {.a = 0.54311},
         {"111", "220", "311", "222", "400", "331", "422", "511"},
         {8, 12, 24, 8, 6, 24, 24, 32}},
        {221,
         {.a = 0.41568},
         {"100", "110", "111", "200", "210", "211", "220", "221"},
         {6, 12, 8, 6, 24, 24, 12, 30}},
        {194,
         {.a = 0.29508, .c = 0.46855},
         {"100", "002", "101", "102", "110", "103", "200", "112"},
         {6, 2, 12, 12, 6, 12, 6, 12}},
        {136,
         {.a = 0.45937, .c = 0.29587},
         {"110", "101", "200", "111", "210", "211", "220", "002"},
         {4, 8, 4, 8, 8, 16, 4, 2}},
        {167,
         {.a = 0.47587, .c = 1.29929},
         {"012", "104", "110", "006", "113", "202", "024", "116"},
         {6, 6, 6, 2, 12, 6, 6, 12}}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        lw_material m = settled(row[i].group, row[i].cell);
        lw_arena arena;
        lw_error err = LW_ERROR_NONE;
        lw_reflection *line;
        size_t n;
        lw_arena_begin(&arena, engine);
        CHECK(lw_reflections(&m, WAVELENGTH, 10, 150, &arena, &line, &n, &err) == LW_OK);
        for (size_t j = 0; j < 8 && row[i].line[j] != NULL; j++) {
            char text[24];
            CHECK(j < n && strcmp(lw_hkl_text(line[j].h, line[j].k, line[j].l, text, sizeof text),
                                  row[i].line[j]) == 0);
            CHECK(j < n && line[j].multiplicity == row[i].multiplicity[j]);
        }
        lw_arena_end(&arena);
    }
}

/* For all 530 settings: a reflection is absent if, and only if, atoms in general positions scatter nothing
 * into it. The structure factor is summed over all operations for two positions without symmetry. */
static void check_structure_factors(lw_engine *engine)
{
    static const double atom[2][3] = {{0.1137, 0.2713, 0.3319}, {0.4411, 0.0771, 0.1933}};
    int wrong = 0, looked = 0;
    for (int hall = 1; hall <= 530; hall++) {
        static lw_operations operations;
        lw_error err = LW_ERROR_NONE;
        lw_material m;
        int number;
        char symbol[24], axis;
        bool rhombohedral;
        CHECK(lw_space_group_operations(hall, &operations, &err) == LW_OK);
        CHECK(lw_space_group_describe(hall, &number, symbol, sizeof symbol, &axis, &rhombohedral, &err) ==
              LW_OK);
        memset(&m, 0, sizeof m);
        m.hall_number = hall;
        lw_crystal_system system = lw_space_group_system(number);
        m.cell = (lw_cell){.a = 0.4017};
        if (system < LW_TETRAGONAL)
            m.cell.b = 0.4463;
        if (system < LW_CUBIC && !rhombohedral)
            m.cell.c = 0.4711;
        if (rhombohedral)
            m.cell.alpha = 81.3;
        if (system == LW_TRICLINIC || axis == 'a')
            m.cell.alpha = 93.7;
        if (system == LW_TRICLINIC || axis == 'b')
            m.cell.beta = 97.1;
        if (system == LW_TRICLINIC || axis == 'c')
            m.cell.gamma = 101.9;
        CHECK(lw_material_settle(&m, &err) == LW_OK);
        lw_arena arena;
        lw_reflection *line = NULL;
        size_t n = 0;
        lw_arena_begin(&arena, engine);
        CHECK(lw_reflections(&m, WAVELENGTH, 5, 79, &arena, &line, &n, &err) == LW_OK);
        const double s_high = 2 * sin(39.5 * 3.14159265358979323846 / 180) / WAVELENGTH;
        int sum = 0, present = 0;
        for (size_t i = 0; i < n; i++)
            sum += line[i].multiplicity;
        for (int h = -5; h <= 5; h++)
            for (int k = -5; k <= 5; k++)
                for (int l = -5; l <= 5; l++) {
                    if ((h == 0 && k == 0 && l == 0) || lw_cell_s(&m.cell, h, k, l) > s_high)
                        continue;
                    double largest = 0;
                    for (int a = 0; a < 2; a++) {
                        double complex factor = 0;
                        for (int op = 0; op < operations.n; op++) {
                            double phase = 0;
                            const int index[3] = {h, k, l};
                            for (int i = 0; i < 3; i++) {
                                double x = operations.shift[op][i] / 24.0;
                                for (int j = 0; j < 3; j++)
                                    x += operations.rotation[op][i][j] * atom[a][j];
                                phase += index[i] * x;
                            }
                            factor += cexp(2 * 3.14159265358979323846 * I * phase);
                        }
                        largest = fmax(largest, cabs(factor));
                    }
                    present += largest > 1e-6;
                }
        wrong += present != sum;
        looked++;
        lw_arena_end(&arena);
    }
    CHECK(looked == 530);
    CHECK(wrong == 0);
}

static void check_cell_geometry(void)
{
    /* V of a triclinic cell, abc sqrt(1 - sum cos^2 + 2 prod cos), and d of a monoclinic one:
     * 1/d^2 = [h^2/a^2 + k^2 sin^2(beta)/b^2 + l^2/c^2 - 2 h l cos(beta)/(ac)]/sin^2(beta). */
    const double degree = 3.14159265358979323846 / 180;
    lw_cell cell = {0.6141, 1.0736, 0.5986, 82.27, 107.43, 102.67, 0, 0, 0};
    double ca = cos(cell.alpha * degree), cb = cos(cell.beta * degree), cg = cos(cell.gamma * degree);
    CHECK_RELATIVE(lw_cell_volume(&cell),
                   cell.a * cell.b * cell.c * sqrt(1 - ca * ca - cb * cb - cg * cg + 2 * ca * cb * cg),
                   1e-13);
    lw_cell mono = {0.51505, 0.52116, 0.53173, 90, 99.23, 90, 0, 0, 0};
    double sb = sin(mono.beta * degree), cosb = cos(mono.beta * degree);
    double want = (4 / (mono.a * mono.a) + sb * sb / (mono.b * mono.b) + 9 / (mono.c * mono.c) +
                   2 * 2 * 3 * cosb / (mono.a * mono.c)) /
                  (sb * sb);
    CHECK_RELATIVE(lw_cell_s(&mono, -2, 1, 3), sqrt(want), 1e-13);
    lw_cell cubic = {0.5, 0.5, 0.5, 90, 90, 90, 0, 0, 0};
    CHECK_RELATIVE(lw_cell_s(&cubic, 1, 2, 3), sqrt(14) / 0.5, 1e-15);
    /* Slopes against central differences. */
    double slope[6];
    lw_cell_s_slopes(&cell, 2, -3, 1, slope);
    for (int i = 0; i < 6; i++) {
        double step = i < 3 ? 1e-6 : 1e-3;
        lw_cell up = cell, down = cell;
        double *const part[6] = {&up.a, &up.b, &up.c, &up.alpha, &up.beta, &up.gamma};
        double *const other[6] = {&down.a, &down.b, &down.c, &down.alpha, &down.beta, &down.gamma};
        *part[i] += step;
        *other[i] -= step;
        double difference = (lw_cell_s(&up, 2, -3, 1) - lw_cell_s(&down, 2, -3, 1)) / (2 * step);
        CHECK_NEAR(slope[i], difference, 1e-7 * fmax(1, fabs(difference)));
    }
}

static void check_symbols(void)
{
    static const struct {
        const char *symbol;
        int number;
        const char *shown; /* in the setting found */
    } row[] = {{"Fm-3m", 225, "Fm-3m"},     {"F m -3 m", 225, "Fm-3m"}, {"P6_3/mmc", 194, "P63/mmc"},
               {"P63/mmc", 194, "P63/mmc"}, {"Fd-3m", 227, "Fd-3m:2"},  {"Fd-3m:1", 227, "Fd-3m:1"},
               {"R-3c", 167, "R-3c:H"},     {"R-3c:R", 167, "R-3c:R"},  {"P21/n", 14, "P21/n"},
               {"P 21/c", 14, "P21/c"},     {"Pbnm", 62, "Pbnm"},       {"I41/amd", 141, "I41/amd:2"}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        int number = 0, hall = 0, again = 0;
        char symbol[24], axis;
        bool rhombohedral;
        lw_error err = LW_ERROR_NONE;
        CHECK(lw_space_group_find(row[i].symbol, &number, &hall, &err) == LW_OK);
        CHECK(number == row[i].number);
        CHECK(lw_space_group_describe(hall, &again, symbol, sizeof symbol, &axis, &rhombohedral, &err) ==
              LW_OK);
        CHECK(strcmp(symbol, row[i].shown) == 0);
    }
    int number, hall;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_space_group_find("Fm3q", &number, &hall, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_space_group_setting(227, "3", &hall, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.remedy, "1, 2");
    err = LW_ERROR_NONE;
    CHECK(lw_space_group_setting(231, NULL, &hall, &err) == LW_BAD_ARGUMENT);
    char text[24];
    CHECK(strcmp(lw_hkl_text(1, 0, -2, text, sizeof text), "10-2") == 0);
    CHECK(strcmp(lw_hkl_text(12, 0, 3, text, sizeof text), "12 0 3") == 0);
}

static void check_refusals(lw_engine *engine)
{
    static const struct {
        int group;
        lw_cell cell;
        const char *part;
    } row[] = {{225, {.a = 0.35, .c = 0.36}, "does not fit"}, /* not cubic */
               {225, {.a = 3.5238e2}, "nm"},                  /* picometre by mistake */
               {136, {.a = 0.45937}, "lacks c"},
               {14, {.a = 0.5, .b = 0.5, .c = 0.5}, "lacks beta"},
               {2, {.a = 0.5, .b = 0.5, .c = 0.5}, "lacks alpha"},
               {194, {.a = 0.3, .c = 0.5, .gamma = 90}, "does not fit"},
               {62, {.a = 0.3, .b = 0.4, .c = 0.5, .beta = 91}, "does not fit"},
               {1, {.a = 0.3, .b = 0.4, .c = 0.5, .alpha = 150, .beta = 150, .gamma = 150}, "no volume"},
               {225, {.a = NAN}, "nm"},
               {166, {.a = 0.4, .c = 1.1, .alpha = 2}, "alpha = 2 degrees"},
               {225, {.a = 0.4, .u_a = -1e-6}, "uncertainty of a"},
               {0, {.a = 0.4}, "no space group 0"}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        lw_material m;
        lw_error err = LW_ERROR_NONE;
        memset(&m, 0, sizeof m);
        snprintf(m.name, sizeof m.name, "it");
        m.space_group = row[i].group;
        m.cell = row[i].cell;
        CHECK(lw_material_settle(&m, &err) == LW_BAD_ARGUMENT);
        CHECK_CONTAINS(err.message, row[i].part);
        CHECK(err.remedy[0] != '\0');
    }
    lw_error mixed = LW_ERROR_NONE;
    lw_material other = {.name = "it", .space_group = 227, .hall_number = 523, .cell = {.a = 0.4}};
    CHECK(lw_material_settle(&other, &mixed) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(mixed.message, "225"); /* Hall number 523 is Fm-3m */
    mixed = LW_ERROR_NONE;
    other.hall_number = 531;
    CHECK(lw_material_settle(&other, &mixed) == LW_BAD_ARGUMENT);
    lw_material m = settled(2, (lw_cell){.a = 3, .b = 4, .c = 5, .alpha = 91, .beta = 92, .gamma = 93});
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_reflection *line;
    size_t n = 1;
    lw_arena_begin(&arena, engine);
    CHECK(lw_reflections(&m, WAVELENGTH, 5, 140, &arena, &line, &n, &err) == LW_BAD_ARGUMENT);
    CHECK(n == 0 && line == NULL);
    CHECK_CONTAINS(err.message, "5000");
    err = LW_ERROR_NONE;
    CHECK(lw_reflections(&m, WAVELENGTH, 0, 140, &arena, &line, &n, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_reflections(&m, 1.5406, 5, 140, &arena, &line, &n, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    other = (lw_material){.name = "it", .space_group = 225, .cell = {.a = 0.4}};
    CHECK(lw_reflections(&other, WAVELENGTH, 5, 140, &arena, &line, &n, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.remedy, "settle");
    err = LW_ERROR_NONE;
    m.cell = (lw_cell){.a = 60, .b = 60, .c = 60, .alpha = 90, .beta = 90, .gamma = 90};
    CHECK(lw_reflections(&m, WAVELENGTH, 5, 140, &arena, &line, &n, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "5000");
    err = LW_ERROR_NONE;
    m.cell.a = m.cell.b = m.cell.c = 3;
    CHECK(lw_reflections(&m, WAVELENGTH, 0.1, 0.2, &arena, &line, &n, &err) == LW_OK &&
          n == 0); /* none there */
    lw_arena_end(&arena);
}

/* An allocator that refuses its n-th request, and counts what is out. */
typedef struct miser {
    int left;
    size_t out;
} miser;

static void *miserly(void *user, void *block, size_t old_size, size_t new_size)
{
    miser *m = user;
    if (new_size > old_size && m->left-- <= 0)
        return NULL;
    m->out = m->out - old_size + new_size;
    if (new_size == 0) {
        free(block);
        return NULL;
    }
    return realloc(block, new_size);
}

static bool always(void *user)
{
    (void)user;
    return true;
}

static void check_refused_memory(void)
{
    lw_material m = settled(2, (lw_cell){.a = 0.8, .b = 1, .c = 1.2, .alpha = 91, .beta = 92, .gamma = 93});
    lw_status status = LW_OUT_OF_MEMORY;
    int tries = 0;
    for (; tries < 40 && status == LW_OUT_OF_MEMORY; tries++) {
        lw_engine engine;
        lw_arena arena;
        lw_error err = LW_ERROR_NONE;
        lw_reflection *line;
        size_t n;
        miser purse = {.left = tries};
        lw_engine_begin(&engine);
        engine.allocator = (lw_allocator){miserly, &purse};
        lw_arena_begin(&arena, &engine);
        status = lw_reflections(&m, WAVELENGTH, 5, 140, &arena, &line, &n, &err);
        CHECK(status == err.status && (status == LW_OK) == (n > 1000));
        lw_arena_end(&arena);
        lw_engine_end(&engine);
        CHECK(purse.out == 0);
    }
    CHECK(status == LW_OK && tries > 3);
    /* A user who wants to stop. */
    lw_engine engine;
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_reflection *line;
    size_t n;
    lw_engine_begin(&engine);
    engine.cancelled = always;
    lw_arena_begin(&arena, &engine);
    CHECK(lw_reflections(&m, WAVELENGTH, 5, 140, &arena, &line, &n, &err) == LW_CANCELLED && n == 0);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
}

int main(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    check_conditions(&engine);
    check_first_lines(&engine);
    check_structure_factors(&engine);
    check_cell_geometry();
    check_symbols();
    check_refusals(&engine);
    check_refused_memory();
    lw_engine_end(&engine);
    return lw_checks_end();
}
