/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Least squares: bounds, fixed parameters, points where the model fails, scales, cancelling, memory; and
 * the inverse of the normal matrix. Answers are closed forms, stated at each. */
#include "check.h"
#include "numeric/cholesky.h"
#include "numeric/least_squares.h"
#include "numeric/random.h"

#include <stdint.h>
#include <stdlib.h>

static lw_engine engine;

/* chi2 = (p - c)' A (p - c), A given in full: the exact minimum under bounds follows by hand. */
typedef struct quadratic {
    size_t n;
    const double *a, *c;
} quadratic;

static lw_status evaluate_quadratic(void *user, const double *p, bool want_normal, lw_normal *normal,
                                    lw_error *err)
{
    const quadratic *q = user;
    (void)err;
    normal->chi2 = 3; /* the noise that no parameter explains */
    for (size_t i = 0; i < q->n; i++)
        for (size_t j = 0; j < q->n; j++) {
            double a = q->a[i * q->n + j];
            normal->chi2 += a * (p[i] - q->c[i]) * (p[j] - q->c[j]);
            if (want_normal) {
                normal->g[i] += a * (q->c[j] - p[j]);
                if (j <= i)
                    normal->h[i * q->n + j] = a;
            }
        }
    return LW_OK;
}

static void test_bounds(void)
{
    /* A = [2 1; 1 2], centre (1, 1). With p1 <= 0: minimise over p2 at p1 = 0: p2 = 1 - (1/2)(0 - 1) = 1.5;
     * chi2 = 3 + 2 - 1 + 0.5 = 4.5 */
    static const double a[4] = {2, 1, 1, 2}, c[2] = {1, 1};
    quadratic q = {2, a, c};
    double upper[2] = {0, INFINITY}, lower[2] = {-INFINITY, -INFINITY};
    lw_problem problem = {.n = 2, .lower = lower, .upper = upper, .evaluate = evaluate_quadratic, .user = &q};
    static const double starts[][2] = {{0, 0}, {-5, 7}, {0, 1.5}, {9, -3}, {-1e-9, 1e6}};
    for (size_t i = 0; i < sizeof starts / sizeof *starts; i++) {
        double p[2] = {starts[i][0], starts[i][1]};
        bool at_bound[2];
        lw_fit_outcome outcome;
        lw_error err = LW_ERROR_NONE;
        CHECK(lw_least_squares(&engine, &problem, NULL, p, at_bound, &outcome, &err) == LW_OK);
        CHECK(outcome.converged && outcome.n_active == 1 && at_bound[0] && !at_bound[1]);
        CHECK(p[0] == 0);
        CHECK_NEAR(p[1], 1.5, 1e-6);
        CHECK_NEAR(outcome.chi2, 4.5, 1e-9);
    }
    /* the bound lets go when the centre lies inside: from a start on the bound */
    upper[0] = 4;
    lower[0] = -2;
    double p[2] = {-2, 30};
    bool at_bound[2];
    lw_fit_outcome outcome;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_least_squares(&engine, &problem, NULL, p, at_bound, &outcome, &err) == LW_OK);
    CHECK(outcome.converged && outcome.n_active == 0 && !at_bound[0]);
    CHECK_NEAR(p[0], 1, 1e-6);
    CHECK_NEAR(p[1], 1, 1e-6);
    /* a corner: both held, and a fixed parameter stays where it is */
    double both[2] = {0.5, 0.25};
    problem.upper = both;
    p[0] = p[1] = -1;
    CHECK(lw_least_squares(&engine, &problem, NULL, p, at_bound, &outcome, &err) == LW_OK);
    CHECK(outcome.converged && outcome.n_active == 2 && p[0] == 0.5 && p[1] == 0.25);
    bool fixed[2] = {true, false};
    problem.upper = NULL;
    problem.fixed = fixed;
    p[0] = -1;
    p[1] = 0;
    CHECK(lw_least_squares(&engine, &problem, NULL, p, at_bound, &outcome, &err) == LW_OK);
    CHECK(outcome.converged && p[0] == -1);
    CHECK_NEAR(p[1], 2, 1e-6); /* 1 - (1/2)(-1 - 1) */
}

/* Non-negative least squares against brute force: over every subset of held parameters the exact solution
 * of the rest; the feasible one with the least chi2 is the answer (convex problem). */
