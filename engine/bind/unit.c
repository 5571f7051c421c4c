/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Units of products, quotients and powers. A unit is factors "nm", "nm^-1", "MJ/m^3", separated by
 * blanks, '*' or '/'. No prefixes are converted: nm and mm are different names. */
#include "bind/bind.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define FACTOR_MOST 8
#define NAME_MOST 24

typedef struct factors {
    size_t n;
    char name[FACTOR_MOST][NAME_MOST];
    long power[FACTOR_MOST];
} factors;

static bool add_factor(factors *set, const char *name, size_t length, long power)
{
    if (length >= NAME_MOST)
        return false;
    for (size_t i = 0; i < set->n; i++)
        if (strlen(set->name[i]) == length && strncmp(set->name[i], name, length) == 0) {
            set->power[i] += power;
            return true;
        }
    if (set->n == FACTOR_MOST)
        return false;
    memcpy(set->name[set->n], name, length);
    set->name[set->n][length] = '\0';
    set->power[set->n++] = power;
    return true;
}

static bool parse(factors *set, const char *unit, int sign)
{
    int here = sign;
    for (const char *c = unit; *c != '\0';) {
        if (*c == ' ' || *c == '*') {
            c++;
            continue;
        }
        if (*c == '/') {
            here = -sign;
            c++;
            continue;
        }
        size_t length = strcspn(c, " */^");
        const char *name = c;
        long power = 1;
        c += length;
        if (*c == '^') {
            char *end = NULL;
            power = strtol(c + 1, &end, 10);
            c = end > c + 1 ? end : c + 1;
        }
        if (length > 0 && strcmp(name, "1") != 0 && !add_factor(set, name, length, here * power))
            return false;
        here = sign;
    }
    return true;
}

static bool print(const factors *set, char *out, size_t size)
{
    size_t used = 0;
    out[0] = '\0';
    for (size_t i = 0; i < set->n; i++) {
        if (set->power[i] == 0)
            continue;
        const char *space = used > 0 ? " " : "";
        int n = set->power[i] == 1 ? snprintf(out + used, size - used, "%s%s", space, set->name[i])
                                   : snprintf(out + used, size - used, "%s%s^%ld", space, set->name[i], set->power[i]);
        if (n < 0 || used + (size_t)n >= size)
            return false;
        used += (size_t)n;
    }
    return true;
}

bool lwb_unit_product(const char *a, const char *b, int sign, char *out, size_t size)
{
    factors set = {.n = 0};
    return parse(&set, a, 1) && parse(&set, b, sign) && print(&set, out, size);
}

bool lwb_unit_power(const char *a, double power, char *out, size_t size)
{
    factors set = {.n = 0};
    if (!parse(&set, a, 1))
        return false;
    for (size_t i = 0; i < set.n; i++) {
        double raised = (double)set.power[i] * power;
        if (fabs(raised - rint(raised)) > 1e-9)
            return false;
        set.power[i] = (long)rint(raised);
    }
    return print(&set, out, size);
}
