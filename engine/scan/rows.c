/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The fast loop of the text reader. It knows clean rows only and leaves everything else to text.c.
 *
 * Rows have few layouts: where digits stand and where not. The layouts met so far are kept. One look at the places of
 * what is not a digit finds a row's layout, one comparison confirms it, and then every digit's place is known without
 * looking for it. Rows of another layout are read number by number, and their layout is learnt. */
#include "scan/rows.h"

#include "scan/number.h"

#include <stdint.h>
#include <string.h>

#ifdef __SSE2__
#include <emmintrin.h>
#endif

#define DIGITS_MOST 8 /* that are taken at once: exact in a double, and so is any power of ten below */

void lw_rows_begin(lw_rows *rows, const char *end)
{
    memset(rows, 0, sizeof *rows);
    rows->end = end;
    for (size_t i = 0; i < LW_ROWS_LAYOUTS; i++)
        rows->layout[i].marks[0] = 1; /* with nothing within the row, no row has it */
}

#ifdef __SSE2__

static bool is_digit(char c)
{
    return c >= '0' && c <= '9';
}

/* The layout that is remembered for rows of which bit i of `places` says that byte i is not a digit. */
static inline size_t layout_of(uint64_t places)
{
    return (size_t)(places * 0x9E3779B97F4A7C15u >> 58);
}
_Static_assert(LW_ROWS_LAYOUTS == 64, "six bits of the product");

/* Bits of the digits in the bytes [from, to) of eight. */
static uint64_t digit_bits(unsigned from, unsigned to)
{
    uint64_t bits = 0;
    for (unsigned i = from; i < to; i++)
        bits |= (uint64_t)0x0f << (8 * i);
    return bits;
}

/* Finds the columns of a row that was read, up to its newline at p[end]. False if it is not plain: signs, exponents, a
 * number without digits before its mark, too many digits. */
static bool find_columns(const lw_rows *rows, const char *p, size_t end, lw_row_layout *layout)
{
    size_t at = 0;
    unsigned whole[LW_ROWS_COLUMNS_MOST], decimals[LW_ROWS_COLUMNS_MOST];
    for (unsigned k = 0; k < rows->columns; k++) {
        while (p[at] == ' ' || p[at] == '\t' || (k > 0 && p[at] == rows->separator))
            at++;
        size_t begin = at;
        while (is_digit(p[at]))
            at++;
        whole[k] = (unsigned)(at - begin);
        decimals[k] = 0;
        layout->whole_from[k] = (ptrdiff_t)at - 8;
        if (p[at] == rows->mark) {
            begin = ++at;
            while (is_digit(p[at]))
                at++;
            decimals[k] = (unsigned)(at - begin);
        }
        layout->decimals_from[k] = (ptrdiff_t)at - 8;
        if (whole[k] == 0 || whole[k] > DIGITS_MOST || decimals[k] > DIGITS_MOST)
            return false;
        layout->wide |= whole[k] + decimals[k] > DIGITS_MOST;
    }
    while (p[at] == ' ' || p[at] == '\t' || p[at] == '\r')
        at++;
    for (unsigned k = 0; k < rows->columns; k++) {
        unsigned behind = layout->wide ? 0 : decimals[k]; /* room for the decimals in the same eight bytes */
        layout->whole_from[k] += (ptrdiff_t)behind;
        layout->whole[k] = digit_bits(8 - behind - whole[k], 8 - behind);
        layout->decimals[k] = digit_bits(8 - decimals[k], 8);
        layout->power[k] = lw_power_of_ten[decimals[k]];
    }
    return at == end;
}

/* Learns the layout of a row that was read, its newline at p[end]. */
static void learn(lw_rows *rows, const char *p, size_t end)
{
    lw_row_layout found = {.power = {1, 1, 1, 1}};
    if (!find_columns(rows, p, end, &found))
        return;
    uint64_t places = 0;
    for (size_t i = 0; i <= end; i++) {
        found.within[i] = 0xff;
        found.marks[i] = is_digit(p[i]) ? 0 : (unsigned char)p[i];
        places |= (uint64_t)!is_digit(p[i]) << i;
    }
    rows->layout[layout_of(places)] = found;
}

static inline __m128i load(const void *at)
{
    return _mm_loadu_si128((const __m128i *)at);
}

/* Columns k and k + 1 of a row whose layout is known: digits to pairs, these to fours, these to eights. One
 * rounding makes each value, so it is that of strtod(). */
static inline __m128d two_values(const lw_row_layout *layout, const char *p, unsigned k)
{
    uint64_t word[4];
    memcpy(&word[0], p + layout->whole_from[k], 8);
    memcpy(&word[1], p + layout->whole_from[k + 1], 8);
    memcpy(&word[2], p + layout->decimals_from[k], 8);
    memcpy(&word[3], p + layout->decimals_from[k + 1], 8);
    __m128i whole = _mm_set_epi64x((long long)word[1], (long long)word[0]);
    __m128i decimals = _mm_set_epi64x((long long)word[3], (long long)word[2]);
    __m128i v = _mm_or_si128(_mm_and_si128(whole, load(&layout->whole[k])),
                             _mm_and_si128(decimals, load(&layout->decimals[k])));
    v = _mm_add_epi16(_mm_mullo_epi16(_mm_and_si128(v, _mm_set1_epi16(0xff)), _mm_set1_epi16(10)),
                      _mm_srli_epi16(v, 8));
    v = _mm_madd_epi16(v, _mm_set1_epi32(1 << 16 | 100));
    v = _mm_madd_epi16(_mm_packs_epi32(v, v), _mm_set1_epi32(1 << 16 | 10000));
    return _mm_div_pd(_mm_cvtepi32_pd(v), _mm_loadu_pd(&layout->power[k]));
}

