/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "physics/radiation.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const double PI = 3.14159265358979323846;

/* Wavelengths that diffraction can use, nm. */
static const double SHORTEST_NM = 0.001, LONGEST_NM = 1.0;

static lw_status check_wavelength(double wavelength_nm, lw_error *err)
{
    if (wavelength_nm >= SHORTEST_NM && wavelength_nm <= LONGEST_NM)
        return LW_OK;
    return lw_fail(err, LW_BAD_ARGUMENT, "give the wavelength in nm (Cu K-alpha1 is 0.15405929)",
                   "a wavelength of %g nm is outside %g to %g nm", wavelength_nm, SHORTEST_NM, LONGEST_NM);
}

lw_status lw_radiation_plain(double wavelength_nm, lw_radiation *radiation, lw_error *err)
{
    lw_status status = check_wavelength(wavelength_nm, err);
    if (status != LW_OK)
        return status;
    memset(radiation, 0, sizeof *radiation);
    snprintf(radiation->name, sizeof radiation->name, "%.8g nm", wavelength_nm);
    snprintf(radiation->source, sizeof radiation->source, "wavelength given by the user");
    radiation->n = 1;
    radiation->component[0] = (lw_emission){wavelength_nm, 0.0, 1.0};
    radiation->is_plain = true;
    return LW_OK;
}

lw_status lw_radiation_add_wavelength(lw_radiation *radiation, double wavelength_nm, double width_nm,
                                      double share, lw_error *err)
{
    if (radiation->n >= LW_EMISSION_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, "join the weakest components",
                       "a radiation can have %d components at most", LW_EMISSION_MOST);
    radiation->component[radiation->n++] = (lw_emission){wavelength_nm, width_nm, share};
    return LW_OK;
}

lw_status lw_radiation_add_energy(lw_radiation *radiation, double energy_ev, double width_ev, double height,
                                  double share, lw_error *err)
{
    if (!(energy_ev > 0) || !isfinite(energy_ev) || !(width_ev >= 0) || !isfinite(width_ev))
        return lw_fail(err, LW_BAD_ARGUMENT, "give energy and FWHM in eV",
                       "a component of energy %g eV and width %g eV can't be", energy_ev, width_ev);
    if ((height > 0) == (share > 0))
        return lw_fail(err, LW_BAD_ARGUMENT, "give one of the two",
                       "the component at %g eV needs either a height or a share", energy_ev);
    if (height > 0 && !(width_ev > 0))
        return lw_fail(err, LW_BAD_ARGUMENT, "give its share of the intensity, or its width",
                       "the component at %g eV has a height but no width", energy_ev);
    double wavelength_nm = LW_HC_EV_NM / energy_ev;
    return lw_radiation_add_wavelength(radiation, wavelength_nm, wavelength_nm * width_ev / energy_ev,
                                       height > 0 ? height * width_ev : share, err);
}

lw_status lw_radiation_settle(lw_radiation *radiation, lw_error *err)
{
    if (radiation->n < 1 || radiation->n > LW_EMISSION_MOST)
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "a radiation needs 1 to %d components, not %zu",
                       LW_EMISSION_MOST, radiation->n);
    double sum = 0;
    for (size_t i = 0; i < radiation->n; i++) {
        const lw_emission *line = &radiation->component[i];
        lw_status status = check_wavelength(line->wavelength_nm, err);
        if (status != LW_OK)
            return status;
        if (!(line->width_nm >= 0 && line->width_nm < 0.1 * line->wavelength_nm))
            return lw_fail(err, LW_BAD_ARGUMENT,
                           "give the full width at half maximum in nm, 0 for an ideal line",
                           "component %zu of the radiation has a width of %g nm", i + 1, line->width_nm);
        if (!(line->weight > 0) || !isfinite(line->weight))
            return lw_fail(err, LW_BAD_ARGUMENT, "leave out a component without intensity",
                           "component %zu of the radiation has the weight %g", i + 1, line->weight);
        sum += line->weight;
    }
    if (!isfinite(radiation->k_beta_nm) || radiation->k_beta_nm < 0 || radiation->k_beta_nm > LONGEST_NM)
        return lw_fail(err, LW_BAD_ARGUMENT, "give it in nm, or leave it out",
                       "a K-beta wavelength of %g nm can't be", radiation->k_beta_nm);
    for (size_t i = 0; i < radiation->n; i++)
        radiation->component[i].weight /= sum;
    /* Insertion sort: few components, and equal weights keep their order. */
    for (size_t i = 1; i < radiation->n; i++) {
        lw_emission line = radiation->component[i];
        size_t at = i;
        for (; at > 0 && radiation->component[at - 1].weight < line.weight; at--)
            radiation->component[at] = radiation->component[at - 1];
        radiation->component[at] = line;
    }
    return LW_OK;
}

double lw_radiation_wavelength(const lw_radiation *radiation)
{
    return radiation->component[0].wavelength_nm;
}

double lw_radiation_height(const lw_radiation *radiation, double wavelength_nm)
{
    double height = 0;
    for (size_t i = 0; i < radiation->n; i++) {
        const lw_emission *line = &radiation->component[i];
        if (!(line->width_nm > 0))
            continue;
        double half = 0.5 * line->width_nm, off = wavelength_nm - line->wavelength_nm;
        height += line->weight * half / (PI * (off * off + half * half));
    }
    return height;
}

static bool near(double a, double b)
{
    return fabs(a - b) <= 1e-6 * fmax(fabs(a), fabs(b));
}

bool lw_radiation_same(const lw_radiation *a, const lw_radiation *b)
{
    if (a->n != b->n)
        return false;
    for (size_t i = 0; i < a->n; i++) {
        const lw_emission *p = &a->component[i], *q = &b->component[i];
        if (!near(p->wavelength_nm, q->wavelength_nm) || !near(p->width_nm, q->width_nm) ||
            !near(p->weight, q->weight))
            return false;
    }
    return true;
}
