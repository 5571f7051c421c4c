/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Line positions of the line-shape standards from their certified cells, degrees 2theta, at the
 * Cu K-alpha1 wavelength 0.15405929 nm of International Tables C (2006) Table 4.2.2.6. The positions were
 * computed apart from this engine, from Bragg's law and the cells: certificates of SRM 660a and 660c, Black
 * et al. (2011) Powder Diffr. 26 (660b); Si as the files of standards/reference name them. */
#include "literals.h"

static const double DEGREE = 3.14159265358979323846 / 180;

/* The line with h^2 + k^2 + l^2 = n; NULL if it isn't there. */
static const lw_reflection *line_of(const lw_reflection *line, size_t n, int square)
{
    for (size_t i = 0; i < n; i++)
        if (line[i].h * line[i].h + line[i].k * line[i].k + line[i].l * line[i].l == square)
            return &line[i];
    return NULL;
}

static double position(const lw_reflection *line, size_t n, int square)
{
    const lw_reflection *found = line_of(line, n, square);
    return found != NULL ? found->two_theta_deg : NAN;
}

static void check_lab6(lua_State *L, lw_engine *engine)
{
    static const char *const name[3] = {"lab6-660a", "lab6-660b", "lab6-660c"};
    /* h^2+k^2+l^2; 2theta of 660a, 660b, 660c; expanded uncertainty of 660c; 660c at K-alpha2 0.15444274 nm
     */
    static const struct {
        int square;
        double two_theta[3], expanded, alpha2;
    } row[] = {{1, {21.3578, 21.3578, 21.3583}, 0.0004, 21.4121},
               {2, {30.3847, 30.3848, 30.3854}, 0.0006, 30.4629},
               {3, {37.4417, 37.4417, 37.4425}, 0.0007, 37.5392},
               {4, {43.5064, 43.5065, 43.5074}, 0.0009, 43.6213},
               {5, {48.9573, 48.9574, 48.9584}, 0.0010, 49.0883},
               {6, {53.9886, 53.9887, 53.9899}, 0.0011, 54.1352},
               {8, {63.2182, 63.2183, 63.2197}, 0.0014, 63.3953},
               {9, {67.5474, 67.5475, 67.5491}, 0.0015, 67.7400},
               {10, {71.7452, 71.7454, 71.7470}, 0.0016, 71.9534},
               {11, {75.8438, 75.8439, 75.8457}, 0.0017, 76.0681},
               {12, {79.8695, 79.8696, 79.8716}, 0.0018, 80.1105},
               {13, {83.8452, 83.8453, 83.8474}, 0.0020, 84.1038},
               {14, {87.7913, 87.7914, 87.7937}, 0.0021, 88.0684},
               {16, {95.6707, 95.6709, 95.6735}, 0.0024, 95.9889},
               {17, {99.6418, 99.6420, 99.6447}, 0.0026, 99.9831},
               {18, {103.6602, 103.6604, 103.6634}, 0.0028, 104.0269},
               {19, {107.7485, 107.7487, 107.7519}, 0.0030, 108.1436},
               {20, {111.9325, 111.9328, 111.9362}, 0.0033, 112.3597},
               {21, {116.2437, 116.2440, 116.2477}, 0.0035, 116.7078},
               {22, {120.7215, 120.7218, 120.7259}, 0.0039, 121.2292},
               {24, {130.4073, 130.4077, 130.4127}, 0.0048, 131.0338},
               {25, {135.7986, 135.7990, 135.8047}, 0.0054, 136.5126},
               {26, {141.7733, 141.7738, 141.7805}, 0.0064, 142.6124},
               {27, {148.6764, 148.6770, 148.6852}, 0.0079, 149.7195}};
    const size_t rows = sizeof row / sizeof row[0];
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    for (int i = 0; i < 3; i++) {
        lw_material m = literal_material_of(L, "reference", name[i]);
        lw_reflection *line;
        size_t n;
        CHECK(lw_reflections(&m, 0.15405929, 15, 150, &arena, &line, &n, &err) == LW_OK);
        CHECK(n == rows); /* Pm-3m lacks nothing: all sums of three squares, and no other line */
        for (size_t j = 0; j < rows; j++)
            CHECK_NEAR(position(line, n, row[j].square), row[j].two_theta[i], 6e-5);
    }
    /* Uncertainty of the position from that of the cell, k = 2, by the slope of s. */
    lw_material m = literal_material_of(L, "reference", "lab6-660c");
    literal_open(L, "reference", "lab6-660c");
    double expanded = literal_inside(L, "expanded_uncertainty", "a");
    lua_pop(L, 1);
    lw_reflection *line;
    size_t n;
    CHECK(lw_reflections(&m, 0.15444274, 15, 150, &arena, &line, &n, &err) == LW_OK);
    for (size_t j = 0; j < rows; j++) {
        CHECK_NEAR(position(line, n, row[j].square), row[j].alpha2, 6e-5);
        const lw_reflection *found = line_of(line, n, row[j].square);
        if (found == NULL)
            continue;
        double slope[6];
        lw_cell_s_slopes(&m.cell, found->h, found->k, found->l, slope);
        /* The cell is cubic: a, b and c move together. d(2theta) = lambda ds/cos(theta). */
        double theta = asin(0.5 * 0.15405929 / found->d_nm);
        double u = 0.15405929 * fabs(slope[0] + slope[1] + slope[2]) * expanded / cos(theta) / DEGREE;
        CHECK_NEAR(u, row[j].expanded, 6e-5);
    }
    lw_arena_end(&arena);
}

