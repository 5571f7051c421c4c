/* SPDX-License-Identifier: GPL-3.0-or-later */
/* calibration: lw.calibrate(lines, standard, options) or lw.load_calibration(path). */
#include "instrument/calibration.h"
#include "instrument/profile_shape.h"
#include "base/sha256.h"
#include "bind/bind.h"
#include "bind/checks.h"
#include "bind/comparison.h"
#include "bind/figures.h"
#include "bind/inputs.h"
#include "bind/outputs.h"
#include "bind/roads.h"
#include "bind/standards.h"
#include "line/width_figure.h"
#include "record/file.h"
#include "record/json.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static int end_calibration(lua_State *L)
{
    lwb_box *box = lua_touserdata(L, 1);
    lw_calibration_free(box->object);
    box->object = NULL;
    return 0;
}

static lw_calibration *self_of(lua_State *L, const char *verb)
{
    return lwb_object(L, 1, &lwb_calibration_noun, verb);
}

/* The record of the calibration on the top of the stack as a view that keeps it alive. */
static void keep_record(lua_State *L, const lw_calibration *calibration)
{
    lwb_push_node(L, calibration->record, -1);
    lua_setiuservalue(L, -2, LWB_CALIBRATION_TREE);
}

/* Entry `at` of the list of scans at index 1, into the list of lines at `lines` and of standards at `standards`. */
static void read_entry(lua_State *L, lua_Integer at, int lines, int standards, lw_calibration_scan *scan)
{
    static const char *const keys[] = {"attenuation", "positions_only", NULL};
    lua_rawgeti(L, 1, at);
    int entry = lua_gettop(L);
    lwb_want_table(L, entry, "calibrate", "a scan, { lines, standard },");
    lua_createtable(L, 0, 2); /* the named fields alone, for their check */
    for (lua_pushnil(L); lua_next(L, entry) != 0; lua_pop(L, 1))
        if (!lua_isinteger(L, -2) || lua_tointeger(L, -2) < 1 || lua_tointeger(L, -2) > 2) {
            lua_pushvalue(L, -2);
            lua_pushvalue(L, -2);
            lua_rawset(L, entry + 1);
        }
    lwb_only_keys(L, entry + 1, "calibrate", keys);
    scan->attenuation_per_mm = lwb_field_number(L, entry + 1, "attenuation", "calibrate", NAN);
    scan->positions_only = lwb_field_flag(L, entry + 1, "positions_only", "calibrate", false);
    if (scan->attenuation_per_mm < 0)
        lwb_refuse(L, "give 1/mm, 0 for a specimen that is not transparent", "calibrate: the attenuation of scan %d is negative",
                   (int)at);
    lua_rawgeti(L, entry, 1);
    scan->lines = lwb_object(L, -1, &lwb_lines_noun, "calibrate");
    lua_rawseti(L, lines, at);
    lua_rawgeti(L, entry, 2);
    if (lua_isnil(L, -1))
        lwb_refuse(L, "calibrate({ { lines, standard }, { lines, standard } }, { ... })",
                   "calibrate: scan %d has no standard", (int)at);
    scan->standard = lwb_standard_at(L, lua_gettop(L), "calibrate");
    lua_rawseti(L, standards, at);
    lua_settop(L, entry - 1);
}

