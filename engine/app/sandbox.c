/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/sandbox.h"

#include "base/options.h"
#include "bind/home.h"

#include <lauxlib.h>
#include <lualib.h>

#include <stdio.h>
#include <string.h>

const char *const lwa_allowed[] = {
    "_G",     "_VERSION", "arg",    "assert",  "collectgarbage", "coroutine", "error",  "getmetatable", "help",
    "ipairs", "load",     "math",   "next",    "os",             "pairs",     "pcall",  "print",        "rawequal",
    "rawget", "rawlen",   "rawset", "require", "select",         "setmetatable", "string", "table",      "tonumber",
    "tostring", "type",   "utf8",   "xpcall",  NULL};

/* Known names of Lua that are not open, so that the error can say why. */
static const char *const closed[] = {"io", "debug", "package", "dofile", "loadfile", "loadstring", "warn", NULL};

#define SEED 0x6c696e65 /* any constant: the same numbers on every machine and in every run */

/* require "linewright", and nothing else. Upvalue 1: the module once it is made. */
static int require_sandboxed(lua_State *L)
{
    const char *name = luaL_checkstring(L, 1);
    if (strcmp(name, "linewright") != 0)
        return luaL_error(L, "module '%s' is not open to recipes; only \"linewright\" is (start with --trusted to open all)",
                          name);
    if (lua_isnil(L, lua_upvalueindex(1))) {
        lua_pushcfunction(L, luaopen_linewright);
        lua_pushstring(L, name);
        lua_call(L, 1, 1);
        lua_replace(L, lua_upvalueindex(1));
    }
    lua_pushvalue(L, lua_upvalueindex(1));
    return 1;
}

/* load() of text only: precompiled code can break the interpreter. Upvalue 1: Lua's own load. */
static int load_text(lua_State *L)
{
    bool has_environment = !lua_isnone(L, 4);
    lua_settop(L, 4);
    lua_pushvalue(L, lua_upvalueindex(1));
    lua_pushvalue(L, 1);
    if (lua_isnil(L, 2) && lua_type(L, 1) == LUA_TSTRING)
        lua_pushliteral(L, "=(load)");
    else
        lua_pushvalue(L, 2);
    lua_pushliteral(L, "t");
    if (has_environment)
        lua_pushvalue(L, 4);
    lua_call(L, has_environment ? 4 : 3, LUA_MULTRET);
    return lua_gettop(L) - 4;
}

/* setmetatable() without __gc: hooks don't run in finalizers, so nothing could stop one. Upvalue 1: Lua's. */
static int set_metatable(lua_State *L)
{
    if (lua_type(L, 2) == LUA_TTABLE) {
        lua_pushliteral(L, "__gc");
        if (lua_rawget(L, 2) != LUA_TNIL)
            return luaL_error(L, "__gc is not open to recipes");
        lua_pop(L, 1);
    }
    lua_pushvalue(L, lua_upvalueindex(1));
    lua_insert(L, 1);
    lua_call(L, lua_gettop(L) - 1, LUA_MULTRET);
    return lua_gettop(L);
}

/* collectgarbage() to look and to collect. Upvalue 1: Lua's. */
static int collect(lua_State *L)
{
    static const char *const allowed[] = {"collect", "count", "step", NULL};
    luaL_checkoption(L, 1, "collect", allowed);
    lua_pushvalue(L, lua_upvalueindex(1));
    lua_insert(L, 1);
    lua_call(L, lua_gettop(L) - 1, LUA_MULTRET);
    return lua_gettop(L);
}

/* Reading a global that isn't there is a slip of the keys, or something that is closed. */
static int missing_global(lua_State *L)
{
    if (lua_type(L, 2) != LUA_TSTRING) {
        lua_pushnil(L);
        return 1;
    }
    const char *name = lua_tostring(L, 2);
    for (size_t i = 0; closed[i] != NULL; i++)
        if (strcmp(closed[i], name) == 0)
            return luaL_error(L, "'%s' is not open to recipes; start with --trusted if you trust the recipe", name);
    const char *near = lw_nearest(lwa_allowed, name);
    return luaL_error(L, near ? "unknown name '%s'; did you mean '%s'?" : "unknown name '%s'", name, near);
}

