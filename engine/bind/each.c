/* SPDX-License-Identifier: GPL-3.0-or-later */
/* job:each: a function for each item of a list, its results kept in the journal as job:once keeps them, and given in the
 * order of the list. With several workers each item that isn't known yet is done by a process of its own: a copy of this
 * one, which calls the function, says the line for the journal and ends. Only this process writes. */
#include "bind/inputs.h"
#include "bind/journal.h"
#include "bind/outputs.h"
#include "bind/workers.h"

#include <errno.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#define VERB "job:each"
#define METATABLE "linewright.each"

typedef struct each {
    lwb_workers workers;
    unsigned most;          /* that may run at a time; with 1 all is done in this process */
    lua_Integer n;          /* items */
    lua_Integer next;       /* to begin with */
    lua_Integer given;      /* to the loop */
    char broken[400];       /* why no more are begun; "" = nothing is wrong */
} each;

/* User values. FOUND has results and MESSAGES texts by place; both have nothing for what is under way, and FOUND has
 * false where a worker ended before it was done. */
enum { ITEMS = 1, KEY, FUNCTION, FOUND, MESSAGES, KEYS };

static int end_each(lua_State *L)
{
    lwb_workers_end(&((each *)lua_touserdata(L, 1))->workers);
    return 0;
}

/* Puts the value on the top into a table among the user values of the userdata at 1, and pops it. */
static void put(lua_State *L, int which, lua_Integer place)
{
    lua_getiuservalue(L, 1, which);
    lua_insert(L, -2);
    lua_rawseti(L, -2, place);
    lua_pop(L, 1);
}

static int get(lua_State *L, int which, lua_Integer place)
{
    lua_getiuservalue(L, 1, which);
    lua_rawgeti(L, -1, place);
    lua_remove(L, -2);
    return lua_type(L, -1);
}

static bool is_settled(lua_State *L, lua_Integer place)
{
    bool settled = get(L, FOUND, place) != LUA_TNIL || get(L, MESSAGES, place) != LUA_TNIL;
    lua_settop(L, 1);
    return settled;
}

/* The error on the top becomes the item's message; if the work is to stop, it goes on as an error. */
static void put_message(lua_State *L, lua_Integer place)
{
    lw_error err = LW_ERROR_NONE;
    if (lw_engine_poll(lwb_engine(L), &err) != LW_OK)
        lua_error(L);
    luaL_tolstring(L, -1, NULL);
    put(L, MESSAGES, place);
    lua_settop(L, 1);
}

/* Protected; the userdata and a place. Returns the key for the journal and, if it is there, the result. */
static int look_up(lua_State *L)
{
    lua_Integer place = lua_tointeger(L, 2);
    lua_settop(L, 1);
    lua_getiuservalue(L, 1, KEY);
    get(L, ITEMS, place);
    lua_pushinteger(L, place);
    lua_call(L, 2, 1);
    const char *given = lwb_text(L, -1, VERB, "what the function of the key gives");
    const char *key = lwb_push_journal_key(L, given, VERB);
    const char *path = lwb_push_journal(L, VERB);
    if (!lwb_push_known(L, path, key))
        lua_pushnil(L);
    lua_remove(L, -2);
    return 2;
}

/* Protected; the userdata and a place. Returns what the function gives for the item. */
static int work(lua_State *L)
{
    lua_Integer place = lua_tointeger(L, 2);
    lua_settop(L, 1);
    lua_getiuservalue(L, 1, FUNCTION);
    get(L, ITEMS, place);
    lua_pushinteger(L, place);
    lua_call(L, 2, 1);
    return 1;
}

static int call(lua_State *L, lua_CFunction function, lua_Integer place, int results)
{
    lua_pushcfunction(L, function);
    lua_pushvalue(L, 1);
    lua_pushinteger(L, place);
    return lua_pcall(L, 2, results, 0);
}

static void do_here(lua_State *L, lua_Integer place)
{
    lwb_home *home = lwb_home_of(L);
    home->in_item++;
    int status = call(L, work, place, 1);
    home->in_item--;
    if (status != LUA_OK) {
        put_message(L, place);
        return;
    }
    int value = lua_gettop(L);
    get(L, KEYS, place);
    const char *path = lwb_push_journal(L, VERB);
    lw_text line;
    lwb_journal_line(L, lua_tostring(L, value + 1), value, &line);
    lwb_journal_add(L, path, lua_tostring(L, value + 1), &line, VERB);
    put(L, FOUND, place);
    lua_settop(L, 1);
}

