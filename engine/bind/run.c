/* SPDX-License-Identifier: GPL-3.0-or-later */
/* job:run(recipe, inputs): one recipe as a step of another, in the same sandbox. It writes below the job's own
 * out folder, and its records name it, not its caller, as the recipe. */
#include "base/sha256.h"
#include "bind/bind.h"
#include "bind/inputs.h"
#include "bind/outputs.h"
#include "record/file.h"

#include <lauxlib.h>

#include <stdio.h>
#include <string.h>

#define RECIPE_MOST (1u << 20) /* bytes */

/* What the running recipe is, to be put back when the inner one has ended. */
typedef struct outer {
    char recipe[LWB_PATH_MOST], hash[65], out[LWB_PATH_MOST];
    bool out_is_default;
} outer;

/* Pushes the path of a recipe named relative to the folder of the running one. */
static const char *push_path(lua_State *L, const lwb_home *home, const char *name)
{
    const char *slash = strrchr(home->recipe, '/');
    if (name[0] == '/' || slash == NULL)
        return lua_pushstring(L, name);
    lua_pushlstring(L, home->recipe, (size_t)(slash - home->recipe) + 1);
    lua_pushstring(L, name);
    lua_concat(L, 2);
    return lua_tostring(L, -1);
}

/* Pushes the arguments of the inner recipe: [0] its path, then name=value for each input; out is a folder below
 * the job's. */
static void push_arguments(lua_State *L, int inputs, const char *path)
{
    lua_newtable(L);
    int arguments = lua_gettop(L);
    lua_pushstring(L, path);
    lua_rawseti(L, arguments, 0);
    lua_Integer n = 0;
    for (lua_pushnil(L); lua_next(L, inputs); lua_pop(L, 1)) {
        if (lua_type(L, -2) != LUA_TSTRING)
            lwb_refuse(L, "give { name = value }", "run: an input has no name");
        int top = lua_gettop(L);
        const char *key = lua_tostring(L, -2), *value = luaL_tolstring(L, -1, NULL);
        if (strcmp(key, "out") == 0) {
            const char *made = lwb_push_out_path(L, lua_pushfstring(L, "%s/recipe", value), "run"); /* makes the folder */
            value = lua_pushlstring(L, made, strlen(made) - strlen("/recipe"));
        }
        lua_pushfstring(L, "%s=%s", key, value);
        lua_rawseti(L, arguments, ++n);
        lua_settop(L, top);
    }
}

int lwb_job_run(lua_State *L)
{
    luaL_checktype(L, 1, LUA_TUSERDATA);
    const char *name = luaL_checkstring(L, 2);
    lua_settop(L, 3);
    if (lua_isnil(L, 3)) {
        lua_newtable(L);
        lua_replace(L, 3);
    }
    lwb_want_table(L, 3, "run", "the second argument");
    luaL_checkstack(L, 20, NULL);
    lwb_home *home = lwb_home_of(L);
    if (lua_getfield(L, 3, "out") == LUA_TNIL)
        return lwb_refuse(L, "give out = \"name\", a folder below this job's", "run: '%s' needs a folder to write to", name);
    outer *keep = lua_newuserdatauv(L, sizeof *keep, 0);
    snprintf(keep->recipe, sizeof keep->recipe, "%s", home->recipe);
    snprintf(keep->hash, sizeof keep->hash, "%s", home->recipe_hash);
    snprintf(keep->out, sizeof keep->out, "%s", home->out);
    keep->out_is_default = home->out_is_default;
    const char *path = push_path(L, home, name);
    push_arguments(L, 3, path);
    int arguments = lua_gettop(L);

    lw_error err = LW_ERROR_NONE;
    lw_arena *arena = lwb_scratch(L);
    char *bytes = NULL;
    size_t size = 0;
    lw_status status = lw_read_file(arena, path, RECIPE_MOST, &bytes, &size, &err);
    char hash[65] = "";
    int loaded = LUA_OK;
    if (status == LW_OK) {
        lw_sha256_hex(bytes, size, hash);
        loaded = luaL_loadbufferx(L, bytes, size, lua_pushfstring(L, "@%s", path), "t");
    }
    lwb_check(L, status, &err);
    if (loaded != LUA_OK)
        return lua_error(L);
    int chunk = lua_gettop(L);

    /* the inner recipe finds its arguments where any recipe does: in `arg` and, for lw.recipe, in the registry */
    lua_getfield(L, LUA_REGISTRYINDEX, LWB_ARGUMENTS_KEY);
    int outer_arguments = lua_gettop(L);
    lua_newtable(L);
    for (lua_Integer i = 0; i <= (lua_Integer)lua_rawlen(L, arguments); i++) {
        lua_rawgeti(L, arguments, i);
        lua_rawseti(L, -2, i);
    }
    lua_setfield(L, LUA_REGISTRYINDEX, LWB_ARGUMENTS_KEY);
    lua_rawgeti(L, LUA_REGISTRYINDEX, LUA_RIDX_GLOBALS);
    int globals = lua_gettop(L);
    lua_pushliteral(L, "arg");
    lua_rawget(L, globals);
    int own_arguments = lua_gettop(L);
    lua_pushliteral(L, "arg");
    lua_pushvalue(L, arguments);
    lua_rawset(L, globals);
    lua_getfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY);
    int own_job = lua_gettop(L);
    snprintf(home->recipe, sizeof home->recipe, "%s", path);
    snprintf(home->recipe_hash, sizeof home->recipe_hash, "%s", hash);
    lua_pushvalue(L, chunk);
    home->inner++;
    int result = lua_pcall(L, 0, 0, 0);
    home->inner--;

    snprintf(home->recipe, sizeof home->recipe, "%s", keep->recipe);
    snprintf(home->recipe_hash, sizeof home->recipe_hash, "%s", keep->hash);
    snprintf(home->out, sizeof home->out, "%s", keep->out);
    home->out_is_default = keep->out_is_default;
    lua_pushvalue(L, outer_arguments);
    lua_setfield(L, LUA_REGISTRYINDEX, LWB_ARGUMENTS_KEY);
    lua_pushvalue(L, own_job);
    lua_setfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY);
    lua_pushliteral(L, "arg");
    lua_pushvalue(L, own_arguments);
    lua_rawset(L, globals);
    return result == LUA_OK ? 0 : lua_error(L);
}
