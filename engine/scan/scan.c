/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/reader.h"
#include "scan/source.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stddef.h>
#include <stdint.h>
#include <string.h>

static const char *const noise_words[] = {"auto", "counts", "sigma", "scaled", NULL};

const lw_option lw_scan_option_table[] = {
    {.key = "noise",
     .kind = LW_OPTION_CHOICE,
     .unit = "",
     .standard = "auto",
     .choices = noise_words,
     .offset = offsetof(lw_scan_options, noise),
     .help =
         "what the noise is: counts (Poisson), sigma (a third column), scaled (factor estimated), or auto"},
    {.key = "range",
     .kind = LW_OPTION_RANGE,
     .unit = "deg",
     .standard = "the whole scan",
     .least = 0,
     .most = 180,
     .offset = offsetof(lw_scan_options, range),
     .help = "keep only this range of 2theta, {low, high}"},
    {.key = "block",
     .kind = LW_OPTION_TEXT,
     .unit = "",
     .standard = "the only one",
     .offset = offsetof(lw_scan_options, block),
     .help = "data block of a CIF that holds several scans"},
    {.key = "radiation",
     .kind = LW_OPTION_NOUN,
     .unit = "radiation",
     .standard = "that of the file",
     .offset = offsetof(lw_scan_options, radiation),
     .help = "radiation of the scan, instead of what the file says"},
    {.key = "radiation_differs",
     .kind = LW_OPTION_FLAG,
     .unit = "",
     .standard = "false",
     .offset = offsetof(lw_scan_options, radiation_differs),
     .help = "read it with that radiation though the file states a wavelength that differs by more than 0.1 %"},
    LW_OPTIONS_END};

lw_scan_options lw_scan_defaults(void)
{
    return (lw_scan_options){.noise = 0};
}

/* A new scan with copies of the points [from, from + n) and all that is said about them. */
static lw_status copy_points(lw_engine *engine, const lw_scan *like, size_t from, size_t n, lw_scan **scan,
                             lw_error *err)
{
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    lw_scan *made = lw_arena_take(&arena, 1, sizeof *made, err);
    char *file = made ? lw_arena_text(&arena, like->file, err) : NULL;
    char *header = file ? lw_arena_text(&arena, like->header, err) : NULL;
    double *points = header ? lw_arena_take_raw(&arena, n * (like->sigma ? 3 : 2), sizeof(double), err) : NULL;
    if (points == NULL) {
        lw_arena_end(&arena);
        return LW_OUT_OF_MEMORY;
    }
    memcpy(points, like->two_theta_deg + from, n * sizeof(double));
    memcpy(points + n, like->intensity + from, n * sizeof(double));
    if (like->sigma != NULL)
        memcpy(points + 2 * n, like->sigma + from, n * sizeof(double));
    *made = *like;
    made->arena = arena;
    made->source = lw_source_share(like->source);
    made->file = file;
    made->header = header;
    made->n = n;
    made->two_theta_deg = points;
    made->intensity = points + n;
    made->sigma = like->sigma ? points + 2 * n : NULL;
    /* comments may stand between rows, so the line of any but the first point is not known here */
    made->first_line = from == 0 ? like->first_line : 0;
    *scan = made;
    return LW_OK;
}

lw_status lw_scan_crop(const lw_scan *scan, double low_deg, double high_deg, lw_scan **cropped, lw_error *err)
{
    *cropped = NULL;
    if (!(low_deg < high_deg) || !isfinite(low_deg) || !isfinite(high_deg))
        return lw_fail(err, LW_BAD_ARGUMENT, "give the lower angle first",
                       "the range %g to %g degrees is empty", low_deg, high_deg);
    size_t first = lw_first_not_below(scan->two_theta_deg, scan->n, low_deg);
    size_t end = lw_first_not_below(scan->two_theta_deg, scan->n, nextafter(high_deg, INFINITY)); /* with its point */
    size_t n = end - first;
    if (n < 3)
        return lw_fail_at(err, LW_BAD_ARGUMENT, scan->file, 0, "choose a wider range within that of the scan",
                          "only %zu point%s between %g and %g degrees; the scan runs from %g to %g", n,
                          n == 1 ? " lies" : "s lie", low_deg, high_deg, scan->two_theta_deg[0],
                          scan->two_theta_deg[scan->n - 1]);
    return copy_points(scan->arena.engine, scan, first, n, cropped, err);
}

lw_status lw_scan_make(lw_engine *engine, const char *name, size_t n, const double *two_theta_deg,
                       const double *intensity, const double *sigma, const lw_scan_options *options,
                       lw_scan **scan, lw_error *err)
{
    *scan = NULL;
    lw_scan_options standard = lw_scan_defaults();
    if (options == NULL)
        options = &standard;
    if (n > SIZE_MAX / 64)
        return lw_fail(err, LW_OUT_OF_MEMORY, NULL, "out of memory: %zu points can't be counted", n);
    lw_scan like = {.file = name ? name : "", .header = "", .n = n, .variance_factor = 1};
    /* the readers' columns are writable, the check only looks */
    lw_columns columns = {.n = n,
                          .two_theta_deg = (double *)(uintptr_t)two_theta_deg,
                          .intensity = (double *)(uintptr_t)intensity,
                          .sigma = (double *)(uintptr_t)sigma};
    lw_status status = lw_columns_check(&columns, like.file, options->noise, &like.noise, err);
    if (status != LW_OK)
        return status;
    like.two_theta_deg = two_theta_deg;
    like.intensity = intensity;
    like.sigma = like.noise == LW_NOISE_SIGMA ? sigma : NULL;
    if (options->radiation != NULL) {
        like.has_radiation = true;
        like.radiation = *options->radiation;
    }
    lw_arena_begin(&like.arena, engine);
    if (like.noise == LW_NOISE_SCALED)
        lw_scan_estimate_noise(&like, &like.variance_factor, &like.correlation);
    if (options->range[0] == 0 && options->range[1] == 0)
        return copy_points(engine, &like, 0, n, scan, err);
    return lw_scan_crop(&like, options->range[0], options->range[1], scan, err);
}

void lw_scan_free(lw_scan *scan)
{
    if (scan != NULL) {
        lw_arena arena = scan->arena; /* the scan itself lies in it */
        lw_source_drop(scan->source);
        lw_arena_end(&arena);
    }
}

const char *lw_scan_hash(const lw_scan *scan)
{
    return scan->source ? lw_source_hash(scan->source) : "";
}

double lw_scan_at(const lw_scan *scan, double two_theta_deg, bool *inside)
{
    const double *x = scan->two_theta_deg, *y = scan->intensity;
    bool within = two_theta_deg >= x[0] && two_theta_deg <= x[scan->n - 1];
    if (inside != NULL)
        *inside = within;
    if (!within)
        return 0;
    size_t i = lw_first_not_below(x, scan->n, nextafter(two_theta_deg, INFINITY));
    if (i == scan->n)
        return y[scan->n - 1];
    double share = (two_theta_deg - x[i - 1]) / (x[i] - x[i - 1]);
    return y[i - 1] + share * (y[i] - y[i - 1]);
}
