/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/whole_pattern_tell.h"

#include "sample/breadths.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <string.h>


static const char SIZE_VOLUME[] = "Volume-weighted mean column length (3/4)<D^4>/<D^3> of the spheres.";
static const char SIZE_AREA[] = "Area-weighted mean column length (2/3)<D^3>/<D^2> of the spheres.";
static const char DIAMETER[] = "Number-weighted mean diameter of the spheres.";
static const char DISPERSION[] = "Variance of the diameter over its squared mean, number weighted.";
static const char STRAIN[] = "Root mean square strain over columns of half the volume-weighted size.";
static const char STRAIN_ANY[] = "Root mean square strain, the same over every length.";
static const char APPARENT[] =
    "sqrt(pi/2) times the rms strain: as a breadth shows it (Stokes & Wilson 1944).";

static void tell_strain(const lw_pattern_answer *a, lw_node *result, lw_error *err)
{
    if (a->strain_limit > 0) {
        double rms = a->strain_limit;
        lw_add_quantity(result, "strain_rms", lw_upper_limit(rms, 0.95, ""), STRAIN_ANY, err);
        lw_add_quantity(result, "strain_apparent", lw_upper_limit(rms / LW_RMS_PER_APPARENT, 0.95, ""),
                        APPARENT, err);
        return;
    }
    double rms = a->value[LW_ANSWER_STRAIN], u = sqrt(a->covariance[LW_ANSWER_STRAIN][LW_ANSWER_STRAIN]);
    bool constant = a->form[a->best].strain == &lw_strain_constant;
    lw_add_quantity(result, "strain_rms", lw_quantity_of(rms, u, ""), constant ? STRAIN_ANY : STRAIN, err);
    lw_add_quantity(result, "strain_apparent",
                    lw_quantity_of(rms / LW_RMS_PER_APPARENT, u / LW_RMS_PER_APPARENT, ""), APPARENT, err);
    lw_node *list = lw_add_list(result, "strain_rms_at", err);
    for (size_t i = 0; i < a->n_lengths; i++) {
        size_t at = LW_ANSWER_STRAIN_AT + i;
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "length", a->length[i], err);
        lw_add_number(row, "value", a->value[at], err);
        lw_add_number(row, "u", sqrt(a->covariance[at][at]), err);
    }
}

/* Strains at the knots. */
static void tell_knots(const lw_pattern_answer *a, const lw_pattern_form *form, lw_node *row, lw_error *err)
{
    lw_add_number(row, "smoothing_of_strain", form->strength[1], err);
    lw_node *list = lw_add_list(row, "knots", err);
    double logarithm = 0;
    for (size_t k = 0; k < a->knots.n; k++) {
        lw_node *each = lw_add_group(list, NULL, err);
        lw_add_number(each, "length", lw_strain_knots_length(&a->knots, k), err);
        logarithm += form->shape[LW_PATTERN_STRAIN + k];
        lw_add_number(each, "value", exp(0.5 * logarithm), err);
    }
}

static void tell_forms(const lw_pattern_answer *a, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "forms", err);
    for (size_t i = 0; i < a->n_forms; i++) {
        const lw_pattern_form *form = &a->form[i];
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "strain", form->name, err);
        lw_add_text(row, "title", form->title, err);
        if (!form->none)
            lw_add_text(row, "source", form->source, err);
        if (form->varying)
            lw_add_number(row, "variation", form->shape[LW_PATTERN_VARIATION], err);
        lw_add_number(row, "chi2", form->chi2, err);
        lw_add_number(row, "parameters", form->parameters, err);
        lw_add_number(row, "weight", form->weight, err);
        lw_add_number(row, "fall", form->shape[LW_PATTERN_FALL], err);
        lw_add_number(row, "iterations", (double)form->iterations, err);
        if (form->fitted) {
            lw_add_number(row, "size_volume", form->value[LW_ANSWER_SIZE_VOLUME], err);
            lw_add_number(row, "size_area", form->value[LW_ANSWER_SIZE_AREA], err);
            lw_add_number(row, "strain_rms", form->value[LW_ANSWER_STRAIN], err);
            for (int k = 0; form->strain != NULL && k < form->strain->n && !form->none; k++)
                lw_add_number(row, form->strain->parameter[k], form->shape[LW_PATTERN_STRAIN + k], err);
            if (form->strain == NULL)
                tell_knots(a, form, row, err);
            if (a->histogram.n > 0)
                lw_add_number(row, "smoothing_of_sizes", form->strength[0], err);
        } else {
            lw_add_text(row, "left_out", form->why, err);
        }
    }
}

