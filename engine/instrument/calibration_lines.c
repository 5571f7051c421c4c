/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A calibration's lines against the certificate: the list of them, which do not agree and why that may be, and the
 * verdict. */
#include "instrument/calibration_set.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const double degree = M_PI / 180;

void lw__write_lines(const lw_calibration_lines *rows, lw_node *root, lw_error *err)
{
    lw_node *list = lw_add_list(root, "lines", err);
    for (size_t i = 0; i < rows->n; i++) {
        const lw_line *line = rows->line[i];
        const lw_reflection *r = &line->reflection;
        char hkl[24];
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "hkl", lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl), err);
        lw_add_quantity(row, "two_theta", rows->place[i], NULL, err);
        lw_add_quantity(row, "two_theta_certified", lw_quantity_of(rows->certified[i], rows->u_certified[i], "deg"), NULL,
                        err);
        double u = hypot(rows->place[i].u, rows->u_certified[i]);
        lw_add_quantity(row, "difference", lw_quantity_of(rows->difference[i], u, "deg"), NULL, err);
        lw_add_quantity(row, "residual", lw_quantity_of(rows->residual[i], u, "deg"), NULL, err);
        if (rows->u_residual[i] > 0)
            lw_add_number(row, "pull", rows->residual[i] / rows->u_residual[i], err);
        lw_add_quantity(row, "fwhm", line->fwhm, NULL, err);
        lw_add_quantity(row, "breadth", line->breadth, NULL, err);
        lw_add_quantity(row, "shape_ratio", line->shape_ratio, NULL, err);
        lw_add_quantity(row, "area", line->area, NULL, err);
    }
}

/* A foreign emission line of a stronger reflection that may stand under a line. */
static const lw_line *foreign(const lw_lines *lines, const lw_line *line, double wavelength_nm)
{
    double reference = lw_radiation_wavelength(&lines->radiation);
    for (size_t k = 0; k < lines->n && wavelength_nm > 0; k++) {
        const lw_line *from = &lines->line[k];
        double sine = sin(from->two_theta.value * degree / 2) * wavelength_nm / reference;
        if (from == line || !from->supported || !(from->area.value > line->area.value) || !(sine < 1))
            continue;
        if (fabs(2 * asin(sine) / degree - line->two_theta.value) < 2 * line->fwhm.value)
            return from;
    }
    return NULL;
}

static bool has(const lw_aberrations *set, const char *name)
{
    for (size_t i = 0; i < set->n; i++)
        if (strcmp(set->kind[i]->name, name) == 0)
            return true;
    return false;
}

/* What may have moved a line, from what is known of it. */
static const char *why_off(const lw_calibration_lines *rows, size_t i, const lw_aberrations *set, lw_arena *arena, lw_error *err)
{
    const lw_line *line = rows->line[i];
    char text[480] = "", hkl[24];
    size_t used = 0, most = sizeof text;
#define SAY(...)                                                                                                        \
    do {                                                                                                                \
        used += (size_t)snprintf(text + used, most - used, "%s", used > 0 ? "; " : "");                                 \
        used += used < most ? (size_t)snprintf(text + used, most - used, __VA_ARGS__) : 0;                              \
        used = used < most - 1 ? used : most - 1;                                                                       \
    } while (0)
    if (line->overlap > 0.01)
        SAY("%.0f %% of it lies under its neighbours", 100 * line->overlap);
    const lw_line *from = foreign(rows->lines, line, rows->lines->radiation.k_beta_nm);
    if (from != NULL)
        SAY("the K-beta line of %s falls there",
            lw_hkl_text(from->reflection.h, from->reflection.k, from->reflection.l, hkl, sizeof hkl));
    from = foreign(rows->lines, line, 0.147639); /* W L-alpha 1: Bearden (1967) Rev. Mod. Phys. 39, 78 */
    if (from != NULL)
        SAY("tungsten L-alpha of %s falls there, if the tube has aged",
            lw_hkl_text(from->reflection.h, from->reflection.k, from->reflection.l, hkl, sizeof hkl));
    if (line->area.u > 0 && line->area.value < 30 * line->area.u)
        SAY("it is weak (%.0f u): background and neighbours weigh on it", line->area.value / line->area.u);
    if (line->residual_misfit > 1.5)
        SAY("the profile misses its shape (chi-square %.1f a point)", line->residual_misfit);
    if (rows->residual[i] < 0 && !has(set, "transparency") && !has(set, "wavelength"))
        SAY("no term for the specimen's transparency is among the aberrations");
    if (used == 0)
        SAY("it is strong and alone: few grains in the beam (turn the specimen), an uneven surface, or an aberration that "
            "is not in the list");
#undef SAY
    return lw_arena_print(arena, err, "%s", text);
}

