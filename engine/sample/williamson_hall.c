/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Williamson-Hall: size from the breadth at s = 0, strain from its growth with s. */
#include "physics/elasticity.h"
#include "sample/breadths.h"
#include "sample/directions.h"
#include "sample/method.h"
#include "sample/reading.h"

#include <math.h>
#include <stddef.h>
#include <stdio.h>

typedef struct williamson_hall_options {
    int form;
    int model;
} williamson_hall_options;

enum { STRAIN, STRESS, ENERGY };
static const char *const models[] = {"strain", "stress", "energy", NULL};

enum { AUTO, N_FORMS = 3 }; /* choices after "auto" are the first three forms in order */
static const char *const choices[] = {"auto", "lorentzian", "gaussian", "mixed", NULL};

static const lw_option options[] = {
    {.key = "form",
     .kind = LW_OPTION_CHOICE,
     .standard = "auto",
     .choices = choices,
     .offset = offsetof(williamson_hall_options, form),
     .help = "how size and strain breadths add; auto fits all three and leads with the lowest chi-square"},
    {.key = "model",
     .kind = LW_OPTION_CHOICE,
     .standard = "strain",
     .choices = models,
     .offset = offsetof(williamson_hall_options, model),
     .help = "what is the same in all directions: the strain, the stress (strain goes with 1/E_hkl) or the "
             "elastic "
             "energy density (with its square root); the last two need the material's stiffness"},
    LW_OPTIONS_END};

static void defaults(void *target)
{
    *(williamson_hall_options *)target = (williamson_hall_options){.form = AUTO, .model = STRAIN};
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->n >= 2)
        return NULL;
    snprintf(why, size, "two lines at different angles are needed, %zu found", profiles->n);
    return why;
}

/* Forms that the data do not exclude: chi-square above the lowest by less than 9 (3 u), both in units of the
 * lowest one's scatter. */
static bool admissible(const lw_breadth_fit *fit, const lw_breadth_fit *best)
{
    return fit->fit.chi2 - best->fit.chi2 <= 9 * best->fit.scatter * best->fit.scatter;
}

/* Half the range of the admissible forms' values over sqrt(3): standard uncertainty of a rectangular
 * distribution (JCGM 100:2008, 4.3.7). Limits have no value and do not take part. */
static double spread(const lw_breadth_fit *fits, const bool *done, size_t best, bool size)
{
    double low = INFINITY, high = -INFINITY;
    for (size_t i = 0; i < N_FORMS; i++) {
        lw_quantity q = size ? fits[i].size_volume : fits[i].strain_apparent;
        if (!done[i] || q.kind != LW_VALUE || !admissible(&fits[i], &fits[best]))
            continue;
        low = fmin(low, q.value);
        high = fmax(high, q.value);
    }
    return high > low ? 0.5 * (high - low) / sqrt(3) : 0;
}

static void widen(lw_quantity *q, double u)
{
    if (q->kind == LW_VALUE)
        q->u = hypot(q->u, u);
}

/* The form that leads: the lowest chi-square; without degrees of freedom the mixed one, which stands for what
 * theory expects of size (long tails) and strain (short ones). */
static size_t leading(const lw_breadth_fit *fits, const bool *done)
{
    size_t best = N_FORMS;
    for (size_t i = 0; i < N_FORMS; i++)
        if (done[i] && (best == N_FORMS || fits[i].fit.chi2 < fits[best].fit.chi2))
            best = i;
    if (best < N_FORMS && fits[best].fit.degrees == 0 && done[LW_FORM_MIXED])
        best = LW_FORM_MIXED;
    return best;
}

/* Factors on s that make the strain of the mean direction (mean of 1/E, or of its root, over the lines) the
 * parameter of the fit: 1/E_hkl for uniform stress, 1/sqrt(E_hkl) for uniform energy density. *mean receives
 * the mean that they are relative to. */
static lw_status scale_by_stiffness(const lw_profiles *profiles, int chosen, lw_breadths *breadths,
                                    lw_arena *arena, double *mean, lw_error *err)
{
    const lw_material *material = profiles->lines->material;
    if (material == NULL || !material->has_stiffness)
        return lw_fail(err, LW_NOT_SUPPORTED,
                       "use model = \"strain\", or give the material's elastic constants",
                       "model \"%s\" needs a material with stiffness", models[chosen]);
    double *scale = lw_arena_take(arena, breadths->n, sizeof *scale, err);
    if (scale == NULL)
        return LW_OUT_OF_MEMORY;
    *mean = 0;
    for (size_t i = 0; i < breadths->n; i++) {
        const lw_reflection *r = &breadths->profile[i]->line->reflection;
        double gpa;
        lw_status status = lw_young_modulus(material, r->h, r->k, r->l, &gpa, err);
        if (status != LW_OK)
            return status;
        scale[i] = chosen == STRESS ? 1 / gpa : 1 / sqrt(gpa);
        *mean += scale[i] / (double)breadths->n;
    }
    for (size_t i = 0; i < breadths->n; i++)
        scale[i] /= *mean;
    breadths->scale = scale;
    return LW_OK;
}

