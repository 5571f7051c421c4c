/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Scherrer constants. Values: common volume by quadrature and convex hulls, cosine transform by
 * Gauss-Legendre, half height by Brent's method, computed apart from this engine (for comparison with
 * Langford & Wilson 1978, J. Appl. Cryst. 11, 102, Table 2). */
#include "check.h"
#include "physics/scherrer.h"

static const double PI = 3.14159265358979323846;

static double constant(lw_shape shape, bool integral, int h, int k, int l)
{
    double K = NAN;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_scherrer_constant(shape, integral, h, k, l, &K, &err) == LW_OK);
    return K;
}

static double area_constant(lw_shape shape, int h, int k, int l)
{
    double volume = NAN, area = NAN;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_shape_columns(shape, h, k, l, &volume, &area, &err) == LW_OK);
    return 1 / area;
}

static void check_table(void)
{
    /* hkl; K_w, K_beta, K_k of cube, tetrahedron and octahedron (the last one's fourth digit uncertain). */
    static const struct {
        int h, k, l;
        double cube[3], tetrahedron[3], octahedron[3];
    } row[] = {
        {1, 0, 0, {0.885893, 1.000000, 1.000000}, {1.026969, 1.386723, 2.080084}, {0.8151, 1.1006, 1.6510}},
        {1, 1, 0, {0.834039, 1.060660, 1.414214}, {0.726177, 0.980561, 1.470841}, {0.8613, 1.0377, 1.1674}},
        {1, 1, 1, {0.855140, 1.154701, 1.732051}, {0.889381, 1.200937, 1.801405}, {0.9354, 1.1438, 1.4298}},
        {2, 1, 0, {0.877734, 1.073313, 1.341641}, {0.918549, 1.240322, 1.860484}, {0.8709, 1.1075, 1.4767}},
        {2, 1, 1, {0.888217, 1.152701, 1.632993}, {0.838517, 1.132254, 1.698381}, {0.9057, 1.1061, 1.3480}},
        {2, 2, 1, {0.861392, 1.142857, 1.666667}, {0.855808, 1.155602, 1.733403}, {0.9153, 1.1185, 1.3758}},
        {3, 1, 0, {0.894268, 1.067269, 1.264911}, {0.974268, 1.315561, 1.973341}, {0.8556, 1.1138, 1.5662}},
        {3, 1, 1, {0.908175, 1.135926, 1.507557}, {0.928928, 1.254338, 1.881507}, {0.8863, 1.1211, 1.4934}}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        const int h = row[i].h, k = row[i].k, l = row[i].l;
        const lw_shape shape[3] = {LW_SHAPE_CUBE, LW_SHAPE_TETRAHEDRON, LW_SHAPE_OCTAHEDRON};
        const double *const want[3] = {row[i].cube, row[i].tetrahedron, row[i].octahedron};
        for (int s = 0; s < 3; s++) {
            double tolerance = s == 2 ? 1e-4 : 1e-6;
            CHECK_NEAR(constant(shape[s], false, h, k, l), want[s][0], tolerance);
            CHECK_NEAR(constant(shape[s], true, h, k, l), want[s][1], tolerance);
            CHECK_NEAR(area_constant(shape[s], h, k, l), want[s][2], tolerance);
            /* The sign and order of the indices don't matter in a cubic crystal. */
            CHECK_NEAR(constant(shape[s], false, -l, h, -k), want[s][0], tolerance);
        }
    }
    /* The octahedron to nine places: common volumes by half-space intersection and convex hull (Qhull) at
     * 720 nodes, K_w and K_beta in the order of the rows above. */
    static const double octahedron[][2] = {{0.815105896, 1.100642416}, {0.861277706, 1.037695622},
                                           {0.935394537, 1.143821152}, {0.870870737, 1.107500068},
                                           {0.905665469, 1.106056332}, {0.915310708, 1.118539041},
                                           {0.855625223, 1.113771816}, {0.886280854, 1.121135726}};
    for (size_t i = 0; i < sizeof row / sizeof row[0]; i++) {
        CHECK_NEAR(constant(LW_SHAPE_OCTAHEDRON, false, row[i].h, row[i].k, row[i].l), octahedron[i][0],
                   2e-9);
        CHECK_NEAR(constant(LW_SHAPE_OCTAHEDRON, true, row[i].h, row[i].k, row[i].l), octahedron[i][1], 2e-9);
    }
    /* Shifted along a fourfold axis it keeps its shape, A = (1 - L/2r)^3, so K_beta = (4/3)^(1/3). */
    CHECK_NEAR(constant(LW_SHAPE_OCTAHEDRON, true, 2, 0, 0), cbrt(4.0 / 3), 1e-14);
    /* Column of one length (cube 100): FWHM 0.88589294 from sinc^2 = 1/2. */
    CHECK_NEAR(constant(LW_SHAPE_CUBE, false, 1, 0, 0), 0.88589294, 1e-8);
}

