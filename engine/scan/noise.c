/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Noise of scaled intensities. Third differences remove whatever is a parabola over four points; their
 * variance and their covariance over lags 0 to 5 are linear in the variance g0 of the noise and in the
 * covariance g1 of next neighbours (further neighbours are taken as independent, as resampling to another
 * grid leaves them), and g0, g1 follow by least squares. Sharp lines are not parabolas: differences beyond
 * 4 standard deviations are left out, with those that share a point with them.
 *
 * Differences are blind to noise that is slow on the scale of four points; such noise is not in the result.
 *
 * No memory is taken, so that the estimate can't fail: each pass runs through the scan with a window. */
#include "scan/scan.h"

#include <math.h>
#include <stdint.h>

#define WINDOW 25 /* points of the running median */
#define LAGS 6
#define REACH 3 /* differences that share a point lie at most this far apart */
#define CLIP 4.0
#define PASSES_MOST 12
#define BINS 1600          /* of the histogram that gives the first scale: 10 an octave */
#define FACTOR_LEAST 1e-12 /* of a scan without any noise */

/* The running median, for points taken in ascending order. */
typedef struct window {
    const lw_scan *scan;
    size_t width, low; /* points [low, low + width) are in it */
    double sorted[WINDOW];
    double median[4]; /* of the last four points asked for, by i % 4 */
} window;

static void window_begin(window *w, const lw_scan *scan)
{
    w->scan = scan;
    w->low = 0;
    w->width = scan->n < WINDOW ? scan->n : WINDOW;
    for (size_t held = 0; held < WINDOW; held++) {
        /* places that are not used hold what sorts last */
        double y = held < w->width ? scan->intensity[held] : INFINITY;
        size_t i = held;
        for (; i > 0 && w->sorted[i - 1] > y; i--)
            w->sorted[i] = w->sorted[i - 1];
        w->sorted[i] = y;
    }
}

/* Centres the window on point i, one after the last one it was centred on. */
static void window_move(window *w, size_t i)
{
    if (i > w->low + w->width / 2 && w->low + w->width < w->scan->n) {
        double old = w->scan->intensity[w->low], new = w->scan->intensity[w->low + w->width];
        double *sorted = w->sorted;
        uint64_t below_old = 0, below_new = 0;
        for (size_t k = 0; k < WINDOW; k++) {
            below_old += sorted[k] < old;
            below_new += sorted[k] < new;
        }
        if (below_new > below_old) {
            for (uint64_t k = below_old; k + 1 < below_new; k++)
                sorted[k] = sorted[k + 1];
            sorted[below_new - 1] = new;
        } else {
            for (uint64_t k = below_old; k > below_new; k--)
                sorted[k] = sorted[k - 1];
            sorted[below_new] = new;
        }
        w->low++;
    }
    w->median[i % 4] = w->sorted[w->width / 2];
}

/* Third difference at point i, in units of the square root of the intensity there; NaN where the intensity is
 * not positive. To be called for i = 0, 1, 2 ... in turn. */
static double difference(window *w, size_t i)
{
    const double *y = w->scan->intensity;
    for (size_t k = i == 0 ? 0 : i + 3; k < i + 4; k++)
        window_move(w, k);
    double level = 0.25 * (w->median[0] + w->median[1] + w->median[2] + w->median[3]);
    return level > 0 ? (y[i] - 3 * y[i + 1] + 3 * y[i + 2] - y[i + 3]) / sqrt(level) : NAN;
}

