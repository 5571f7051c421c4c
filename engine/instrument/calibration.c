/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/calibration.h"

#include "instrument/calibration_optical.h"
#include "instrument/calibration_record.h"
#include "numeric/least_squares.h"
#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static const double degree = M_PI / 180;
enum { PROFILE_OPTICAL = 1, PROFILE_AUTO };
static const char *const profile_names[] = {"empirical", "optical", "auto", NULL};
static const char *const geometry_names[] = {"auto", "reflection", "capillary", NULL};

#define AT(field) offsetof(lw_calibrate_options, field)
const lw_option lw_calibrate_option_table[] = {
    {"goniometer_radius", LW_OPTION_NUMBER, "mm", "from the scan's header, else 200", 0, 2000, NULL,
     AT(goniometer_radius_mm), "distance from axis to receiving slit, for the displacement in mm"},
    {"geometry", LW_OPTION_CHOICE, "", "auto", 0, 0, geometry_names, AT(geometry),
     "reflection: flat specimen; capillary: transmission; auto: capillary for a plain wavelength"},
    {"aberrations", LW_OPTION_LIST, "", "auto", 0, 0, NULL, AT(aberrations),
     "aberrations of position to fit: zero_shift, displacement, flat_specimen, transparency, wavelength; auto: what the "
     "lines give evidence for"},
    {"profile", LW_OPTION_CHOICE, "", "empirical", 0, 0, profile_names, AT(profile),
     "empirical: width functions of the line fit; optical: convolution of the geometry's aberrations, refined to the scan; "
     "auto: optical where the scan's header gives the slits and it describes the scan better"},
    {"source_width", LW_OPTION_NUMBER, "mm", "0.04", 0, 10, NULL, AT(source_width_mm),
     "optical: width of the source as the specimen sees it"},
    {"slit_width", LW_OPTION_NUMBER, "mm", "from the scan's header, else refined", 0, 20, NULL, AT(slit_width_mm),
     "optical: receiving slit"},
    {"divergence", LW_OPTION_NUMBER, "deg", "from the scan's header, else 0.5", 0, 20, NULL, AT(divergence_deg),
     "optical: full equatorial divergence"},
    {"source_length", LW_OPTION_NUMBER, "mm", "12", 0, 100, NULL, AT(source_length_mm), "optical: axial length of the source"},
    {"specimen_length", LW_OPTION_NUMBER, "mm", "refined", 0, 200, NULL, AT(specimen_length_mm),
     "optical: axial length of the specimen"},
    {"slit_length", LW_OPTION_NUMBER, "mm", "15", 0, 200, NULL, AT(slit_length_mm), "optical: axial length of the slit"},
    {"soller", LW_OPTION_NUMBER, "rad", "from the scan's header, else 0.04", 0, 1.58, NULL, AT(soller_rad),
     "optical: aperture of the Soller slits, distance over length of the foils; 0 = none"},
    {"attenuation", LW_OPTION_NUMBER, "mm^-1", "not transparent", 0, 1e5, NULL, AT(attenuation_per_mm),
     "optical: linear attenuation of the specimen with its pores"},
    {"thickness", LW_OPTION_NUMBER, "mm", "thick", 0, 100, NULL, AT(thickness_mm), "optical: thickness of the specimen"},
    {"tilt", LW_OPTION_NUMBER, "deg", "0", 0, 5, NULL, AT(tilt_deg), "optical: specimen out of the 2:1 setting"},
    {"refine", LW_OPTION_LIST, "", "specimen_length, source_width", 0, 0, NULL, AT(refine),
     "optical: quantities to refine"},
    {"standard_size", LW_OPTION_FLAG, "", "false", 0, 0, NULL, AT(standard_size),
     "optical: take the domain size that the standard's certificate states into account"},
    LW_OPTIONS_END};

lw_calibrate_options lw_calibrate_defaults(void)
{
    return (lw_calibrate_options){.source_width_mm = NAN, .slit_width_mm = NAN, .divergence_deg = NAN,
                                  .source_length_mm = NAN, .specimen_length_mm = NAN, .slit_length_mm = NAN,
                                  .soller_rad = NAN, .attenuation_per_mm = NAN, .thickness_mm = NAN, .tilt_deg = NAN};
}

