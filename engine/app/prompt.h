/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The prompt: lines with history and completion; an expression shows its value. */
#ifndef LW_APP_PROMPT_H
#define LW_APP_PROMPT_H

#include "app/run.h"

/* Runs until the end of input. Returns the exit code. */
int lwa_prompt(lua_State *L, lwa_progress *progress);

#endif
