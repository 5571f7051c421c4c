/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/stop.h"

#include <lauxlib.h>

#include <signal.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#define HOOK_EVERY 1000 /* instructions between two looks at the flag */
#define GRACE_S 3

static volatile sig_atomic_t reason = LWA_NOT_STOPPED;

static void on_interrupt(int signal)
{
    (void)signal;
    reason = LWA_INTERRUPTED; /* the handler is gone now (SA_RESETHAND): a second Ctrl-C ends the process */
}

static void on_alarm(int signal)
{
    (void)signal;
    if (reason == LWA_TIME_IS_UP) {
        static const char text[] = "linewright: the time limit passed and the work did not give way\n";
        ssize_t n = write(STDERR_FILENO, text, sizeof text - 1);
        (void)n;
        _exit(1);
    }
    reason = LWA_TIME_IS_UP;
}

void lwa_stop_arm(void)
{
    struct sigaction action;
    memset(&action, 0, sizeof action);
    action.sa_handler = on_interrupt;
    action.sa_flags = (int)SA_RESETHAND;
    sigemptyset(&action.sa_mask);
    sigaction(SIGINT, &action, NULL);
}

bool lwa_stop_after(double seconds)
{
    struct sigaction action;
    memset(&action, 0, sizeof action);
    action.sa_handler = on_alarm;
    action.sa_flags = SA_RESTART;
    sigemptyset(&action.sa_mask);
    if (sigaction(SIGALRM, &action, NULL) != 0)
        return false;
    timer_t timer;
    struct sigevent event;
    memset(&event, 0, sizeof event);
    event.sigev_notify = SIGEV_SIGNAL;
    event.sigev_signo = SIGALRM;
    if (timer_create(CLOCK_MONOTONIC, &event, &timer) != 0)
        return false;
    struct itimerspec when = {.it_interval = {.tv_sec = GRACE_S},
                              .it_value = {.tv_sec = (time_t)seconds,
                                           .tv_nsec = (long)((seconds - (double)(time_t)seconds) * 1e9)}};
    if (when.it_value.tv_sec == 0 && when.it_value.tv_nsec == 0)
        when.it_value.tv_nsec = 1;
    return timer_settime(timer, 0, &when, NULL) == 0;
}

lwa_reason lwa_stop_reason(void)
{
    return (lwa_reason)reason;
}

void lwa_stop_forget(void)
{
    reason = LWA_NOT_STOPPED;
}

bool lwa_stop_wanted(void *user)
{
    (void)user;
    return reason != LWA_NOT_STOPPED;
}

static void look(lua_State *L, lua_Debug *frame)
{
    if (reason == LWA_NOT_STOPPED)
        return;
    lua_sethook(L, look, LUA_MASKCOUNT | LUA_MASKLINE | LUA_MASKCALL, HOOK_EVERY);
    const char *text = reason == LWA_INTERRUPTED ? "interrupted" : "the time limit is reached";
    lua_getinfo(L, "Sl", frame);
    if (frame->currentline > 0)
        luaL_error(L, "%s:%d: %s", frame->short_src, frame->currentline, text);
    luaL_error(L, "%s", text);
}

void lwa_stop_hook(lua_State *L)
{
    lua_sethook(L, look, LUA_MASKCOUNT, HOOK_EVERY);
}
