/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The home of the engine in a Lua state: one userdata in the registry that holds the engine and what
 * the host told it. The engine's memory comes from the state's own allocator, so a memory limit of
 * the host counts both. */
#ifndef LW_BIND_HOME_H
#define LW_BIND_HOME_H

#include "base/engine.h"

#include <lua.h>

#define LWB_PATH_MOST 4096

typedef struct lwb_home {
    lw_engine engine;
    lua_Alloc allocate;      /* of the state */
    void *allocate_user;
    lua_State *running;      /* the thread of the engine call now under way: an emergency collection runs there */
    size_t engine_bytes;     /* held by the engine */
    size_t collect_at;       /* collect garbage before a call when engine_bytes exceed this */
    void (*progress)(void *user, const char *what, double fraction); /* the engine's, while a job tells its own */
    bool interpreter;        /* the linewright program runs this state, not a stock Lua */
    bool confined;           /* scripts write only under the recipe's out folder */
    bool verdict_failed;     /* a verdict failed under strict = true: exit code 3 */
    char standards[LWB_PATH_MOST]; /* folder of standards; "" = not found */
    char recipe[LWB_PATH_MOST];    /* file of the recipe; "" at the prompt */
    char recipe_hash[65];    /* SHA-256 of the bytes that were run; "" if not known */
    char out[LWB_PATH_MOST]; /* folder under which may be written, set by lw.recipe; "" before */
    bool out_is_default;     /* the user did not choose it: it must not be a link */
    char fence[LWB_PATH_MOST]; /* out of the outermost recipe; the engine writes nowhere else if confined */
    int inner;               /* recipes that run as a step of another one now */
    int in_item;             /* a function given to job:each runs now: it may not write */
    void (*worker_begins)(void *host, unsigned workers); /* called in each process of job:each; NULL = no need */
    void *host;              /* handed to it */
} lwb_home;

/* The home of a state, made at the first call. */
lwb_home *lwb_home_of(lua_State *L);

/* The engine for a call made from L; collects garbage first where engine memory has grown much. */
lw_engine *lwb_engine(lua_State *L);

/* Entry of the module, for `require "linewright"`. */
__attribute__((visibility("default"))) int luaopen_linewright(lua_State *L);

#endif
