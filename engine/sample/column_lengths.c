/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/column_lengths.h"

#include "numeric/cholesky.h"

#include <math.h>
#include <string.h>

/* Inverse of a symmetric positive 3x3 matrix; false if it is singular. */
static bool invert3(const double m[3][3], double out[3][3])
{
    double c0 = m[1][1] * m[2][2] - m[1][2] * m[2][1], c1 = m[1][2] * m[2][0] - m[1][0] * m[2][2],
           c2 = m[1][0] * m[2][1] - m[1][1] * m[2][0];
    double d = m[0][0] * c0 + m[0][1] * c1 + m[0][2] * c2;
    if (!(fabs(d) > 1e-14 * m[0][0] * m[1][1] * m[2][2]))
        return false;
    out[0][0] = c0 / d;
    out[1][0] = out[0][1] = c1 / d;
    out[2][0] = out[0][2] = c2 / d;
    out[1][1] = (m[0][0] * m[2][2] - m[0][2] * m[2][0]) / d;
    out[2][1] = out[1][2] = (m[0][1] * m[2][0] - m[0][0] * m[2][1]) / d;
    out[2][2] = (m[0][0] * m[1][1] - m[0][1] * m[1][0]) / d;
    return true;
}

/* Plain least squares over points first..last, with the covariance of the answer from that of the coefficients.
 * Lengths in units of `unit`. */
static bool fit(const lw_size_coefficients *a, size_t first, size_t last, double unit, double p[3], double c[3][3])
{
    double m[3][3] = {{0}}, inverse[3][3], y[3] = {0};
    for (size_t i = first; i <= last; i++) {
        double l = a->step_nm * (double)i / unit, basis[3] = {1, -l, l * l * l};
        for (int j = 0; j < 3; j++) {
            y[j] += basis[j] * a->value[i];
            for (int k = 0; k < 3; k++)
                m[j][k] += basis[j] * basis[k];
        }
    }
    if (last < first + 3 || !invert3(m, inverse))
        return false;
    memset(c, 0, 9 * sizeof(double));
    for (int j = 0; j < 3; j++)
        p[j] = inverse[j][0] * y[0] + inverse[j][1] * y[1] + inverse[j][2] * y[2];
    for (size_t i = first; i <= last; i++)
        for (size_t k = first; k <= last; k++) {
            double li = a->step_nm * (double)i / unit, lk = a->step_nm * (double)k / unit;
            double bi[3] = {1, -li, li * li * li}, bk[3] = {1, -lk, lk * lk * lk};
            for (int r = 0; r < 3; r++)
                for (int q = 0; q < 3; q++) {
                    double wi = inverse[r][0] * bi[0] + inverse[r][1] * bi[1] + inverse[r][2] * bi[2];
                    double wk = inverse[q][0] * bk[0] + inverse[q][1] * bk[1] + inverse[q][2] * bk[2];
                    c[r][q] += wi * a->covariance[i * a->n + k] * wk;
                }
        }
    return true;
}

