/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/statistics.h"
#include "base/arena.h"

#include <float.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

/* x^a exp(-x)/Gamma(a + 1): by Stirling's series where both are large, as the exponents would cancel */
static double gamma_term(double a, double x)
{
    if (a < 30)
        return exp(a * log(x) - x - lgamma(a + 1));
    double d = (x - a) / a, a2 = a * a;
    double stirling = (1.0 / 12 - (1.0 / 360 - (1.0 / 1260 - 1.0 / (1680 * a2)) / a2) / a2) / a;
    /* log1p(d) - d without loss for small d */
    double bend = log1p(d) - d;
    if (fabs(d) < 0.05) {
        bend = 0;
        for (int k = 12; k >= 2; k--)
            bend = bend * d + (k % 2 == 0 ? -1.0 : 1.0) / k;
        bend *= d * d;
    }
    return exp(a * bend - stirling) / sqrt(2 * 3.14159265358979323846 * a);
}

/* Upper regularised incomplete gamma function Q(a, x). */
static double gamma_upper(double a, double x)
{
    if (x <= 0)
        return 1;
    double front = gamma_term(a, x);
    if (x < a + 1) { /* series of P (Abramowitz & Stegun 6.5.29) */
        double term = 1, sum = 1;
        for (double k = 1; k < 1e6 && term > DBL_EPSILON * sum; k++) {
            term *= x / (a + k);
            sum += term;
        }
        return 1 - front * sum;
    }
    /* continued fraction (6.5.31), by Lentz's method */
    double b = x + 1 - a, c = 1e300, d = 1 / b, h = d;
    for (double k = 1; k < 1e6; k++) {
        double an = k * (a - k);
        b += 2;
        d = 1 / (an * d + b);
        c = b + an / c;
        double factor = c * d;
        h *= factor;
        if (fabs(factor - 1) < DBL_EPSILON)
            break;
    }
    return front * a * h;
}

double lw_chi2_tail(double chi2, double dof)
{
    if (!(dof > 0) || !(chi2 >= 0))
        return NAN;
    return isinf(chi2) ? 0 : gamma_upper(0.5 * dof, 0.5 * chi2);
}

double lw_normal_probability(double z)
{
    return 0.5 * erfc(-z * 0.70710678118654752440);
}

double lw_normal_quantile(double p)
{
    if (!(p > 0 && p < 1))
        return NAN;
    /* Abramowitz & Stegun 26.2.23 (4.5e-4) for the smaller tail, then Halley's method */
    double tail = p < 0.5 ? p : 1 - p, t = sqrt(-2 * log(tail));
    double z =
        t - (2.515517 + t * (0.802853 + t * 0.010328)) / (1 + t * (1.432788 + t * (0.189269 + t * 0.001308)));
    for (int i = 0; i < 3; i++) {
        double off = 0.5 * erfc(z * 0.70710678118654752440) - tail;
        double step = off * 2.5066282746310005024 * exp(0.5 * z * z);
        z += step / (1 + 0.5 * z * step);
    }
    return p < 0.5 ? -z : z;
}

double lw_durbin_watson(const double *residual, size_t n)
{
    double change = 0, square = 0;
    for (size_t i = 0; i < n; i++) {
        square += residual[i] * residual[i];
        if (i > 0)
            change += (residual[i] - residual[i - 1]) * (residual[i] - residual[i - 1]);
    }
    return n >= 2 && square > 0 ? change / square : NAN;
}

double lw_mean(const double *values, size_t n, double *sd)
{
    double mean = 0, square = 0;
    for (size_t i = 0; i < n; i++) { /* Welford's update keeps the digits of a large mean */
        double off = values[i] - mean;
        mean += off / (double)(i + 1);
        square += off * (values[i] - mean);
    }
    if (sd != NULL)
        *sd = n > 1 ? sqrt(square / (double)(n - 1)) : NAN;
    return n > 0 ? mean : NAN;
}

/* Puts the k-th smallest at place k, smaller ones before it. */
static double select_kth(double *v, size_t n, size_t k)
{
    size_t low = 0, high = n - 1;
    while (low < high) {
        /* the middle of three guards against sorted data */
        size_t middle = low + (high - low) / 2;
        double a = v[low], b = v[middle], c = v[high];
        double pivot = a < b ? (b < c ? b : (a < c ? c : a)) : (a < c ? a : (b < c ? c : b));
        size_t i = low, j = high;
        for (;;) {
            while (v[i] < pivot)
                i++;
            while (v[j] > pivot)
                j--;
            if (i >= j)
                break;
            double swap = v[i];
            v[i++] = v[j];
            v[j--] = swap;
        }
        if (k <= j)
            high = j;
        else
            low = j + 1;
    }
    return v[k];
}

double lw_median(double *values, size_t n)
{
    if (n == 0)
        return NAN;
    for (size_t i = 0; i < n; i++)
        if (isnan(values[i]))
            return NAN;
    double upper = select_kth(values, n, n / 2);
    if (n % 2 == 1)
        return upper;
    double lower = values[0];
    for (size_t i = 1; i < n / 2; i++)
        lower = fmax(lower, values[i]);
    return 0.5 * (lower + upper);
}

double lw_robust_sd(double *values, size_t n)
{
    double middle = lw_median(values, n);
    for (size_t i = 0; i < n; i++)
        values[i] = fabs(values[i] - middle);
    return 1.482602218505602 * lw_median(values, n);
}

double lw_quantile_of_sorted(const double *sorted, size_t n, double p)
{
    if (n == 0 || !(p >= 0 && p <= 1))
        return NAN;
    double place = p * (double)(n - 1);
    size_t k = (size_t)place;
    if (k + 1 >= n)
        return sorted[n - 1];
    return sorted[k] + (place - (double)k) * (sorted[k + 1] - sorted[k]);
}

static int ascending(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

void lw_sort(double *values, size_t n)
{
    if (n > 1)
        qsort(values, n, sizeof *values, ascending);
}

size_t lw_first_not_below(const double *sorted, size_t n, double value)
{
    size_t low = 0, high = n;
    while (low < high) {
        size_t middle = low + (high - low) / 2;
        if (sorted[middle] < value)
            low = middle + 1;
        else
            high = middle;
    }
    return low;
}

lw_status lw_running_median(lw_engine *engine, const double *y, size_t n, size_t half, double *out,
                            lw_error *err)
{
    if (half > n)
        half = n;
    size_t size = (2 * half + 2) * sizeof(double), count = 0;
    double *window = lw_take(engine, size, err);
    if (window == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = LW_OK;
    for (size_t i = 0; i < n && status == LW_OK; i++)
        if (isnan(y[i]))
            status = lw_fail(err, LW_BAD_DATA, NULL, "value %zu of a running median is not a number", i + 1);
    size_t next = 0; /* first value not yet in the window */
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        for (; next < n && next <= i + half; next++) {
            size_t at = lw_first_not_below(window, count, y[next]);
            memmove(window + at + 1, window + at, (count - at) * sizeof *window);
            window[at] = y[next];
            count++;
        }
        if (i > half) {
            size_t at = lw_first_not_below(window, count, y[i - half - 1]);
            memmove(window + at, window + at + 1, (count - at - 1) * sizeof *window);
            count--;
        }
        out[i] = count % 2 == 1 ? window[count / 2] : 0.5 * (window[count / 2 - 1] + window[count / 2]);
    }
    lw_give(engine, window, size);
    return status;
}
