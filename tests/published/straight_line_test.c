/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Straight lines against published fits and against closed forms. */
#include "check.h"
#include "numeric/random.h"
#include "numeric/straight_line.h"

#include <stdlib.h>

static lw_engine engine;

/* Pearson (1901) data with the weights of York (1966), the standard test of fits with errors in both axes;
 * answers as in York et al. (2004) Am. J. Phys. 72, 367, to the digits of a 40-digit evaluation. */
static const double pearson_x[10] = {0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4};
static const double pearson_y[10] = {5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5};
static const double weight_x[10] = {1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1};
static const double weight_y[10] = {1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500};

static void check_york(const lw_straight_line *line)
{
    CHECK_NEAR(line->slope, -0.480533407446202, 1e-12);
    CHECK_NEAR(line->intercept, 5.479910224032865, 1e-11);
    CHECK_NEAR(line->chi2, 11.8663531940614, 1e-11);
    CHECK_NEAR(sqrt(line->intercept_variance), 0.294970735493, 1e-10);
    CHECK_NEAR(sqrt(line->slope_variance), 0.0579850090008, 1e-11);
    CHECK(line->n == 10);
}

static void test_york(void)
{
    double ux[10], uy[10], one[10], cx[100] = {0}, cy[100] = {0};
    for (int i = 0; i < 10; i++) {
        ux[i] = 1 / sqrt(weight_x[i]);
        uy[i] = 1 / sqrt(weight_y[i]);
        cx[11 * i] = 1 / weight_x[i];
        cy[11 * i] = 1 / weight_y[i];
        one[i] = 1;
    }
    lw_straight_line line;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_line_independent(&engine, 10, pearson_x, pearson_y, ux, uy, &line, &err) == LW_OK);
    check_york(&line);
    CHECK(lw_line_correlated(&engine, 10, pearson_x, pearson_y, cx, cy, &line, &err) == LW_OK);
    check_york(&line);
    CHECK(!line.dependent);
    /* unweighted; weights of y only; equal errors in both (the orthogonal line) */
    CHECK(lw_line_plain(&engine, 10, pearson_x, pearson_y, &line, &err) == LW_OK);
    CHECK_NEAR(line.slope, -0.539577274984041, 1e-13);
    CHECK_NEAR(line.intercept, 5.76118519043904, 1e-12);
    CHECK(lw_line_independent(&engine, 10, pearson_x, pearson_y, NULL, uy, &line, &err) == LW_OK);
    CHECK_NEAR(line.slope, -0.610812956583934, 1e-13);
    CHECK_NEAR(line.intercept, 6.10010931666576, 1e-12);
    CHECK(lw_line_independent(&engine, 10, pearson_x, pearson_y, one, one, &line, &err) == LW_OK);
    CHECK_NEAR(line.slope, -0.545561197520965, 1e-13);
    CHECK_NEAR(line.intercept, 5.78404377453008, 1e-12);
    /* x and y may change places: the line is the same, its slope the reciprocal */
    CHECK(lw_line_independent(&engine, 10, pearson_y, pearson_x, uy, ux, &line, &err) == LW_OK);
    CHECK_NEAR(1 / line.slope, -0.480533407446202, 1e-11);
    CHECK_NEAR(line.chi2, 11.8663531940614, 1e-11);
    /* errors in x alone: regression of x on y */
    CHECK(lw_line_independent(&engine, 10, pearson_x, pearson_y, one, NULL, &line, &err) == LW_OK);
    lw_straight_line turned;
    CHECK(lw_line_plain(&engine, 10, pearson_y, pearson_x, &turned, &err) == LW_OK);
    CHECK_NEAR(line.slope, 1 / turned.slope, 1e-12);
}

/* JCGM 100:2008 (GUM), example H.3: calibration of a thermometer. Printed: y1 = -0.1712(29), y2 =
 * 0.00218(67), r = -0.930, s = 0.0035, b(30 C) = -0.1494(41); more digits from a 40-digit evaluation of the
 * table. */
