/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Body of one rung of the whole pattern's loops. The includer sets LW_LANES (numbers done at once), LW_RUNG
 * (the constant to define) and LW_RUNG_NAME. No include guard: each rung is one translation unit. */
#include "sample/pattern_rung.h"

#include <math.h>
#include <string.h>

typedef double vec __attribute__((vector_size(8 * LW_LANES)));
typedef long long mask __attribute__((vector_size(8 * LW_LANES)));
#define INLINE static inline __attribute__((always_inline))
#include "numeric/vector_exp.inc.h"

INLINE vec all(double value)
{
    return (vec){0} + value;
}

INLINE vec load(const double *from, size_t count)
{
    vec value = all(0.0);
    if (count == LW_LANES)
        memcpy(&value, from, sizeof value);
    else
        memcpy(&value, from, count * sizeof *from);
    return value;
}

INLINE void store(double *to, size_t count, vec value)
{
    if (count == LW_LANES)
        memcpy(to, &value, sizeof value);
    else
        memcpy(to, &value, count * sizeof *to);
}

static size_t falls_of(size_t n, double strength, const double *displacement, const double *g, double *falls)
{
    size_t last = n;
    for (size_t j = 0; j < n; j += LW_LANES) {
        size_t count = n - j < LW_LANES ? n - j : LW_LANES;
        double value[LW_LANES];
        vec fall = vector_exp(-strength * load(displacement + j, count));
        memcpy(value, &fall, sizeof value);
        for (size_t i = 0; i < count; i++) {
            falls[2 * (j + i)] = value[i] * g[2 * (j + i)];
            falls[2 * (j + i) + 1] = value[i] * g[2 * (j + i) + 1];
        }
        if (value[count - 1] < 1e-30) { /* displacements grow with length */
            last = j + count;
            break;
        }
    }
    return last;
}

static void product(size_t n, const double *curve, const double *falls, double *c)
{
    for (size_t j = 0; j < n; j++) {
        c[2 * j] = curve[j] * falls[2 * j];
        c[2 * j + 1] = curve[j] * falls[2 * j + 1];
    }
}

static void take_off(size_t n, double tail, const double *neighbours, double *grid)
{
    for (size_t j = 0; j < n; j++)
        grid[j] -= tail * neighbours[j];
}

#if LW_LANES > 2
typedef double four __attribute__((vector_size(32)));

INLINE four four_at(const double *from)
{
    four value;
    memcpy(&value, from, sizeof value);
    return value;
}
#endif

/* tap[k] holds grid[at[lane] + k]: loads of four neighbours a point, turned round. */
INLINE void taps(const double *grid, const long long *at, vec tap[4])
{
#if LW_LANES == 8
#define PAIR(k)                                                                                              \
    __builtin_shufflevector(four_at(grid + at[k]), four_at(grid + at[k + 4]), 0, 1, 2, 3, 4, 5, 6, 7)
    vec a = PAIR(0), b = PAIR(1), c = PAIR(2), d = PAIR(3);
#undef PAIR
    vec even = __builtin_shufflevector(a, b, 0, 8, 2, 10, 4, 12, 6, 14);
    vec odd = __builtin_shufflevector(a, b, 1, 9, 3, 11, 5, 13, 7, 15);
    vec even2 = __builtin_shufflevector(c, d, 0, 8, 2, 10, 4, 12, 6, 14);
    vec odd2 = __builtin_shufflevector(c, d, 1, 9, 3, 11, 5, 13, 7, 15);
    tap[0] = __builtin_shufflevector(even, even2, 0, 1, 8, 9, 4, 5, 12, 13);
    tap[1] = __builtin_shufflevector(odd, odd2, 0, 1, 8, 9, 4, 5, 12, 13);
    tap[2] = __builtin_shufflevector(even, even2, 2, 3, 10, 11, 6, 7, 14, 15);
    tap[3] = __builtin_shufflevector(odd, odd2, 2, 3, 10, 11, 6, 7, 14, 15);
#elif LW_LANES == 4
    four a = four_at(grid + at[0]), b = four_at(grid + at[1]), c = four_at(grid + at[2]),
         d = four_at(grid + at[3]);
    four even = __builtin_shufflevector(a, b, 0, 4, 2, 6), odd = __builtin_shufflevector(a, b, 1, 5, 3, 7);
    four even2 = __builtin_shufflevector(c, d, 0, 4, 2, 6), odd2 = __builtin_shufflevector(c, d, 1, 5, 3, 7);
    tap[0] = __builtin_shufflevector(even, even2, 0, 1, 4, 5);
    tap[1] = __builtin_shufflevector(odd, odd2, 0, 1, 4, 5);
    tap[2] = __builtin_shufflevector(even, even2, 2, 3, 6, 7);
    tap[3] = __builtin_shufflevector(odd, odd2, 2, 3, 6, 7);
#else
    vec a = load(grid + at[0], 2), b = load(grid + at[1], 2), c = load(grid + at[0] + 2, 2),
        d = load(grid + at[1] + 2, 2);
    tap[0] = __builtin_shufflevector(a, b, 0, 2);
    tap[1] = __builtin_shufflevector(a, b, 1, 3);
    tap[2] = __builtin_shufflevector(c, d, 0, 2);
    tap[3] = __builtin_shufflevector(c, d, 1, 3);
#endif
}

