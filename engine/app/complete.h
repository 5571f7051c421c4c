/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What could follow what was typed: globals, and fields and methods of what stands before a dot or colon. */
#ifndef LW_APP_COMPLETE_H
#define LW_APP_COMPLETE_H

#include <lua.h>

/* Pushes a sorted list of full completions ("scan:crop") of the word that ends the line. Only looks at
 * what is there: it calls nothing that a script has defined. */
void lwa_push_completions(lua_State *L, const char *word);

#endif
