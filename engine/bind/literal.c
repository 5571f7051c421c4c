/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Loading and finding Lua literals. A literal comes from anywhere, so it runs with nothing: no
 * globals, no string methods, few steps, little memory. */
#include "bind/standards.h"

#include "record/file.h"

#include <ctype.h>
#include <dirent.h>
#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>

#define LITERAL_MOST ((size_t)1 << 20) /* bytes of a file */
#define STEPS_MOST 20000               /* instructions; the largest of ours takes about 200 */
#define HOOK_EVERY 16
#define GROWTH_MOST ((size_t)32 << 20) /* bytes that it may take while it runs */
#define NAMES_MOST 400

static const char guard_key = 'g';

/* Counts the steps of a literal; the count is kept in the registry. */
static void guard(lua_State *L, lua_Debug *frame)
{
    (void)frame;
    lua_rawgetp(L, LUA_REGISTRYINDEX, &guard_key);
    lua_Integer steps = lua_tointeger(L, -1) + HOOK_EVERY;
    lua_pop(L, 1);
    lua_pushinteger(L, steps);
    lua_rawsetp(L, LUA_REGISTRYINDEX, &guard_key);
    if (steps > STEPS_MOST)
        luaL_error(L, "a data file may only hold constants; this one computes too long");
}

/* The state's own allocator with a limit: few steps are enough to double a string into gigabytes. */
typedef struct purse {
    lua_Alloc allocate;
    void *user;
    size_t left;
} purse;

static void *allocate_limited(void *user, void *block, size_t old_size, size_t new_size)
{
    purse *p = user;
    size_t old = block != NULL ? old_size : 0; /* without a block it is the kind of object */
    if (new_size > old && new_size - old > p->left)
        return NULL;
    void *made = p->allocate(p->user, block, old_size, new_size);
    if (made != NULL || new_size == 0)
        p->left = new_size > old ? p->left - (new_size - old) : p->left + (old - new_size);
    return made;
}

/* Runs the chunk on the top of the stack in a thread of its own with the guard; leaves its result. */
static int run_guarded(lua_State *L)
{
    lua_State *thread = lua_newthread(L); /* chunk, thread */
    lua_pushinteger(L, 0);
    lua_rawsetp(L, LUA_REGISTRYINDEX, &guard_key);
    lua_sethook(thread, guard, LUA_MASKCOUNT, HOOK_EVERY);
    lua_pushvalue(L, 1);
    lua_xmove(L, thread, 1);
    int n = 0, status = lua_resume(thread, L, 0, &n);
    if (status == LUA_ERRMEM)
        return luaL_error(L, "a data file may only hold constants; this one needs too much memory");
    if (status != LUA_OK) {
        if (lua_status(thread) == LUA_YIELD)
            return luaL_error(L, "a data file may only hold constants");
        lua_xmove(thread, L, 1);
        return lua_error(L);
    }
    lua_settop(thread, n > 0 ? lua_gettop(thread) - n + 1 : 0);
    if (n == 0)
        return luaL_error(L, "a data file must return a table");
    lua_xmove(thread, L, 1);
    return 1;
}

void lwb_load_literal(lua_State *L, const char *path)
{
    lw_error err = LW_ERROR_NONE;
    char *bytes = NULL;
    size_t size = 0;
    lw_arena *scratch = lwb_scratch(L);
    lwb_check(L, lw_read_file(scratch, path, LITERAL_MOST, &bytes, &size, &err), &err);
    lua_pushcfunction(L, run_guarded);
    lua_pushfstring(L, "@%s", path);
    const char *chunk = lua_tostring(L, -1);
    int status = luaL_loadbufferx(L, bytes, size, chunk, "t");
    lua_remove(L, -2);
    if (status == LUA_OK) {
        lua_newtable(L);
        lua_setupvalue(L, -2, 1); /* an empty environment */
        /* without the metatable of strings a literal can't call string methods */
        lua_pushliteral(L, "");
        if (!lua_getmetatable(L, -1))
            lua_pushnil(L);
        lua_replace(L, -2); /* function, chunk, metatable */
        lua_insert(L, -3);
        lua_pushliteral(L, "");
        lua_pushnil(L);
        lua_setmetatable(L, -2);
        lua_pop(L, 1);
        purse limited = {.left = GROWTH_MOST};
        limited.allocate = lua_getallocf(L, &limited.user);
        lua_setallocf(L, allocate_limited, &limited);
        status = lua_pcall(L, 1, 1, 0);
        lua_setallocf(L, limited.allocate, limited.user);
        lua_pushliteral(L, "");
        lua_pushvalue(L, -3);
        lua_setmetatable(L, -2);
        lua_pop(L, 1);
        lua_remove(L, -2);
    } else
        lua_remove(L, -2);
    if (status != LUA_OK) {
        const char *text = lua_type(L, -1) == LUA_TSTRING ? lua_tostring(L, -1) : "can't be read";
        bool placed = strncmp(text, path, strlen(path)) == 0; /* Lua's own messages carry file:line */
        lwb_refuse(L, "a data file holds `return { ... }` with constants", "%s%s%s", placed ? "" : path,
                   placed ? "" : ": ", text);
    }
    if (lua_type(L, -1) != LUA_TTABLE)
        lwb_refuse(L, "a data file holds `return { ... }` with constants", "%s: returns a %s, not a table", path,
                   luaL_typename(L, -1));
    lua_remove(L, -2); /* scratch */
}