static void test_gum_h3(void)
{
    static const double t[11] = {21.521, 22.012, 22.512, 23.003, 23.507, 23.999,
                                 24.513, 25.002, 25.503, 26.010, 26.511};
    static const double b[11] = {-0.171, -0.169, -0.166, -0.159, -0.164, -0.165,
                                 -0.156, -0.157, -0.159, -0.161, -0.160};
    double x[11], u;
    for (int i = 0; i < 11; i++)
        x[i] = t[i] - 20;
    lw_straight_line line;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_line_plain(&engine, 11, x, b, &line, &err) == LW_OK);
    CHECK_NEAR(line.intercept, -0.17120379, 5e-9);
    CHECK_NEAR(line.slope, 0.0021827, 5e-8);
    CHECK_NEAR(sqrt(line.intercept_variance), 0.0028776, 5e-8);
    CHECK_NEAR(sqrt(line.slope_variance), 0.00066794, 5e-9);
    CHECK_NEAR(line.covariance / sqrt(line.intercept_variance * line.slope_variance), -0.930430, 5e-7);
    CHECK_NEAR(sqrt(line.chi2 / 9), 0.00349756, 5e-9);
    CHECK_NEAR(lw_line_at(&line, 10, &u), -0.14937681, 5e-9);
    CHECK_NEAR(u, 0.0041386, 5e-8);
}

/* Cy = s^2 I + t^2 11' (a common offset) leaves the slope of ordinary least squares, with variance s^2/Sxx,
 * and adds t^2 to the variance of the intercept; Cy = s^2 I + t^2 xx' (a common scale of slope) adds t^2 to
 * that of the slope. Both exactly, for t up to 1e5 s. */
static void test_common(void)
{
    enum { N = 7 };
    static const double x[N] = {0.1, 0.4, 0.5, 0.9, 1.3, 1.8, 2.0}, y[N] = {1, 1.2, 1.1, 1.7, 1.8, 2.4, 2.3};
    double mean = 0, sxx = 0, cy[N * N];
    for (int i = 0; i < N; i++)
        mean += x[i] / N;
    for (int i = 0; i < N; i++)
        sxx += (x[i] - mean) * (x[i] - mean);
    lw_straight_line plain, line;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_line_plain(&engine, N, x, y, &plain, &err) == LW_OK);
    for (double t = 0; t<2e5; t = t> 0 ? 10 * t : 0.1)
        for (int kind = 0; kind < 2; kind++) {
            for (int i = 0; i < N; i++)
                for (int j = 0; j < N; j++)
                    cy[i * N + j] = (i == j) + t * t * (kind ? x[i] * x[j] : 1);
            CHECK(lw_line_correlated(&engine, N, x, y, NULL, cy, &line, &err) == LW_OK);
            double digits = 1e-13 * (1 + t * t);
            CHECK_NEAR(line.slope, plain.slope, digits);
            CHECK_NEAR(line.intercept, plain.intercept, digits);
            CHECK_RELATIVE(line.slope_variance, 1 / sxx + (kind ? t * t : 0), 10 * digits);
            CHECK_RELATIVE(line.intercept_variance, 1.0 / N + mean * mean / sxx + (kind ? 0 : t * t),
                           10 * digits);
            CHECK_RELATIVE(line.chi2, plain.chi2, 10 * digits);
        }
    /* a point measured once and written down twice: singular, and the same as having it once with the
     * others; the weight of the pair is that of one point */
    double twice_x[N + 1], twice_y[N + 1], c[(N + 1) * (N + 1)] = {0};
    for (int i = 0; i <= N; i++) {
        twice_x[i] = x[i % N];
        twice_y[i] = y[i % N];
        c[i * (N + 2)] = 1;
    }
    c[N] = c[N * (N + 1)] = 1; /* points 0 and N fully correlated */
    CHECK(lw_line_correlated(&engine, N + 1, twice_x, twice_y, NULL, c, &line, &err) == LW_OK);
    CHECK(line.dependent);
    CHECK_NEAR(line.slope, plain.slope, 1e-9);
    CHECK_RELATIVE(line.slope_variance, 1 / sxx, 1e-9);
}

/* Correlated errors in both axes: the chi-square at the minimum is not beaten by any slope and intercept
 * near, by direct evaluation of S(a, b) with a plain elimination. */
static double direct_s(const double *x, const double *y, const double *cx, const double *cy, int n, double a,
                       double b)
{
    double m[6][7], s = 0;
    for (int i = 0; i < n; i++) {
        for (int j = 0; j < n; j++)
            m[i][j] = cy[i * n + j] + b * b * cx[i * n + j];
        m[i][n] = y[i] - a - b * x[i];
    }
    for (int k = 0; k < n; k++)
        for (int i = 0; i < n; i++) {
            double f = i == k ? 0 : m[i][k] / m[k][k];
            for (int j = k; j <= n && f != 0; j++)
                m[i][j] -= f * m[k][j];
        }
    for (int i = 0; i < n; i++)
        s += (y[i] - a - b * x[i]) * m[i][n] / m[i][i];
    return s;
}

