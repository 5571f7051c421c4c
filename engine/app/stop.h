/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Stopping: Ctrl-C and the time limit set a flag; a hook in Lua and the engine's poll look at it. Once
 * set, the hook fires on every line, so that a pcall in a loop can't swallow the stop. */
#ifndef LW_APP_STOP_H
#define LW_APP_STOP_H

#include <lua.h>

#include <stdbool.h>

typedef enum lwa_reason { LWA_NOT_STOPPED, LWA_INTERRUPTED, LWA_TIME_IS_UP } lwa_reason;

/* Takes over SIGINT: the first one stops cleanly, a second one ends the process. Call again before each
 * piece of work at the prompt. */
void lwa_stop_arm(void);
/* Ends the work after this many seconds; if it doesn't give way within 3 s more, ends the process (exit 1).
 * False if the system refuses a timer. */
bool lwa_stop_after(double seconds);
/* Why the work is to stop. */
lwa_reason lwa_stop_reason(void);
void lwa_stop_forget(void); /* the prompt goes on after Ctrl-C */

/* Installs the hook in a state; coroutines made later inherit it. */
void lwa_stop_hook(lua_State *L);

/* For lw_engine.cancelled. */
bool lwa_stop_wanted(void *user);

#endif
