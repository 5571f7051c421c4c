/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/figure.h"

#include "base/options.h"

#include <math.h>
#include <string.h>

lw_figure *lw_figure_new(lw_arena *arena, const char *name, const char *title, lw_error *err)
{
    lw_figure *figure = lw_arena_take(arena, 1, sizeof *figure, err);
    char *safe = lw_arena_text(arena, name != NULL && name[0] != '\0' ? name : "figure", err);
    if (figure == NULL || safe == NULL)
        return NULL;
    for (char *c = safe; *c != '\0'; c++)
        if (strchr("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789-_", *c) == NULL)
            *c = '_';
    figure->arena = arena;
    figure->name = safe;
    figure->caption = "";
    for (int i = 0; i < 3; i++)
        figure->axis[i] = (lw_figure_axis){.label = "", .unit = "", .low = NAN, .high = NAN};
    figure->title = lw_arena_text(arena, title, err);
    return figure->title != NULL ? figure : NULL;
}

lw_status lw_figure_label(lw_figure *figure, lw_figure_axis_name which, const char *label, const char *unit,
                          lw_error *err)
{
    if (figure == NULL)
        return LW_OUT_OF_MEMORY;
    lw_figure_axis *axis = &figure->axis[which];
    const char *label_copy = lw_arena_text(figure->arena, label, err);
    const char *unit_copy = lw_arena_text(figure->arena, unit, err);
    if (label_copy == NULL || unit_copy == NULL)
        return LW_OUT_OF_MEMORY;
    axis->label = label_copy;
    axis->unit = unit_copy;
    return LW_OK;
}

lw_series *lw_figure_series(lw_figure *figure, lw_series_kind kind, int panel, const char *label, const double *x,
                            const double *y, size_t n, lw_error *err)
{
    if (figure == NULL)
        return NULL;
    if (panel < 0 || panel > 1) {
        lw_fail(err, LW_BAD_ARGUMENT, "0 is the main panel, 1 the lower one", "figure \"%s\" has no panel %d",
                figure->title, panel);
        return NULL;
    }
    lw_series *series = lw_arena_take(figure->arena, 1, sizeof *series, err);
    if (series == NULL)
        return NULL;
    series->kind = kind;
    series->panel = panel;
    series->n = n;
    series->label = lw_arena_text(figure->arena, label, err);
    series->x = lw_arena_copy(figure->arena, x, n, sizeof *x, err);
    series->y = y != NULL ? lw_arena_copy(figure->arena, y, n, sizeof *y, err) : NULL;
    if (series->label == NULL || series->x == NULL || (y != NULL && series->y == NULL))
        return NULL;
    if (kind == LW_SERIES_BAND && figure->last != NULL && figure->last->panel == panel)
        series->style = figure->last->style;
    else
        series->style = figure->styles++;
    if (figure->last == NULL)
        figure->first = series;
    else
        figure->last->next = series;
    figure->last = series;
    return series;
}

lw_status lw_series_errors(lw_figure *figure, lw_series *series, const double *u_x, const double *u_y,
                           lw_error *err)
{
    if (figure == NULL || series == NULL)
        return LW_OUT_OF_MEMORY;
    if (u_x != NULL && (series->u_x = lw_arena_copy(figure->arena, u_x, series->n, sizeof *u_x, err)) == NULL)
        return LW_OUT_OF_MEMORY;
    if (u_y != NULL && (series->u_y = lw_arena_copy(figure->arena, u_y, series->n, sizeof *u_y, err)) == NULL)
        return LW_OUT_OF_MEMORY;
    return LW_OK;
}

lw_status lw_series_high(lw_figure *figure, lw_series *series, const double *high, lw_error *err)
{
    if (figure == NULL || series == NULL)
        return LW_OUT_OF_MEMORY;
    series->high = lw_arena_copy(figure->arena, high, series->n, sizeof *high, err);
    return series->high != NULL ? LW_OK : LW_OUT_OF_MEMORY;
}

lw_status lw_figure_note(lw_figure *figure, int panel, double x, double y, const char *text, lw_error *err)
{
    if (figure == NULL)
        return LW_OUT_OF_MEMORY;
    lw_note *note = lw_arena_take(figure->arena, 1, sizeof *note, err);
    if (note == NULL)
        return LW_OUT_OF_MEMORY;
    *note = (lw_note){.x = x, .y = y, .panel = panel, .next = figure->notes};
    if ((note->text = lw_arena_text(figure->arena, text, err)) == NULL)
        return LW_OUT_OF_MEMORY;
    figure->notes = note;
    return LW_OK;
}

/* ---- from a tree ---- */