/* Column k of a wide layout, or false if it has more digits than a double can hold. */
static inline bool wide_value(const lw_row_layout *layout, const char *p, unsigned k, double *value)
{
    uint64_t whole, decimals;
    memcpy(&whole, p + layout->whole_from[k], 8);
    memcpy(&decimals, p + layout->decimals_from[k], 8);
    uint64_t power = (uint64_t)(int64_t)layout->power[k];
    uint64_t mantissa =
        lw_digit_value(whole & layout->whole[k]) * power + lw_digit_value(decimals & layout->decimals[k]);
    *value = (double)(int64_t)mantissa / layout->power[k];
    return mantissa < (uint64_t)1 << 53;
}

/* Reads a row whose layout is known. Returns the start of the next line; NULL if the layout is another one. */
static inline __attribute__((always_inline)) const char *known_row(const lw_rows *rows, const char *p, double *x,
                                                                   double *y, double *sigma, unsigned columns)
{
    const unsigned pieces = columns == 2 ? 2 : LW_ROWS_LENGTH_MOST / 16;
    const __m128i newline = _mm_set1_epi8('\n'), shift = _mm_set1_epi8((char)(0x80 + '0')),
                  nine = _mm_set1_epi8((char)(0x80 + 9));
    __m128i bytes[LW_ROWS_LENGTH_MOST / 16], other[LW_ROWS_LENGTH_MOST / 16];
    uint64_t ends = (uint64_t)1 << (16 * pieces), places = 0;
    for (unsigned i = 0; i < pieces; i++) {
        bytes[i] = load(p + 16 * i);
        ends |= (uint64_t)(unsigned)_mm_movemask_epi8(_mm_cmpeq_epi8(bytes[i], newline)) << (16 * i);
        /* less the digit nought, as signed bytes: digits are the ten lowest values */
        other[i] = _mm_cmpgt_epi8(_mm_sub_epi8(bytes[i], shift), nine);
        places |= (uint64_t)(unsigned)_mm_movemask_epi8(other[i]) << (16 * i);
    }
    unsigned length = (unsigned)__builtin_ctzll(ends);
    const lw_row_layout *layout = &rows->layout[layout_of(places & (ends ^ (ends - 1)))];
    __m128i same = _mm_set1_epi8(-1);
    for (unsigned i = 0; i < pieces; i++) {
        __m128i here = _mm_and_si128(_mm_and_si128(bytes[i], other[i]), load(&layout->within[16 * i]));
        same = _mm_and_si128(same, _mm_cmpeq_epi8(here, load(&layout->marks[16 * i])));
    }
    if (_mm_movemask_epi8(same) != 0xffff)
        return NULL;
    if (__builtin_expect(layout->wide, 0)) {
        bool fine = wide_value(layout, p, 0, x) && wide_value(layout, p, 1, y) &&
                    (columns == 2 || wide_value(layout, p, 2, sigma));
        return fine ? p + length + 1 : NULL;
    }
    __m128d values = two_values(layout, p, 0);
    _mm_storel_pd(x, values);
    _mm_storeh_pd(y, values);
    if (columns == 3)
        _mm_storel_pd(sigma, two_values(layout, p, 2));
    return p + length + 1;
}

#else

/* Elsewhere every row is read number by number. */
static void learn(lw_rows *rows, const char *p, size_t end)
{
    (void)rows;
    (void)p;
    (void)end;
}

static inline const char *known_row(const lw_rows *rows, const char *p, double *x, double *y, double *sigma,
                                    unsigned columns)
{
    (void)rows;
    (void)p;
    (void)x;
    (void)y;
    (void)sigma;
    (void)columns;
    return NULL;
}

#endif

/* Steps over one separator; NULL if there is none. */
static inline const char *gap(const char *p, char separator)
{
    const char *q = p;
    while (*q == ' ' || *q == '\t')
        q++;
    if (separator == ' ')
        return q > p ? q : NULL;
    if (*q != separator)
        return NULL;
    for (q++; *q == ' ' || *q == '\t';)
        q++;
    return q;
}

/* Reads a clean row number by number into place i. Returns the start of the next line; NULL if it isn't clean. */
static const char *clean_row(const lw_rows *rows, const char *p, size_t i)
{
    while (*p == ' ' || *p == '\t')
        p++;
    for (unsigned k = 0; k < rows->columns; k++)
        if ((k > 0 && (p = gap(p, rows->separator)) == NULL) ||
            (p = lw_number(p, rows->mark, &rows->column[k][i])) == NULL)
            return NULL;
    while (*p == ' ' || *p == '\t' || *p == '\r')
        p++;
    return *p == '\n' ? p + 1 : NULL;
}

static inline __attribute__((always_inline)) const char *read_clean(lw_rows *rows, const char *p, size_t most,
                                                                    unsigned columns)
{
    const char *end = rows->end;
    size_t i = rows->n;
    double *x = rows->column[0], *y = rows->column[1], *sigma = rows->column[2];
    for (size_t stop = i + most; i < stop && p < end; i++) {
        const char *q = known_row(rows, p, x + i, y + i, columns == 3 ? sigma + i : NULL, columns);
        if (q == NULL) {
            q = clean_row(rows, p, i);
            if (q == NULL)
                break;
            if ((size_t)(q - p) <= (columns == 2 ? 32 : LW_ROWS_LENGTH_MOST))
                learn(rows, p, (size_t)(q - p) - 1);
        }
        p = q;
    }
    rows->n = i;
    return p;
}

const char *lw_rows_read(lw_rows *rows, const char *p, size_t most)
{
    return rows->columns == 2 ? read_clean(rows, p, most, 2) : read_clean(rows, p, most, 3);
}
