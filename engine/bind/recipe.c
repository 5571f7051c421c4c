/* SPDX-License-Identifier: GPL-3.0-or-later */
/* recipe: lw.recipe{ title, inputs } declares what a script wants, reads it from name=value arguments,
 * and gives the job: inputs as fields, and the only ways to write. Every recipe has the inputs `out`
 * (folder, "out" if not given) and `strict` (exit code 3 if a verdict fails). */
#include "bind/inputs.h"
#include "bind/outputs.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

/* User values: values by name, declarations by name, names in order, title, files that were read. */

static bool wants_help(lua_State *L, int arguments)
{
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, arguments); i++) {
        lua_rawgeti(L, arguments, i);
        const char *text = lua_type(L, -1) == LUA_TSTRING ? lua_tostring(L, -1) : "";
        bool help = strcmp(text, "--help") == 0 || strcmp(text, "-h") == 0;
        lua_pop(L, 1);
        if (help)
            return true;
    }
    return false;
}

/* Names sorted: those that must be given first, then by the alphabet; out and strict last. */
static bool comes_before(lua_State *L, int declared, const char *a, const char *b)
{
    int place[2];
    const char *name[2] = {a, b};
    for (int i = 0; i < 2; i++) {
        bool frame = strcmp(name[i], "out") == 0 || strcmp(name[i], "strict") == 0;
        lua_getfield(L, declared, name[i]);
        lua_getfield(L, -1, "default");
        place[i] = frame ? 2 : lua_isnil(L, -1) ? 0 : 1;
        lua_pop(L, 2);
    }
    if (place[0] != place[1])
        return place[0] < place[1];
    return strcmp(a, b) < 0;
}

static void sort_names(lua_State *L, int declared, int names)
{
    lua_Integer n = 0;
    for (lua_pushnil(L); lua_next(L, declared); lua_pop(L, 1)) {
        lua_pushvalue(L, -2);
        lua_Integer at = ++n;
        for (; at > 1; at--) {
            lua_rawgeti(L, names, at - 1);
            if (!comes_before(L, declared, lua_tostring(L, -2), lua_tostring(L, -1))) {
                lua_pop(L, 1);
                break;
            }
            lua_rawseti(L, names, at);
        }
        lua_rawseti(L, names, at);
    }
}

static void declare_frame(lua_State *L, int declared)
{
    static const struct {
        const char *name, *kind, *help;
    } frame[] = {{"out", "text", "folder for what the recipe writes"},
                 {"strict", "flag", "exit code 3 if a verdict fails"}};
    for (size_t i = 0; i < 2; i++) {
        lua_createtable(L, 0, 3);
        lua_pushstring(L, frame[i].kind);
        lua_setfield(L, -2, "kind");
        if (i == 0)
            lua_pushliteral(L, "out");
        else
            lua_pushboolean(L, 0);
        lua_setfield(L, -2, "default");
        lua_pushstring(L, frame[i].help);
        lua_setfield(L, -2, "help");
        lua_setfield(L, declared, frame[i].name);
    }
}

static void print_help(lua_State *L, const char *title, int declared, int names)
{
    const lwb_home *home = lwb_home_of(L);
    printf("%s\n\nusage: linewright %s name=value ...\n", title, home->recipe[0] ? home->recipe : "recipe.lua");
    lua_Integer n = (lua_Integer)lua_rawlen(L, names);
    size_t widest = 0;
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, names, i);
        size_t width = lua_rawlen(L, -1);
        widest = width > widest ? width : widest;
        lua_pop(L, 1);
    }
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, names, i);
        const char *name = lua_tostring(L, -1);
        lua_getfield(L, declared, name);
        int at = lua_gettop(L);
        lua_getfield(L, at, "default");
        const char *given = lua_isnil(L, -1) ? NULL : luaL_tolstring(L, -1, NULL);
        const char *unit = lwb_field_text(L, at, "unit", "recipe", "");
        printf("  %-*s  %s%s%s  %s", (int)widest, name, lwb_field_text(L, at, "kind", "recipe", "text"),
               unit[0] ? ", " : "", unit, lwb_field_text(L, at, "help", "recipe", ""));
        lua_getfield(L, at, "choices");
        if (lua_istable(L, -1)) {
            printf(": ");
            for (lua_Integer c = 1; c <= (lua_Integer)lua_rawlen(L, -1); c++) {
                lua_rawgeti(L, -1, c);
                printf("%s%s", c > 1 ? ", " : "", lua_tostring(L, -1));
                lua_pop(L, 1);
            }
        }
        printf(given ? " (%s)\n" : " (must be given)\n", given);
        lua_settop(L, at - 2);
    }
    fflush(stdout);
}

