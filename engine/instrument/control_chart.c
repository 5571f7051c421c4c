/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/control_chart.h"

#include <math.h>

const char *const lw_chart_rule_name[LW_RULES] = {"beyond_limits", "run",          "trend",
                                                  "two_of_three",  "four_of_five", "hugging"};
const char *const lw_chart_rule_meaning[LW_RULES] = {
    "beyond the control limits (three standard deviations)",
    "the last of too many points in a row on one side of the centre",
    "the last of too many points in a row that only rise or only fall",
    "two of three points beyond two standard deviations on one side",
    "four of five points beyond one standard deviation on one side",
    "the last of fifteen points in a row within one standard deviation: the limits are too wide"};

#define D2 1.128 /* mean range of two normal values over their standard deviation */

/* How many of the last `of` points of the phase up to its point i lie beyond `limit` standard deviations on the side of
 * point i. */
static size_t beyond(const double *value, const lw_chart_phase *phase, size_t i, size_t of, double limit)
{
    size_t count = 0;
    double side = value[phase->first + i] < phase->centre ? -1 : 1;
    for (size_t k = 0; k < of && k <= i; k++)
        count += side * (value[phase->first + i - k] - phase->centre) > limit * phase->sigma;
    return count;
}

static void settle(const double *value, lw_chart_phase *phase)
{
    double sum = 0, ranges = 0;
    for (size_t i = 0; i < phase->n; i++) {
        sum += value[phase->first + i];
        if (i > 0)
            ranges += fabs(value[phase->first + i] - value[phase->first + i - 1]);
    }
    phase->centre = sum / (double)phase->n;
    phase->sigma = phase->n > 1 ? ranges / (double)(phase->n - 1) / D2 : 0;
    phase->lower = phase->centre - 3 * phase->sigma;
    phase->upper = phase->centre + 3 * phase->sigma;
    phase->provisional = phase->n < LW_CHART_BASE;
}

static void judge(const double *value, const lw_chart_phase *phase, size_t run, size_t trend, unsigned *broken)
{
    size_t side = 0, within = 0, rising = 1, falling = 1;
    for (size_t i = 0; i < phase->n; i++) {
        size_t at = phase->first + i;
        double deviation = value[at] - phase->centre, before = i > 0 ? value[at - 1] - phase->centre : 0;
        side = i > 0 && deviation * before > 0 ? side + 1 : deviation != 0;
        rising = i > 0 && value[at] > value[at - 1] ? rising + 1 : 1;
        falling = i > 0 && value[at] < value[at - 1] ? falling + 1 : 1;
        within = fabs(deviation) < phase->sigma ? within + 1 : 0;
        broken[at] = 0;
        if (run > 0 && side >= run)
            broken[at] |= 1u << LW_RULE_RUN;
        if (trend > 0 && (rising >= trend || falling >= trend))
            broken[at] |= 1u << LW_RULE_TREND;
        if (!(phase->sigma > 0))
            continue;
        if (fabs(deviation) > 3 * phase->sigma)
            broken[at] |= 1u << LW_RULE_LIMITS;
        if (fabs(deviation) > 2 * phase->sigma && i >= 1 && beyond(value, phase, i, 3, 2) >= 2)
            broken[at] |= 1u << LW_RULE_TWO_OF_THREE;
        if (fabs(deviation) > phase->sigma && i >= 3 && beyond(value, phase, i, 5, 1) >= 4)
            broken[at] |= 1u << LW_RULE_FOUR_OF_FIVE;
        if (within >= 15)
            broken[at] |= 1u << LW_RULE_HUGGING;
    }
}

size_t lw_control_chart(size_t n, const double *value, const bool *begins, size_t run, size_t trend,
                        lw_chart_phase phase[LW_CHART_PHASES_MOST], unsigned *broken)
{
    size_t phases = 0;
    for (size_t i = 0; i < n; i++) {
        if (i == 0 || (begins != NULL && begins[i] && phases < LW_CHART_PHASES_MOST))
            phase[phases++] = (lw_chart_phase){.first = i};
        phase[phases - 1].n++;
    }
    for (size_t k = 0; k < phases; k++) {
        settle(value, &phase[k]);
        judge(value, &phase[k], run, trend, broken);
    }
    return phases;
}
