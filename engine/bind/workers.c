/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which cores a process may use, and that a child ends with its parent, are Linux's own. */
#ifdef __linux__
#define _GNU_SOURCE 1
#include <sched.h>
#include <sys/prctl.h>
#endif
#include "bind/workers.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <signal.h>
#include <string.h>
#include <sys/wait.h>
#include <unistd.h>

#define TICK_MS 50 /* between two looks at the cancel flag */
#define PIECE 65536

unsigned lwb_usable_cores(void)
{
#ifdef __linux__
    cpu_set_t usable;
    CPU_ZERO(&usable);
    if (sched_getaffinity(0, sizeof usable, &usable) == 0 && CPU_COUNT(&usable) > 0)
        return (unsigned)CPU_COUNT(&usable);
#endif
    long cores = sysconf(_SC_NPROCESSORS_ONLN);
    return cores > 0 ? (unsigned)cores : 1;
}

void lwb_workers_begin(lwb_workers *workers, lw_engine *engine)
{
    memset(workers, 0, sizeof *workers);
    workers->engine = engine;
}

static lw_status refuse(lw_error *err, const char *what, int reason)
{
    char words[128];
    if (strerror_r(reason, words, sizeof words) != 0)
        words[0] = '\0';
    return lw_fail(err, LW_IO, "try again with workers = 1", "%s: %s", what, words);
}

/* In the child: nothing of the others, and an end if the parent ends. */
static void settle(const lwb_workers *workers, pid_t parent)
{
    for (unsigned i = 0; i < LWB_WORKERS_MOST; i++)
        if (workers->worker[i].process != 0)
            close(workers->worker[i].pipe);
#ifdef __linux__
    prctl(PR_SET_PDEATHSIG, (unsigned long)SIGKILL, 0UL, 0UL, 0UL);
#endif
    if (getppid() != parent) /* it was gone before that was settled */
        _exit(1);
}

lw_status lwb_workers_start(lwb_workers *workers, size_t item, bool *inside, int *pipe_end, lw_error *err)
{
    unsigned free_place = 0;
    while (workers->worker[free_place].process != 0)
        free_place++;
    int ends[2];
    *inside = false;
    if (pipe(ends) != 0)
        return refuse(err, "no pipe for a worker", errno);
    /* what a worker itself starts must not hold its pipe open */
    (void)fcntl(ends[0], F_SETFD, FD_CLOEXEC);
    (void)fcntl(ends[1], F_SETFD, FD_CLOEXEC);
    pid_t parent = getpid(), child = fork();
    if (child < 0) {
        int reason = errno;
        close(ends[0]);
        close(ends[1]);
        return refuse(err, "no process for a worker", reason);
    }
    if (child == 0) {
        close(ends[0]);
        settle(workers, parent);
        *inside = true;
        *pipe_end = ends[1];
        return LW_OK;
    }
    close(ends[1]);
    lwb_worker *worker = &workers->worker[free_place];
    *worker = (lwb_worker){.process = child, .pipe = ends[0], .item = item};
    lw_text_begin(&worker->said, workers->engine);
    workers->running++;
    return LW_OK;
}

/* Waits for a process that has closed its pipe, or was killed. */
static int end_of(pid_t process)
{
    int status = 0;
    pid_t got;
    do
        got = waitpid(process, &status, 0);
    while (got < 0 && errno == EINTR);
    if (got != process)
        return -1; /* the host lets the system forget its children */
    return WIFEXITED(status) ? WEXITSTATUS(status) : 128 + WTERMSIG(status);
}

lw_status lwb_workers_listen(lwb_workers *workers, lwb_worker **ended, int *code, lw_error *err)
{
    struct pollfd files[LWB_WORKERS_MOST];
    lwb_worker *of[LWB_WORKERS_MOST];
    nfds_t n = 0;
    *ended = NULL;
    for (unsigned i = 0; i < LWB_WORKERS_MOST; i++)
        if (workers->worker[i].process != 0) {
            of[n] = &workers->worker[i];
            files[n++] = (struct pollfd){.fd = workers->worker[i].pipe, .events = POLLIN};
        }
    int ready = poll(files, n, TICK_MS);
    if (ready < 0 && errno != EINTR)
        return refuse(err, "can't listen to the workers", errno);
    for (nfds_t i = 0; ready > 0 && i < n && *ended == NULL; i++) {
        if (files[i].revents == 0)
            continue;
        char piece[PIECE];
        ssize_t got = read(files[i].fd, piece, sizeof piece);
        if (got > 0)
            lw_text_bytes(&of[i]->said, piece, (size_t)got);
        else if (got == 0 || errno != EINTR) {
            close(of[i]->pipe);
            *code = end_of(of[i]->process);
            of[i]->process = 0;
            workers->running--;
            *ended = of[i];
        }
        if (lw_text_check(&of[i]->said, err) != LW_OK)
            return LW_OUT_OF_MEMORY;
    }
    return lw_engine_poll(workers->engine, err);
}

void lwb_workers_end(lwb_workers *workers)
{
    for (unsigned i = 0; i < LWB_WORKERS_MOST; i++)
        if (workers->worker[i].process != 0)
            kill(workers->worker[i].process, SIGKILL);
    for (unsigned i = 0; i < LWB_WORKERS_MOST; i++) {
        lwb_worker *worker = &workers->worker[i];
        if (worker->process != 0) {
            close(worker->pipe);
            (void)end_of(worker->process);
            worker->process = 0;
        }
        lw_text_end(&worker->said);
    }
    workers->running = 0;
}
