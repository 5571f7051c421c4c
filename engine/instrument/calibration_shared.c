/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The aberrations that all scans share and those that each has of its own: zero shift and flat specimen belong to the
 * instrument, displacement and transparency to each specimen as it was mounted. */
#include "instrument/calibration_set.h"

#include "numeric/least_squares.h"
#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Beyond this Birge ratio scans do not belong together (common practice). */
static const double far_beyond_chance = 4;

/* Weighted least squares of lines [from, to) on the columns: slopes and estimator [to - from][n_columns], values. As for
 * one scan each line is weighted by its own u; what lines have in common enters through the estimator. */
static lw_status fit_columns(lw_engine *engine, const lw_set *set, const lw_set_column *column, size_t k, size_t from, size_t to,
                             double *slope, double *estimator, double *value, double *chi2, lw_error *err)
{
    size_t weakest, n = set->n_lines;
    double h[LW_SET_COLUMNS * LW_SET_COLUMNS] = {0}, c[LW_SET_COLUMNS * LW_SET_COLUMNS] = {0};
    for (size_t i = from; i < to; i++)
        for (size_t a = 0; a < k; a++) {
            bool counts = column[a].scan == LW_SET_ALL || column[a].scan == set->scan_of[i];
            slope[(i - from) * k + a] = counts ? column[a].kind->slope(set->certified[i], set->radius_mm) : 0;
            for (size_t b = 0; b <= a; b++)
                h[a * k + b] += slope[(i - from) * k + a] * slope[(i - from) * k + b] / set->places[i * n + i];
        }
    lw_status status = lw_invert_normal(engine, h, k, NULL, c, &weakest, err);
    if (status != LW_OK)
        return status;
    memset(value, 0, k * sizeof *value);
    for (size_t i = from; i < to; i++)
        for (size_t a = 0; a < k; a++) {
            double sum = 0;
            for (size_t b = 0; b < k; b++)
                sum += c[a * k + b] * slope[(i - from) * k + b] / set->places[i * n + i];
            estimator[(i - from) * k + a] = sum;
            value[a] += sum * set->difference[i];
        }
    *chi2 = 0;
    for (size_t i = from; i < to; i++) {
        double rest = set->difference[i];
        for (size_t a = 0; a < k; a++)
            rest -= slope[(i - from) * k + a] * value[a];
        *chi2 += rest * rest / set->places[i * n + i];
    }
    return LW_OK;
}

static lw_status start_columns(lw_set *set, lw_error *err)
{
    static const char *const reflection[] = {"zero_shift", "displacement", "flat_specimen", "transparency", NULL};
    static const char *const transmission[] = {"zero_shift", "wavelength", NULL};
    const lw_calibrate_options *o = set->options;
    lw_aberrations named = {0};
    bool given = o->aberrations.n > 0 && strcmp(o->aberrations.item[0], "auto") != 0, wide = false;
    lw_status status = given ? lw__take_named(o->aberrations.item, o->aberrations.n, &named, err)
                             : lw__take_named(set->capillary ? transmission : reflection, LW_ABERRATION_MOST, &named, err);
    for (size_t k = 0; k < set->n; k++)
        wide |= lw__wide_range(set->scan[k].lines);
    for (size_t i = 0; i < named.n && status == LW_OK; i++) {
        bool flat = strcmp(named.kind[i]->name, "flat_specimen") == 0;
        bool deep = strcmp(named.kind[i]->name, "transparency") == 0;
        if (!named.kind[i]->of_specimen) {
            if (given || !flat || (wide && !set->optical)) /* the optical profile has the flat specimen in it */
                set->column[set->n_columns++] = (lw_set_column){named.kind[i], LW_SET_ALL};
            continue;
        }
        for (size_t k = 0; k < set->n; k++) /* what is shared is told by all: a few lines then tell two shifts of a specimen */
            if (given || !deep || set->scan[k].rows.n >= 5)
                set->column[set->n_columns++] = (lw_set_column){named.kind[i], k};
    }
    for (size_t k = 0; k < set->n && status == LW_OK; k++) {
        size_t own = 0;
        for (size_t a = 0; a < set->n_columns; a++)
            own += set->column[a].scan == k;
        if (set->scan[k].rows.n < own + 1 || set->n_lines < set->n_columns + 1)
            status = lw_fail_at(err, LW_NOT_SUPPORTED, set->scan[k].lines->scan->file, 0,
                                "measure more lines, or name fewer aberrations",
                                "%zu supported lines can't carry %zu aberrations of the specimen and those of the instrument",
                                set->scan[k].rows.n, own);
    }
    return status;
}