static void test_both_correlated(void)
{
    enum { N = 6 };
    static const double x[N] = {1, 2, 3, 4, 5, 6}, y[N] = {2.1, 3.7, 6.4, 7.8, 10.3, 11.7};
    double cx[N * N], cy[N * N];
    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++) {
            cx[i * N + j] = 0.04 * pow(0.5, abs(i - j)) + 0.01;
            cy[i * N + j] = 0.09 * pow(-0.3, abs(i - j)) + 0.002 * y[i] * y[j];
        }
    lw_straight_line line;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_line_correlated(&engine, N, x, y, cx, cy, &line, &err) == LW_OK);
    double s = direct_s(x, y, cx, cy, N, line.intercept, line.slope), h = 1e-3;
    CHECK_RELATIVE(line.chi2, s, 1e-12);
    /* central differences of S vanish to second order */
    double da = direct_s(x, y, cx, cy, N, line.intercept + h, line.slope) -
                direct_s(x, y, cx, cy, N, line.intercept - h, line.slope);
    double db = direct_s(x, y, cx, cy, N, line.intercept, line.slope + h) -
                direct_s(x, y, cx, cy, N, line.intercept, line.slope - h);
    double far = direct_s(x, y, cx, cy, N, line.intercept, line.slope + h) - s;
    CHECK(far > 0);
    CHECK_NEAR(da, 0, 1e-9);
    CHECK_NEAR(db, 0, 1e-2 * far);
}

/* Uncertainties as the scatter shows them: 4000 lines with York's errors; the ratio of scatter to stated u
 * has a standard deviation of 1/sqrt(2 * 4000) = 0.011 and a curvature bias of the order of u(b)/b. */
static void test_scatter(void)
{
    enum { N = 10, ROUNDS = 4000 };
    lw_random random;
    lw_random_begin(&random, 7, 0);
    double sum = 0, square = 0, u = 0, chi2 = 0;
    for (int k = 0; k < ROUNDS; k++) {
        double x[N], y[N], ux[N], uy[N];
        for (int i = 0; i < N; i++) {
            ux[i] = 0.05;
            uy[i] = 0.03 + 0.01 * i;
            x[i] = i + ux[i] * lw_random_normal(&random);
            y[i] = 2 + 0.7 * i + uy[i] * lw_random_normal(&random);
        }
        lw_straight_line line;
        lw_error err = LW_ERROR_NONE;
        CHECK(lw_line_independent(&engine, N, x, y, ux, uy, &line, &err) == LW_OK);
        sum += line.slope - 0.7;
        square += (line.slope - 0.7) * (line.slope - 0.7);
        u += sqrt(line.slope_variance) / ROUNDS;
        chi2 += line.chi2 / ROUNDS;
    }
    CHECK_NEAR(sqrt(square / ROUNDS) / u, 1, 0.045);
    CHECK_NEAR(sum / ROUNDS / u, 0, 4 / sqrt(ROUNDS));
    CHECK_NEAR(chi2, N - 2,
               4 * sqrt(2.0 * (N - 2) / ROUNDS)); /* mean of chi-square of 8 degrees of freedom */
}

static void test_refusals(void)
{
    static const double x[3] = {1, 1, 1}, y[3] = {1, 2, 3}, u[3] = {0.1, 0, 0.1}, x2[3] = {1, 2, 3};
    lw_straight_line line;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_line_plain(&engine, 3, x, y, &line, &err) == LW_NOT_SUPPORTED);
    CHECK_CONTAINS(err.message, "different abscissae");
    err = LW_ERROR_NONE;
    CHECK(lw_line_plain(&engine, 1, x2, y, &line, &err) == LW_NOT_SUPPORTED);
    err = LW_ERROR_NONE;
    CHECK(lw_line_independent(&engine, 3, x2, y, NULL, u, &line, &err) == LW_BAD_ARGUMENT);
    err = LW_ERROR_NONE;
    double nan_y[3] = {1, NAN, 2};
    CHECK(lw_line_plain(&engine, 3, x2, nan_y, &line, &err) == LW_BAD_ARGUMENT);
    /* two points: the line through them, no freedom left */
    err = LW_ERROR_NONE;
    CHECK(lw_line_plain(&engine, 2, x2, y, &line, &err) == LW_OK && line.slope_variance == 0);
    CHECK_NEAR(line.slope, 1, 1e-15);
}

int main(void)
{
    lw_engine_begin(&engine);
    test_york();
    test_gum_h3();
    test_common();
    test_both_correlated();
    test_scatter();
    test_refusals();
    lw_engine_end(&engine);
    return lw_checks_end();
}
