/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The inputs of a recipe: kinds, and how a name=value argument becomes a value. */
#ifndef LW_BIND_INPUTS_H
#define LW_BIND_INPUTS_H

#include "bind/bind.h"

/* User values of the job. */
enum { LWB_JOB_VALUES = 1, LWB_JOB_DECLARED, LWB_JOB_NAMES, LWB_JOB_TITLE, LWB_JOB_FILES };
#define LWB_JOB_KEY "linewright.job" /* of the running job in the registry */
/* Of the arguments of the recipe in the registry, as the host set them: a script can change the global
 * `arg`, and must not be able to choose `out` by that. */
#define LWB_ARGUMENTS_KEY "linewright arguments"

/* Checks the declaration (table at index) of the input `name`: its kind and its default. */
void lwb_check_kind(lua_State *L, int index, const char *name);

/* Reads the arguments. Stack indices: declarations by name, names in order, arguments as a list, table of
 * values to fill, list of {input, file, sha256} to fill. Raises for what is missing, unknown, given twice
 * or of the wrong kind. */
void lwb_read_inputs(lua_State *L, int declared, int names, int arguments, int values, int files);

/* Whether the file is an input of the running job, so that its bytes are known by their hash. */
bool lwb_is_input(lua_State *L, const char *path);

/* Raises if the file is an input of the running job whose bytes were others when the job began: a record would
 * name bytes that were not read. `hash` is the SHA-256 of the bytes that were read now. */
void lwb_check_unchanged(lua_State *L, const char *path, const char *hash, const char *verb);

#endif
