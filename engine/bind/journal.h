/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The journal of the running job, out/journal.jsonl, as job:once and job:each share it. */
#ifndef LW_BIND_JOURNAL_H
#define LW_BIND_JOURNAL_H

#include "bind/bind.h"
#include "record/text.h"

/* Pushes the path, which may be written to. */
const char *lwb_push_journal(lua_State *L, const char *verb);

/* Pushes the key of a step as the journal has it; raises if it can't be one. `given` is what the recipe calls it. */
const char *lwb_push_journal_key(lua_State *L, const char *given, const char *verb);

/* Pushes the value of a key as a result that owns itself, or returns false. */
bool lwb_push_known(lua_State *L, const char *path, const char *key);

/* Words the value at an index as a line of the journal, without its newline. Raises for what can't be written; the
 * line is the caller's to end, who got it with the last thing that can raise done. */
void lwb_journal_line(lua_State *L, const char *key, int value, lw_text *line);

/* Appends a line and ends it, then pushes the value as it is read back, so that a run and a run that went on give the
 * same. */
void lwb_journal_add(lua_State *L, const char *path, const char *key, lw_text *line, const char *verb);

#endif