static void tell_covariance(const lw_pattern_answer *a, lw_node *result, lw_error *err)
{
    static const char *const names[] = {"size_volume", "size_area", "diameter_mean", "diameter_dispersion",
                                        "strain_rms"};
    lw_node *group = lw_add_group(result, "covariance", err);
    lw_node *list = lw_add_list(group, "of", err);
    for (int i = 0; i < LW_ANSWER_STRAIN_AT; i++)
        lw_add_text(list, NULL, names[i], err);
    lw_node *rows = lw_add_list(group, "rows", err);
    for (int i = 0; i < LW_ANSWER_STRAIN_AT; i++)
        lw_add_vector(rows, NULL, a->covariance[i], LW_ANSWER_STRAIN_AT, "", err);
}

/* Strain against length: the answer with its band, and each form that the data leave possible. */
static void draw(const lw_pattern_answer *a, lw_arena *arena, lw_node *result, lw_error *err)
{
    size_t n = a->n_lengths;
    double *low = lw_arena_take(arena, n + 1, sizeof *low, err),
           *high = lw_arena_take(arena, n + 1, sizeof *high, err);
    if (low == NULL || high == NULL || a->strain_limit > 0)
        return;
    lw_node *figure = lw_add_group(result, "figure", err);
    lw_add_text(figure, "name", "whole_pattern_strain", err);
    lw_add_text(figure, "title", "Strain against column length, whole pattern", err);
    lw_add_text(figure, "caption",
                "Root mean square strain over columns of a length: mean of the forms, weighted with their "
                "evidence, with "
                "two standard uncertainties (choice of the form included), and the forms themselves.",
                err);
    lw_node *x = lw_add_group(figure, "x", err), *y = lw_add_group(figure, "y", err);
    lw_add_text(x, "label", "column length L", err);
    lw_add_text(x, "unit", "nm", err);
    lw_add_text(y, "label", "rms strain", err);
    lw_node *series = lw_add_list(figure, "series", err), *line = lw_add_group(series, NULL, err);
    const double *values = a->value + LW_ANSWER_STRAIN_AT;
    for (size_t i = 0; i < n; i++) {
        double u = sqrt(a->covariance[LW_ANSWER_STRAIN_AT + i][LW_ANSWER_STRAIN_AT + i]);
        low[i] = values[i] - 2 * u;
        high[i] = values[i] + 2 * u;
    }
    lw_add_text(line, "kind", "line", err);
    lw_add_text(line, "label", "mean of the forms", err);
    lw_add_vector(line, "x", a->length, n, "nm", err);
    lw_add_vector(line, "y", values, n, "", err);
    lw_node *band = lw_add_group(series, NULL, err);
    lw_add_text(band, "kind", "band", err);
    lw_add_text(band, "label", "2 u", err);
    lw_add_vector(band, "x", a->length, n, "nm", err);
    lw_add_vector(band, "y", low, n, "", err);
    lw_add_vector(band, "high", high, n, "", err);
    size_t possible = 0;
    char label[160];
    for (size_t i = 0; i < a->n_forms; i++)
        possible += a->form[i].fitted && a->form[i].weight >= 0.01 && !a->form[i].none;
    for (size_t i = 0; i < a->n_forms && possible > 1; i++) {
        if (!a->form[i].fitted || a->form[i].weight < 0.01 || a->form[i].none)
            continue;
        lw_node *each = lw_add_group(series, NULL, err);
        lw_add_text(each, "kind", "line", err);
        snprintf(label, sizeof label, "%s%s", a->form[i].title, a->form[i].varying ? ", varying" : "");
        lw_add_text(each, "label", label, err);
        lw_add_vector(each, "x", a->length, n, "nm", err);
        lw_add_vector(each, "y", a->form[i].value + LW_ANSWER_STRAIN_AT, n, "", err);
    }
}

