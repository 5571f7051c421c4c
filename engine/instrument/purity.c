/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/purity.h"

#include "numeric/voigt.h"

#include <math.h>
#include <stdio.h>

static const double degree = M_PI / 180;

enum { STRONGEST = 4 };

/* Sums of a weighted straight-line fit through the origin with a free level: residual = level + amount x shape. */
typedef struct sums {
    double amount, u2;
    size_t points;
} sums;

/* The foreign line's share of one reflection's area, from what the fit of the K-alpha lines leaves. False where another
 * line of the standard stands there, or the scan does not reach. */
static bool look(const lw_lines *lines, const lw_line *line, double wavelength_nm, sums *found)
{
    const lw_scan *scan = lines->scan;
    double reference = lw_radiation_wavelength(&lines->radiation);
    double sine = sin(line->two_theta.value * degree / 2) * wavelength_nm / reference;
    if (!(sine < 0.98))
        return false;
    double place = 2 * asin(sine) / degree, width = line->fwhm.value, reach = 4 * width + 0.2;
    if (place - reach < scan->two_theta_deg[0] || place + reach > scan->two_theta_deg[scan->n - 1])
        return false;
    for (size_t k = 0; k < lines->n; k++) {
        double last = 0; /* the far end of its own spectrum */
        for (size_t c = 0; c < lines->radiation.n; c++)
            last = fmax(last, 2 * tan(lines->line[k].two_theta.value * degree / 2) *
                                  (lines->radiation.component[c].wavelength_nm / reference - 1) / degree);
        double from = lines->line[k].two_theta.value - 3 * lines->line[k].fwhm.value - reach;
        if (place > from && place < lines->line[k].two_theta.value + last + 3 * lines->line[k].fwhm.value + reach)
            return false;
    }
    double gauss = sqrt(fmax(0, line->gauss_fwhm.value)) > 0 ? line->gauss_fwhm.value : 0.5 * width;
    double lorentz = line->lorentz_fwhm.value + 2 * tan(asin(sine)) * 4e-4 / degree; /* a usual natural width */
    double h[3] = {0}, g[2] = {0};
    for (size_t i = 0; i < scan->n; i++) {
        double x = scan->two_theta_deg[i] - place;
        if (fabs(x) > reach)
            continue;
        double shape = lw_voigt(x, gauss, lorentz), rest = scan->intensity[i] - lines->fitted[i];
        double weight = 1 / lines->variance[i];
        h[0] += weight;
        h[1] += weight * shape;
        h[2] += weight * shape * shape;
        g[0] += weight * rest;
        g[1] += weight * rest * shape;
        found->points++;
    }
    double determinant = h[0] * h[2] - h[1] * h[1];
    if (!(determinant > 0))
        return false;
    /* the Lorentz-polarisation factor of the foreign line's place against the line's own */
    double here = place * degree, there = line->two_theta.value * degree;
    double factor = (1 + cos(here) * cos(here)) / (1 + cos(there) * cos(there)) * pow(sin(there / 2) / sin(here / 2), 2) *
                    cos(there / 2) / cos(here / 2);
    double area = line->area.value * factor;
    found->amount = (h[0] * g[1] - h[1] * g[0]) / determinant / area;
    found->u2 = h[0] / determinant / (area * area);
    return true;
}

static void look_at_all(const lw_lines *lines, const char *name, double wavelength_nm, const char *source, lw_node *list,
                        lw_error *err)
{
    double sum = 0, weights = 0;
    char where[STRONGEST * 24] = "";
    size_t used = 0, seen = 0;
    bool taken[256] = {false};
    for (size_t tries = 0; tries < lines->n && tries < 256 && seen < STRONGEST; tries++) {
        size_t best = lines->n;
        for (size_t k = 0; k < lines->n && k < 256; k++)
            if (!taken[k] && lines->line[k].supported &&
                (best == lines->n || lines->line[k].area.value > lines->line[best].area.value))
                best = k;
        if (best == lines->n)
            break;
        taken[best] = true;
        sums found = {0};
        if (!look(lines, &lines->line[best], wavelength_nm, &found))
            continue;
        sum += found.amount / found.u2;
        weights += 1 / found.u2;
        char hkl[24];
        const lw_reflection *r = &lines->line[best].reflection;
        used += (size_t)snprintf(where + used, sizeof where - used, "%s%s", seen > 0 ? ", " : "",
                                 lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl));
        seen++;
    }
    if (seen == 0)
        return;
    double share = sum / weights, u = sqrt(1 / weights) * fmax(lines->misfit_factor, 1);
    lw_node *row = lw_add_group(list, NULL, err);
    lw_add_text(row, "line", name, err);
    lw_add_number(row, "wavelength_nm", wavelength_nm, err);
    lw_add_text(row, "looked_for_at", where, err);
    lw_add_quantity(row, "relative_intensity",
                    share > 3 * u ? lw_quantity_of(share, u, "") : lw_upper_limit(fmax(share, 0) + 1.6449 * u, 0.95, ""),
                    "intensity over that of the K-alpha lines together", err);
    lw_add_text(row, "source", source, err);
}

lw_status lw_purity(lw_engine *engine, const lw_lines *lines, lw_node *record, lw_error *err)
{
    (void)engine;
    if (lines->radiation.is_plain)
        return LW_OK;
    static const char source[] = "Bearden (1967) Rev. Mod. Phys. 39, 78";
    lw_node *list = lw_add_list(record, "purity", err);
    if (lines->radiation.k_beta_nm > 0)
        look_at_all(lines, "K-beta", lines->radiation.k_beta_nm, lines->radiation.source, list, err);
    look_at_all(lines, "W L-alpha 1", 0.147639, source, list, err);
    look_at_all(lines, "W L-beta 1", 0.1281809, source, list, err);
    return err->status;
}
