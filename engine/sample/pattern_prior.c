/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_prior.h"

#include <math.h>

void lw_pattern_prior_bends(lw_pattern_prior *prior, size_t row, size_t n, double strength)
{
    *prior = (lw_pattern_prior){.row = row, .n = n, .freedom = n, .strength = strength};
    static const double bend[3] = {1, -2, 1};
    for (size_t middle = 0; middle < n + 2; middle++) /* one beyond each end, counted from -1 */
        for (size_t a = 0; a < 3; a++)
            for (size_t b = 0; b < 3; b++) {
                size_t i = middle + a, j = middle + b; /* 2 is the first value */
                if (i >= 2 && i < n + 2 && j >= 2 && j < n + 2)
                    prior->matrix[(i - 2) * n + (j - 2)] += bend[a] * bend[b];
            }
}

void lw_pattern_prior_by_steps(lw_pattern_prior *prior)
{
    size_t n = prior->n;
    for (size_t i = 0; i < n;
         i++) /* value j moves with every step up to j: sums from the end, of columns and rows */
        for (size_t j = n - 1; j > 0; j--)
            prior->matrix[i * n + j - 1] += prior->matrix[i * n + j];
    for (size_t i = n - 1; i > 0; i--)
        for (size_t j = 0; j < n; j++)
            prior->matrix[(i - 1) * n + j] += prior->matrix[i * n + j];
}

double lw_pattern_prior_add(const lw_pattern_prior *prior, const double *p, lw_normal *normal)
{
    size_t n = prior->n;
    const double *own = p + prior->row;
    double penalty = 0, off = -1;
    for (size_t i = 0; i < n; i++)
        off += own[i];
    for (size_t i = 0; i < n; i++) {
        double sum = 0;
        for (size_t j = 0; j < n; j++)
            sum += prior->matrix[i * n + j] * own[j];
        penalty += prior->strength * own[i] * sum;
        if (normal->h == NULL)
            continue;
        size_t row = prior->row + i;
        normal->g[row] -= prior->strength * sum + prior->pin * off;
        for (size_t j = 0; j <= i; j++)
            normal->h[row * normal->n + prior->row + j] +=
                prior->strength * prior->matrix[i * n + j] + prior->pin;
    }
    return penalty + (prior->pin > 0 ? prior->pin * off * off : 0);
}

double lw_pattern_prior_due(const lw_pattern_prior *prior, const double *p, const double *inverse,
                            size_t size, const bool *held, double *counted)
{
    size_t n = prior->n;
    const double *own = p + prior->row;
    double trace = 0, square = 0, freedom = (double)prior->freedom;
    for (size_t i = 0; i < n; i++) {
        freedom -= held[prior->row + i];
        for (size_t j = 0; j < n; j++) {
            trace += prior->matrix[i * n + j] * inverse[(prior->row + j) * size + prior->row + i];
            square += own[i] * prior->matrix[i * n + j] * own[j];
        }
    }
    double determined = fmax(freedom - prior->strength * trace, 0.05);
    *counted = determined;
    return fmin(fmax(determined / fmax(square, 1e-300), 1e-6), 1e12);
}

void lw_pattern_prior_slope(const lw_pattern_prior *prior, const double *p, double *slope)
{
    for (size_t i = 0; i < prior->n; i++)
        for (size_t j = 0; j < prior->n; j++)
            slope[prior->row + i] += prior->strength * prior->matrix[i * prior->n + j] * p[prior->row + j];
}