double lw__goniometer_radius(const lw_calibrate_options *options, const lw_scan *scan, const char **from)
{
    *from = "given";
    if (options->goniometer_radius_mm > 0)
        return options->goniometer_radius_mm;
    double radius = lw__in_header(scan->header, "goniometer radius", 0); /* "goniometer radius 217.5 mm" */
    *from = "scan header";
    if (radius > 10 && radius < 2000)
        return radius;
    *from = "assumed: neither given nor in the scan's header";
    return 200;
}

/* Sets of aberrations to try, the first with all; evidence decides between them. Zero shift and displacement (or the
 * wavelength of a capillary) are always there: an instrument has them. */
typedef struct candidates {
    size_t n;
    const char *const *names[4];
} candidates;

bool lw__wide_range(const lw_lines *lines)
{
    /* a short range can't tell four smooth functions of angle apart */
    return lines->n >= 10 && lines->line[lines->n - 1].two_theta.value - lines->line[0].two_theta.value > 80;
}

/* With the optical profile the flat specimen is in the profile already. */
static candidates candidates_for(const lw_lines *lines, bool capillary, bool optical)
{
    static const char *const all[] = {"zero_shift", "displacement", "flat_specimen", "transparency", NULL};
    static const char *const flat[] = {"zero_shift", "displacement", "flat_specimen", NULL};
    static const char *const deep[] = {"zero_shift", "displacement", "transparency", NULL};
    static const char *const few[] = {"zero_shift", "displacement", NULL};
    static const char *const transmission[] = {"zero_shift", "wavelength", NULL};
    bool wide = lw__wide_range(lines);
    if (capillary)
        return (candidates){1, {transmission}};
    if (wide && optical)
        return (candidates){2, {deep, few}};
    return wide ? (candidates){4, {all, flat, deep, few}} : (candidates){1, {few}};
}

lw_status lw__take_named(const char *const *names, size_t n, lw_aberrations *set, lw_error *err)
{
    set->n = 0;
    for (size_t i = 0; i < n && names[i] != NULL; i++) {
        const lw_aberration *kind = lw_aberration_named(names[i]);
        if (kind == NULL)
            return lw_fail(err, LW_BAD_ARGUMENT,
                           "choose from: auto, zero_shift, displacement, flat_specimen, transparency, wavelength",
                           "calibrate: unknown aberration '%s'", names[i]);
        for (size_t j = 0; j < set->n; j++)
            if (set->kind[j] == kind)
                return lw_fail(err, LW_BAD_ARGUMENT, "name each once", "calibrate: the aberration '%s' is named twice",
                               names[i]);
        if (set->n == LW_ABERRATION_MOST)
            return lw_fail(err, LW_BAD_ARGUMENT, NULL, "calibrate: more than %d aberrations", LW_ABERRATION_MOST);
        set->kind[set->n++] = kind;
    }
    return LW_OK;
}

double lw__certified_angle(const lw_standard *standard, double wavelength_nm, const lw_reflection *r, double d[3])
{
    const lw_cell *cell = &standard->material.cell;
    double s = lw_cell_s(cell, r->h, r->k, r->l), slopes[6];
    lw_cell_s_slopes(cell, r->h, r->k, r->l, slopes);
    double sine = s * wavelength_nm / 2;
    if (!(sine < 1))
        return NAN;
    for (int i = 0; i < 3; i++)
        d[i] = slopes[i] * wavelength_nm / sqrt(1 - sine * sine) / degree;
    return 2 * asin(sine) / degree;
}

size_t lw__edge_groups(lw_crystal_system system, size_t group[3])
{
    bool ab = system == LW_CUBIC || system == LW_TETRAGONAL || system == LW_HEXAGONAL || system == LW_TRIGONAL;
    group[0] = 0;
    group[1] = ab ? 0 : 1;
    group[2] = system == LW_CUBIC ? 0 : group[1] + 1;
    return group[2] + 1;
}

