/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Whole pattern: spheres and a form of strain fitted to the counts of all lines at once. */
#include "sample/method.h"
#include "sample/whole_pattern_tell.h"

#include <stdio.h>

static const char *const strain_names[] = {
    "auto", "none", "constant", "correlated", "gaussian_correlated", "voigt", "dislocations", "knots", NULL};
static const char *const anisotropy_names[] = {"auto", "no", "yes", NULL};

static const char *const size_names[] = {"lognormal", "histogram", NULL};
static const char *const fall_names[] = {"from_areas", "fitted", "none", NULL};

typedef struct whole_pattern_options {
    int size, strain, anisotropy, fall;
} whole_pattern_options;

#define AT(field) offsetof(whole_pattern_options, field)
static const lw_option options[] = {
    {"size", LW_OPTION_CHOICE, "", "lognormal", 0, 0, size_names, AT(size),
     "distribution of the sphere diameters: lognormal, or a smoothed histogram without a formula"},
    {"strain", LW_OPTION_CHOICE, "", "auto", 0, 0, strain_names, AT(strain),
     "form of strain against length, or knots: free; auto tries all and carries the choice as uncertainty"},
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

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result,
                     lw_error *err)
{
    const whole_pattern_options *o = given;
    lw_pattern_answer *a = lw_arena_take(arena, 1, sizeof *a, err);
    int forms = 0;
    while (lw_strain_form_list[forms] != NULL)
        forms++;
    lw_pattern_choice choice = o->strain - 2; /* the forms stand behind auto and none, knots behind them */
    if (o->strain < 2)
        choice = o->strain == 0 ? LW_PATTERN_AUTO : LW_PATTERN_NO_STRAIN;
    else if (choice == forms)
        choice = LW_PATTERN_KNOTS;
    lw_pattern_request request = {
        .strain = choice, .anisotropy = o->anisotropy, .fall = o->fall, .histogram = o->size == 1};
    lw_status status =
        a == NULL ? LW_OUT_OF_MEMORY : lw_pattern_fit(arena->engine, profiles, &request, arena, a, err);
    return status == LW_OK ? lw_whole_pattern_tell(a, arena, result, err) : status;
}

const lw_method lw_method_whole_pattern = {
    .name = "whole_pattern",
    .title = "Whole pattern",
    .purpose = "spheres and strain fitted to the counts of all lines at once",
    .assumes = "Crystals are spheres, or close to it, with lognormal diameters or those of a histogram; "
               "displacements between two "
               "points of a column are normally distributed. Strain is the same in every direction unless "
               "said otherwise.",
    .source =
        "Scardi & Leoni (2002) Acta Cryst. A 58, 190; Krill & Birringer (1998) Philos. Mag. A 77, 621; "
        "forms of "
        "strain weighted by evidence: Hoeting et al. (1999) Stat. Sci. 14, 382; Schwarz (1978) Ann. Stat. 6, "
        "461; "
        "histogram: Leoni & Scardi (2004) J. Appl. Cryst. 37, 629, smoothed as Phillips (1962) J. ACM 9, 84",
    .options = options,
    .options_size = sizeof(whole_pattern_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