/* lw.calibrate(lines, standard, options), or lw.calibrate({ { lines, standard }, ... }, options). */
static int calibrate(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 3);
    luaL_checkstack(L, 60, NULL);
    lw_calibration_scan scan[LW_SET_MOST];
    size_t n = 1;
    int lines = 1, standards = 2;
    bool many = lua_istable(L, 1);
    if (many) {
        if (!lua_isnil(L, 3))
            return lwb_refuse(L, "calibrate({ { lines, standard }, { lines, standard } }, { ... })",
                              "calibrate: a list of scans brings its standards, the options come second");
        n = lua_rawlen(L, 1);
        if (n == 0 || n > LW_SET_MOST)
            return lwb_refuse(L, "give { lines, standard } for each scan", "calibrate: %d scans; 1 to %d can be joined", (int)n,
                              LW_SET_MOST);
        lua_insert(L, 2);
        lua_settop(L, 3); /* list, nil, options */
        lua_createtable(L, (int)n, 0);
        lua_createtable(L, (int)n, 0);
        lines = 4, standards = 5;
        for (size_t i = 0; i < n; i++)
            read_entry(L, (lua_Integer)i + 1, lines, standards, &scan[i]);
    } else {
        scan[0] = (lw_calibration_scan){.attenuation_per_mm = NAN};
        scan[0].lines = lwb_object(L, 1, &lwb_lines_noun, "calibrate");
        scan[0].standard = lwb_standard_at(L, 2, "calibrate");
    }
    lw_calibrate_options options = lw_calibrate_defaults();
    lwb_options(L, 3, "calibrate", lw_calibrate_option_table, NULL, &options);
    lwb_box *box = lwb_new_box(L, &lwb_calibration_noun, LWB_CALIBRATION_VALUES);
    if (many) { /* the first stands for all on the road; the lists keep the others alive */
        lua_rawgeti(L, lines, 1);
        lua_setiuservalue(L, -2, LWB_CALIBRATION_LINES);
        lua_rawgeti(L, standards, 1);
    } else {
        lua_pushvalue(L, lines);
        lua_setiuservalue(L, -2, LWB_CALIBRATION_LINES);
        lua_pushvalue(L, standards);
    }
    lua_setiuservalue(L, -2, LWB_CALIBRATION_STANDARD);
    lwb_keep_options(L, -1, LWB_CALIBRATION_OPTIONS, "calibrate", lw_calibrate_option_table, &options);
    lw_calibration *calibration = NULL;
    lw_status status = lw_calibrate_set(lwb_engine(L), scan, n, &options, &calibration, &err);
    box->object = calibration;
    lwb_check(L, status, &err);
    keep_record(L, calibration);
    return 1;
}

static int load(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    const char *path = lwb_text(L, 1, "load_calibration", "the path");
    lua_settop(L, 1);
    lw_arena *scratch = lwb_scratch(L);
    char *bytes = NULL;
    size_t size = 0;
    lw_node *record = NULL;
    lwb_engine(L);
    lwb_check(L, lw_read_file(scratch, path, LW_JSON_MOST, &bytes, &size, &err), &err);
    lwb_check(L, lw_json_read(scratch, bytes, size, path, &record, &err), &err);
    lwb_box *box = lwb_new_box(L, &lwb_calibration_noun, LWB_CALIBRATION_VALUES);
    lw_calibration *calibration = NULL;
    lw_status status = lw_calibration_from_tree(lwb_engine(L), record, path, &calibration, &err);
    box->object = calibration;
    lwb_check(L, status, &err);
    lw_sha256_hex(bytes, size, calibration->hash);
    lwb_check_unchanged(L, path, calibration->hash, "load_calibration");
    keep_record(L, calibration);
    return 1;
}

lwb_tree *lwb_calibration_record(lua_State *L, int index)
{
    lw_error err = LW_ERROR_NONE;
    index = lua_absindex(L, index);
    const lw_calibration *calibration = lwb_object(L, index, &lwb_calibration_noun, "calibration");
    lwb_tree *tree = lwb_new_tree(L);
    lw_add_text(tree->root, "schema", "linewright/calibration/1", &err);
    for (const lw_node *child = calibration->record->first; child != NULL; child = child->next)
        if (strcmp(child->name, "schema") != 0 && strcmp(child->name, "provenance") != 0)
            lw_add_copy(tree->root, child->name, child, &err);
    lwb_check(L, LW_OK, &err);
    const lw_node *made = lw_node_get(calibration->record, "provenance");
    if (made != NULL) /* a record that was loaded keeps where it came from */
        lw_add_copy(tree->root, "provenance", made, &err);
    else
        lwb_add_provenance(L, tree->root, index);
    lwb_check(L, LW_OK, &err);
    return tree;
}

