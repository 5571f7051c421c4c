/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/process.h"

#include "record/quiet.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <spawn.h>
#include <stdio.h>
#include <string.h>
#include <sys/wait.h>
#include <time.h>
#include <unistd.h>

#define COMPLAINT_MOST ((size_t)64 << 10)
#define TICK_MS 50 /* between two looks at the cancel flag */

extern char **environ;

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

static void shut(int *file)
{
    if (*file >= 0)
        close(*file);
    *file = -1;
}

/* Pipes numbered 0, 1, 2 as the child sees them; ours[i] and theirs[i] are the two ends. */
typedef struct pipes {
    int ours[3], theirs[3];
} pipes;

static bool open_pipes(pipes *p)
{
    for (int i = 0; i < 3; i++)
        p->ours[i] = p->theirs[i] = -1;
    for (int i = 0; i < 3; i++) {
        int ends[2];
        if (pipe(ends) != 0)
            return false;
        /* numbers 0 to 2 may be free in the host: an end there would be overwritten in the child */
        for (int e = 0; e < 2; e++) {
            int high = fcntl(ends[e], F_DUPFD_CLOEXEC, 3);
            close(ends[e]);
            ends[e] = high;
        }
        p->ours[i] = ends[i == 0 ? 1 : 0];
        p->theirs[i] = ends[i == 0 ? 0 : 1];
        if (ends[0] < 0 || ends[1] < 0 || fcntl(p->ours[i], F_SETFL, O_NONBLOCK) != 0)
            return false;
    }
    return true;
}

static int start(const lw_process *process, const pipes *p, const sigset_t *mask, pid_t *child)
{
    posix_spawn_file_actions_t actions;
    posix_spawnattr_t attributes;
    sigset_t standard;
    sigemptyset(&standard);
    sigaddset(&standard, SIGPIPE);
    if (posix_spawn_file_actions_init(&actions) != 0)
        return ENOMEM;
    if (posix_spawnattr_init(&attributes) != 0) {
        posix_spawn_file_actions_destroy(&actions);
        return ENOMEM;
    }
    int reason = 0;
    for (int i = 0; i < 3 && reason == 0; i++)
        reason = posix_spawn_file_actions_adddup2(&actions, p->theirs[i], i);
    posix_spawnattr_setflags(&attributes,
                             POSIX_SPAWN_SETPGROUP | POSIX_SPAWN_SETSIGMASK | POSIX_SPAWN_SETSIGDEF);
    posix_spawnattr_setpgroup(&attributes, 0);
    posix_spawnattr_setsigmask(&attributes, mask);
    posix_spawnattr_setsigdefault(&attributes, &standard);
    /* posix_spawnp takes char *const[] for historical reasons and changes nothing */
    union {
        const char *const *given;
        char *const *wanted;
    } arguments = {process->arguments};
    if (reason == 0)
        reason = posix_spawnp(child, process->arguments[0], &actions, &attributes, arguments.wanted, environ);
    posix_spawnattr_destroy(&attributes);
    posix_spawn_file_actions_destroy(&actions);
    return reason;
}

/* One read from a pipe of the child; closes it at its end. */
static void take(int *file, lw_text *into, size_t most)
{
    char piece[65536];
    ssize_t n = read(*file, piece, sizeof piece);
    if (n > 0 && into->n < most)
        lw_text_bytes(into, piece, (size_t)n);
    else if (n == 0 || (n < 0 && errno != EAGAIN && errno != EINTR))
        shut(file);
}