lw_status lw__residual_u(size_t n, size_t k, size_t m, const double *slope, const double *estimator, const double *covariance,
                         const double *common, double *u, lw_arena *scratch, lw_error *err)
{
    double *row = lw_arena_take(scratch, n, sizeof *row, err);
    if (row == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++) {
        double sum = 0;
        for (size_t j = 0; j < n; j++) {
            row[j] = i == j;
            for (size_t a = 0; a < k; a++)
                row[j] -= slope[i * k + a] * estimator[j * k + a];
        }
        for (size_t j = 0; j < n; j++)
            for (size_t l = 0; l < n; l++)
                sum += row[j] * covariance[j * n + l] * row[l];
        for (size_t e = 0; e < m; e++) {
            double moved = 0;
            for (size_t j = 0; j < n; j++)
                moved += row[j] * common[j * m + e];
            sum += moved * moved;
        }
        u[i] = sqrt(fmax(sum, 0));
    }
    return LW_OK;
}

/* Weighted least squares of the differences on the aberrations' slopes. Each line is weighted by its own u alone;
 * what is common to all lines (the axial divergence, the certificate) would let generalised weights bend the
 * aberrations to fit it, and enters the covariance of the result instead, through the estimator. */
static lw_status fit_aberrations(lw_engine *engine, lw_aberrations *set, lw_calibration_lines *rows,
                                 const double *covariance, const double *certificate, lw_arena *scratch, lw_error *err)
{
    size_t n = rows->n, k = set->n, weakest;
    double *slope = lw_arena_take(scratch, n * k, sizeof *slope, err);
    double *estimator = lw_arena_take(scratch, n * k, sizeof *estimator, err);
    if (slope == NULL || estimator == NULL)
        return LW_OUT_OF_MEMORY;
    double h[LW_ABERRATION_MOST * LW_ABERRATION_MOST] = {0}, c[LW_ABERRATION_MOST * LW_ABERRATION_MOST] = {0};
    for (size_t i = 0; i < n; i++)
        for (size_t a = 0; a < k; a++) {
            slope[i * k + a] = set->kind[a]->slope(rows->certified[i], set->radius_mm);
            for (size_t b = 0; b <= a; b++)
                h[a * k + b] += slope[i * k + a] * slope[i * k + b] / covariance[i * n + i];
        }
    lw_status status = lw_invert_normal(engine, h, k, NULL, c, &weakest, err);
    if (status != LW_OK)
        return status;
    memset(set->value, 0, sizeof set->value);
    for (size_t i = 0; i < n; i++)
        for (size_t a = 0; a < k; a++) {
            for (size_t b = 0; b < k; b++)
                estimator[i * k + a] += c[a * k + b] * slope[i * k + b] / covariance[i * n + i];
            set->value[a] += estimator[i * k + a] * rows->difference[i];
        }
    rows->chi2 = 0;
    for (size_t i = 0; i < n; i++) {
        rows->residual[i] = rows->difference[i] - lw_aberrations_shift(set, rows->certified[i], NULL);
        rows->chi2 += rows->residual[i] * rows->residual[i] / covariance[i * n + i];
    }
    /* an aberration law that misses the positions makes its parameters less certain (Birge 1932 Phys. Rev. 40, 207) */
    rows->p = lw_chi2_tail(rows->chi2, (double)(n - k));
    rows->birge = rows->p < 1e-3 ? sqrt(rows->chi2 / (double)(n - k)) : 1;
    for (size_t a = 0; a < k; a++)
        for (size_t b = 0; b < k; b++) {
            double sum = 0, common[2][3] = {{0}};
            for (size_t i = 0; i < n; i++) {
                for (size_t j = 0; j < n; j++)
                    sum += estimator[i * k + a] * covariance[i * n + j] * estimator[j * k + b];
                for (size_t e = 0; e < 3; e++) {
                    common[0][e] += estimator[i * k + a] * certificate[i * 3 + e];
                    common[1][e] += estimator[i * k + b] * certificate[i * 3 + e];
                }
            }
            sum *= rows->birge * rows->birge;
            for (size_t e = 0; e < 3; e++)
                sum += common[0][e] * common[1][e];
            set->covariance[a][b] = sum;
        }
    return lw__residual_u(n, k, 3, slope, estimator, covariance, certificate, rows->u_residual, scratch, err);
}

