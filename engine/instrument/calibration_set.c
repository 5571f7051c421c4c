/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/calibration_set.h"

#include "instrument/calibration_optical.h"
#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

/* Widths whose estimates scatter by more than this many times their u are not of one profile (common practice). */
static const double far_beyond_chance = 3;

/* A number in both scans' headers that differs. */
static bool differs(const lw_scan *one, const lw_scan *other, const char *words, double *a, double *b)
{
    *a = lw__in_header(one->header, words, NAN);
    *b = lw__in_header(other->header, words, NAN);
    return isfinite(*a) && isfinite(*b) && fabs(*a - *b) > 1e-6 * fabs(*a);
}

static lw_status check_pair(const lw_lines *one, const lw_lines *other, lw_error *err)
{
    static const char *const told[] = {"goniometer radius", "divergence slit", "receiving slit", "Soller slits", NULL};
    const lw_scan *a = one->scan, *b = other->scan;
    double was, is;
    if (one == other || a == b || (lw_scan_hash(a)[0] != '\0' && strcmp(lw_scan_hash(a), lw_scan_hash(b)) == 0))
        return lw_fail_at(err, LW_BAD_ARGUMENT, b->file, 0, "give each scan once",
                          "calibrate: the same scan was given twice: counted twice it would seem surer than it is");
    if (!lw_radiation_same(&one->radiation, &other->radiation))
        return lw_fail_at(err, LW_BAD_ARGUMENT, b->file, 0, "join scans of one radiation only",
                          "calibrate: this scan is of %s (%.6f nm), the first of %s (%.6f nm)", other->radiation.name,
                          lw_radiation_wavelength(&other->radiation), one->radiation.name,
                          lw_radiation_wavelength(&one->radiation));
    if (one->smooth.axial != other->smooth.axial)
        return lw_fail_at(err, LW_BAD_ARGUMENT, b->file, 0, "fit all standards with the same axial",
                          "calibrate: its lines were fitted with axial = \"%s\", those of the first scan with \"%s\"",
                          lw_axial_names[other->smooth.axial], lw_axial_names[one->smooth.axial]);
    for (size_t i = 0; told[i] != NULL; i++)
        if (differs(a, b, told[i], &was, &is))
            return lw_fail_at(err, LW_BAD_ARGUMENT, b->file, 0, "join scans of one state of the instrument only",
                              "calibrate: by its header this scan's %s is %g, the first one's %g: another geometry", told[i],
                              is, was);
    return LW_OK;
}

/* Lines that stand degrees away from the certificate are another substance's. */
static lw_status check_standard(const lw_calibration_scan *scan, lw_error *err)
{
    const lw_lines *lines = scan->lines;
    double d[3], square = 0;
    size_t n = 0;
    for (size_t i = 0; i < lines->n; i++) {
        double angle = lw__certified_angle(scan->standard, lw_radiation_wavelength(&lines->radiation),
                                           &lines->line[i].reflection, d);
        if (!lines->line[i].supported || !isfinite(angle))
            continue;
        square += pow(lines->line[i].two_theta.value - angle, 2);
        n++;
    }
    if (n > 0 && sqrt(square / (double)n) < 1)
        return LW_OK;
    return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0, "is each scan paired with its own standard?",
                      "the lines do not fall where the certificate of %s puts them", scan->standard->name);
}

