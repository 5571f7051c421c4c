/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/calibration_optical.h"

#include "instrument/calibration_record.h"
#include "instrument/optical/table.h"
#include "numeric/cholesky.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

double lw__in_header(const char *header, const char *words, double otherwise)
{
    const char *at = header ? strstr(header, words) : NULL;
    if (at == NULL)
        return otherwise;
    char *end;
    double value = strtod(at + strlen(words), &end);
    return end != at + strlen(words) && isfinite(value) ? value : otherwise;
}

/* An option that was not given is NAN. */
static double chosen(double given, double otherwise)
{
    return isnan(given) ? otherwise : given;
}

static void take_geometry(const lw_calibrate_options *o, const char *header, double radius, lw_geometry *g, bool *slit_known)
{
    double slit = lw__in_header(header, "receiving slit", NAN), soller = lw__in_header(header, "Soller slits", 0.04);
    *slit_known = !isnan(o->slit_width_mm) || !isnan(slit);
    *g = (lw_geometry){.radius = radius,
                       .source_width = chosen(o->source_width_mm, 0.04),
                       .slit_width = chosen(o->slit_width_mm, isnan(slit) ? 0.1 : slit),
                       .divergence_deg = chosen(o->divergence_deg, lw__in_header(header, "divergence slit", 0.5)),
                       .source_length = chosen(o->source_length_mm, 12),
                       .specimen_length = chosen(o->specimen_length_mm, 15),
                       .slit_length = chosen(o->slit_length_mm, 15),
                       .soller_incident = chosen(o->soller_rad, soller),
                       .soller_diffracted = chosen(o->soller_rad, soller),
                       .attenuation = chosen(o->attenuation_per_mm, 0),
                       .thickness = chosen(o->thickness_mm, 0),
                       .tilt_deg = chosen(o->tilt_deg, 0)};
}

enum { ANGLES = 9 };

/* What a unit of a refined quantity does to the breadth over the angles, as changes of the joining Gaussian's U, V and W:
 * least squares. */
static void as_widths(const lw_width_function *profile, const double *angle, const double *breadth_slope, double change[3])
{
    double normal[9] = {0};
    memset(change, 0, 3 * sizeof *change);
    for (size_t i = 0; i < ANGLES; i++) {
        lw_width_figure figure;
        lw_width_figure_at(profile, angle[i], 0, 0, &figure);
        double t = tan(angle[i] * (M_PI / 360)), by[3] = {t * t, t, 1};
        for (int a = 0; a < 3; a++) {
            change[a] += by[a] * figure.d_breadth[0] * breadth_slope[i];
            for (int b = a; b < 3; b++)
                normal[3 * a + b] += by[a] * by[b] * figure.d_breadth[0] * figure.d_breadth[0];
        }
    }
    if (lw_cholesky(normal, 3, 3, 0) == 3)
        lw_cholesky_solve(normal, 3, 3, change);
    else
        memset(change, 0, 3 * sizeof *change);
}

lw_refined_set lw__refined_set(const lw_calibration *calibration)
{
    return (lw_refined_set){.n = calibration->n_refined, .name = calibration->refined_name,
                            .covariance = calibration->refined_covariance};
}

/* Table, and the covariance of the geometry as one of the joining Gaussian's widths, so that the u of a breadth is at every
 * angle what the geometry's covariance makes it. */
lw_status lw__optical_profile(lw_engine *engine, lw_calibration *calibration, double low, double high, lw_error *err)
{
    static const int width[3] = {LW_U, LW_V, LW_W};
    lw_profile_table *table = NULL;
    lw_width_function *profile = &calibration->profile;
    *profile = (lw_width_function){.low_deg = low, .high_deg = high};
    lw_status status = lw_optics_table(engine, &calibration->optical, fmax(low - 10, 2), fmin(high + 10, 175),
                                       &calibration->arena, &table, &profile->value[LW_W], err);
    if (status != LW_OK)
        return status;
    profile->table = table;
    lw_refined_set refined = lw__refined_set(calibration);
    lw_optics_figure figure[ANGLES], u[ANGLES], slope[ANGLES][LW_REFINED_MOST];
    double angle[ANGLES], change[LW_REFINED_MOST][3];
    for (size_t i = 0; i < ANGLES; i++)
        angle[i] = low + (high - low) * (double)i / (ANGLES - 1);
    status = lw_optics_figures(engine, &calibration->optical, &refined, ANGLES, angle, figure, u, slope, err);
    if (status != LW_OK)
        return status;
    for (size_t j = 0; j < refined.n; j++) {
        double breadth_slope[ANGLES];
        for (size_t i = 0; i < ANGLES; i++)
            breadth_slope[i] = slope[i][j].breadth_deg;
        as_widths(profile, angle, breadth_slope, change[j]);
    }
    for (int a = 0; a < 3; a++) {
        profile->refined[width[a]] = true;
        for (int b = 0; b < 3; b++)
            for (size_t i = 0; i < refined.n; i++)
                for (size_t j = 0; j < refined.n; j++)
                    profile->covariance[width[a]][width[b]] += change[i][a] * refined.covariance[i][j] * change[j][b];
    }
    return LW_OK;
}

