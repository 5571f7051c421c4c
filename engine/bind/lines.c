/* SPDX-License-Identifier: GPL-3.0-or-later */
/* lines: lw.fit_lines(scan, reflections, options). A lines object keeps its scan and its calibration;
 * its entries and statistics read like any result. */
#include "line/lines.h"
#include "bind/bind.h"
#include "bind/figures.h"
#include "bind/reflections.h"
#include "bind/roads.h"
#include "instrument/calibration.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static int end_lines(lua_State *L)
{
    lwb_box *box = lua_touserdata(L, 1);
    lw_lines_free(box->object);
    box->object = NULL;
    return 0;
}

static const lw_lines *self_of(lua_State *L, const char *verb)
{
    return lwb_object(L, 1, &lwb_lines_noun, verb);
}

/* Shifts expected of each reflection from the calibration's aberrations; the array lives in a vector
 * left on the stack. */
static const double *expected_shifts(lua_State *L, const lw_calibration *calibration, const lwb_reflections *r)
{
    double *shift = lwb_new_vector(L, r->n);
    for (size_t i = 0; i < r->n; i++)
        shift[i] = lw_aberrations_shift(&calibration->aberrations, r->reflection[i].two_theta_deg, NULL);
    return shift;
}

static int fit_lines(lua_State *L)
{
    static const char *const own[] = {"instrument", "background", NULL};
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 3);
    luaL_checkstack(L, 40, NULL);
    const lw_scan *scan = lwb_object(L, 1, &lwb_scan_noun, "fit_lines");
    if (!scan->has_radiation)
        return lwb_refuse(L, "read it with { radiation = ... }", "fit_lines: the scan has no radiation");
    if (lwb_test(L, 2, &lwb_material_noun) != NULL || lwb_test(L, 2, &lwb_standard_noun) != NULL) {
        luaL_getmetafield(L, 2, "__methods");
        lua_getfield(L, -1, "reflections");
        lua_pushvalue(L, 2);
        lua_pushvalue(L, 1);
        lua_call(L, 2, 1);
        lua_replace(L, 2);
        lua_settop(L, 3);
    }
    const lwb_reflections *reflections = lwb_reflections_self(L, 2, "fit_lines");
    lw_fit_options options = lw_fit_defaults();
    lwb_options(L, 3, "fit_lines", lw_fit_option_table, own, &options);
    int instrument = 0, background = 0;
    if (!lua_isnil(L, 3) && lua_getfield(L, 3, "instrument") != LUA_TNIL) {
        instrument = lua_gettop(L);
        const lw_calibration *calibration = lwb_object(L, instrument, &lwb_calibration_noun, "fit_lines: instrument");
        lwb_check(L,
                  lw_calibration_covers(calibration, &scan->radiation, scan->two_theta_deg[0],
                                        scan->two_theta_deg[scan->n - 1], &err),
                  &err);
        options.instrument = &calibration->profile;
        options.expected_shift = expected_shifts(L, calibration, reflections);
    }
    if (!lua_isnil(L, 3) && lua_getfield(L, 3, "background") != LUA_TNIL) {
        background = lua_gettop(L);
        options.background_scan = lwb_object(L, background, &lwb_scan_noun, "fit_lines: background");
    }
    lwb_box *box = lwb_new_box(L, &lwb_lines_noun, LWB_LINES_VALUES);
    int self = lua_gettop(L);
    lua_pushvalue(L, 1);
    lua_setiuservalue(L, self, LWB_LINES_SCAN);
    if (instrument != 0) {
        lua_pushvalue(L, instrument);
        lua_setiuservalue(L, self, LWB_LINES_CALIBRATION);
    }
    lua_pushvalue(L, 2);
    lua_setiuservalue(L, self, LWB_LINES_REFLECTIONS);
    if (background != 0) {
        lua_pushvalue(L, background);
        lua_setiuservalue(L, self, LWB_LINES_BACKGROUND);
    }
    lwb_keep_options(L, self, LWB_LINES_OPTIONS, "fit_lines", lw_fit_option_table, &options);
    lw_lines *lines = NULL;
    lw_status status = lw_fit_lines(lwb_engine(L), scan, reflections->reflection, reflections->n,
                                    reflections->has_material ? &reflections->material : NULL, &options, &lines, &err);
    box->object = lines;
    lwb_check(L, status, &err);
    lwb_tree *tree = lwb_new_tree(L);
    tree->root = lw_lines_tree(lines, &tree->arena, &err);
    tree->node = tree->root;
    lwb_check(L, LW_OK, &err);
    lua_setiuservalue(L, self, LWB_LINES_TREE);
    lua_settop(L, self);
    return 1;
}