static lw_status check(const lw_calibration_scan *scans, size_t n, lw_error *err)
{
    if (n == 0 || n > LW_SET_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, "give { lines, standard } for each scan",
                       "calibrate: %zu scans; 1 to %d can be joined", n, LW_SET_MOST);
    bool any = false;
    for (size_t k = 0; k < n; k++) {
        const lw_lines *lines = scans[k].lines;
        bool smooth = false;
        for (int i = 0; i < LW_AXIAL_1; i++)
            smooth |= lines->smooth.refined[i];
        if (!smooth || lines->has_instrument || strcmp(lines->shape, "voigt") != 0)
            return lw_fail_at(err, LW_BAD_ARGUMENT, lines->scan->file, 0,
                              "fit the standard with fit_lines(scan, reflections, {widths = \"smooth\"})",
                              "calibrate: the lines must be fitted with widths as smooth functions of angle and no instrument");
        for (size_t j = 0; j < k; j++) {
            lw_status status = check_pair(scans[j].lines, lines, err);
            if (status != LW_OK)
                return status;
        }
        any |= !scans[k].positions_only;
        if (n > 1 && check_standard(&scans[k], err) != LW_OK)
            return LW_NOT_SUPPORTED;
    }
    return any ? LW_OK
               : lw_fail(err, LW_BAD_ARGUMENT, "leave positions_only out for one scan",
                         "calibrate: no scan is left for the instrument's profile");
}

/* One scan's optical profile. Where it can't be described without the specimen's transparency, and no attenuation was
 * given, that is refined too: it is kept where it lowers chi-square by more than chance (p = 0.001 for one parameter) and
 * is resolved. */
static lw_status refine_scan(lw_engine *engine, const lw_set *set, lw_set_scan *scan, lw_calibrate_options *options,
                             lw_arena *arena, lw_error *err)
{
    lw_error why = LW_ERROR_NONE;
    lw_status status = lw__optical_refine(engine, scan->lines, scan->standard, options, set->radius_mm, arena, &scan->refined, &why);
    bool stuck = status == LW_NO_CONVERGENCE, named = false;
    lw_refined plain = scan->refined, deep;
    for (size_t i = 0; i < options->refine.n; i++)
        named |= strcmp(options->refine.item[i], "attenuation") == 0;
    double freedom = (double)(plain.n_points - plain.n_parameters);
    if ((status != LW_OK && !stuck) || named || !isnan(options->attenuation_per_mm) || options->refine.n == LW_REFINED_MOST ||
        (!stuck && !(lw_chi2_tail(plain.chi2, freedom) < 1e-3))) {
        if (status != LW_OK)
            *err = why;
        return status;
    }
    if (options->refine.n == 0) { /* the usual ones, by name */
        options->refine.item[options->refine.n++] = "specimen_length";
        options->refine.item[options->refine.n++] = "source_width";
        if (isnan(options->slit_width_mm) && isnan(lw__in_header(scan->lines->scan->header, "receiving slit", NAN)))
            options->refine.item[options->refine.n++] = "slit_width";
    }
    options->refine.item[options->refine.n++] = "attenuation";
    options->attenuation_per_mm = 10;
    lw_error deep_why = LW_ERROR_NONE;
    lw_status further =
        lw__optical_refine(engine, scan->lines, scan->standard, options, set->radius_mm, arena, &deep, &deep_why);
    size_t last = options->refine.n - 1;
    if (further == LW_OK && deep.value[last] > 3 * sqrt(deep.covariance[last][last]) && (stuck || lw_chi2_tail(fmax(plain.chi2 - deep.chi2, 0), 1) < 1e-3)) {
        scan->refined = deep;
        return LW_OK;
    }
    if (further == LW_OUT_OF_MEMORY || further == LW_CANCELLED) {
        *err = deep_why;
        return further;
    }
    scan->refined = plain;
    if (status != LW_OK)
        *err = why;
    return status;
}

static lw_status refine_scans(lw_engine *engine, lw_set *set, const lw_calibration_scan *scans, lw_arena *arena, lw_error *err)
{
    if (set->capillary)
        return lw_fail(err, LW_BAD_ARGUMENT, "use profile = \"empirical\"",
                       "calibrate: the optical profile is that of a flat specimen in reflection, not of a capillary");
    lw_status status = LW_OK;
    for (size_t k = 0; k < set->n && status == LW_OK; k++) {
        lw_set_scan *scan = &set->scan[k];
        lw_calibrate_options options = *set->options;
        if (!isnan(scans[k].attenuation_per_mm))
            options.attenuation_per_mm = scans[k].attenuation_per_mm;
        status = refine_scan(engine, set, scan, &options, arena, err);
        if (status != LW_OK)
            break;
        scan->attenuation = scan->refined.geometry.attenuation;
        for (size_t i = 0; i < scan->refined.n; i++)
            if (strcmp(scan->refined.name[i], "attenuation") == 0)
                scan->u_attenuation = sqrt(fmax(scan->refined.covariance[i][i], 0));
        set->all.chi2 += scan->refined.chi2;
        set->all.n_points += scan->refined.n_points;
        set->all.n_parameters += scan->refined.n_parameters;
        set->all.n_lines += scan->refined.n_lines;
        set->all.iterations += scan->refined.iterations;
        scan->rows.refined = &set->all;
    }
    return status;
}

