/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "bind/inputs.h"

#include "base/sha256.h"
#include "bind/outputs.h"
#include "record/file.h"

#include <errno.h>
#include <fcntl.h>
#include <glob.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define INPUT_FILES_MOST 20000

static const char *const kinds[] = {"file", "name", "text", "number", "list", "folder", "flag", "glob", NULL};

void lwb_check_kind(lua_State *L, int index, const char *name)
{
    const char *kind = lwb_field_text(L, index, "kind", "recipe", "text");
    for (size_t i = 0; kinds[i] != NULL; i++)
        if (strcmp(kinds[i], kind) == 0)
            return;
    const char *near = lw_nearest(kinds, kind);
    char hint[160];
    snprintf(hint, sizeof hint, "%s%s%schoose from: file, name, text, number, list, folder, flag, glob",
             near ? "did you mean '" : "", near ? near : "", near ? "'? " : "");
    lwb_refuse(L, hint, "recipe: input '%s' can't be of kind '%s'", name, kind);
}

void lwb_hash_file(lua_State *L, const char *path, char hex[65])
{
    /* in pieces, so that a large file takes no room; nothing in the loop can raise */
    unsigned char piece[65536];
    lw_sha256 hash;
    int file = open(path, O_RDONLY | O_CLOEXEC);
    ssize_t n = -1;
    if (file >= 0) {
        lw_sha256_begin(&hash);
        do {
            n = read(file, piece, sizeof piece);
            if (n > 0)
                lw_sha256_add(&hash, piece, (size_t)n);
        } while (n > 0 || (n < 0 && errno == EINTR));
        close(file);
    }
    if (n < 0) {
        lw_error err = LW_ERROR_NONE;
        lw_fail(&err, LW_IO, "check the path", "can't read %s: %s", path, strerror(errno));
        lwb_raise(L, &err);
    }
    lw_sha256_end(&hash, hex);
}

static void add_file(lua_State *L, int files, const char *input, const char *path)
{
    char hex[65];
    lwb_hash_file(L, path, hex);
    lua_createtable(L, 0, 3);
    lua_pushstring(L, input);
    lua_setfield(L, -2, "input");
    lua_pushstring(L, path);
    lua_setfield(L, -2, "file");
    lua_pushstring(L, hex);
    lua_setfield(L, -2, "sha256");
    lua_rawseti(L, files, (lua_Integer)lua_rawlen(L, files) + 1);
}

/* Pushes the list of files of the running job, or returns false. */
static bool push_files(lua_State *L)
{
    luaL_checkstack(L, 8, NULL);
    if (lua_getfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY) != LUA_TUSERDATA)
        return false;
    lua_getiuservalue(L, -1, LWB_JOB_FILES);
    return true;
}

/* Whether the file is in the list, with another hash than this one if it isn't NULL. */
static bool is_listed(lua_State *L, const char *path, const char *but)
{
    int top = lua_gettop(L);
    bool found = false;
    if (push_files(L)) {
        int files = lua_gettop(L);
        for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, files) && !found; i++) {
            lua_rawgeti(L, files, i);
            lua_getfield(L, -1, "file");
            lua_getfield(L, -2, "sha256");
            found = strcmp(lua_tostring(L, -2), path) == 0 && (but == NULL || strcmp(lua_tostring(L, -1), but) != 0);
            lua_settop(L, files);
        }
    }
    lua_settop(L, top);
    return found;
}

bool lwb_is_input(lua_State *L, const char *path)
{
    return is_listed(L, path, NULL);
}

void lwb_check_unchanged(lua_State *L, const char *path, const char *hash, const char *verb)
{
    if (hash[0] != '\0' && is_listed(L, path, hash))
        lwb_refuse(L, "start the job again once nobody writes to it", "%s: %s has changed since the job began", verb, path);
}

static void want_file(lua_State *L, const char *name, const char *path)
{
    struct stat info;
    if (stat(path, &info) != 0)
        lwb_refuse(L, "check the path", "input '%s': can't open %s: %s", name, path, strerror(errno));
    if (!S_ISREG(info.st_mode))
        lwb_refuse(L, "give a plain file", "input '%s': %s is not a file", name, path);
    if (access(path, R_OK) != 0)
        lwb_refuse(L, "ask for permission to read it", "input '%s': can't open %s: %s", name, path, strerror(errno));
}

static void push_number(lua_State *L, const char *name, const char *text, int declaration)
{
    const char *unit = lwb_field_text(L, declaration, "unit", "recipe", "");
    char *end = NULL;
    double value = strtod(text, &end);
    while (end != text && *end == ' ')
        end++;
    if (end == text || !isfinite(value) || (*end != '\0' && strcmp(end, unit) != 0))
        lwb_refuse(L, unit[0] ? "give a number, with or without the unit" : "give a number", "input '%s': '%.80s' is not a number%s%s%s",
                   name, text, unit[0] ? " (" : "", unit, unit[0] ? ")" : "");
    double least = lwb_field_number(L, declaration, "least", "recipe", -INFINITY);
    double most = lwb_field_number(L, declaration, "most", "recipe", INFINITY);
    if (value < least || value > most)
        lwb_refuse(L, "give a value inside", "input '%s': %g is outside %g to %g%s%s", name, value, least, most,
                   unit[0] ? " " : "", unit);
    lwb_push_number(L, value);
}

