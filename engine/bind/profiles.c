/* SPDX-License-Identifier: GPL-3.0-or-later */
/* profiles: lw.deconvolve(lines, options): what the sample alone does to each line. */
#include "profile/profiles.h"
#include "bind/bind.h"
#include "bind/figures.h"
#include "bind/roads.h"

#include <stdio.h>
#include <string.h>

static int end_profiles(lua_State *L)
{
    lwb_box *box = lua_touserdata(L, 1);
    lw_profiles_free(box->object);
    box->object = NULL;
    return 0;
}

static const lw_profiles *self_of(lua_State *L, const char *verb)
{
    return lwb_object(L, 1, &lwb_profiles_noun, verb);
}

static int deconvolve(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 2);
    luaL_checkstack(L, 40, NULL);
    const lw_lines *lines = lwb_object(L, 1, &lwb_lines_noun, "deconvolve");
    lw_deconvolve_options options = lw_deconvolve_defaults();
    lwb_options(L, 2, "deconvolve", lw_deconvolve_option_table, NULL, &options);
    if (lua_getiuservalue(L, 1, LWB_LINES_CALIBRATION) == LUA_TNIL)
        return lwb_refuse(L, "fit them with { instrument = calibration }",
                          "deconvolve: the lines were fitted without an instrument");
    int instrument = lua_gettop(L);
    const lw_calibration *calibration = lwb_object(L, instrument, &lwb_calibration_noun, "deconvolve");
    lwb_box *box = lwb_new_box(L, &lwb_profiles_noun, LWB_PROFILES_VALUES);
    int self = lua_gettop(L);
    lua_pushvalue(L, 1);
    lua_setiuservalue(L, self, LWB_PROFILES_LINES);
    lua_pushvalue(L, instrument);
    lua_setiuservalue(L, self, LWB_PROFILES_CALIBRATION);
    if (options.standard != NULL) {
        lua_getfield(L, 2, "standard");
        lua_setiuservalue(L, self, LWB_PROFILES_STANDARD);
    }
    lwb_keep_options(L, self, LWB_PROFILES_OPTIONS, "deconvolve", lw_deconvolve_option_table, &options);
    lw_profiles *profiles = NULL;
    lw_status status = lw_deconvolve(lwb_engine(L), lines, calibration, &options, &profiles, &err);
    box->object = profiles;
    lwb_check(L, status, &err);
    lwb_tree *tree = lwb_new_tree(L);
    tree->root = lw_profiles_tree(profiles, &tree->arena, &err);
    tree->node = tree->root;
    lwb_check(L, LW_OK, &err);
    lua_setiuservalue(L, self, LWB_PROFILES_TREE);
    lua_settop(L, self);
    return 1;
}

/* p:coefficients(i): Fourier coefficients of the i-th profile as vectors. */
static int coefficients(lua_State *L)
{
    const lw_profiles *self = self_of(L, "profiles:coefficients");
    double i = lwb_number(L, 2, "profiles:coefficients", "which profile");
    if (!(i >= 1 && i <= (double)self->n))
        return lwb_refuse(L, NULL, "profiles:coefficients: there are profiles 1 to %zu", self->n);
    const lw_profile *p = &self->profile[(size_t)i - 1];
    lua_createtable(L, 0, 6);
    const struct {
        const char *key;
        const double *x;
    } column[] = {{"length_nm", p->length_nm}, {"cosine", p->cosine}, {"u_cosine", p->u_cosine},
                  {"sine", p->sine},           {"u_sine", p->u_sine}};
    for (size_t c = 0; c < sizeof column / sizeof *column; c++) {
        lwb_push_vector(L, column[c].x, column[c].x ? p->n_coefficients : 0, 1);
        lua_setfield(L, -2, column[c].key);
    }
    lua_pushinteger(L, (lua_Integer)p->truncated_at);
    lua_setfield(L, -2, "truncated_at");
    return 1;
}

/* Fourier coefficients of the supported lines. */
static int figure(lua_State *L)
{
    const lw_profiles *self = self_of(L, "profiles:figure");
    lw_error err = LW_ERROR_NONE;
    lw_figure *made = lwb_new_figure(L, "coefficients", "Fourier coefficients of the sample's profiles");
    lw_figure_label(made, LW_AXIS_X, "column length", "nm", &err);
    lw_figure_label(made, LW_AXIS_Y, "A(L)", "", &err);
    for (size_t i = 0; i < self->n; i++) {
        const lw_profile *p = &self->profile[i];
        char hkl[32];
        size_t n = p->truncated_at > 0 && p->truncated_at < p->n_coefficients ? p->truncated_at : p->n_coefficients;
        if (p->cosine == NULL || p->length_nm == NULL || n == 0)
            continue;
        const lw_reflection *r = &p->line->reflection;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        lw_series *series = lw_figure_series(made, LW_SERIES_POINTS, 0, hkl, p->length_nm, p->cosine, n, &err);
        if (series != NULL && p->u_cosine != NULL)
            lw_series_errors(made, series, NULL, p->u_cosine, &err);
    }
    lwb_check(L, LW_OK, &err);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    const lw_profiles *p = self_of(L, "profiles");
    if (strcmp(key, "fitted_lines") == 0)
        lua_getiuservalue(L, 1, LWB_PROFILES_LINES);
    else if (strcmp(key, "instrument") == 0)
        lua_getiuservalue(L, 1, LWB_PROFILES_CALIBRATION);
    else if (strcmp(key, "n") == 0)
        lua_pushinteger(L, (lua_Integer)p->n);
    else if (strcmp(key, "method") == 0)
        lua_pushstring(L, p->method);
    else if (strcmp(key, "source") == 0)
        lua_pushstring(L, p->source);
    else
        return false;
    return true;
}

/* Upvalue 1: methods. */
static int at(lua_State *L)
{
    self_of(L, "profiles");
    return lwb_index_road(L, &lwb_profiles_noun, LWB_PROFILES_TREE, "profiles");
}

static int length(lua_State *L)
{
    lua_pushinteger(L, (lua_Integer)self_of(L, "#profiles")->n);
    return 1;
}

static int show(lua_State *L)
{
    self_of(L, "tostring");
    lua_getiuservalue(L, 1, LWB_PROFILES_TREE);
    luaL_tolstring(L, -1, NULL);
    return 1;
}

static int table(lua_State *L)
{
    self_of(L, "profiles:table");
    lua_getiuservalue(L, 1, LWB_PROFILES_TREE);
    lwb_push_table(L, ((lwb_tree *)lua_touserdata(L, -1))->node, -1);
    return 1;
}

static const char *const fields[] = {"fitted_lines", "instrument", "n", "method", "source", NULL};
static const luaL_Reg functions[] = {{"deconvolve", deconvolve}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"coefficients", coefficients}, {"figure", figure}, {"table", table}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__index", at}, {"__len", length}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_profiles_noun = {.name = "profiles",
                                    .functions = functions,
                                    .methods = methods,
                                    .metamethods = metamethods,
                                    .gc = end_profiles,
                                    .fields = fields,
                                    .field = field};
