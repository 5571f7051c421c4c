/* SPDX-License-Identifier: GPL-3.0-or-later */
/* linewright/calibration/1: written from a calibration, and read back to one that acts the same. */
#include "instrument/calibration_record.h"

#include "instrument/calibration_optical.h"
#include "instrument/calibration_set.h"
#include "instrument/purity.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char schema[] = "linewright/calibration/1";

/* Parameters of the covariance matrix, in its order: refined widths, then aberrations. */
static const char *const profile_group[LW_WIDTH_PARAMETERS] = {"gauss", "gauss", "gauss",   "gauss", "lorentz",
                                                               "lorentz", "lorentz", "axial", "axial"};
static const char *const profile_field[LW_WIDTH_PARAMETERS] = {"U", "V", "W", "P", "X", "Y", "Z", "first", "second"};
static const char *const profile_unit[LW_WIDTH_PARAMETERS] = {"deg^2", "deg^2", "deg^2", "deg^2", "deg",
                                                              "deg",   "deg",   "",      ""};

static void write_radiation(const lw_radiation *radiation, lw_node *root, lw_error *err)
{
    lw_node *group = lw_add_group(root, "radiation", err);
    lw_add_text(group, "name", radiation->name, err);
    lw_add_number(group, "wavelength_nm", lw_radiation_wavelength(radiation), err);
    lw_node *list = lw_add_list(group, "components", err);
    for (size_t i = 0; i < radiation->n; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "wavelength_nm", radiation->component[i].wavelength_nm, err);
        lw_add_number(row, "width_nm", radiation->component[i].width_nm, err);
        lw_add_number(row, "weight", radiation->component[i].weight, err);
    }
    lw_add_number(group, "k_beta_nm", radiation->k_beta_nm, err);
    lw_add_flag(group, "plain", radiation->is_plain, err);
    lw_add_text(group, "source", radiation->source, err);
}

static void write_profile(const lw_width_function *profile, lw_node *root, lw_error *err)
{
    lw_node *group = lw_add_group(root, "profile", err), *part = NULL;
    lw_add_text(group, "form",
                "Gaussian FWHM^2 = U tan^2 + V tan + W + P/cos^2; Lorentzian FWHM = X tan + Y/cos + Z; axial: soller = "
                "largest (alpha - beta)/2 and (alpha + beta)/2 in rad, finger_cox_jephcoat = S/L and H/L", err);
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++) {
        if (i == 0 || strcmp(profile_group[i], profile_group[i - 1]) != 0)
            part = lw_add_group(group, profile_group[i], err);
        if (i == LW_AXIAL_1)
            lw_add_text(part, "model", lw_axial_names[profile->axial], err);
        lw_add_quantity(part, profile_field[i],
                        lw_quantity_of(profile->value[i], sqrt(profile->covariance[i][i]), profile_unit[i]), NULL, err);
    }
}

/* FWHM, breadth and place at one wavelength every 5 degrees; with a geometry centroid and third moment besides, and every u
 * from the covariance of what was refined of it. */
static void write_table(const lw_calibration *calibration, lw_engine *engine, lw_node *root, lw_error *err)
{
    enum { MOST = 36 };
    double angle[MOST];
    size_t n = 0;
    for (double at = 5 * ceil(calibration->valid_low_deg / 5); at <= calibration->valid_high_deg && n < MOST; at += 5)
        angle[n++] = at;
    lw_optics_figure sharp[MOST], u[MOST]; /* the table of the profile is as sharp as its grid */
    lw_refined_set refined = lw__refined_set(calibration);
    bool exact = calibration->has_optical &&
                 lw_optics_figures(engine, &calibration->optical, &refined, n, angle, sharp, u, NULL, err) == LW_OK;
    lw_node *list = lw_add_list(root, "instrument_profile", err);
    for (size_t i = 0; i < n; i++) {
        lw_width_figure figure;
        double u_shift, shift = lw_aberrations_shift(&calibration->aberrations, angle[i], &u_shift);
        lw_width_figure_at(&calibration->profile, angle[i], 0, 0, &figure);
        if (exact) {
            figure.fwhm_deg = sharp[i].fwhm_deg;
            figure.u_fwhm = u[i].fwhm_deg;
            figure.breadth_deg = sharp[i].breadth_deg;
            figure.u_breadth = u[i].breadth_deg;
            figure.centroid_deg = sharp[i].centroid_deg;
        }
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "two_theta", angle[i], err);
        lw_add_quantity(row, "fwhm", lw_quantity_of(figure.fwhm_deg, figure.u_fwhm, "deg"), NULL, err);
        lw_add_quantity(row, "breadth", lw_quantity_of(figure.breadth_deg, figure.u_breadth, "deg"), NULL, err);
        lw_add_quantity(row, "shift", lw_quantity_of(shift + figure.centroid_deg, u_shift, "deg"), NULL, err);
        if (exact) {
            lw_add_quantity(row, "centroid", lw_quantity_of(sharp[i].centroid_deg, u[i].centroid_deg, "deg"),
                            "of the profile alone, from the unaberrated place", err);
            lw_add_quantity(row, "third_moment", lw_quantity_of(sharp[i].third_moment_deg3, u[i].third_moment_deg3, "deg^3"),
                            "third central moment of the profile: its asymmetry", err);
        }
    }
}

