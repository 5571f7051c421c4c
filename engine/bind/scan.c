/* SPDX-License-Identifier: GPL-3.0-or-later */
/* scan: lw.read_scan(path, { radiation = ... }) or lw.scan{ two_theta =, intensity =, sigma =, ... }. */
#include "scan/scan.h"
#include "bind/bind.h"
#include "bind/figures.h"
#include "bind/inputs.h"

#include <stdio.h>
#include <string.h>

static int end_scan(lua_State *L)
{
    lwb_box *box = lua_touserdata(L, 1);
    lw_scan_free(box->object);
    box->object = NULL;
    return 0;
}

static const lw_scan *self_of(lua_State *L, const char *verb)
{
    return lwb_object(L, 1, &lwb_scan_noun, verb);
}

static int read_scan(lua_State *L)
{
    const char *path = lwb_text(L, 1, "read_scan", "the path");
    lua_settop(L, 2);
    lw_error err = LW_ERROR_NONE;
    lw_scan_options options = lw_scan_defaults();
    lwb_options(L, 2, "read_scan", lw_scan_option_table, NULL, &options);
    lwb_box *box = lwb_new_box(L, &lwb_scan_noun, 1);
    lw_scan *scan = NULL;
    lw_status status = lw_scan_read(lwb_engine(L), path, &options, &scan, &err);
    box->object = scan;
    lwb_check(L, status, &err);
    if (lwb_is_input(L, path))
        lwb_check_unchanged(L, path, lw_scan_hash(scan), "read_scan");
    return 1;
}

/* lw.scan{ two_theta = v, intensity = v, sigma = v, name = "made", radiation = ..., noise = ... } */
static int make(lua_State *L)
{
    static const char *const own[] = {"two_theta", "intensity", "sigma", "name", NULL};
    lwb_want_table(L, 1, "scan", "the argument");
    lua_settop(L, 1);
    lw_error err = LW_ERROR_NONE;
    lw_scan_options options = lw_scan_defaults();
    lwb_options(L, 1, "scan", lw_scan_option_table, own, &options);
    const char *name = lwb_field_text(L, 1, "name", "scan", "made by the recipe");
    const double *column[3] = {NULL, NULL, NULL};
    size_t n[3] = {0, 0, 0};
    luaL_checkstack(L, 12, NULL);
    for (int i = 0; i < 3; i++) {
        lua_getfield(L, 1, own[i]);
        if (i == 2 && lua_isnil(L, -1))
            continue;
        column[i] = lwb_to_vector(L, -1, "scan", own[i], &n[i]);
    }
    if (n[0] != n[1] || (column[2] != NULL && n[2] != n[0]))
        return lwb_refuse(L, "give columns of one length", "scan: the columns have %zu, %zu and %zu numbers", n[0], n[1],
                          n[2]);
    lwb_box *box = lwb_new_box(L, &lwb_scan_noun, 1);
    lw_scan *scan = NULL;
    lw_status status =
        lw_scan_make(lwb_engine(L), name, n[0], column[0], column[1], column[2], &options, &scan, &err);
    box->object = scan;
    lwb_check(L, status, &err);
    return 1;
}

/* s:crop(low, high) or s:crop{low, high}, degrees. */
static int crop(lua_State *L)
{
    const lw_scan *scan = self_of(L, "scan:crop");
    lua_settop(L, 3);
    if (lua_type(L, 2) == LUA_TTABLE) {
        lua_settop(L, 2);
        lua_rawgeti(L, 2, 1);
        lua_rawgeti(L, 2, 2);
        lua_remove(L, 2);
    }
    double low = lwb_number(L, 2, "scan:crop", "the low angle"), high = lwb_number(L, 3, "scan:crop", "the high angle");
    lw_error err = LW_ERROR_NONE;
    lwb_engine(L);
    lwb_box *box = lwb_new_box(L, &lwb_scan_noun, 1);
    lw_scan *cropped = NULL;
    lw_status status = lw_scan_crop(scan, low, high, &cropped, &err);
    box->object = cropped;
    lwb_check(L, status, &err);
    return 1;
}

