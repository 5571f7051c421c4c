/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Processes that do a part of a job each: forked, they work on what they find, say one thing through a pipe and end.
 * They end with the process that made them, however that ends. */
#ifndef LW_BIND_WORKERS_H
#define LW_BIND_WORKERS_H

#include "record/text.h"

#include <sys/types.h>

#define LWB_WORKERS_MOST 64

typedef struct lwb_worker {
    pid_t process; /* 0 = none */
    int pipe;
    size_t item;  /* what it works on, as the caller numbers it */
    lw_text said; /* so far */
} lwb_worker;

typedef struct lwb_workers {
    lw_engine *engine;
    unsigned running;
    lwb_worker worker[LWB_WORKERS_MOST];
} lwb_workers;

/* Processor cores that this process may use, at least 1. */
unsigned lwb_usable_cores(void);

void lwb_workers_begin(lwb_workers *workers, lw_engine *engine);

/* Forks one for an item; there must be a free place. In the child *inside is true and *pipe what it writes to; it must
 * leave by _exit(). Status: LW_IO if the system refuses a process. */
lw_status lwb_workers_start(lwb_workers *workers, size_t item, bool *inside, int *pipe, lw_error *err);

/* Listens for a moment. Returned: *ended is one that came to its end, or NULL; *code how: its exit code, 128 + signal
 * if it was killed, or -1 if the system doesn't know. The caller ends its text and may start another one then.
 * Status: LW_IO, LW_OUT_OF_MEMORY, LW_CANCELLED. */
lw_status lwb_workers_listen(lwb_workers *workers, lwb_worker **ended, int *code, lw_error *err);

/* Kills those that still run. */
void lwb_workers_end(lwb_workers *workers);

#endif
