/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "bind/methods.h"

#include "bind/roads.h"
#include "sample/method.h"
#include "sample/uncertainty.h"

#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

/* lw.<method>(profiles, options). Upvalue 1: the method. */
static int run_method(lua_State *L)
{
    const lw_method *method = lua_touserdata(L, lua_upvalueindex(1));
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 2);
    luaL_checkstack(L, 40, NULL);
    const lw_profiles *profiles = lwb_object(L, 1, &lwb_profiles_noun, method->name);
    _Alignas(max_align_t) unsigned char options[LW_METHOD_OPTIONS_MOST] = {0};
    if (method->defaults != NULL)
        method->defaults(options);
    lwb_options(L, 2, method->name, method->options, NULL, options);
    lwb_tree *tree = lwb_new_tree(L);
    lua_pushvalue(L, 1);
    lua_setiuservalue(L, -2, 1);
    lwb_check(L, lw_method_run(lwb_engine(L), method, profiles, options, tree->root, &err), &err);
    if (method->options != NULL && method->options->key != NULL)
        lwb_add_options(tree->root, "options", method->options, options, &err);
    lwb_check(L, LW_OK, &err);
    return 1;
}

/* Names of methods from nil, "all", one name or a list. */
static size_t read_names(lua_State *L, int at, const char **names)
{
    const char *known[LW_OPTION_LIST_MOST + 1] = {NULL};
    for (size_t i = 0; i < LW_OPTION_LIST_MOST && lw_method_list[i] != NULL; i++)
        known[i] = lw_method_list[i]->name;
    size_t n = 0;
    if (lua_isnil(L, at))
        return 0;
    if (lua_type(L, at) == LUA_TSTRING) {
        names[n++] = lua_tostring(L, at);
    } else {
        lwb_want_table(L, at, "separate", "the option 'methods'");
        for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, at) && n < LW_OPTION_LIST_MOST; i++) {
            lua_rawgeti(L, at, i);
            names[n++] = lwb_text(L, -1, "separate", "a method's name");
            lua_pop(L, 1); /* the list keeps it alive */
        }
    }
    if (n == 1 && strcmp(names[0], "all") == 0)
        return 0;
    for (size_t i = 0; i < n; i++)
        if (lw_method_named(names[i]) == NULL) {
            char hint[400] = "";
            const char *near = lw_nearest(known, names[i]);
            size_t used = near ? (size_t)snprintf(hint, sizeof hint, "did you mean '%s'? ", near) : 0;
            used += (size_t)snprintf(hint + used, sizeof hint - used, "choose from: all");
            for (size_t k = 0; known[k] != NULL && used + 1 < sizeof hint; k++)
                used += (size_t)snprintf(hint + used, sizeof hint - used, ", %s", known[k]);
            lwb_refuse(L, hint, "separate: no method is called '%s'", names[i]);
        }
    return n;
}

/* lw.separate(profiles, { methods = "all" | name | {names}, uncertainty = ... }) */
static int separate(lua_State *L)
{
    static const char *const own[] = {"methods", NULL};
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 2);
    luaL_checkstack(L, 40, NULL);
    const lw_profiles *profiles = lwb_object(L, 1, &lwb_profiles_noun, "separate");
    lw_separate_options options = lw_separate_defaults();
    lwb_options(L, 2, "separate", lw_separate_option_table, own, &options);
    if (lua_isnil(L, 2))
        lua_pushnil(L);
    else
        lua_getfield(L, 2, "methods");
    options.methods.n = read_names(L, 3, options.methods.item);
    lwb_tree *tree = lwb_new_tree(L);
    lua_pushvalue(L, 1);
    lua_setiuservalue(L, -2, 1);
    lwb_check(L, lw_separate_with(lwb_engine(L), profiles, &options, tree->root, &err), &err);
    return 1;
}

void lwb_add_methods(lua_State *L, int module)
{
    for (size_t i = 0; lw_method_list[i] != NULL; i++) {
        lua_pushlightuserdata(L, (void *)(uintptr_t)lw_method_list[i]);
        lua_pushcclosure(L, run_method, 1);
        lua_setfield(L, module, lw_method_list[i]->name);
    }
    lua_pushcfunction(L, separate);
    lua_setfield(L, module, "separate");
}
