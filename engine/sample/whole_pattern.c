/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Whole pattern: lognormal spheres and a form of strain fitted to the counts of all lines at once. */
#include "sample/pattern_fit.h"
#include "sample/method.h"
#include "sample/breadths.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char *const strain_names[] = {
    "auto", "none", "constant", "correlated", "gaussian_correlated", "voigt", "dislocations", NULL};
static const char *const anisotropy_names[] = {"auto", "no", "yes", NULL};

static const char *const fall_names[] = {"from_areas", "fitted", "none", NULL};

typedef struct whole_pattern_options {
    int strain, anisotropy, fall;
} whole_pattern_options;

#define AT(field) offsetof(whole_pattern_options, field)
static const lw_option options[] = {
    {"strain", LW_OPTION_CHOICE, "", "auto", 0, 0, strain_names, AT(strain),
     "form of strain against length; auto tries all and carries the choice as uncertainty"},
    {"anisotropy", LW_OPTION_CHOICE, "", "auto", 0, 0, anisotropy_names, AT(anisotropy),
     "strain of a cubic crystal depends on direction as 1 - q H; auto: if the data say so"},
    {"fall", LW_OPTION_CHOICE, "", "from_areas", 0, 0, fall_names, AT(fall),
     "how the scattering power falls with s across each line"},
    LW_OPTIONS_END};

static void defaults(void *target)
{
    *(whole_pattern_options *)target = (whole_pattern_options){0};
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    const lw_lines *lines = profiles->lines;
    if (lines->scan == NULL || lines->variance == NULL || lines->background == NULL)
        snprintf(why, size, "the counts of the scan are needed, these lines have none");
    else if (!lines->has_instrument || !lines->on_s_axis)
        snprintf(why, size, "lines fitted with an instrument on the axis of s are needed");
    else if (profiles->n < 2)
        snprintf(why, size, "two lines at different angles are needed, %zu found", profiles->n);
    else
        return NULL;
    return why;
}

static const char SIZE_VOLUME[] =
    "Volume-weighted mean column length (3/4)<D^4>/<D^3> of the lognormal spheres.";
static const char SIZE_AREA[] = "Area-weighted mean column length (2/3)<D^3>/<D^2> of the lognormal spheres.";
static const char DIAMETER[] = "Number-weighted mean diameter of the lognormal spheres.";
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
    bool constant = strcmp(a->form[a->best].strain->name, "constant") == 0;
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

static void tell_forms(const lw_pattern_answer *a, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "forms", err);
    for (size_t i = 0; i < a->n_forms; i++) {
        const lw_pattern_form *form = &a->form[i];
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "strain", form->none ? "none" : form->strain->name, err);
        lw_add_text(row, "title", form->none ? "no strain" : form->strain->title, err);
        if (!form->none)
            lw_add_text(row, "source", form->strain->source, err);
        lw_add_number(row, "chi2", form->chi2, err);
        lw_add_number(row, "parameters", (double)form->n_free, err);
        lw_add_number(row, "weight", form->weight, err);
        lw_add_number(row, "fall", form->shape[LW_PATTERN_FALL], err);
        lw_add_number(row, "iterations", (double)form->iterations, err);
        if (form->fitted) {
            lw_add_number(row, "size_volume", form->value[LW_ANSWER_SIZE_VOLUME], err);
            lw_add_number(row, "size_area", form->value[LW_ANSWER_SIZE_AREA], err);
            lw_add_number(row, "strain_rms", form->value[LW_ANSWER_STRAIN], err);
            for (int k = 0; k < form->strain->n && !form->none; k++)
                lw_add_number(row, form->strain->parameter[k], form->shape[LW_PATTERN_STRAIN + k], err);
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
    for (size_t i = 0; i < a->n_forms; i++)
        possible += a->form[i].fitted && a->form[i].weight >= 0.01 && !a->form[i].none;
    for (size_t i = 0; i < a->n_forms && possible > 1; i++) {
        if (!a->form[i].fitted || a->form[i].weight < 0.01 || a->form[i].none)
            continue;
        lw_node *each = lw_add_group(series, NULL, err);
        lw_add_text(each, "kind", "line", err);
        lw_add_text(each, "label", a->form[i].strain->title, err);
        lw_add_vector(each, "x", a->length, n, "nm", err);
        lw_add_vector(each, "y", a->form[i].value + LW_ANSWER_STRAIN_AT, n, "", err);
    }
}

