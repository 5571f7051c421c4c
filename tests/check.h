/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The smallest test harness: a program of checks that prints each failure with its place and values,
 * and ends in a line of counts. */
#ifndef LW_TESTS_CHECK_H
#define LW_TESTS_CHECK_H

#include <math.h>
#include <stdio.h>
#include <string.h>

static int lw_checks_passed, lw_checks_failed;

/* True expression. */
#define CHECK(expression)                                                                                  \
    do {                                                                                                   \
        if (expression)                                                                                    \
            lw_checks_passed++;                                                                            \
        else {                                                                                             \
            lw_checks_failed++;                                                                            \
            fprintf(stderr, "%s:%d: not true: %s\n", __FILE__, __LINE__, #expression);                     \
        }                                                                                                  \
    } while (0)

/* |got - want| <= tolerance (absolute); NaN fails. */
#define CHECK_NEAR(got, want, tolerance)                                                                   \
    do {                                                                                                   \
        double got_ = (got), want_ = (want), tolerance_ = (tolerance);                                     \
        if (fabs(got_ - want_) <= tolerance_)                                                              \
            lw_checks_passed++;                                                                            \
        else {                                                                                             \
            lw_checks_failed++;                                                                            \
            fprintf(stderr, "%s:%d: %s: got %.17g, want %.17g within %.3g (off by %.3g)\n", __FILE__,       \
                    __LINE__, #got, got_, want_, tolerance_, got_ - want_);                                \
        }                                                                                                  \
    } while (0)

/* |got/want - 1| <= tolerance. */
#define CHECK_RELATIVE(got, want, tolerance) CHECK_NEAR((got) / (want), 1.0, (tolerance))

/* text contains part. */
#define CHECK_CONTAINS(text, part)                                                                         \
    do {                                                                                                   \
        if (strstr((text), (part)) != NULL)                                                                \
            lw_checks_passed++;                                                                            \
        else {                                                                                             \
            lw_checks_failed++;                                                                            \
            fprintf(stderr, "%s:%d: \"%s\" does not contain \"%s\"\n", __FILE__, __LINE__, (text), (part)); \
        }                                                                                                  \
    } while (0)

/* Ends main(): counts, and 1 if anything failed or nothing ran. */
static inline int lw_checks_end(void)
{
    printf("%d passed, %d failed\n", lw_checks_passed, lw_checks_failed);
    return lw_checks_failed > 0 || lw_checks_passed == 0;
}

#endif