/* n ln(chi2/n) + 2 K + 2 K (K + 1)/(n - K - 1), K parameters with the scale. */
double lw__aicc(double chi2, size_t n, size_t parameters)
{
    double points = (double)n, k = (double)parameters + 1;
    return points - k - 1 > 0 ? points * log(chi2 / points) + 2 * k + 2 * k * (k + 1) / (points - k - 1) : INFINITY;
}

/* Fits each candidate set and keeps the one with the lowest criterion; of two within 2 of each other the larger, so
 * that what can't be ruled out stays in the uncertainty. */
static lw_status choose_aberrations(lw_engine *engine, const lw_lines *lines, bool capillary, lw_aberrations *set,
                                    lw_calibration_lines *rows, const double *covariance, const double *certificate,
                                    lw_arena *scratch, lw_error *err)
{
    candidates tried = candidates_for(lines, capillary, rows->refined != NULL);
    double best = INFINITY;
    size_t kept = 0;
    lw_status status = LW_OK;
    for (size_t i = 0; i < tried.n && status == LW_OK; i++) {
        status = lw__take_named(tried.names[i], LW_ABERRATION_MOST, set, err);
        if (status == LW_OK && rows->n > set->n)
            status = fit_aberrations(engine, set, rows, covariance, certificate, scratch, err);
        rows->tried[i] = (lw_calibration_trial){.set = *set, .criterion = lw__aicc(rows->chi2, rows->n, set->n)};
        rows->n_tried = i + 1;
        if (rows->tried[i].criterion < best)
            best = rows->tried[i].criterion;
    }
    while (kept + 1 < tried.n && !(rows->tried[kept].criterion <= best + 2))
        kept++;
    *set = rows->tried[kept].set;
    return status == LW_OK ? fit_aberrations(engine, set, rows, covariance, certificate, scratch, err) : status;
}

lw_status lw__calibration_lines_take(lw_calibration_lines *rows, size_t most, lw_arena *arena, lw_error *err)
{
    double **column[] = {&rows->certified, &rows->u_certified, &rows->difference, &rows->residual, &rows->u_residual};
    rows->place = lw_arena_take(arena, most, sizeof *rows->place, err);
    rows->line = lw_arena_take(arena, most, sizeof *rows->line, err);
    bool all = rows->place && rows->line;
    for (size_t i = 0; i < sizeof column / sizeof *column; i++) {
        *column[i] = lw_arena_take(arena, most, sizeof(double), err);
        all = all && *column[i] != NULL;
    }
    return all ? LW_OK : LW_OUT_OF_MEMORY;
}