static void test_many_bounds(void)
{
    enum { N = 6 };
    unsigned seed = 1;
    for (int round = 0; round < 200; round++) {
        double b[N][N], a[N * N], c[N];
        for (int i = 0; i < N; i++) {
            for (int j = 0; j < N; j++) {
                seed = seed * 1664525u + 1013904223u;
                b[i][j] = (double)(seed >> 8) / (1 << 24) - 0.5;
            }
            seed = seed * 1664525u + 1013904223u;
            c[i] = (double)(seed >> 8) / (1 << 24) - 0.5;
        }
        for (int i = 0; i < N; i++)
            for (int j = 0; j < N; j++) {
                a[i * N + j] = i == j ? 0.01 : 0;
                for (int k = 0; k < N; k++)
                    a[i * N + j] += b[k][i] * b[k][j];
            }
        quadratic q = {N, a, c};
        double best = INFINITY, lower[N] = {0}, p[N];
        for (unsigned held = 0; held < 1u << N; held++) {
            /* Gauss elimination of the free block: sum_j a_ij (p_j - c_j) = 0 */
            double m[N][N + 1] = {{0}};
            for (int i = 0; i < N; i++)
                if (held >> i & 1)
                    m[i][i] = 1;
                else
                    for (int j = 0; j < N; j++) {
                        m[i][j] = held >> j & 1 ? 0 : a[i * N + j];
                        m[i][N] += a[i * N + j] * c[j];
                    }
            for (int k = 0; k < N; k++)
                for (int i = 0; i < N; i++) {
                    double f = i == k ? 0 : m[i][k] / m[k][k];
                    for (int j = k; j <= N && f != 0; j++)
                        m[i][j] -= f * m[k][j];
                }
            bool feasible = true;
            for (int i = 0; i < N; i++) {
                p[i] = m[i][N] / m[i][i];
                feasible = feasible && p[i] >= 0;
            }
            lw_normal normal;
            evaluate_quadratic(&q, p, false, &normal, NULL);
            if (feasible && normal.chi2 < best)
                best = normal.chi2;
        }
        lw_problem problem = {.n = N, .lower = lower, .evaluate = evaluate_quadratic, .user = &q};
        lw_fit_outcome outcome;
        lw_error err = LW_ERROR_NONE;
        for (int i = 0; i < N; i++)
            p[i] = round % 2 ? 1.0 : 0.0;
        CHECK(lw_least_squares(&engine, &problem, NULL, p, NULL, &outcome, &err) == LW_OK);
        CHECK(outcome.converged);
        CHECK_RELATIVE(outcome.chi2, best, 1e-9);
    }
}

/* Exact data: y = 3e12 exp(-0.3 x) on x = 0..19; the model refuses rates below 0.1. The amplitude is 1e13
 * times the rate. */
static int barrier_hits;

static lw_status evaluate_decay(void *user, const double *p, bool want_normal, lw_normal *normal,
                                lw_error *err)
{
    (void)user;
    (void)err;
    if (p[1] <= 0.1) { /* "can't be evaluated" */
        barrier_hits++;
        normal->chi2 = NAN;
        return LW_OK;
    }
    normal->chi2 = 0;
    for (int i = 0; i < 20; i++) {
        double shape = exp(-p[1] * i), r = 3e12 * exp(-0.3 * i) - p[0] * shape;
        double column[2] = {shape, -p[0] * i * shape};
        normal->chi2 += r * r;
        for (size_t k = 0; want_normal && k < 2; k++) {
            normal->g[k] += column[k] * r;
            for (size_t j = 0; j <= k; j++)
                normal->h[k * 2 + j] += column[k] * column[j];
        }
    }
    return LW_OK;
}

