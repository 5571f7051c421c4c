/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Shewhart control charts of single values. Centre: the mean of a phase; standard deviation: mean moving range
 * over 1.128 (d2 of two values). Shewhart (1931) Economic Control of Quality of Manufactured Product; charts of
 * individuals and rules for patterns as in ISO 7870-2 (limits, run, trend) and, for zones, ISO 8258 and Nelson
 * (1984) J. Qual. Technol. 16, 237. */
#ifndef LW_INSTRUMENT_CONTROL_CHART_H
#define LW_INSTRUMENT_CONTROL_CHART_H

#include <stdbool.h>
#include <stddef.h>

/* Each rule looks at a point and those before it in its phase, and is broken by the point that completes it. */
typedef enum lw_chart_rule {
    LW_RULE_LIMITS,         /* a point beyond three standard deviations */
    LW_RULE_RUN,            /* so many in a row on one side of the centre */
    LW_RULE_TREND,          /* so many in a row, each above (or each below) the one before */
    LW_RULE_TWO_OF_THREE,   /* two of three beyond two standard deviations on one side */
    LW_RULE_FOUR_OF_FIVE,   /* four of five beyond one standard deviation on one side */
    LW_RULE_HUGGING,        /* fifteen in a row within one standard deviation */
    LW_RULES
} lw_chart_rule;

extern const char *const lw_chart_rule_name[LW_RULES];    /* "beyond_limits", "run", "trend" ... */
extern const char *const lw_chart_rule_meaning[LW_RULES];

typedef struct lw_chart_phase {
    size_t first, n;      /* points */
    double centre, sigma; /* sigma 0: fewer than two points, or all equal */
    double lower, upper;  /* centre -+ 3 sigma */
    bool provisional;     /* fewer than LW_CHART_BASE points: the limits are not settled yet */
} lw_chart_phase;
#define LW_CHART_BASE 8
#define LW_CHART_PHASES_MOST 64

/* Draws up a chart.
 * Given:  value[n] in order of time; begins[n] true where a new phase begins (after a service), or NULL
 *         run, trend   lengths of those rules, usually 7
 * Returned: phase[] and their number; broken[n], a bit (1u << rule) for each rule that the point breaks. */
size_t lw_control_chart(size_t n, const double *value, const bool *begins, size_t run, size_t trend,
                        lw_chart_phase phase[LW_CHART_PHASES_MOST], unsigned *broken);

#endif