/* Positions of the supported lines against the certificate. */
static lw_status calibrate_positions(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                                     lw_calibration *calibration, const lw_refined *refined, lw_calibration_lines *rows,
                                     lw_arena *scratch, lw_error *err)
{
    lw_aberrations *set = &calibration->aberrations;
    double wavelength = lw_radiation_wavelength(&lines->radiation);
    size_t n = 0, group[3], groups = lw__edge_groups(standard->material.system, group);
    const lw_cell *cell = &standard->material.cell;
    double u_edge[3] = {cell->u_a, cell->u_b, cell->u_c};
    double *shift = lw_arena_take(scratch, lines->n * 3, sizeof *shift, err); /* per group, already times its u */
    double *covariance = lw_arena_take(scratch, lines->n * lines->n, sizeof *covariance, err);
    size_t *which = lw_arena_take(scratch, lines->n, sizeof *which, err); /* of the refined lines */
    if (!shift || !covariance || !which || lw__calibration_lines_take(rows, lines->n, &calibration->arena, err) != LW_OK)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < lines->n; k++) {
        const lw_line *line = &lines->line[k];
        double d[3];
        if (!line->supported || !(line->two_theta.u > 0))
            continue;
        double angle = lw__certified_angle(standard, wavelength, &line->reflection, d);
        if (!isfinite(angle))
            continue;
        rows->place[n] = line->two_theta;
        if (calibration->has_optical) {
            size_t i = 0;
            while (i < refined->n_lines && refined->line[i] != k)
                i++;
            if (i == refined->n_lines)
                continue;
            which[n] = i;
            rows->place[n] = lw_quantity_of(refined->position[i],
                                            sqrt(refined->position_covariance[i * refined->n_lines + i]), "deg");
        }
        for (size_t e = 0; e < 3; e++)
            shift[n * 3 + group[e]] += d[e] * u_edge[e];
        for (size_t e = 0; e < groups; e++)
            rows->u_certified[n] += shift[n * 3 + e] * shift[n * 3 + e];
        rows->u_certified[n] = sqrt(rows->u_certified[n]);
        rows->line[n] = line;
        rows->certified[n] = angle;
        rows->difference[n] = rows->place[n].value - angle;
        n++;
    }
    rows->n = n;
    if (n < set->n + 1)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0, "measure more lines, or name fewer aberrations",
                          "%zu supported lines can't carry %zu aberrations", n, set->n);
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            covariance[i * n + j] =
                calibration->has_optical
                    ? refined->position_covariance[which[i] * refined->n_lines + which[j]]
                    : lines->covariance[rows->line[i]->at_position * lines->n_parameters + rows->line[j]->at_position];
    lw_status status = LW_OK;
    if (rows->given)
        status = fit_aberrations(engine, set, rows, covariance, shift, scratch, err);
    else
        status = choose_aberrations(engine, lines, strcmp(calibration->geometry, "capillary") == 0, set, rows, covariance,
                                    shift, scratch, err);
    if (status != LW_OK)
        return status;
    double square = 0;
    for (size_t i = 0; i < n; i++)
        square += rows->residual[i] * rows->residual[i];
    rows->rms = sqrt(square / (double)n);
    if (rows->rms > 0.05)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0,
                          "is it the right standard, and the right radiation?",
                          "the lines do not fall where the certificate of %s puts them (rms %.3f deg after aberrations)",
                          standard->name, rows->rms);
    return LW_OK;
}

/* Where the lines' places show the standard's transparency, the profile has it too: once more with the attenuation that the
 * shift gives, as a value with its u, and the positions again, whose transparency is then in the profile. */
static lw_status deepen(lw_engine *engine, const lw_lines *lines, const lw_standard *standard, const lw_calibrate_options *options,
                        lw_calibration *calibration, lw_refined *refined, lw_calibration_lines *rows, lw_arena *scratch,
                        lw_error *err)
{
    lw_quantity attenuation;
    if (rows->given || !lw__optical_transparency(options, calibration, &attenuation))
        return LW_OK;
    lw_refined plain = *refined, deep = {0};
    lw_error why = LW_ERROR_NONE;
    lw_status status = lw__calibrate_optical(engine, lines, standard, options, &attenuation, calibration, &deep, &why);
    if (status != LW_OK && status != LW_NO_CONVERGENCE) {
        *err = why;
        return status;
    }
    if (status != LW_OK || deep.chi2 > plain.chi2 + 10.83) /* the shape speaks against it (p = 0.001) */
        return lw__calibrate_optical(engine, lines, standard, options, NULL, calibration, refined, err);
    deep.attenuation_from_positions = true;
    *refined = deep;
    return calibrate_positions(engine, lines, standard, calibration, refined, rows, scratch, err);
}