static void test_scales(void)
{
    lw_problem problem = {.n = 2, .evaluate = evaluate_decay};
    lw_fit_outcome outcome;
    lw_error err = LW_ERROR_NONE;
    double p[2] = {1e12, 0.7};
    CHECK(lw_least_squares(&engine, &problem, NULL, p, NULL, &outcome, &err) == LW_OK);
    CHECK(outcome.converged && barrier_hits > 0);
    CHECK_RELATIVE(p[0], 3e12, 1e-10);
    CHECK_RELATIVE(p[1], 0.3, 1e-10);
    p[1] = 0.05; /* fails at the start */
    CHECK(lw_least_squares(&engine, &problem, NULL, p, NULL, &outcome, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "starting values");
    err = LW_ERROR_NONE;
    p[1] = NAN;
    CHECK(lw_least_squares(&engine, &problem, NULL, p, NULL, &outcome, &err) == LW_BAD_ARGUMENT);
    lw_fit_control short_run = lw_fit_control_defaults();
    short_run.iterations_most = 1;
    err = LW_ERROR_NONE;
    p[1] = 1.7;
    CHECK(lw_least_squares(&engine, &problem, &short_run, p, NULL, &outcome, &err) == LW_OK);
    CHECK(!outcome.converged && outcome.iterations == 1);
    CHECK_CONTAINS(outcome.reason, "iteration limit");
}

static bool yes(void *user)
{
    (void)user;
    return true;
}

static int refuse_after;

static void *refusing(void *user, void *block, size_t old_size, size_t new_size)
{
    lw_allocator system = lw_system_allocator();
    (void)user;
    if (new_size > 0 && refuse_after-- <= 0)
        return NULL;
    return system.resize(system.user, block, old_size, new_size);
}

static void test_refusals(void)
{
    lw_problem problem = {.n = 2, .evaluate = evaluate_decay};
    lw_fit_outcome outcome;
    double p[2] = {1e11, 1.7}, c[4], h[4] = {1, 0, 0, 1};
    lw_engine refused = engine;
    refused.allocator.resize = refusing;
    refuse_after = 0;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_least_squares(&refused, &problem, NULL, p, NULL, &outcome, &err) == LW_OUT_OF_MEMORY);
    CHECK(err.status == LW_OUT_OF_MEMORY);
    err = LW_ERROR_NONE;
    CHECK(lw_invert_normal(&refused, h, 2, NULL, c, NULL, &err) == LW_OUT_OF_MEMORY);
    lw_engine stopped = engine;
    stopped.cancelled = yes;
    err = LW_ERROR_NONE;
    CHECK(lw_least_squares(&stopped, &problem, NULL, p, NULL, &outcome, &err) == LW_CANCELLED);
}

static void test_inverse(void)
{
    /* Hilbert matrix of order 6: its inverse is of whole numbers,
     * (-1)^(i+j) (i+j-1) C(n+i-1, n-j) C(n+j-1, n-i) C(i+j-2, i-1)^2 (Choi 1983 Am. Math. Mon. 90, 301);
     * rows and columns scaled by powers of ten must not matter */
    enum { N = 6 };
    static const double first_row[N] = {36, -630, 3360, -7560, 7560, -2772};
    static const double scale[N] = {1, 1e6, 1e-6, 1e3, 1, 1e-9};
    double h[N * N], c[N * N];
    size_t weakest = 99;
    lw_error err = LW_ERROR_NONE;
    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++)
            h[i * N + j] = j <= i ? scale[i] * scale[j] / (i + j + 1) : NAN; /* the upper part is not read */
    CHECK(lw_invert_normal(&engine, h, N, NULL, c, &weakest, &err) == LW_OK);
    for (int j = 0; j < N; j++) {
        CHECK_RELATIVE(c[j] * scale[0] * scale[j], first_row[j], 1e-8);
        CHECK(c[j] == c[j * N]);
    }
    CHECK_RELATIVE(c[35] * scale[5] * scale[5], 698544, 1e-8);
    /* without rows 1..5 the rest is 1/h */
    bool skip[N] = {false, true, true, true, true, true};
    CHECK(lw_invert_normal(&engine, h, N, skip, c, &weakest, &err) == LW_OK);
    CHECK(c[0] == 1 && c[7] == 0 && c[35] == 0 && c[30] == 0);
    /* the second and fourth columns of the model are alike, the fourth half as large */
    double x[12][4], g[16] = {0};
    for (int i = 0; i < 12; i++) {
        x[i][0] = 1;
        x[i][1] = sin(i);
        x[i][2] = i;
        x[i][3] = 0.5 * x[i][1];
        for (int a = 0; a < 4; a++)
            for (int b = 0; b < 4; b++)
                g[4 * a + b] += x[i][a] * x[i][b];
    }
    CHECK(lw_invert_normal(&engine, g, 4, NULL, c, &weakest, &err) == LW_NOT_SUPPORTED);
    CHECK(weakest == 1 || weakest == 3);
    g[10] = 0;
    CHECK(lw_invert_normal(&engine, g, 4, NULL, c, &weakest, &err) == LW_NOT_SUPPORTED);
    CHECK(weakest == 2);
    /* a large one, A = M + n I: A times its inverse is the unit matrix */
    enum { BIG = 129 };
    static double big[BIG * BIG], inverse[BIG * BIG];
    for (int i = 0; i < BIG; i++)
        for (int j = 0; j < BIG; j++)
            big[i * BIG + j] = cos(0.37 * i * j + i + j) + (i == j ? 2 * BIG : 0);
    CHECK(lw_invert_normal(&engine, big, BIG, NULL, inverse, &weakest, &err) == LW_OK);
    double worst = 0;
    for (int i = 0; i < BIG; i++)
        for (int j = 0; j < BIG; j++) {
            double sum = i == j ? -1 : 0;
            for (int k = 0; k < BIG; k++)
                sum += big[i * BIG + k] * inverse[k * BIG + j];
            worst = fmax(worst, fabs(sum));
        }
    CHECK_NEAR(worst, 0, 1e-13);
}

