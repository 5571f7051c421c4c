/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/compare.h"

#include "instrument/profile_shape.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const double degree = M_PI / 180;
static const char schema[] = "linewright/comparison/1";

#define AT(field) offsetof(lw_tolerances, field)
const lw_option lw_tolerance_table[] = {
    {"zero_shift", LW_OPTION_NUMBER, "deg", "0.01", 0, 10, NULL, AT(zero_shift_deg), "change of the zero shift"},
    {"displacement", LW_OPTION_NUMBER, "mm", "0.05", 0, 10, NULL, AT(displacement_mm),
     "change of the specimen's displacement"},
    {"flat_specimen", LW_OPTION_NUMBER, "deg", "0.005", 0, 10, NULL, AT(flat_specimen_deg),
     "change of the flat-specimen coefficient"},
    {"transparency", LW_OPTION_NUMBER, "deg", "0.01", 0, 10, NULL, AT(transparency_deg),
     "change of the transparency coefficient"},
    {"wavelength", LW_OPTION_NUMBER, "", "1e-4", 0, 1, NULL, AT(wavelength_relative), "relative change of the wavelength"},
    {"shift", LW_OPTION_NUMBER, "deg", "0.01", 0, 10, NULL, AT(shift_deg),
     "change of a line's place at three angles, all aberrations together"},
    {"fwhm", LW_OPTION_NUMBER, "%", "5", 0, 1000, NULL, AT(fwhm_percent), "change of the FWHM at three angles"},
    {"breadth", LW_OPTION_NUMBER, "%", "5", 0, 1000, NULL, AT(breadth_percent),
     "change of the integral breadth at three angles"},
    {"asymmetry", LW_OPTION_NUMBER, "deg", "0.005", 0, 10, NULL, AT(asymmetry_deg),
     "change of centroid minus middle at half height at three angles"},
    {"intensity", LW_OPTION_NUMBER, "%", "20", 0, 1000, NULL, AT(intensity_percent),
     "change of the lines' areas, for one standard and counting time"},
    LW_OPTIONS_END};

lw_tolerances lw_tolerances_default(void)
{
    return (lw_tolerances){.zero_shift_deg = 0.01, .displacement_mm = 0.05, .flat_specimen_deg = 0.005,
                           .transparency_deg = 0.01, .wavelength_relative = 1e-4, .shift_deg = 0.01,
                           .fwhm_percent = 5, .breadth_percent = 5, .asymmetry_deg = 0.005, .intensity_percent = 20};
}

lw_compare_options lw_compare_defaults(void)
{
    return (lw_compare_options){.tolerances = lw_tolerances_default(), .effects = true};
}

lw_status lw_comparable(const lw_calibration *before, const lw_calibration *after, lw_error *err)
{
    if (!lw_radiation_same(&before->radiation, &after->radiation))
        return lw_fail(err, LW_BAD_ARGUMENT, "compare calibrations that were made with the same radiation",
                       "the calibration before is for %s (%.6f nm), the one after for %s (%.6f nm): nothing to compare",
                       before->radiation.name, lw_radiation_wavelength(&before->radiation), after->radiation.name,
                       lw_radiation_wavelength(&after->radiation));
    if (strcmp(before->geometry, after->geometry) != 0)
        return lw_fail(err, LW_BAD_ARGUMENT, "compare calibrations of one geometry",
                       "the calibration before is for the geometry '%s', the one after for '%s': nothing to compare",
                       before->geometry, after->geometry);
    if (!(fabs(before->aberrations.radius_mm / after->aberrations.radius_mm - 1) < 1e-3))
        return lw_fail(err, LW_BAD_ARGUMENT, "calibrate both with the same goniometer_radius",
                       "goniometer radius %g mm before and %g mm after: not the same instrument, nothing to compare",
                       before->aberrations.radius_mm, after->aberrations.radius_mm);
    double low = fmax(before->valid_low_deg, after->valid_low_deg);
    double high = fmin(before->valid_high_deg, after->valid_high_deg);
    double shorter = fmin(before->valid_high_deg - before->valid_low_deg, after->valid_high_deg - after->valid_low_deg);
    if (!(high - low >= fmin(20, 0.5 * shorter)) || !(high > low))
        return lw_fail(err, LW_BAD_ARGUMENT, "measure the standard over the same range",
                       "the calibrations hold from %.1f to %.1f deg and from %.1f to %.1f deg: too little in common",
                       before->valid_low_deg, before->valid_high_deg, after->valid_low_deg, after->valid_high_deg);
    return LW_OK;
}

/* What is gathered while the quantities are compared. */
typedef struct comparison {
    lw_node *quantities, *reasons;
    lw_arena *arena;
    int worst; /* 0 pass, 1 attention, 2 fail */
} comparison;