static void tell_trial(lw_set *set, const lw_set_column *column, size_t k, double criterion)
{
    if (set->n_tried == LW_SET_COLUMNS)
        return;
    char *text = set->tried[set->n_tried].text;
    size_t size = sizeof set->tried->text, used = 0;
    text[0] = '\0';
    for (size_t a = 0; a < k && used < size; a++) {
        used += (size_t)snprintf(text + used, size - used, "%s%s", a > 0 ? ", " : "", column[a].kind->name);
        if (column[a].scan != LW_SET_ALL && used < size)
            used += (size_t)snprintf(text + used, size - used, " %zu", column[a].scan + 1);
    }
    set->tried[set->n_tried++].criterion = criterion;
}

/* Leaves out what the lines give no evidence for, one at a time, as long as the criterion falls by more than 2: what
 * can't be ruled out stays in the uncertainty. */
static lw_status choose_columns(lw_engine *engine, lw_set *set, double *slope, double *estimator, lw_error *err)
{
    double chi2 = 0, best, value[LW_SET_COLUMNS];
    lw_status status = fit_columns(engine, set, set->column, set->n_columns, 0, set->n_lines, slope, estimator, value, &chi2, err);
    best = lw__aicc(chi2, set->n_lines, set->n_columns);
    if (status == LW_OK)
        tell_trial(set, set->column, set->n_columns, best);
    for (bool again = true; again && status == LW_OK;) {
        size_t leave = set->n_columns;
        double least = INFINITY;
        again = false;
        for (size_t a = 0; a < set->n_columns && status == LW_OK; a++) {
            const char *name = set->column[a].kind->name;
            if (strcmp(name, "flat_specimen") != 0 && strcmp(name, "transparency") != 0)
                continue;
            lw_set_column fewer[LW_SET_COLUMNS];
            size_t n = 0;
            for (size_t b = 0; b < set->n_columns; b++)
                if (b != a)
                    fewer[n++] = set->column[b];
            status = fit_columns(engine, set, fewer, n, 0, set->n_lines, slope, estimator, value, &chi2, err);
            double criterion = lw__aicc(chi2, set->n_lines, n);
            tell_trial(set, fewer, n, criterion);
            if (criterion < least) {
                least = criterion;
                leave = a;
            }
        }
        if (status == LW_OK && least < best - 2) {
            memmove(&set->column[leave], &set->column[leave + 1], (set->n_columns - leave - 1) * sizeof *set->column);
            set->n_columns--;
            best = least;
            again = true;
        }
    }
    return status;
}

/* What all scans share, found from each scan alone and held against the first that can tell: differences with their full
 * covariance, in which what scans have in common falls out. */
