/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/reader.h"

#include <math.h>
#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#define POINTS_LEAST 3
#define VALUE_MOST 1e15

__attribute__((format(printf, 6, 7))) static lw_status refuse(const lw_columns *columns, const char *file,
                                                              size_t i, const char *remedy, lw_error *err,
                                                              const char *format, ...)
{
    char message[300];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(message, sizeof message, format, arguments);
    va_end(arguments);
    if (columns->line_of != NULL)
        return lw_fail_at(err, LW_BAD_DATA, file, columns->line_of(columns, i), remedy, "%s", message);
    return lw_fail_at(err, LW_BAD_DATA, file, 0, remedy, "point %zu: %s", i + 1, message);
}

/* Points that are judged at once, without a way out between them; in pairs, which compilers don't form by themselves
 * from comparisons that might trap. */
#define AT_ONCE 256
typedef double pair __attribute__((vector_size(16)));
typedef int64_t judged __attribute__((vector_size(16))); /* -1 for yes; sums, since those stay in vectors */

static inline pair pair_at(const double *x)
{
    pair two;
    memcpy(&two, x, sizeof two);
    return two;
}

static inline bool all_of(judged sum, size_t n)
{
    return sum[0] + sum[1] == -(int64_t)n;
}

/* The first of the points from i on that may be the one where angles don't ascend within 0 to 180. */
static size_t ascend_until(const double *x, size_t n)
{
    size_t i = 1;
    if (!(x[0] > 0))
        return 0;
    for (; i + AT_ONCE <= n; i += AT_ONCE) {
        judged good = {0, 0};
        for (size_t k = i; k < i + AT_ONCE; k += 2)
            good += pair_at(x + k) > pair_at(x + k - 1);
        if (!all_of(good, AT_ONCE))
            break;
    }
    while (i < n && x[i] > x[i - 1])
        i++;
    /* they ascend so far, so that the last one below 180 vouches for all */
    for (; i > 0 && !(x[i - 1] < 180); i--)
        ;
    return i;
}

/* The first point whose value is beyond VALUE_MOST, or not finite. */
static size_t moderate_until(const double *values, size_t n)
{
    size_t i = 0;
    for (; i + AT_ONCE <= n; i += AT_ONCE) {
        judged below = {0, 0}, above = {0, 0};
        for (size_t k = i; k < i + AT_ONCE; k += 2) {
            below += pair_at(values + k) <= VALUE_MOST;
            above += pair_at(values + k) >= -VALUE_MOST;
        }
        if (!all_of(below, AT_ONCE) || !all_of(above, AT_ONCE))
            break;
    }
    while (i < n && fabs(values[i]) <= VALUE_MOST)
        i++;
    return i;
}

/* Whether no value is negative and, if they must be, all are whole numbers. */
static bool are_counts(const double *values, size_t n, bool must)
{
    size_t i = 0;
    for (; i + AT_ONCE <= n; i += AT_ONCE) {
        judged positive = {0, 0}, whole = {0, 0};
        for (size_t k = i; k < i + AT_ONCE; k += 2) {
            pair value = pair_at(values + k);
            positive += value >= 0;
            /* adding and taking off 2^52 rounds to a whole number what is below it, as all values are */
            whole += (value + 0x1p52) - 0x1p52 == value;
        }
        if (!all_of(positive, AT_ONCE) || (must && !all_of(whole, AT_ONCE)))
            return false;
    }
    while (i < n && values[i] >= 0 && (!must || (values[i] + 0x1p52) - 0x1p52 == values[i]))
        i++;
    return i == n;
}

