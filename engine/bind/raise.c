/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Errors as scripts see them: tables with kind, message, where and hint. */
#include "bind/bind.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define ERROR_NAME "linewright.error"

static int show_error(lua_State *L)
{
    lua_settop(L, 1);
    lua_getfield(L, 1, "where");
    lua_getfield(L, 1, "message");
    lua_getfield(L, 1, "hint");
    const char *where = luaL_optstring(L, 2, ""), *hint = luaL_optstring(L, 4, "");
    lua_pushfstring(L, "%s%s%s%s%s", where, where[0] ? ": " : "", luaL_optstring(L, 3, "?"), hint[0] ? "; " : "", hint);
    return 1;
}

static int join_error(lua_State *L)
{
    luaL_tolstring(L, 1, NULL);
    luaL_tolstring(L, 2, NULL);
    lua_concat(L, 2);
    return 1;
}

/* "recipe.lua:12" of the nearest Lua function that is running a line, or "". */
static void push_place(lua_State *L)
{
    lua_Debug frame;
    for (int level = 1; lua_getstack(L, level, &frame); level++) {
        lua_getinfo(L, "Sl", &frame);
        if (frame.currentline > 0) {
            lua_pushfstring(L, "%s:%d", frame.short_src, frame.currentline);
            return;
        }
    }
    lua_pushliteral(L, "");
}

void lwb_push_error(lua_State *L, const char *kind, const char *message, const char *hint)
{
    luaL_checkstack(L, 6, NULL);
    lua_createtable(L, 0, 4);
    lua_pushstring(L, kind);
    lua_setfield(L, -2, "kind");
    lua_pushstring(L, message);
    lua_setfield(L, -2, "message");
    push_place(L);
    lua_setfield(L, -2, "where");
    lua_pushstring(L, hint ? hint : "");
    lua_setfield(L, -2, "hint");
    if (luaL_getmetatable(L, ERROR_NAME) != LUA_TTABLE) {
        lua_pop(L, 1);
        lua_createtable(L, 0, 4);
        lua_pushliteral(L, ERROR_NAME);
        lua_setfield(L, -2, "__name");
        lua_pushcfunction(L, show_error);
        lua_setfield(L, -2, "__tostring");
        lua_pushcfunction(L, join_error);
        lua_setfield(L, -2, "__concat");
        lua_pushliteral(L, "error of linewright");
        lua_setfield(L, -2, "__metatable");
        lua_pushvalue(L, -1);
        lua_setfield(L, LUA_REGISTRYINDEX, ERROR_NAME); /* last: a refusal of memory leaves no half of it */
    }
    lua_setmetatable(L, -2);
}

int lwb_raise(lua_State *L, const lw_error *err)
{
    char message[sizeof err->message + sizeof err->file + 32];
    if (err->file[0] != '\0' && err->line > 0)
        snprintf(message, sizeof message, "%s:%ld: %s", err->file, err->line, err->message);
    else if (err->file[0] != '\0')
        snprintf(message, sizeof message, "%s: %s", err->file, err->message);
    else
        snprintf(message, sizeof message, "%s", err->message);
    lwb_push_error(L, lw_status_name(err->status), message, err->remedy);
    return lua_error(L);
}

int lwb_refuse(lua_State *L, const char *hint, const char *format, ...)
{
    char message[600];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(message, sizeof message, format, arguments);
    va_end(arguments);
    lwb_push_error(L, lw_status_name(LW_BAD_ARGUMENT), message, hint);
    return lua_error(L);
}

void lwb_check(lua_State *L, lw_status status, const lw_error *err)
{
    if (status == LW_OK && err->status == LW_OK)
        return;
    if (err->status != LW_OK)
        lwb_raise(L, err);
    lw_error bare = LW_ERROR_NONE;
    lw_fail(&bare, status, NULL, "the engine refused: %s", lw_status_name(status));
    lwb_raise(L, &bare);
}

int lwb_unknown_field(lua_State *L, const char *noun, const char *key, const char *const *names)
{
    char list[400] = "", hint[520];
    size_t used = 0;
    for (size_t i = 0; names[i] != NULL && used + 1 < sizeof list; i++)
        used += (size_t)snprintf(list + used, sizeof list - used, "%s%s", i > 0 ? ", " : "", names[i]);
    const char *near = lw_nearest(names, key);
    if (near != NULL)
        snprintf(hint, sizeof hint, "did you mean '%s'? it has: %s", near, list);
    else
        snprintf(hint, sizeof hint, "it has: %s", list[0] ? list : "nothing");
    return lwb_refuse(L, hint, "a %s has no field or method '%s'", noun, key);
}
