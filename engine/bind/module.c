/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Opens the module: one loop over the nouns makes metatables and functions. A new noun is a new file
 * and one line in the list. */
#include "bind/bind.h"
#include "bind/methods.h"
#include "bind/standards.h"

#include <stdio.h>
#include <string.h>

const lwb_noun *const lwb_noun_list[] = {
    &lwb_quantity_noun, &lwb_vector_noun,      &lwb_tree_noun,     &lwb_radiation_noun, &lwb_material_noun,
    &lwb_standard_noun, &lwb_reflections_noun, &lwb_scan_noun,     &lwb_lines_noun,     &lwb_calibration_noun,
    &lwb_profiles_noun, &lwb_figure_noun,      &lwb_report_noun,   &lwb_recipe_noun,    &lwb_help_noun,
    NULL};

/* x.name of a noun without its own __index: a method, a field, or an error with the nearest spelling.
 * Upvalues: methods, the noun. */
static int index_noun(lua_State *L)
{
    const lwb_noun *noun = lua_touserdata(L, lua_upvalueindex(2));
    lua_pushvalue(L, 2);
    if (lua_rawget(L, lua_upvalueindex(1)) != LUA_TNIL)
        return 1;
    lua_pop(L, 1);
    const char *key = lua_type(L, 2) == LUA_TSTRING ? lua_tostring(L, 2) : NULL;
    if (key != NULL && noun->field != NULL && lwb_self(L, 1, noun, noun->name) != NULL && noun->field(L, key))
        return 1;
    const char *names[64] = {NULL};
    size_t n = 0;
    for (size_t i = 0; noun->fields != NULL && noun->fields[i] != NULL && n < 63; i++)
        names[n++] = noun->fields[i];
    for (size_t i = 0; noun->methods != NULL && noun->methods[i].name != NULL && n < 63; i++)
        names[n++] = noun->methods[i].name;
    return lwb_unknown_field(L, noun->name, key ? key : lwb_kind(L, 2), names);
}

static int refuse_change(lua_State *L)
{
    const lwb_noun *noun = lua_touserdata(L, lua_upvalueindex(1));
    return lwb_refuse(L, "make a new one instead", "a %s can't be changed", noun->name);
}

static void make_metatable(lua_State *L, const lwb_noun *noun)
{
    char name[64];
    snprintf(name, sizeof name, "linewright.%s", noun->name);
    luaL_newmetatable(L, name);
    int meta = lua_gettop(L);
    lua_newtable(L);
    if (noun->methods != NULL)
        luaL_setfuncs(L, noun->methods, 0);
    lua_pushvalue(L, -1);
    lua_setfield(L, meta, "__methods");
    lua_pushlightuserdata(L, (void *)(uintptr_t)noun);
    lua_pushcclosure(L, index_noun, 2);
    lua_setfield(L, meta, "__index");
    lua_pushlightuserdata(L, (void *)(uintptr_t)noun);
    lua_pushcclosure(L, refuse_change, 1);
    lua_setfield(L, meta, "__newindex");
    if (noun->metamethods != NULL) {
        lua_getfield(L, meta, "__methods"); /* upvalue 1 of each */
        lua_pushvalue(L, meta);
        lua_insert(L, -2);
        luaL_setfuncs(L, noun->metamethods, 1);
        lua_pop(L, 1);
    }
    if (noun->gc != NULL) {
        lua_pushcfunction(L, noun->gc);
        lua_setfield(L, meta, "__gc");
    }
    if (noun->fields != NULL) {
        lua_newtable(L);
        for (lua_Integer i = 0; noun->fields[i] != NULL; i++) {
            lua_pushstring(L, noun->fields[i]);
            lua_rawseti(L, -2, i + 1);
        }
        lua_setfield(L, meta, "__fields");
    }
    lua_pushfstring(L, "linewright.%s", noun->name);
    lua_setfield(L, meta, "__metatable"); /* keeps scripts away from the metatable */
    lua_pop(L, 1);
}

int luaopen_linewright(lua_State *L)
{
    lwb_home *home = lwb_home_of(L);
    const char *file = luaL_optstring(L, 2, ""); /* the loader hands over where the module was found */
    if (home->standards[0] == '\0' && !home->interpreter)
        lwb_find_standards(file, home->standards, sizeof home->standards);
    lua_newtable(L);
    int module = lua_gettop(L);
    for (size_t i = 0; lwb_noun_list[i] != NULL; i++) {
        make_metatable(L, lwb_noun_list[i]);
        if (lwb_noun_list[i]->functions != NULL)
            luaL_setfuncs(L, lwb_noun_list[i]->functions, 0);
    }
    lwb_add_methods(L, module);
    lua_pushliteral(L, LW_VERSION);
    lua_setfield(L, module, "version");
    lua_settop(L, module);
    return 1;
}
