/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/uncertainty.h"

#include "sample/budget.h"
#include "sample/collect.h"
#include "sample/realisation.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char *const kinds[] = {"analytic", "monte_carlo", "bootstrap", NULL};
static const char *const source_names[] = {"counting", "calibration", "wavelength", NULL};
static const char SLOW[] = "whole_pattern";

#define AT(field) offsetof(lw_separate_options, field)
const lw_option lw_separate_option_table[] = {
    {"methods", LW_OPTION_LIST, "", "all", 0, 0, NULL, AT(methods),
     "names of methods, or all for every one that applies"},
    {"uncertainty", LW_OPTION_CHOICE, "", "analytic", 0, 0, kinds, AT(uncertainty),
     "monte_carlo: everything again for drawn counts and calibrations; bootstrap: for blocks of the residuals instead "
     "of counts, where the shape misses the data"},
    {"realisations", LW_OPTION_COUNT, "", "200", 2, 1000000, NULL, AT(realisations),
     "of Monte Carlo or bootstrap; n of them give every u to 1/sqrt(2 (n - 1))"},
    {"seed", LW_OPTION_COUNT, "", "1", 0, 2147483647, NULL, AT(seed), "of the realisations"},
    {"sources", LW_OPTION_LIST, "", "all", 0, 0, NULL, AT(sources),
     "what the realisations draw: counting, calibration, wavelength (where the calibration refined it)"},
    {"budget", LW_OPTION_FLAG, "", "true", 0, 0, NULL, AT(budget),
     "tell of which parts the uncertainties consist"},
    LW_OPTIONS_END};

lw_separate_options lw_separate_defaults(void)
{
    return (lw_separate_options){.realisations = 200, .seed = 1, .budget = true};
}

static bool names_all(const lw_option_list *list)
{
    for (size_t i = 0; i < list->n; i++)
        if (strcmp(list->item[i], "all") == 0)
            return true;
    return list->n == 0;
}

static lw_status choose_sources(const lw_option_list *list, lw__draws *draws, lw_error *err)
{
    bool *which[] = {&draws->counting, &draws->calibration, &draws->wavelength};
    if (names_all(list))
        return LW_OK;
    draws->counting = draws->calibration = draws->wavelength = false;
    for (size_t i = 0; i < list->n; i++) {
        size_t k = 0;
        while (source_names[k] != NULL && strcmp(source_names[k], list->item[i]) != 0)
            k++;
        if (source_names[k] == NULL)
            return lw_fail(err, LW_BAD_ARGUMENT, "choose from: counting, calibration, wavelength",
                           "separate: nothing called '%s' can be drawn", list->item[i]);
        *which[k] = true;
    }
    return LW_OK;
}

/* The methods of the realisations: those named, else all that do not read the counts anew for seconds. */
static size_t choose_methods(const lw_option_list *asked, const char **names)
{
    size_t n = 0;
    if (!names_all(asked)) {
        memcpy(names, asked->item, asked->n * sizeof *names);
        return asked->n;
    }
    for (size_t i = 0; lw_method_list[i] != NULL && n < LW_OPTION_LIST_MOST; i++)
        if (strcmp(lw_method_list[i]->name, SLOW) != 0)
            names[n++] = lw_method_list[i]->name;
    return n;
}

typedef struct run {
    lw_engine *engine;
    const lw__draws *draws;
    const char *names[LW_OPTION_LIST_MOST];
    size_t n_names;
    lw__realisation one;
    lw_deconvolve_options deconvolve;
} run;

/* Fit, deconvolution and methods of the realisation at hand, into the tree. */
static lw_status once(run *r, lw_node *results, lw_error *err)
{
    const lw_profiles *first = r->draws->profiles;
    lw_lines *lines = NULL;
    lw_profiles *profiles = NULL;
    lw_status status = lw_refit_lines(r->engine, first->lines, &r->one.scan, &r->one.instrument,
                                      r->one.has_background ? &r->one.background : NULL, &lines, err);
    if (status == LW_OK)
        status = lw_deconvolve(r->engine, lines, r->one.has_calibration ? &r->one.calibration : NULL, &r->deconvolve,
                               &profiles, err);
    if (status == LW_OK) {
        profiles->values_only = true;
        status = lw_run_methods(r->engine, profiles, r->names, r->n_names, results, err);
    }
    lw_profiles_free(profiles);
    lw_lines_free(lines);
    return status;
}