/* Lines farther than 3 u from their certified places, and how many of them weigh on the verdict. Where the aberrations
 * miss all lines a little, their u have been widened: beyond that a line is worth a warning of its own. */
static size_t write_off(lw_calibration *calibration, const lw_calibration_lines *rows, const lw_aberrations *set,
                        const char *whose, lw_node *list, lw_node *warnings, lw_error *err)
{
    size_t off = 0, quiet = 0;
    for (size_t i = 0; i < rows->n; i++) {
        double u = rows->u_residual[i], pull = u > 0 ? rows->residual[i] / u : 0;
        const lw_reflection *r = &rows->line[i]->reflection;
        char hkl[24];
        if (!(fabs(pull) > 3))
            continue;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        const char *why = why_off(rows, i, set, &calibration->arena, err);
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "hkl", hkl, err);
        if (whose[0] != '\0')
            lw_add_text(row, "standard", whose, err);
        lw_add_quantity(row, "residual", lw_quantity_of(rows->residual[i], u, "deg"), NULL, err);
        lw_add_number(row, "pull", pull, err);
        lw_add_text(row, "why", why, err);
        if (!(fabs(pull) > 3 * rows->birge)) {
            quiet++;
            continue;
        }
        /* a hundredth of a line's width is no matter for a line-profile calibration (common practice) */
        if (fabs(rows->residual[i]) > fmax(4 * u * rows->birge, 0.002))
            off++;
        lw_add_text(warnings, NULL,
                    lw_arena_print(&calibration->arena, err,
                                   "line %s%s%s lies %.4f deg from its certified place after the aberrations (%.1f u): %s", hkl,
                                   whose[0] != '\0' ? " of " : "", whose, rows->residual[i], fabs(pull), why), err);
    }
    if (quiet > 0)
        lw_add_text(warnings, NULL,
                    lw_arena_print(&calibration->arena, err,
                                   "%zu lines%s%s lie farther than 3 u from their certified places, no more than the others do: "
                                   "the aberrations do not describe the instrument to the last digit (off_certificate lists them)",
                                   quiet, whose[0] != '\0' ? " of " : "", whose), err);
    return off;
}

static void warn_correlations(lw_calibration *calibration, lw_node *list, lw_error *err)
{
    const lw_aberrations *set = &calibration->aberrations;
    for (size_t i = 0; i < set->n; i++)
        for (size_t j = 0; j < i; j++) {
            double r = set->covariance[i][j] / sqrt(set->covariance[i][i] * set->covariance[j][j]);
            if (fabs(r) > 0.98)
                lw_add_text(list, NULL,
                            lw_arena_print(&calibration->arena, err,
                                           "the range of angles can't separate %s from %s (correlation %.3f): their sum is "
                                           "sound, each alone is not", set->kind[j]->name, set->kind[i]->name, r), err);
        }
}

