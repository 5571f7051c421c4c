/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The figure of a method's result: one it describes itself (a group `figure`), or its points with the
 * line through them. */
#include "bind/figures.h"

#include <stdio.h>
#include <string.h>

/* The first vectors of a group in order: x, y, and u if one is called so. */
static bool columns(const lw_node *group, const lw_node **x, const lw_node **y, const lw_node **u)
{
    *x = *y = NULL;
    *u = lw_node_get(group, "u");
    for (const lw_node *child = group->first; child != NULL; child = child->next) {
        if (child->kind != LW_NODE_VECTOR || child == *u)
            continue;
        if (*x == NULL)
            *x = child;
        else if (*y == NULL)
            *y = child;
    }
    if (*u != NULL && (*u)->kind != LW_NODE_VECTOR)
        *u = NULL;
    return *x != NULL && *y != NULL && (*x)->n == (*y)->n && (*x)->n > 0;
}

static const lw_node *vector_of(const lw_node *group, const char *name, size_t n)
{
    const lw_node *found = lw_node_get(group, name);
    return found != NULL && found->kind == LW_NODE_VECTOR && (n == 0 || found->n == n) ? found : NULL;
}

/* A group of vectors x, y, u_x, u_y and line_x, line_y, with texts x_label and y_label if it has them; else
 * they are the size-strain plot's. */
static bool push_plot(lua_State *L, const lw_node *group, const lw_node *plot, const char *name)
{
    lw_error err = LW_ERROR_NONE;
    const lw_node *x = vector_of(plot, "x", 0), *y = x ? vector_of(plot, "y", x->n) : NULL;
    if (y == NULL || x->n == 0)
        return false;
    const lw_node *u_x = vector_of(plot, "u_x", x->n), *u_y = vector_of(plot, "u_y", x->n);
    const lw_node *line_x = vector_of(plot, "line_x", 0), *line_y = line_x ? vector_of(plot, "line_y", line_x->n) : NULL;
    lw_figure *figure = lwb_new_figure(L, name, lw_node_text(group, "title", name));
    lw_figure_label(figure, LW_AXIS_X, lw_node_text(plot, "x_label", "breadth / s^2"), x->unit, &err);
    lw_figure_label(figure, LW_AXIS_Y, lw_node_text(plot, "y_label", "(breadth / s)^2"), y->unit, &err);
    lw_series *series = lw_figure_series(figure, LW_SERIES_POINTS, 0, "lines", x->vector, y->vector, x->n, &err);
    if (series != NULL && (u_x != NULL || u_y != NULL))
        lw_series_errors(figure, series, u_x ? u_x->vector : NULL, u_y ? u_y->vector : NULL, &err);
    if (line_y != NULL)
        lw_figure_series(figure, LW_SERIES_LINE, 0, "fit", line_x->vector, line_y->vector, line_x->n, &err);
    lwb_check(L, LW_OK, &err);
    return true;
}

/* What an axis is called, for names that are short in records. */
static const char *axis_name(const char *name)
{
    if (strcmp(name, "s") == 0)
        return "s = 2 sin(theta)/lambda";
    return strcmp(name, "breadth") == 0 ? "integral breadth in s" : name;
}

bool lwb_push_result_figure(lua_State *L, const lw_node *group, const char *name)
{
    lw_error err = LW_ERROR_NONE;
    const lw_node *described = lw_node_get(group, "figure");
    if (described != NULL && described->kind == LW_NODE_GROUP) {
        lwb_push_figure(L, described);
        return true;
    }
    const lw_node *plot = lw_node_get(group, "plot");
    if (plot != NULL && plot->kind == LW_NODE_GROUP)
        return push_plot(L, group, plot, name);
    const lw_node *points = lw_node_get(group, "points"), *line = lw_node_get(group, "line");
    const lw_node *x, *y, *u, *line_x = NULL, *line_y = NULL, *line_u = NULL;
    if (points == NULL || points->kind != LW_NODE_GROUP || !columns(points, &x, &y, &u))
        return false;
    lw_figure *figure = lwb_new_figure(L, name, lw_node_text(group, "title", name));
    lw_figure_label(figure, LW_AXIS_X, axis_name(x->name), x->unit, &err);
    lw_figure_label(figure, LW_AXIS_Y, axis_name(y->name), y->unit, &err);
    lw_series *series = lw_figure_series(figure, LW_SERIES_POINTS, 0, "lines", x->vector, y->vector, x->n, &err);
    if (series != NULL && u != NULL && u->n == x->n)
        lw_series_errors(figure, series, NULL, u->vector, &err);
    const lw_node *hkl = lw_node_get(points, "hkl");
    size_t i = 0;
    for (const lw_node *text = hkl ? hkl->first : NULL; text != NULL && i < x->n; text = text->next, i++)
        if (text->kind == LW_NODE_TEXT)
            lw_figure_note(figure, 0, x->vector[i], y->vector[i], text->text, &err);
    if (line != NULL && line->kind == LW_NODE_GROUP && columns(line, &line_x, &line_y, &line_u))
        lw_figure_series(figure, LW_SERIES_LINE, 0, "fit", line_x->vector, line_y->vector, line_x->n, &err);
    lwb_check(L, LW_OK, &err);
    return true;
}
