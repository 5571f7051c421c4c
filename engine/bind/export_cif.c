/* SPDX-License-Identifier: GPL-3.0-or-later */
/* job:write_cif: fitted lines with their scan as powder CIF. Data names are those of the COMCIFS dictionaries: cif_pow
 * 2.5.0 and, for wavelength, cell, indices and audit, cif_core, in the spelling without dots that every reader takes
 * (Toby, Von Dreele & Larson 2003, J. Appl. Cryst. 36, 1290-1294). Lengths in angstrom, which CIF fixes. */
#include "bind/outputs.h"
#include "bind/roads.h"
#include "instrument/calibration.h"
#include "line/lines.h"
#include "record/cif.h"

#include <math.h>
#include <string.h>
#include <time.h>

#define RADIANS (3.14159265358979323846 / 180)

/* To ten decimals: ten times 0.35238 isn't 3.5238 in binary, and nobody knows a length better. */
static double angstrom(double nm)
{
    return rint(nm * 1e11) / 1e10;
}

/* Adds a text that lw_arena_print() made, unless its memory was refused. */
static void add_printed(lw_node *block, const char *name, const char *text, lw_error *err)
{
    if (text != NULL)
        lw_add_text(block, name, text, err);
}

/* What isn't a value with its u, a limit, has no place in a column of numbers: not applicable. */
static void add_value(lw_node *row, const char *name, lw_quantity quantity, lw_error *err)
{
    bool value = quantity.kind == LW_VALUE;
    lw_add_quantity(row, name, lw_quantity_of(value ? quantity.value : NAN, value ? quantity.u : 0, ""), NULL, err);
}

static void add_origin(lw_node *block, const lw_lines *lines, const lw_calibration *calibration, lw_arena *arena,
                       lw_error *err)
{
    const lw_scan *scan = lines->scan;
    char date[16];
    time_t now = time(NULL);
    struct tm utc;
    strftime(date, sizeof date, "%Y-%m-%d", gmtime_r(&now, &utc));
    lw_add_text(block, "audit_creation_date", date, err);
    lw_add_text(block, "audit_creation_method", "Linewright " LW_VERSION, err);
    const char *hash = lw_scan_hash(scan), *slash = strrchr(scan->file, '/');
    add_printed(block, "pd_meas_special_details",
                hash[0] != '\0' ? lw_arena_print(arena, err, "Scan file: %s\nSHA-256: %s", slash ? slash + 1 : scan->file, hash)
                                : lw_arena_print(arena, err, "Made, not read from a file: %s", scan->file),
                err);
    lw_add_number(block, "pd_meas_number_of_points", (double)scan->n, err);
    const char *folded = lines->has_instrument ? "The calibrated instrument is folded in." : "No instrument is folded in.";
    bool recorded = calibration != NULL && calibration->hash[0] != '\0';
    add_printed(block, "pd_proc_info_data_reduction",
                lw_arena_print(arena, err,
                               "All lines fitted together by weighted least squares, shape %s, with %zu terms of background.\n"
                               "%s%s%s\n"
                               "Radiation: %s (%s).\n"
                               "Wavelengths and weights below are of the components of its spectrum.",
                               lines->shape, lines->n_background, folded, recorded ? "\nSHA-256 of the calibration: " : "",
                               recorded ? calibration->hash : "", lines->radiation.name, lines->radiation.source),
                err);
    if (lines->left_out[0] != '\0')
        lw_add_text(block, "pd_proc_info_excluded_regions", lines->left_out, err);
    lw_add_text(block, "pd_calc_method", "fit of single lines", err);
    lw_add_number(block, "pd_proc_ls_prof_wR_factor", lines->rwp, err);
    lw_add_number(block, "pd_proc_ls_prof_wR_expected", lines->rexp, err);
    add_printed(block, "pd_peak_special_details",
                lw_arena_print(arena, err,
                               "Positions: as observed, at the wavelength named, aberrations of the instrument still in them; "
                               "d follows from them.\n"
                               "Intensities: area in %s times degree, all wavelengths together. Heights and widths (FWHM): at "
                               "one wavelength, instrument and sample together.",
                               lines->scan->noise == LW_NOISE_COUNTS ? "counts" : "units of the intensity"),
                err);
}

static void add_cell(lw_node *block, const lw_material *material, lw_error *err)
{
    const lw_cell *cell = &material->cell;
    const double edge[] = {cell->a, cell->b, cell->c}, u[] = {cell->u_a, cell->u_b, cell->u_c};
    const double angle[] = {cell->alpha, cell->beta, cell->gamma};
    static const char *const edges[] = {"cell_length_a", "cell_length_b", "cell_length_c"};
    static const char *const angles[] = {"cell_angle_alpha", "cell_angle_beta", "cell_angle_gamma"};
    lw_add_text(block, "pd_phase_name", material->title[0] != '\0' ? material->title : material->name, err);
    for (int i = 0; i < 3; i++)
        lw_add_quantity(block, edges[i], lw_quantity_of(angstrom(edge[i]), angstrom(u[i]), ""), NULL, err);
    for (int i = 0; i < 3; i++)
        lw_add_number(block, angles[i], angle[i], err);
    lw_add_number(block, "space_group_IT_number", material->space_group, err);
}