static bool ends_work(lw_status status)
{
    return status == LW_OUT_OF_MEMORY || status == LW_CANCELLED || status == LW_BAD_ARGUMENT;
}

/* All realisations; *failed of them gave nothing, the first of these because of *why. */
static lw_status repeat(run *r, long realisations, lw__collection *collection, size_t *failed, lw_error *why,
                        lw_error *err)
{
    lw_status status = LW_OK;
    void (*listener)(void *, const char *, double) = r->engine->progress;
    const char *what = r->draws->bootstrap ? "bootstrap" : "Monte Carlo";
    for (long i = 0; i < realisations && status == LW_OK; i++) {
        lw_error each = LW_ERROR_NONE;
        lw_arena arena;
        lw_arena_begin(&arena, r->engine);
        lw__realisation_draw(r->draws, (uint64_t)i, &r->one);
        lw_node *tree = lw_tree_new(&arena, &each);
        r->engine->progress = NULL; /* one bar for all, not one a realisation */
        lw_status done = tree != NULL ? once(r, tree, &each) : LW_OUT_OF_MEMORY;
        r->engine->progress = listener;
        if (ends_work(done)) {
            *err = each;
            status = done;
        } else {
            if (done != LW_OK && (*failed)++ == 0)
                *why = each;
            lw__collect(collection, done == LW_OK ? tree : NULL);
            lw_engine_progress(r->engine, what, (double)(i + 1) / (double)realisations);
            status = lw_engine_poll(r->engine, err);
        }
        lw_arena_end(&arena);
    }
    if (status == LW_OK && (size_t)realisations - *failed < 2)
        return lw_fail(err, LW_NO_CONVERGENCE, "measure longer, or use uncertainty = \"analytic\"",
                       "%zu of %ld realisations failed; the first: %s", *failed, realisations, why->message);
    return status;
}

/* What the analytic budget has for the sources that were drawn; NAN if it does not tell. */
static double expected_u(const lw__draws *draws, const lw_node *results, const char *path)
{
    const char *sources[6] = {NULL};
    size_t n = 0;
    if (draws->counting) {
        sources[n++] = "counting";
        sources[n++] = "background";
    }
    if (draws->counting && draws->bootstrap)
        sources[n++] = "misfit";
    if (draws->calibration)
        sources[n++] = "calibration";
    if (draws->wavelength)
        sources[n++] = "wavelength";
    return lw_budget_u(results, path, sources);
}

static void tell_row(lw_node *list, const lw__collected *entry, const lw__summary *s, double expected, lw_error *err)
{
    lw_quantity analytic = entry->node->quantity;
    const char *unit = analytic.unit != NULL ? analytic.unit : "";
    lw_node *row = lw_add_group(list, NULL, err);
    lw_add_text(row, "quantity", entry->path, err);
    lw_add_quantity(row, "analytic", analytic, entry->node->definition, err);
    if (s->values >= 2) {
        lw_add_quantity(row, "drawn", lw_quantity_of(s->mean, s->u, unit),
                        "Mean of the realisations, and their standard deviation as u.", err);
        if (isfinite(s->low) && isfinite(s->u_low))
            lw_add_quantity(row, "low", lw_quantity_of(s->low, s->u_low, unit),
                            "2.5 % of the realisations lie below it; u: for want of more of them.", err);
        if (isfinite(s->high) && isfinite(s->u_high))
            lw_add_quantity(row, "high", lw_quantity_of(s->high, s->u_high, unit),
                            "2.5 % of the realisations lie above it; u: for want of more of them.", err);
        if (analytic.kind == LW_VALUE && analytic.u > 0)
            lw_add_number(row, "ratio", s->u / analytic.u, err);
        if (expected > 0)
            lw_add_number(row, "ratio_of_parts", s->u / expected, err);
    }
    lw_add_number(row, "values", (double)s->values, err);
    lw_add_number(row, "limits", (double)s->limits, err);
    lw_add_number(row, "missing", (double)s->missing, err);
}

