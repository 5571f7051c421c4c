/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Figures as the other nouns make them. */
#ifndef LW_BIND_FIGURES_H
#define LW_BIND_FIGURES_H

#include "bind/bind.h"
#include "record/figure.h"

typedef struct lwb_figure {
    lw_arena arena;
    lw_figure *figure;
} lwb_figure;

/* A figure of its own, without series; pushed. */
lw_figure *lwb_new_figure(lua_State *L, const char *name, const char *title);
/* The figure of a described group of a result tree (record/figure.h); pushed. */
void lwb_push_figure(lua_State *L, const lw_node *group);

/* Pushes the figure of a method's result and returns true, or false where there is nothing to draw. */
bool lwb_push_result_figure(lua_State *L, const lw_node *group, const char *name);

#endif