/* Ends the recipe after its help: the interpreter knows the error; a stock Lua is asked to exit. */
static int end_after_help(lua_State *L)
{
    if (!lwb_home_of(L)->interpreter && lua_getglobal(L, "os") == LUA_TTABLE) {
        lua_getfield(L, -1, "exit");
        lua_pushboolean(L, 1);
        lua_pushboolean(L, 1);
        lua_call(L, 2, 0);
    }
    lwb_push_error(L, "help", "the recipe's help was asked for", NULL);
    return lua_error(L);
}

static void check_declaration(lua_State *L, int declared)
{
    static const char *const keys[] = {"kind", "default", "help", "unit", "choices", "least", "most", NULL};
    static const char *const taken[] = {"path", "write", "write_csv", "write_cif", "check", "progress", "run", "once", "each",
                                        "title", "inputs", NULL};
    for (lua_pushnil(L); lua_next(L, declared); lua_pop(L, 1)) {
        if (lua_type(L, -2) != LUA_TSTRING)
            lwb_refuse(L, "write name = { kind = ... }", "recipe: an input has no name");
        const char *name = lua_tostring(L, -2);
        for (size_t i = 0; taken[i] != NULL; i++)
            if (strcmp(taken[i], name) == 0)
                lwb_refuse(L, "choose another name", "recipe: '%s' is a method of the job, no input can be called so", name);
        lwb_want_table(L, -1, "recipe", "an input's declaration");
        int at = lua_gettop(L);
        lwb_only_keys(L, at, "recipe", keys);
        lwb_check_kind(L, at, name);
    }
}

static int make(lua_State *L)
{
    static const char *const keys[] = {"title", "inputs", NULL};
    lwb_home *home = lwb_home_of(L);
    lwb_want_table(L, 1, "recipe", "the argument");
    lua_settop(L, 1);
    luaL_checkstack(L, 40, NULL);
    if (home->progress != NULL) { /* a job before this one ended halfway */
        home->engine.progress = home->progress;
        home->progress = NULL;
    }
    lwb_only_keys(L, 1, "recipe", keys);
    const char *title = lwb_field_text(L, 1, "title", "recipe", "Recipe");
    lua_newtable(L); /* 2: declarations, a copy */
    if (lua_getfield(L, 1, "inputs") != LUA_TNIL) {
        lwb_want_table(L, -1, "recipe", "the field 'inputs'");
        int given = lua_gettop(L);
        for (lua_pushnil(L); lua_next(L, given); lua_pop(L, 1)) {
            lua_pushvalue(L, -2);
            lua_pushvalue(L, -2);
            lua_rawset(L, 2);
        }
    }
    lua_settop(L, 2);
    check_declaration(L, 2);
    declare_frame(L, 2);
    lua_newtable(L); /* 3: names in order */
    sort_names(L, 2, 3);
    int arguments = home->interpreter ? lua_getfield(L, LUA_REGISTRYINDEX, LWB_ARGUMENTS_KEY) : lua_getglobal(L, "arg");
    if (arguments != LUA_TTABLE) {
        lua_pop(L, 1);
        lua_newtable(L);
    } /* 4: arguments */
    if (home->recipe[0] == '\0') {
        lua_rawgeti(L, 4, 0);
        if (!home->interpreter && lua_type(L, -1) == LUA_TSTRING)
            snprintf(home->recipe, sizeof home->recipe, "%s", lua_tostring(L, -1));
        lua_pop(L, 1);
    }
    if (wants_help(L, 4)) {
        print_help(L, title, 2, 3);
        return end_after_help(L);
    }
    lua_newtable(L); /* 5: values */
    lua_newtable(L); /* 6: files read, {input, file, sha256} */
    lwb_read_inputs(L, 2, 3, 4, 5, 6);
    lua_getfield(L, 5, "out");
    const char *out = lua_tostring(L, -1);
    size_t n = strlen(out);
    while (n > 1 && out[n - 1] == '/')
        n--;
    if (n == 0 || n >= sizeof home->out)
        return lwb_refuse(L, "give out=DIR", "recipe: the folder '%.80s' can't be used", out);
    memcpy(home->out, out, n);
    home->out[n] = '\0';
    lua_pushlstring(L, out, n);
    lua_setfield(L, 5, "out");
    lua_getfield(L, 5, " out is default");
    home->out_is_default = lua_toboolean(L, -1);
    if (home->confined && home->inner == 0) {
        memcpy(home->fence, home->out, n + 1);
        home->engine.fence = home->fence;
        home->engine.fence_no_link = home->out_is_default;
    }
    lua_pushnil(L);
    lua_setfield(L, 5, " out is default");
    lwb_new(L, &lwb_recipe_noun, sizeof(int), 5);
    int job = lua_gettop(L);
    static const int from[] = {5, 2, 3};
    for (int i = 0; i < 3; i++) {
        lua_pushvalue(L, from[i]);
        lua_setiuservalue(L, job, i + 1);
    }
    lua_pushstring(L, title);
    lua_setiuservalue(L, job, LWB_JOB_TITLE);
    lua_pushvalue(L, 6);
    lua_setiuservalue(L, job, LWB_JOB_FILES);
    lua_pushvalue(L, job);
    lua_setfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY);
    return 1;
}

