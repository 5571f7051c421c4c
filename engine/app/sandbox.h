/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a script can reach. By default: an allow list of safe globals, no files, no processes, no native
 * modules, no bytecode, no debug library. Trusted: all of Lua. */
#ifndef LW_APP_SANDBOX_H
#define LW_APP_SANDBOX_H

#include <lua.h>

#include <stdbool.h>

/* Opens the libraries into a fresh state and makes `require "linewright"` work. */
void lwa_open_libraries(lua_State *L, bool trusted);

/* Names of the allowed globals, NULL-terminated: what is not here is not there. */
extern const char *const lwa_allowed[];

#endif