void lwb_find_standards(const char *file, char *out, size_t size)
{
    char folder[LWB_PATH_MOST], path[LWB_PATH_MOST + 64];
    snprintf(folder, sizeof folder, "%s", file);
    char *slash = strrchr(folder, '/');
    if (slash != NULL)
        *slash = '\0';
    else
        snprintf(folder, sizeof folder, ".");
    static const char *const up[] = {"", "/..", "/../..", "/../../..", "/../../../.."};
    for (size_t i = 0; i < sizeof up / sizeof *up; i++) {
        struct stat info;
        snprintf(path, sizeof path, "%s%s/share/linewright/standards", folder, up[i]);
        if (stat(path, &info) == 0 && S_ISDIR(info.st_mode) && strlen(path) < size) {
            snprintf(out, size, "%s", path);
            return;
        }
    }
    out[0] = '\0';
}

/* Lower case without blanks, '_' and '-', so that "Cu Ka", "cu_ka" and "CuKa" are one. */
static void plain(const char *name, char *out, size_t size)
{
    size_t n = 0;
    for (; *name != '\0' && n + 1 < size; name++)
        if (*name != ' ' && *name != '_' && *name != '-')
            out[n++] = (char)tolower((unsigned char)*name);
    out[n] = '\0';
}

static bool alike(const char *a, const char *b)
{
    char pa[128], pb[128];
    plain(a, pa, sizeof pa);
    plain(b, pb, sizeof pb);
    return strcmp(pa, pb) == 0;
}

/* Stems of the *.lua files in a folder, in the arena, sorted. */
static int by_name(const void *a, const void *b)
{
    return strcmp(*(const char *const *)a, *(const char *const *)b);
}

static lw_status list_folder(lw_arena *arena, const char *folder, const char **names, size_t *n, lw_error *err)
{
    *n = 0;
    DIR *open = opendir(folder);
    if (open == NULL)
        return lw_fail(err, LW_IO, "give the folder with --standards=DIR", "can't read the folder %s: %s", folder,
                       strerror(errno));
    for (struct dirent *entry = readdir(open); entry != NULL && *n + 1 < NAMES_MOST; entry = readdir(open)) {
        size_t length = strlen(entry->d_name);
        if (length <= 4 || strcmp(entry->d_name + length - 4, ".lua") != 0 || entry->d_name[0] == '.')
            continue;
        char *stem = lw_arena_text(arena, entry->d_name, err);
        if (stem == NULL)
            break;
        stem[length - 4] = '\0';
        names[(*n)++] = stem;
    }
    closedir(open);
    names[*n] = NULL;
    qsort(names, *n, sizeof *names, by_name);
    return err->status;
}

static void load_named(lua_State *L, const char *folder, const char *stem)
{
    char path[LWB_PATH_MOST + 256];
    snprintf(path, sizeof path, "%s/%s.lua", folder, stem);
    lwb_load_literal(L, path);
}

static bool has_alias(lua_State *L, const char *name)
{
    bool found = false;
    lua_getfield(L, -1, "aliases");
    for (lua_Integer i = 1; lua_istable(L, -1) && !found && i <= (lua_Integer)lua_rawlen(L, -1); i++) {
        lua_rawgeti(L, -1, i);
        found = lua_type(L, -1) == LUA_TSTRING && alike(lua_tostring(L, -1), name);
        lua_pop(L, 1);
    }
    lua_pop(L, 1);
    return found;
}

/* The nearest name or alias to what was asked for, comparing without case, blanks and dashes; the
 * literals are read once more, since this only happens on the way to an error. */
