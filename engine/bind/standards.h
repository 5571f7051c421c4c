/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Data literals: radiation, materials and reference materials as Lua tables of constants. */
#ifndef LW_BIND_STANDARDS_H
#define LW_BIND_STANDARDS_H

#include "bind/bind.h"
#include "physics/crystal.h"

/* The folder of standards next to an executable or module file: share/linewright/standards in its
 * folder (a build) or up to three folders above (an installation). out[size] is "" if there is none. */
void lwb_find_standards(const char *file, char *out, size_t size);

/* Loads one literal: text only, in an empty environment, without string methods, with limits on steps
 * and memory. Pushes its table. */
void lwb_load_literal(lua_State *L, const char *path);

/* Finds the literal of a name, alias or path below standards/<kind>. Pushes its table. Unknown names
 * raise with the nearest spelling and the list. */
void lwb_find_literal(lua_State *L, const char *kind, const char *verb, const char *name);

/* The standard at an index, made of its name or path where a text stands there; what is there afterwards keeps it
 * alive. */
const lw_standard *lwb_standard_at(lua_State *L, int index, const char *verb);

/* Reads the parts of a material that a material and a reference have in common from the table at index. */
void lwb_read_material(lua_State *L, int index, const char *verb, lw_material *material);
/* Fields of a material for scripts: pushes the one of a key, or returns false. */
bool lwb_material_field(lua_State *L, const lw_material *material, const char *key);

/* Copies a text field of the table at index into a C field; raises if it is too long or (needed) missing. */
void lwb_copy_text(lua_State *L, int index, const char *key, const char *verb, bool needed, char *out, size_t size);

/* material:reflections and standard:reflections: self's userdata at index 1, arguments from 2. */
int lwb_reflections_of(lua_State *L, const lw_material *material, const char *verb);

extern const char *const lwb_material_fields[]; /* names lwb_material_field knows, NULL-terminated */

#endif
