/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where scripts may write, and what every record says about its making. */
#ifndef LW_BIND_OUTPUTS_H
#define LW_BIND_OUTPUTS_H

#include "bind/bind.h"

/* Raises unless a script may write to this path. In a stock Lua or with --trusted every path is allowed.
 * Otherwise it must lie under the recipe's out folder, without "..", and no part below that folder may be
 * a link. Folders on the way are made. */
void lwb_allow_write(lua_State *L, const char *path, const char *verb);

/* Pushes out/name after lwb_allow_write. */
const char *lwb_push_out_path(lua_State *L, const char *name, const char *verb);

/* Adds the group `provenance` to a record: engine, recipe, inputs with hashes, calibration, date. `object`
 * is the stack index of what the record is about (lines, profiles, a result with a parent, or anything),
 * from which calibration and scan are found. */
void lwb_add_provenance(lua_State *L, lw_node *record, int object);

/* The calibration's record with schema and provenance; pushed. */
lwb_tree *lwb_calibration_record(lua_State *L, int index);
/* Writes it; the path was allowed before. */
void lwb_calibration_save(lua_State *L, int index, const char *path);

/* Methods of the recipe that write: job:path, job:write, job:write_csv, job:write_cif, job:check. */
int lwb_job_path(lua_State *L);
int lwb_job_write(lua_State *L);
int lwb_job_write_csv(lua_State *L);
int lwb_job_write_cif(lua_State *L); /* export_cif.c */
int lwb_job_check(lua_State *L);
int lwb_job_progress(lua_State *L);
int lwb_job_once(lua_State *L); /* journal.c */
int lwb_job_each(lua_State *L); /* each.c */
int lwb_job_run(lua_State *L);  /* run.c */

/* SHA-256 of a file into hex; raises if it can't be read. */
void lwb_hash_file(lua_State *L, const char *path, char hex[65]);

#endif