void lwb_calibration_save(lua_State *L, int index, const char *path)
{
    lw_error err = LW_ERROR_NONE;
    index = lua_absindex(L, index);
    lw_calibration *calibration = lwb_object(L, index, &lwb_calibration_noun, "calibration:save");
    lwb_tree *tree = lwb_calibration_record(L, index);
    lw_text text;
    lw_engine *engine = lwb_engine(L);
    lw_text_begin(&text, engine); /* no Lua call that may raise until it is given back */
    lw_status status = lw_json_write(tree->root, &text, &err);
    if (status == LW_OK)
        status = lw_write_file(engine, path, text.bytes, text.n, &err);
    if (status == LW_OK)
        lw_sha256_hex(text.bytes, text.n, calibration->hash);
    lw_text_end(&text);
    lua_pop(L, 1);
    lwb_check(L, status, &err);
}

/* c:save(path): the record as JSON. */
static int save(lua_State *L)
{
    self_of(L, "calibration:save");
    const char *path = lwb_text(L, 2, "calibration:save", "the path");
    lwb_allow_write(L, path, "calibration:save");
    lwb_calibration_save(L, 1, path);
    return 0;
}

/* c:profile_at(two_theta): the instrument's profile at one wavelength there. */
static int profile_at(lua_State *L)
{
    const lw_calibration *c = self_of(L, "calibration:profile_at");
    double angle = lwb_number(L, 2, "calibration:profile_at", "the angle");
    if (!(angle >= c->valid_low_deg && angle <= c->valid_high_deg))
        return lwb_refuse(L, "measure the standard further out", "calibration:profile_at: %g deg is outside %g to %g deg",
                          angle, c->valid_low_deg, c->valid_high_deg);
    lw_error err = LW_ERROR_NONE;
    lw_width_figure figure;
    lwb_check(L, lw_profile_figure(lwb_engine(L), c, angle, &figure, &err), &err);
    double u = 0, shift = lw_aberrations_shift(&c->aberrations, angle, &u);
    lua_createtable(L, 0, 3);
    lwb_push_quantity(L, lw_quantity_of(figure.fwhm_deg, figure.u_fwhm, "deg"));
    lua_setfield(L, -2, "fwhm");
    lwb_push_quantity(L, lw_quantity_of(figure.breadth_deg, figure.u_breadth, "deg"));
    lua_setfield(L, -2, "breadth");
    lwb_push_quantity(L, lw_quantity_of(shift, u, "deg"));
    lua_setfield(L, -2, "shift");
    return 1;
}

#define CURVE_POINTS 120

