/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The list of reflections behind the noun of that name. */
#ifndef LW_BIND_REFLECTIONS_H
#define LW_BIND_REFLECTIONS_H

#include "bind/bind.h"
#include "physics/crystal.h"

typedef struct lwb_reflections {
    lw_arena arena;
    const lw_reflection *reflection; /* [n], in the arena */
    size_t n;
    lw_material material; /* a copy of what they belong to */
    bool has_material;
} lwb_reflections;

lwb_reflections *lwb_reflections_self(lua_State *L, int index, const char *verb);

#endif