static lw_status check_angles(const lw_columns *columns, const char *file, lw_error *err)
{
    const double *x = columns->two_theta_deg;
    size_t n = columns->n, i = ascend_until(x, n);
    if (i == n)
        return LW_OK;
    if (!isfinite(x[i]))
        return refuse(columns, file, i, "delete the row or correct it", err, "2theta is not a finite number");
    if (!(x[i] > 0 && x[i] < 180))
        return refuse(columns, file, i, "the first column must be 2theta in degrees", err,
                      "2theta is %.10g degrees, outside 0 to 180", x[i]);
    if (x[i] == x[i - 1])
        return refuse(columns, file, i,
                      columns->doubt
                          ? columns->doubt
                          : "delete the repeated row; if the angles were rounded, export more digits",
                      err, "2theta %.10g degrees is there twice", x[i]);
    bool all = true;
    for (size_t k = 1; k < n; k++)
        all = all && x[k] < x[k - 1];
    return refuse(columns, file, i,
                  all ? "the scan runs downwards: sort its rows by 2theta, lowest first"
                  : columns->doubt
                      ? columns->doubt
                      : "sort the rows by 2theta, lowest first; split the file if it holds several scans",
                  err, "2theta falls from %.10g to %.10g degrees", x[i - 1], x[i]);
}

static lw_status check_values(const lw_columns *columns, const char *file, const double *values,
                              const char *what, lw_error *err)
{
    size_t i = moderate_until(values, columns->n);
    if (i == columns->n)
        return LW_OK;
    if (!isfinite(values[i]))
        return refuse(columns, file, i, "delete the row or correct it", err, "%s is not a finite number",
                      what);
    return refuse(columns, file, i, "correct the row, or divide all intensities by one number", err,
                  "%s is %g, beyond %g", what, values[i], VALUE_MOST);
}

static lw_status check_sigma(const lw_columns *columns, const char *file, lw_error *err)
{
    for (size_t i = 0; i < columns->n; i++)
        if (!(columns->sigma[i] > 0))
            return refuse(columns, file, i,
                          "give each point a standard uncertainty above 0, or read with noise = \"counts\" "
                          "or \"scaled\"",
                          err, "sigma is %g", columns->sigma[i]);
    return LW_OK;
}

lw_status lw_columns_check(const lw_columns *columns, const char *file, int wanted, lw_noise *noise,
                           lw_error *err)
{
    if (columns->n < POINTS_LEAST)
        return lw_fail_at(err, LW_BAD_DATA, file, 0, "a scan has at least 3 points", "only %zu point%s",
                          columns->n, columns->n == 1 ? "" : "s");
    lw_status status = check_angles(columns, file, err);
    if (status == LW_OK)
        status = check_values(columns, file, columns->intensity, "the intensity", err);
    bool wants_sigma = wanted == 2 || (wanted == 0 && columns->sigma != NULL);
    if (status == LW_OK && wants_sigma && columns->sigma == NULL)
        return lw_fail_at(
            err, LW_BAD_DATA, file, 0,
            "add a third column with the standard uncertainty, or read with noise = \"counts\" or \"scaled\"",
            "noise = \"sigma\" was asked for, but the file gives none");
    if (status == LW_OK && wants_sigma) {
        status = check_values(columns, file, columns->sigma, "sigma", err);
        if (status == LW_OK)
            status = check_sigma(columns, file, err);
    }
    *noise = wants_sigma ? LW_NOISE_SIGMA : wanted == 3 ? LW_NOISE_SCALED : LW_NOISE_COUNTS;
    if (status != LW_OK || *noise != LW_NOISE_COUNTS || are_counts(columns->intensity, columns->n, wanted == 0))
        return status;
    bool whole = true;
    for (size_t i = 0; i < columns->n; i++) {
        double y = columns->intensity[i];
        if (y < 0)
            return refuse(columns, file, i,
                          "counts can't be negative: give a sigma column, or read with noise = \"scaled\"",
                          err, "the intensity is %g", y);
        /* below 1e15 the cast is safe; no end here, since a negative value further down says more */
        whole = whole && (wanted != 0 || y == (double)(int64_t)y);
    }
    for (size_t i = 0; !whole; i++)
        if (columns->intensity[i] != floor(columns->intensity[i]))
            return refuse(
                columns, file, i,
                "give a sigma column, or read with noise = \"scaled\" (or \"counts\" if they are counts all "
                "the same)",
                err, "the intensity is %.10g, not a whole number of counts, and its noise is not known",
                columns->intensity[i]);
    return LW_OK;
}