/* Width of the instrument against angle, with the lines it was fitted to. */
static int figure(lua_State *L)
{
    const lw_calibration *c = self_of(L, "calibration:figure");
    lw_error err = LW_ERROR_NONE;
    double *x = lwb_new_vector(L, CURVE_POINTS), *fwhm = lwb_new_vector(L, CURVE_POINTS),
           *breadth = lwb_new_vector(L, CURVE_POINTS);
    for (size_t i = 0; i < CURVE_POINTS; i++) {
        lw_width_figure at;
        x[i] = c->valid_low_deg + (c->valid_high_deg - c->valid_low_deg) * (double)i / (CURVE_POINTS - 1);
        lwb_check(L, lw_profile_figure(lwb_engine(L), c, x[i], &at, &err), &err);
        fwhm[i] = at.fwhm_deg;
        breadth[i] = at.breadth_deg;
    }
    const lw_node *list = lw_node_get(c->record, "lines");
    size_t n = list ? list->n : 0, used = 0;
    double *place = lwb_new_vector(L, n), *width = lwb_new_vector(L, n), *u = lwb_new_vector(L, n);
    for (const lw_node *line = list ? list->first : NULL; line != NULL; line = line->next) {
        const lw_node *measured = lw_node_get(line, "fwhm");
        if (measured == NULL || measured->kind != LW_NODE_QUANTITY || lw_node_get(line, "two_theta") == NULL)
            continue;
        place[used] = lw_node_number(line, "two_theta", 0);
        width[used] = measured->quantity.value;
        u[used++] = measured->quantity.u;
    }
    lw_figure *made = lwb_new_figure(L, "instrument_width", "Width of the instrument's profile at one wavelength");
    lw_figure_label(made, LW_AXIS_X, "2theta", "deg", &err);
    lw_figure_label(made, LW_AXIS_Y, "width", "deg", &err);
    lw_figure_series(made, LW_SERIES_LINE, 0, "FWHM", x, fwhm, CURVE_POINTS, &err);
    lw_figure_series(made, LW_SERIES_LINE, 0, "integral breadth", x, breadth, CURVE_POINTS, &err);
    if (used > 0) {
        lw_series *points = lw_figure_series(made, LW_SERIES_POINTS, 0, "lines, FWHM", place, width, used, &err);
        if (points != NULL)
            lw_series_errors(made, points, NULL, u, &err);
    }
    lwb_check(L, LW_OK, &err);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    const lw_calibration *c = self_of(L, "calibration");
    if (strcmp(key, "radiation") == 0) {
        lw_radiation *copy = lwb_new(L, &lwb_radiation_noun, sizeof *copy, 0);
        *copy = c->radiation;
    } else if (strcmp(key, "geometry") == 0)
        lua_pushstring(L, c->geometry);
    else if (strcmp(key, "verdict") == 0)
        lua_pushstring(L, c->verdict);
    else if (strcmp(key, "hash") == 0)
        lua_pushstring(L, c->hash);
    else if (strcmp(key, "valid_two_theta") == 0) {
        lua_createtable(L, 2, 0);
        lua_pushnumber(L, c->valid_low_deg);
        lua_rawseti(L, -2, 1);
        lua_pushnumber(L, c->valid_high_deg);
        lua_rawseti(L, -2, 2);
    } else if (strcmp(key, "record") == 0)
        lua_getiuservalue(L, 1, LWB_CALIBRATION_TREE);
    else if (strcmp(key, "fitted_lines") == 0)
        lua_getiuservalue(L, 1, LWB_CALIBRATION_LINES);
    else if (strcmp(key, "standard_used") == 0)
        lua_getiuservalue(L, 1, LWB_CALIBRATION_STANDARD);
    else
        return false;
    return true;
}

/* Upvalue 1: methods. */
static int at(lua_State *L)
{
    self_of(L, "calibration");
    return lwb_index_road(L, &lwb_calibration_noun, LWB_CALIBRATION_TREE, NULL);
}

static int show(lua_State *L)
{
    self_of(L, "tostring");
    lua_getiuservalue(L, 1, LWB_CALIBRATION_TREE);
    luaL_tolstring(L, -1, NULL);
    return 1;
}

static int table(lua_State *L)
{
    lwb_push_table(L, self_of(L, "calibration:table")->record, 1);
    return 1;
}

static const char *const fields[] = {"radiation", "geometry", "verdict", "hash", "valid_two_theta",
                                     "record", "fitted_lines", "standard_used", NULL};
static const luaL_Reg functions[] = {{"calibrate", calibrate}, {"load_calibration", load}, {"history", lwb_history},
                                     {"response", lwb_response}, {"dead_time", lwb_dead_time}, {NULL, NULL}};
static const luaL_Reg methods[] = {
    {"save", save}, {"profile_at", profile_at}, {"figure", figure}, {"table", table},
    {"compare", lwb_calibration_compare}, {"for_specimen", lwb_calibration_for_specimen},
    {"profile_curve", lwb_calibration_curve}, {"asymmetry_at", lwb_calibration_asymmetry}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__index", at}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_calibration_noun = {.name = "calibration",
                                       .functions = functions,
                                       .methods = methods,
                                       .metamethods = metamethods,
                                       .gc = end_calibration,
                                       .fields = fields,
                                       .field = field};