static lw_status compare_scans(lw_engine *engine, lw_set *set, lw_arena *scratch, lw_error *err)
{
    size_t n = set->n_lines, shared = 0, able[LW_SET_MOST], n_able = 0;
    for (size_t a = 0; a < set->n_columns; a++)
        shared += set->column[a].scan == LW_SET_ALL;
    set->shared = (lw_joined){.p = 1, .birge = 1};
    size_t most = shared * LW_SET_MOST;
    double *by = lw_arena_take(scratch, most * n, sizeof *by, err); /* [scan x shared][n]: estimators over all lines */
    double *value = lw_arena_take(scratch, most, sizeof *value, err), *slope = lw_arena_take(scratch, n * LW_SET_COLUMNS, sizeof *slope, err);
    double *estimator = lw_arena_take(scratch, n * LW_SET_COLUMNS, sizeof *estimator, err);
    if (!by || !value || !slope || !estimator)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < set->n; k++) {
        lw_set_column column[LW_SET_COLUMNS];
        size_t count = 0;
        for (size_t a = 0; a < set->n_columns; a++) /* shared ones come first */
            if (set->column[a].scan == LW_SET_ALL)
                column[count++] = set->column[a];
        for (size_t a = 0; a < set->n_columns; a++)
            if (set->column[a].scan == k)
                column[count++] = set->column[a];
        size_t from = set->scan[k].first, to = from + set->scan[k].rows.n;
        double found[LW_SET_COLUMNS], chi2;
        lw_error why = LW_ERROR_NONE;
        if (to - from < count + 1 || fit_columns(engine, set, column, count, from, to, slope, estimator, found, &chi2, &why) != LW_OK) {
            if (why.status == LW_OUT_OF_MEMORY || why.status == LW_CANCELLED) {
                *err = why;
                return why.status;
            }
            continue;
        }
        for (size_t a = 0; a < shared; a++) {
            value[n_able * shared + a] = found[a];
            for (size_t i = from; i < to; i++)
                by[(n_able * shared + a) * n + i] = estimator[(i - from) * count + a];
        }
        able[n_able++] = k;
    }
    if (n_able < 2 || shared == 0)
        return LW_OK;
    size_t m = (n_able - 1) * shared, weakest;
    double *c = lw_arena_take(scratch, m * m, sizeof *c, err), *inverse = lw_arena_take(scratch, m * m, sizeof *inverse, err);
    if (!c || !inverse)
        return LW_OUT_OF_MEMORY;
    for (size_t r = 0; r < m; r++) /* from here rows hold differences from the first scan */
        for (size_t i = 0; i < n; i++)
            by[(r + shared) * n + i] -= by[(r % shared) * n + i];
    for (size_t r = 0; r < m; r++)
        for (size_t s = 0; s <= r; s++) {
            const double *a = by + (r + shared) * n, *b = by + (s + shared) * n;
            double sum = 0;
            for (size_t i = 0; i < n; i++)
                for (size_t j = 0; j < n; j++)
                    sum += a[i] * set->places[i * n + j] * b[j];
            for (size_t e = 0; e < set->n_common; e++) {
                double one = 0, other = 0;
                for (size_t i = 0; i < n; i++) {
                    one += a[i] * set->common[i * set->n_common + e];
                    other += b[i] * set->common[i * set->n_common + e];
                }
                sum += one * other;
            }
            c[r * m + s] = c[s * m + r] = sum;
        }
    lw_status status = lw_invert_normal(engine, c, m, NULL, inverse, &weakest, err);
    if (status != LW_OK)
        return status;
    for (size_t r = 0; r < m; r++)
        for (size_t s = 0; s < m; s++)
            set->shared.chi2 += (value[r + shared] - value[r % shared]) * inverse[r * m + s] * (value[s + shared] - value[s % shared]);
    set->shared.freedom = (double)m;
    set->shared.p = lw_chi2_tail(set->shared.chi2, set->shared.freedom);
    if (set->shared.p < 1e-3)
        set->shared.birge = sqrt(set->shared.chi2 / set->shared.freedom);
    if (set->shared.birge > far_beyond_chance)
        return lw_fail_at(err, LW_BAD_DATA, set->scan[able[1]].lines->scan->file, 0,
                          "join scans of one state of the instrument only: was it realigned between them? is each scan "
                          "paired with its own standard?",
                          "calibrate: the scans contradict each other: by themselves two of them have a %s that is %.2g %s "
                          "apart (%.1f u in the mean of what they share)",
                          set->column[0].kind->name, fabs(value[shared] - value[0]), set->column[0].kind->unit,
                          set->shared.birge);
    return LW_OK;
}

