/* SPDX-License-Identifier: GPL-3.0-or-later */
/* figure: what results give by :figure(), or one's own by lw.figure{...}; saved as SVG, PNG or PDF. */
#include "bind/figures.h"
#include "bind/outputs.h"
#include "record/gnuplot.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static int end_figure(lua_State *L)
{
    lwb_figure *self = lua_touserdata(L, 1);
    if (self->arena.engine != NULL)
        lw_arena_end(&self->arena);
    self->figure = NULL;
    return 0;
}

static lwb_figure *new_figure(lua_State *L)
{
    lwb_figure *self = lwb_new(L, &lwb_figure_noun, sizeof *self, 0);
    lw_arena_begin(&self->arena, lwb_engine(L));
    return self;
}

lw_figure *lwb_new_figure(lua_State *L, const char *name, const char *title)
{
    lw_error err = LW_ERROR_NONE;
    lwb_figure *self = new_figure(L);
    self->figure = lw_figure_new(&self->arena, name, title, &err);
    lwb_check(L, LW_OK, &err);
    return self->figure;
}

void lwb_push_figure(lua_State *L, const lw_node *group)
{
    lw_error err = LW_ERROR_NONE;
    lwb_figure *self = new_figure(L);
    self->figure = lw_figure_of_tree(&self->arena, group, &err);
    lwb_check(L, LW_OK, &err);
}

/* Values and, where the list holds quantities, their uncertainties. */
static const double *column(lua_State *L, int series, const char *key, size_t *n, const double **u)
{
    *u = NULL;
    *n = 0;
    if (lua_getfield(L, series, key) == LUA_TNIL)
        return NULL;
    int list = lua_gettop(L);
    const double *x = lwb_to_vector(L, list, "figure", key, n);
    bool any = false;
    for (size_t i = 0; lua_istable(L, list) && i < *n && !any; i++) {
        lua_rawgeti(L, list, (lua_Integer)i + 1);
        const lw_quantity *q = lwb_test_quantity(L, -1);
        any = q != NULL && q->u > 0;
        lua_pop(L, 1);
    }
    if (any) {
        double *spread = lwb_new_vector(L, *n);
        for (size_t i = 0; i < *n; i++) {
            lua_rawgeti(L, list, (lua_Integer)i + 1);
            const lw_quantity *q = lwb_test_quantity(L, -1);
            spread[i] = q != NULL && q->kind == LW_VALUE ? q->u : 0;
            lua_pop(L, 1);
        }
        *u = spread;
    }
    return x; /* what was pushed stays, so that it lives until the caller returns */
}

static void add_series(lua_State *L, lw_figure *figure, int at)
{
    static const char *const keys[] = {"kind", "label", "x", "y", "u_x", "u_y", "high", "panel", NULL};
    static const char *const kinds[] = {"points", "line", "step", "band", "ticks", NULL};
    luaL_checkstack(L, 24, NULL);
    lwb_want_table(L, at, "figure", "a series");
    lwb_only_keys(L, at, "figure", keys);
    const char *kind = lwb_field_text(L, at, "kind", "figure", "points");
    int which = 0;
    while (kinds[which] != NULL && strcmp(kinds[which], kind) != 0)
        which++;
    if (kinds[which] == NULL)
        lwb_refuse(L, "choose from: points, line, step, band, ticks", "figure: a series can't be '%s'", kind);
    const double *u_x, *u_y, *none;
    size_t n, n_y, n_high, n_ux, n_uy;
    const double *x = column(L, at, "x", &n, &u_x), *y = column(L, at, "y", &n_y, &u_y);
    const double *high = column(L, at, "high", &n_high, &none);
    const double *given_ux = column(L, at, "u_x", &n_ux, &none), *given_uy = column(L, at, "u_y", &n_uy, &none);
    if (x == NULL || (y == NULL && which != LW_SERIES_TICKS))
        lwb_refuse(L, NULL, "figure: a series needs x and y");
    if ((y != NULL && n_y != n) || (high != NULL && n_high != n) || (given_ux != NULL && n_ux != n) ||
        (given_uy != NULL && n_uy != n))
        lwb_refuse(L, NULL, "figure: the columns of a series differ in length");
    lw_error err = LW_ERROR_NONE;
    lw_series *series =
        lw_figure_series(figure, (lw_series_kind)which, (int)lwb_field_number(L, at, "panel", "figure", 0),
                         lwb_field_text(L, at, "label", "figure", ""), x, y, n, &err);
    if (series != NULL && high != NULL)
        lw_series_high(figure, series, high, &err);
    u_x = given_ux ? given_ux : u_x;
    u_y = given_uy ? given_uy : u_y;
    if (series != NULL && (u_x != NULL || u_y != NULL))
        lw_series_errors(figure, series, u_x, u_y, &err);
    lwb_check(L, LW_OK, &err);
}