static lw_status axis_of_tree(lw_figure *figure, lw_figure_axis_name which, const lw_node *axis, lw_error *err)
{
    if (axis == NULL)
        return LW_OK;
    const lw_node *log = lw_node_get(axis, "log");
    lw_status status =
        lw_figure_label(figure, which, lw_node_text(axis, "label", ""), lw_node_text(axis, "unit", ""), err);
    figure->axis[which].log = log != NULL && log->flag;
    figure->axis[which].low = lw_node_number(axis, "low", NAN);
    figure->axis[which].high = lw_node_number(axis, "high", NAN);
    return status;
}

/* The numbers of a vector child that must have n of them; NULL if it is missing (n_found = 0). */
static const double *numbers(const lw_node *group, const char *name, size_t *n_found)
{
    const lw_node *node = lw_node_get(group, name);
    bool vector = node != NULL && node->kind == LW_NODE_VECTOR;
    *n_found = vector ? node->n : 0;
    return vector ? node->vector : NULL;
}

static lw_status series_of_tree(lw_figure *figure, const lw_node *group, lw_error *err)
{
    static const char *const kinds[] = {"points", "line", "step", "band", "ticks", NULL};
    static const char *const parts[] = {"x", "y", "u_x", "u_y", "high"};
    const char *kind = lw_node_text(group, "kind", "line"), *label = lw_node_text(group, "label", "");
    const double *column[5];
    size_t n[5];
    int k = 0;
    while (kinds[k] != NULL && strcmp(kinds[k], kind) != 0)
        k++;
    if (kinds[k] == NULL) {
        const char *near = lw_nearest(kinds, kind);
        return lw_fail(err, LW_BAD_ARGUMENT, "kinds are points, line, step, band, ticks",
                       "figure \"%s\": no series of kind \"%s\"%s%s", figure->title, kind,
                       near ? "; the nearest is " : "", near ? near : "");
    }
    for (int i = 0; i < 5; i++)
        column[i] = numbers(group, parts[i], &n[i]);
    bool ticks = k == LW_SERIES_TICKS, band = k == LW_SERIES_BAND;
    if (column[0] == NULL || (!ticks && column[1] == NULL) || (band && column[4] == NULL))
        return lw_fail(err, LW_BAD_ARGUMENT, "x and y are vectors; a band has high too, ticks need x only",
                       "figure \"%s\": series \"%s\" lacks %s", figure->title, label,
                       column[0] == NULL   ? "x"
                       : column[1] == NULL ? "y"
                                           : "high");
    for (int i = 1; i < 5; i++)
        if (column[i] != NULL && n[i] != n[0])
            return lw_fail(err, LW_BAD_ARGUMENT, "give vectors of one length",
                           "figure \"%s\": series \"%s\" has %zu x but %zu %s", figure->title, label, n[0], n[i],
                           parts[i]);
    lw_series *series = lw_figure_series(figure, (lw_series_kind)k, (int)lw_node_number(group, "panel", 0), label,
                                         column[0], ticks ? NULL : column[1], n[0], err);
    if (series == NULL)
        return err != NULL ? err->status : LW_OUT_OF_MEMORY;
    lw_status status = lw_series_errors(figure, series, column[2], column[3], err);
    if (status == LW_OK && column[4] != NULL)
        status = lw_series_high(figure, series, column[4], err);
    return status;
}

lw_figure *lw_figure_of_tree(lw_arena *arena, const lw_node *group, lw_error *err)
{
    lw_figure *figure =
        lw_figure_new(arena, lw_node_text(group, "name", ""), lw_node_text(group, "title", ""), err);
    if (figure == NULL)
        return NULL;
    if ((figure->caption = lw_arena_text(arena, lw_node_text(group, "caption", ""), err)) == NULL ||
        axis_of_tree(figure, LW_AXIS_X, lw_node_get(group, "x"), err) != LW_OK ||
        axis_of_tree(figure, LW_AXIS_Y, lw_node_get(group, "y"), err) != LW_OK ||
        axis_of_tree(figure, LW_AXIS_LOWER_Y, lw_node_get(group, "lower_y"), err) != LW_OK)
        return NULL;
    const lw_node *list = lw_node_get(group, "series");
    for (const lw_node *child = list ? list->first : NULL; child != NULL; child = child->next)
        if (series_of_tree(figure, child, err) != LW_OK)
            return NULL;
    list = lw_node_get(group, "notes");
    for (const lw_node *child = list ? list->first : NULL; child != NULL; child = child->next)
        if (lw_figure_note(figure, (int)lw_node_number(child, "panel", 0), lw_node_number(child, "x", NAN),
                           lw_node_number(child, "y", NAN), lw_node_text(child, "text", ""), err) != LW_OK)
            return NULL;
    return figure;
}
