/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lattice parameters of the powder from the positions of its lines. */
#include "sample/lattice_fit.h"
#include "sample/method.h"

#include <math.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>

#define BREADTHS_TO_END                                                                                      \
    2.0 /* a line nearer to an end of the scan has a tail cut off, which pulls its position */

typedef struct lattice_options {
    int displacement, transparency;
} lattice_options;

/* in the order of LW_LATTICE_AUTO ... */
static const char *const own_choices[] = {"auto", "yes", "no", NULL};

static const lw_option options[] = {{.key = "displacement",
                                     .kind = LW_OPTION_CHOICE,
                                     .standard = "auto",
                                     .choices = own_choices,
                                     .offset = offsetof(lattice_options, displacement),
                                     .help = "refine how far this specimen's surface lies from the axis; "
                                             "auto: for flat specimens, where the lines can tell it from the "
                                             "cell or do not fit without it"},
                                    {.key = "transparency",
                                     .kind = LW_OPTION_CHOICE,
                                     .standard = "auto",
                                     .choices = own_choices,
                                     .offset = offsetof(lattice_options, transparency),
                                     .help = "refine this specimen's transparency in place of the standard's; auto: for flat "
                                             "specimens, beside the displacement, where the lines do not fit without it"},
                                    LW_OPTIONS_END};

static void defaults(void *target)
{
    *(lattice_options *)target = (lattice_options){.displacement = LW_LATTICE_AUTO};
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->lines->material == NULL) {
        snprintf(why, size, "the lines do not know their material, whose cell is to be refined");
        return why;
    }
    lw_cell_free free = lw_cell_free_of(profiles->lines->material);
    if (profiles->n >= free.n)
        return NULL;
    snprintf(why, size, "the cell has %zu free parameters and there are %zu lines", free.n, profiles->n);
    return why;
}

/* Whether a line's tails were measured on both sides. */
static bool is_whole(const lw_profiles *profiles, const lw_line *line)
{
    const lw_scan *scan = profiles->lines->scan;
    if (scan == NULL || scan->n < 2)
        return true;
    double room = fmin(line->two_theta.value - scan->two_theta_deg[0],
                       scan->two_theta_deg[scan->n - 1] - line->two_theta.value);
    return room >= BREADTHS_TO_END * line->breadth.value;
}

