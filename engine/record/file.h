/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Files, written whole or not at all. Whether a script may write to a path is decided above; the engine's
 * fence holds here too, part by part while a path is opened. */
#ifndef LW_RECORD_FILE_H
#define LW_RECORD_FILE_H

#include "base/arena.h"

/* Replaces or makes a file: writes a temporary file in the same folder, flushes it to the disk,
 * renames it over `path`, flushes the folder. A reader sees the old file or the new one.
 * Given:  path   its folder must exist; a symbolic link there is replaced, not followed
 *         bytes  [size]
 * Status: LW_IO with path, reason and remedy (disk full, no permission, no folder, not a plain file);
 *         LW_CANCELLED. On any failure the older file is untouched and the temporary one is gone. */
lw_status lw_write_file(lw_engine *engine, const char *path, const void *bytes, size_t size, lw_error *err);

/* Removes what a process that was killed while it wrote has left in a folder: plain files of this user by the names
 * that lw_write_file() gives, whose process is gone. `path` is of a file in that folder, which need not exist. What
 * can't be looked at or removed stays: nothing depends on it. */
void lw_sweep_folder(const lw_engine *engine, const char *path);

/* Makes a folder and the ones above it; an existing folder is fine. Status: LW_IO. */
lw_status lw_make_folder(const char *path, lw_error *err);

/* Appends one line (a newline is added) in a single write and flushes it to the disk, for journals
 * that must survive a crash. Doesn't follow a symbolic link. Status: LW_IO. */
lw_status lw_append_line(lw_engine *engine, const char *path, const char *line, lw_error *err);

/* Reads a whole plain file into the arena, with a zero byte after it.
 * Given:    most   largest size that is accepted, bytes
 * Returned: bytes, size
 * Status:   LW_IO; LW_BAD_DATA if it is larger than `most`; LW_OUT_OF_MEMORY. */
lw_status lw_read_file(lw_arena *arena, const char *path, size_t most, char **bytes, size_t *size, lw_error *err);

#endif
