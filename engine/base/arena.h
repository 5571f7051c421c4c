/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Arena memory: a noun (scan, lines, calibration ...) keeps all it owns in one arena and is freed
 * whole. Blocks are aligned to 64 bytes, so that the widest vector loads are aligned too. */
#ifndef LW_BASE_ARENA_H
#define LW_BASE_ARENA_H

#include "base/engine.h"

typedef struct lw_arena_chunk lw_arena_chunk;

typedef struct lw_arena {
    lw_engine *engine;     /* where memory comes from */
    lw_arena_chunk *chunk; /* newest chunk */
} lw_arena;

/* Starts an empty arena; takes no memory yet. */
void lw_arena_begin(lw_arena *arena, lw_engine *engine);

/* Gives everything back. Safe on an arena that was only zeroed. */
void lw_arena_end(lw_arena *arena);

/* Takes room for `bytes` bytes at once, in large pages where the system has them: memory that is touched page by page
 * for the first time costs more than most of what is done with it. */
lw_status lw_arena_reserve(lw_arena *arena, size_t bytes, lw_error *err);

/* Where the arena is full to now; lw_arena_rewind() gives everything back that was taken since. */
typedef struct lw_arena_mark {
    lw_arena_chunk *chunk;
    size_t used;
} lw_arena_mark;
lw_arena_mark lw_arena_mark_now(const lw_arena *arena);
void lw_arena_rewind(lw_arena *arena, lw_arena_mark mark);

/* Takes count x size bytes, zeroed. NULL, with err set, if memory is refused or the product
 * overflows. A count of 0 gives a valid pointer that must not be read. */
void *lw_arena_take(lw_arena *arena, size_t count, size_t size, lw_error *err);

/* The same without zeroing, for arrays that are filled at once. */
void *lw_arena_take_raw(lw_arena *arena, size_t count, size_t size, lw_error *err);

/* Copies a string (NULL is copied as ""), or count x size bytes. NULL on refusal. */
char *lw_arena_text(lw_arena *arena, const char *text, lw_error *err);
void *lw_arena_copy(lw_arena *arena, const void *from, size_t count, size_t size, lw_error *err);

/* printf into the arena. NULL on refusal. */
char *lw_arena_print(lw_arena *arena, lw_error *err, const char *format, ...)
    __attribute__((format(printf, 3, 4)));

/* Single blocks through the engine's allocator, for the few things that live outside an arena. */
void *lw_take(lw_engine *engine, size_t size, lw_error *err);
void lw_give(lw_engine *engine, void *block, size_t size);

#endif
