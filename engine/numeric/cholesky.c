/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/cholesky.h"

#include <math.h>

double lw_dot(const double *a, const double *b, size_t n)
{
    double s[8] = {0};
    size_t i = 0;
    for (; i + 8 <= n; i += 8)
        for (size_t k = 0; k < 8; k++)
            s[k] += a[i + k] * b[i + k];
    for (; i < n; i++)
        s[i % 8] += a[i] * b[i];
    return ((s[0] + s[4]) + (s[1] + s[5])) + ((s[2] + s[6]) + (s[3] + s[7]));
}

/* to -= c a */
static void take_off(double *restrict to, const double *restrict a, double c, size_t n)
{
    for (size_t i = 0; i < n; i++)
        to[i] -= c * a[i];
}

/* to -= c0 a0 + ... + c3 a3: four pivots at once, so that `to` is loaded and stored once for them */
static void take_off_four(double *restrict to, const double *restrict a, size_t ld, const double c[4],
                          size_t n)
{
    const double *a1 = a + ld, *a2 = a1 + ld, *a3 = a2 + ld;
    double c0 = c[0], c1 = c[1], c2 = c[2], c3 = c[3];
    for (size_t i = 0; i < n; i++)
        to[i] -= (c0 * a[i] + c1 * a1[i]) + (c2 * a2[i] + c3 * a3[i]);
}

size_t lw_cholesky(double *u, size_t n, size_t ld, double least)
{
    for (size_t k = 0; k < n;) {
        size_t width = n - k < 4 ? n - k : 4;
        for (size_t p = k; p < k + width; p++) {
            double *row = u + p * ld;
            if (!(row[p] > least))
                return p;
            double pivot = sqrt(row[p]), inverse = 1 / pivot;
            row[p] = pivot;
            for (size_t j = p + 1; j < n; j++)
                row[j] *= inverse;
            for (size_t i = p + 1; i < k + width; i++)
                take_off(u + i * ld + i, row + i, row[i], n - i);
        }
        if (width == 4)
            for (size_t i = k + 4; i < n; i++) {
                const double *row = u + k * ld + i;
                double c[4] = {row[0], row[ld], row[2 * ld], row[3 * ld]};
                take_off_four(u + i * ld + i, row, ld, c, n - i);
            }
        k += width;
    }
    return n;
}

void lw_cholesky_forward(const double *u, size_t n, size_t ld, double *b)
{
    for (size_t k = 0; k < n; k++) {
        b[k] /= u[k * ld + k];
        take_off(b + k + 1, u + k * ld + k + 1, b[k], n - k - 1);
    }
}

void lw_cholesky_back(const double *u, size_t n, size_t ld, double *b)
{
    for (size_t k = n; k-- > 0;)
        b[k] = (b[k] - lw_dot(u + k * ld + k + 1, b + k + 1, n - k - 1)) / u[k * ld + k];
}

void lw_cholesky_solve(const double *u, size_t n, size_t ld, double *b)
{
    lw_cholesky_forward(u, n, ld, b);
    lw_cholesky_back(u, n, ld, b);
}

void lw_cholesky_invert_factor(double *u, size_t n, size_t ld)
{
    /* row i of V is (e_i - sum over k > i of U[i][k] V[k]) / U[i][i]; with k falling, U[i][k] is read
     * before it is overwritten, as V[k] starts at column k */
    for (size_t i = n; i-- > 0;) {
        double *row = u + i * ld, inverse = 1 / row[i];
        for (size_t k = n; k-- > i + 1;) {
            double c = row[k];
            row[k] = 0;
            take_off(row + k, u + k * ld + k, c, n - k);
        }
        for (size_t k = i + 1; k < n; k++)
            row[k] *= inverse;
        row[i] = inverse;
    }
}

bool lw_cholesky_envelope(const size_t *first, size_t n, size_t border, size_t *end)
{
    size_t core = n - border, reach = 0;
    for (size_t k = 0; k < core; k++)
        end[k] = k + 1;
    for (size_t i = 0; i < core; i++)
        if (end[first[i]] < i + 1)
            end[first[i]] = i + 1;
    double cost = 0;
    for (size_t k = 0; k < core; k++) {
        /* the factor fills up what lies between a row's first number and the row's diagonal */
        reach = end[k] > reach ? end[k] : reach;
        end[k] = reach;
        double wide = (double)(reach - k + border);
        cost += wide * wide;
    }
    cost += (double)border * (double)border * (double)border / 3;
    return cost < 0.5 * (double)n * (double)n * (double)n / 3;
}

size_t lw_cholesky_bordered(double *u, size_t n, size_t ld, const size_t *end, size_t border, double least)
{
    size_t core = n - border;
    for (size_t k = 0; k < n; k++) {
        double *row = u + k * ld;
        size_t to = k < core ? end[k] : n, from = k < core ? core : n;
        if (!(row[k] > least))
            return k;
        double pivot = sqrt(row[k]), inverse = 1 / pivot;
        row[k] = pivot;
        for (size_t j = k + 1; j < to; j++)
            row[j] *= inverse;
        for (size_t j = from; j < n; j++)
            row[j] *= inverse;
        for (size_t i = k + 1; i < to; i++) {
            take_off(u + i * ld + i, row + i, row[i], to - i);
            take_off(u + i * ld + from, row + from, row[i], n - from);
        }
        for (size_t i = from; i < n; i++)
            take_off(u + i * ld + i, row + i, row[i], n - i);
    }
    return n;
}

void lw_cholesky_bordered_inverse(const double *u, size_t n, size_t ld, const size_t *end, size_t border, double *c)
{
    size_t core = n - border;
    for (size_t i = n; i-- > 0;) {
        const double *row = u + i * ld;
        double *to = c + i * n, inverse = 1 / row[i];
        for (size_t j = i; j < n; j++)
            to[j] = 0;
        for (size_t k = i + 1; k < (i < core ? end[i] : n); k++)
            take_off(to + i + 1, c + k * n + i + 1, row[k], n - i - 1);
        for (size_t k = i < core ? core : n; k < n; k++)
            take_off(to + i + 1, c + k * n + i + 1, row[k], n - i - 1);
        double sum = inverse;
        for (size_t j = i + 1; j < n; j++) {
            to[j] *= inverse;
            c[j * n + i] = to[j];
        }
        for (size_t k = i + 1; k < (i < core ? end[i] : n); k++)
            sum -= row[k] * to[k];
        for (size_t k = i < core ? core : n; k < n; k++)
            sum -= row[k] * to[k];
        to[i] = sum * inverse;
    }
}