static void warn_join(lw_calibration *calibration, const lw_set *set, lw_node *list, lw_error *err)
{
    for (size_t k = 0; k < set->n; k++)
        if (!set->scan[k].joined)
            lw_add_text(list, NULL,
                        lw_arena_print(&calibration->arena, err, "scan %zu (%s) serves for positions, not for the profile: %s",
                                       k + 1, set->scan[k].standard->name, set->scan[k].why), err);
    if (set->profile.birge > 1)
        lw_add_text(list, NULL,
                    lw_arena_print(&calibration->arena, err,
                                   "the scans do not show the same widths within their uncertainties (chi-square %.1f for %.0f "
                                   "degrees of freedom, p = %.1e): all u of the profile were multiplied by %.2f",
                                   set->profile.chi2, set->profile.freedom, set->profile.p, set->profile.birge), err);
    if (set->shared.birge > 1)
        lw_add_text(list, NULL,
                    lw_arena_print(&calibration->arena, err,
                                   "each scan by itself gives another zero shift than the others (chi-square %.1f for %.0f "
                                   "degrees of freedom, p = %.1e): all u of the positions were multiplied by %.2f",
                                   set->shared.chi2, set->shared.freedom, set->shared.p, set->birge), err);
}

void lw__write_verdict(lw_calibration *calibration, const lw_calibration_lines *const *all, size_t n_all, const lw_set *set,
                       lw_node *root, lw_error *err)
{
    lw_node *off_list = lw_add_list(root, "off_certificate", err);
    if (off_list != NULL)
        off_list->definition = "lines farther than 3 u from their certified places after the aberrations; u is that of the "
                               "residual, the certificate's share in it";
    lw_node *list = lw_add_list(root, "warnings", err);
    warn_correlations(calibration, list, err);
    if (set != NULL)
        warn_join(calibration, set, list, err);
    bool far = false; /* a wavelength is known to 1e-4 or so: more says that something else is wrong */
    const lw_aberrations *own = &calibration->aberrations;
    for (size_t i = 0; i < own->n; i++)
        if (strcmp(own->kind[i]->name, "wavelength") == 0 && fabs(own->value[i]) > 1e-3) {
            far = true;
            lw_add_text(list, NULL,
                        lw_arena_print(&calibration->arena, err,
                                       "the lines ask for a wavelength %.2f %% from the one given: is it the right standard, "
                                       "and the right radiation?", 100 * own->value[i]), err);
        }
    size_t off = 0;
    double rms = 0;
    bool off_shape = false;
    for (size_t k = 0; k < n_all; k++) {
        const lw_calibration_lines *rows = all[k];
        bool profile = set == NULL || set->scan[k].joined;
        off += write_off(calibration, rows, set != NULL ? &set->scan[k].aberrations : own,
                         n_all > 1 ? rows->standard->name : "", off_list, list, err);
        if (rows->lines->misfit[0] != '\0')
            lw_add_text(list, NULL,
                        n_all > 1 ? lw_arena_print(&calibration->arena, err, "scan %zu (%s): %s", k + 1, rows->standard->name,
                                                   rows->lines->misfit)
                                  : rows->lines->misfit, err);
        /* positions and shape judged by themselves; the limits are common practice for a line-profile calibration: widths
         * read from a shape that misses the standard by a fifth of the noise are not the instrument's at every angle */
        off_shape |= profile && rows->lines->goodness > 1.2;
        rms = fmax(rms, rows->rms);
    }
    if (strncmp(all[0]->radius_from, "assumed", 7) == 0 && has(own, "displacement"))
        lw_add_text(list, NULL, "the goniometer radius was not given: 200 mm was assumed, the displacement scales with it",
                    err);
    if (off_shape)
        lw_add_text(list, NULL,
                    "the profile model does not describe this standard: its widths are an average, wrong by more than their "
                    "uncertainty at some angles (is the specimen transparent, the domain size small, the geometry another?)",
                    err);
    if (rms > 0.005)
        lw_add_text(list, NULL,
                    lw_arena_print(&calibration->arena, err,
                                   "after the aberrations the lines still scatter by %.4f deg rms about their certified "
                                   "places (attention above 0.005 deg, fail above 0.02 deg)", rms), err);
    const char *verdict = rms > 0.02 || far ? "fail" : rms > 0.005 || off > 0 || off_shape ? "attention" : "pass";
    snprintf(calibration->verdict, sizeof calibration->verdict, "%s", verdict);
    lw_add_text(root, "verdict", verdict, err);
}