static void check_silicon(lua_State *L, lw_engine *engine)
{
    static const char *const name[5] = {"si-640b", "si-640c", "si-640d", "si-640e", "si-640f"};
    static const struct {
        int square;
        double two_theta[5];
    } row[] = {{3, {28.4423, 28.4409, 28.4407, 28.4410, 28.4412}},
               {8, {47.3026, 47.3003, 47.2999, 47.3004, 47.3007}},
               {11, {56.1222, 56.1193, 56.1189, 56.1195, 56.1199}},
               {16, {69.1298, 69.1261, 69.1256, 69.1263, 69.1268}},
               {19, {76.3760, 76.3718, 76.3712, 76.3720, 76.3726}},
               {24, {88.0299, 88.0247, 88.0240, 88.0250, 88.0257}},
               {27, {94.9522, 94.9463, 94.9455, 94.9467, 94.9475}},
               {32, {106.7081, 106.7009, 106.6999, 106.7013, 106.7023}},
               {35, {114.0917, 114.0834, 114.0823, 114.0839, 114.0851}},
               {40, {127.5439, 127.5330, 127.5315, 127.5337, 127.5352}},
               {43, {136.8924, 136.8789, 136.8770, 136.8797, 136.8816}}};
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    for (int i = 0; i < 5; i++) {
        lw_material m = literal_material_of(L, "reference", name[i]);
        lw_reflection *line;
        size_t n;
        CHECK(lw_reflections(&m, 0.15405929, 15, 140, &arena, &line, &n, &err) == LW_OK);
        for (size_t j = 0; j < sizeof row / sizeof row[0]; j++)
            CHECK_NEAR(position(line, n, row[j].square), row[j].two_theta[i], 6e-5);
    }
    lw_arena_end(&arena);
}

/* Separation of the Cu doublet at fixed d (Bragg's law): 0.050293 deg at 20, 1.083575 at 150. */
static void check_doublet(void)
{
    static const double at[5] = {20, 40, 90, 120, 150};
    static const double apart[5] = {0.050293, 0.103827, 0.285572, 0.495868, 1.083575};
    for (int i = 0; i < 5; i++) {
        double d = 0.15405929 / (2 * sin(0.5 * at[i] * DEGREE));
        lw_cell cell = {d, d, d, 90, 90, 90, 0, 0, 0};
        double second = 2 * asin(0.5 * 0.15444274 * lw_cell_s(&cell, 0, 1, 0)) / DEGREE;
        CHECK_NEAR(second - at[i], apart[i], 6e-7);
    }
}

int main(void)
{
    lua_State *L = luaL_newstate();
    lw_engine engine;
    lw_engine_begin(&engine);
    check_lab6(L, &engine);
    check_silicon(L, &engine);
    check_doublet();
    lw_engine_end(&engine);
    lua_close(L);
    return lw_checks_end();
}