static void add_wavelengths(lw_node *block, const lw_radiation *radiation, lw_error *err)
{
    lw_node *list = lw_add_list(block, "wavelengths", err);
    for (size_t i = 0; i < radiation->n; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "diffrn_radiation_wavelength_id", (double)(i + 1), err);
        lw_add_number(row, "diffrn_radiation_wavelength", angstrom(radiation->component[i].wavelength_nm), err);
        lw_add_number(row, "diffrn_radiation_wavelength_wt", radiation->component[i].weight, err);
    }
}

/* The lines as fitted, and beside them the reflections that they belong to: a loop holds one category. The link
 * _pd_refln_peak_id is of cif_pow too (from memory). */
static void add_peaks(lw_node *block, const lw_lines *lines, lw_error *err)
{
    double wavelength = angstrom(lw_radiation_wavelength(&lines->radiation));
    lw_node *peaks = lw_add_list(block, "peaks", err), *reflections = lw_add_list(block, "reflections", err);
    for (size_t i = 0; i < lines->n; i++) {
        const lw_line *line = &lines->line[i];
        double theta = 0.5 * RADIANS * line->two_theta.value, d = wavelength / (2 * sin(theta));
        lw_node *row = lw_add_group(peaks, NULL, err);
        lw_add_number(row, "pd_peak_id", (double)(i + 1), err);
        add_value(row, "pd_peak_2theta_maximum", line->two_theta, err);
        add_value(row, "pd_peak_d_spacing", lw_quantity_of(d, d / tan(theta) * 0.5 * RADIANS * line->two_theta.u, ""), err);
        add_value(row, "pd_peak_intensity", line->area, err);
        add_value(row, "pd_peak_pk_height", line->height, err);
        add_value(row, "pd_peak_width_2theta", line->fwhm, err);
        lw_add_number(row, "pd_peak_wavelength_id", 1, err); /* the strongest component is the first */
        row = lw_add_group(reflections, NULL, err);
        lw_add_number(row, "refln_index_h", line->reflection.h, err);
        lw_add_number(row, "refln_index_k", line->reflection.k, err);
        lw_add_number(row, "refln_index_l", line->reflection.l, err);
        lw_add_number(row, "pd_refln_peak_id", (double)(i + 1), err);
    }
}

/* Intensities that aren't counts keep their u in a column of its own: in brackets both would be rounded. */
static void add_points(lw_node *block, const lw_lines *lines, lw_arena *arena, lw_error *err)
{
    const lw_scan *scan = lines->scan;
    size_t n = scan->n;
    double *id = lw_arena_take(arena, n, sizeof *id, err), *weight = lw_arena_take(arena, n, sizeof *weight, err);
    if (id == NULL || weight == NULL)
        return;
    for (size_t i = 0; i < n; i++) {
        id[i] = (double)(i + 1);
        weight[i] = 1 / lines->variance[i];
    }
    lw_node *loop = lw_add_group(block, "points", err);
    lw_add_vector(loop, "pd_data_point_id", id, n, "", err);
    lw_add_vector(loop, "pd_meas_2theta_scan", scan->two_theta_deg, n, "deg", err);
    lw_add_vector(loop, scan->noise == LW_NOISE_COUNTS ? "pd_meas_counts_total" : "pd_meas_intensity_total", scan->intensity, n,
                  "", err);
    if (scan->noise == LW_NOISE_SIGMA)
        lw_add_vector(loop, "pd_meas_intensity_total_su", scan->sigma, n, "", err);
    lw_add_vector(loop, "pd_calc_intensity_total", lines->fitted, n, "", err);
    lw_add_vector(loop, "pd_proc_intensity_bkg_calc", lines->background, n, "", err);
    lw_add_vector(loop, "pd_proc_ls_weight", weight, n, "", err);
}

/* job:write_cif(name, lines): one data block, called as the scan's file without folder and ending. */
int lwb_job_write_cif(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lwb_self(L, 1, &lwb_recipe_noun, "job:write_cif");
    const char *name = lwb_text(L, 2, "job:write_cif", "the name");
    const lw_lines *lines = lwb_object(L, 3, &lwb_lines_noun, "job:write_cif");
    lua_settop(L, 3);
    lua_getiuservalue(L, 3, LWB_LINES_CALIBRATION);
    const lwb_box *box = lwb_test(L, 4, &lwb_calibration_noun);
    const char *path = lwb_push_out_path(L, name, "job:write_cif");
    lwb_tree *tree = lwb_new_tree(L);
    lw_node *block = tree->root;
    add_origin(block, lines, box ? box->object : NULL, &tree->arena, &err);
    if (lines->material != NULL)
        add_cell(block, lines->material, &err);
    add_wavelengths(block, &lines->radiation, &err);
    add_peaks(block, lines, &err);
    add_points(block, lines, &tree->arena, &err);
    const char *slash = strrchr(lines->scan->file, '/'), *stem = slash ? slash + 1 : lines->scan->file;
    const char *block_name = lw_arena_print(&tree->arena, &err, "%.*s", (int)strcspn(stem, "."), stem);
    lwb_check(L, LW_OK, &err);
    lwb_check(L, lw_cif_save(lwb_engine(L), path, block, block_name[0] != '\0' ? block_name : "scan", &err), &err);
    lua_pushvalue(L, 5);
    return 1;
}