/* Upvalue 1: methods. */
static int at(lua_State *L)
{
    lwb_self(L, 1, &lwb_recipe_noun, "job");
    lua_settop(L, 2);
    lua_pushvalue(L, 2);
    if (lua_rawget(L, lua_upvalueindex(1)) != LUA_TNIL)
        return 1;
    lua_settop(L, 2);
    const char *key = lwb_text(L, 2, "job", "a field's name");
    if (strcmp(key, "title") == 0) {
        lua_getiuservalue(L, 1, LWB_JOB_TITLE);
        return 1;
    }
    lua_getiuservalue(L, 1, LWB_JOB_DECLARED);
    lua_getfield(L, 3, key);
    if (lua_isnil(L, -1)) {
        const char *names[64] = {NULL};
        lua_getiuservalue(L, 1, LWB_JOB_NAMES);
        for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -1) && i < 63; i++) {
            lua_rawgeti(L, -1, i);
            names[i - 1] = lua_tostring(L, -1); /* the list keeps it alive */
            lua_pop(L, 1);
        }
        return lwb_unknown_field(L, "job", key, names);
    }
    lua_getiuservalue(L, 1, LWB_JOB_VALUES);
    lua_getfield(L, -1, key);
    return 1;
}

/* Pushes the value on the top as text; a list as its items. */
static void push_words(lua_State *L)
{
    if (lua_type(L, -1) != LUA_TTABLE) {
        luaL_tolstring(L, -1, NULL);
        return;
    }
    int list = lua_gettop(L);
    lua_pushliteral(L, "");
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, list); i++) {
        lua_rawgeti(L, list, i);
        luaL_tolstring(L, -1, NULL);
        lua_pushfstring(L, "%s%s%s", lua_tostring(L, list + 1), i > 1 ? ", " : "", lua_tostring(L, -1));
        lua_replace(L, list + 1);
        lua_settop(L, list + 1);
    }
}

static int show(lua_State *L)
{
    lwb_self(L, 1, &lwb_recipe_noun, "tostring");
    lua_settop(L, 1);
    lua_getiuservalue(L, 1, LWB_JOB_TITLE);
    lua_getiuservalue(L, 1, LWB_JOB_NAMES);
    lua_getiuservalue(L, 1, LWB_JOB_VALUES);
    luaL_Buffer out;
    luaL_buffinit(L, &out);
    lua_pushvalue(L, 2);
    luaL_addvalue(&out);
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, 3); i++) {
        luaL_addstring(&out, "\n  ");
        lua_rawgeti(L, 3, i);
        lua_pushvalue(L, -1);
        lua_gettable(L, 4);
        push_words(L);
        lua_remove(L, -2);
        lua_pushfstring(L, "%s = %s", lua_tostring(L, -2), lua_tostring(L, -1));
        lua_replace(L, -3);
        lua_pop(L, 1);
        luaL_addvalue(&out);
    }
    luaL_pushresult(&out);
    return 1;
}

static const luaL_Reg functions[] = {{"recipe", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"path", lwb_job_path},
                                   {"write", lwb_job_write},
                                   {"write_csv", lwb_job_write_csv},
                                   {"write_cif", lwb_job_write_cif},
                                   {"check", lwb_job_check},
                                   {"progress", lwb_job_progress},
                                   {"once", lwb_job_once},
                                   {"each", lwb_job_each},
                                   {"run", lwb_job_run},
                                   {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__index", at}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_recipe_noun = {
    .name = "recipe", .functions = functions, .methods = methods, .metamethods = metamethods};