INLINE void add_to(double *to, size_t i, size_t count, double share, vec value)
{
    store(to + i, count, load(to + i, count) + share * value);
}

INLINE void hand_out(const lw_pattern_channel *channel, size_t i, size_t count, vec value)
{
    if (channel->sum != NULL)
        add_to(channel->sum, i, count, channel->share, value);
    if (channel->also != NULL)
        add_to(channel->also, i, count, channel->also_share, value);
    if (channel->value != NULL)
        store(channel->value + i, count, value);
}

INLINE void inside(const double *s, size_t i, size_t count, double s0, double per_cell, size_t n_fft,
                   const lw_pattern_channel *channel, size_t n_channels)
{
    const double shift = 6755399441055744.0; /* as in vector_exp */
    /* lanes beyond the count sit on the line's middle */
    vec x = (load(s + i, count) - s0) * per_cell + (double)(n_fft / 2);
    for (size_t lane = count; lane < LW_LANES; lane++)
        x[lane] = (double)(n_fft / 2);
    vec shifted = (x - 0.5) + shift, t = x - (shifted - shift), r = 1.0 - t;
    mask whole = ((mask)shifted & 0xffffffffLL) - 1;
    long long at[LW_LANES];
    memcpy(at, &whole, sizeof at);
    vec t2 = t * t, r2 = r * r;
    vec w0 = r2 * r * (1.0 / 6), w3 = t2 * t * (1.0 / 6), w1 = (0.5 * t - 1.0) * t2 + 2.0 / 3,
        w2 = (0.5 * r - 1.0) * r2 + 2.0 / 3;
    for (size_t c = 0; c < n_channels; c++) {
        vec tap[4];
        taps(channel[c].grid, at, tap);
        hand_out(&channel[c], i, count, (w0 * tap[0] + w1 * tap[1]) + (w2 * tap[2] + w3 * tap[3]));
        if (channel[c].slope != NULL) {
            vec d0 = 0.5 * r2, d3 = -0.5 * t2, d1 = (2.0 - 1.5 * t) * t, d2 = (1.5 * r - 2.0) * r;
            store(channel[c].slope + i, count,
                  per_cell * ((d0 * tap[0] + d1 * tap[1]) + (d2 * tap[2] + d3 * tap[3])));
        }
    }
}

INLINE void outside(const double *s, size_t i, size_t count, double s0, const lw_pattern_channel *channel,
                    size_t n_channels)
{
    vec off = load(s + i, count) - s0;
    for (size_t lane = count; lane < LW_LANES; lane++)
        off[lane] = 1.0;
    vec inverse = 1.0 / off, square = inverse * inverse;
    for (size_t c = 0; c < n_channels; c++) {
        if (channel[c].tail == 0 && channel[c].value == NULL)
            continue;
        hand_out(&channel[c], i, count, channel[c].tail * square);
        if (channel[c].slope != NULL)
            store(channel[c].slope + i, count, (2 * channel[c].tail) * square * inverse);
    }
}

static void spread(size_t n, const double *s, double s0, double per_cell, size_t n_fft, size_t first,
                   size_t last, const lw_pattern_channel *channel, size_t n_channels)
{
    for (size_t i = 0; i < first; i += LW_LANES)
        outside(s, i, first - i < LW_LANES ? first - i : LW_LANES, s0, channel, n_channels);
    size_t i = first;
    for (; i + LW_LANES <= last; i += LW_LANES)
        inside(s, i, LW_LANES, s0, per_cell, n_fft, channel, n_channels);
    if (i < last)
        inside(s, i, last - i, s0, per_cell, n_fft, channel, n_channels);
    for (i = last; i < n; i += LW_LANES)
        outside(s, i, n - i < LW_LANES ? n - i : LW_LANES, s0, channel, n_channels);
}