/* The fit with the lines that are whole; with all lines where those do not suffice. */
static lw_status fit_whole(lw_lattice *m, const lattice_options *o, lw_arena *arena, lw_lattice_answer *out, lw_error *err)
{
    size_t n = m->profiles->n, whole = 0;
    size_t *use = lw_arena_take(arena, n, sizeof *use, err);
    if (use == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        if (is_whole(m->profiles, m->profiles->profile[i].line))
            use[whole++] = i;
    m->use = use;
    m->n = whole;
    if (whole < n && whole > m->free.n) {
        lw_error each = LW_ERROR_NONE;
        lw_status status = lw__lattice_fit(m, o->displacement, o->transparency, arena, out, &each);
        if (status == LW_OK)
            return LW_OK;
        if (status != LW_NOT_SUPPORTED) {
            *err = each;
            return status;
        }
    }
    for (size_t i = 0; i < n; i++)
        use[i] = i;
    m->n = n;
    return lw__lattice_fit(m, o->displacement, o->transparency, arena, out, err);
}

/* Volume with its uncertainty; the slopes by central differences over a millionth. */
static lw_quantity volume_of(const lw_lattice *m, const lw_lattice_answer *a)
{
    double slope[LW_CELL_FREE_MOST], variance = 0;
    lw_cell cell = m->cell;
    for (size_t i = 0; i < m->free.n; i++) {
        double p[LW_GENERALISED_MOST], step = 1e-6 * a->p[i];
        memcpy(p, a->p, sizeof p);
        p[i] = a->p[i] + step;
        lw_cell_free_set(&m->free, p, &cell);
        double high = lw_cell_volume(&cell);
        p[i] = a->p[i] - step;
        lw_cell_free_set(&m->free, p, &cell);
        slope[i] = (high - lw_cell_volume(&cell)) / (2 * step);
    }
    lw_cell_free_set(&m->free, a->p, &cell);
    for (size_t i = 0; i < m->free.n; i++)
        for (size_t j = 0; j < m->free.n; j++)
            variance += slope[i] * a->fit.covariance[i][j] * slope[j];
    return lw_quantity_of(lw_cell_volume(&cell), sqrt(fmax(0, variance)) * a->fit.scatter, "nm^3");
}

static void tell_parameters(const lw_lattice *m, const lw_lattice_answer *a, lw_node *result, lw_error *err)
{
    const lw_cell *stated = &m->profiles->lines->material->cell;
    double start[LW_CELL_FREE_MOST];
    lw_cell_free_read(&m->free, stated, start);
    for (size_t i = 0; i < m->free.n; i++) {
        bool edge = m->free.name[i][1] == '\0';
        lw_add_quantity(
            result, m->free.name[i],
            lw_quantity_of(a->p[i], sqrt(a->fit.covariance[i][i]) * a->fit.scatter, edge ? "nm" : "deg"),
            edge ? "Edge of the unit cell at the temperature of the measurement, from the lines' positions."
                 : "Angle of the unit cell at the temperature of the measurement, from the lines' positions.",
            err);
    }
    lw_add_quantity(result, "volume", volume_of(m, a), "Volume of the unit cell.", err);
    lw_node *change = lw_add_group(result, "relative_change", err);
    const double stated_u[3] = {stated->u_a, stated->u_b, stated->u_c};
    for (size_t i = 0; i < m->free.n; i++) {
        size_t which = 0;
        while (which < 3 && !m->free.moves[i][which])
            which++;
        if (which == 3)
            continue;
        double u = hypot(sqrt(a->fit.covariance[i][i]) * a->fit.scatter, stated_u[which]);
        lw_add_quantity(change, m->free.name[i], lw_quantity_of(a->p[i] / start[i] - 1, u / start[i], ""),
                        "Relative difference from the edge that the material states.", err);
    }
}

static bool takes_part(const lw_lattice *m, size_t profile)
{
    for (size_t i = 0; i < m->n; i++)
        if (m->use[i] == profile)
            return true;
    return false;
}

/* The lines that took part; those that did not are named in the remarks. */
static void tell_lines(const lw_lattice *m, const lw_lattice_answer *a, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "lines", err);
    for (size_t i = 0; i < m->n; i++) {
        const lw_line *line = lw__lattice_line(m, i);
        const lw_reflection *r = &line->reflection;
        char text[24];
        lw_node *node = lw_add_group(list, NULL, err);
        lw_add_text(node, "hkl", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        lw_add_quantity(node, "two_theta", line->two_theta, "Position as observed, aberrations included.",
                        err);
        lw_add_quantity(node, "residual", lw_quantity_of(a->fit.residual[i], a->fit.u[i], "deg"),
                        "Observed position minus that of the refined cell with all aberrations.", err);
    }
}

/* Names the lines whose tails are cut off, and what was done with them. */
static void tell_cut(const lw_lattice *m, lw_node *remarks, lw_error *err)
{
    char names[160] = "", hkl[24], text[320];
    size_t used = 0, cut = 0;
    bool left_out = m->n < m->profiles->n;
    for (size_t i = 0; i < m->profiles->n; i++) {
        const lw_line *line = m->profiles->profile[i].line;
        const lw_reflection *r = &line->reflection;
        if (left_out ? takes_part(m, i) : is_whole(m->profiles, line))
            continue;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        if (used + strlen(hkl) + 3 < sizeof names)
            used += (size_t)snprintf(names + used, sizeof names - used, "%s%s", cut > 0 ? ", " : "", hkl);
        cut++;
    }
    if (cut == 0)
        return;
    snprintf(text, sizeof text, "%s %s within %.0f integral breadths of the scan's end: %s",
             cut == 1 ? "line" : "lines", names, BREADTHS_TO_END,
             left_out ? "left out, since a cut tail pulls the position"
                      : "used, since the others do not determine the cell; a cut tail pulls the position");
    lw_add_text(remarks, NULL, text, err);
}

/* Says so where the shift by the atoms' scattering is more than half of a position's uncertainty. */
static void tell_scattering(const lw_lattice *m, lw_node *remarks, lw_error *err)
{
    double u, largest = 0;
    bool matters = false;
    for (size_t i = 0; i < m->n; i++) {
        double shift = lw_position_scattering(m->profiles, m->use[i], &u);
        matters |= fabs(shift) > 0.5 * lw__lattice_line(m, i)->two_theta.u;
        largest = fmax(largest, fabs(shift));
    }
    if (!matters)
        return;
    char text[200];
    snprintf(text, sizeof text,
             "the atoms' scattering falls across these broad lines: their shift by it, up to %.1g deg, was "
             "taken off "
             "as -0.25(9) nm b^2/(2 pi)",
             largest);
    lw_add_text(remarks, NULL, text, err);
}

/* What was refined of the specimen beside the cell, and how evidence chose. */
static void tell_own(const lw_lattice *m, const lw_lattice_answer *a, lw_node *result, lw_error *err)
{
    const lw_generalised_fit *fit = &a->fit;
    size_t height = lw__lattice_row(m, a, "displacement"), depth = lw__lattice_row(m, a, "transparency");
    lw_add_flag(result, "displacement_refined", height != LW_NO_PARAMETER, err);
    for (size_t k = 0; k < a->n_own; k++) {
        size_t at = m->free.n + k;
        lw_add_quantity(result, a->own[k]->name,
                        lw_quantity_of(a->p[at], sqrt(fit->covariance[at][at]) * fit->scatter, a->own[k]->unit),
                        a->own[k]->definition, err);
        if (at == height)
            lw_add_number(result, "displacement_correlation", fit->shared[at], err);
    }
    if (depth != LW_NO_PARAMETER && height != LW_NO_PARAMETER) {
        lw_add_number(result, "transparency_correlation", fit->shared[depth], err);
        lw_add_number(result, "displacement_with_transparency",
                      fit->covariance[height][depth] / sqrt(fit->covariance[height][height] * fit->covariance[depth][depth]), err);
    }
    lw_node *list = a->n_tried > 0 ? lw_add_list(result, "tried", err) : NULL;
    double best = INFINITY;
    for (size_t i = 0; i < a->n_tried; i++)
        best = fmin(best, a->tried[i].criterion);
    for (size_t i = 0; i < a->n_tried && isfinite(best); i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "refined", a->tried[i].refined[0] != '\0' ? a->tried[i].refined : "the cell alone", err);
        lw_add_number(row, "chi2", a->tried[i].chi2, err);
        if (isfinite(a->tried[i].criterion))
            lw_add_number(row, "aicc_above_best", a->tried[i].criterion - best, err);
    }
}

