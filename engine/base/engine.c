/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/engine.h"

#include <stdlib.h>

static void *system_resize(void *user, void *block, size_t old_size, size_t new_size)
{
    (void)user;
    (void)old_size;
    if (new_size == 0) {
        free(block);
        return NULL;
    }
    return realloc(block, new_size);
}

lw_allocator lw_system_allocator(void)
{
    return (lw_allocator){.resize = system_resize, .user = NULL};
}

void lw_engine_begin(lw_engine *engine)
{
    *engine = (lw_engine){.allocator = lw_system_allocator()};
}

void lw_engine_end(lw_engine *engine)
{
    if (engine->free_plans != NULL)
        engine->free_plans(engine);
    engine->plans = NULL;
    engine->free_plans = NULL;
}

lw_status lw_engine_poll(lw_engine *engine, lw_error *err)
{
    if (engine->cancelled != NULL && engine->cancelled(engine->user))
        return lw_fail(err, LW_CANCELLED, NULL, "interrupted: stopped on request");
    return LW_OK;
}

void lw_engine_progress(lw_engine *engine, const char *what, double fraction)
{
    if (engine->progress != NULL)
        engine->progress(engine->user, what, fraction);
}