/* Fitted curve over the data, residuals in units of their u below, ticks at the lines. */
static int figure(lua_State *L)
{
    const lw_lines *lines = self_of(L, "lines:figure");
    const lw_scan *scan = lines->scan;
    lw_error err = LW_ERROR_NONE;
    double *residual = lwb_new_vector(L, scan->n), *place = lwb_new_vector(L, lines->n);
    for (size_t i = 0; i < scan->n; i++) {
        bool fitted = lines->variance[i] > 0;
        residual[i] = fitted ? (scan->intensity[i] - lines->fitted[i]) / sqrt(lines->variance[i]) : 0;
    }
    for (size_t i = 0; i < lines->n; i++)
        place[i] = lines->line[i].two_theta.value;
    lw_figure *made = lwb_new_figure(L, "lines", "Fit of the lines");
    lw_figure_label(made, LW_AXIS_X, "2theta", "deg", &err);
    lw_figure_label(made, LW_AXIS_Y, scan->noise == LW_NOISE_COUNTS ? "counts" : "intensity", "", &err);
    lw_figure_label(made, LW_AXIS_LOWER_Y, "residual / u", "", &err);
    lw_figure_series(made, LW_SERIES_POINTS, 0, "measured", scan->two_theta_deg, scan->intensity, scan->n, &err);
    lw_figure_series(made, LW_SERIES_LINE, 0, "fitted", scan->two_theta_deg, lines->fitted, scan->n, &err);
    lw_figure_series(made, LW_SERIES_LINE, 0, "background", scan->two_theta_deg, lines->background, scan->n, &err);
    lw_figure_series(made, LW_SERIES_TICKS, 0, "lines", place, NULL, lines->n, &err);
    lw_figure_series(made, LW_SERIES_LINE, 1, "", scan->two_theta_deg, residual, scan->n, &err);
    lwb_check(L, LW_OK, &err);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    const lw_lines *lines = self_of(L, "lines");
    const lw_scan *scan = lines->scan;
    if (strcmp(key, "scan") == 0)
        lua_getiuservalue(L, 1, LWB_LINES_SCAN);
    else if (strcmp(key, "instrument") == 0)
        lua_getiuservalue(L, 1, LWB_LINES_CALIBRATION);
    else if (strcmp(key, "n") == 0)
        lua_pushinteger(L, (lua_Integer)lines->n);
    else if (strcmp(key, "material") == 0) {
        if (lines->material != NULL) {
            lw_material *copy = lwb_new(L, &lwb_material_noun, sizeof *copy, 0);
            *copy = *lines->material;
        } else
            lua_pushnil(L);
    } else if (strcmp(key, "radiation") == 0) {
        lw_radiation *copy = lwb_new(L, &lwb_radiation_noun, sizeof *copy, 0);
        *copy = lines->radiation;
    } else if (strcmp(key, "fitted") == 0)
        lwb_push_vector(L, lines->fitted, scan->n, 1);
    else if (strcmp(key, "background") == 0)
        lwb_push_vector(L, lines->background, scan->n, 1);
    else if (strcmp(key, "variance") == 0)
        lwb_push_vector(L, lines->variance, scan->n, 1);
    else
        return false;
    return true;
}

static const char *const fields[] = {"scan",   "instrument", "n",        "material", "radiation",
                                     "fitted", "background", "variance", NULL};

/* Upvalue 1: methods. */
static int at(lua_State *L)
{
    self_of(L, "lines");
    return lwb_index_road(L, &lwb_lines_noun, LWB_LINES_TREE, "lines");
}

static int length(lua_State *L)
{
    lua_pushinteger(L, (lua_Integer)self_of(L, "#lines")->n);
    return 1;
}

static int show(lua_State *L)
{
    self_of(L, "tostring");
    lua_getiuservalue(L, 1, LWB_LINES_TREE);
    luaL_tolstring(L, -1, NULL);
    return 1;
}

static int table(lua_State *L)
{
    self_of(L, "lines:table");
    lua_getiuservalue(L, 1, LWB_LINES_TREE);
    lwb_tree *tree = lua_touserdata(L, -1);
    lwb_push_table(L, tree->node, -1);
    return 1;
}

static const luaL_Reg functions[] = {{"fit_lines", fit_lines}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"figure", figure}, {"table", table}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__index", at}, {"__len", length}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_lines_noun = {.name = "lines",
                                 .functions = functions,
                                 .methods = methods,
                                 .metamethods = metamethods,
                                 .gc = end_lines,
                                 .fields = fields,
                                 .field = field};
