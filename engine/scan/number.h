/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Decimal numbers of scan files: the double nearest to the text, the same as strtod() in the C locale
 * to the last bit, whatever the locale of the host program.
 * Fast path: a mantissa below 2^53 and a power of ten up to 10^22 are both exact doubles, so that one
 * rounded product or quotient is right (Clinger 1990, Proc. PLDI, 92-101). Anything else goes to strtod(). */
#ifndef LW_SCAN_NUMBER_H
#define LW_SCAN_NUMBER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

/* Zero bytes that must follow any text handed to these functions: they look up to 64 bytes ahead. */
#define LW_NUMBER_SPARE 80

/* Powers of ten that are exact as double (to 10^22) and as integer (to 10^8). */
extern const double lw_power_of_ten[23];
extern const uint64_t lw_whole_power_of_ten[9];

/* Reads the number at s without the fast path.
 * Given:  s      text; optional sign, digits with at most one decimal mark, optional exponent
 *         mark   decimal mark, '.' or ','
 * Returns the first byte after the number, with *value set (infinite on overflow); NULL if there is no
 * number at s or it is longer than 1000 characters. */
const char *lw_number_slow(const char *s, char mark, double *value);

/* The 1 to 8 digits at s as eight digits, leading zeros first: one a byte, the last one in the highest. */
static inline uint64_t lw_digit_bytes(const char *s, unsigned n)
{
    uint64_t w = 0;
#if defined(__BYTE_ORDER__) && __BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__
    memcpy(&w, s, 8);
    w = (w ^ 0x3030303030303030u) << (64 - 8 * n);
#else
    for (unsigned i = 0; i < n; i++)
        w |= (uint64_t)(s[i] - '0') << (8 * (8 - n + i));
#endif
    return w;
}

/* Their value: neighbours are joined to pairs, these to fours, these to the eight. */
static inline uint64_t lw_digit_value(uint64_t w)
{
    w = w * 10 + (w >> 8);
    return ((w & 0x000000FF000000FFu) * 0x000F424000000064u +
            (w >> 16 & 0x000000FF000000FFu) * 0x0000271000000001u) >>
           32;
}

/* Digits at the head of eight bytes (0 to 8), and their value in *digits. */
static inline unsigned lw_eight_digits(const char *s, uint64_t *digits)
{
#if defined(__BYTE_ORDER__) && __BYTE_ORDER__ == __ORDER_LITTLE_ENDIAN__
    uint64_t w;
    memcpy(&w, s, 8);
    /* the high bit is set in the first byte that is not a digit; bytes before it neither carry nor borrow */
    uint64_t other = ((w + 0x4646464646464646u) | (w - 0x3030303030303030u)) & 0x8080808080808080u;
    unsigned n = other == 0 ? 8 : (unsigned)__builtin_ctzll(other) / 8;
    if (n == 0) {
        *digits = 0;
        return 0;
    }
    *digits = lw_digit_value(lw_digit_bytes(s, n));
    return n;
#else
    unsigned n = 0;
    uint64_t sum = 0;
    for (; n < 8 && s[n] >= '0' && s[n] <= '9'; n++)
        sum = sum * 10 + (uint64_t)(s[n] - '0');
    *digits = sum;
    return n;
#endif
}

/* Reads the number at s; see lw_number_slow(). */
static inline const char *lw_number(const char *s, char mark, double *value)
{
    const char *from = s;
    bool negative = *s == '-';
    s += *s == '-' || *s == '+';
    uint64_t mantissa, more;
    unsigned n = lw_eight_digits(s, &mantissa), fraction = 0;
    s += n;
    if (n == 8) {
        n += lw_eight_digits(s, &more);
        mantissa = mantissa * lw_whole_power_of_ten[n - 8] + more;
        s += n - 8;
    }
    if (*s == mark) {
        fraction = lw_eight_digits(++s, &more);
        mantissa = mantissa * lw_whole_power_of_ten[fraction] + more;
        s += fraction;
    }
    n += fraction;
    /* one more digit or an exponent would belong to the number: not for this path */
    if (n == 0 || n > 18 || (unsigned char)(*s - '0') < 10 || (*s | 32) == 'e' ||
        mantissa >= (uint64_t)1 << 53)
        return lw_number_slow(from, mark, value);
    double magnitude = (double)(int64_t)mantissa / lw_power_of_ten[fraction];
    *value = negative ? -magnitude : magnitude;
    return s;
}

#endif
