/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Running chunks: one protected call with one message handler, for recipes and the prompt. */
#ifndef LW_APP_RUN_H
#define LW_APP_RUN_H

#include "app/progress.h"

#include <lua.h>

#include <stdbool.h>

typedef enum lwa_exit {
    LWA_DONE = 0,
    LWA_FAILED = 1,
    LWA_USAGE = 2,
    LWA_VERDICT = 3,
    LWA_EXIT_INTERRUPTED = 130
} lwa_exit;

/* Calls the function below its n arguments; leaves its results, or writes the error with the lines that
 * led to it to standard error. */
lwa_exit lwa_call(lua_State *L, int n_arguments, int n_results, lwa_progress *progress);

/* Loads text and pushes the function, or writes the error. `name` as Lua's chunk name. */
bool lwa_load(lua_State *L, const char *text, size_t size, const char *name);

/* Writes the error on the top of the stack and pops it. */
void lwa_tell_error(lua_State *L, lwa_progress *progress);

#endif