lw_status lw_columns_slope(const lw_size_coefficients *a, const double range[2], lw_arena *arena, lw_initial_slope *out,
                           lw_error *err)
{
    (void)arena;
    *out = (lw_initial_slope){0};
    /* a first idea of the size: where A has fallen to 0.6, a sphere's coefficient is at 0.41 of its size_area */
    double size = 0;
    for (size_t i = 1; i < a->n; i++)
        if (a->value[i] < 0.6) {
            double before = i > 1 ? a->value[i - 1] : 1;
            size = a->step_nm * ((double)i - (0.6 - a->value[i]) / fmax(before - a->value[i], 1e-12)) / 0.41;
            break;
        }
    if (!(size > 0))
        return lw_fail(err, LW_NOT_SUPPORTED, "scan orders with wider lines, or take the instrument out by another method",
                       "the size coefficients end at %.3g nm before they fall to 0.6", a->step_nm * (double)(a->n - 1));
    double p[3] = {0}, c[3][3], before = 0;
    for (int round = 0; round < 30; round++) {
        size_t first = (size_t)fmax(ceil(range[0] * size / a->step_nm - 1e-9), 1);
        size_t last = (size_t)fmax(floor(range[1] * size / a->step_nm + 1e-9), 0);
        if (last > a->n - 1)
            last = a->n - 1;
        if (last < first + 4 || !fit(a, first, last, size, p, c) || !(p[1] > 0) || !(p[0] > 0))
            return lw_fail(err, LW_NOT_SUPPORTED, "take a smaller step of L, or a wider range for the slope",
                           "the initial slope of the size coefficients is not determined");
        out->low_nm = a->step_nm * (double)first;
        out->high_nm = a->step_nm * (double)last;
        out->points = last - first + 1;
        double next = size * p[0] / p[1], unit = size;
        out->size_area = next;
        out->start = p[0];
        out->slope = p[1] / unit;
        out->cubic = p[2] / (unit * unit * unit);
        double by0 = unit / p[1], by1 = -unit * p[0] / (p[1] * p[1]);
        out->u = sqrt(fmax(by0 * by0 * c[0][0] + by1 * by1 * c[1][1] + 2 * by0 * by1 * c[0][1], 0));
        out->hook = p[0] - 1;
        out->u_hook = sqrt(fmax(c[0][0], 0));
        size_t two_thirds = first + (last - first) * 2 / 3;
        double q[3], d[3][3];
        if (two_thirds >= first + 3 && fit(a, first, two_thirds, unit, q, d) && q[1] > 0) {
            out->u = sqrt(out->u * out->u + pow(unit * q[0] / q[1] - next, 2) / 3);
            out->u_hook = hypot(out->u_hook, (q[0] - p[0]) / sqrt(3));
        }
        if (fabs(next - size) < 1e-3 * size || fabs(next - before) < 1e-12 * next)
            break;
        before = size;
        size = round < 10 ? next : 0.5 * (size + next); /* a range of whole steps may swing between two */
    }
    return LW_OK;
}

bool lw_columns_integral(const lw_size_coefficients *a, const lw_initial_slope *slope, double *size_volume, double *u,
                         const char **why, lw_arena *arena, lw_error *err)
{
    double *weight = lw_arena_take(arena, a->n, sizeof *weight, err), sum = 0, var = 0;
    if (weight == NULL) {
        *why = "memory was refused";
        return false;
    }
    /* below the range of the slope its own polynomial, above it trapezoids */
    double l = slope->low_nm, last = a->value[a->n - 1], u_last = sqrt(a->covariance[a->n * a->n - 1]);
    sum = slope->start * l - slope->slope * l * l / 2 + slope->cubic * l * l * l * l / 4;
    for (size_t i = 0; i < a->n; i++) {
        double at = a->step_nm * (double)i;
        if (at < l - 1e-9)
            continue;
        weight[i] = a->step_nm * (at < l + 0.5 * a->step_nm || i + 1 == a->n ? 0.5 : 1);
        sum += weight[i] * a->value[i];
    }
    for (size_t i = 0; i < a->n; i++)
        for (size_t j = 0; j < a->n; j++)
            var += weight[i] * weight[j] * a->covariance[i * a->n + j];
    /* What is left beyond: the coefficients of crystals are convex, so more than the triangle under their last slope; and
     * they end, so less than the exponential that goes on as they fell. A rectangular distribution between the two. */
    double eighth = a->step_nm * (double)(a->n / 8), before = a->value[a->n - 1 - a->n / 8];
    double fall = fmax((before - last) / eighth, 1e-12), rate = last > 0 ? fmax(log(before / last) / eighth, 1e-12) : 0;
    double least = last > 0 ? last * last / (2 * fall) : 0, most = last > 0 ? last / rate : 0;
    double left = 0.5 * (least + most), u_left = (most - least) / sqrt(12), by_last = last > 0 ? u_last / rate : 0;
    if (last > 0.1 || u_last > 0.1 || !(most < 0.1 * sum)) {
        *why = "the coefficients end before they have died: the integral beyond would be a guess";
        return false;
    }
    *size_volume = 2 * (sum + left) / slope->start;
    *u = 2 / slope->start *
         sqrt(fmax(var, 0) + u_left * u_left + by_last * by_last + pow(sum / slope->start * slope->u_hook, 2));
    return true;
}