static void push_flag(lua_State *L, const char *name, const char *text)
{
    static const char *const yes[] = {"true", "yes", "on", "1"}, *const no[] = {"false", "no", "off", "0"};
    for (size_t i = 0; i < 4; i++)
        if (strcmp(text, yes[i]) == 0 || strcmp(text, no[i]) == 0) {
            lua_pushboolean(L, strcmp(text, yes[i]) == 0);
            return;
        }
    lwb_refuse(L, "give true or false", "input '%s': '%.80s' is neither true nor false", name, text);
}

/* "a, b,c" as a list; blanks around the items don't count. */
static void push_list(lua_State *L, const char *text)
{
    lua_newtable(L);
    lua_Integer n = 0;
    while (*text != '\0') {
        size_t length = strcspn(text, ","), from = 0, to = length;
        while (from < to && text[from] == ' ')
            from++;
        while (to > from && text[to - 1] == ' ')
            to--;
        if (to > from) {
            lua_pushlstring(L, text + from, to - from);
            lua_rawseti(L, -2, ++n);
        }
        text += length + (text[length] == ',');
    }
}

/* Adds the paths that fit a pattern, sorted, to the list on top; glob's memory is copied into the arena before any Lua
 * call. What is a file, or has nothing of a pattern, is taken as it stands. */
static void add_fitting(lua_State *L, const char *name, const char *pattern)
{
    lw_error err = LW_ERROR_NONE;
    struct stat info;
    int list = lua_gettop(L);
    lua_Integer there = (lua_Integer)lua_rawlen(L, list);
    if (stat(pattern, &info) == 0 || strpbrk(pattern, "*?[") == NULL) {
        lua_pushstring(L, pattern);
        lua_rawseti(L, list, there + 1);
        return;
    }
    lw_arena *arena = lwb_scratch(L);
    glob_t found = {0};
    int status = glob(pattern, 0, NULL, &found);
    size_t n = status == 0 ? found.gl_pathc : 0;
    char **paths = n <= INPUT_FILES_MOST ? lw_arena_take(arena, n, sizeof *paths, &err) : NULL;
    for (size_t i = 0; paths != NULL && i < n; i++)
        paths[i] = lw_arena_text(arena, found.gl_pathv[i], &err);
    globfree(&found);
    lwb_check(L, LW_OK, &err);
    if (n == 0)
        lwb_refuse(L, "check the pattern, and put it in quotes", "input '%s': no file fits '%.200s'", name, pattern);
    if (n > INPUT_FILES_MOST)
        lwb_refuse(L, "choose fewer", "input '%s': %zu files fit, at most %d are taken", name, n, INPUT_FILES_MOST);
    for (size_t i = 0; i < n; i++) {
        lua_pushstring(L, paths[i]);
        lua_rawseti(L, list, there + (lua_Integer)i + 1);
    }
    lua_settop(L, list);
}

/* A pattern, a file, or several of them with commas between. */
static void push_glob(lua_State *L, const char *name, const char *text)
{
    struct stat info;
    if (stat(text, &info) == 0 || strchr(text, ',') == NULL) {
        lua_newtable(L);
        add_fitting(L, name, text);
        return;
    }
    push_list(L, text);
    lua_newtable(L);
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -2); i++) {
        lua_rawgeti(L, -2, i);
        lua_pushvalue(L, -2);
        add_fitting(L, name, lua_tostring(L, -2)); /* the list keeps the text alive */
        lua_pop(L, 2);
    }
    lua_remove(L, -2);
    if (lua_rawlen(L, -1) == 0)
        lwb_refuse(L, "give a file or a pattern", "input '%s' is empty", name);
    if (lua_rawlen(L, -1) > INPUT_FILES_MOST)
        lwb_refuse(L, "choose fewer", "input '%s': more than %d files", name, INPUT_FILES_MOST);
}

static void check_choice(lua_State *L, const char *name, const char *text, int declaration)
{
    if (lua_getfield(L, declaration, "choices") == LUA_TTABLE) {
        const char *words[65] = {NULL};
        for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -1) && i <= 64; i++) {
            lua_rawgeti(L, -1, i);
            words[i - 1] = lwb_text(L, -1, "recipe", "a choice");
            lua_pop(L, 1);
            if (strcmp(words[i - 1], text) == 0) {
                lua_pop(L, 1);
                return;
            }
        }
        char hint[400];
        const char *near = lw_nearest(words, text);
        size_t used = (size_t)snprintf(hint, sizeof hint, "%s%s%schoose from: ", near ? "did you mean '" : "",
                                       near ? near : "", near ? "'? " : "");
        for (size_t i = 0; words[i] != NULL && used + 1 < sizeof hint; i++)
            used += (size_t)snprintf(hint + used, sizeof hint - used, "%s%s", i > 0 ? ", " : "", words[i]);
        lwb_refuse(L, hint, "input '%s': '%.80s' is none of its words", name, text);
    }
    lua_pop(L, 1);
}

