/* SPDX-License-Identifier: GPL-3.0-or-later */
/* help "name": what a function, method or noun does, from the one description of the api
 * (engine/bind/api.lua) joined with the option tables of the engine. */
#include "bind/bind.h"
#include "bind/help.h"
#include "instrument/calibration.h"
#include "instrument/dead_time.h"
#include "instrument/history.h"
#include "instrument/response.h"
#include "line/lines.h"
#include "profile/profiles.h"
#include "sample/method.h"
#include "sample/uncertainty.h"
#include "scan/scan.h"

#include <stdio.h>
#include <string.h>

#define API_KEY "linewright.api"

const lw_option *lwb_options_of(const char *function)
{
    const struct {
        const char *name;
        const lw_option *table;
    } verb[] = {{"read_scan", lw_scan_option_table},
                {"scan", lw_scan_option_table},
                {"fit_lines", lw_fit_option_table},
                {"calibrate", lw_calibrate_option_table},
                {"deconvolve", lw_deconvolve_option_table},
                {"separate", lw_separate_option_table},
                {"history", lw_history_option_table},
                {"response", lw_response_option_table},
                {"dead_time", lw_dead_time_option_table}};
    for (size_t i = 0; i < sizeof verb / sizeof *verb; i++)
        if (strcmp(verb[i].name, function) == 0)
            return verb[i].table;
    const lw_method *method = lw_method_named(function);
    return method ? method->options : NULL;
}

/* Pushes the api description, loaded once. */
static void push_api(lua_State *L)
{
    if (lua_getfield(L, LUA_REGISTRYINDEX, API_KEY) == LUA_TTABLE)
        return;
    lua_pop(L, 1);
    if (luaL_loadbufferx(L, lwb_api_source, lwb_api_size, "@api.lua", "t") != LUA_OK)
        lua_error(L);
    lua_call(L, 0, 1);
    lua_pushvalue(L, -1);
    lua_setfield(L, LUA_REGISTRYINDEX, API_KEY);
}

static void add_options(luaL_Buffer *out, const lw_option *table)
{
    char line[512];
    if (table == NULL || table->key == NULL)
        return;
    luaL_addstring(out, "options:\n");
    for (const lw_option *o = table; o->key != NULL; o++) {
        char choices[200] = "";
        size_t used = 0;
        for (int i = 0; o->kind == LW_OPTION_CHOICE && o->choices[i] != NULL && used + 1 < sizeof choices; i++)
            used += (size_t)snprintf(choices + used, sizeof choices - used, "%s%s", i > 0 ? ", " : ": ", o->choices[i]);
        const char *unit = o->unit ? o->unit : "", *standard = o->standard ? o->standard : "";
        snprintf(line, sizeof line, "  %-22s %s%s%s%s%s%s%s\n", o->key, o->help ? o->help : "", choices,
                 unit[0] ? ", " : "", unit, standard[0] ? " (" : "", standard, standard[0] ? ")" : "");
        luaL_addstring(out, line);
    }
}

static const char *text_of(lua_State *L, int at, const char *key)
{
    lua_getfield(L, at, key);
    const char *text = lua_tostring(L, -1); /* the description keeps it alive */
    lua_pop(L, 1);
    return text;
}

/* Text of one entry; `entry` is its table. */
static void push_entry(lua_State *L, const char *name, int entry)
{
    luaL_Buffer out;
    const char *purpose = text_of(L, entry, "purpose"), *returns = text_of(L, entry, "returns"),
               *source = text_of(L, entry, "source"), *call = text_of(L, entry, "call");
    luaL_checkstack(L, 20, NULL);
    lua_getfield(L, entry, "parameters");
    int parameters = lua_gettop(L);
    luaL_buffinit(L, &out);
    luaL_addstring(&out, call ? call : name);
    luaL_addstring(&out, "\n  ");
    luaL_addstring(&out, purpose ? purpose : "");
    luaL_addchar(&out, '\n');
    lua_Integer n = lua_istable(L, parameters) ? (lua_Integer)lua_rawlen(L, parameters) : 0;
    for (lua_Integer i = 1; i <= n; i++) {
        char line[512];
        lua_rawgeti(L, parameters, i);
        int at = lua_gettop(L);
        const char *key = text_of(L, at, "name"), *type = text_of(L, at, "type"), *unit = text_of(L, at, "unit"),
                   *help = text_of(L, at, "help");
        snprintf(line, sizeof line, "  %-22s %s%s%s: %s\n", key ? key : "", type ? type : "", unit ? ", " : "",
                 unit ? unit : "", help ? help : "");
        lua_pop(L, 1);
        luaL_addstring(&out, line);
    }
    add_options(&out, lwb_options_of(name));
    if (returns != NULL) {
        luaL_addstring(&out, "returns: ");
        luaL_addstring(&out, returns);
        luaL_addchar(&out, '\n');
    }
    if (source != NULL) {
        luaL_addstring(&out, "source: ");
        luaL_addstring(&out, source);
        luaL_addchar(&out, '\n');
    }
    luaL_pushresult(&out);
    lua_remove(L, parameters);
}