/* Least squares |W^(1/2)(A - K q)|^2 + lambda |D q|^2 with q >= 0, from the normal matrix h and right side g: the plain
 * answer, with negative entries held at 0 until none is left and none wants back. */
static bool solve(size_t n, const double *h, const double *g, bool *held, double *work, double *q)
{
    for (int round = 0; round < 200; round++) {
        memcpy(work, h, n * n * sizeof *work);
        memcpy(q, g, n * sizeof *q);
        for (size_t i = 0; i < n; i++)
            if (held[i]) {
                for (size_t j = 0; j < n; j++)
                    work[i * n + j] = work[j * n + i] = 0;
                work[i * n + i] = 1;
                q[i] = 0;
            }
        if (lw_cholesky(work, n, n, 0) != n)
            return false;
        lw_cholesky_solve(work, n, n, q);
        size_t worst = n;
        for (size_t i = 0; i < n; i++)
            if (!held[i] && q[i] < 0 && (worst == n || q[i] < q[worst]))
                worst = i;
        if (worst < n) {
            for (size_t i = 0; i < n; i++)
                if (!held[i] && q[i] < 0.5 * q[worst])
                    held[i] = true;
            continue;
        }
        if (round > 150) /* releasing may go round in circles by rounding */
            break;
        double most = 0;
        size_t back = n;
        for (size_t i = 0; i < n; i++) {
            if (!held[i])
                continue;
            double pull = g[i];
            for (size_t j = 0; j < n; j++)
                pull -= h[i * n + j] * q[j];
            pull /= h[i * n + i] + 1e-300;
            if (pull > most + 1e-9) {
                most = pull;
                back = i;
            }
        }
        if (back == n)
            break;
        held[back] = false;
    }
    return true;
}

