/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/memory.h"

#include <stdlib.h>

void *lwa_allocate(void *user, void *block, size_t old_size, size_t new_size)
{
    lwa_memory *memory = user;
    size_t held = block != NULL ? old_size : 0; /* without a block old_size is a kind of object */
    if (new_size == 0) {
        free(block);
        memory->used -= held;
        return NULL;
    }
    /* a shrink is never refused: Lua relies on that */
    if (memory->most > 0 && new_size > held && new_size - held > memory->most - (memory->used < memory->most ? memory->used : memory->most)) {
        memory->refused = 1;
        return NULL;
    }
    void *fresh = realloc(block, new_size);
    if (fresh != NULL)
        memory->used = memory->used - held + new_size;
    return fresh;
}