/* Stress e E, or energy density e^2 E/2, from the strain of the mean direction. */
static void tell_model(const lw_quantity *strain, int chosen, double mean, lw_node *result, lw_error *err)
{
    lw_add_text(result, "model", models[chosen], err);
    if (chosen == STRAIN)
        return;
    double factor =
        chosen == STRESS ? 1 / mean : 500 * strain->value / (mean * mean); /* 1 GPa = 1000 MJ m^-3 */
    lw_quantity q = *strain;
    q.value *= factor;
    q.u *= chosen == STRESS ? factor : 2 * factor;
    q.unit = chosen == STRESS ? "GPa" : "MJ m^-3";
    lw_add_quantity(result, chosen == STRESS ? "stress_apparent" : "energy_density", q,
                    chosen == STRESS
                        ? "Apparent stress: the apparent strain of each direction times Young's modulus "
                          "along it, taken the same in all; strain_apparent is that of the lines' mean "
                          "1/E."
                        : "Elastic energy density E e^2/2, taken the same in all directions; "
                          "strain_apparent is that of the lines' mean 1/sqrt(E).",
                    err);
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *options_given, lw_node *result,
                     lw_error *err)
{
    const williamson_hall_options *given = options_given;
    lw_breadths breadths;
    lw_status status = lw_breadths_gather(profiles, arena, &breadths, err);
    double mean = 1;
    if (status == LW_OK && given->model != STRAIN)
        status = scale_by_stiffness(profiles, given->model, &breadths, arena, &mean, err);
    if (status != LW_OK)
        return status;
    lw_breadth_fit fits[N_FORMS];
    bool done[N_FORMS] = {false};
    lw_error failed = LW_ERROR_NONE;
    for (size_t i = 0; i < N_FORMS; i++) {
        if (given->form != AUTO && given->form != (int)i + 1)
            continue;
        lw_error each = LW_ERROR_NONE;
        status = lw_breadths_fit(&breadths, (lw_form)i, arena, &fits[i], &each);
        done[i] = status == LW_OK;
        if (status == LW_OUT_OF_MEMORY || status == LW_CANCELLED || status == LW_BAD_ARGUMENT) {
            *err = each;
            return status;
        }
        if (!done[i])
            failed = each;
    }
    size_t best = leading(fits, done);
    if (best == N_FORMS) {
        *err = failed;
        return err->status;
    }
    lw_breadth_fit lead = fits[best];
    double size_spread = 0, strain_spread = 0;
    if (given->form == AUTO) {
        size_spread = spread(fits, done, best, true);
        strain_spread = spread(fits, done, best, false);
        widen(&lead.size_volume, size_spread);
        widen(&lead.strain_apparent, strain_spread);
    }
    lw_readings readings;
    status = lw_breadths_read(&breadths, arena, &readings, err);
    if (status != LW_OK)
        return status;
    lw_readings_widen_fit(&readings, (double[2]){size_spread, strain_spread}, &lead, result, err);
    status = lw_breadths_share(profiles, &breadths, &lead, arena, result, err);
    if (status != LW_OK)
        return status;
    lw_breadths_tell(&lead, result, err);
    lw_add_text(result, "form", lw_form_name[best], err);
    tell_model(&lead.strain_apparent, given->model, mean, result, err);
    if (given->form == AUTO) {
        lw_node *group = lw_add_group(result, "spread_between_forms", err);
        lw_add_quantity(
            group, "size_volume", lw_quantity_of(size_spread, 0, "nm"),
            "Part of the size's standard uncertainty: half the range of the forms that the data do not "
            "exclude, over sqrt(3).",
            err);
        lw_add_quantity(
            group, "strain_apparent", lw_quantity_of(strain_spread, 0, ""),
            "Part of the strain's standard uncertainty: half the range of the forms that the data do "
            "not exclude, over sqrt(3).",
            err);
        lw_node *forms = lw_add_group(result, "forms", err);
        for (size_t i = 0; i < N_FORMS; i++) {
            if (!done[i])
                continue;
            lw_node *form = lw_add_group(forms, lw_form_name[i], err);
            lw_breadths_tell(&fits[i], form, err);
            lw_add_flag(form, "excluded", !admissible(&fits[i], &fits[best]), err);
        }
    }
    lw_breadths_draw(&breadths, &fits[best], result, err);
    status = lw_directions_tell(&breadths, &fits[best], arena, result, err);
    if (status != LW_OK)
        return status;
    lw_node *remarks = lw_add_list(result, "remarks", err);
    lw_breadths_remark(&breadths, &fits[best], remarks, err);
    lw_readings_remark(result, remarks, err);
    if (given->form == AUTO && fits[best].fit.degrees == 0)
        lw_add_text(
            remarks, NULL,
            "two lines cannot tell the forms apart; the mixed one leads, and the range of all is in the "
            "uncertainty",
            err);
    return err->status;
}

const lw_method lw_method_williamson_hall = {
    .name = "williamson_hall",
    .title = "Williamson-Hall",
    .purpose = "size from the breadth at s = 0, strain from its growth with s",
    .assumes =
        "Size broadens every line alike and strain in proportion to s, whatever the direction. Breadths of "
        "a powder do not follow any of the rules of addition exactly, so errors of 10 % in size, and "
        "strains of half to one and a half times the true one, are usual.",
    .source =
        "Williamson & Hall (1953) Acta Metall. 1, 22; Stokes & Wilson (1944) Proc. Phys. Soc. 56, 174; Voigt "
        "breadth: Langford (1978) J. Appl. Cryst. 11, 10; Young's modulus: Nye (1957) Physical Properties of "
        "Crystals",
    .options = options,
    .options_size = sizeof(williamson_hall_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
