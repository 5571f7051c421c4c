/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The loops in which the whole pattern spends its time, one set a rung of the instruction-set ladder. All are
 * compiled from pattern_rung.inc.h; only lanes and machine flags differ (private to sample/). */
#ifndef LW_SAMPLE_PATTERN_RUNG_H
#define LW_SAMPLE_PATTERN_RUNG_H

#include "base/engine.h"

#include <stdbool.h>
#include <stddef.h>

#define LW_PATTERN_BLOCK 128 /* points whose columns are multiplied at once */
#define LW_PATTERN_TILE 4    /* columns are padded to a multiple of it */

/* One curve of a line on the grid, and where its values at the points go. */
typedef struct lw_pattern_channel {
    const double *grid; /* [n_fft] coefficients of a cubic spline, s of the line at n_fft/2 */
    double tail;        /* beyond the grid the curve is tail/s^2 */
    double *sum;        /* [n] or NULL: receives += share x value */
    double share;
    double *also; /* [n] or NULL: receives += also_share x value */
    double also_share;
    double *value; /* [n] or NULL: receives the value */
    double *slope; /* [n] or NULL: receives -d(value)/ds */
} lw_pattern_channel;

/* A column of the normal equations: from[points of the scan] times a number, and times the points' factor if
 * bare. */
typedef struct lw_pattern_source {
    const double *from;
    size_t row; /* of the parameter */
    double times;
    bool bare;
} lw_pattern_source;

/* falls[2 n] = exp(-strength displacement[n]) g[2 n], complex; returns after how many of them all are below
 * 1e-30 of g. */
typedef size_t lw_pattern_falls_fn(size_t n, double strength, const double *displacement, const double *g,
                                   double *falls);
/* c[2 n] = curve[n] x falls[2 n]. */
typedef void lw_pattern_product_fn(size_t n, const double *curve, const double *falls, double *c);
/* grid[n] -= tail x neighbours[n]. */
typedef void lw_pattern_take_off_fn(size_t n, double tail, const double *neighbours, double *grid);
/* The channels of one line at the points s[n], ascending. s0: of the line; per_cell: grid cells a unit of s.
 * Points from first to last lie well within the grid, the others are on the tails. */
typedef void lw_pattern_spread_fn(size_t n, const double *s, double s0, double per_cell, size_t n_fft,
                                  size_t first, size_t last, const lw_pattern_channel *channel,
                                  size_t n_channels);
/* The columns of `points` points from the first on, and the same times their weight,
 * [n_sources][LW_PATTERN_BLOCK] each; g[row] += sum of weighted column x residual. factor, weight, residual:
 * of the scan's points. */
typedef void lw_pattern_columns_fn(size_t points, size_t first, const lw_pattern_source *source,
                                   size_t n_sources, const double *factor, const double *weight,
                                   const double *residual, double *column, double *weighted, double *g);
/* Adds one block to the sums of products of weighted[n_columns][LW_PATTERN_BLOCK] and column[same]; n_columns
 * is a multiple of LW_PATTERN_TILE. total: lanes apart, room for lw_pattern_total_size() numbers, 64-byte
 * aligned. */
typedef void lw_pattern_multiply_fn(size_t n_columns, const double *weighted, const double *column,
                                    double *total);
/* Sum of products a, b (b <= a) out of total. */
typedef double lw_pattern_product_of_fn(const double *total, size_t a, size_t b);

typedef struct lw_pattern_rung {
    const char *name;
    lw_pattern_falls_fn *falls;
    lw_pattern_product_fn *product;
    lw_pattern_take_off_fn *take_off;
    lw_pattern_spread_fn *spread;
    lw_pattern_columns_fn *columns;
    lw_pattern_multiply_fn *multiply;
    lw_pattern_product_of_fn *product_of;
} lw_pattern_rung;

/* The rung asked for, or the best below it that this processor has. */
const lw_pattern_rung *lw_pattern_rung_for(lw_cpu cpu);

/* Numbers that `total` needs for so many columns, on any rung. */
size_t lw_pattern_total_size(size_t n_columns);

extern const lw_pattern_rung lw_pattern_rung_plain, lw_pattern_rung_avx2, lw_pattern_rung_avx512;

#endif
