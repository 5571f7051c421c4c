/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/arena.h"

#include "base/pages.h"

#include <stdarg.h>
#include <stdint.h>
#include <stdio.h>
#include <string.h>

#define ALIGNMENT 64u
#define CHUNK_LEAST 4096u

struct lw_arena_chunk {
    lw_arena_chunk *older;
    size_t size; /* of the whole block, this head included */
    size_t used; /* counted from the block's start */
};

void lw_arena_begin(lw_arena *arena, lw_engine *engine)
{
    arena->engine = engine;
    arena->chunk = NULL;
}

static void give_chunks(lw_arena *arena, const lw_arena_chunk *until)
{
    while (arena->chunk != until) {
        lw_arena_chunk *older = arena->chunk->older;
        lw_give(arena->engine, arena->chunk, arena->chunk->size);
        arena->chunk = older;
    }
}

void lw_arena_end(lw_arena *arena)
{
    give_chunks(arena, NULL);
}

lw_arena_mark lw_arena_mark_now(const lw_arena *arena)
{
    return (lw_arena_mark){.chunk = arena->chunk, .used = arena->chunk != NULL ? arena->chunk->used : 0};
}

void lw_arena_rewind(lw_arena *arena, lw_arena_mark mark)
{
    give_chunks(arena, mark.chunk);
    if (arena->chunk != NULL)
        arena->chunk->used = mark.used;
}

lw_status lw_arena_reserve(lw_arena *arena, size_t bytes, lw_error *err)
{
    size_t page = lw_large_page(bytes), total = bytes + page + sizeof(lw_arena_chunk) + ALIGNMENT;
    lw_arena_chunk *fresh = lw_take(arena->engine, total, err);
    if (fresh == NULL)
        return LW_OUT_OF_MEMORY;
    *fresh = (lw_arena_chunk){.older = arena->chunk, .size = total, .used = sizeof *fresh};
    /* begin where a large page does; what is passed over is never touched */
    if (page > 0)
        fresh->used += (size_t)((page - ((uintptr_t)fresh + fresh->used) % page) % page);
    arena->chunk = fresh;
    return LW_OK;
}

void *lw_take(lw_engine *engine, size_t size, lw_error *err)
{
    void *block = engine->allocator.resize(engine->allocator.user, NULL, 0, size);
    if (block == NULL)
        lw_fail(err, LW_OUT_OF_MEMORY, "raise the memory limit or crop the scan",
                "out of memory: %zu bytes were refused", size);
    else
        lw_prefer_large_pages(block, size);
    return block;
}

void lw_give(lw_engine *engine, void *block, size_t size)
{
    if (block != NULL)
        engine->allocator.resize(engine->allocator.user, block, size, 0);
}

/* Offset of the first aligned byte at or after `used` in a chunk. */
static size_t aligned(const lw_arena_chunk *chunk, size_t used)
{
    uintptr_t at = (uintptr_t)chunk + used;
    return used + (size_t)((ALIGNMENT - at % ALIGNMENT) % ALIGNMENT);
}

void *lw_arena_take_raw(lw_arena *arena, size_t count, size_t size, lw_error *err)
{
    if (size != 0 && count > (SIZE_MAX / 4) / size) {
        lw_fail(err, LW_OUT_OF_MEMORY, NULL, "out of memory: %zu x %zu bytes can't be counted", count,
                size);
        return NULL;
    }
    size_t bytes = count * size;
    lw_arena_chunk *chunk = arena->chunk;
    if (chunk == NULL || aligned(chunk, chunk->used) + bytes > chunk->size) {
        /* each chunk is as large as all before it, so the number of chunks stays logarithmic */
        size_t total = chunk ? 2 * chunk->size : CHUNK_LEAST;
        if (total < bytes + sizeof *chunk + ALIGNMENT)
            total = bytes + sizeof *chunk + ALIGNMENT;
        lw_arena_chunk *fresh = lw_take(arena->engine, total, err);
        if (fresh == NULL)
            return NULL;
        *fresh = (lw_arena_chunk){.older = chunk, .size = total, .used = sizeof *fresh};
        arena->chunk = chunk = fresh;
    }
    size_t start = aligned(chunk, chunk->used);
    chunk->used = start + bytes;
    return (char *)chunk + start;
}

void *lw_arena_take(lw_arena *arena, size_t count, size_t size, lw_error *err)
{
    void *block = lw_arena_take_raw(arena, count, size, err);
    if (block != NULL)
        memset(block, 0, count * size);
    return block;
}

void *lw_arena_copy(lw_arena *arena, const void *from, size_t count, size_t size, lw_error *err)
{
    void *copy = lw_arena_take_raw(arena, count, size, err);
    if (copy != NULL && count * size > 0)
        memcpy(copy, from, count * size);
    return copy;
}

char *lw_arena_text(lw_arena *arena, const char *text, lw_error *err)
{
    if (text == NULL)
        text = "";
    return lw_arena_copy(arena, text, strlen(text) + 1, 1, err);
}

char *lw_arena_print(lw_arena *arena, lw_error *err, const char *format, ...)
{
    va_list arguments, again;
    va_start(arguments, format);
    va_copy(again, arguments);
    int length = vsnprintf(NULL, 0, format, arguments);
    va_end(arguments);
    char *text = length < 0 ? NULL : lw_arena_take(arena, (size_t)length + 1, 1, err);
    if (text != NULL)
        vsnprintf(text, (size_t)length + 1, format, again);
    va_end(again);
    return text;
}