static const char *const verdicts[] = {"pass", "attention", "fail"};

/* angle_deg 0: not at an angle. better_smaller: a smaller magnitude is an improvement. */
static void add_quantity(comparison *c, const char *name, const char *what, double angle_deg, lw_quantity before,
                         lw_quantity after, double tolerance, bool better_smaller, lw_error *err)
{
    double difference = after.value - before.value, u = hypot(before.u, after.u), size = fabs(difference);
    int verdict = size > tolerance + 2 * u ? 2 : size > tolerance || u > tolerance ? 1 : 0;
    lw_node *row = lw_add_group(c->quantities, NULL, err);
    lw_add_text(row, "name", name, err);
    if (angle_deg > 0)
        lw_add_number(row, "two_theta", angle_deg, err);
    lw_add_quantity(row, "before", before, NULL, err);
    lw_add_quantity(row, "after", after, NULL, err);
    lw_add_quantity(row, "difference", lw_quantity_of(difference, u, after.unit), NULL, err);
    lw_add_number(row, "z", u > 0 ? difference / u : difference > 0 ? INFINITY : difference < 0 ? -INFINITY : 0, err);
    lw_add_quantity(row, "tolerance", lw_quantity_of(tolerance, 0, after.unit), NULL, err);
    lw_add_text(row, "verdict", verdicts[verdict], err);
    if (verdict > c->worst)
        c->worst = verdict;
    if (verdict == 0)
        return;
    char place[32] = "";
    if (angle_deg > 0)
        snprintf(place, sizeof place, " at %g deg", angle_deg);
    char was[64], is[64];
    lw_quantity_text(before, was, sizeof was);
    lw_quantity_text(after, is, sizeof is);
    bool improved = better_smaller && fabs(after.value) < fabs(before.value);
    if (size > tolerance)
        lw_add_text(c->reasons, NULL,
                    lw_arena_print(c->arena, err, "%s: %s%s went from %s to %s, by more than the tolerance of %.3g %s%s%s",
                                   verdicts[verdict], what, place, was, is, tolerance, after.unit,
                                   verdict == 1 ? " but not by two standard uncertainties more" : "",
                                   improved ? "; smaller than before, yet the calibration from before no longer holds" : ""),
                    err);
    else
        lw_add_text(c->reasons, NULL,
                    lw_arena_print(c->arena, err,
                                   "attention: the standard uncertainty of the change of %s%s, %.3g %s, exceeds the "
                                   "tolerance of %.3g %s: the scans can't tell", what, place, u, after.unit, tolerance, after.unit),
                    err);
}

static const lw_aberrations *of(const lw_calibration *c)
{
    return &c->aberrations;
}

static void compare_aberrations(comparison *c, const lw_calibration *before, const lw_calibration *after,
                                const lw_tolerances *tolerances, lw_error *err)
{
    for (size_t i = 0; i < of(before)->n; i++)
        for (size_t j = 0; j < of(after)->n; j++) {
            const lw_aberration *kind = of(before)->kind[i];
            if (kind != of(after)->kind[j])
                continue;
            const lw_option *option = lw_option_find(lw_tolerance_table, "compare", kind->name, NULL);
            double tolerance = INFINITY;
            if (option != NULL)
                memcpy(&tolerance, (const char *)tolerances + option->offset, sizeof tolerance);
            add_quantity(c, kind->name, kind->name, 0,
                         lw_quantity_of(of(before)->value[i], sqrt(of(before)->covariance[i][i]), kind->unit),
                         lw_quantity_of(of(after)->value[j], sqrt(of(after)->covariance[j][j]), kind->unit), tolerance, true,
                         err);
        }
}

static lw_status compare_at(comparison *c, const lw_calibration *before, const lw_calibration *after, const char *where,
                       double angle, const lw_tolerances *tolerances, lw_error *err)
{
    char name[48];
    lw_width_figure was, is;
    double u_was, u_is;
    double shift_was = lw_aberrations_shift(&before->aberrations, angle, &u_was);
    double shift_is = lw_aberrations_shift(&after->aberrations, angle, &u_is);
    lw_quantity lean_was, lean_is;
    lw_engine *engine = c->arena->engine;
    lw_status status = lw_profile_figure(engine, before, angle, &was, err);
    if (status == LW_OK)
        status = lw_profile_figure(engine, after, angle, &is, err);
    if (status == LW_OK)
        status = lw_profile_asymmetry(engine, before, 1, &angle, &lean_was, err);
    if (status == LW_OK)
        status = lw_profile_asymmetry(engine, after, 1, &angle, &lean_is, err);
    if (status != LW_OK)
        return status;
    snprintf(name, sizeof name, "shift_%s", where);
    add_quantity(c, name, "the place of a line", angle, lw_quantity_of(shift_was, u_was, "deg"),
                 lw_quantity_of(shift_is, u_is, "deg"), tolerances->shift_deg, true, err);
    snprintf(name, sizeof name, "fwhm_%s", where);
    add_quantity(c, name, "the FWHM", angle, lw_quantity_of(was.fwhm_deg, was.u_fwhm, "deg"),
                 lw_quantity_of(is.fwhm_deg, is.u_fwhm, "deg"), tolerances->fwhm_percent / 100 * was.fwhm_deg, true, err);
    snprintf(name, sizeof name, "breadth_%s", where);
    add_quantity(c, name, "the integral breadth", angle, lw_quantity_of(was.breadth_deg, was.u_breadth, "deg"),
                 lw_quantity_of(is.breadth_deg, is.u_breadth, "deg"), tolerances->breadth_percent / 100 * was.breadth_deg,
                 true, err);
    snprintf(name, sizeof name, "asymmetry_%s", where);
    add_quantity(c, name, "the asymmetry (centroid minus the middle at half height)", angle, lean_was, lean_is,
                 tolerances->asymmetry_deg, true, err);
    return LW_OK;
}

