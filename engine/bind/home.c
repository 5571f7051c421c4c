/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "bind/home.h"

#include <lauxlib.h>

#include <string.h>

#define COLLECT_LEAST ((size_t)64 << 20)

static const char home_key = 'h'; /* its address is the key in the registry */

/* Memory through the state's allocator. A refusal is tried once more after a full collection, since
 * Lua does not know how much engine memory its garbage holds. */
static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    lwb_home *home = user;
    void *fresh = home->allocate(home->allocate_user, block, block ? old_size : 0, new_size);
    if (fresh == NULL && new_size > 0 && home->running != NULL) {
        lua_gc(home->running, LUA_GCCOLLECT, 0);
        fresh = home->allocate(home->allocate_user, block, block ? old_size : 0, new_size);
    }
    if (fresh != NULL || new_size == 0)
        home->engine_bytes = home->engine_bytes - (block ? old_size : 0) + new_size;
    return fresh;
}

static int end_home(lua_State *L)
{
    lwb_home *home = lua_touserdata(L, 1);
    home->running = NULL;
    lw_engine_end(&home->engine);
    return 0;
}

lwb_home *lwb_home_of(lua_State *L)
{
    if (lua_rawgetp(L, LUA_REGISTRYINDEX, &home_key) == LUA_TUSERDATA) {
        lwb_home *home = lua_touserdata(L, -1);
        lua_pop(L, 1);
        return home;
    }
    lua_pop(L, 1);
    lwb_home *home = lua_newuserdatauv(L, sizeof *home, 0);
    memset(home, 0, sizeof *home);
    lw_engine_begin(&home->engine);
    home->allocate = lua_getallocf(L, &home->allocate_user);
    home->engine.allocator = (lw_allocator){.resize = resize, .user = home};
    home->collect_at = COLLECT_LEAST;
    lua_createtable(L, 0, 1);
    lua_pushcfunction(L, end_home);
    lua_setfield(L, -2, "__gc");
    lua_setmetatable(L, -2);
    lua_rawsetp(L, LUA_REGISTRYINDEX, &home_key);
    return home;
}

lw_engine *lwb_engine(lua_State *L)
{
    lwb_home *home = lwb_home_of(L);
    home->running = L;
    if (home->engine_bytes > home->collect_at) {
        lua_gc(L, LUA_GCCOLLECT, 0);
        home->collect_at = 2 * home->engine_bytes > COLLECT_LEAST ? 2 * home->engine_bytes : COLLECT_LEAST;
    }
    return &home->engine;
}
