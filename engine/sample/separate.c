/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every method that applies, side by side, with what they agree on and what to mind. */
#include "sample/agreement.h"
#include "sample/method.h"
#include "sample/notes.h"
#include "sample/scherrer.h"
#include "sample/shared.h"

#include <stdio.h>
#include <string.h>

static const char LATTICE[] = "lattice";

static void tell_lines(const lw_profiles *profiles, lw_node *results, lw_error *err)
{
    lw_node *list = lw_add_list(results, "lines", err);
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_profile *profile = &profiles->profile[i];
        const lw_line *line = profile->line;
        const lw_reflection *r = &line->reflection;
        char text[24];
        lw_node *node = lw_add_group(list, NULL, err);
        lw_add_text(node, "hkl", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        lw_add_quantity(node, "two_theta", line->two_theta,
                        "Position of the line's top at the reference wavelength, aberrations included.", err);
        lw_add_quantity(node, "fwhm", line->fwhm,
                        "Full width at half maximum at one wavelength, instrument included, spectrum not.",
                        err);
        lw_add_quantity(
            node, "breadth_observed", line->breadth,
            "Integral breadth (area over height) at one wavelength, instrument included, spectrum not.", err);
        lw_add_quantity(node, "breadth_instrument",
                        lw_quantity_of(line->instrument_breadth_deg, line->u_instrument_breadth_deg, "deg"),
                        "Integral breadth of the instrument's profile at this angle, from the calibration.",
                        err);
        lw_add_quantity(node, "breadth_sample", profile->breadth_deg,
                        "Integral breadth of the sample's own profile, the instrument taken out.", err);
        lw_add_quantity(node, "size_scherrer", lw_scherrer_size(profile, 1),
                        "Volume-weighted column length if the whole breadth were size (Scherrer, K = 1).",
                        err);
        lw_add_number(node, "overlap", line->overlap, err);
        lw_add_text(node, "remark", line->remark, err);
    }
}

/* A method that could not answer says why in place of numbers. Failures that are not the data's end the work.
 */
static lw_status run_or_say(lw_engine *engine, const lw_method *method, const lw_profiles *profiles,
                            lw_node *group, lw_error *err)
{
    lw_error each = LW_ERROR_NONE;
    lw_node *node = lw_add_group(group, method->name, err);
    if (node == NULL)
        return err->status;
    lw_status status = lw_method_run_sharing(engine, method, profiles, NULL, node, &each);
    if (status == LW_OK)
        return LW_OK;
    if (status != LW_NOT_SUPPORTED && status != LW_NO_CONVERGENCE && status != LW_OUT_OF_RANGE) {
        *err = each;
        return status;
    }
    node->first = node->last = NULL; /* nothing half told */
    node->n = 0;
    lw_add_text(node, "not_applied", each.message, err);
    return err->status;
}

static bool wanted(const lw_method *method, const char *const *names, size_t n_names)
{
    if (n_names == 0)
        return true;
    for (size_t i = 0; i < n_names; i++)
        if (strcmp(names[i], "all") == 0 || strcmp(names[i], method->name) == 0)
            return true;
    return false;
}

static lw_status check_names(const char *const *names, size_t n_names, lw_error *err)
{
    const char *words[32] = {"all"};
    size_t n = 1;
    for (size_t i = 0; lw_method_list[i] != NULL && n + 1 < sizeof words / sizeof *words; i++)
        words[n++] = lw_method_list[i]->name;
    for (size_t i = 0; i < n_names; i++) {
        if (strcmp(names[i], "all") == 0 || lw_method_named(names[i]) != NULL)
            continue;
        char valid[256] = "";
        size_t used = 0;
        for (size_t j = 0; j < n && used < sizeof valid; j++)
            used += (size_t)snprintf(valid + used, sizeof valid - used, "%s%s", j > 0 ? ", " : "", words[j]);
        const char *near = lw_nearest(words, names[i]);
        char remedy[320];
        snprintf(remedy, sizeof remedy, "methods are %s%s%s%s", valid, near != NULL ? "; did you mean " : "",
                 near != NULL ? near : "", near != NULL ? "?" : "");
        return lw_fail(err, LW_BAD_ARGUMENT, remedy, "there is no method \"%s\"", names[i]);
    }
    return LW_OK;
}

lw_status lw_run_methods(lw_engine *engine, const lw_profiles *profiles, const char *const *names,
                         size_t n_names, lw_node *results, lw_error *err)
{
    lw_status status = check_names(names, n_names, err);
    if (status != LW_OK)
        return status;
    tell_lines(profiles, results, err);
    lw_node *methods = lw_add_group(results, "methods", err);
    size_t total = 0;
    while (lw_method_list[total] != NULL)
        total++;
    for (size_t i = 0; i < total && err->status == LW_OK; i++) {
        const lw_method *method = lw_method_list[i];
        lw_engine_progress(engine, method->title, (double)i / (double)total);
        if (strcmp(method->name, LATTICE) != 0 && wanted(method, names, n_names))
            run_or_say(engine, method, profiles, methods, err);
    }
    if (err->status == LW_OK) /* the cell is told whatever methods were chosen: it costs nothing */
        run_or_say(engine, lw_method_named(LATTICE), profiles, results, err);
    return err->status;
}

lw_status lw_separate(lw_engine *engine, const lw_profiles *profiles, const char *const *names,
                      size_t n_names, lw_node *results, lw_error *err)
{
    lw_error own = LW_ERROR_NONE;
    if (err == NULL)
        err = &own;
    lw_status status = lw_run_methods(engine, profiles, names, n_names, results, err);
    if (status != LW_OK)
        return status;
    const lw_node *methods = lw_node_get(results, "methods");
    lw_agreement(profiles, methods, results, err);
    for (lw_node *method = methods->first; method != NULL; method = method->next)
        lw_shared_forget(method);
    lw_notes(profiles, methods, results, err);
    lw_engine_progress(engine, "size and strain", 1);
    return err->status;
}
