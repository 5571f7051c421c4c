/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The journal of a long job: out/journal.jsonl, one line a finished step, appended and flushed. A job
 * that was killed goes on where it was when it is started again with the same recipe. */
#include "bind/journal.h"

#include "bind/inputs.h"
#include "bind/outputs.h"
#include "record/file.h"
#include "record/json.h"

#include <stdio.h>
#include <string.h>
#include <sys/stat.h>

#define JOURNAL_MOST ((size_t)256 << 20)
#define KEY_MOST 400

/* Finds the value of a key in the journal; later lines count. A line that was cut by a crash is passed over.
 * Everything read lives in the arena. */
static const lw_node *look_up(lw_arena *arena, char *bytes, const char *key, lw_error *err)
{
    const lw_node *found = NULL;
    char *next = NULL;
    for (char *line = bytes; line != NULL && *line != '\0'; line = next) {
        char *end = strchr(line, '\n');
        if (end == NULL)
            break; /* without its newline a line isn't whole */
        *end = '\0';
        next = end + 1;
        lw_error each = LW_ERROR_NONE;
        lw_node *entry = NULL;
        /* the key stands first in a line, so most lines are passed over unread */
        if (strstr(line, key) == NULL || lw_json_read(arena, line, (size_t)(end - line), NULL, &entry, &each) != LW_OK) {
            if (each.status == LW_OUT_OF_MEMORY)
                *err = each;
            continue;
        }
        if (strcmp(lw_node_text(entry, "key", ""), key) == 0 && lw_node_get(entry, "value") != NULL)
            found = lw_node_get(entry, "value");
    }
    return found;
}

/* JSON on one line: within its strings there are no newlines, so each newline and the blanks after it go. */
static void flatten(char *text)
{
    char *to = text;
    for (const char *from = text; *from != '\0'; from++) {
        if (*from == '\n') {
            while (from[1] == ' ')
                from++;
            continue;
        }
        *to++ = *from;
    }
    *to = '\0';
}

bool lwb_push_known(lua_State *L, const char *path, const char *key)
{
    lw_error err = LW_ERROR_NONE;
    struct stat info;
    if (lstat(path, &info) != 0)
        return false;
    lwb_tree *tree = lwb_new_tree(L);
    char *bytes = NULL;
    size_t size = 0;
    lwb_check(L, lw_read_file(&tree->arena, path, JOURNAL_MOST, &bytes, &size, &err), &err);
    const lw_node *found = look_up(&tree->arena, bytes, key, &err);
    lwb_check(L, LW_OK, &err);
    if (found == NULL) {
        lua_pop(L, 1);
        return false;
    }
    /* a copy of its own: the bytes of the whole journal need not stay */
    lwb_tree *own = lwb_new_tree(L);
    lw_add_copy(own->root, "value", found, &err);
    lwb_check(L, LW_OK, &err);
    own->node = own->root->first;
    lua_remove(L, -2);
    return true;
}

const char *lwb_push_journal(lua_State *L, const char *verb)
{
    return lwb_push_out_path(L, "journal.jsonl", verb);
}

const char *lwb_push_journal_key(lua_State *L, const char *given, const char *verb)
{
    if (strlen(given) > KEY_MOST || strpbrk(given, "\"\\\n") != NULL)
        lwb_refuse(L, "use letters, digits and hashes", "%s: the key can't be used", verb);
    return lua_pushfstring(L, "%s %s %s", LW_VERSION, lwb_home_of(L)->recipe_hash, given);
}

void lwb_journal_line(lua_State *L, const char *key, int value, lw_text *line)
{
    lw_error err = LW_ERROR_NONE;
    value = lua_absindex(L, value);
    lwb_tree *entry = lwb_new_tree(L);
    lw_add_text(entry->root, "key", key, &err);
    lwb_check(L, LW_OK, &err);
    lwb_add_value(L, entry->root, "value", value);
    lw_text_begin(line, lwb_engine(L));
    lw_status status = lw_json_write(entry->root, line, &err);
    if (status != LW_OK)
        lw_text_end(line);
    lwb_check(L, status, &err);
    flatten(line->bytes);
    lua_pop(L, 1);
}

void lwb_journal_add(lua_State *L, const char *path, const char *key, lw_text *line, const char *verb)
{
    lw_error err = LW_ERROR_NONE;
    lw_status status = lw_append_line(lwb_engine(L), path, line->bytes, &err);
    lw_text_end(line);
    lwb_check(L, status, &err);
    if (!lwb_push_known(L, path, key))
        lwb_refuse(L, NULL, "%s: %s can't be read back", verb, path);
}

/* job:once(key, f): what f gave when the key was first done, or what it gives now. f returns a result or
 * a table. The key should name all that the step depends on besides the recipe, such as hashes. */
int lwb_job_once(lua_State *L)
{
    lwb_self(L, 1, &lwb_recipe_noun, "job:once");
    const char *given = lwb_text(L, 2, "job:once", "the key");
    luaL_checktype(L, 3, LUA_TFUNCTION);
    lua_settop(L, 3);
    const char *key = lwb_push_journal_key(L, given, "job:once");
    const char *path = lwb_push_journal(L, "job:once");
    if (lwb_push_known(L, path, key))
        return 1;
    lua_pushvalue(L, 3);
    lua_call(L, 0, 1);
    lw_text line;
    lwb_journal_line(L, key, -1, &line);
    lwb_journal_add(L, path, key, &line, "job:once");
    return 1;
}