/* attenuation: refined as well, with what is known of it, 1/mm, from the geometry refined before; NULL: not. */
static lw_status refine_with(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                             const lw_calibrate_options *options, double radius_mm, const lw_quantity *attenuation,
                             const lw_geometry *before, lw_arena *arena, lw_refined *refined, lw_error *err)
{
    lw_geometry start;
    bool slit_known;
    take_geometry(options, lines->scan->header, radius_mm, &start, &slit_known);
    lw_refine_options how = {.summed = lines->scan->header && strstr(lines->scan->header, "summed over each step") != NULL,
                             .domain_size_nm = options->standard_size ? standard->domain_size_nm : 0};
    if (options->refine.n > LW_REFINED_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "calibrate: more than %d quantities to refine", LW_REFINED_MOST);
    for (size_t i = 0; i < options->refine.n; i++)
        how.name[how.n++] = options->refine.item[i];
    if (how.n == 0) {
        how.name[how.n++] = "specimen_length";
        how.name[how.n++] = "source_width";
        if (!slit_known)
            how.name[how.n++] = "slit_width";
    }
    if (attenuation != NULL && how.n < LW_REFINED_MOST) {
        start = *before;
        how.known[how.n] = start.attenuation = attenuation->value;
        how.u_known[how.n] = attenuation->u;
        how.name[how.n++] = "attenuation";
    }
    return lw_geometry_refine(engine, lines, &start, &how, arena, refined, err);
}

lw_status lw__optical_refine(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                             const lw_calibrate_options *options, double radius_mm, lw_arena *arena, lw_refined *refined,
                             lw_error *err)
{
    return refine_with(engine, lines, standard, options, radius_mm, NULL, NULL, arena, refined, err);
}

lw_status lw__calibrate_optical(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                                const lw_calibrate_options *options, const lw_quantity *attenuation,
                                lw_calibration *calibration, lw_refined *refined, lw_error *err)
{
    if (strcmp(calibration->geometry, "reflection") != 0)
        return lw_fail(err, LW_BAD_ARGUMENT, "use profile = \"empirical\"",
                       "calibrate: the optical profile is that of a flat specimen in reflection, not of a capillary");
    lw_status status = refine_with(engine, lines, standard, options, calibration->aberrations.radius_mm, attenuation,
                                   &calibration->optical, &calibration->arena, refined, err);
    if (status != LW_OK)
        return status;
    calibration->has_optical = true;
    calibration->optical = refined->geometry;
    calibration->n_refined = refined->n;
    for (size_t i = 0; i < refined->n; i++) {
        calibration->refined_name[i] = refined->name[i];
        for (size_t j = 0; j < refined->n; j++)
            calibration->refined_covariance[i][j] = refined->covariance[i][j];
    }
    return lw__optical_profile(engine, calibration, refined->position[0], refined->position[refined->n_lines - 1], err);
}

lw_status lw__optical_or_not(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                             const lw_calibrate_options *options, lw_calibration *calibration, lw_refined *refined,
                             bool *optical, lw_error *err)
{
    char *why = calibration->profile_why;
    const size_t size = sizeof calibration->profile_why;
    const char *header = lines->scan->header;
    *optical = false;
    if (strcmp(calibration->geometry, "reflection") != 0) {
        snprintf(why, size, "empirical: the specimen is not flat");
        return LW_OK;
    }
    if (isnan(chosen(options->slit_width_mm, lw__in_header(header, "receiving slit", NAN))) ||
        isnan(chosen(options->divergence_deg, lw__in_header(header, "divergence slit", NAN)))) {
        snprintf(why, size, "empirical: neither the scan's header nor the options give receiving slit and divergence");
        return LW_OK;
    }
    lw_error each = LW_ERROR_NONE;
    lw_status status = lw__calibrate_optical(engine, lines, standard, options, NULL, calibration, refined, &each);
    if (status == LW_OK) {
        size_t widths = 0;
        for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
            widths += lines->smooth.refined[i];
        /* chi-square + 2 K (Akaike 1974): positions and areas are in both */
        double by_widths = refined->chi2_as_fitted + 2 * (double)(2 * refined->n_lines + widths + lines->n_background);
        double by_geometry = refined->chi2 + 2 * (double)refined->n_parameters;
        *optical = by_geometry < by_widths;
        snprintf(why, size, "%s: Akaike's criterion is %.1f lower than with %s", *optical ? "optical" : "empirical",
                 fabs(by_geometry - by_widths), *optical ? "width functions" : "the geometry's profile");
    } else if (status == LW_NO_CONVERGENCE || status == LW_NOT_SUPPORTED)
        snprintf(why, size, "empirical: %s", each.message);
    else {
        *err = each;
        return status;
    }
    if (!*optical) {
        calibration->has_optical = false;
        calibration->n_refined = 0;
        calibration->profile = lines->smooth;
        *refined = (lw_refined){0};
    }
    return LW_OK;
}

