/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The interpreter: reads the command line, makes a state, runs recipes and the prompt. */
#include "app/memory.h"
#include "app/options.h"
#include "app/progress.h"
#include "app/prompt.h"
#include "app/run.h"
#include "app/sandbox.h"
#include "app/stop.h"
#include "base/pages.h"
#include "base/sha256.h"
#include "bind/home.h"
#include "bind/inputs.h"
#include "bind/standards.h"

#include <lauxlib.h>
#include <lua.h>

#include <errno.h>
#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define RECIPE_MOST ((size_t)16 << 20)

typedef struct job {
    const lwa_options *options;
    lwa_progress *progress;
    lwa_memory *memory;
    int argc;
    char **argv;
    int code;
} job;

/* In a process of job:each: they share what is left of the memory limit, and the bar is not theirs. */
static void begin_worker(void *host, unsigned workers)
{
    const job *work = host;
    lwa_memory *memory = work->memory;
    if (memory->most > memory->used)
        memory->most = memory->used + (memory->most - memory->used) / workers;
    work->progress->wanted = work->progress->drawn = false;
}

static void set_up_home(lua_State *L, job *work)
{
    lwb_home *home = lwb_home_of(L);
    home->interpreter = true;
    home->confined = !work->options->trusted;
    home->engine.cpu = work->options->cpu;
    home->engine.cancelled = lwa_stop_wanted;
    home->engine.progress = lwa_progress_show;
    home->engine.user = work->progress;
    home->worker_begins = begin_worker;
    home->host = work;
    if (work->options->standards != NULL) {
        snprintf(home->standards, sizeof home->standards, "%s", work->options->standards);
        return;
    }
    char file[LWB_PATH_MOST];
    ssize_t n = readlink("/proc/self/exe", file, sizeof file - 1);
    snprintf(file + (n > 0 ? n : 0), sizeof file - (size_t)(n > 0 ? n : 0), "%s", n > 0 ? "" : work->argv[0]);
    lwb_find_standards(file, home->standards, sizeof home->standards);
}

/* arg as in Lua: the recipe at 0, what follows it from 1. */
static void set_arguments(lua_State *L, const job *work)
{
    lua_newtable(L);
    lua_pushstring(L, work->options->recipe ? work->options->recipe : work->options->from_stdin ? "stdin" : "");
    lua_rawseti(L, -2, 0);
    for (int i = work->options->first_argument; i < work->argc; i++) {
        lua_pushstring(L, work->argv[i]);
        lua_rawseti(L, -2, i - work->options->first_argument + 1);
    }
    lua_pushvalue(L, -1);
    lua_setglobal(L, "arg");
    /* a copy that scripts can't reach is what lw.recipe reads */
    lua_newtable(L);
    for (lua_Integer i = 0; i <= (lua_Integer)lua_rawlen(L, -2); i++) {
        lua_rawgeti(L, -2, i);
        lua_rawseti(L, -2, i);
    }
    lua_setfield(L, LUA_REGISTRYINDEX, LWB_ARGUMENTS_KEY);
    lua_pop(L, 1);
}

/* The whole of a file, or of standard input for -1, as a string on the stack; false with errno. */
static bool push_bytes(lua_State *L, int file)
{
    luaL_Buffer bytes;
    size_t total = 0;
    luaL_buffinit(L, &bytes);
    for (;;) {
        char *room = luaL_prepbuffer(&bytes);
        ssize_t n = read(file, room, LUAL_BUFFERSIZE);
        if (n < 0 && errno == EINTR && lwa_stop_reason() == LWA_NOT_STOPPED)
            continue;
        if (n < 0 || total > RECIPE_MOST) {
            errno = n < 0 ? errno : EFBIG;
            return false;
        }
        if (n == 0)
            break;
        total += (size_t)n;
        luaL_addsize(&bytes, (size_t)n);
    }
    luaL_pushresult(&bytes);
    return true;
}

