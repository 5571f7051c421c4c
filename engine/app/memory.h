/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lua's allocator with a limit. The engine takes its memory through the same function, so the limit
 * counts both. */
#ifndef LW_APP_MEMORY_H
#define LW_APP_MEMORY_H

#include <stddef.h>

typedef struct lwa_memory {
    size_t used;
    size_t most;  /* 0 = no limit */
    int refused;  /* a request was refused because of the limit */
} lwa_memory;

/* A lua_Alloc; user is the lwa_memory. */
void *lwa_allocate(void *user, void *block, size_t old_size, size_t new_size);

#endif
