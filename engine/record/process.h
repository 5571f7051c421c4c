/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Runs another program without a shell: its input from memory, its output into memory. */
#ifndef LW_RECORD_PROCESS_H
#define LW_RECORD_PROCESS_H

#include "record/text.h"

#define LW_PROCESS_MOST ((size_t)256 << 20) /* bytes of output that are taken */

typedef struct lw_process {
    const char *const *arguments; /* program (looked up in PATH) and its arguments, NULL at the end */
    const char *package;          /* for the remedy when the program isn't there */
    const char *input;            /* [n_input] */
    size_t n_input;
    double timeout; /* s; then it is killed */
} lw_process;

/* Runs it to its end in a process group of its own. Appends what it wrote to `output` and
 * `complaint` (standard error, first 64 kB). The host's SIGPIPE setting doesn't matter.
 * Returned: *code   exit code; 128 + signal if it was killed
 * Status:   LW_IO (not installed, not startable, timeout, too much output), LW_CANCELLED,
 *           LW_OUT_OF_MEMORY. A code other than 0 is the caller's to judge. */
lw_status lw_process_run(const lw_process *process, lw_text *output, lw_text *complaint, int *code, lw_error *err);

#endif
