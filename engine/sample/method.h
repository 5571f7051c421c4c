/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A method that separates size from strain is data: one file that ends in one constant, and one line in
 * the list. The Lua calls, help, records, tables, reports and "all that apply" read the constant. */
#ifndef LW_SAMPLE_METHOD_H
#define LW_SAMPLE_METHOD_H

#include "profile/profiles.h"

typedef struct lw_method {
    const char *name;        /* of the Lua function and the record field, for example "williamson_hall" */
    const char *title;       /* as a heading */
    const char *purpose;     /* one line */
    const char *assumes;     /* what must hold for the numbers to mean what they say, one or two sentences */
    const char *source;      /* published source */
    const lw_option *options;
    size_t options_size;     /* of its options struct, at most LW_METHOD_OPTIONS_MOST */
    void (*defaults)(void *options);
    /* NULL if the profiles can carry the method, else the reason (text in `why`) */
    const char *(*lacks)(const lw_profiles *profiles, char *why, size_t size);
    /* arena: for what the method needs while it runs; its engine is the engine */
    lw_status (*run)(lw_arena *arena, const lw_profiles *profiles, const void *options, lw_node *result, lw_error *err);
} lw_method;
#define LW_METHOD_OPTIONS_MOST 1024

extern const lw_method *const lw_method_list[]; /* NULL-terminated, in the order of reports */
const lw_method *lw_method_named(const char *name);

/* Runs one method with its defaults or given options (NULL = defaults) and adds title, assumes and source. */
lw_status lw_method_run(lw_engine *engine, const lw_method *method, const lw_profiles *profiles, const void *options,
                        lw_node *result, lw_error *err);

/* The same, and what it shares with other methods stays in the result (sample/shared.h). */
lw_status lw_method_run_sharing(lw_engine *engine, const lw_method *method, const lw_profiles *profiles, const void *options,
                                lw_node *result, lw_error *err);

/* Runs the named methods (n_names 0 = every one that applies) into the tree `results`:
 * lines (list), methods (group: one child a method, or {not_applied = reason}), lattice, agreement, notes. */
lw_status lw_separate(lw_engine *engine, const lw_profiles *profiles, const char *const *names, size_t n_names,
                      lw_node *results, lw_error *err);

/* The same without agreement and notes, for whoever runs them again and again. err may not be NULL. */
lw_status lw_run_methods(lw_engine *engine, const lw_profiles *profiles, const char *const *names, size_t n_names,
                         lw_node *results, lw_error *err);

#endif