lw_status lw_calibrate(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                       const lw_calibrate_options *options, lw_calibration **out, lw_error *err)
{
    *out = NULL;
    bool smooth = false;
    for (int i = 0; i < LW_AXIAL_1; i++)
        smooth |= lines->smooth.refined[i];
    if (!smooth || lines->has_instrument || strcmp(lines->shape, "voigt") != 0)
        return lw_fail(err, LW_BAD_ARGUMENT, "fit the standard with fit_lines(scan, reflections, {widths = \"smooth\"})",
                       "calibrate: the lines must be fitted with widths as smooth functions of angle and no instrument");
    lw_calibration *calibration = lw_take(engine, sizeof *calibration, err);
    if (calibration == NULL)
        return LW_OUT_OF_MEMORY;
    memset(calibration, 0, sizeof *calibration);
    lw_arena_begin(&calibration->arena, engine);
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    bool capillary = options->geometry == 2 || (options->geometry == 0 && lines->radiation.is_plain);
    snprintf(calibration->geometry, sizeof calibration->geometry, "%s", capillary ? "capillary" : "reflection");
    calibration->radiation = lines->radiation;
    calibration->profile = lines->smooth;
    lw_calibration_lines rows = {.lines = lines, .standard = standard};
    calibration->aberrations.radius_mm = lw__goniometer_radius(options, lines->scan, &rows.radius_from);
    rows.given = options->aberrations.n > 0 && strcmp(options->aberrations.item[0], "auto") != 0;
    lw_refined refined = {0};
    bool optical = options->profile == PROFILE_OPTICAL;
    lw_status status = LW_OK;
    if (options->profile == PROFILE_AUTO)
        status = lw__optical_or_not(engine, lines, standard, options, calibration, &refined, &optical, err);
    else if (optical)
        status = lw__calibrate_optical(engine, lines, standard, options, NULL, calibration, &refined, err);
    if (optical)
        rows.refined = &refined;
    candidates usual = candidates_for(lines, capillary, optical);
    if (status == LW_OK)
        status = rows.given ? lw__take_named(options->aberrations.item, options->aberrations.n, &calibration->aberrations, err)
                                  : lw__take_named(usual.names[usual.n - 1], LW_ABERRATION_MOST, &calibration->aberrations, err);
    if (status == LW_OK)
        status = calibrate_positions(engine, lines, standard, calibration, &refined, &rows, &scratch, err);
    if (status == LW_OK && calibration->has_optical)
        status = deepen(engine, lines, standard, options, calibration, &refined, &rows, &scratch, err);
    if (status == LW_OK) {
        calibration->valid_low_deg = rows.place[0].value;
        calibration->valid_high_deg = rows.place[rows.n - 1].value;
        calibration->profile.low_deg = calibration->valid_low_deg;
        calibration->profile.high_deg = calibration->valid_high_deg;
        const lw_calibration_lines *all = &rows;
        status = lw__calibration_record(calibration, &all, 1, NULL, err);
    }
    lw_arena_end(&scratch);
    if (status != LW_OK) {
        lw_calibration_free(calibration);
        return status;
    }
    *out = calibration;
    return LW_OK;
}

void lw_calibration_free(lw_calibration *calibration)
{
    if (calibration == NULL)
        return;
    lw_engine *engine = calibration->arena.engine;
    lw_arena_end(&calibration->arena);
    lw_give(engine, calibration, sizeof *calibration);
}

lw_status lw_calibration_covers(const lw_calibration *calibration, const lw_radiation *radiation, double low_deg,
                                double high_deg, lw_error *err)
{
    if (!lw_radiation_same(&calibration->radiation, radiation))
        return lw_fail(err, LW_BAD_ARGUMENT, "calibrate the instrument with the radiation that the sample was measured with",
                       "the calibration is for %s (%.6f nm), the scan for %s (%.6f nm)", calibration->radiation.name,
                       lw_radiation_wavelength(&calibration->radiation), radiation->name,
                       lw_radiation_wavelength(radiation));
    double margin = 0.05 * (calibration->valid_high_deg - calibration->valid_low_deg);
    if (low_deg < calibration->valid_low_deg - margin || high_deg > calibration->valid_high_deg + margin)
        return lw_fail(err, LW_OUT_OF_RANGE,
                       "measure the standard over a wider range, or leave the lines outside it out (range = {low, high})",
                       "lines from %.2f to %.2f deg, but the calibration holds from %.2f to %.2f deg", low_deg, high_deg,
                       calibration->valid_low_deg, calibration->valid_high_deg);
    return LW_OK;
}
