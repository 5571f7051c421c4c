/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/method.h"
#include "sample/shared.h"

#include <stdalign.h>
#include <stdio.h>
#include <string.h>

extern const lw_method lw_method_scherrer, lw_method_williamson_hall, lw_method_halder_wagner,
    lw_method_single_line_voigt, lw_method_double_voigt, lw_method_warren_averbach, lw_method_whole_pattern, lw_method_variance,
    lw_method_lattice;

const lw_method *const lw_method_list[] = {&lw_method_scherrer,      &lw_method_williamson_hall,
                                           &lw_method_halder_wagner, &lw_method_single_line_voigt, &lw_method_double_voigt,
                                           &lw_method_warren_averbach, &lw_method_whole_pattern,
                                           &lw_method_variance,
                                           &lw_method_lattice, NULL};

const lw_method *lw_method_named(const char *name)
{
    for (size_t i = 0; lw_method_list[i] != NULL; i++)
        if (strcmp(lw_method_list[i]->name, name) == 0)
            return lw_method_list[i];
    return NULL;
}

lw_status lw_method_run(lw_engine *engine, const lw_method *method, const lw_profiles *profiles,
                        const void *options, lw_node *result, lw_error *err)
{
    lw_status status = lw_method_run_sharing(engine, method, profiles, options, result, err);
    if (status == LW_OK)
        lw_shared_forget(result);
    return status;
}

lw_status lw_method_run_sharing(lw_engine *engine, const lw_method *method, const lw_profiles *profiles,
                                const void *options, lw_node *result, lw_error *err)
{
    lw_error own = LW_ERROR_NONE;
    if (err == NULL)
        err = &own;
    char reason[240];
    alignas(max_align_t) char standard[LW_METHOD_OPTIONS_MOST] = {0};
    if (method->options_size > sizeof standard)
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "the options of %s are too large", method->name);
    if (options == NULL) {
        method->defaults(standard);
        options = standard;
    }
    const char *why = method->lacks(profiles, reason, sizeof reason);
    if (why != NULL)
        return lw_fail(err, LW_NOT_SUPPORTED, NULL, "%s: %s", method->title, why);
    lw_status status = lw_engine_poll(engine, err);
    if (status == LW_OK) {
        lw_arena arena;
        lw_arena_begin(&arena, engine);
        status = method->run(&arena, profiles, options, result, err);
        lw_arena_end(&arena);
    }
    if (status != LW_OK)
        return status;
    lw_add_text(result, "title", method->title, err);
    lw_add_text(result, "assumes", method->assumes, err);
    lw_add_text(result, "source", method->source, err);
    return err->status;
}
