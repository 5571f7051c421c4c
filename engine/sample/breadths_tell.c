/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The words, numbers and curves of a fit of breadths. */
#include "sample/breadths.h"
#include "sample/directions.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>

#define CURVE_POINTS 101

static lw_quantity times(lw_quantity q, double factor)
{
    q.value *= factor;
    q.u *= factor;
    return q;
}

void lw_breadths_tell(const lw_breadth_fit *fit, lw_node *group, lw_error *err)
{
    lw_add_quantity(
        group, "size_volume", fit->size_volume,
        "Volume-weighted mean column length: the reciprocal of the breadth that does not depend on s.", err);
    lw_add_quantity(group, "strain_apparent", fit->strain_apparent,
                    "Apparent strain e: strain's integral breadth over 2/d (Stokes & Wilson 1944); about the "
                    "largest strain present.",
                    err);
    lw_add_quantity(group, "strain_rms", times(fit->strain_apparent, LW_RMS_PER_APPARENT),
                    "Root mean square strain, if the strains are normally distributed: sqrt(2/pi) times the "
                    "apparent strain.",
                    err);
    lw_add_number(group, "correlation", fit->correlation, err);
    lw_add_number(group, "chi2", fit->fit.chi2, err);
    lw_add_number(group, "degrees_of_freedom", (double)fit->fit.degrees, err);
    if (fit->fit.degrees > 0) {
        lw_add_number(group, "chi2_per_degree", fit->fit.chi2 / (double)fit->fit.degrees, err);
        lw_add_number(group, "chance", fit->fit.p, err);
    }
    lw_add_number(group, "scatter_factor", fit->fit.scatter, err);
}