/* s:at(two_theta): intensity by linear interpolation. */
static int at(lua_State *L)
{
    const lw_scan *scan = self_of(L, "scan:at");
    bool inside = false;
    double value = lw_scan_at(scan, lwb_number(L, 2, "scan:at", "the angle"), &inside);
    if (!inside)
        return lwb_refuse(L, NULL, "scan:at: the angle is outside the scan, %g to %g deg", scan->two_theta_deg[0],
                          scan->two_theta_deg[scan->n - 1]);
    lua_pushnumber(L, value);
    return 1;
}

static int figure(lua_State *L)
{
    const lw_scan *scan = self_of(L, "scan:figure");
    lw_error err = LW_ERROR_NONE;
    lw_figure *made = lwb_new_figure(L, "scan", scan->file[0] ? scan->file : "Scan");
    lw_figure_label(made, LW_AXIS_X, "2theta", "deg", &err);
    lw_figure_label(made, LW_AXIS_Y, scan->noise == LW_NOISE_COUNTS ? "counts" : "intensity", "", &err);
    lw_figure_series(made, LW_SERIES_LINE, 0, "", scan->two_theta_deg, scan->intensity, scan->n, &err);
    lwb_check(L, LW_OK, &err);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    const lw_scan *s = self_of(L, "scan");
    if (strcmp(key, "two_theta") == 0)
        lwb_push_vector(L, s->two_theta_deg, s->n, 1);
    else if (strcmp(key, "intensity") == 0)
        lwb_push_vector(L, s->intensity, s->n, 1);
    else if (strcmp(key, "sigma") == 0) {
        if (s->sigma != NULL)
            lwb_push_vector(L, s->sigma, s->n, 1);
        else
            lua_pushnil(L);
    } else if (strcmp(key, "n") == 0)
        lua_pushinteger(L, (lua_Integer)s->n);
    else if (strcmp(key, "file") == 0)
        lua_pushstring(L, s->file);
    else if (strcmp(key, "header") == 0)
        lua_pushstring(L, s->header);
    else if (strcmp(key, "hash") == 0)
        lua_pushstring(L, lw_scan_hash(s));
    else if (strcmp(key, "noise") == 0)
        lua_pushstring(L, s->noise == LW_NOISE_COUNTS ? "counts" : s->noise == LW_NOISE_SIGMA ? "sigma" : "scaled");
    else if (strcmp(key, "radiation") == 0) {
        if (s->has_radiation) {
            lw_radiation *copy = lwb_new(L, &lwb_radiation_noun, sizeof *copy, 0);
            *copy = s->radiation;
        } else
            lua_pushnil(L);
    } else
        return false;
    return true;
}

static int length(lua_State *L)
{
    lua_pushinteger(L, (lua_Integer)self_of(L, "#scan")->n);
    return 1;
}

static int show(lua_State *L)
{
    const lw_scan *s = self_of(L, "tostring");
    char text[600];
    snprintf(text, sizeof text, "scan %.200s: %zu points, %.6g to %.6g deg%s%s", s->file, s->n, s->two_theta_deg[0],
             s->two_theta_deg[s->n - 1], s->has_radiation ? ", " : "", s->has_radiation ? s->radiation.name : "");
    lua_pushstring(L, text);
    return 1;
}

static const char *const fields[] = {"two_theta", "intensity", "sigma", "n", "file", "header", "hash", "noise", "radiation",
                                     NULL};
static const luaL_Reg functions[] = {{"read_scan", read_scan}, {"scan", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"crop", crop}, {"at", at}, {"figure", figure}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__len", length}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_scan_noun = {.name = "scan",
                                .functions = functions,
                                .methods = methods,
                                .metamethods = metamethods,
                                .gc = end_scan,
                                .fields = fields,
                                .field = field};
