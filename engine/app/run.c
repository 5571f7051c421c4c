/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/run.h"

#include "app/memory.h"
#include "app/stop.h"

#include <lauxlib.h>

#include <stdio.h>
#include <string.h>

/* " at recipe.lua:20 in function 'f'" for each Lua line that led to the error, the innermost first. */
static void add_trace(lua_State *L, luaL_Buffer *out, const char *message)
{
    lua_Debug frame;
    int told = 0;
    for (int level = 1; lua_getstack(L, level, &frame) && told < 12; level++) {
        char place[200];
        lua_getinfo(L, "Sln", &frame);
        if (frame.currentline <= 0)
            continue;
        snprintf(place, sizeof place, "%.100s:%d:", frame.short_src, frame.currentline);
        if (told == 0 && strncmp(message, place, strlen(place)) == 0) {
            told++; /* the message names this line itself */
            continue;
        }
        told++;
        const char *kind = frame.name != NULL ? "in function '" : "in the ";
        luaL_addstring(out, "\n  called from ");
        luaL_addlstring(out, place, strlen(place) - 1);
        luaL_addstring(out, " ");
        luaL_addstring(out, kind);
        luaL_addstring(out, frame.name != NULL ? frame.name : strcmp(frame.what, "main") == 0 ? "main chunk" : "function");
        luaL_addstring(out, frame.name != NULL ? "'" : "");
    }
}

/* Turns an error into its text with a traceback; an error that asks to end quietly stays as it is. */
static int handle(lua_State *L)
{
    if (lua_type(L, 1) == LUA_TTABLE && lua_getmetatable(L, 1) && luaL_getmetatable(L, "linewright.error") == LUA_TTABLE &&
        lua_rawequal(L, -1, -2)) {
        lua_getfield(L, 1, "kind");
        if (lua_type(L, -1) == LUA_TSTRING && strcmp(lua_tostring(L, -1), "help") == 0) {
            lua_settop(L, 1);
            return 1;
        }
    }
    lua_settop(L, 1);
    if (lua_type(L, 1) != LUA_TSTRING && !luaL_callmeta(L, 1, "__tostring"))
        lua_pushfstring(L, "(an error that is a %s)", luaL_typename(L, 1));
    const char *message = lua_tostring(L, -1);
    luaL_Buffer out;
    lua_insert(L, 1);
    luaL_buffinit(L, &out);
    luaL_addstring(&out, message ? message : "(an error without text)");
    add_trace(L, &out, message ? message : "");
    luaL_pushresult(&out);
    return 1;
}

void lwa_tell_error(lua_State *L, lwa_progress *progress)
{
    const char *message = lua_tostring(L, -1);
    if (progress != NULL)
        lwa_progress_clear(progress);
    fflush(stdout);
    fprintf(stderr, "%s\n", message ? message : "(an error without text)");
    /* the engine says only that it was stopped, not by whom */
    if (lwa_stop_reason() == LWA_TIME_IS_UP && (message == NULL || strstr(message, "time limit") == NULL))
        fprintf(stderr, "the time limit is reached\n");
    lua_pop(L, 1);
}

static void tell_memory(lua_State *L)
{
    void *user = NULL;
    lua_getallocf(L, &user);
    const lwa_memory *memory = user;
    fflush(stdout);
    if (memory->refused)
        fprintf(stderr, "out of memory: the limit of %.0f MB is reached; raise --memory-limit\n",
                (double)memory->most / 1048576);
    else
        fprintf(stderr, "out of memory: the system refused more\n");
}

lwa_exit lwa_call(lua_State *L, int n_arguments, int n_results, lwa_progress *progress)
{
    int base = lua_gettop(L) - n_arguments;
    lua_pushcfunction(L, handle);
    lua_insert(L, base);
    int status = lua_pcall(L, n_arguments, n_results, base);
    lua_remove(L, base);
    if (status == LUA_OK && lwa_stop_reason() == LWA_NOT_STOPPED)
        return LWA_DONE;
    if (status == LUA_OK) { /* it swallowed the stop at its very end */
        lua_settop(L, base - 1);
        fprintf(stderr, "%s\n", lwa_stop_reason() == LWA_INTERRUPTED ? "interrupted" : "the time limit is reached");
        return lwa_stop_reason() == LWA_INTERRUPTED ? LWA_EXIT_INTERRUPTED : LWA_FAILED;
    }
    if (lua_type(L, -1) == LUA_TTABLE) { /* only a request for help passes the handler as a table */
        lua_pop(L, 1);
        return LWA_DONE;
    }
    if (status == LUA_ERRMEM) {
        if (progress != NULL)
            lwa_progress_clear(progress);
        lua_pop(L, 1);
        tell_memory(L);
        return LWA_FAILED;
    }
    lwa_tell_error(L, progress);
    return lwa_stop_reason() == LWA_INTERRUPTED ? LWA_EXIT_INTERRUPTED : LWA_FAILED;
}

bool lwa_load(lua_State *L, const char *text, size_t size, const char *name)
{
    if (size > 0 && text[0] == LUA_SIGNATURE[0]) /* Lua's own message has no name in it */
        lua_pushfstring(L, "%s: compiled Lua is not run; give the recipe's text", *name == '@' ? name + 1 : name);
    else if (luaL_loadbufferx(L, text, size, name, "t") == LUA_OK)
        return true;
    lwa_tell_error(L, NULL);
    return false;
}