/* The parameters that the scans have in common: widths, or quantities of the geometry but each specimen's attenuation. */
static void name_parameters(lw_set *set)
{
    for (size_t k = 0; k < set->n; k++) {
        const lw_set_scan *scan = &set->scan[k];
        size_t count = set->optical ? scan->refined.n : (size_t)LW_WIDTH_PARAMETERS;
        for (size_t i = 0; i < count && scan->joined; i++) {
            const char *name = set->optical ? scan->refined.name[i] : lw_width_name[i];
            size_t row = set->optical ? i : lw_lines_row(scan->lines, name), size = scan->lines->n_parameters;
            bool known = set->optical ? strcmp(name, "attenuation") == 0 || !(scan->refined.covariance[i][i] > 0)
                                      : row == LW_NO_PARAMETER || !(scan->lines->covariance[row * size + row] > 0);
            for (size_t a = 0; a < set->n_profile; a++)
                known |= strcmp(set->name[a], name) == 0;
            if (known)
                continue;
            set->width[set->n_profile] = (int)i;
            set->name[set->n_profile++] = name;
        }
    }
}

/* What a scan says of the profile; a parameter without variance was held, and is not told. */
static lw_status estimate(const lw_set *set, size_t k, lw_estimate *out, lw_arena *scratch, lw_error *err)
{
    const lw_set_scan *scan = &set->scan[k];
    const lw_refined *refined = &scan->refined;
    size_t *which = lw_arena_take(scratch, LW_WIDTH_PARAMETERS, sizeof *which, err), rows[LW_WIDTH_PARAMETERS], n = 0;
    double *value = lw_arena_take(scratch, LW_WIDTH_PARAMETERS, sizeof *value, err);
    double *c = lw_arena_take(scratch, (size_t)LW_WIDTH_PARAMETERS * LW_WIDTH_PARAMETERS, sizeof *c, err);
    if (!which || !value || !c)
        return LW_OUT_OF_MEMORY;
    size_t size = scan->lines->n_parameters;
    for (size_t a = 0; a < set->n_profile; a++) {
        size_t at = set->optical ? LW_NO_PARAMETER : lw_lines_row(scan->lines, set->name[a]);
        for (size_t i = 0; i < refined->n && set->optical; i++)
            if (strcmp(refined->name[i], set->name[a]) == 0)
                at = i;
        if (at == LW_NO_PARAMETER || !((set->optical ? refined->covariance[at][at] : scan->lines->covariance[at * size + at]) > 0))
            continue;
        rows[n] = at;
        value[n] = set->optical ? refined->value[at] : scan->lines->parameter[at];
        which[n++] = a;
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            c[i * n + j] = set->optical ? refined->covariance[rows[i]][rows[j]] : scan->lines->covariance[rows[i] * size + rows[j]];
    *out = (lw_estimate){.n = n, .which = which, .value = value, .covariance = c};
    return LW_OK;
}

/* Joins the scans for which take[k]. */
static lw_status join_taken(lw_engine *engine, lw_set *set, const bool *take, lw_joined *joined, lw_arena *scratch, lw_error *err)
{
    lw_estimate all[LW_SET_MOST];
    double lower[LW_WIDTH_PARAMETERS];
    size_t n = 0;
    lw_status status = LW_OK;
    for (size_t k = 0; k < set->n && status == LW_OK; k++)
        if (take[k])
            status = estimate(set, k, &all[n++], scratch, err);
    for (size_t a = 0; a < set->n_profile; a++)
        lower[a] = !set->optical && set->width[a] == LW_V ? -INFINITY : 0;
    return status == LW_OK ? lw_join(engine, all, n, set->n_profile, lower, set->value, set->covariance, joined, err) : status;
}

/* Mean breadth of a scan's lines at three angles that all have. */
static double mean_breadth(const lw_set *set, size_t k)
{
    double low = 0, high = 180, sum = 0;
    for (size_t i = 0; i < set->n; i++) {
        low = fmax(low, set->scan[i].lines->line[0].two_theta.value);
        high = fmin(high, set->scan[i].lines->line[set->scan[i].lines->n - 1].two_theta.value);
    }
    for (int i = 0; i < 3; i++) {
        lw_width_figure figure;
        lw_width_figure_at(&set->scan[k].lines->smooth, low + (0.1 + 0.4 * i) * (high - low), 0, 0, &figure);
        sum += figure.breadth_deg / 3;
    }
    return sum;
}

/* The profile of the scans that show the same one. */
static lw_status join_profile(lw_engine *engine, lw_set *set, lw_arena *arena, lw_arena *scratch, lw_error *err)
{
    bool take[LW_SET_MOST] = {false};
    size_t sharpest = set->n;
    for (size_t k = 0; k < set->n; k++)
        if (set->scan[k].joined && (sharpest == set->n || mean_breadth(set, k) < mean_breadth(set, sharpest)))
            sharpest = k;
    name_parameters(set);
    lw_status status = LW_OK;
    for (size_t k = 0; k < set->n && status == LW_OK; k++) {
        lw_set_scan *scan = &set->scan[k];
        if (!scan->joined || k == sharpest)
            continue;
        lw_joined pair = {0};
        memset(take, 0, sizeof take);
        take[k] = take[sharpest] = true;
        status = join_taken(engine, set, take, &pair, scratch, err);
        if (status != LW_OK || !(pair.birge > far_beyond_chance))
            continue;
        const lw_set_scan *sharp = &set->scan[sharpest];
        if (strcmp(scan->standard->name, sharp->standard->name) == 0)
            return lw_fail_at(err, LW_BAD_DATA, scan->lines->scan->file, 0,
                              "join scans of one state of the instrument only: were slits or alignment changed between them?",
                              "calibrate: its widths contradict those of %s, the same standard, by %.1f u in the mean (%.1f %% "
                              "broader)", sharp->lines->scan->file, pair.birge,
                              100 * (mean_breadth(set, k) / mean_breadth(set, sharpest) - 1));
        scan->joined = false;
        scan->why = lw_arena_print(arena, err,
                                   "its lines are %.1f %% broader than those of %s, %.1f u of the widths in the mean: what is "
                                   "the specimen's own (domain size, transparency) is not the instrument's",
                                   100 * (mean_breadth(set, k) / mean_breadth(set, sharpest) - 1), sharp->standard->name,
                                   pair.birge);
        status = err->status;
    }
    set->n_profile = 0;
    name_parameters(set);
    for (size_t k = 0; k < set->n; k++)
        take[k] = set->scan[k].joined;
    return status == LW_OK ? join_taken(engine, set, take, &set->profile, scratch, err) : status;
}

/* The joined profile as the calibration's. */
static lw_status take_profile(lw_engine *engine, lw_set *set, lw_calibration *calibration, lw_error *err)
{
    double low = 180, high = 0;
    for (size_t k = 0; k < set->n; k++)
        if (set->scan[k].joined) {
            const lw_lines *lines = set->scan[k].lines;
            low = fmin(low, lines->line[0].two_theta.value);
            high = fmax(high, lines->line[lines->n - 1].two_theta.value);
        }
    calibration->valid_low_deg = low;
    calibration->valid_high_deg = high;
    if (set->optical) {
        calibration->has_optical = true;
        calibration->optical = set->scan[0].refined.geometry;
        calibration->n_refined = set->n_profile;
        for (size_t i = 0; i < set->n_profile; i++) {
            calibration->refined_name[i] = set->name[i];
            *lw_geometry_field(&calibration->optical, set->name[i]) = set->value[i];
            for (size_t j = 0; j < set->n_profile; j++)
                calibration->refined_covariance[i][j] = set->covariance[i * set->n_profile + j];
        }
        return lw__optical_profile(engine, calibration, low, high, err);
    }
    lw_width_function *profile = &calibration->profile;
    size_t first = 0; /* what no scan refined is held as there */
    while (!set->scan[first].joined)
        first++;
    *profile = set->scan[first].lines->smooth;
    profile->low_deg = low;
    profile->high_deg = high;
    memset(profile->refined, 0, sizeof profile->refined);
    memset(profile->covariance, 0, sizeof profile->covariance);
    for (size_t i = 0; i < set->n_profile; i++) {
        profile->value[set->width[i]] = set->value[i];
        profile->refined[set->width[i]] = true;
        for (size_t j = 0; j < set->n_profile; j++)
            profile->covariance[set->width[i]][set->width[j]] = set->covariance[i * set->n_profile + j];
    }
    /* specimen and slit that could not be told apart move together */
    if (profile->axial == LW_AXIAL_FINGER && profile->refined[LW_AXIAL_1] && !profile->refined[LW_AXIAL_2]) {
        profile->value[LW_AXIAL_2] = profile->value[LW_AXIAL_1];
        profile->refined[LW_AXIAL_2] = true;
        for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
            profile->covariance[LW_AXIAL_2][i] = profile->covariance[i][LW_AXIAL_2] = profile->covariance[i][LW_AXIAL_1];
        profile->covariance[LW_AXIAL_2][LW_AXIAL_2] = profile->covariance[LW_AXIAL_1][LW_AXIAL_1];
    }
    return LW_OK;
}

/* Fits a scan that is there for its positions once more, the instrument's profile folded in: its places are then freed of
 * the same axial divergence, whatever its own breadth. */
static lw_status fit_again(lw_engine *engine, const lw_calibration *calibration, lw_set_scan *scan, lw_arena *scratch, lw_error *err)
{
    const lw_lines *lines = scan->lines;
    lw_width_function profile = calibration->profile;
    lw_fit_options how = *lines->options;
    lw_reflection *reflection = lw_arena_take(scratch, lines->n, sizeof *reflection, err);
    double *expected = lw_arena_take(scratch, lines->n, sizeof *expected, err);
    if (reflection == NULL || expected == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < lines->n; i++) {
        reflection[i] = lines->line[i].reflection;
        expected[i] = lines->line[i].two_theta.value - reflection[i].two_theta_deg;
    }
    profile.low_deg = fmin(profile.low_deg, lines->scan->two_theta_deg[0]);
    profile.high_deg = fmax(profile.high_deg, lines->scan->two_theta_deg[lines->scan->n - 1]);
    how.instrument = &profile;
    how.expected_shift = expected;
    how.axial = LW_AXIAL_NONE; /* it is in the instrument, as are the widths that were held */
    how.widths = lw_fit_defaults().widths;
    how.fixed = (lw_option_list){0};
    return lw_fit_lines(engine, lines->scan, reflection, lines->n, lines->material, &how, &scan->again, err);
}

static lw_status calibrate(lw_engine *engine, const lw_calibration_scan *scans, lw_set *set, lw_calibration *calibration,
                           lw_arena *scratch, lw_error *err)
{
    const char *radius_from;
    set->radius_mm = lw__goniometer_radius(set->options, scans[0].lines->scan, &radius_from);
    for (size_t k = 1; k < set->n && !(set->options->goniometer_radius_mm > 0) && strncmp(radius_from, "assumed", 7) == 0; k++)
        set->radius_mm = lw__goniometer_radius(set->options, scans[k].lines->scan, &radius_from);
    for (size_t k = 0; k < set->n; k++) {
        set->scan[k] = (lw_set_scan){.lines = scans[k].lines, .standard = scans[k].standard, .joined = !scans[k].positions_only,
                                     .why = scans[k].positions_only ? "it was given for its positions only" : ""};
        set->scan[k].rows = (lw_calibration_lines){.lines = scans[k].lines, .standard = scans[k].standard,
                                                   .radius_from = radius_from};
    }
    lw_status status = set->optical ? refine_scans(engine, set, scans, &calibration->arena, err) : LW_OK;
    if (status == LW_OK)
        status = join_profile(engine, set, &calibration->arena, scratch, err);
    if (status == LW_OK)
        status = take_profile(engine, set, calibration, err);
    for (size_t k = 0; k < set->n && status == LW_OK && !set->optical; k++)
        if (!set->scan[k].joined)
            status = fit_again(engine, calibration, &set->scan[k], scratch, err);
    if (status == LW_OK)
        status = lw__set_positions(engine, set, &calibration->arena, scratch, err);
    if (status != LW_OK)
        return status;
    calibration->aberrations = set->scan[0].aberrations;
    const lw_calibration_lines *rows[LW_SET_MOST];
    for (size_t k = 0; k < set->n; k++)
        rows[k] = &set->scan[k].rows;
    return lw__calibration_record(calibration, rows, set->n, set, err);
}

/* profile = "auto" for several scans: as the first of those that carry the profile would choose by itself. */
static lw_status choose_profile(lw_engine *engine, const lw_calibration_scan *scans, size_t n, const lw_calibrate_options *options,
                                lw_set *set, lw_calibration *calibration, lw_error *err)
{
    set->optical = options->profile == 1;
    if (options->profile < 2)
        return LW_OK;
    size_t first = 0;
    while (first + 1 < n && scans[first].positions_only)
        first++;
    lw_calibration *alone = NULL;
    lw_status status = lw_calibrate(engine, scans[first].lines, scans[first].standard, options, &alone, err);
    if (status == LW_OK) {
        set->optical = alone->has_optical;
        memcpy(calibration->profile_why, alone->profile_why, sizeof calibration->profile_why);
    }
    lw_calibration_free(alone);
    return status;
}

lw_status lw_calibrate_set(lw_engine *engine, const lw_calibration_scan *scans, size_t n, const lw_calibrate_options *options,
                           lw_calibration **out, lw_error *err)
{
    *out = NULL;
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    lw_status status = check(scans, n, err);
    if (status != LW_OK)
        return status;
    if (n == 1) {
        lw_calibrate_options one = *options;
        if (!isnan(scans[0].attenuation_per_mm))
            one.attenuation_per_mm = scans[0].attenuation_per_mm;
        return lw_calibrate(engine, scans[0].lines, scans[0].standard, &one, out, err);
    }
    lw_calibration *calibration = lw_take(engine, sizeof *calibration, err);
    if (calibration == NULL)
        return LW_OUT_OF_MEMORY;
    memset(calibration, 0, sizeof *calibration);
    lw_arena_begin(&calibration->arena, engine);
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    lw_set *set = lw_arena_take(&scratch, 1, sizeof *set, err);
    status = set ? LW_OK : LW_OUT_OF_MEMORY;
    if (set != NULL) {
        set->n = n;
        set->options = options;
        set->capillary = options->geometry == 2 || (options->geometry == 0 && scans[0].lines->radiation.is_plain);
        snprintf(calibration->geometry, sizeof calibration->geometry, "%s", set->capillary ? "capillary" : "reflection");
        calibration->radiation = scans[0].lines->radiation;
        status = choose_profile(engine, scans, n, options, set, calibration, err);
        if (status == LW_OK)
            status = calibrate(engine, scans, set, calibration, &scratch, err);
        for (size_t k = 0; k < n; k++)
            lw_lines_free(set->scan[k].again);
    }
    lw_arena_end(&scratch);
    if (status != LW_OK) {
        lw_calibration_free(calibration);
        return status;
    }
    *out = calibration;
    return LW_OK;
}