static void tell_how(const run *r, const lw_separate_options *options, const lw__collection *collection, size_t failed,
                     const lw_error *why, lw_node *group, lw_error *err)
{
    const lw__draws *draws = r->draws;
    lw_add_text(group, "how", kinds[options->uncertainty], err);
    lw_add_number(group, "realisations", (double)collection->taken, err);
    lw_add_number(group, "seed", (double)options->seed, err);
    double good = (double)(collection->taken - failed);
    lw_add_number(group, "relative_accuracy", 1 / sqrt(2 * (good - 1)), err);
    lw_add_number(group, "failed", (double)failed, err);
    if (failed > 0)
        lw_add_text(group, "failed_because", why->message, err);
    lw_node *sources = lw_add_list(group, "sources", err);
    const lw_scan *scan = draws->profiles->lines->scan;
    if (draws->counting)
        lw_add_text(sources, NULL,
                    draws->bootstrap                     ? "counting and misfit: blocks of the residuals over their u"
                    : scan->noise == LW_NOISE_COUNTS     ? "counting: Poisson"
                    : scan->noise == LW_NOISE_SIGMA      ? "noise: normal with the given sigma"
                                                         : "noise: normal, scaled, next points correlated",
                    err);
    if (draws->counting && !draws->bootstrap)
        lw_add_text(group, "drawn_about",
                    draws->by_physics ? "the curve of physical shapes (lognormal spheres x strain) fitted to the lines, which "
                                        "describes the counts better than Voigts do"
                                      : "the curve of the lines' fit",
                    err);
    if (draws->calibration)
        lw_add_text(sources, NULL, "calibration: widths and aberrations, the same for all lines of a realisation", err);
    bool wavelength = false;
    for (size_t i = 0; r->one.has_calibration && i < r->one.calibration.aberrations.n; i++)
        wavelength |= strcmp(r->one.calibration.aberrations.kind[i]->name, "wavelength") == 0;
    if (draws->wavelength && wavelength)
        lw_add_text(sources, NULL, "wavelength: as the calibration refined it", err);
    if (draws->profiles->options->standard != NULL)
        lw_add_text(sources, NULL, "not drawn: the standard whose lines were taken for the instrument's", err);
    if (draws->bootstrap) {
        static const char *const places[] = {"under_lines", "between_lines"};
        lw_node *blocks = lw_add_group(group, "blocks", err);
        for (int i = 0; i < LW__PLACES; i++) {
            if (draws->n_starts[i] == 0)
                continue;
            lw_node *place = lw_add_group(blocks, places[i], err);
            lw_add_number(place, "length", (double)draws->block[i], err);
            lw_add_number(place, "correlation", draws->correlation[i], err);
        }
        lw_add_text(blocks, "rule",
                    "length (6 r^2/(1 - r^2)^2 n)^(1/3) for correlation r of next residuals of n; residuals within 3 FWHM "
                    "of a line stay under lines",
                    err);
    }
    if (names_all(&options->methods)) {
        lw_node *left = lw_add_list(group, "methods_left_out", err);
        lw_add_text(left, NULL, SLOW, err);
    }
    lw_add_text(group, "definition",
                draws->bootstrap
                    ? "Standard deviations over repetitions in which blocks of the residuals took the place of counting "
                      "noise, so that what the shape misses counts too. A bias of the shape stays."
                    : "Standard deviations and 95 % intervals over repetitions of the whole chain with drawn counts and "
                      "calibrations. Choices of form, model and constants are not drawn: the budget has them.",
                err);
    lw_add_text(group, "source",
                draws->bootstrap ? "Kuensch (1989) Ann. Stat. 17, 1217; Efron & Tibshirani (1993) An Introduction to the "
                                   "Bootstrap, ch. 9; length of a block: Carlstein (1986) Ann. Stat. 14, 1171, Hall, "
                                   "Horowitz & Jing (1995) Biometrika 82, 561"
                                 : "JCGM 101:2008",
                err);
}

