/* SPDX-License-Identifier: GPL-3.0-or-later */
/* lw.response(lines, standard, options) and lw.dead_time(stronger, weaker, options). */
#include "bind/checks.h"

#include "bind/standards.h"
#include "instrument/dead_time.h"
#include "instrument/response.h"

int lwb_response(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 3);
    luaL_checkstack(L, 20, NULL);
    const lw_lines *lines = lwb_object(L, 1, &lwb_lines_noun, "response");
    const lw_standard *standard = lwb_standard_at(L, 2, "response");
    lw_response_options options = lw_response_defaults();
    lwb_options(L, 3, "response", lw_response_option_table, NULL, &options);
    lwb_tree *tree = lwb_new_tree(L);
    lua_pushvalue(L, 1);
    lua_setiuservalue(L, -2, 1);
    lwb_check(L, lw_response(lwb_engine(L), lines, standard, &options, tree->root, &err), &err);
    return 1;
}

int lwb_dead_time(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 3);
    luaL_checkstack(L, 20, NULL);
    const lw_scan *stronger = lwb_object(L, 1, &lwb_scan_noun, "dead_time"), *weaker = NULL;
    int at = 2; /* of the options */
    if (lwb_test(L, 2, &lwb_scan_noun) != NULL || (!lua_isnoneornil(L, 2) && !lua_istable(L, 2))) {
        weaker = lwb_object(L, 2, &lwb_scan_noun, "dead_time");
        at = 3;
    } else if (lua_isnil(L, 2))
        at = 3;
    lw_dead_time_options options = lw_dead_time_defaults();
    lwb_options(L, at, "dead_time", lw_dead_time_option_table, NULL, &options);
    lwb_tree *tree = lwb_new_tree(L);
    lwb_check(L, lw_dead_time(lwb_engine(L), stronger, weaker, &options, tree->root, &err), &err);
    return 1;
}