bool lw__optical_transparency(const lw_calibrate_options *options, const lw_calibration *calibration, lw_quantity *attenuation)
{
    const lw_aberrations *set = &calibration->aberrations;
    if (!isnan(options->attenuation_per_mm) || options->refine.n >= LW_REFINED_MOST)
        return false;
    for (size_t i = 0; i < options->refine.n; i++)
        if (strcmp(options->refine.item[i], "attenuation") == 0)
            return false;
    for (size_t i = 0; i < set->n; i++) {
        double u = sqrt(set->covariance[i][i]);
        if (strcmp(set->kind[i]->name, "transparency") != 0 || !(set->value[i] < -3 * u))
            continue;
        *attenuation = lw_quantity_of(-180 / M_PI / (2 * set->radius_mm * set->value[i]), 0, "mm^-1");
        attenuation->u = attenuation->value * u / -set->value[i];
        return true;
    }
    return false;
}

static const char *unit_of(const char *name)
{
    if (strncmp(name, "soller", 6) == 0)
        return "rad";
    if (strcmp(name, "attenuation") == 0)
        return "mm^-1";
    return strcmp(name, "divergence") == 0 || strcmp(name, "tilt") == 0 || strcmp(name, "gauss") == 0 ? "deg" : "mm";
}

void lw__optical_write(const lw_calibration *calibration, const lw_refined *refined, lw_node *profile, lw_error *err)
{
    lw_node *group = lw_add_group(profile, "optical", err);
    lw_add_text(group, "source", "Cheary & Coelho (1992) J. Appl. Cryst. 25, 109; (1998) 31, 851; Finger, Cox & Jephcoat "
                                 "(1994) J. Appl. Cryst. 27, 892", err);
    lw_geometry g = calibration->optical;
    for (size_t i = 0; lw_geometry_names[i] != NULL; i++) {
        double u = 0;
        for (size_t j = 0; j < calibration->n_refined; j++)
            if (strcmp(calibration->refined_name[j], lw_geometry_names[i]) == 0)
                u = sqrt(fmax(calibration->refined_covariance[j][j], 0));
        lw_add_quantity(group, lw_geometry_names[i],
                        lw_quantity_of(*lw_geometry_field(&g, lw_geometry_names[i]), u, unit_of(lw_geometry_names[i])), NULL,
                        err);
    }
    if (refined != NULL && refined->attenuation_from_positions)
        lw_add_text(group, "attenuation_from",
                    "the shift of the standard's lines, -sin(2theta)/(2 mu R) beside zero shift and displacement (Keating & Warren "
                    "1952), and their shape", err);
    lw_add_text(group, "held", "quantities that are not listed under `refined` are as given or usual; no uncertainty here has "
                               "a share of theirs", err);
    lw_add_quantity(group, "thickness", lw_quantity_of(g.thickness, 0, "mm"), NULL, err);
    lw_node *list = lw_add_list(group, "refined", err);
    for (size_t i = 0; i < calibration->n_refined; i++)
        lw_add_text(list, NULL, calibration->refined_name[i], err);
    list = lw_add_list(group, "covariance", err);
    for (size_t i = 0; i < calibration->n_refined; i++)
        lw_add_vector(list, NULL, calibration->refined_covariance[i], calibration->n_refined, "", err);
    if (refined == NULL)
        return;
    double freedom = (double)(refined->n_points - refined->n_parameters);
    lw_add_number(group, "chi2_per_degree_of_freedom", refined->chi2 / freedom, err);
    lw_add_number(group, "points", (double)refined->n_points, err);
    lw_add_number(group, "lines", (double)refined->n_lines, err);
    lw_add_number(group, "iterations", (double)refined->iterations, err);
}