/* Values and covariances of all columns; rows and aberrations of each scan. */
static lw_status finish(lw_engine *engine, lw_set *set, double *slope, double *estimator, lw_arena *arena, lw_arena *scratch,
                        lw_error *err)
{
    size_t n = set->n_lines, k = set->n_columns, m = set->n_profile;
    lw_status status = fit_columns(engine, set, set->column, k, 0, n, slope, estimator, set->shift, &set->chi2, err);
    double *u = lw_arena_take(scratch, n, sizeof *u, err);
    set->shift_covariance = lw_arena_take(arena, k * k, sizeof(double), err);
    set->shift_profile = lw_arena_take(arena, k * m, sizeof(double), err);
    if (!u || !set->shift_covariance || !set->shift_profile)
        return LW_OUT_OF_MEMORY;
    if (status != LW_OK)
        return status;
    set->p = lw_chi2_tail(set->chi2, (double)(n - k));
    set->birge = fmax(set->p < 1e-3 ? sqrt(set->chi2 / (double)(n - k)) : 1, set->shared.birge);
    for (size_t a = 0; a < k; a++) {
        for (size_t b = 0; b < k; b++) {
            double sum = 0;
            for (size_t i = 0; i < n; i++)
                for (size_t j = 0; j < n; j++)
                    sum += estimator[i * k + a] * set->places[i * n + j] * estimator[j * k + b];
            sum *= set->birge * set->birge;
            for (size_t e = 0; e < set->n_common; e++) {
                double one = 0, other = 0;
                for (size_t i = 0; i < n; i++) {
                    one += estimator[i * k + a] * set->common[i * set->n_common + e];
                    other += estimator[i * k + b] * set->common[i * set->n_common + e];
                }
                sum += one * other;
            }
            set->shift_covariance[a * k + b] = sum;
        }
        for (size_t q = 0; q < m; q++)
            for (size_t i = 0; i < n; i++)
                for (size_t r = 0; r < m; r++)
                    set->shift_profile[a * m + q] += estimator[i * k + a] * set->to_profile[i * m + r] * set->covariance[r * m + q];
    }
    status = lw__residual_u(n, k, set->n_common, slope, estimator, set->places, set->common, u, scratch, err);
    for (size_t s = 0; s < set->n && status == LW_OK; s++) {
        lw_set_scan *scan = &set->scan[s];
        size_t from[LW_ABERRATION_MOST];
        double sum = 0;
        scan->aberrations = (lw_aberrations){.radius_mm = set->radius_mm};
        for (size_t a = 0; a < k; a++)
            if (set->column[a].scan == LW_SET_ALL || set->column[a].scan == s) {
                from[scan->aberrations.n] = a;
                scan->aberrations.value[scan->aberrations.n] = set->shift[a];
                scan->aberrations.kind[scan->aberrations.n++] = set->column[a].kind;
            }
        for (size_t a = 0; a < scan->aberrations.n; a++)
            for (size_t b = 0; b < scan->aberrations.n; b++)
                scan->aberrations.covariance[a][b] = set->shift_covariance[from[a] * k + from[b]];
        lw_calibration_lines *rows = &scan->rows;
        rows->chi2 = 0;
        for (size_t i = 0; i < rows->n; i++) {
            size_t row = scan->first + i;
            rows->residual[i] = rows->difference[i] - lw_aberrations_shift(&scan->aberrations, rows->certified[i], NULL);
            rows->u_residual[i] = u[row];
            rows->chi2 += rows->residual[i] * rows->residual[i] / set->places[row * n + row];
            sum += rows->residual[i] * rows->residual[i];
        }
        rows->birge = set->birge;
        rows->rms = sqrt(sum / (double)rows->n);
        if (rows->rms > 0.05)
            status = lw_fail_at(err, LW_NOT_SUPPORTED, scan->lines->scan->file, 0,
                                "is it the right standard, and the right radiation?",
                                "the lines do not fall where the certificate of %s puts them (rms %.3f deg after aberrations)",
                                scan->standard->name, rows->rms);
    }
    return status;
}

lw_status lw__set_positions(lw_engine *engine, lw_set *set, lw_arena *arena, lw_arena *scratch, lw_error *err)
{
    lw_status status = lw__set_places(engine, set, arena, scratch, err);
    if (status == LW_OK)
        status = start_columns(set, err);
    if (status != LW_OK)
        return status;
    double *slope = lw_arena_take(scratch, set->n_lines * LW_SET_COLUMNS, sizeof *slope, err);
    double *estimator = lw_arena_take(scratch, set->n_lines * LW_SET_COLUMNS, sizeof *estimator, err);
    if (slope == NULL || estimator == NULL)
        return LW_OUT_OF_MEMORY;
    const lw_option_list *named = &set->options->aberrations;
    if (named->n == 0 || strcmp(named->item[0], "auto") == 0)
        status = choose_columns(engine, set, slope, estimator, err);
    if (status == LW_OK)
        status = compare_scans(engine, set, scratch, err);
    return status == LW_OK ? finish(engine, set, slope, estimator, arena, scratch, err) : status;
}