static void remark(const lw_pattern_answer *a, lw_node *remarks, lw_error *err)
{
    char text[320];
    if (a->misfit > 1) {
        snprintf(text, sizeof text,
                 "the best form still misses the counts (goodness of fit %.3f, or residuals that go together): all "
                 "uncertainties were enlarged %.2f times",
                 a->goodness, a->misfit);
        lw_add_text(remarks, NULL, text, err);
    }
    if (a->goodness > 1.05)
        lw_add_text(remarks, NULL,
                    "no form tried here is what the powder is: the uncertainties hold counting, calibration and the forms, "
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
    if (a->anisotropic) {
        snprintf(text, sizeof text,
                 "strain depends on the direction: mean square strain goes as 1 - q H with q = %.3f(%.3f), H "
                 "= 0 along "
                 "h00, 1/3 along hhh; the strains given are means over all directions (H = 1/5)",
                 a->anisotropy, a->u_anisotropy);
        lw_add_text(remarks, NULL, text, err);
    }
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    const whole_pattern_options *o = given;
    lw_pattern_answer *a = lw_arena_take(arena, 1, sizeof *a, err);
    lw_pattern_request request = {.strain = o->strain == 0   ? LW_PATTERN_AUTO
                                            : o->strain == 1 ? LW_PATTERN_NO_STRAIN
                                                             : (lw_pattern_choice)(o->strain - 2),
                                  .anisotropy = o->anisotropy,
                                  .fall = o->fall};
    lw_status status =
        a == NULL ? LW_OUT_OF_MEMORY : lw_pattern_fit(arena->engine, profiles, &request, arena, a, err);
    if (status == LW_OK) {
        double u[LW_ANSWER_MOST];
        for (size_t i = 0; i < LW_ANSWER_MOST; i++)
            u[i] = sqrt(fmax(a->covariance[i][i], 0));
        bool limit = a->size_unresolved;
        lw_add_quantity(result, "size_volume",
                        limit ? lw_lower_limit(a->size_volume_limit, 0.95, "nm")
                              : lw_quantity_of(a->value[LW_ANSWER_SIZE_VOLUME], u[LW_ANSWER_SIZE_VOLUME], "nm"),
                        SIZE_VOLUME, err);
        lw_add_quantity(result, "size_area",
                        limit ? lw_lower_limit(a->size_area_limit, 0.95, "nm")
                              : lw_quantity_of(a->value[LW_ANSWER_SIZE_AREA], u[LW_ANSWER_SIZE_AREA], "nm"),
                        SIZE_AREA, err);
        if (!limit) {
            lw_add_quantity(result, "diameter_mean",
                            lw_quantity_of(a->value[LW_ANSWER_DIAMETER], u[LW_ANSWER_DIAMETER], "nm"), DIAMETER, err);

            lw_add_quantity(result, "diameter_dispersion",
                            lw_quantity_of(a->value[LW_ANSWER_DISPERSION], u[LW_ANSWER_DISPERSION], ""),
                            DISPERSION, err);
        }
        tell_strain(a, result, err);
        lw_add_text(result, "strain_form", a->form[a->best].none ? "none" : a->form[a->best].strain->name,
                    err);
        if (a->anisotropic)
            lw_add_quantity(result, "strain_anisotropy", lw_quantity_of(a->anisotropy, a->u_anisotropy, ""),
                            "q of the mean square strain of a cubic crystal, proportional to 1 - q H.", err);
        tell_forms(a, result, err);
        tell_covariance(a, result, err);
        lw_node *statistics = lw_add_group(result, "statistics", err);
        lw_add_number(statistics, "points", (double)a->n_points, err);
        lw_add_number(statistics, "chi2", a->form[a->best].chi2, err);
        lw_add_number(statistics, "goodness", a->goodness, err);
        lw_add_number(statistics, "misfit_factor", a->misfit, err);
        draw(a, arena, result, err);
        remark(a, lw_add_list(result, "remarks", err), err);
        status = err->status;
    }
    return status;
}

const lw_method lw_method_whole_pattern = {
    .name = "whole_pattern",
    .title = "Whole pattern",
    .purpose = "lognormal spheres and strain fitted to the counts of all lines at once",
    .assumes =
        "Crystals are spheres with lognormal diameters, or close to it; displacements between two points of "
        "a "
        "column are normally distributed. Strain is the same in every direction unless said otherwise.",
    .source = "Scardi & Leoni (2002) Acta Cryst. A 58, 190; Krill & Birringer (1998) Philos. Mag. A 77, 621; "
              "forms of "
              "strain weighted by evidence: Hoeting et al. (1999) Stat. Sci. 14, 382; Schwarz (1978) Ann. "
              "Stat. 6, 461",
    .options = options,
    .options_size = sizeof(whole_pattern_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