/* Median of the differences' size over 0.6745, from a histogram in equal ratios. */
static double first_scale(const lw_scan *scan)
{
    size_t bin[BINS] = {0}, total = 0, below = 0;
    window w;
    window_begin(&w, scan);
    for (size_t i = 0; i + 3 < scan->n; i++) {
        double size = fabs(difference(&w, i));
        if (isnan(size))
            continue;
        double place = size > 0 ? 10 * log2(size) + BINS / 2.0 : 0;
        bin[place < 0 ? 0 : place >= BINS ? BINS - 1 : (size_t)place]++;
        total++;
    }
    size_t at = 0;
    while (at < BINS && below + bin[at] <= total / 2)
        below += bin[at++];
    return total == 0 || at == 0 ? 0 : exp2(((double)at + 0.5 - BINS / 2.0) / 10) / 0.6745;
}

/* Covariances of the differences that lie within `most`, by lag. Returns how many were used for lag 0. */
static size_t covariances(const lw_scan *scan, double most, double covariance[LAGS])
{
    /* a difference is judged once REACH more have been seen, and joined with LAGS - 1 before it */
    enum { KEPT = 16 };
    double held[KEPT], sum[LAGS] = {0};
    bool beyond[KEPT] = {false}, used[KEPT] = {false};
    size_t count[LAGS] = {0}, n = scan->n - 3;
    window w;
    window_begin(&w, scan);
    for (size_t i = 0; i < n + REACH; i++) {
        if (i < n) {
            held[i % KEPT] = difference(&w, i);
            beyond[i % KEPT] = !(fabs(held[i % KEPT]) <= most);
        } else
            beyond[i % KEPT] = false;
        if (i < REACH)
            continue;
        size_t j = i - REACH;
        bool good = true;
        for (size_t k = j < REACH ? 0 : j - REACH; k <= i; k++)
            good = good && !beyond[k % KEPT];
        used[j % KEPT] = good;
        for (size_t lag = 0; good && lag < LAGS && lag <= j; lag++)
            if (used[(j - lag) % KEPT]) {
                sum[lag] += held[j % KEPT] * held[(j - lag) % KEPT];
                count[lag]++;
            }
    }
    for (size_t lag = 0; lag < LAGS; lag++)
        covariance[lag] = count[lag] > 0 ? sum[lag] / (double)count[lag] : 0;
    return count[0];
}

void lw_scan_estimate_noise(const lw_scan *scan, double *factor, double *correlation)
{
    /* covariance of third differences of noise with g0 = 1, and with g1 = 1, by lag */
    static const double of_g0[LAGS] = {20, -15, 6, -1, 0, 0}, of_g1[LAGS] = {-30, 26, -16, 6, -1, 0};
    *factor = 1;
    *correlation = 0;
    if (scan->n < 4)
        return;
    double scale = first_scale(scan), covariance[LAGS] = {0};
    size_t used = 0;
    for (int pass = 0; pass < PASSES_MOST; pass++) {
        used = covariances(scan, CLIP * scale, covariance);
        double next = sqrt(covariance[0]);
        bool settled = fabs(next - scale) <= 1e-3 * scale;
        scale = next;
        if (settled || used == 0)
            break;
    }
    double aa = 0, ab = 0, bb = 0, ac = 0, bc = 0;
    for (int lag = 0; lag < LAGS; lag++) {
        aa += of_g0[lag] * of_g0[lag];
        ab += of_g0[lag] * of_g1[lag];
        bb += of_g1[lag] * of_g1[lag];
        ac += of_g0[lag] * covariance[lag];
        bc += of_g1[lag] * covariance[lag];
    }
    double determinant = aa * bb - ab * ab;
    double g0 = (bb * ac - ab * bc) / determinant, g1 = (aa * bc - ab * ac) / determinant;
    /* a negative correlation is chance, and a short scan can't tell one: then the plain variance is the
     * better figure */
    if (g1 <= 0 || g0 <= 0 || used < 100) {
        g0 = covariance[0] / 20;
        g1 = 0;
    }
    *factor = g0 > FACTOR_LEAST ? g0 : FACTOR_LEAST;
    /* next neighbours alone can't be correlated by more than one half */
    *correlation = g1 / *factor < 0.5 ? g1 / *factor : 0.5;
}