/* Pushes the value of one input from its text. */
static void push_input(lua_State *L, const char *name, const char *text, int declaration, int files)
{
    const char *kind = lwb_field_text(L, declaration, "kind", "recipe", "text");
    check_choice(L, name, text, declaration);
    if (strcmp(kind, "number") == 0)
        push_number(L, name, text, declaration);
    else if (strcmp(kind, "flag") == 0)
        push_flag(L, name, text);
    else if (strcmp(kind, "list") == 0)
        push_list(L, text);
    else if (strcmp(kind, "glob") == 0) {
        push_glob(L, name, text);
        for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -1); i++) {
            lua_rawgeti(L, -1, i);
            want_file(L, name, lua_tostring(L, -1));
            add_file(L, files, name, lua_tostring(L, -1));
            lua_pop(L, 1);
        }
    } else if (strcmp(kind, "file") == 0) {
        want_file(L, name, text);
        add_file(L, files, name, text);
        lua_pushstring(L, text);
    } else if (strcmp(kind, "folder") == 0) {
        struct stat info;
        if (stat(text, &info) != 0 || !S_ISDIR(info.st_mode))
            lwb_refuse(L, "check the path", "input '%s': %s is no folder", name, text);
        lua_pushstring(L, text);
    } else {
        if (text[0] == '\0')
            lwb_refuse(L, "write name=value", "input '%s' is empty", name);
        lua_pushstring(L, text);
    }
}

static void unknown_input(lua_State *L, const char *name, int names)
{
    const char *known[65] = {NULL};
    char list[300] = "", hint[400];
    size_t used = 0;
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, names) && i <= 64; i++) {
        lua_rawgeti(L, names, i);
        known[i - 1] = lua_tostring(L, -1);
        lua_pop(L, 1);
        if (used + 1 < sizeof list)
            used += (size_t)snprintf(list + used, sizeof list - used, "%s%s", i > 1 ? ", " : "", known[i - 1]);
    }
    const char *near = lw_nearest(known, name);
    snprintf(hint, sizeof hint, "%s%s%sinputs: %s", near ? "did you mean '" : "", near ? near : "", near ? "'? " : "", list);
    lwb_refuse(L, hint, "the recipe has no input '%.80s'", name);
}

void lwb_read_inputs(lua_State *L, int declared, int names, int arguments, int values, int files)
{
    lua_Integer n = (lua_Integer)lua_rawlen(L, arguments);
    int top = lua_gettop(L);
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, arguments, i);
        const char *text = lwb_text(L, -1, "recipe", "an argument");
        const char *equals = strchr(text, '=');
        if (equals == NULL)
            lwb_refuse(L, "write name=value; --help lists the names", "'%.80s' is no input", text);
        const char *name = lua_pushlstring(L, text, (size_t)(equals - text));
        lua_getfield(L, declared, name);
        if (lua_isnil(L, -1))
            unknown_input(L, name, names);
        lua_getfield(L, values, name);
        if (!lua_isnil(L, -1))
            lwb_refuse(L, "give it once", "input '%s' is given twice", name);
        push_input(L, name, equals + 1, top + 3, files);
        lua_setfield(L, values, name);
        lua_settop(L, top);
    }
    n = (lua_Integer)lua_rawlen(L, names);
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, names, i);
        const char *name = lua_tostring(L, -1);
        lua_getfield(L, values, name);
        lua_getfield(L, declared, name);
        int declaration = lua_gettop(L);
        int type = lua_getfield(L, declaration, "default");
        if (lua_isnil(L, declaration - 1) && type == LUA_TNIL) {
            char usage[200];
            snprintf(usage, sizeof usage, "give %.60s=%s: %.100s", name,
                     strcmp(lwb_field_text(L, declaration, "kind", "recipe", "text"), "file") == 0 ? "FILE" : "VALUE",
                     lwb_field_text(L, declaration, "help", "recipe", ""));
            lwb_refuse(L, usage, "the input '%s' is missing", name);
        }
        if (lua_isnil(L, declaration - 1)) {
            /* a default in words is read like an argument; "" means: not given */
            if (type == LUA_TSTRING && lua_rawlen(L, -1) == 0)
                lua_pushboolean(L, 0);
            else if (type == LUA_TSTRING)
                push_input(L, name, lua_tostring(L, -1), declaration, files);
            else
                lua_pushvalue(L, -1);
            lua_setfield(L, values, name);
            if (strcmp(name, "out") == 0) {
                lua_pushboolean(L, 1);
                lua_setfield(L, values, " out is default");
            }
        }
        lua_settop(L, top);
    }
}
