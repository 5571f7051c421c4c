/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/prompt.h"

#include "app/complete.h"
#include "app/stop.h"
#include "base/engine.h"

#include <lauxlib.h>
#include <readline/history.h>
#include <readline/readline.h>

#include <errno.h>
#include <fcntl.h>
#include <pwd.h>
#include <setjmp.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/stat.h>
#include <unistd.h>

#define HISTORY_MOST 2000
#define INPUT_MOST ((size_t)1 << 20)

static lua_State *prompt_state; /* readline's callbacks carry no user pointer */

/* ---- reading lines ---- */

static char *next_completion(const char *text, int state)
{
    static lua_Integer at;
    (void)text;
    if (state == 0)
        at = 0;
    lua_rawgeti(prompt_state, -1, ++at);
    const char *found = lua_tostring(prompt_state, -1);
    char *copy = found ? strdup(found) : NULL;
    lua_pop(prompt_state, 1);
    return copy;
}

static char **complete(const char *text, int start, int end)
{
    (void)start;
    (void)end;
    rl_attempted_completion_over = 1;
    rl_completion_suppress_append = 1;
    lwa_push_completions(prompt_state, text);
    char **all = rl_completion_matches(text, next_completion);
    lua_pop(prompt_state, 1);
    return all;
}

/* ~/.linewright_history, or "" */
static void history_path(char *path, size_t size)
{
    const char *home = getenv("HOME");
    if (home == NULL || home[0] != '/') {
        const struct passwd *user = getpwuid(getuid());
        home = user ? user->pw_dir : NULL;
    }
    path[0] = '\0';
    if (home != NULL && strlen(home) + 24 < size)
        snprintf(path, size, "%s/.linewright_history", home);
}

/* Makes the file readable by its owner only before anything is written to it; a link is left alone. */
static bool prepare_history(const char *path)
{
    int file = open(path, O_CREAT | O_RDWR | O_NOFOLLOW | O_CLOEXEC, 0600);
    if (file < 0)
        return false;
    bool fine = fchmod(file, 0600) == 0;
    close(file);
    return fine;
}

static sigjmp_buf back_to_prompt;
static volatile sig_atomic_t reading;

static void cancel_line(int signal)
{
    (void)signal;
    if (reading)
        siglongjmp(back_to_prompt, 1);
}

/* A line without its newline, to be freed; NULL at the end of input. *cancelled: Ctrl-C was pressed. */
static char *read_line(const char *text, bool terminal, bool *cancelled)
{
    *cancelled = false;
    if (!terminal) {
        char *line = NULL;
        size_t room = 0;
        ssize_t n = getline(&line, &room, stdin);
        if (n < 0) {
            free(line);
            return NULL;
        }
        if (n > 0 && line[n - 1] == '\n')
            line[n - 1] = '\0';
        return line;
    }
    struct sigaction action, before;
    memset(&action, 0, sizeof action);
    action.sa_handler = cancel_line;
    sigemptyset(&action.sa_mask);
    sigaction(SIGINT, &action, &before);
    char *volatile line = NULL;
    if (sigsetjmp(back_to_prompt, 1) == 0) {
        reading = 1;
        line = readline(text);
        reading = 0;
    } else {
        reading = 0;
        *cancelled = true;
        rl_free_line_state();
        rl_cleanup_after_signal();
        fputc('\n', stdout);
    }
    sigaction(SIGINT, &before, NULL);
    return line;
}

/* ---- evaluating ---- */

/* Tries `return <line>` first, then the line as it is. Leaves the function, or the message. */
static int load_line(lua_State *L, const char *text)
{
    lua_pushfstring(L, "return %s", text);
    size_t n = 0;
    const char *expression = lua_tolstring(L, -1, &n);
    int status = luaL_loadbufferx(L, expression, n, "=prompt", "t");
    lua_remove(L, -2);
    if (status == LUA_OK)
        return status;
    lua_pop(L, 1);
    return luaL_loadbufferx(L, text, strlen(text), "=prompt", "t");
}