static int run_recipe(lua_State *L, const job *work)
{
    const char *path = work->options->recipe;
    lwb_home *home = lwb_home_of(L);
    int file = STDIN_FILENO;
    if (path != NULL) {
        struct stat info;
        file = open(path, O_RDONLY | O_CLOEXEC);
        if (file < 0 || fstat(file, &info) != 0 || S_ISDIR(info.st_mode)) {
            fprintf(stderr, "linewright: can't open %s: %s\n", path, file < 0 ? strerror(errno) : "it is a folder");
            if (file >= 0)
                close(file);
            return LWA_USAGE;
        }
    }
    bool fine = push_bytes(L, file); /* a refusal of memory ends the process, and with it the open file */
    int reason = errno;
    if (file != STDIN_FILENO)
        close(file);
    if (!fine) {
        fprintf(stderr, "linewright: can't read %s: %s\n", path ? path : "standard input", strerror(reason));
        return LWA_USAGE;
    }
    size_t n = 0;
    const char *bytes = lua_tolstring(L, -1, &n);
    snprintf(home->recipe, sizeof home->recipe, "%s", path ? path : "stdin");
    lw_sha256_hex(bytes, n, home->recipe_hash);
    size_t skip = n > 0 && bytes[0] == '#' ? strcspn(bytes, "\n") : 0; /* a line for the shell; its newline stays */
    lua_pushfstring(L, "%s%s", path ? "@" : "=", home->recipe);
    if (!lwa_load(L, bytes + skip, n - skip, lua_tostring(L, -1)))
        return LWA_FAILED;
    int n_arguments = 0;
    if (lua_getglobal(L, "arg") == LUA_TTABLE) {
        n_arguments = (int)lua_rawlen(L, -1);
        luaL_checkstack(L, n_arguments + 8, "too many arguments");
        for (int i = 1; i <= n_arguments; i++)
            lua_rawgeti(L, -i, i);
        lua_remove(L, -n_arguments - 1);
    } else
        lua_pop(L, 1);
    return (int)lwa_call(L, n_arguments, 0, work->progress);
}

static int work_through(lua_State *L)
{
    job *work = lua_touserdata(L, 1);
    const lwa_options *options = work->options;
    lua_settop(L, 0);
    lwa_open_libraries(L, options->trusted);
    set_up_home(L, work);
    set_arguments(L, work);
    lwa_stop_hook(L);
    for (int i = 0; i < options->n_chunks && work->code == LWA_DONE; i++) {
        work->code = lwa_load(L, options->chunk[i], strlen(options->chunk[i]), "=-e")
                         ? (int)lwa_call(L, 0, 0, work->progress)
                         : LWA_FAILED;
        lua_settop(L, 0);
    }
    bool nothing = options->n_chunks == 0 && options->recipe == NULL && !options->from_stdin;
    bool from_stdin = options->from_stdin || (nothing && !options->prompt && isatty(STDIN_FILENO) != 1);
    if (work->code == LWA_DONE && (options->recipe != NULL || from_stdin))
        work->code = run_recipe(L, work);
    lua_settop(L, 0);
    if (work->code != LWA_USAGE && (options->prompt || (nothing && !from_stdin)))
        work->code = lwa_prompt(L, work->progress);
    if (work->code == LWA_DONE && lwb_home_of(L)->verdict_failed)
        work->code = LWA_VERDICT;
    return 0;
}

static int give_up(lua_State *L)
{
    const char *message = lua_tostring(L, -1);
    fprintf(stderr, "linewright: %s\n", message ? message : "an error without text");
    exit(LWA_FAILED);
}

int main(int argc, char **argv)
{
    lwa_options options = {.cpu = LW_CPU_AUTO};
    lwa_progress progress;
    char message[300];
    if (!lwa_read_options(argc, argv, &options, message, sizeof message)) {
        fprintf(stderr, "linewright: %s\n%s", message, lwa_usage);
        return LWA_USAGE;
    }
    if (options.help || options.version) {
        fputs(options.help ? lwa_usage : "linewright " LW_VERSION "\n", stdout);
        return fflush(stdout) == 0 ? LWA_DONE : LWA_FAILED;
    }
    lw_keep_freed_memory();
    lwa_memory memory = {.most = (size_t)(options.memory_mb * 1048576)};
    lua_State *L = lua_newstate(lwa_allocate, &memory);
    if (L == NULL) {
        fprintf(stderr, "linewright: out of memory at the start\n");
        return LWA_FAILED;
    }
    lua_atpanic(L, give_up);
    lwa_stop_arm();
    if (options.time_s > 0 && !lwa_stop_after(options.time_s)) {
        fprintf(stderr, "linewright: the system refuses a timer for --time-limit\n");
        lua_close(L);
        return LWA_FAILED;
    }
    lwa_progress_begin(&progress);
    job work = {.options = &options, .progress = &progress, .memory = &memory, .argc = argc, .argv = argv, .code = LWA_DONE};
    lua_pushcfunction(L, work_through);
    lua_pushlightuserdata(L, &work);
    if (lua_pcall(L, 1, 0, 0) != LUA_OK) {
        lwa_tell_error(L, &progress);
        work.code = LWA_FAILED;
    }
    lwa_progress_clear(&progress);
    lua_close(L);
    if ((fflush(stdout) != 0 || ferror(stdout)) && work.code == LWA_DONE) {
        fprintf(stderr, "linewright: can't write to standard output: %s\n", strerror(errno));
        work.code = LWA_FAILED;
    }
    return work.code;
}