static lw_status serve(const lw_process *process, pipes *p, lw_text *output, lw_text *complaint, double end,
                       lw_error *err)
{
    size_t given = 0;
    size_t before = output->n;
    while (p->ours[1] >= 0 || p->ours[2] >= 0) {
        struct pollfd set[3];
        for (int i = 0; i < 3; i++) /* poll skips numbers below 0 */
            set[i] = (struct pollfd){.fd = p->ours[i], .events = i == 0 ? POLLOUT : POLLIN};
        poll(set, 3, TICK_MS);
        if (lw_engine_poll(output->engine, err) != LW_OK)
            return LW_CANCELLED;
        if (now() > end)
            return lw_fail(err, LW_IO, "look whether the machine is overloaded, or draw fewer points",
                           "%s was stopped: no answer within %.0f s", process->arguments[0], process->timeout);
        if (set[0].revents != 0) {
            ssize_t n = write(p->ours[0], process->input + given, process->n_input - given);
            if (n > 0)
                given += (size_t)n;
            if (given == process->n_input || (n < 0 && errno != EAGAIN && errno != EINTR))
                shut(&p->ours[0]); /* a child that stops listening will say why, or exit with a code */
        }
        if (set[1].revents != 0)
            take(&p->ours[1], output, before + LW_PROCESS_MOST);
        if (set[2].revents != 0)
            take(&p->ours[2], complaint, COMPLAINT_MOST);
        if (output->n - before >= LW_PROCESS_MOST)
            return lw_fail(err, LW_IO, "draw fewer points", "%s wrote more than %zu bytes", process->arguments[0],
                           LW_PROCESS_MOST);
        if (lw_text_check(output, err) != LW_OK || lw_text_check(complaint, err) != LW_OK)
            return LW_OUT_OF_MEMORY;
    }
    return LW_OK;
}

/* Waits for the child's end; after `end`, or at once if kill_it, kills its group. */
static lw_status reap(pid_t child, bool kill_it, double end, int *code, lw_engine *engine, lw_error *err)
{
    lw_status status = LW_OK;
    int how = 0;
    for (;;) {
        if (kill_it)
            kill(-child, SIGKILL);
        pid_t got = waitpid(child, &how, kill_it ? 0 : WNOHANG);
        if (got == child)
            break;
        if (got < 0 && errno != EINTR) {
            how = 0; /* the host ignores SIGCHLD: the code is lost, the output tells */
            break;
        }
        if (got == 0) {
            const struct timespec pause = {0, 2000000};
            nanosleep(&pause, NULL);
            if (lw_engine_poll(engine, err) != LW_OK) {
                status = LW_CANCELLED;
                kill_it = true;
            } else if (now() > end) {
                status = lw_fail(err, LW_IO, NULL, "a program was stopped: it closed its output but didn't end");
                kill_it = true;
            }
        }
    }
    *code = WIFSIGNALED(how) ? 128 + WTERMSIG(how) : WEXITSTATUS(how);
    return status;
}

lw_status lw_process_run(const lw_process *process, lw_text *output, lw_text *complaint, int *code, lw_error *err)
{
    pipes p;
    pid_t child = 0;
    lw_quiet quiet;
    lw_status status = LW_OK;
    lw_quiet_begin(&quiet, SIGPIPE);
    bool opened = open_pipes(&p);
    int reason = opened ? start(process, &p, &quiet.before, &child) : errno;
    for (int i = 0; i < 3; i++)
        shut(&p.theirs[i]);
    if (reason == ENOENT)
        status = lw_fail(err, LW_IO, NULL, "the program %s isn't installed", process->arguments[0]);
    else if (reason == EACCES) /* also what one closed folder in PATH makes of a missing program */
        status = lw_fail(err, LW_IO, NULL, "the program %s isn't installed, or may not be run", process->arguments[0]);
    else if (reason != 0) {
        char words[128];
        if (strerror_r(reason, words, sizeof words) != 0)
            words[0] = '\0';
        status = lw_fail(err, LW_IO, NULL, "can't start %s: %s", process->arguments[0], words);
    }
    if (reason != 0 && err != NULL && err->status == LW_IO && err->remedy[0] == '\0')
        snprintf(err->remedy, sizeof err->remedy, "install the package %s, and see that PATH leads to it",
                 process->package);
    if (reason == 0) {
        double end = now() + process->timeout;
        status = serve(process, &p, output, complaint, end, err);
        shut(&p.ours[0]);
        lw_status ended = reap(child, status != LW_OK, end, code, output->engine, err);
        if (status == LW_OK)
            status = ended;
    }
    for (int i = 0; i < 3; i++)
        shut(&p.ours[i]);
    lw_quiet_end(&quiet);
    return status;
}