void lw_breadths_draw(const lw_breadths *breadths, const lw_breadth_fit *fit, lw_node *group, lw_error *err)
{
    size_t n = breadths->n;
    if (group == NULL)
        return;
    double *scaled = lw_arena_take(group->arena, n, sizeof *scaled, err);
    if (scaled == NULL)
        return;
    lw_node *points = lw_add_group(group, "points", err);
    lw_node *hkl = lw_add_list(points, "hkl", err);
    double most = 0;
    for (size_t i = 0; i < n; i++) {
        const lw_reflection *r = &breadths->profile[i]->line->reflection;
        char text[24];
        lw_add_text(hkl, NULL, lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        scaled[i] = breadths->s[i] * (breadths->scale != NULL ? breadths->scale[i] : 1);
        most = fmax(most, scaled[i]);
    }
    lw_add_vector(points, "s", breadths->s, n, "nm^-1", err);
    if (breadths->scale != NULL)
        lw_add_vector(points, "scaled_s", scaled, n, "nm^-1", err);
    lw_add_vector(points, "breadth", breadths->beta, n, "nm^-1", err);
    lw_add_vector(points, "u", fit->fit.u, n, "nm^-1", err);
    lw_add_vector(points, "calculated", fit->fit.calculated, n, "nm^-1", err);
    lw_add_vector(points, "residual", fit->fit.residual, n, "nm^-1", err);

    /* the line from s = 0, where it shows the size, to beyond the last point, with its standard uncertainty
     */
    double s[CURVE_POINTS], beta[CURVE_POINTS], u[CURVE_POINTS];
    size_t kept = 0;
    for (size_t i = 0; i < CURVE_POINTS; i++) {
        double slopes[2], s_slope, at = 1.08 * most * (double)i / (CURVE_POINTS - 1);
        double value = lw_form_breadth(fit->form, fit->p, at, slopes, &s_slope), variance = 0;
        for (size_t j = 0; j < 2; j++)
            for (size_t k = 0; k < 2; k++)
                variance += slopes[j] * fit->covariance[j][k] * slopes[k];
        if (!isfinite(value) || !isfinite(variance))
            continue; /* a form that ends before s = 0 because its size share is negative */
        s[kept] = at;
        beta[kept] = value;
        u[kept++] = sqrt(fmax(0, variance));
    }
    lw_node *line = lw_add_group(group, "line", err);
    lw_add_vector(line, "s", s, kept, "nm^-1", err);
    lw_add_vector(line, "breadth", beta, kept, "nm^-1", err);
    lw_add_vector(line, "u", u, kept, "nm^-1", err);
}

/* ------------------------------------------------------------------------------------------------- remarks
 */

static void say(lw_node *remarks, lw_error *err, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

static void say(lw_node *remarks, lw_error *err, const char *format, ...)
{
    char text[480];
    va_list list;
    va_start(list, format);
    vsnprintf(text, sizeof text, format, list);
    va_end(list);
    lw_add_text(remarks, NULL, text, err);
}

/* Directions of which two or more orders lie off the line to the same side by more than 3 u of their mean: how many. */
static size_t remark_directions(const lw_breadths *breadths, const lw_breadth_fit *fit, bool cubic,
                                lw_node *remarks, lw_error *err)
{
    size_t told = 0;
    for (size_t i = 0; i < breadths->n; i++) {
        int mine[3], other[3];
        lw_direction_of(breadths->profile[i], cubic, mine);
        double sum = 0, weight = 0;
        int orders = 0, above = 0;
        bool first = true;
        for (size_t j = 0; j < breadths->n; j++) {
            lw_direction_of(breadths->profile[j], cubic, other);
            if (mine[0] != other[0] || mine[1] != other[1] || mine[2] != other[2])
                continue;
            first = first && j >= i;
            double w = 1 / (fit->fit.u[j] * fit->fit.u[j]);
            sum += w * fit->fit.residual[j];
            weight += w;
            orders++;
            above += fit->fit.residual[j] > 0;
        }
        if (!first || orders < 2 || (above != 0 && above != orders) || fabs(sum) / sqrt(weight) <= 3)
            continue;
        char text[24];
        say(remarks, err,
            "the %d orders of direction %s lie %s the line by %.1f u of their mean: breadths depend on "
            "direction",
            orders, lw_hkl_text(mine[0], mine[1], mine[2], text, sizeof text), above > 0 ? "above" : "below",
            fabs(sum) / sqrt(weight));
        told++;
    }
    return told;
}

/* Lines of which the sample's share is less than half of the instrument's breadth, of those that know it. */
static bool mostly_instrument(const lw_breadths *breadths)
{
    size_t narrow = 0;
    for (size_t i = 0; i < breadths->n; i++) {
        const lw_profile *profile = breadths->profile[i];
        double per = profile->breadth_s.value > 0 ? profile->breadth_deg.value / profile->breadth_s.value : 0; /* deg nm */
        narrow += breadths->beta[i] * per < 0.5 * profile->line->instrument_breadth_deg;
    }
    return 2 * narrow > breadths->n;
}

/* Shares below 0, and what would make them so. */
static void remark_negative(const lw_breadths *breadths, const lw_breadth_fit *fit, bool directed, lw_node *remarks,
                            lw_error *err)
{
    const char *instrument = "; these lines are mostly instrument: one taken as too broad (over-corrected) would do this";
    if (fit->p[0] < 0)
        say(remarks, err,
            "the share of size is negative (%.1f u below 0): size does not broaden these lines measurably%s",
            -fit->p[0] / sqrt(fit->covariance[0][0]),
            mostly_instrument(breadths) ? instrument
            : directed                  ? "; directions differ, and a line through all mixes them"
                       : "; strain that falls with length makes breadths grow faster than s, which would do this too");
    if (fit->p[1] < 0)
        say(remarks, err, "the share of strain is negative (%.1f u below 0): breadths do not grow with s%s",
            -fit->p[1] / sqrt(fit->covariance[1][1]),
            mostly_instrument(breadths) ? instrument
            : directed                  ? "; directions differ, and a line through all mixes them (see the directions by themselves)"
            : fit->fit.scatter > 1      ? "; flat crystals or planar faults, which broaden some lines more, would do this"
                                        : "; strain too small to be seen beside size would look like this");
}

/* A line whose own uncertainty is so small that the others hardly count. */
static void remark_weights(const lw_breadths *breadths, const lw_breadth_fit *fit, lw_node *remarks,
                           lw_error *err)
{
    double all = 0, most = 0;
    size_t at = 0;
    for (size_t i = 0; i < breadths->n; i++) {
        double w = 1 / (fit->fit.u[i] * fit->fit.u[i]);
        all += w;
        if (w > most) {
            most = w;
            at = i;
        }
    }
    if (breadths->n < 3 || most < 0.75 * all)
        return;
    const lw_reflection *r = &breadths->profile[at]->line->reflection;
    char text[24];
    say(remarks, err, "line %s alone carries %.0f %% of the weight: what is told is told by it, and the others hardly test it",
        lw_hkl_text(r->h, r->k, r->l, text, sizeof text), 100 * most / all);
}

void lw_breadths_remark(const lw_breadths *breadths, const lw_breadth_fit *fit, lw_node *remarks,
                        lw_error *err)
{
    const lw_generalised_fit *f = &fit->fit;
    remark_negative(breadths, fit, remark_directions(breadths, fit, breadths->cubic, NULL, err) > 0, remarks, err);
    if (fit->p[0] >= 0 && fit->size_volume.kind != LW_VALUE)
        say(remarks, err, "size broadening is below twice its uncertainty: a lower limit is given");
    if (fit->p[1] >= 0 && fit->strain_apparent.kind != LW_VALUE)
        say(remarks, err, "strain broadening is below twice its uncertainty: an upper limit is given");
    if (f->degrees == 0)
        say(remarks, err,
            "as many parameters as independent breadths: the line passes through them and nothing "
            "tests it");
    else if (f->scatter > 1 && f->p < 0.01)
        say(remarks, err,
            "breadths scatter %.1f times their u about the line (chance %.1g): u enlarged by that",
            f->scatter, f->p);
    if (f->rank < breadths->n)
        say(remarks, err,
            "the %zu breadths come from a common function of angle and carry %zu independent numbers",
            breadths->n, f->rank);
    if (breadths->n_left_out > 0)
        say(remarks, err, "%zu line%s, known by a limit only, left out", breadths->n_left_out,
            breadths->n_left_out == 1 ? "" : "s");
    remark_directions(breadths, fit, breadths->cubic, remarks, err);
    remark_weights(breadths, fit, remarks, err);
}