static void say(int pipe, const char *bytes, size_t n)
{
    while (n > 0) {
        ssize_t done = write(pipe, bytes, n);
        if (done < 0 && errno != EINTR)
            _exit(1); /* nobody listens any more */
        if (done > 0) {
            bytes += done;
            n -= (size_t)done;
        }
    }
}

/* In the worker, protected: does the item and says the journal's line. */
static int work_and_say(lua_State *L)
{
    lua_Integer place = lua_tointeger(L, 2);
    int pipe = (int)lua_tointeger(L, 3);
    lua_settop(L, 2);
    lua_pushcfunction(L, work);
    lua_pushvalue(L, 1);
    lua_pushinteger(L, place);
    lua_call(L, 2, 1);
    get(L, KEYS, place);
    lw_text line;
    lwb_journal_line(L, lua_tostring(L, -1), -2, &line);
    say(pipe, "=", 1);
    say(pipe, line.bytes, strlen(line.bytes));
    lw_text_end(&line);
    return 0;
}

/* The whole life of a worker: "=" and a line, or "!" and a message, and a newline. */
_Noreturn static void be_worker(lua_State *L, lua_Integer place, int pipe)
{
    lwb_home *home = lwb_home_of(L);
    const each *e = lua_touserdata(L, 1);
    home->in_item++;
    home->engine.progress = home->progress = NULL; /* the one bar is the parent's */
    if (home->worker_begins != NULL)
        home->worker_begins(home->host, e->most);
    lua_pushcfunction(L, work_and_say);
    lua_pushvalue(L, 1);
    lua_pushinteger(L, place);
    lua_pushinteger(L, pipe);
    if (lua_pcall(L, 3, 0, 0) != LUA_OK) {
        lw_error err = LW_ERROR_NONE;
        if (lw_engine_poll(&home->engine, &err) != LW_OK)
            _exit(1);
        size_t n = 0;
        const char *text = luaL_tolstring(L, -1, &n);
        say(pipe, "!", 1);
        say(pipe, text, n);
    }
    say(pipe, "\n", 1);
    fflush(stdout);
    _exit(fflush(stderr) == 0 ? 0 : 1);
}

static void begin_next(lua_State *L, each *e)
{
    lua_Integer place = e->next++;
    if (call(L, look_up, place, 2) != LUA_OK) {
        put_message(L, place);
        return;
    }
    bool known = !lua_isnil(L, -1);
    if (known)
        put(L, FOUND, place);
    else
        lua_pop(L, 1);
    put(L, KEYS, place);
    if (known)
        return;
    if (e->most == 1) {
        do_here(L, place);
        return;
    }
    lw_error err = LW_ERROR_NONE;
    bool inside;
    int pipe;
    fflush(stdout); /* or the worker would write it once more */
    lwb_check(L, lwb_workers_start(&e->workers, (size_t)place, &inside, &pipe, &err), &err);
    if (inside)
        be_worker(L, place, pipe);
}

/* Takes what a worker has said. */
static void take(lua_State *L, each *e, lwb_worker *worker, int code)
{
    lua_Integer place = (lua_Integer)worker->item;
    char *said = worker->said.bytes;
    size_t n = worker->said.n;
    bool whole = (code == 0 || code == -1) && n >= 2 && said[n - 1] == '\n';
    if (whole && said[0] == '=') {
        get(L, KEYS, place);
        const char *path = lwb_push_journal(L, VERB);
        lw_text line = worker->said;
        lw_text_begin(&worker->said, e->workers.engine);
        line.bytes[n - 1] = '\0';
        memmove(line.bytes, line.bytes + 1, n - 1);
        lwb_journal_add(L, path, lua_tostring(L, 2), &line, VERB);
        put(L, FOUND, place);
    } else if (whole && said[0] == '!') {
        lua_pushlstring(L, said + 1, n - 2);
        put(L, MESSAGES, place);
    } else {
        get(L, ITEMS, place);
        const char *item = luaL_tolstring(L, -1, NULL);
        if (e->broken[0] == '\0')
            snprintf(e->broken, sizeof e->broken, "the worker for item %lld (%.200s) %s %d before it was done",
                     (long long)place, item, code > 128 ? "was killed by signal" : "ended with status",
                     code > 128 ? code - 128 : code);
        lua_pushboolean(L, 0);
        put(L, FOUND, place);
    }
    lw_text_end(&worker->said);
    lua_settop(L, 1);
}

static void listen(lua_State *L, each *e)
{
    lw_error err = LW_ERROR_NONE;
    lwb_worker *ended = NULL;
    int code = 0;
    lwb_check(L, lwb_workers_listen(&e->workers, &ended, &code, &err), &err);
    if (ended == NULL)
        return;
    take(L, e, ended, code);
    lua_Integer done = e->next - 1 - (lua_Integer)e->workers.running;
    lw_engine_progress(lwb_engine(L), "items", (double)done / (double)e->n);
}

