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