bool lw_compare_intensity(const lw_calibration *before, const lw_calibration *after, lw_quantity *percent)
{
    const lw_node *a = lw_node_get(before->record, "lines"), *b = lw_node_get(after->record, "lines");
    const char *name_a = lw_node_text(lw_node_get(before->record, "standard"), "name", "");
    const char *name_b = lw_node_text(lw_node_get(after->record, "standard"), "name", "");
    if (a == NULL || b == NULL || strcmp(name_a, name_b) != 0)
        return false;
    double sum = 0, square = 0;
    size_t n = 0;
    for (const lw_node *was = a->first; was != NULL; was = was->next)
        for (const lw_node *is = b->first; is != NULL; is = is->next) {
            double area_was = lw_node_number(was, "area", 0), area_is = lw_node_number(is, "area", 0);
            if (strcmp(lw_node_text(was, "hkl", "a"), lw_node_text(is, "hkl", "b")) != 0 || !(area_was > 0 && area_is > 0))
                continue;
            double ratio = log(area_is / area_was);
            sum += ratio;
            square += ratio * ratio;
            n++;
        }
    if (n < 3)
        return false;
    double mean = sum / (double)n, deviation = sqrt(fmax(square / (double)n - mean * mean, 0) / (double)(n - 1));
    *percent = lw_quantity_of(100 * exp(mean), 100 * exp(mean) * deviation, "%");
    return true;
}

double lw_compare_angle(double low_deg, double high_deg, int which)
{
    return fmin(fmax(round(low_deg + (0.1 + 0.4 * which) * (high_deg - low_deg)), low_deg), high_deg);
}

/* Eight lines over the common range. */
static size_t usual_lines(const lw_calibration *before, const lw_calibration *after, lw_reflection *reflection)
{
    double low = fmax(before->valid_low_deg, after->valid_low_deg);
    double high = fmin(before->valid_high_deg, after->valid_high_deg);
    size_t n = 8;
    for (size_t i = 0; i < n; i++)
        reflection[i] = (lw_reflection){.h = (int)i + 1,
                                        .multiplicity = 1,
                                        .two_theta_deg = low + (high - low) * (0.06 + 0.88 * (double)i / (double)(n - 1))};
    return n;
}

static void write_breadths(lw_node *row, const char *name, const lw_effect_breadths *b, lw_error *err)
{
    lw_node *group = lw_add_group(row, name, err);
    lw_add_number(group, "scherrer_nm", b->scherrer_nm > 0 ? b->scherrer_nm : NAN, err);
    lw_add_number(group, "williamson_hall_nm", b->williamson_hall_nm > 0 ? b->williamson_hall_nm : NAN, err);
    lw_add_number(group, "williamson_hall_strain", b->williamson_hall_strain, err);
}

/* NAN, written as null: no such part. */
static double or_none(double size_nm)
{
    return size_nm > 0 ? size_nm : NAN;
}