static void write_aberrations(const lw_aberrations *set, lw_node *root, lw_error *err)
{
    lw_node *group = lw_add_group(root, "aberrations", err);
    for (size_t i = 0; i < set->n; i++)
        lw_add_quantity(group, set->kind[i]->name,
                        lw_quantity_of(set->value[i], sqrt(set->covariance[i][i]), set->kind[i]->unit),
                        set->kind[i]->definition, err);
}

static void write_covariance(const lw_calibration *calibration, lw_node *root, lw_error *err)
{
    lw_node *group = lw_add_group(root, "covariance", err), *names = lw_add_list(group, "parameters", err);
    const lw_width_function *profile = &calibration->profile;
    const lw_aberrations *set = &calibration->aberrations;
    size_t rows[LW_WIDTH_PARAMETERS], n = 0;
    for (size_t i = 0; i < LW_WIDTH_PARAMETERS; i++)
        if (profile->refined[i]) {
            lw_add_text(names, NULL, profile_field[i], err);
            rows[n++] = i;
        }
    for (size_t i = 0; i < set->n; i++)
        lw_add_text(names, NULL, set->kind[i]->name, err);
    lw_node *matrix = lw_add_list(group, "matrix", err);
    for (size_t i = 0; i < n + set->n; i++) {
        double row[LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST] = {0};
        for (size_t j = 0; j < n && i < n; j++)
            row[j] = profile->covariance[rows[i]][rows[j]];
        for (size_t j = 0; j < set->n && i >= n; j++)
            row[n + j] = set->covariance[i - n][j];
        lw_add_vector(matrix, NULL, row, n + set->n, "", err);
    }
}

/* Which aberrations were tried and how they did, and how those kept correlate. */
static void write_choice(const lw_aberrations *set, const lw_calibration_lines *rows, lw_node *root, lw_error *err)
{
    double best = INFINITY;
    for (size_t i = 0; i < rows->n_tried; i++)
        best = fmin(best, rows->tried[i].criterion);
    if (rows->n_tried > 1) {
        lw_node *list = lw_add_list(root, "aberrations_tried", err);
        for (size_t i = 0; i < rows->n_tried; i++) {
            const lw_calibration_trial *trial = &rows->tried[i];
            char names[200] = "";
            size_t used = 0;
            for (size_t k = 0; k < trial->set.n && used < sizeof names; k++)
                used += (size_t)snprintf(names + used, sizeof names - used, "%s%s", k > 0 ? ", " : "",
                                         trial->set.kind[k]->name);
            lw_node *row = lw_add_group(list, NULL, err);
            lw_add_text(row, "aberrations", names, err);
            lw_add_number(row, "aicc_above_best", trial->criterion - best, err);
            lw_add_flag(row, "kept", trial->set.n == set->n && memcmp(trial->set.kind, set->kind, set->n * sizeof *set->kind) == 0, err);
        }
    }
    lw_node *list = lw_add_list(root, "correlations", err);
    for (size_t i = 0; i < set->n; i++)
        for (size_t j = i + 1; j < set->n; j++) {
            lw_node *row = lw_add_group(list, NULL, err);
            lw_add_text(row, "of", set->kind[i]->name, err);
            lw_add_text(row, "with", set->kind[j]->name, err);
            lw_add_number(row, "r", set->covariance[i][j] / sqrt(set->covariance[i][i] * set->covariance[j][j]), err);
        }
}

