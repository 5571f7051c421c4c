/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The Lua layer under an allocator of the host that refuses the nth request: a recipe in small, from scan to
 * records, must end in an error that speaks of memory, leave a state that can go on, and give every byte back.
 *   test_bind_refusals [seconds]   how long to sweep; 15 by default, spread over all n; 0 = every n */
#include "check.h"

#include "base/arena.h"
#include "bind/home.h"

#include <lauxlib.h>
#include <lua.h>
#include <lualib.h>

#include <stdbool.h>
#include <stdlib.h>
#include <time.h>
#include <unistd.h>

typedef struct account {
    size_t held;        /* bytes */
    long requests;      /* that could be refused, so far */
    long refuse_at;     /* this one fails; 0 = none */
    long refuse_n;      /* and so many in a row: Lua tries a second time after it has collected */
    long wrong_sizes;
    bool no_finalizer;  /* Lua could not call one: it takes memory to call it */
} account;

/* Each block carries its size in front. 64 bytes keep any alignment that the system gives. */
#define FRONT ((size_t)64)

static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    account *a = user;
    unsigned char *base = block == NULL ? NULL : (unsigned char *)block - FRONT;
    size_t had = 0;
    if (base != NULL) {
        memcpy(&had, base, sizeof had);
        if (had != old_size)
            a->wrong_sizes++;
    }
    if (new_size == 0) {
        a->held -= had;
        free(base);
        return NULL;
    }
    if (new_size > had) { /* Lua relies on it that to shrink never fails */
        a->requests++;
        if (a->refuse_at > 0 && a->requests >= a->refuse_at && a->requests - a->refuse_at < a->refuse_n)
            return NULL;
    }
    unsigned char *fresh = realloc(base, new_size + FRONT);
    if (fresh == NULL)
        return NULL;
    memcpy(fresh, &new_size, sizeof new_size);
    a->held += new_size - had;
    return fresh + FRONT;
}

/* Most verbs once. What it returns is compared between runs. */
static const char chunk[] =
    "local lw, demo, out = ...\n"
    "arg = { [0] = demo .. '/kestrel.lua', 'scan=' .. demo .. '/lab6_after_service.xy', 'out=' .. out }\n"
    "local job = lw.recipe { title = 'Small', inputs = { scan = { kind = 'file' },\n"
    "  n = { kind = 'number', default = 2, least = 0, most = 9, unit = 'mm' },\n"
    "  list = { kind = 'list', default = 'a, b' }, flag = { kind = 'flag', default = false } } }\n"
    "local told = {}\n"
    "local function tell(...) for i = 1, select('#', ...) do told[#told + 1] = tostring((select(i, ...))) end end\n"
    "local standard = lw.standard 'lab6-660c'\n"
    "local scan = lw.read_scan(job.scan, { radiation = 'Cu Ka', range = { 28, 70 } })\n"
    "local lines = lw.fit_lines(scan, standard.material:reflections(scan), {})\n"
    "tell(scan, standard, lines, #lines, lines.fit.goodness_of_fit, job, lw.material 'nickel')\n"
    "local calibration = lw.calibrate(lines, standard, {})\n"
    "tell(calibration.verdict)\n"
    "local v = lw.vector { 1, 2, 3 } * 2 + 1\n"
    "tell(v, v:sum(), lw.quantity { 1, 0.1, 'nm' } * 2)\n"
    "local done = job:once('step', function() return { a = lw.quantity { 2, 0.1, 'nm' }, b = { 1, 2 } } end)\n"
    "tell(done.a, done:get 'b')\n"
    "for name, value in pairs(done) do tell(name, value) end\n"
    "local rows = { { a = 1, b = lw.quantity { 1, 0.5, 'nm' } }, { a = 2, b = lw.quantity { 2, 0.5, 'nm' } } }\n"
    "job:write_csv('rows.csv', rows, { 'b', 'a' })\n"
    "job:write_cif('fit.cif', lines)\n"
    "job:write({ a = done, rows = rows, text = 'x', vector = v }, calibration)\n"
    "tell(lw.load_calibration(job:path 'calibration.json').verdict, lw.help 'fit_lines')\n"
    "tell(pcall(lw.fit_lines, scan, nil, { wndow = 1 }))\n"
    "return table.concat(told, '\\n')\n";

typedef struct places {
    char out[200];
} places;

static int run_chunk(lua_State *L)
{
    const places *p = lua_touserdata(L, 1);
    luaL_openlibs(L);
    lwb_home *home = lwb_home_of(L);
    snprintf(home->standards, sizeof home->standards, "%s", LW_SOURCE_DIR "/standards");
    lua_pushcfunction(L, luaopen_linewright);
    lua_call(L, 0, 1);
    if (luaL_loadbufferx(L, chunk, sizeof chunk - 1, "=small", "t") != LUA_OK)
        return lua_error(L);
    lua_insert(L, -2);
    lua_pushliteral(L, LW_SOURCE_DIR "/scripts/demo");
    lua_pushstring(L, p->out);
    lua_call(L, 3, 1);
    return 1;
}

static void on_warning(void *user, const char *text, int to_be_continued)
{
    (void)to_be_continued;
    if (strstr(text, "__gc") != NULL)
        ((account *)user)->no_finalizer = true;
}