/* The iterator; the userdata is upvalue 1. */
static int step(lua_State *L)
{
    each *e = lua_touserdata(L, lua_upvalueindex(1));
    lua_settop(L, 0);
    lua_pushvalue(L, lua_upvalueindex(1));
    if (e->given == e->n)
        return 0;
    lua_Integer place = ++e->given;
    luaL_checkstack(L, 20, NULL);
    while (!is_settled(L, place)) {
        while (e->broken[0] == '\0' && e->next <= e->n && e->workers.running < e->most &&
               (e->most > 1 || e->next == place))
            begin_next(L, e);
        if (e->workers.running > 0)
            listen(L, e);
        else if (e->broken[0] != '\0')
            break;
    }
    if (e->broken[0] != '\0') {
        while (e->workers.running > 0) /* what the others do is not lost */
            listen(L, e);
        return lwb_refuse(L, "what was finished is kept: start the job again, with workers = 1 if memory is short",
                          VERB ": %s", e->broken);
    }
    lua_pushinteger(L, place);
    get(L, ITEMS, place);
    get(L, FOUND, place);
    get(L, MESSAGES, place);
    return 4;
}

/* workers = 4, "4" or "auto". */
static unsigned read_workers(lua_State *L, int options)
{
    static const char *const keys[] = {"workers", NULL};
    if (lua_isnoneornil(L, options))
        return 1;
    lwb_want_table(L, options, VERB, "the options");
    lwb_only_keys(L, options, VERB, keys);
    int type = lua_getfield(L, options, "workers");
    if (type == LUA_TNIL)
        return 1;
    if (type == LUA_TSTRING && strcmp(lua_tostring(L, -1), "auto") == 0) {
        unsigned cores = lwb_usable_cores();
        return cores < LWB_WORKERS_MOST ? cores : LWB_WORKERS_MOST;
    }
    int whole = 0;
    lua_Integer n = lua_tointegerx(L, -1, &whole);
    if (!whole || n < 1 || n > LWB_WORKERS_MOST)
        lwb_refuse(L, "give a whole number from 1 to 64, or \"auto\"", VERB ": there can't be '%.40s' workers",
                   luaL_tolstring(L, -1, NULL));
    return (unsigned)n;
}

/* for place, item, result, message in job:each(items, key, f, { workers = 1 }) do ... end */
int lwb_job_each(lua_State *L)
{
    lwb_self(L, 1, &lwb_recipe_noun, VERB);
    lwb_want_table(L, 2, VERB, "the items");
    luaL_checktype(L, 3, LUA_TFUNCTION);
    luaL_checktype(L, 4, LUA_TFUNCTION);
    lua_settop(L, 5);
    if (lwb_home_of(L)->in_item > 0)
        return lwb_refuse(L, NULL, VERB ": a function given to it can't use it");
    unsigned most = read_workers(L, 5);
    lua_settop(L, 4);
    each *e = lua_newuserdatauv(L, sizeof *e, KEYS);
    memset(e, 0, sizeof *e);
    lwb_workers_begin(&e->workers, lwb_engine(L));
    e->most = most;
    e->n = (lua_Integer)lua_rawlen(L, 2);
    e->next = 1;
    if (luaL_newmetatable(L, METATABLE)) {
        lua_pushcfunction(L, end_each);
        lua_setfield(L, -2, "__gc");
        lua_pushcfunction(L, end_each);
        lua_setfield(L, -2, "__close"); /* a loop that is left early ends its workers */
        lua_pushliteral(L, METATABLE);
        lua_setfield(L, -2, "__metatable");
    }
    lua_setmetatable(L, -2);
    lua_createtable(L, (int)(e->n < 1000 ? e->n : 1000), 0); /* a copy: the list may change meanwhile */
    for (lua_Integer i = 1; i <= e->n; i++) {
        lua_rawgeti(L, 2, i);
        lua_rawseti(L, -2, i);
    }
    lua_setiuservalue(L, 5, ITEMS);
    lua_pushvalue(L, 3);
    lua_setiuservalue(L, 5, KEY);
    lua_pushvalue(L, 4);
    lua_setiuservalue(L, 5, FUNCTION);
    for (int i = FOUND; i <= KEYS; i++) {
        lua_newtable(L);
        lua_setiuservalue(L, 5, i);
    }
    lua_pushvalue(L, 5);
    lua_pushcclosure(L, step, 1);
    lua_pushnil(L);
    lua_pushinteger(L, 0);
    lua_pushvalue(L, 5);
    return 4;
}