lw_status lw_columns_density(const lw_size_coefficients *a, const lw_initial_slope *slope, lw_arena *arena,
                             lw_column_density *out, lw_error *err)
{
    size_t told = a->n - 2, n = told + 2, skip = (size_t)fmax(floor(slope->low_nm / a->step_nm), 1); /* the hook says nothing */
    double *k = lw_arena_take(arena, n * a->n, sizeof *k, err), *w = lw_arena_take(arena, a->n, sizeof *w, err);
    double *base = lw_arena_take(arena, n * n, sizeof *base, err), *smooth = lw_arena_take(arena, n * n, sizeof *smooth, err);
    double *h = lw_arena_take(arena, n * n, sizeof *h, err), *work = lw_arena_take(arena, n * n, sizeof *work, err);
    double *g = lw_arena_take(arena, n, sizeof *g, err), *q = lw_arena_take(arena, n, sizeof *q, err);
    bool *held = lw_arena_take(arena, n, sizeof *held, err);
    *out = (lw_column_density){.n = told,
                               .length_nm = lw_arena_take(arena, n, sizeof(double), err),
                               .density = lw_arena_take(arena, n, sizeof(double), err),
                               .u = lw_arena_take(arena, n, sizeof(double), err)};
    if (err->status != LW_OK)
        return err->status;
    /* unknowns: q_j of columns of length step (j + 1), A(L) = sum (length - L)+ q, a hat of area `step` each. All columns as
     * long as the last coefficient or longer are two entries of their own, at that length and at one and a half of it:
     * they are counted but not smoothed, and not told */
    size_t points = 0;
    for (size_t i = skip; i < a->n; i++) {
        double u = sqrt(fmax(a->covariance[i * a->n + i], 0));
        w[i] = 1 / (u * u + 1e-8);
        points++;
    }
    for (size_t i = 0; i < a->n; i++)
        for (size_t j = 0; j < n; j++) {
            double l = a->step_nm * (double)i;
            double length = j + 1 < n ? a->step_nm * (double)(j + 1) : 1.5 * a->step_nm * (double)(a->n - 1);
            k[i * n + j] = length > l ? (length - l) * a->step_nm : 0;
        }
    for (size_t r = 0; r < n; r++) {
        for (size_t c = 0; c < n; c++)
            for (size_t i = skip; i < a->n; i++)
                base[r * n + c] += w[i] * k[i * n + r] * k[i * n + c];
        for (size_t i = skip; i < a->n; i++)
            g[r] += w[i] * k[i * n + r] * a->value[i];
    }
    /* second differences, with density 0 at length 0 */
    for (size_t r = 0; r + 1 < told; r++) {
        double row[3] = {1, -2, 1};
        for (int x = 0; x < 3; x++)
            for (int y = 0; y < 3; y++) {
                size_t cx = r + (size_t)x, cy = r + (size_t)y; /* columns r-1, r, r+1 are numbered one higher */
                if (cx >= 1 && cy >= 1)
                    smooth[(cx - 1) * n + cy - 1] += row[x] * row[y];
            }
    }
    double scale = 0;
    for (size_t r = 0; r < n; r++)
        scale = fmax(scale, base[r * n + r]);
    double lambda = 1e2 * scale, best = INFINITY;
    for (int round = 0; round < 60; round++, lambda /= 2.5) {
        for (size_t i = 0; i < n * n; i++)
            h[i] = base[i] + lambda * smooth[i];
        for (size_t i = 0; i < n; i++)
            h[i * n + i] += 1e-14 * scale;
        memset(held, 0, n * sizeof *held);
        if (!solve(n, h, g, held, work, q))
            break;
        double chi2 = 0;
        for (size_t i = skip; i < a->n; i++) {
            double r = a->value[i];
            for (size_t j = 0; j < n; j++)
                r -= k[i * n + j] * q[j];
            chi2 += w[i] * r * r;
        }
        best = chi2;
        if (chi2 <= (double)points)
            break;
    }
    out->chi2 = best;
    out->smoothing = lambda;
    double count = 0;
    for (size_t j = 0; j < n; j++)
        count += q[j] * a->step_nm;
    out->beyond = count > 0 ? (q[told] + q[told + 1]) * a->step_nm / count : 1;
    if (!(count > 0))
        return lw_fail(err, LW_NOT_SUPPORTED, NULL, "no distribution of column lengths fits the size coefficients");
    /* u: of the linear answer with the same entries held, through the coefficients' whole covariance */
    double *row = lw_arena_take(arena, a->n, sizeof *row, err), *e = lw_arena_take(arena, n, sizeof *e, err);
    if (row == NULL || e == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t j = 0; j < told; j++) {
        out->length_nm[j] = a->step_nm * (double)(j + 1);
        out->density[j] = q[j] / count;
        if (held[j])
            continue;
        memset(e, 0, n * sizeof *e);
        e[j] = 1;
        lw_cholesky_solve(work, n, n, e); /* row j of the inverse */
        double var = 0;
        for (size_t i = skip; i < a->n; i++) {
            row[i] = 0;
            for (size_t m = 0; m < n; m++)
                row[i] += held[m] ? 0 : e[m] * k[i * n + m] * w[i];
        }
        for (size_t i = skip; i < a->n; i++)
            for (size_t m = skip; m < a->n; m++)
                var += row[i] * row[m] * a->covariance[i * a->n + m];
        out->u[j] = sqrt(fmax(var, 0)) / count;
    }
    /* what the smoothing decides: a hundredth of it is as good for the coefficients. Rectangular distribution */
    for (size_t i = 0; i < n * n; i++)
        h[i] = base[i] + 0.01 * lambda * smooth[i];
    for (size_t i = 0; i < n; i++)
        h[i * n + i] += 1e-14 * scale;
    memset(held, 0, n * sizeof *held);
    if (solve(n, h, g, held, work, q)) {
        count = 0;
        for (size_t j = 0; j < n; j++)
            count += q[j] * a->step_nm;
        /* that the two answers cross somewhere is no knowledge of that place: the mean square around it counts */
        size_t around = told / 8 + 1;
        for (size_t j = 0; j < told && count > 0; j++) {
            size_t low = j > around ? j - around : 0, high = j + around < told ? j + around : told - 1;
            double square = 0;
            for (size_t i = low; i <= high; i++)
                square += pow(q[i] / count - out->density[i], 2) / (double)(high - low + 1);
            out->u[j] = sqrt(out->u[j] * out->u[j] + square / 3);
        }
    }
    return LW_OK;
}