/* More lines are wanted while the parser complains about the end. */
static bool is_incomplete(lua_State *L)
{
    size_t n = 0;
    const char *message = lua_tolstring(L, -1, &n);
    static const char mark[] = "<eof>";
    return message != NULL && n >= sizeof mark - 1 && strcmp(message + n - (sizeof mark - 1), mark) == 0;
}

static int show_values(lua_State *L)
{
    int n = lua_gettop(L);
    for (int i = 1; i <= n; i++) {
        const char *text = luaL_tolstring(L, i, NULL);
        printf("%s%s", i > 1 ? "\t" : "", text);
        lua_pop(L, 1);
    }
    printf("\n");
    return 0;
}

/* Reads one piece, of several lines if need be; pushes the function. False at the end of input. */
static bool read_piece(lua_State *L, bool terminal)
{
    char *piece = NULL;
    size_t used = 0;
    for (;;) {
        bool cancelled = false;
        char *line = read_line(piece == NULL ? "> " : ">> ", terminal, &cancelled);
        if (cancelled) {
            free(piece);
            lua_pushnil(L);
            return true;
        }
        if (line == NULL) {
            if (piece == NULL)
                return false;
            if (load_line(L, piece) != LUA_OK) {
                lwa_tell_error(L, NULL);
                lua_pushnil(L);
            }
            free(piece);
            return true;
        }
        size_t n = strlen(line);
        char *longer = used + n < INPUT_MOST ? realloc(piece, used + n + 2) : NULL;
        if (longer == NULL) {
            free(line);
            free(piece);
            fprintf(stderr, "the input is too long\n");
            lua_pushnil(L);
            return true;
        }
        piece = longer;
        if (used > 0)
            piece[used++] = '\n';
        memcpy(piece + used, line, n + 1);
        used += n;
        free(line);
        if (load_line(L, piece) == LUA_OK || !is_incomplete(L))
            break;
        lua_pop(L, 1);
    }
    if (terminal && piece[strspn(piece, " \t\n")] != '\0')
        add_history(piece);
    if (strncmp(piece + strspn(piece, " \t"), "local ", 6) == 0 && lua_isfunction(L, -1) && terminal)
        fprintf(stderr, "note: a local is gone after its line; leave out `local` to keep it\n");
    free(piece);
    if (!lua_isfunction(L, -1)) {
        lwa_tell_error(L, NULL);
        lua_pushnil(L);
    }
    return true;
}

int lwa_prompt(lua_State *L, lwa_progress *progress)
{
    bool terminal = isatty(STDIN_FILENO) == 1 && isatty(STDOUT_FILENO) == 1;
    char path[4096] = "";
    int code = LWA_DONE;
    prompt_state = L;
    if (terminal) {
        printf("linewright " LW_VERSION ", Lua 5.4. help() lists what there is, help \"name\" tells more, Ctrl-D leaves.\n");
        rl_readline_name = "linewright";
        rl_attempted_completion_function = complete;
        rl_basic_word_break_characters = " \t\n\"'`@$><=;|&{([,+-*/^%#~";
        rl_catch_signals = 0;
        history_path(path, sizeof path);
        if (path[0] != '\0' && prepare_history(path))
            read_history(path);
        else
            path[0] = '\0';
        stifle_history(HISTORY_MOST);
    }
    while (lua_settop(L, 0), read_piece(L, terminal)) {
        if (!lua_isfunction(L, -1))
            continue;
        lwa_stop_forget();
        lwa_stop_arm();
        lwa_stop_hook(L);
        code = (int)lwa_call(L, 0, LUA_MULTRET, progress);
        lwa_progress_clear(progress);
        if (code == LWA_DONE && lua_gettop(L) > 0) {
            lua_pushcfunction(L, show_values);
            lua_insert(L, 1);
            code = (int)lwa_call(L, lua_gettop(L) - 1, 0, progress);
        }
        if (lwa_stop_reason() == LWA_TIME_IS_UP)
            break;
        fflush(stdout);
    }
    if (terminal) {
        printf("\n");
        if (path[0] != '\0' && prepare_history(path))
            write_history(path);
        return LWA_DONE;
    }
    return code; /* a script through a pipe: the last piece decides */
}