/* Lines of four parameters that meet their neighbours, and a border: the factor within the envelope against the dense
 * one, the inverse by recursion against the one by the inverted factor, and the same through the normal matrix with
 * parameters left out. */
static void test_border(void)
{
    enum { LINES = 30, OWN = 4, BORDER = 9, N = LINES * OWN + BORDER, LD = (N + 7) / 8 * 8, SAMPLES = 400 };
    static double h[N * N], dense[N * LD], bordered[N * LD], inverse[N * N], c[2][N * N];
    size_t first[N], end[N], weakest;
    lw_random random;
    lw_random_begin(&random, 12, 0);
    /* J'J of samples that see two or three lines each and the border */
    for (int sample = 0; sample < SAMPLES; sample++) {
        double row[N] = {0};
        size_t line = (size_t)(sample * LINES / SAMPLES);
        for (size_t k = line > 0 ? line - 1 : 0; k <= line + (size_t)(line % 5 == 0) && k < LINES; k++)
            for (size_t j = 0; j < OWN; j++)
                row[k * OWN + j] = lw_random_normal(&random);
        for (size_t j = N - BORDER; j < N; j++)
            row[j] = lw_random_normal(&random);
        for (size_t i = 0; i < N; i++)
            for (size_t j = 0; j <= i; j++)
                h[i * N + j] += row[i] * row[j];
    }
    for (size_t i = 0; i < N; i++) {
        first[i] = i;
        for (size_t j = i + 1; j-- > 0;) {
            dense[j * LD + i] = bordered[j * LD + i] = h[i * N + j];
            if (h[i * N + j] != 0)
                first[i] = j;
        }
    }
    CHECK(lw_cholesky_envelope(first, N, BORDER, end));
    CHECK(end[0] > OWN && end[0] < N - BORDER);
    CHECK(lw_cholesky(dense, N, LD, 0) == N);
    CHECK(lw_cholesky_bordered(bordered, N, LD, end, BORDER, 0) == N);
    for (size_t i = 0; i < N; i++)
        for (size_t j = i; j < N; j++)
            CHECK_NEAR(bordered[i * LD + j], dense[i * LD + j], 1e-12 * dense[i * LD + i] + 1e-12);
    lw_cholesky_bordered_inverse(bordered, N, LD, end, BORDER, inverse);
    lw_cholesky_invert_factor(dense, N, LD);
    for (size_t i = 0; i < N; i++)
        for (size_t j = 0; j < N; j++) {
            size_t a = i > j ? i : j;
            double want = lw_dot(dense + i * LD + a, dense + j * LD + a, N - a);
            CHECK_NEAR(inverse[i * N + j], want, 1e-11 * sqrt(inverse[i * N + i] * inverse[j * N + j]));
        }
    bool skip[N] = {false};
    skip[2] = skip[17] = skip[N - 3] = true;
    CHECK(lw_invert_normal(&engine, h, N, skip, c[0], &weakest, NULL) == LW_OK);
    CHECK(lw_invert_bordered(&engine, h, N, BORDER, skip, c[1], &weakest, NULL) == LW_OK);
    for (size_t i = 0; i < N; i++)
        for (size_t j = 0; j < N; j++)
            CHECK_NEAR(c[1][i * N + j], c[0][i * N + j], 1e-11 * sqrt(c[0][i * N + i] * c[0][j * N + j]));
    /* a parameter that another one repeats is named either way */
    for (size_t j = 0; j < N; j++)
        h[41 * N + j] = h[j * N + 41] = j < 40 ? h[40 * N + j] : h[j * N + 40];
    h[41 * N + 40] = h[40 * N + 41] = h[41 * N + 41] = h[40 * N + 40];
    for (size_t border = 0; border <= BORDER; border += BORDER) {
        CHECK(lw_invert_bordered(&engine, h, N, border, NULL, c[1], &weakest, NULL) == LW_NOT_SUPPORTED);
        CHECK(weakest == 40 || weakest == 41);
    }
}

int main(void)
{
    lw_engine_begin(&engine);
    test_bounds();
    test_many_bounds();
    test_scales();
    test_refusals();
    test_inverse();
    test_border();
    lw_engine_end(&engine);
    return lw_checks_end();
}
