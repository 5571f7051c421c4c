/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/complete.h"

#include "bind/bind.h"

#include <lauxlib.h>

#include <string.h>

/* Adds prefix..name to the list at the index if the name begins with `part`, in sorted place. */
static void offer(lua_State *L, int list, const char *prefix, const char *name, const char *part, const char *suffix)
{
    if (strncmp(name, part, strlen(part)) != 0 || (name[0] == '_' && part[0] != '_'))
        return;
    lua_pushfstring(L, "%s%s%s", prefix, name, suffix);
    lua_Integer at = (lua_Integer)lua_rawlen(L, list) + 1;
    for (; at > 1; at--) {
        lua_rawgeti(L, list, at - 1);
        int order = strcmp(lua_tostring(L, -1), lua_tostring(L, -2));
        if (order == 0) {
            lua_pop(L, 2);
            /* undo the shift: what was moved up goes back */
            for (lua_Integer k = at, n = (lua_Integer)lua_rawlen(L, list); k < n; k++) {
                lua_rawgeti(L, list, k + 1);
                lua_rawseti(L, list, k);
            }
            if (at <= (lua_Integer)lua_rawlen(L, list)) {
                lua_pushnil(L);
                lua_rawseti(L, list, (lua_Integer)lua_rawlen(L, list));
            }
            return;
        }
        if (order < 0) {
            lua_pop(L, 1);
            break;
        }
        lua_rawseti(L, list, at);
    }
    lua_rawseti(L, list, at);
}

static void offer_keys(lua_State *L, int list, int table, const char *prefix, const char *part, bool functions_only)
{
    for (lua_pushnil(L); lua_next(L, table); lua_pop(L, 1)) {
        if (lua_type(L, -2) != LUA_TSTRING || (functions_only && !lua_isfunction(L, -1)))
            continue;
        offer(L, list, prefix, lua_tostring(L, -2), part, lua_isfunction(L, -1) ? "(" : "");
    }
}

/* Fields of an object: what its noun declares, and the names of its tree. */
static void offer_object(lua_State *L, int list, int object, const char *prefix, const char *part, bool methods)
{
    if (methods) {
        if (luaL_getmetafield(L, object, "__methods") == LUA_TTABLE) {
            offer_keys(L, list, lua_gettop(L), prefix, part, true);
            lua_pop(L, 1);
        }
        return;
    }
    if (luaL_getmetafield(L, object, "__fields") == LUA_TTABLE) {
        int fields = lua_gettop(L);
        for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, fields); i++) {
            lua_rawgeti(L, fields, i);
            offer(L, list, prefix, lua_tostring(L, -1), part, "");
            lua_pop(L, 1);
        }
        lua_pop(L, 1);
    }
    const lwb_tree *tree = lwb_test(L, object, &lwb_tree_noun);
    for (int value = 1; tree == NULL && value <= 5; value++) { /* lines, profiles and calibrations hold one */
        if (lua_getiuservalue(L, object, value) == LUA_TUSERDATA && lwb_test(L, -1, &lwb_recipe_noun) == NULL)
            tree = lwb_test(L, -1, &lwb_tree_noun);
        lua_pop(L, 1); /* the object keeps it alive */
    }
    if (tree != NULL && tree->node != NULL && tree->node->kind == LW_NODE_GROUP)
        for (const lw_node *child = tree->node->first; child != NULL; child = child->next)
            offer(L, list, prefix, child->name, part, "");
}

/* One step from the value on the top of the stack to its field of that name; false if it can't be taken
 * without running a script's code. */
static bool step(lua_State *L, const char *name, size_t length)
{
    lua_pushlstring(L, name, length);
    if (lua_type(L, -2) == LUA_TTABLE)
        lua_rawget(L, -2);
    else if (lua_type(L, -2) == LUA_TUSERDATA)
        lua_gettable(L, -2); /* ours: it may raise, and the caller is protected */
    else {
        lua_pop(L, 1);
        return false;
    }
    lua_replace(L, -2);
    return !lua_isnil(L, -1);
}

static int complete(lua_State *L)
{
    const char *word = lua_tostring(L, 1);
    lua_newtable(L); /* 2 */
    lua_pushglobaltable(L); /* 3: the value that is walked along */
    const char *at = word;
    for (;;) {
        size_t length = strcspn(at, ".:");
        if (at[length] == '\0')
            break;
        if (!step(L, at, length)) {
            lua_pushvalue(L, 2);
            return 1;
        }
        at += length + 1;
    }
    lua_pushlstring(L, word, (size_t)(at - word));
    const char *prefix = lua_tostring(L, -1);
    bool colon = at > word && at[-1] == ':';
    if (lua_type(L, 3) == LUA_TTABLE)
        offer_keys(L, 2, 3, prefix, at, colon);
    else if (lua_type(L, 3) == LUA_TUSERDATA)
        offer_object(L, 2, 3, prefix, at, colon);
    else if (lua_type(L, 3) == LUA_TSTRING && colon) {
        lua_getglobal(L, "string");
        offer_keys(L, 2, lua_gettop(L), prefix, at, true);
    }
    if (at == word) {
        static const char *const keywords[] = {"and",    "break", "do",  "else", "elseif", "end",    "false", "for",
                                               "function", "goto", "if", "in",   "local",  "nil",    "not",   "or",
                                               "repeat", "return", "then", "true", "until", "while", NULL};
        for (size_t i = 0; keywords[i] != NULL; i++)
            offer(L, 2, "", keywords[i], at, "");
    }
    lua_pushvalue(L, 2);
    return 1;
}

void lwa_push_completions(lua_State *L, const char *word)
{
    lua_pushcfunction(L, complete);
    lua_pushstring(L, word);
    if (lua_pcall(L, 1, 1, 0) != LUA_OK) {
        lua_pop(L, 1);
        lua_newtable(L);
    }
}