static void columns(size_t points, size_t first, const lw_pattern_source *source, size_t n_sources,
                    const double *factor, const double *weight, const double *residual, double *column,
                    double *weighted, double *g)
{
    for (size_t a = 0; a < n_sources; a++) {
        const double *from = source[a].from + first;
        double *to = column + a * LW_PATTERN_BLOCK, *weighted_to = weighted + a * LW_PATTERN_BLOCK;
        vec sum = all(0.0);
        for (size_t i = 0; i < LW_PATTERN_BLOCK; i += LW_LANES) {
            size_t count = i >= points ? 0 : points - i < LW_LANES ? points - i : LW_LANES;
            vec value = all(0.0), times = value;
            if (count > 0) {
                value = source[a].times * load(from + i, count);
                if (source[a].bare)
                    value *= load(factor + first + i, count);
                times = value * load(weight + first + i, count);
                sum += times * load(residual + first + i, count);
            }
            store(to + i, LW_LANES, value);
            store(weighted_to + i, LW_LANES, times);
        }
        for (size_t lane = 0; lane < LW_LANES; lane++)
            g[source[a].row] += sum[lane];
    }
}

/* Tiles of 4 x 4 products in registers where there are 32 of them, of 4 x 2 where there are 16. */
#define ACROSS (LW_LANES == 8 ? 4 : 2)

static size_t tile_at(size_t row_tile, size_t a, size_t b)
{
    return ((row_tile * (row_tile + 1) / 2 * LW_PATTERN_TILE + b) * LW_PATTERN_TILE + a) * LW_LANES;
}

static void multiply(size_t n_columns, const double *weighted, const double *column, double *total)
{
    for (size_t row = 0; row < n_columns; row += LW_PATTERN_TILE)
        for (size_t b = 0; b < row + LW_PATTERN_TILE; b += ACROSS) {
            const double *left = weighted + row * LW_PATTERN_BLOCK, *right = column + b * LW_PATTERN_BLOCK;
            vec sum[ACROSS][LW_PATTERN_TILE];
            double *to = total + tile_at(row / LW_PATTERN_TILE, 0, b);
            /* unrolled whole, or the sums would not stay in registers */
#pragma GCC unroll 16
            for (int c = 0; c < ACROSS * LW_PATTERN_TILE; c++)
                sum[c / LW_PATTERN_TILE][c % LW_PATTERN_TILE] = load(to + c * LW_LANES, LW_LANES);
            for (size_t i = 0; i < LW_PATTERN_BLOCK; i += LW_LANES) {
                vec x[LW_PATTERN_TILE];
#pragma GCC unroll 4
                for (int a = 0; a < LW_PATTERN_TILE; a++)
                    x[a] = load(left + a * LW_PATTERN_BLOCK + i, LW_LANES);
#pragma GCC unroll 4
                for (int c = 0; c < ACROSS; c++) {
                    vec y = load(right + c * LW_PATTERN_BLOCK + i, LW_LANES);
#pragma GCC unroll 4
                    for (int a = 0; a < LW_PATTERN_TILE; a++)
                        sum[c][a] += x[a] * y;
                }
            }
#pragma GCC unroll 16
            for (int c = 0; c < ACROSS * LW_PATTERN_TILE; c++)
                store(to + c * LW_LANES, LW_LANES, sum[c / LW_PATTERN_TILE][c % LW_PATTERN_TILE]);
        }
}

static double product_of(const double *total, size_t a, size_t b)
{
    const double *lane = total + tile_at(a / LW_PATTERN_TILE, a % LW_PATTERN_TILE, b);
    double sum = 0;
    for (size_t i = 0; i < LW_LANES; i++)
        sum += lane[i];
    return sum;
}

const lw_pattern_rung LW_RUNG = {.name = LW_RUNG_NAME,
                                 .falls = falls_of,
                                 .product = product,
                                 .take_off = take_off,
                                 .spread = spread,
                                 .columns = columns,
                                 .multiply = multiply,
                                 .product_of = product_of};