/* A state in which Lua's own growing buffers are set up: a refusal while they are leaves half a metatable, which is
 * not ours to mend. */
static lua_State *new_state(account *a)
{
    lua_State *L = lua_newstate(resize, a);
    if (L != NULL) {
        lua_setwarnf(L, on_warning, a);
        luaL_Buffer buffer;
        luaL_buffinitsize(L, &buffer, 100000);
        luaL_pushresultsize(&buffer, 0);
    }
    return L;
}

/* Runs the chunk in a state; its text, or the error's, is on the stack. */
static int run(lua_State *L, places *p)
{
    lua_settop(L, 0);
    lua_pushcfunction(L, run_chunk);
    lua_pushlightuserdata(L, p);
    return lua_pcall(L, 1, 1, 0);
}

/* The text of an error, without a request for memory in this place. */
static const char *error_text(lua_State *L, account *a)
{
    a->refuse_at = 0;
    const char *text = luaL_tolstring(L, -1, NULL);
    return text ? text : "";
}

static void clean(const places *p)
{
    char path[300];
    static const char *const names[] = {"journal.jsonl", "rows.csv", "results.json", "calibration.json"};
    for (int i = 0; i < 4; i++) {
        snprintf(path, sizeof path, "%s/%s", p->out, names[i]);
        unlink(path);
    }
}

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* Tells the first line that differs. */
static bool same_text(const char *got, const char *want)
{
    size_t i = 0, line = 0;
    for (; got[i] != '\0' && got[i] == want[i]; i++)
        line = got[i] == '\n' ? i + 1 : line;
    if (got[i] != want[i])
        fprintf(stderr, "  got  %.100s\n  want %.100s\n", got + line, want + line);
    return got[i] == want[i];
}

static void fail_at(long at, long n, const char *want, places *p, long *survived)
{
    account a = {0};
    lua_State *L = new_state(&a);
    CHECK(L != NULL);
    if (L == NULL)
        return;
    clean(p);
    a.refuse_at = a.requests + at;
    a.refuse_n = n;
    int status = run(L, p);
    if (status == LUA_OK) { /* collecting garbage was enough */
        ++*survived;
        a.refuse_at = 0;
        bool same = strcmp(lua_tostring(L, -1), want) == 0;
        /* a refusal that the chunk's own pcall caught may stand in its text */
        CHECK(same || strstr(lua_tostring(L, -1), "memory") != NULL);
    } else {
        const char *text = error_text(L, &a);
        /* luaL_checkstack knows no other words for it */
        bool told = status == LUA_ERRMEM || strstr(text, "memory") != NULL || strstr(text, "stack overflow") != NULL;
        CHECK(told);
        if (!told)
            fprintf(stderr, "  at %ld: status %d, \"%s\"\n", at, status, text);
    }
    /* the state goes on as if nothing had been */
    if (a.refuse_n < 100) {
        a.refuse_at = 0;
        clean(p);
        status = run(L, p);
        CHECK(status == LUA_OK);
        if (status != LUA_OK)
            fprintf(stderr, "  after %ld: \"%s\"\n", at, error_text(L, &a));
        else
            CHECK(same_text(lua_tostring(L, -1), want));
    }
    lua_close(L);
    /* what a finalizer would have given back stays, where just its call was refused */
    CHECK(a.held == 0 || a.no_finalizer);
    if (a.held != 0 && !a.no_finalizer)
        fprintf(stderr, "  %zu bytes kept after refusal %ld\n", a.held, at);
    CHECK(a.wrong_sizes == 0);
}

int main(int argc, char **argv)
{
    double seconds = argc > 1 ? strtod(argv[1], NULL) : 15.0;
    places p;
    snprintf(p.out, sizeof p.out, "/tmp/linewright-bind-%ld", (long)getpid());

    account sound = {0};
    lua_State *L = new_state(&sound);
    long before = sound.requests;
    CHECK(L != NULL);
    if (L == NULL)
        return lw_checks_end();
    double began = now();
    int status = run(L, &p);
    double took = now() - began;
    long requests = sound.requests - before;
    CHECK(status == LUA_OK);
    char *want = strdup(luaL_tolstring(L, -1, NULL));
    lua_close(L);
    CHECK(sound.held == 0);
    CHECK(sound.wrong_sizes == 0);
    if (status != LUA_OK) {
        fprintf(stderr, "%s\n", want);
        free(want);
        return lw_checks_end();
    }
    CHECK(strstr(want, "pass") != NULL || strstr(want, "attention") != NULL);
    printf("%ld requests in %.3f s\n", requests, took);

    double runs = seconds / (3.0 * took);
    long step = seconds > 0 ? (long)((double)requests / (runs > 1 ? runs : 1)) + 1 : 1;
    step += step > 1 && step % 2 == 0;
    long points = 0, survived = 0;
    for (long at = 1; at <= requests; at += step, points += 2) {
        fail_at(at, 2, want, &p, &survived);
        fail_at(at, 1L << 40, want, &p, &survived);
    }
    printf("%ld refusals planted, %ld got over\n", points, survived);
    clean(&p);
    rmdir(p.out);
    free(want);
    return lw_checks_end();
}