/* print(help(name)) in one word. */
static int print_help(lua_State *L)
{
    lua_settop(L, 1);
    lua_getglobal(L, "require");
    lua_pushliteral(L, "linewright");
    lua_call(L, 1, 1);
    lua_getfield(L, -1, "help");
    lua_pushvalue(L, 1);
    lua_call(L, 1, 1);
    const char *text = lua_tostring(L, -1);
    fputs(text ? text : "", stdout);
    return 0;
}

static void wrap(lua_State *L, const char *name, lua_CFunction function)
{
    lua_getglobal(L, name);
    lua_pushcclosure(L, function, 1);
    lua_setglobal(L, name);
}

static void keep_only(lua_State *L, int table, const char *const *names)
{
    table = lua_absindex(L, table);
    lua_newtable(L); /* names to drop: a table must not change under lua_next */
    lua_Integer n = 0;
    for (lua_pushnil(L); lua_next(L, table); lua_pop(L, 1)) {
        size_t i = 0;
        while (lua_type(L, -2) == LUA_TSTRING && names[i] != NULL && strcmp(names[i], lua_tostring(L, -2)) != 0)
            i++;
        if (names[i] != NULL)
            continue;
        lua_pushvalue(L, -2);
        lua_rawseti(L, -4, ++n);
    }
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, -1, i);
        lua_pushnil(L);
        lua_rawset(L, table);
    }
    lua_pop(L, 1);
}

static void open_safe(lua_State *L)
{
    static const luaL_Reg libraries[] = {{LUA_GNAME, luaopen_base},        {LUA_COLIBNAME, luaopen_coroutine},
                                         {LUA_TABLIBNAME, luaopen_table},  {LUA_STRLIBNAME, luaopen_string},
                                         {LUA_MATHLIBNAME, luaopen_math},  {LUA_UTF8LIBNAME, luaopen_utf8},
                                         {LUA_OSLIBNAME, luaopen_os},      {NULL, NULL}};
    static const char *const of_os[] = {"clock", "date", "time", "difftime", NULL};
    for (const luaL_Reg *library = libraries; library->func != NULL; library++) {
        luaL_requiref(L, library->name, library->func, 1);
        lua_pop(L, 1);
    }
    /* requiref leaves a table of loaded modules in the registry, which scripts can't reach */
    lua_pushnil(L);
    lua_pushcclosure(L, require_sandboxed, 1);
    lua_setglobal(L, "require");
    lua_pushcfunction(L, print_help);
    lua_setglobal(L, "help");
    wrap(L, "load", load_text);
    wrap(L, "setmetatable", set_metatable);
    wrap(L, "collectgarbage", collect);
    lua_getglobal(L, "os");
    keep_only(L, -1, of_os);
    lua_getglobal(L, "string");
    lua_pushnil(L);
    lua_setfield(L, -2, "dump");
    lua_pushliteral(L, ""); /* the metatable of strings can't be reached or replaced */
    lua_getmetatable(L, -1);
    lua_pushliteral(L, "string");
    lua_setfield(L, -2, "__metatable");
    lua_getglobal(L, "math");
    lua_getfield(L, -1, "randomseed");
    lua_pushinteger(L, SEED);
    lua_call(L, 1, 0);
    lua_settop(L, 0);
    lua_pushglobaltable(L);
    keep_only(L, -1, lwa_allowed);
    lua_createtable(L, 0, 2);
    lua_pushcfunction(L, missing_global);
    lua_setfield(L, -2, "__index");
    lua_pushliteral(L, "globals of a recipe");
    lua_setfield(L, -2, "__metatable");
    lua_setmetatable(L, -2);
    lua_settop(L, 0);
}

void lwa_open_libraries(lua_State *L, bool trusted)
{
    if (!trusted) {
        open_safe(L);
        return;
    }
    luaL_openlibs(L);
    lua_pushcfunction(L, print_help);
    lua_setglobal(L, "help");
    luaL_getsubtable(L, LUA_REGISTRYINDEX, LUA_PRELOAD_TABLE);
    lua_pushcfunction(L, luaopen_linewright);
    lua_setfield(L, -2, "linewright");
    lua_settop(L, 0);
}