/* The realisations, their table in the group `uncertainty`. */
static lw_status draw_all(lw_engine *engine, const lw__draws *draws, const lw_separate_options *options,
                          lw_node *results, lw_arena *arena, lw_error *err)
{
    static const char *const parts[] = {"methods", "lattice", "lines", NULL};
    run r = {.engine = engine, .draws = draws, .deconvolve = *draws->profiles->options};
    if (strcmp(draws->profiles->method, "convolution") != 0) /* by the same shapes, whatever chance does to the misfit */
        r.deconvolve.completion = draws->profiles->by_physics ? 2 : 1;
    r.n_names = choose_methods(&options->methods, r.names);
    lw__collection collection;
    size_t failed = 0;
    lw_error why = LW_ERROR_NONE;
    lw_status status = lw__realisation_begin(draws, arena, &r.one, err);
    if (status == LW_OK)
        status = lw__collect_begin(results, parts, (size_t)options->realisations, arena, &collection, err);
    if (status == LW_OK)
        status = repeat(&r, options->realisations, &collection, &failed, &why, err);
    double *scratch = status == LW_OK ? lw_arena_take(arena, collection.taken, sizeof *scratch, err) : NULL;
    if (scratch == NULL)
        return status != LW_OK ? status : LW_OUT_OF_MEMORY;
    lw_node *group = lw_add_group(results, "uncertainty", err);
    tell_how(&r, options, &collection, failed, &why, group, err);
    lw_node *list = lw_add_list(group, "quantities", err);
    for (size_t i = 0; i < collection.n; i++) {
        lw__summary summary = lw__summarise(&collection, i, scratch);
        bool left_out = summary.missing == collection.taken && strncmp(collection.entry[i].path, "methods.whole", 13) == 0;
        if (!left_out)
            tell_row(list, &collection.entry[i], &summary,
                     expected_u(draws, results, collection.entry[i].path), err);
    }
    return err->status;
}

lw_status lw_separate_with(lw_engine *engine, const lw_profiles *profiles, const lw_separate_options *options,
                           lw_node *results, lw_error *err)
{
    lw_error own = LW_ERROR_NONE;
    if (err == NULL)
        err = &own;
    if (options->uncertainty != LW_UNCERTAINTY_ANALYTIC && options->realisations < 2)
        return lw_fail(err, LW_BAD_ARGUMENT, "200 give each u to 5 %",
                       "separate: %ld realisations have no scatter, 2 are the least", options->realisations);
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    lw__draws draws;
    lw_status status = LW_OK;
    bool drawn = options->uncertainty != LW_UNCERTAINTY_ANALYTIC;
    if (drawn)
        status = lw__draws_begin(profiles, options->uncertainty == LW_UNCERTAINTY_BOOTSTRAP, &arena, &draws, err);
    if (drawn && status == LW_OK) {
        draws.seed = (uint64_t)options->seed;
        status = choose_sources(&options->sources, &draws, err);
        if (status == LW_OK && draws.counting && !draws.bootstrap)
            status = lw__draws_choose_model(engine, &draws, &arena, err);
    }
    bool all = names_all(&options->methods);
    if (status == LW_OK)
        status = lw_separate(engine, profiles, options->methods.item, all ? 0 : options->methods.n, results, err);
    if (status == LW_OK && options->budget)
        status = lw_budget(engine, profiles, results, err);
    if (status == LW_OK && drawn)
        status = draw_all(engine, &draws, options, results, &arena, err);
    lw_arena_end(&arena);
    return status;
}
