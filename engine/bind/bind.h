/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the Lua layer share. A noun is one file that ends in one constant lwb_noun; the
 * module loops over the list of them. A method is four steps: self, arguments, one engine call, push.
 *
 * Nothing may leak when Lua raises (it jumps): a userdata is made closed first, then filled by the
 * engine call, and its collector frees what is there. Scratch lives in an arena userdata or in a
 * Lua value, never in bare memory held over a Lua call. */
#ifndef LW_BIND_BIND_H
#define LW_BIND_BIND_H

#include "base/options.h"
#include "base/quantity.h"
#include "base/tree.h"
#include "bind/home.h"

#include <lauxlib.h>
#include <lua.h>

/* A noun of the scripts. Its metatable is registered as "linewright.<name>". */
typedef struct lwb_noun {
    const char *name;
    const luaL_Reg *functions;   /* of the module that make it; NULL = none */
    const luaL_Reg *methods;     /* NULL = none */
    const luaL_Reg *metamethods; /* may replace __index; NULL = none */
    lua_CFunction gc;            /* frees, nothing else does: views may point inside; NULL = nothing to free */
    const char *const *fields;   /* names that `field` knows, NULL-terminated; NULL = none */
    bool (*field)(lua_State *L, const char *key); /* self at index 1: pushes the field, or returns false */
} lwb_noun;

extern const lwb_noun *const lwb_noun_list[]; /* NULL-terminated */

/* The userdata of nouns that the engine allocates. */
typedef struct lwb_box {
    void *object; /* NULL until the engine call has filled it, and after it was freed */
} lwb_box;

/* A new closed box with n user values, its metatable set; pushed. */
lwb_box *lwb_new_box(lua_State *L, const lwb_noun *noun, int n_values);
/* The object of a box at an index, raising if it is something else. `verb` names the caller. */
void *lwb_object(lua_State *L, int index, const lwb_noun *noun, const char *verb);
/* The userdata at an index if it is that noun, else NULL. */
void *lwb_test(lua_State *L, int index, const lwb_noun *noun);
/* The userdata at an index, raising if it is something else. */
void *lwb_self(lua_State *L, int index, const lwb_noun *noun, const char *verb);
/* Makes a userdata of a noun of `size` bytes with n user values; pushed, zeroed, metatable set. */
void *lwb_new(lua_State *L, const lwb_noun *noun, size_t size, int n_values);
/* "scan", "number", "nothing": what a value is, for messages. */
const char *lwb_kind(lua_State *L, int index);

/* Raising. The error is an object with fields kind, message, where, hint; tostring() gives
 * "recipe.lua:12: message; hint". Its place is the nearest Lua line that called. Never returns. */
int lwb_raise(lua_State *L, const lw_error *err);
int lwb_refuse(lua_State *L, const char *hint, const char *format, ...); /* kind "bad argument" */
/* Pushes an error object without raising it, with the place of the caller. */
void lwb_push_error(lua_State *L, const char *kind, const char *message, const char *hint);
/* Raises unless status is LW_OK. */
void lwb_check(lua_State *L, lw_status status, const lw_error *err);

/* Arguments. `what` names the argument for the message. */
double lwb_number(lua_State *L, int index, const char *verb, const char *what);
const char *lwb_text(lua_State *L, int index, const char *verb, const char *what);
void lwb_want_table(lua_State *L, int index, const char *verb, const char *what);

/* Reads an options table (nil or none = nothing to read) through a verb's option table into `target`,
 * which holds the defaults. Keys in `own` (NULL-terminated, or NULL) are left to the caller. A noun
 * option takes the noun or, for radiation, material and standard, its name; what is made so stays on
 * the stack (the stack may grow by one a noun). */
void lwb_options(lua_State *L, int index, const char *verb, const lw_option *table, const char *const *own,
                 void *target);
/* Raises for a key that is neither in the NULL-terminated list, with the nearest spelling. */
void lwb_only_keys(lua_State *L, int index, const char *verb, const char *const *keys);

/* Fields of a Lua table at index (raw): a number, text or flag with a default, raising on another type. */
double lwb_field_number(lua_State *L, int index, const char *key, const char *verb, double otherwise);
const char *lwb_field_text(lua_State *L, int index, const char *key, const char *verb, const char *otherwise);
bool lwb_field_flag(lua_State *L, int index, const char *key, const char *verb, bool otherwise);

/* Values. */
void lwb_push_quantity(lua_State *L, lw_quantity quantity);
const lw_quantity *lwb_test_quantity(lua_State *L, int index); /* NULL if it is none */
/* A number as Lua shows it best: an integer where it is whole and small enough. */
void lwb_push_number(lua_State *L, double number);
/* A view of n doubles that live in the userdata at `owner` (kept alive). */
void lwb_push_vector(lua_State *L, const double *x, size_t n, int owner);
/* A vector of its own; the caller fills the returned array at once. */
double *lwb_new_vector(lua_State *L, size_t n);
/* A vector, or a Lua list of numbers or quantities (values taken), as a vector left on the stack. */
const double *lwb_to_vector(lua_State *L, int index, const char *verb, const char *what, size_t *n);

/* Result trees. */
typedef struct lwb_tree {
    const lw_node *node; /* what it shows */
    lw_node *root;       /* of its own arena; NULL for a view into somebody else's */
    lw_arena arena;
} lwb_tree;
/* A tree of its own, empty, pushed; fill ->root. User value 1 is free for a parent. */
lwb_tree *lwb_new_tree(lua_State *L);
/* A view of a node that the userdata at `owner` keeps alive; pushed. */
void lwb_push_node(lua_State *L, const lw_node *node, int owner);
/* Pushes what a node is for a script: quantity, number, text, flag, vector, or a view of a group or list. */
void lwb_push_value(lua_State *L, const lw_node *node, int owner);
/* Deep Lua table of a node; pushed. `owner` as above. */
void lwb_push_table(lua_State *L, const lw_node *node, int owner);
/* Pushes the node as aligned text. */
void lwb_push_shown(lua_State *L, const lw_node *node);
/* Pushes the child of a name, or raises with the nearest spelling; `noun` words the message. */
void lwb_push_child(lua_State *L, const lw_node *group, const char *name, int owner, const char *noun);
/* Adds a Lua value (number, text, flag, quantity, vector, tree, table) to a tree. */
void lwb_add_value(lua_State *L, lw_node *parent, const char *name, int index);

/* Scratch that is freed whatever happens: an arena in a userdata; pushed. */
lw_arena *lwb_scratch(lua_State *L);

/* Gathers the raised error's text: "unknown field 'x' of a scan" with the list of names. */
int lwb_unknown_field(lua_State *L, const char *noun, const char *key, const char *const *names);

/* Units of products: text of a*b (sign 1) or a/b (sign -1) into out[size]; false if it is too long. */
bool lwb_unit_product(const char *a, const char *b, int sign, char *out, size_t size);
/* Unit to a power; false if an exponent would not be whole. */
bool lwb_unit_power(const char *a, double power, char *out, size_t size);

extern const lwb_noun lwb_quantity_noun, lwb_vector_noun, lwb_tree_noun, lwb_radiation_noun, lwb_material_noun,
    lwb_standard_noun, lwb_reflections_noun, lwb_scan_noun, lwb_lines_noun, lwb_calibration_noun, lwb_profiles_noun,
    lwb_figure_noun, lwb_report_noun, lwb_recipe_noun, lwb_help_noun;

#endif
