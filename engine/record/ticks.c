/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/ticks.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* printf's point follows the locale; type sets a minus, not a hyphen. */
static void set_label(lw_tick *tick, const char *number)
{
    size_t n = 0;
    for (const char *c = number; *c != '\0' && n + 4 < sizeof tick->label; c++) {
        if (*c == '-') {
            memcpy(tick->label + n, "\xE2\x88\x92", 3);
            n += 3;
        } else
            tick->label[n++] = *c >= '0' && *c <= '9' ? *c : '.';
    }
    tick->label[n] = '\0';
}

static int linear(double low, double high, double labels, lw_tick *tick)
{
    double rough = (high - low) / fmax(labels, 2);
    double decade = pow(10, floor(log10(rough)));
    double step = rough <= decade * 1.0001 ? decade
                  : rough <= 2 * decade    ? 2 * decade
                  : rough <= 5 * decade    ? 5 * decade
                                           : 10 * decade;
    int decimals = (int)fmin(fmax(0, -floor(log10(step) + 1e-9)), 12);
    int n = 0;
    for (double k = ceil(low / step - 1e-9); k * step <= high + 1e-9 * step && n < LW_TICKS_MOST; k++, n++) {
        char number[48];
        tick[n].at = k * step;
        snprintf(number, sizeof number, "%.*f", decimals, k == 0 ? 0 : k * step);
        set_label(&tick[n], number);
    }
    return n;
}

/* m x 10^k for a log axis. */
static void log_label(lw_tick *tick, int m, int k)
{
    char number[48];
    if (k >= -3 && k <= 4) {
        snprintf(number, sizeof number, "%.*f", k < 0 ? -k : 0, tick->at);
        set_label(tick, number);
        return;
    }
    static const char *const raised[] = {"⁰", "¹", "²", "³", "⁴", "⁵", "⁶", "⁷", "⁸", "⁹"};
    char digits[16];
    snprintf(digits, sizeof digits, "%d", k < 0 ? -k : k);
    tick->label[0] = '\0';
    if (m > 1)
        snprintf(tick->label, sizeof tick->label, "%d×", m);
    strcat(tick->label, k < 0 ? "10⁻" : "10");
    for (const char *c = digits; *c != '\0'; c++)
        strcat(tick->label, raised[*c - '0']);
}

static int logarithmic(double low, double high, double labels, lw_tick *tick)
{
    double decades = log10(high / low);
    int every = (int)ceil((decades + 1) / fmax(labels, 2));
    int first = (int)floor(log10(low)), last = (int)ceil(log10(high));
    int n = 0;
    if (last - first > 600)
        return 0;
    for (int k = first; k <= last; k++)
        for (int m = 1; m <= 9 && n < LW_TICKS_MOST; m++) {
            double at = m * pow(10, k);
            bool labelled = m == 1 ? k % every == 0 : decades < 0.5 * labels && (m == 2 || m == 5) && decades < 2.2;
            if (decades < 0.7)
                labelled = true;
            if (at < low * (1 - 1e-9) || at > high * (1 + 1e-9) || (!labelled && decades > 8))
                continue;
            tick[n].at = at;
            tick[n].label[0] = '\0';
            if (labelled)
                log_label(&tick[n], m, k);
            n++;
        }
    return n;
}

int lw_ticks_of(const lw_axis_scale *scale, double labels, lw_tick tick[LW_TICKS_MOST])
{
    double factor = pow(10, -scale->power);
    double low = fmax(scale->low, scale->from) * factor, high = scale->high * factor;
    /* a narrow range of a log axis holds too few of 1, 2 ... 9 */
    if (scale->log && high / low > 2)
        return logarithmic(low, high, labels, tick);
    return linear(low, high, labels, tick);
}