static void tell(const lw_lattice *m, const lw_lattice_answer *a, lw_node *result, lw_error *err)
{
    const lw_profiles *profiles = m->profiles;
    const lw_generalised_fit *fit = &a->fit;
    tell_parameters(m, a, result, err);
    tell_own(m, a, result, err);
    lw_add_quantity(result, "wavelength", lw_quantity_of(m->wavelength, 0, "nm"),
                    "Wavelength that the positions refer to; its own uncertainty is not in the cell's.", err);
    lw_add_number(result, "chi2", fit->chi2, err);
    lw_add_number(result, "degrees_of_freedom", (double)fit->degrees, err);
    if (fit->degrees > 0) {
        lw_add_number(result, "chi2_per_degree", fit->chi2 / (double)fit->degrees, err);
        lw_add_number(result, "chance", fit->p, err);
    }
    lw_add_number(result, "scatter_factor", fit->scatter, err);
    tell_lines(m, a, result, err);
    lw_node *remarks = lw_add_list(result, "remarks", err);
    if (a->why != NULL)
        lw_add_text(remarks, NULL, a->why, err);
    if (a->why_deep != NULL)
        lw_add_text(remarks, NULL, a->why_deep, err);
    tell_cut(m, remarks, err);
    tell_scattering(m, remarks, err);
    if (fit->degrees > 0 && fit->scatter > 1 && fit->p < 0.01) {
        char text[240];
        snprintf(text, sizeof text,
                 "positions scatter %.1f times their u about the cell (chance %.1g): u enlarged by that; "
                 "faults and "
                 "stress shift lines by direction",
                 fit->scatter, fit->p);
        lw_add_text(remarks, NULL, text, err);
    }
    if (profiles->calibration == NULL)
        lw_add_text(remarks, NULL, "no calibration: the positions were taken as they stand", err);
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    const lattice_options *o = given;
    const lw_radiation *radiation =
        profiles->calibration != NULL ? &profiles->calibration->radiation : &profiles->lines->radiation;
    lw_lattice m = {.profiles = profiles,
                   .free = lw_cell_free_of(profiles->lines->material),
                   .wavelength = lw_radiation_wavelength(radiation)};
    lw_lattice_answer a;
    lw_status status = fit_whole(&m, o, arena, &a, err);
    if (status == LW_OK) {
        tell(&m, &a, result, err);
        status = err->status;
    }
    return status;
}

const lw_method lw_method_lattice = {
    .name = "lattice",
    .title = "Lattice parameters",
    .purpose = "cell of the powder from the positions of all its lines",
    .assumes = "The lines stand where one cell puts them: no stacking faults, no stress. The calibration was "
               "measured on the same mount, but for the height of the specimen.",
    .source = "least squares on 2theta with the full covariance of positions and aberrations: Wilson (1963) "
              "Mathematical Theory of X-ray Powder Diffractometry; Cohen (1935) Rev. Sci. Instrum. 6, 68",
    .options = options,
    .options_size = sizeof(lattice_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
