/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/number.h"

#include <locale.h>
#include <stdlib.h>

#define LENGTH_MOST 1000
#define DIGITS_SAFE 19     /* any 19 digits fit 64 bits */
#define EXPONENT_MOST 9999 /* beyond it every number of LENGTH_MOST digits is 0 or infinite */

const double lw_power_of_ten[23] = {1e0,  1e1,  1e2,  1e3,  1e4,  1e5,  1e6,  1e7,  1e8,  1e9,  1e10, 1e11,
                                    1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
const uint64_t lw_whole_power_of_ten[9] = {1, 10, 100, 1000, 10000, 100000, 1000000, 10000000, 100000000};

static bool is_digit(char c)
{
    return c >= '0' && c <= '9';
}

/* strtod() in the C locale, for the calling thread only, so that a host's locale neither matters nor changes.
 */
static double library_number(const char *text)
{
    locale_t plain = newlocale(LC_ALL_MASK, "C", (locale_t)0);
    locale_t before = plain ? uselocale(plain) : (locale_t)0;
    double value = strtod(text, NULL);
    if (plain) {
        uselocale(before);
        freelocale(plain);
    }
    return value;
}

const char *lw_number_slow(const char *s, char mark, double *value)
{
    const char *from = s;
    s += *s == '-' || *s == '+';
    uint64_t mantissa = 0;
    long digits = 0, significant = 0, exponent = 0;
    const char *point = NULL;
    for (;; s++) {
        if (is_digit(*s)) {
            digits++;
            significant += significant > 0 || *s != '0';
            if (significant <= DIGITS_SAFE)
                mantissa = mantissa * 10 + (uint64_t)(*s - '0');
            exponent -= point != NULL;
        } else if (*s == mark && point == NULL)
            point = s;
        else
            break;
    }
    if (digits == 0)
        return NULL;
    if (*s == 'e' || *s == 'E') {
        const char *power = s + 1;
        bool down = *power == '-';
        power += *power == '-' || *power == '+';
        if (is_digit(*power)) { /* else the letter is not part of the number */
            long shown = 0;
            for (; is_digit(*power); power++)
                if (shown <= EXPONENT_MOST)
                    shown = shown * 10 + (*power - '0');
            exponent += down ? -shown : shown;
            s = power;
        }
    }
    size_t length = (size_t)(s - from);
    if (length > LENGTH_MOST)
        return NULL;
    if (significant <= DIGITS_SAFE && mantissa < (uint64_t)1 << 53 && exponent >= -22 && exponent <= 22) {
        double magnitude = (double)(int64_t)mantissa;
        magnitude =
            exponent < 0 ? magnitude / lw_power_of_ten[-exponent] : magnitude * lw_power_of_ten[exponent];
        *value = *from == '-' ? -magnitude : magnitude;
        return s;
    }
    char text[LENGTH_MOST + 1];
    memcpy(text, from, length);
    text[length] = '\0';
    if (point != NULL)
        text[point - from] = '.';
    *value = library_number(text);
    return s;
}