static void write_standard(const lw_standard *standard, lw_node *root, lw_error *err)
{
    lw_node *group = lw_add_group(root, "standard", err);
    lw_add_text(group, "name", standard->name, err);
    lw_add_text(group, "certificate", standard->certificate, err);
    lw_add_quantity(group, "a", lw_quantity_of(standard->material.cell.a, standard->material.cell.u_a, "nm"), NULL, err);
    if (standard->material.system != LW_CUBIC)
        lw_add_quantity(group, "c", lw_quantity_of(standard->material.cell.c, standard->material.cell.u_c, "nm"), NULL, err);
    lw_add_number(group, "temperature_c", standard->temperature_c, err);
}

static void write_fit(const lw_calibration_lines *rows, lw_node *root, lw_error *err)
{
    const lw_lines *lines = rows->lines;
    lw_node *group = lw_add_group(root, "fit", err);
    lw_add_number(group, "rwp", lines->rwp, err);
    lw_add_number(group, "rexp", lines->rexp, err);
    lw_add_number(group, "goodness_of_fit", lines->goodness, err);
    lw_add_number(group, "durbin_watson", lines->durbin_watson, err);
    lw_add_number(group, "misfit_factor", lines->misfit_factor, err);
    lw_add_number(group, "position_chi2", rows->chi2, err);
    lw_add_number(group, "position_birge_ratio", rows->birge, err);
    lw_add_number(group, "position_rms_deg", rows->rms, err);
}

/* What the standard's own domains add to its lines, and what became of that. */
static void write_own_breadth(const lw_set *set, const lw_set_scan *scan, lw_node *row, lw_error *err)
{
    double size = scan->standard->domain_size_nm;
    if (!(size > 0)) {
        lw_add_text(row, "own_breadth",
                    "the certificate's domain size is not stated: what the domains broaden counts as the instrument's", err);
        return;
    }
    const bool taken = set->optical && set->options->standard_size;
    const double middle = 60; /* Lorentzian FWHM 2 lambda/(pi D cos(theta)) there */
    double fwhm = 2 / M_PI * lw_radiation_wavelength(&scan->lines->radiation) / (size * cos(middle * M_PI / 360)) * 180 / M_PI;
    lw_add_number(row, "domain_size_nm", size, err);
    lw_add_text(row, "own_breadth",
                lw_arena_print(row->arena, err, "domains of %g nm broaden its lines by a Lorentzian of %.4f deg at %g deg: %s", size,
                               fwhm, middle, taken ? "taken into account" : "counted as the instrument's"), err);
}

/* Each scan of a set, how well they agree, and the whole covariance. */
static void write_set(const lw_set *set, lw_node *root, lw_error *err)
{
    lw_node *list = lw_add_list(root, "scans", err);
    for (size_t k = 0; k < set->n; k++) {
        const lw_set_scan *scan = &set->scan[k];
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "file", scan->lines->scan->file, err);
        lw_add_text(row, "sha256", lw_scan_hash(scan->lines->scan), err);
        write_standard(scan->standard, row, err);
        write_own_breadth(set, scan, row, err);
        lw_add_text(row, "used_for", scan->joined ? "profile and positions" : "positions", err);
        if (!scan->joined)
            lw_add_text(row, "why_not_profile", scan->why, err);
        write_aberrations(&scan->aberrations, row, err);
        if (scan->attenuation > 0)
            lw_add_quantity(row, "attenuation", lw_quantity_of(scan->attenuation, scan->u_attenuation, "mm^-1"),
                            "linear attenuation of the specimen with its pores, in its profile", err);
        if (set->optical)
            lw_add_number(row, "chi2_per_degree_of_freedom",
                          scan->refined.chi2 / (double)(scan->refined.n_points - scan->refined.n_parameters), err);
        lw__write_lines(&scan->rows, row, err);
        write_fit(&scan->rows, row, err);
    }
    const struct {
        const char *name, *definition;
        const lw_joined *joined;
    } part[] = {{"profile", "the profile's parameters of the scans, about the joined ones", &set->profile},
                {"positions", "what all scans share (zero shift ...), found from each scan by itself", &set->shared}};
    lw_node *join = lw_add_group(root, "join", err);
    for (size_t i = 0; i < 2; i++) {
        lw_node *group = lw_add_group(join, part[i].name, err);
        if (group != NULL)
            group->definition = part[i].definition;
        lw_add_number(group, "chi2", part[i].joined->chi2, err);
        lw_add_number(group, "degrees_of_freedom", part[i].joined->freedom, err);
        lw_add_number(group, "p", part[i].joined->p, err);
        lw_add_number(group, "birge_ratio", part[i].joined->birge, err);
    }
    list = lw_add_list(join, "aberrations_tried", err);
    double best = INFINITY;
    for (size_t i = 0; i < set->n_tried; i++)
        best = fmin(best, set->tried[i].criterion);
    for (size_t i = 0; i < set->n_tried; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "aberrations", set->tried[i].text, err);
        lw_add_number(row, "aicc_above_best", set->tried[i].criterion - best, err);
    }
    lw_node *group = lw_add_group(root, "covariance_joint", err), *names = lw_add_list(group, "parameters", err);
    for (size_t i = 0; i < set->n_profile; i++)
        lw_add_text(names, NULL, set->optical ? set->name[i] : profile_field[set->width[i]], err);
    for (size_t a = 0; a < set->n_columns; a++) {
        const char *name = set->column[a].kind->name;
        if (set->column[a].scan != LW_SET_ALL)
            name = lw_arena_print(root->arena, err, "%s of scan %zu", name, set->column[a].scan + 1);
        lw_add_text(names, NULL, name, err);
    }
    lw_node *matrix = lw_add_list(group, "matrix", err);
    size_t m = set->n_profile, all = m + set->n_columns;
    for (size_t i = 0; i < all; i++) {
        double row[LW_WIDTH_PARAMETERS + LW_SET_COLUMNS];
        for (size_t j = 0; j < all; j++)
            row[j] = i < m && j < m     ? set->covariance[i * m + j]
                     : i < m            ? set->shift_profile[(j - m) * m + i]
                     : j < m            ? set->shift_profile[(i - m) * m + j]
                                        : set->shift_covariance[(i - m) * set->n_columns + j - m];
        lw_add_vector(matrix, NULL, row, all, "", err);
    }
}