static void refuse_name(lua_State *L, const char *verb, const char *folder, const char *kind, const char *name,
                        const char *const *stems, size_t n)
{
    lw_error err = LW_ERROR_NONE;
    lw_arena *arena = lwb_scratch(L);
    const char **words = lw_arena_take(arena, 8 * NAMES_MOST, sizeof *words, &err);
    const char **owner = lw_arena_take(arena, 8 * NAMES_MOST, sizeof *owner, &err);
    lwb_check(L, LW_OK, &err);
    size_t n_words = 0;
    char asked[128], word[128];
    plain(name, asked, sizeof asked);
    for (size_t i = 0; i < n; i++) {
        load_named(L, folder, stems[i]);
        plain(stems[i], word, sizeof word);
        owner[n_words] = stems[i];
        words[n_words++] = lw_arena_text(arena, word, &err);
        lua_getfield(L, -1, "aliases");
        for (lua_Integer a = 1; lua_istable(L, -1) && a <= (lua_Integer)lua_rawlen(L, -1) && n_words < 8 * NAMES_MOST - 2;
             a++) {
            lua_rawgeti(L, -1, a);
            if (lua_type(L, -1) == LUA_TSTRING) {
                plain(lua_tostring(L, -1), word, sizeof word);
                owner[n_words] = stems[i];
                words[n_words++] = lw_arena_text(arena, word, &err);
            }
            lua_pop(L, 1);
        }
        lua_pop(L, 2);
        lwb_check(L, LW_OK, &err);
    }
    const char *near = lw_nearest(words, asked);
    for (size_t i = 0; near != NULL && i < n_words; i++)
        if (words[i] == near) {
            near = owner[i];
            break;
        }
    luaL_Buffer list;
    luaL_buffinit(L, &list);
    if (near != NULL) {
        luaL_addstring(&list, "did you mean '");
        luaL_addstring(&list, near);
        luaL_addstring(&list, "'? ");
    }
    luaL_addstring(&list, "there are: ");
    for (size_t i = 0; i < n; i++) {
        luaL_addstring(&list, i > 0 ? ", " : "");
        luaL_addstring(&list, stems[i]);
    }
    luaL_addstring(&list, "; or give the path of a file");
    luaL_pushresult(&list);
    lwb_refuse(L, lua_tostring(L, -1), "%s: no %s is called '%s'", verb, kind, name);
}

void lwb_find_literal(lua_State *L, const char *kind, const char *verb, const char *name)
{
    size_t length = strlen(name);
    luaL_checkstack(L, 20, NULL);
    if (strchr(name, '/') != NULL || (length > 4 && strcmp(name + length - 4, ".lua") == 0)) {
        lwb_load_literal(L, name);
        return;
    }
    const lwb_home *home = lwb_home_of(L);
    if (home->standards[0] == '\0')
        lwb_refuse(L, "start with --standards=DIR, or give the path of a file", "%s: the folder of standards was not found",
                   verb);
    int top = lua_gettop(L);
    lw_error err = LW_ERROR_NONE;
    lw_arena *arena = lwb_scratch(L);
    const char **stems = lw_arena_take(arena, NAMES_MOST + 1, sizeof *stems, &err);
    lwb_check(L, LW_OK, &err);
    char folder[LWB_PATH_MOST + 32];
    snprintf(folder, sizeof folder, "%s/%s", home->standards, kind);
    size_t n = 0;
    lwb_check(L, list_folder(arena, folder, stems, &n, &err), &err);
    for (int pass = 0; pass < 2; pass++)
        for (size_t i = 0; i < n; i++) {
            if (pass == 0 && !alike(stems[i], name))
                continue;
            load_named(L, folder, stems[i]);
            if (pass == 0 || has_alias(L, name)) {
                lua_replace(L, top + 1);
                lua_settop(L, top + 1);
                return;
            }
            lua_pop(L, 1);
        }
    refuse_name(L, verb, folder, strcmp(kind, "reference") == 0 ? "standard" : kind, name, stems, n);
}

void lwb_copy_text(lua_State *L, int index, const char *key, const char *verb, bool needed, char *out, size_t size)
{
    const char *text = lwb_field_text(L, index, key, verb, NULL);
    if (text == NULL && needed)
        lwb_refuse(L, "add it to the table", "%s: the field '%s' is missing", verb, key);
    if (text != NULL && strlen(text) >= size)
        lwb_refuse(L, "shorten it", "%s: '%s' is longer than %zu bytes", verb, key, size - 1);
    snprintf(out, size, "%s", text ? text : "");
}
