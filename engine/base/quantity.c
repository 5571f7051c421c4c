/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/quantity.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

lw_quantity lw_quantity_of(double value, double u, const char *unit)
{
    return (lw_quantity){.value = value, .u = u, .unit = unit, .kind = LW_VALUE};
}

lw_quantity lw_lower_limit(double value, double confidence, const char *unit)
{
    return (lw_quantity){.value = value, .unit = unit, .kind = LW_LOWER_LIMIT, .confidence = confidence};
}

lw_quantity lw_upper_limit(double value, double confidence, const char *unit)
{
    return (lw_quantity){.value = value, .unit = unit, .kind = LW_UPPER_LIMIT, .confidence = confidence};
}

/* Value and uncertainty to the place of the uncertainty's second digit, as text without the unit. */
static void print_value(double value, double u, char *text, size_t size)
{
    if (u == 0) {
        snprintf(text, size, "%.6g", value);
        return;
    }
    int place = (int)floor(log10(u)) - 1; /* power of ten of the last shown digit */
    if (rint(u / pow(10, place)) >= 100)
        place++;
    double largest = fmax(fabs(value), u);
    int power = (int)floor(log10(largest));
    if (power >= -4 && power < 7 && place <= 0) {
        int decimals = -place;
        double shown = rint(u / pow(10, place));
        if (decimals == 1 && u >= 1) /* 2.3 has its point inside the uncertainty */
            snprintf(text, size, "%.1f(%.1f)", value, u);
        else
            snprintf(text, size, "%.*f(%.0f)", decimals, value, shown);
    } else if (power >= -4 && power < 7) {
        double step = pow(10, place);
        snprintf(text, size, "%.0f(%.0f)", rint(value / step) * step, rint(u / step) * step);
    } else {
        double scale = pow(10, power);
        int decimals = power - place;
        snprintf(text, size, "%.*f(%.0f)e%d", decimals, value / scale, rint(u / pow(10, place)), power);
    }
}

const char *lw_quantity_text(lw_quantity quantity, char *text, size_t size)
{
    const char *unit = quantity.unit ? quantity.unit : "";
    const char *space = unit[0] ? " " : "";
    if (!isfinite(quantity.value) || (quantity.kind == LW_VALUE && !(quantity.u >= 0 && isfinite(quantity.u))))
        snprintf(text, size, "not determined");
    else if (quantity.kind == LW_VALUE) {
        char number[48];
        print_value(quantity.value, quantity.u, number, sizeof number);
        snprintf(text, size, "%s%s%s", number, space, unit);
    } else
        snprintf(text, size, "%s %.3g%s%s (%.0f %%)", quantity.kind == LW_LOWER_LIMIT ? ">" : "<",
                 quantity.value, space, unit, 100 * quantity.confidence);
    return text;
}