lw_status lw__calibration_record(lw_calibration *calibration, const lw_calibration_lines *const *all, size_t n_all,
                                 const struct lw_set *set, lw_error *err)
{
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    const lw_calibration_lines *rows = all[0];
    lw_node *root = lw_tree_new(&calibration->arena, err);
    lw_add_text(root, "schema", schema, err);
    write_radiation(&calibration->radiation, root, err);
    write_standard(rows->standard, root, err);
    lw_add_text(root, "geometry", calibration->geometry, err);
    double range[2] = {calibration->valid_low_deg, calibration->valid_high_deg};
    lw_add_vector(root, "valid_two_theta", range, 2, "deg", err);
    write_aberrations(&calibration->aberrations, root, err);
    lw_add_quantity(root, "goniometer_radius", lw_quantity_of(calibration->aberrations.radius_mm, 0, "mm"), rows->radius_from, err);
    if (calibration->profile_why[0] != '\0')
        lw_add_text(root, "profile_chosen", calibration->profile_why, err);
    write_profile(&calibration->profile, root, err);
    if (calibration->has_optical)
        lw__optical_write(calibration, rows->refined, (lw_node *)lw_node_get(root, "profile"), err);
    write_table(calibration, calibration->arena.engine, root, err);
    write_covariance(calibration, root, err);
    lw__write_lines(rows, root, err);
    write_choice(&calibration->aberrations, rows, root, err);
    lw_purity(calibration->arena.engine, rows->lines, root, err);
    write_fit(rows, root, err);
    if (set != NULL)
        write_set(set, root, err);
    lw__write_verdict(calibration, all, n_all, set, root, err);
    calibration->record = root;
    return err->status;
}

lw_status lw__calibration_rewrite(lw_calibration *calibration, const lw_node *from, lw_error *err)
{
    lw_node *root = lw_tree_new(&calibration->arena, err);
    for (const lw_node *child = from->first; child != NULL; child = child->next) {
        if (strcmp(child->name, "aberrations") == 0)
            write_aberrations(&calibration->aberrations, root, err);
        else if (strcmp(child->name, "covariance") == 0)
            write_covariance(calibration, root, err);
        else if (strcmp(child->name, "instrument_profile") == 0)
            write_table(calibration, calibration->arena.engine, root, err);
        else if (strcmp(child->name, "profile") == 0) {
            write_profile(&calibration->profile, root, err);
            lw__optical_write(calibration, NULL, (lw_node *)lw_node_get(root, "profile"), err);
        } else
            lw_add_copy(root, child->name, child, err);
    }
    calibration->record = root;
    return err->status;
}

/* Reading back */

static lw_status lacking(const char *file, const char *what, lw_error *err)
{
    return lw_fail_at(err, LW_BAD_DATA, file, 0, "make it again with calibrate, or use an undamaged copy",
                      "not a usable calibration: %s", what);
}