static void remark(const lw_pattern_answer *a, lw_node *remarks, lw_error *err)
{
    char text[320];
    if (a->misfit > 1) {
        snprintf(text, sizeof text,
                 "the best form still misses the counts (goodness of fit %.3f, or residuals that go "
                 "together): all "
                 "uncertainties were enlarged %.2f times",
                 a->goodness, a->misfit);
        lw_add_text(remarks, NULL, text, err);
    }
    if (a->disagreement > 1) {
        snprintf(text, sizeof text,
                 "lines contradict each other under the forms of strain: the uncertainties follow their "
                 "scatter and are up to "
                 "%.1f times those of the counts",
                 a->disagreement);
        lw_add_text(remarks, NULL, text, err);
    }
    if (a->goodness > 1.05)
        lw_add_text(remarks, NULL,
                    "no form tried here is what the powder is: the uncertainties hold counting, calibration "
                    "and the forms, "
                    "not crystals of another shape, spread or strain; take the sizes as indicative",
                    err);
    double lowest = INFINITY, highest = 0;
    for (size_t i = 0; i < a->n_forms; i++)
        if (a->form[i].fitted && a->form[i].weight > 0.05) {
            lowest = fmin(lowest, a->form[i].value[LW_ANSWER_SIZE_VOLUME]);
            highest = fmax(highest, a->form[i].value[LW_ANSWER_SIZE_VOLUME]);
        }
    if (highest > 1.02 * lowest && !a->size_unresolved) {
        snprintf(text, sizeof text,
                 "the data leave more than one form of strain possible, with size_volume from %.3g to %.3g "
                 "nm: the "
                 "uncertainties hold that choice",
                 lowest, highest);
        lw_add_text(remarks, NULL, text, err);
    }
    if (a->size_unresolved)
        lw_add_text(remarks, NULL,
                    "no size broadening stands out: the size is a lower limit, for an assumed width of the "
                    "distribution "
                    "(sigma = 0.3)",
                    err);
    else if (a->sigma_at_bound)
        lw_add_text(
            remarks, NULL,
            "the width of the size distribution ended at its bound: read the dispersion as not determined",
            err);
    if (a->form[a->best].varying)
        lw_add_text(remarks, NULL,
                    "crystals are strained to different degrees: the mean square strain varies from one to "
                    "the other as a "
                    "gamma distribution (Madan & Seneta 1990 J. Business 63, 511)",
                    err);
    if (a->anisotropic) {
        char q[96], value[64];
        if (a->anisotropy_at_bound)
            snprintf(q, sizeof q, "at its bound, %.3g", a->anisotropy);
        else
            snprintf(q, sizeof q, "= %s",
                     lw_quantity_text(lw_quantity_of(a->anisotropy, a->u_anisotropy, ""), value, sizeof value));
        snprintf(text, sizeof text,
                 "strain depends on the direction: mean square strain goes as 1 - q H with q %s, H = 0 along "
                 "h00, 1/3 along "
                 "hhh; the strains given are means over all directions (H = 1/5)",
                 q);
        lw_add_text(remarks, NULL, text, err);
    }
}

/* q of the anisotropy; where it ended at a bound only a limit. */
static void tell_anisotropy(const lw_pattern_answer *a, lw_node *result, lw_error *err)
{
    static const char meaning[] = "q of the mean square strain of a cubic crystal, proportional to 1 - q H.";
    double reach = LW_ONE_SIDED_95 * a->u_anisotropy;
    if (!a->anisotropy_at_bound)
        lw_add_quantity(result, "strain_anisotropy", lw_quantity_of(a->anisotropy, a->u_anisotropy, ""),
                        meaning, err);
    else if (!(reach > 0) || reach > 3) /* from one end of what is possible to the other */
        lw_add_text(
            result, "strain_anisotropy_not_determined",
            "the fit took it to the bound of what is possible, and its uncertainty is as wide as that", err);
    else
        lw_add_quantity(result, "strain_anisotropy",
                        a->anisotropy > 0 ? lw_lower_limit(a->anisotropy - reach, 0.95, "")
                                          : lw_upper_limit(a->anisotropy + reach, 0.95, ""),
                        meaning, err);
}