static lw_status write_effects(lw_engine *engine, const lw_calibration *before, const lw_calibration *after,
                               const lw_effect_lines *lines, lw_node *record, lw_error *err)
{
    static const double sizes[] = {10, 20, 50, 100, 0}, strains[] = {0, 0.0005, 0.001, 0.003};
    lw_add_text(record, "effects_of",
                "samples with a Lorentzian size line (size = volume-weighted mean column length, nm) and normally "
                "distributed strain (root mean square), measured on the instrument after and analysed with the "
                "calibration before: reported_* by one size and one strain for all lines, each a Voigt folded with the "
                "instrument; line_by_line: from the breadth of each line, against what the right calibration gives. "
                "null: no such part", err);
    lw_node *list = lw_add_list(record, "effects", err);
    size_t done = 0, all = sizeof sizes / sizeof *sizes * (sizeof strains / sizeof *strains) - 1;
    for (size_t i = 0; i < sizeof sizes / sizeof *sizes; i++)
        for (size_t j = 0; j < sizeof strains / sizeof *strains; j++) {
            lw_effect effect = {.size_nm = sizes[i], .strain = strains[j]};
            if (!(effect.size_nm > 0 || effect.strain > 0))
                continue;
            lw_engine_progress(engine, "effect on results", (double)done++ / (double)all);
            lw_error why = LW_ERROR_NONE;
            lw_status status = lw_effect_find(engine, before, after, lines, &effect, &why);
            if (status == LW_OUT_OF_MEMORY || status == LW_CANCELLED)
                return lw_fail(err, status, why.remedy, "%s", why.message);
            lw_node *row = lw_add_group(list, NULL, err);
            lw_add_number(row, "size_nm", or_none(effect.size_nm), err);
            lw_add_number(row, "strain", effect.strain, err);
            if (status != LW_OK) {
                lw_add_number(row, "reported_size_nm", NAN, err);
                lw_add_number(row, "reported_strain", NAN, err);
                lw_add_text(row, "remark", why.message, err);
                continue;
            }
            lw_add_number(row, "reported_size_nm", or_none(effect.reported_size_nm), err);
            lw_add_number(row, "reported_strain", effect.reported_strain, err);
            lw_node *group = lw_add_group(row, "line_by_line", err);
            write_breadths(group, "with_old", &effect.by_old, err);
            write_breadths(group, "with_new", &effect.by_new, err);
        }
    lw_engine_progress(engine, "effect on results", 1);
    return err->status;
}

/* A spacing is off by -cot(theta) times the change of place, when places are corrected with the old aberrations. */
static void write_spacing(const lw_calibration *before, const lw_calibration *after, const double angle[3],
                          lw_node *record, lw_error *err)
{
    lw_node *list = lw_add_list(record, "effects_on_spacing", err);
    for (int i = 0; i < 3; i++) {
        double u_was, u_is, cot = 1 / tan(angle[i] * degree / 2);
        double change = lw_aberrations_shift(&after->aberrations, angle[i], &u_is) -
                        lw_aberrations_shift(&before->aberrations, angle[i], &u_was);
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "two_theta", angle[i], err);
        lw_add_quantity(row, "relative_error",
                        lw_quantity_of(-cot * change * degree / 2, cot * hypot(u_was, u_is) * degree / 2, ""),
                        "relative error of a spacing, if lines measured now are corrected with the old aberrations", err);
    }
}

lw_status lw_compare(lw_engine *engine, const lw_calibration *before, const lw_calibration *after,
                     const lw_compare_options *options, lw_node *record, lw_error *err)
{
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    lw_status status = lw_comparable(before, after, err);
    if (status != LW_OK)
        return status;
    double low = fmax(before->valid_low_deg, after->valid_low_deg);
    double high = fmin(before->valid_high_deg, after->valid_high_deg);
    static const char *const where[] = {"low", "middle", "high"};
    double angle[3];
    for (int i = 0; i < 3; i++)
        angle[i] = lw_compare_angle(low, high, i);
    lw_add_text(record, "schema", schema, err);
    lw_node *verdict = lw_add_text(record, "verdict", "pass", err);
    comparison c = {.arena = record->arena};
    c.reasons = lw_add_list(record, "reasons", err);
    lw_add_text(record, "rule",
                "pass: the change is within the tolerance; fail: beyond it by more than two standard uncertainties; "
                "attention: beyond it by less, or the change is known no better than the tolerance", err);
    double range[2] = {low, high};
    lw_add_vector(record, "two_theta", range, 2, "deg", err);
    c.quantities = lw_add_list(record, "quantities", err);
    compare_aberrations(&c, before, after, &options->tolerances, err);
    for (int i = 0; i < 3 && status == LW_OK; i++)
        status = compare_at(&c, before, after, where[i], angle[i], &options->tolerances, err);
    if (status != LW_OK)
        return status;
    lw_quantity intensity;
    if (lw_compare_intensity(before, after, &intensity))
        add_quantity(&c, "intensity", "the intensity", 0, lw_quantity_of(100, 0, "%"), intensity,
                     options->tolerances.intensity_percent, false, err);
    if (verdict != NULL)
        verdict->text = verdicts[c.worst];
    if (options->effects && err->status == LW_OK) {
        lw_reflection usual[8];
        lw_effect_lines lines = {.n = usual_lines(before, after, usual), .reflection = usual};
        status = write_effects(engine, before, after, options->lines ? options->lines : &lines, record, err);
        if (status != LW_OK)
            return status;
        write_spacing(before, after, angle, record, err);
    } else
        lw_add_list(record, "effects", err);
    return err->status;
}