lw_status lw__optical_read(lw_engine *engine, const lw_node *optical, const char *file, lw_calibration *calibration,
                           lw_error *err)
{
    lw_geometry *g = &calibration->optical;
    *g = (lw_geometry){.radius = calibration->aberrations.radius_mm,
                       .thickness = lw_node_number(optical, "thickness", NAN)};
    for (size_t i = 0; lw_geometry_names[i] != NULL; i++)
        *lw_geometry_field(g, lw_geometry_names[i]) = lw_node_number(optical, lw_geometry_names[i], NAN);
    lw_error why = LW_ERROR_NONE;
    if (lw_geometry_check(g, &why) != LW_OK)
        return lw_fail_at(err, LW_BAD_DATA, file, 0, "make it again with calibrate, or use an undamaged copy",
                          "not a usable calibration: %s", why.message);
    const lw_node *names = lw_node_get(optical, "refined"), *matrix = lw_node_get(optical, "covariance");
    const lw_node *row = matrix ? matrix->first : NULL;
    for (const lw_node *name = names ? names->first : NULL; name != NULL && row != NULL; name = name->next, row = row->next) {
        size_t i = calibration->n_refined;
        size_t known = 0;
        while (name->kind == LW_NODE_TEXT && lw_geometry_names[known] != NULL &&
               strcmp(lw_geometry_names[known], name->text) != 0)
            known++;
        if (i == LW_REFINED_MOST || name->kind != LW_NODE_TEXT || lw_geometry_names[known] == NULL ||
            row->kind != LW_NODE_VECTOR || row->n != names->n)
            return lw_fail_at(err, LW_BAD_DATA, file, 0, "make it again with calibrate, or use an undamaged copy",
                              "not a usable calibration: profile.optical has an unknown entry");
        for (size_t j = 0; j < row->n && j < LW_REFINED_MOST; j++)
            calibration->refined_covariance[i][j] = isfinite(row->vector[j]) ? row->vector[j] : 0;
        calibration->refined_name[calibration->n_refined++] = lw_geometry_names[known];
    }
    calibration->has_optical = true;
    return lw__optical_profile(engine, calibration, calibration->valid_low_deg, calibration->valid_high_deg, err);
}

/* A quantity that is no longer the refined one, and so has no u any more. */
static void drop_refined(lw_calibration *c, const char *name)
{
    size_t n = 0;
    for (size_t i = 0; i < c->n_refined; i++) {
        if (strcmp(c->refined_name[i], name) == 0)
            continue;
        c->refined_name[n] = c->refined_name[i];
        size_t m = 0;
        for (size_t j = 0; j < c->n_refined; j++)
            if (strcmp(c->refined_name[j], name) != 0)
                c->refined_covariance[n][m++] = c->refined_covariance[i][j];
        n++;
    }
    c->n_refined = n;
}

lw_status lw_calibration_for_specimen(lw_engine *engine, const lw_calibration *calibration, double attenuation_per_mm,
                                      double thickness_mm, lw_calibration **out, lw_error *err)
{
    *out = NULL;
    if (!calibration->has_optical)
        return lw_fail(err, LW_BAD_ARGUMENT, "calibrate with profile = \"optical\"",
                       "for_specimen: only an optical profile knows what a specimen's transparency does");
    lw_calibration *made = lw_take(engine, sizeof *made, err);
    if (made == NULL)
        return LW_OUT_OF_MEMORY;
    *made = *calibration;
    made->hash[0] = '\0';
    lw_arena_begin(&made->arena, engine);
    made->optical.attenuation = attenuation_per_mm;
    made->optical.thickness = thickness_mm;
    drop_refined(made, "attenuation"); /* that was the standard's */
    lw_aberrations *set = &made->aberrations;
    for (size_t i = 0; i < set->n; i++) {
        if (strcmp(set->kind[i]->name, "transparency") != 0)
            continue;
        set->n--;
        for (size_t j = i; j < set->n; j++) {
            set->kind[j] = set->kind[j + 1];
            set->value[j] = set->value[j + 1];
            memmove(set->covariance[j], set->covariance[j + 1], sizeof set->covariance[j]);
        }
        for (size_t j = 0; j < set->n; j++)
            for (size_t k = i; k < set->n; k++)
                set->covariance[j][k] = set->covariance[j][k + 1];
    }
    lw_status status = lw_geometry_check(&made->optical, err);
    if (status == LW_OK)
        status = lw__optical_profile(engine, made, made->valid_low_deg, made->valid_high_deg, err);
    if (status == LW_OK)
        status = lw__calibration_rewrite(made, calibration->record, err);
    if (status != LW_OK) {
        lw_calibration_free(made);
        return status;
    }
    *out = made;
    return LW_OK;
}