/* Puts the text on the top of the stack into its place in the sorted list. Pops it. */
static void insert(lua_State *L, int lines)
{
    lua_Integer at = (lua_Integer)lua_rawlen(L, lines) + 1;
    for (; at > 1; at--) {
        lua_rawgeti(L, lines, at - 1);
        if (strcmp(lua_tostring(L, -1), lua_tostring(L, -2)) <= 0) {
            lua_pop(L, 1);
            break;
        }
        lua_rawseti(L, lines, at);
    }
    lua_rawseti(L, lines, at);
}

/* Without a name: every function with its one line. */
static void push_list(lua_State *L, int api)
{
    static const char *const parts[] = {"functions", "nouns"};
    luaL_Buffer out;
    lua_newtable(L);
    int lines = lua_gettop(L);
    for (size_t p = 0; p < 2; p++) {
        lua_getfield(L, api, parts[p]);
        int part = lua_gettop(L);
        for (lua_pushnil(L); lua_next(L, part); lua_pop(L, 1)) {
            char line[300];
            const char *purpose = text_of(L, lua_gettop(L), "purpose");
            snprintf(line, sizeof line, p == 0 ? "  lw.%-20s %s\n" : "  %-23s %s\n", lua_tostring(L, -2), purpose ? purpose : "");
            lua_pushstring(L, line);
            insert(L, lines);
        }
        lua_pop(L, 1);
    }
    for (size_t i = 0; lw_method_list[i] != NULL; i++) {
        lua_pushfstring(L, "  lw.%s", lw_method_list[i]->name);
        size_t n = lua_rawlen(L, -1);
        for (; n < 26; n++) {
            lua_pushliteral(L, " ");
            lua_concat(L, 2);
        }
        lua_pushstring(L, lw_method_list[i]->purpose);
        lua_pushliteral(L, "\n");
        lua_concat(L, 3);
        insert(L, lines);
    }
    luaL_buffinit(L, &out);
    luaL_addstring(&out, "help \"name\" tells more:\n");
    for (lua_Integer i = 1, n = (lua_Integer)lua_rawlen(L, lines); i <= n; i++) {
        lua_rawgeti(L, lines, i);
        luaL_addvalue(&out);
    }
    luaL_pushresult(&out);
}

static void add_names(lua_State *L, int table, const char **names, size_t *n, size_t most)
{
    for (lua_pushnil(L); lua_next(L, table); lua_pop(L, 1))
        if (*n < most)
            names[(*n)++] = lua_tostring(L, -2);
}

/* Whether the part of the description has the name; pushes its entry. */
static bool find(lua_State *L, int api, const char *part, const char *name)
{
    lua_getfield(L, api, part);
    bool found = lua_getfield(L, -1, name) == LUA_TTABLE;
    lua_remove(L, -2);
    if (!found)
        lua_pop(L, 1);
    return found;
}

/* Fields and methods of a noun, each with its one line. */
static void push_noun(lua_State *L, int api, const char *name, int entry)
{
    luaL_Buffer out;
    luaL_checkstack(L, 20, NULL);
    lua_newtable(L);
    int lines = lua_gettop(L);
    lua_getfield(L, entry, "fields");
    int fields = lua_gettop(L);
    for (lua_pushnil(L); lua_next(L, fields); lua_pop(L, 1)) {
        char line[300];
        const char *type = text_of(L, lua_gettop(L), "type"), *unit = text_of(L, lua_gettop(L), "unit"),
                   *meaning = text_of(L, lua_gettop(L), "help");
        snprintf(line, sizeof line, "  .%-21s %s%s%s: %s\n", lua_tostring(L, -2), type ? type : "", unit ? ", " : "",
                 unit ? unit : "", meaning ? meaning : "");
        lua_pushstring(L, line);
        insert(L, lines);
    }
    lua_getfield(L, api, "methods");
    int methods = lua_gettop(L);
    size_t length = strlen(name);
    for (lua_pushnil(L); lua_next(L, methods); lua_pop(L, 1)) {
        const char *key = lua_tostring(L, -2);
        if (strncmp(key, name, length) != 0 || key[length] != ':')
            continue;
        char line[300];
        const char *purpose = text_of(L, lua_gettop(L), "purpose");
        snprintf(line, sizeof line, "  :%-21s %s\n", key + length + 1, purpose ? purpose : "");
        lua_pushstring(L, line);
        insert(L, lines);
    }
    const char *purpose = text_of(L, entry, "purpose");
    luaL_buffinit(L, &out);
    luaL_addstring(&out, name);
    luaL_addstring(&out, ": ");
    luaL_addstring(&out, purpose ? purpose : "");
    luaL_addchar(&out, '\n');
    for (lua_Integer i = 1, n = (lua_Integer)lua_rawlen(L, lines); i <= n; i++) {
        lua_rawgeti(L, lines, i);
        luaL_addvalue(&out);
    }
    luaL_pushresult(&out);
}