static void check_sphere(void)
{
    /* Closed forms: A = 1 - 3x/2 + x^3/2, L_V = 3D/4, L_A = 2D/3; FWHM times D by root finding on
     * I = D [3/y^2 - 6 sin y/y^3 + 6 (1 - cos y)/y^4] at 40 digits. */
    const double diameter = cbrt(6 / PI);
    CHECK_NEAR(constant(LW_SHAPE_SPHERE, true, 1, 0, 0), 4 / (3 * diameter), 1e-13);
    CHECK_NEAR(constant(LW_SHAPE_SPHERE, false, 3, 1, 1) * diameter, 1.10665425454983488, 1e-12);
    CHECK_NEAR(constant(LW_SHAPE_SPHERE, false, 0, 0, 0), 0.89195888, 5e-9);
    CHECK_NEAR(constant(LW_SHAPE_SPHERE, true, 0, 0, 0), 1.07466130, 5e-9);
    CHECK_NEAR(area_constant(LW_SHAPE_SPHERE, 1, 0, 0), 1.20899397, 5e-9);
    CHECK_NEAR(lw_shape_common_volume(LW_SHAPE_SPHERE, 1, 0, 0, 0.5 * diameter), 1 - 0.75 + 0.0625, 1e-15);
    CHECK(lw_shape_common_volume(LW_SHAPE_SPHERE, 1, 0, 0, diameter) == 0);
}

/* The common volume of cube, tetrahedron and octahedron against counted points. */
static bool inside(lw_shape shape, const double x[3])
{
    if (shape == LW_SHAPE_CUBE)
        return fabs(x[0]) < 0.5 && fabs(x[1]) < 0.5 && fabs(x[2]) < 0.5;
    if (shape == LW_SHAPE_OCTAHEDRON) /* |x|+|y|+|z| < r has the volume 4 r^3/3 */
        return fabs(x[0]) + fabs(x[1]) + fabs(x[2]) < cbrt(0.75);
    double edge = cbrt(6 * sqrt(2.0)), most = edge / sqrt(8.0); /* vertices on a cube of half edge `most` */
    return x[0] + x[1] + x[2] < most && x[0] - x[1] - x[2] < most && -x[0] + x[1] - x[2] < most &&
           -x[0] - x[1] + x[2] < most;
}

/* Halton's sequence: point i in base p, 0 to 1. */
static double halton(int i, int base)
{
    double value = 0, share = 1;
    for (; i > 0; i /= base) {
        share /= base;
        value += share * (i % base);
    }
    return value;
}

static void check_counted(void)
{
    enum { N = 200000 };
    for (lw_shape shape = LW_SHAPE_CUBE; shape <= LW_SHAPE_OCTAHEDRON; shape = (lw_shape)(shape + 1)) {
        const double shift = 0.35, length = sqrt(9 + 1 + 4.0), edge = 1.9;
        const double move[3] = {shift * 3 / length, -shift / length, shift * 2 / length};
        long both = 0, one = 0;
        for (int i = 1; i <= N; i++) {
            const double x[3] = {edge * (halton(i, 2) - 0.5), edge * (halton(i, 3) - 0.5),
                                 edge * (halton(i, 5) - 0.5)};
            const double y[3] = {x[0] - move[0], x[1] - move[1], x[2] - move[2]};
            if (inside(shape, x)) {
                one++;
                both += inside(shape, y);
            }
        }
        /* Discrepancy of N Halton points in three dimensions: some 1e-3. */
        CHECK_NEAR((double)one * edge * edge * edge / N, 1, 3e-3);
        CHECK_NEAR((double)both / (double)one, lw_shape_common_volume(shape, 3, -1, 2, shift), 3e-3);
        CHECK_NEAR(lw_shape_common_volume(shape, 3, -1, 2, 0), 1, 1e-14);
    }
}

/* The quadrature by pieces against Simpson's rule on 20000 even steps to the longest column of an
 * octahedron |x| + |y| + |z| < r along 311, 2 r sqrt(11)/(3 + 1 + 1): error of order step^4. */
static void check_pieces(void)
{
    enum { N = 20000 };
    double sum = 0;
    const double step = 2 * cbrt(0.75) * sqrt(11.0) / 5 / N;
    for (int i = 0; i <= N; i++)
        sum += (i == 0 || i == N ? 1
                : i % 2 == 1     ? 4
                                 : 2) *
               step / 3 * lw_shape_common_volume(LW_SHAPE_OCTAHEDRON, 3, 1, 1, i * step);
    CHECK_NEAR(constant(LW_SHAPE_OCTAHEDRON, true, 3, 1, 1), 1 / (2 * sum), 1e-11);
}

static void check_columns_and_refusals(void)
{
    double K;
    lw_error err = LW_ERROR_NONE;
    CHECK(constant(LW_SHAPE_COLUMN, true, 1, 1, 1) == 1);
    CHECK(lw_scherrer_constant(LW_SHAPE_COLUMN, false, 1, 1, 1, &K, &err) == LW_NOT_SUPPORTED);
    CHECK_CONTAINS(err.remedy, "integral breadth");
    err = LW_ERROR_NONE;
    CHECK(lw_scherrer_constant(LW_SHAPE_CUBE, true, 0, 0, 0, &K, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    CHECK(lw_shape_columns(LW_SHAPE_COLUMN, 1, 0, 0, &K, &K, &err) == LW_NOT_SUPPORTED);
    CHECK(isnan(lw_shape_common_volume(LW_SHAPE_COLUMN, 1, 0, 0, 0.1)));
    CHECK(strcmp(lw_shape_names[LW_SHAPE_OCTAHEDRON], "octahedron") == 0);
}

int main(void)
{
    check_table();
    check_sphere();
    check_counted();
    check_pieces();
    check_columns_and_refusals();
    return lw_checks_end();
}
