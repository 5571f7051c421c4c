/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The engine: everything that would otherwise be global. It holds the pair of functions through
 * which all memory passes, the cancel flag that long loops poll, the progress listener, the
 * instruction set to use and the cache of Fourier plans. One engine serves one thread at a time. */
#ifndef LW_BASE_ENGINE_H
#define LW_BASE_ENGINE_H

#include "base/error.h"

#include <stdbool.h>
#include <stddef.h>

#define LW_VERSION "0.1.0"

/* Memory: resize(user, NULL, 0, n) takes, resize(user, p, old, n) grows or shrinks,
 * resize(user, p, old, 0) gives back and returns NULL. A refusal is NULL with the old block kept. */
typedef struct lw_allocator {
    void *(*resize)(void *user, void *block, size_t old_size, size_t new_size);
    void *user;
} lw_allocator;

/* The system's memory, by realloc and free. */
lw_allocator lw_system_allocator(void);

/* Rungs of the instruction-set ladder. AUTO is the best one that the processor has. */
typedef enum lw_cpu { LW_CPU_AUTO, LW_CPU_PLAIN, LW_CPU_AVX2, LW_CPU_AVX512 } lw_cpu;

typedef struct lw_engine {
    lw_allocator allocator;
    lw_cpu cpu;                                     /* rung asked for */
    bool (*cancelled)(void *user);                  /* polled in long loops; NULL = never */
    void (*progress)(void *user, const char *what, double fraction); /* NULL = nobody listens */
    const char *fence;                              /* files are written only below this folder, where no link is
                                                       followed; NULL = anywhere */
    bool fence_no_link;                             /* the fence itself must not be a link */
    void *user;                                     /* handed to cancelled() and progress() */
    void *plans;                                    /* Fourier plans, owned by numeric/fft */
    void (*free_plans)(struct lw_engine *engine);   /* set by the first transform */
} lw_engine;

/* An engine on the system's memory, with nobody listening. Release it with lw_engine_end(). */
void lw_engine_begin(lw_engine *engine);
void lw_engine_end(lw_engine *engine);

/* LW_CANCELLED, recorded in err, if the user wants to stop; else LW_OK. */
lw_status lw_engine_poll(lw_engine *engine, lw_error *err);

/* Tells the listener, if there is one, how far `what` has come (fraction 0 to 1). */
void lw_engine_progress(lw_engine *engine, const char *what, double fraction);

#endif