static int refuse_help(lua_State *L, const char *asked)
{
    static const char *const parts[] = {"functions", "methods", "nouns"};
    const char *names[200] = {NULL};
    size_t n = 0;
    for (size_t i = 0; i < 3; i++) {
        lua_getfield(L, 2, parts[i]);
        add_names(L, lua_gettop(L), names, &n, 160);
    }
    for (size_t i = 0; lw_method_list[i] != NULL && n < 199; i++)
        names[n++] = lw_method_list[i]->name;
    const char *near = lw_nearest(names, asked);
    char hint[160] = "help() lists what there is";
    if (near != NULL)
        snprintf(hint, sizeof hint, "did you mean '%s'? help() lists what there is", near);
    return lwb_refuse(L, hint, "help: there is nothing called '%s'", asked);
}

static void push_method(lua_State *L, const lw_method *method)
{
    luaL_Buffer out;
    luaL_buffinit(L, &out);
    const char *const part[] = {"lw.", method->name, "(profiles, options)\n  ", method->purpose, "\nassumes: ",
                                method->assumes, "\nsource: ", method->source, "\n"};
    for (size_t i = 0; i < sizeof part / sizeof *part; i++)
        luaL_addstring(&out, part[i] ? part[i] : "");
    add_options(&out, method->options);
    luaL_pushresult(&out);
}

/* lw.help(name): the text; at the prompt and in recipes `help "name"` prints it. A word that is both a
 * function and a noun gets both. */
static int help(lua_State *L)
{
    lua_settop(L, 1);
    push_api(L);
    if (lua_isnil(L, 1)) {
        push_list(L, 2);
        return 1;
    }
    char asked[128];
    bool is_object = lua_type(L, 1) == LUA_TUSERDATA;
    const char *text = is_object ? lwb_kind(L, 1) : lwb_text(L, 1, "help", "the name");
    snprintf(asked, sizeof asked, "%s", strncmp(text, "lw.", 3) == 0 ? text + 3 : text);
    lua_pushliteral(L, ""); /* 3 */
    bool found = false;
    if (!is_object && (find(L, 2, "functions", asked) || find(L, 2, "methods", asked))) {
        push_entry(L, asked, lua_gettop(L));
        lua_replace(L, 3);
        lua_settop(L, 3);
        found = true;
    }
    if (!is_object && lw_method_named(asked) != NULL) {
        push_method(L, lw_method_named(asked));
        lua_replace(L, 3);
        found = true;
    }
    if (find(L, 2, "nouns", asked)) {
        if (found) {
            lua_pushvalue(L, 3);
            lua_pushliteral(L, "\n");
            lua_concat(L, 2);
            lua_replace(L, 3);
        }
        push_noun(L, 2, asked, lua_gettop(L));
        lua_pushvalue(L, 3);
        lua_insert(L, -2);
        lua_concat(L, 2);
        lua_replace(L, 3);
        found = true;
    }
    if (!found)
        return refuse_help(L, asked);
    lua_settop(L, 3);
    return 1;
}

/* lw.api(): the description itself, and what the C side knows, for tools and tests. */
static int api(lua_State *L)
{
    push_api(L);
    return 1;
}

/* lw.options(function): its options as a list of {key, kind, unit, default, help, choices}. */
static int options(lua_State *L)
{
    static const char *const kinds[] = {"number", "count", "flag", "text", "choice", "list", "range", "noun"};
    const lw_option *table = lwb_options_of(lwb_text(L, 1, "options", "the function's name"));
    lua_newtable(L);
    lua_Integer n = 0;
    for (const lw_option *o = table; o != NULL && o->key != NULL; o++) {
        lua_createtable(L, 0, 6);
        const struct {
            const char *key, *text;
        } pair[] = {{"key", o->key}, {"kind", kinds[o->kind]}, {"unit", o->unit}, {"default", o->standard}, {"help", o->help}};
        for (size_t i = 0; i < sizeof pair / sizeof *pair; i++) {
            lua_pushstring(L, pair[i].text);
            lua_setfield(L, -2, pair[i].key);
        }
        if (o->kind == LW_OPTION_CHOICE) {
            lua_newtable(L);
            for (lua_Integer c = 0; o->choices[c] != NULL; c++) {
                lua_pushstring(L, o->choices[c]);
                lua_rawseti(L, -2, c + 1);
            }
            lua_setfield(L, -2, "choices");
        }
        lua_rawseti(L, -2, ++n);
    }
    return 1;
}

static const luaL_Reg functions[] = {{"help", help}, {"api", api}, {"options", options}, {NULL, NULL}};
const lwb_noun lwb_help_noun = {.name = "help", .functions = functions};
