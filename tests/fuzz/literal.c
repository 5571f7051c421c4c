/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzz target: data literals (radiation, material, reference material) through the loader of the Lua layer,
 * as a script names them by a path. They may refuse, but not crash, not run long and not touch the state. */
#include "fuzz.h"

#include "bind/home.h"

#include <lauxlib.h>
#include <lualib.h>
#include <string.h>
#include <unistd.h>

static lua_State *L;
static char folder[] = "/tmp/lw-fuzz-XXXXXX", path[64];

static void remove_file(void)
{
    lua_close(L);
    unlink(path);
    rmdir(folder);
}

static void begin(void)
{
    FUZZ_PROMISE(mkdtemp(folder) != NULL);
    snprintf(path, sizeof path, "%s/input.lua", folder);
    L = luaL_newstate();
    luaL_openlibs(L);
    luaL_requiref(L, "linewright", luaopen_linewright, 1);
    lua_settop(L, 0);
    /* a radiation of one's own, so that no folder of standards is needed; it stays at index 1 */
    int status = luaL_dostring(L, "return linewright.radiation '0.15406nm'");
    if (status != LUA_OK)
        fprintf(stderr, "%s\n", lua_tostring(L, -1));
    FUZZ_PROMISE(status == LUA_OK && lua_gettop(L) == 1);
    atexit(remove_file);
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const char script[] = "local path, radiation = ...\n"
                                 "local lw = linewright\n"
                                 "for _, make in ipairs { 'radiation', 'material', 'standard' } do\n"
                                 "  local ok, made = pcall(lw[make], path)\n"
                                 "  assert(ok or tostring(made) ~= '')\n"
                                 "  if ok then\n"
                                 "    assert(type(tostring(made)) == 'string')\n"
                                 "    if make ~= 'radiation' then\n"
                                 "      pcall(function() return tostring(made:reflections { 20, 60, radiation = radiation }) end)\n"
                                 "    end\n"
                                 "  end\n"
                                 "end\n"
                                 "assert(('x'):rep(2) == 'xx', 'the methods of strings are gone')\n";
    if (L == NULL)
        begin();
    FILE *file = fopen(path, "wb");
    FUZZ_PROMISE(file != NULL && fwrite(data, 1, size, file) == size);
    fclose(file);
    int status = luaL_loadstring(L, script);
    lua_pushstring(L, path);
    lua_pushvalue(L, 1);
    status = status == LUA_OK ? lua_pcall(L, 2, 0, 0) : status;
    if (status != LUA_OK)
        fprintf(stderr, "%s\n", lua_tostring(L, -1));
    FUZZ_PROMISE(status == LUA_OK);
    lua_settop(L, 1);
    return 0;
}
