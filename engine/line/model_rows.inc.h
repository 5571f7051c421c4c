/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Sums over rows of one block of points, written for LW_LANES at once. Part of a rung of the model. */
#include <string.h>

typedef double lanes __attribute__((vector_size(8 * LW_LANES)));

static inline lanes at(const double *from)
{
    lanes value;
    memcpy(&value, from, sizeof value);
    return value;
}

static inline double sum_of(lanes a)
{
    double part[LW_LANES];
    memcpy(part, &a, sizeof part);
    for (int width = LW_LANES / 2; width > 0; width /= 2)
        for (int i = 0; i < width; i++)
            part[i] += part[i + width];
    return part[0];
}

/* Sum of a[i] b[i] over a block. */
static inline double block_dot(const double *a, const double *b)
{
    lanes even = at(a) * at(b), odd = at(a + LW_LANES) * at(b + LW_LANES);
    for (size_t i = 2 * LW_LANES; i < LW_BLOCK; i += 2 * LW_LANES) {
        even += at(a + i) * at(b + i);
        odd += at(a + i + LW_LANES) * at(b + i + LW_LANES);
    }
    return sum_of(even + odd);
}

/* The sums of four vectors, by pairs, added to h. */
static inline void add_sums(lanes a, lanes b, lanes c, lanes d, double *h, size_t stride)
{
    double sum[4];
#if LW_LANES == 2
    lanes ab = __builtin_shufflevector(a, b, 0, 2) + __builtin_shufflevector(a, b, 1, 3);
    lanes cd = __builtin_shufflevector(c, d, 0, 2) + __builtin_shufflevector(c, d, 1, 3);
    memcpy(sum, &ab, sizeof ab);
    memcpy(sum + 2, &cd, sizeof cd);
#elif LW_LANES == 4
    lanes ab = __builtin_shufflevector(a, b, 0, 4, 2, 6) + __builtin_shufflevector(a, b, 1, 5, 3, 7);
    lanes cd = __builtin_shufflevector(c, d, 0, 4, 2, 6) + __builtin_shufflevector(c, d, 1, 5, 3, 7);
    lanes all = __builtin_shufflevector(ab, cd, 0, 1, 4, 5) + __builtin_shufflevector(ab, cd, 2, 3, 6, 7);
    memcpy(sum, &all, sizeof all);
#else
    lanes ab = __builtin_shufflevector(a, b, 0, 8, 2, 10, 4, 12, 6, 14) +
               __builtin_shufflevector(a, b, 1, 9, 3, 11, 5, 13, 7, 15);
    lanes cd = __builtin_shufflevector(c, d, 0, 8, 2, 10, 4, 12, 6, 14) +
               __builtin_shufflevector(c, d, 1, 9, 3, 11, 5, 13, 7, 15);
    lanes half = __builtin_shufflevector(ab, cd, 0, 1, 8, 9, 4, 5, 12, 13) +
                 __builtin_shufflevector(ab, cd, 2, 3, 10, 11, 6, 7, 14, 15);
    half += __builtin_shufflevector(half, half, 4, 5, 6, 7, 0, 1, 2, 3);
    memcpy(sum, &half, sizeof sum);
#endif
    for (size_t i = 0; i < 4; i++)
        h[i * stride] += sum[i];
}

/* h[r h_stride] += sum of a x row r over `length` (8 or 64) numbers, for n rows `stride` apart; four at once, so that
 * a is loaded once for them. */
static inline void add_long_dots(size_t length, const double *a, const double *rows, size_t stride, size_t n, double *h,
                                 size_t h_stride)
{
    size_t fours = n / 4 * 4;
    for (size_t r = 0; r < fours; r += 4) {
        const double *row = rows + r * stride;
        lanes s0 = {0}, s1 = {0}, s2 = {0}, s3 = {0};
        for (size_t i = 0; i < length; i += LW_LANES) {
            lanes left = at(a + i);
            s0 += left * at(row + i);
            s1 += left * at(row + stride + i);
            s2 += left * at(row + 2 * stride + i);
            s3 += left * at(row + 3 * stride + i);
        }
        add_sums(s0, s1, s2, s3, h + r * h_stride, h_stride);
    }
    for (size_t r = fours; r < n; r++) {
        lanes sum = {0};
        for (size_t i = 0; i < length; i += LW_LANES)
            sum += at(a + i) * at(rows + r * stride + i);
        h[r * h_stride] += sum_of(sum);
    }
}

static inline void add_dots(const double *a, const double *rows, size_t stride, size_t n, double *h, size_t h_stride)
{
    add_long_dots(LW_BLOCK, a, rows, stride, n, h, h_stride);
}

static inline void add_node_dots(const double *a, const double *rows, size_t stride, size_t n, double *h, size_t h_stride)
{
    add_long_dots(LW_BUNDLE_NODES, a, rows, stride, n, h, h_stride);
}

/* to += sum over n rows of factor[r f_stride] x row r. */
static inline void add_rows(const double *factor, size_t f_stride, const double *rows, size_t stride, size_t n, double *to)
{
    enum { PART = 4 * LW_LANES }; /* kept in registers */
    for (size_t i = 0; i < LW_BLOCK; i += PART) {
        lanes s0 = at(to + i), s1 = at(to + i + LW_LANES), s2 = at(to + i + 2 * LW_LANES), s3 = at(to + i + 3 * LW_LANES);
        for (size_t r = 0; r < n; r++) {
            const double *row = rows + r * stride + i;
            double f = factor[r * f_stride];
            s0 += f * at(row);
            s1 += f * at(row + LW_LANES);
            s2 += f * at(row + 2 * LW_LANES);
            s3 += f * at(row + 3 * LW_LANES);
        }
        memcpy(to + i, &s0, sizeof s0);
        memcpy(to + i + LW_LANES, &s1, sizeof s1);
        memcpy(to + i + 2 * LW_LANES, &s2, sizeof s2);
        memcpy(to + i + 3 * LW_LANES, &s3, sizeof s3);
    }
}

/* to = a b, point by point. */
static inline void multiply(const double *a, const double *b, double *to)
{
    for (size_t i = 0; i < LW_BLOCK; i += LW_LANES) {
        lanes product = at(a + i) * at(b + i);
        memcpy(to + i, &product, sizeof product);
    }
}