static lw_status read_radiation(const lw_node *root, const char *file, lw_radiation *radiation, lw_error *err)
{
    const lw_node *group = lw_node_get(root, "radiation"), *list = lw_node_get(group, "components");
    if (list == NULL || list->n == 0 || list->n > LW_EMISSION_MOST)
        return lacking(file, "radiation.components is missing or too long", err);
    snprintf(radiation->name, sizeof radiation->name, "%s", lw_node_text(group, "name", ""));
    snprintf(radiation->source, sizeof radiation->source, "%s", lw_node_text(group, "source", ""));
    radiation->k_beta_nm = lw_node_number(group, "k_beta_nm", 0);
    const lw_node *plain = lw_node_get(group, "plain");
    radiation->is_plain = plain != NULL && plain->kind == LW_NODE_FLAG && plain->flag;
    radiation->n = 0;
    for (const lw_node *row = list->first; row != NULL; row = row->next) {
        lw_emission *at = &radiation->component[radiation->n++];
        at->wavelength_nm = lw_node_number(row, "wavelength_nm", NAN);
        at->width_nm = lw_node_number(row, "width_nm", NAN);
        at->weight = lw_node_number(row, "weight", NAN);
        if (!(at->wavelength_nm > 0.001 && at->wavelength_nm < 10 && at->width_nm >= 0 && at->weight > 0))
            return lacking(file, "a component of the radiation has no usable numbers", err);
    }
    return LW_OK;
}