static void read_axis(lua_State *L, lw_figure *figure, const char *key, lw_figure_axis_name which)
{
    static const char *const keys[] = {"label", "unit", "log", "low", "high", NULL};
    lw_error err = LW_ERROR_NONE;
    int type = lua_getfield(L, 1, key);
    int at = lua_gettop(L);
    if (type == LUA_TSTRING)
        lw_figure_label(figure, which, lua_tostring(L, at), "", &err);
    else if (type != LUA_TNIL) {
        lwb_want_table(L, at, "figure", key);
        lwb_only_keys(L, at, "figure", keys);
        lw_figure_label(figure, which, lwb_field_text(L, at, "label", "figure", ""),
                        lwb_field_text(L, at, "unit", "figure", ""), &err);
        figure->axis[which].log = lwb_field_flag(L, at, "log", "figure", false);
        figure->axis[which].low = lwb_field_number(L, at, "low", "figure", NAN);
        figure->axis[which].high = lwb_field_number(L, at, "high", "figure", NAN);
    }
    lwb_check(L, LW_OK, &err);
    lua_pop(L, 1);
}

/* lw.figure{ name =, title =, caption =, x = {label, unit, log}, y =, lower_y =, series = { {kind, label, x, y,
 * u_x, u_y, high, panel}, ... }, notes = { {x, y, text, panel} } } */
static int make(lua_State *L)
{
    static const char *const keys[] = {"name", "title", "caption", "x", "y", "lower_y", "series", "notes", NULL};
    lwb_want_table(L, 1, "figure", "the argument");
    lua_settop(L, 1);
    lwb_only_keys(L, 1, "figure", keys);
    lw_error err = LW_ERROR_NONE;
    const char *title = lwb_field_text(L, 1, "title", "figure", "");
    lw_figure *figure = lwb_new_figure(L, lwb_field_text(L, 1, "name", "figure", "figure"), title);
    lwb_figure *self = lua_touserdata(L, 2);
    const char *caption = lwb_field_text(L, 1, "caption", "figure", NULL);
    if (caption != NULL)
        figure->caption = lw_arena_text(&self->arena, caption, &err);
    lwb_check(L, LW_OK, &err);
    read_axis(L, figure, "x", LW_AXIS_X);
    read_axis(L, figure, "y", LW_AXIS_Y);
    read_axis(L, figure, "lower_y", LW_AXIS_LOWER_Y);
    lua_getfield(L, 1, "series");
    lwb_want_table(L, 3, "figure", "the field 'series'");
    for (lua_Integer i = 1, n = (lua_Integer)lua_rawlen(L, 3); i <= n; i++) {
        lua_rawgeti(L, 3, i);
        add_series(L, figure, 4);
        lua_settop(L, 3);
    }
    if (lua_getfield(L, 1, "notes") != LUA_TNIL) {
        lwb_want_table(L, 4, "figure", "the field 'notes'");
        for (lua_Integer i = 1, n = (lua_Integer)lua_rawlen(L, 4); i <= n; i++) {
            lua_rawgeti(L, 4, i);
            lwb_want_table(L, 5, "figure", "a note");
            lw_figure_note(figure, (int)lwb_field_number(L, 5, "panel", "figure", 0),
                           lwb_field_number(L, 5, "x", "figure", 0), lwb_field_number(L, 5, "y", "figure", 0),
                           lwb_field_text(L, 5, "text", "figure", ""), &err);
            lwb_check(L, LW_OK, &err);
            lua_settop(L, 4);
        }
    }
    lua_settop(L, 2);
    return 1;
}

/* f:save(path): the suffix .svg, .png or .pdf says the format. */
static int save(lua_State *L)
{
    lwb_figure *self = lwb_self(L, 1, &lwb_figure_noun, "figure:save");
    const char *path = lwb_text(L, 2, "figure:save", "the path");
    lwb_allow_write(L, path, "figure:save");
    lw_error err = LW_ERROR_NONE;
    lwb_check(L, lw_figure_save_as(lwb_engine(L), self->figure, path, &err), &err);
    return 0;
}

static bool field(lua_State *L, const char *key)
{
    const lwb_figure *self = lwb_self(L, 1, &lwb_figure_noun, "figure");
    if (strcmp(key, "name") == 0)
        lua_pushstring(L, self->figure->name);
    else if (strcmp(key, "title") == 0)
        lua_pushstring(L, self->figure->title);
    else if (strcmp(key, "caption") == 0)
        lua_pushstring(L, self->figure->caption);
    else
        return false;
    return true;
}

static int show(lua_State *L)
{
    const lwb_figure *self = lwb_self(L, 1, &lwb_figure_noun, "tostring");
    size_t n = 0;
    for (const lw_series *series = self->figure->first; series != NULL; series = series->next)
        n++;
    lua_pushfstring(L, "figure %s: %s, %d series; save it with :save \"%s.svg\"", self->figure->name, self->figure->title,
                    (int)n, self->figure->name);
    return 1;
}

static const char *const fields[] = {"name", "title", "caption", NULL};
static const luaL_Reg functions[] = {{"figure", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"save", save}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_figure_noun = {.name = "figure",
                                  .functions = functions,
                                  .methods = methods,
                                  .metamethods = metamethods,
                                  .gc = end_figure,
                                  .fields = fields,
                                  .field = field};