/* The histogram: share of the volume a nm of diameter, with its uncertainty, and a figure. */
static void tell_distribution(const lw_pattern_answer *a, lw_arena *arena, lw_node *result, lw_error *err)
{
    size_t n = a->histogram.n;
    double *x = lw_arena_take(arena, 4 * n, sizeof *x, err);
    if (x == NULL)
        return;
    double *y = x + n, *low = y + n, *high = low + n;
    lw_node *list = lw_add_list(result, "diameter_distribution", err);
    for (size_t b = 0; b < n; b++) {
        size_t at = LW_ANSWER_SHARE + b;
        x[b] = lw_size_histogram_diameter(&a->histogram, b);
        double u = sqrt(fmax(a->covariance[at][at], 0)) / x[b];
        y[b] = a->value[at] / x[b];
        low[b] = fmax(y[b] - 2 * u, 0);
        high[b] = y[b] + 2 * u;
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "diameter", x[b], err);
        lw_add_number(row, "value", y[b], err);
        lw_add_number(row, "u", u, err);
    }
    lw_node *figure = lw_add_group(lw_add_list(result, "figures", err), NULL, err);
    lw_add_text(figure, "name", "whole_pattern_sizes", err);
    lw_add_text(figure, "title", "Distribution of diameters, whole pattern", err);
    lw_add_text(figure, "caption",
                "Share of the volume in spheres of a diameter, a nm, as a smoothed histogram without a "
                "formula, with two "
                "standard uncertainties. The smoothing is the one for which the counts are most probable.",
                err);
    lw_node *axis = lw_add_group(figure, "x", err);
    lw_add_text(axis, "label", "diameter D", err);
    lw_add_text(axis, "unit", "nm", err);
    axis = lw_add_group(figure, "y", err);
    lw_add_text(axis, "label", "share of the volume", err);
    lw_add_text(axis, "unit", "nm^-1", err);
    lw_node *series = lw_add_list(figure, "series", err), *line = lw_add_group(series, NULL, err);
    lw_add_text(line, "kind", "line", err);
    lw_add_text(line, "label", "histogram", err);
    lw_add_vector(line, "x", x, n, "nm", err);
    lw_add_vector(line, "y", y, n, "nm^-1", err);
    lw_node *band = lw_add_group(series, NULL, err);
    lw_add_text(band, "kind", "band", err);
    lw_add_text(band, "label", "2 u", err);
    lw_add_vector(band, "x", x, n, "nm", err);
    lw_add_vector(band, "y", low, n, "nm^-1", err);
    lw_add_vector(band, "high", high, n, "nm^-1", err);
}

/* The number of spheres hangs on the smallest, of which the lines say little: told where it stands out. */
static void tell_diameters(const lw_pattern_answer *a, lw_node *result, lw_error *err)
{
    double mean = a->value[LW_ANSWER_DIAMETER], dispersion = a->value[LW_ANSWER_DISPERSION];
    double u_mean = sqrt(a->covariance[LW_ANSWER_DIAMETER][LW_ANSWER_DIAMETER]);
    double u_dispersion = sqrt(a->covariance[LW_ANSWER_DISPERSION][LW_ANSWER_DISPERSION]);
    if (mean > 2 * u_mean)
        lw_add_quantity(result, "diameter_mean", lw_quantity_of(mean, u_mean, "nm"), DIAMETER, err);
    else
        lw_add_text(result, "diameter_mean_not_determined",
                    "the smallest spheres, which rule it, do not stand out", err);
    if (a->histogram.n == 0 || dispersion > 2 * u_dispersion)
        lw_add_quantity(result, "diameter_dispersion", lw_quantity_of(dispersion, u_dispersion, ""),
                        DISPERSION, err);
    else
        lw_add_text(result, "diameter_dispersion_not_determined",
                    "the smallest spheres, which rule it, do not stand out", err);
}

static lw_quantity size_of(const lw_pattern_answer *a, int which, double limit)
{
    return a->size_unresolved
               ? lw_lower_limit(limit, 0.95, "nm")
               : lw_quantity_of(a->value[which], sqrt(fmax(a->covariance[which][which], 0)), "nm");
}

lw_status lw_whole_pattern_tell(const lw_pattern_answer *a, lw_arena *arena, lw_node *result, lw_error *err)
{
    lw_add_quantity(result, "size_volume", size_of(a, LW_ANSWER_SIZE_VOLUME, a->size_volume_limit),
                    SIZE_VOLUME, err);
    lw_add_quantity(result, "size_area", size_of(a, LW_ANSWER_SIZE_AREA, a->size_area_limit), SIZE_AREA, err);
    if (!a->size_unresolved)
        tell_diameters(a, result, err);
    tell_strain(a, result, err);
    lw_add_text(result, "strain_form", a->form[a->best].name, err);
    if (a->form[a->best].varying)
        lw_add_quantity(result, "strain_variation",
                        lw_quantity_of(a->form[a->best].shape[LW_PATTERN_VARIATION], a->u_variation, ""),
                        "Variance of the mean square strain from crystal to crystal over its squared mean.",
                        err);
    if (a->anisotropic)
        tell_anisotropy(a, result, err);
    lw_add_text(result, "size_form", a->histogram.n > 0 ? "histogram" : "lognormal", err);
    tell_forms(a, result, err);
    tell_covariance(a, result, err);
    lw_node *statistics = lw_add_group(result, "statistics", err);
    lw_add_number(statistics, "points", (double)a->n_points, err);
    lw_add_number(statistics, "chi2", a->form[a->best].chi2, err);
    lw_add_number(statistics, "goodness", a->goodness, err);
    lw_add_number(statistics, "misfit_factor", a->misfit, err);
    draw(a, arena, result, err);
    if (a->histogram.n > 0)
        tell_distribution(a, arena, result, err);
    remark(a, lw_add_list(result, "remarks", err), err);
    return err->status;
}