static lw_status read_covariance(const lw_node *root, const char *file, lw_calibration *calibration, lw_error *err)
{
    const lw_node *group = lw_node_get(root, "covariance"), *names = lw_node_get(group, "parameters"),
                  *matrix = lw_node_get(group, "matrix");
    if (names == NULL || matrix == NULL || names->n != matrix->n)
        return lacking(file, "covariance is missing or not square", err);
    double *cell[LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST][LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST];
    int row_of[LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST], kind[LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST];
    size_t n = 0;
    for (const lw_node *name = names->first; name != NULL; name = name->next, n++) {
        if (n >= LW_WIDTH_PARAMETERS + LW_ABERRATION_MOST || name->kind != LW_NODE_TEXT)
            return lacking(file, "covariance.parameters has an unknown entry", err);
        kind[n] = -1;
        for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
            if (strcmp(name->text, profile_field[i]) == 0) {
                kind[n] = 0;
                row_of[n] = i;
                calibration->profile.refined[i] = true;
            }
        for (size_t i = 0; i < calibration->aberrations.n; i++)
            if (strcmp(name->text, calibration->aberrations.kind[i]->name) == 0) {
                kind[n] = 1;
                row_of[n] = (int)i;
            }
        if (kind[n] < 0)
            return lacking(file, "covariance.parameters has an unknown entry", err);
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            cell[i][j] = kind[i] != kind[j] ? NULL
                         : kind[i] == 0     ? &calibration->profile.covariance[row_of[i]][row_of[j]]
                                            : &calibration->aberrations.covariance[row_of[i]][row_of[j]];
    size_t i = 0;
    for (const lw_node *row = matrix->first; row != NULL; row = row->next, i++) {
        if (row->kind != LW_NODE_VECTOR || row->n != n)
            return lacking(file, "covariance.matrix has a row of the wrong length", err);
        for (size_t j = 0; j < n; j++) {
            if (!isfinite(row->vector[j]) || (i == j && row->vector[j] < 0))
                return lacking(file, "covariance.matrix holds what can't be a covariance", err);
            if (cell[i][j] != NULL)
                *cell[i][j] = row->vector[j];
        }
    }
    for (i = 0; i < n; i++)
        for (size_t j = 0; j < i; j++)
            if (cell[i][j] != NULL) {
                double product = *cell[i][i] * *cell[j][j], one = *cell[i][j], other = *cell[j][i];
                if (one * one > product * (1 + 1e-6) || fabs(one - other) > 1e-6 * sqrt(product))
                    return lacking(file, "covariance.matrix holds what can't be a covariance", err);
            }
    return LW_OK;
}

/* A width function that gives no width somewhere in its range is no profile. */
static bool has_width(const lw_calibration *calibration)
{
    const double *value = calibration->profile.value;
    for (int i = 0; i <= 16; i++) {
        double angle = calibration->valid_low_deg + (calibration->valid_high_deg - calibration->valid_low_deg) * i / 16;
        double gauss = lw_width_gauss_variance(value, angle, NULL), lorentz = lw_width_lorentz(value, angle, NULL);
        if (!(isfinite(gauss) && isfinite(lorentz) && gauss + lorentz > 0) || value[LW_AXIAL_1] < 0 || value[LW_AXIAL_2] < 0)
            return false;
    }
    return true;
}

static lw_status read_record(lw_engine *engine, const lw_node *record, const char *file, lw_calibration *calibration, lw_error *err)
{
    if (strcmp(lw_node_text(record, "schema", ""), schema) != 0)
        return lw_fail_at(err, LW_BAD_DATA, file, 0, "give the calibration.json that calibrate wrote",
                          "not a calibration: its schema is '%s', not '%s'", lw_node_text(record, "schema", "missing"),
                          schema);
    lw_status status = read_radiation(record, file, &calibration->radiation, err);
    if (status != LW_OK)
        return status;
    snprintf(calibration->geometry, sizeof calibration->geometry, "%s", lw_node_text(record, "geometry", "reflection"));
    snprintf(calibration->verdict, sizeof calibration->verdict, "%s", lw_node_text(record, "verdict", ""));
    const lw_node *range = lw_node_get(record, "valid_two_theta");
    if (range == NULL || range->kind != LW_NODE_VECTOR || range->n != 2 ||
        !(range->vector[0] > 0 && range->vector[1] > range->vector[0] && range->vector[1] < 180))
        return lacking(file, "valid_two_theta is missing or not a range", err);
    calibration->valid_low_deg = calibration->profile.low_deg = range->vector[0];
    calibration->valid_high_deg = calibration->profile.high_deg = range->vector[1];
    const lw_node *profile = lw_node_get(record, "profile");
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++) {
        double value = lw_node_number(lw_node_get(profile, profile_group[i]), profile_field[i], NAN);
        if (!isfinite(value))
            return lacking(file, "profile lacks a parameter", err);
        calibration->profile.value[i] = value;
    }
    if (!has_width(calibration))
        return lacking(file, "profile gives no width within valid_two_theta", err);
    const char *axial = lw_node_text(lw_node_get(profile, "axial"), "model", "");
    int kind = 0;
    while (lw_axial_names[kind] != NULL && strcmp(lw_axial_names[kind], axial) != 0)
        kind++;
    if (lw_axial_names[kind] == NULL)
        return lacking(file, "profile.axial.model is unknown", err);
    calibration->profile.axial = (lw_axial_kind)kind;
    calibration->aberrations.radius_mm = lw_node_number(record, "goniometer_radius", NAN);
    if (!(calibration->aberrations.radius_mm > 0))
        return lacking(file, "goniometer_radius is missing", err);
    const lw_node *aberrations = lw_node_get(record, "aberrations");
    if (aberrations == NULL || aberrations->n > LW_ABERRATION_MOST)
        return lacking(file, "aberrations are missing or too many", err);
    for (const lw_node *child = aberrations->first; child != NULL; child = child->next) {
        const lw_aberration *kind = lw_aberration_named(child->name ? child->name : "");
        if (kind == NULL || child->kind != LW_NODE_QUANTITY || !isfinite(child->quantity.value))
            return lacking(file, "an aberration is unknown or has no value", err);
        calibration->aberrations.kind[calibration->aberrations.n] = kind;
        calibration->aberrations.value[calibration->aberrations.n++] = child->quantity.value;
    }
    status = read_covariance(record, file, calibration, err);
    const lw_node *optical = lw_node_get(profile, "optical");
    if (status == LW_OK && optical != NULL)
        status = lw__optical_read(engine, optical, file, calibration, err);
    return status == LW_OK ? lw__calibration_check(engine, calibration, record, file, err) : status;
}

lw_status lw_calibration_from_tree(lw_engine *engine, const lw_node *record, const char *file,
                                   lw_calibration **out, lw_error *err)
{
    *out = NULL;
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    lw_calibration *calibration = lw_take(engine, sizeof *calibration, err);
    if (calibration == NULL)
        return LW_OUT_OF_MEMORY;
    memset(calibration, 0, sizeof *calibration);
    lw_arena_begin(&calibration->arena, engine);
    lw_status status = read_record(engine, record, file, calibration, err);
    if (status == LW_OK) {
        calibration->record = lw_tree_new(&calibration->arena, err);
        for (const lw_node *child = record->first; child != NULL && calibration->record != NULL; child = child->next)
            lw_add_copy(calibration->record, child->name, child, err);
        status = err->status;
    }
    if (status != LW_OK) {
        lw_calibration_free(calibration);
        return status;
    }
    *out = calibration;
    return LW_OK;
}
