/* SPDX-License-Identifier: GPL-3.0-or-later */
/* profiles: lw.deconvolve(lines, options): what the sample alone does to each line. */
#include "profile/profiles.h"
#include "bind/bind.h"
#include "bind/figures.h"
#include "bind/roads.h"

#include <math.h>
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

/* What was taken for granted, of the first line as an example: the words of the methods differ in numbers alone. */
static const char *told(lw_figure *made, const lw_profiles *self, const char *first, lw_error *err)
{
    const char *assumed = self->n > 0 && self->profile[0].assumed != NULL ? self->profile[0].assumed : "nothing more";
    return lw_arena_print(made->arena, err, "%s Method %s. Assumed, for the first line: %s.", first, self->method, assumed);
}

/* Fourier coefficients of the supported lines, as far as they stand out of the noise. */
static lw_figure *draw_coefficients(lua_State *L, const lw_profiles *self, lw_error *err)
{
    lw_figure *made = lwb_new_figure(L, "coefficients", "Fourier coefficients of the sample's profiles");
    lw_figure_label(made, LW_AXIS_X, "column length L", "nm", err);
    lw_figure_label(made, LW_AXIS_Y, "coefficient A", "", err);
    double *cut = lwb_new_vector(L, self->n);
    size_t n_cut = 0;
    for (size_t i = 0; i < self->n; i++) {
        const lw_profile *p = &self->profile[i];
        char hkl[32];
        bool truncated = p->truncated_at > 0 && p->truncated_at < p->n_coefficients;
        size_t n = truncated ? p->truncated_at : p->n_coefficients;
        if (p->cosine == NULL || p->length_nm == NULL || n == 0)
            continue;
        if (truncated)
            cut[n_cut++] = p->length_nm[n];
        const lw_reflection *r = &p->line->reflection;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        lw_series *series = lw_figure_series(made, LW_SERIES_POINTS, 0, hkl, p->length_nm, p->cosine, n, err);
        if (series != NULL && p->u_cosine != NULL) {
            double *twice = lwb_new_vector(L, n);
            for (size_t k = 0; k < n; k++)
                twice[k] = 2 * p->u_cosine[k];
            lw_series_errors(made, series, NULL, twice, err);
            lua_pop(L, 1);
        }
    }
    if (n_cut > 0)
        lw_figure_series(made, LW_SERIES_TICKS, 0, "truncated", cut, NULL, n_cut, err);
    lua_pop(L, 1);
    made->caption = told(made, self,
                         "Bars: two standard uncertainties. Marks below: where the coefficients of a line are cut, "
                         "because they sink into the noise.",
                         err);
    return made;
}

/* Instrument and profile put together again, over what was measured of each line. */
static lw_figure *draw_refold(lua_State *L, const lw_profiles *self, lw_error *err)
{
    lw_figure *made = lwb_new_figure(L, "refold", "Instrument and pure profile against the data");
    lw_figure_label(made, LW_AXIS_X, "2theta", "deg", err);
    lw_figure_label(made, LW_AXIS_Y, "above background", "", err);
    lw_figure_label(made, LW_AXIS_LOWER_Y, "residual / u", "", err);
    size_t n = 0, at = 0;
    for (size_t i = 0; i < self->n; i++)
        n += self->profile[i].n_refold + 1;
    double *x = lwb_new_vector(L, n), *seen = lwb_new_vector(L, n), *curve = lwb_new_vector(L, n),
           *residual = lwb_new_vector(L, n);
    for (size_t i = 0; i < self->n; i++) {
        const lw_profile *p = &self->profile[i];
        for (size_t k = 0; k <= p->n_refold; k++, at++) {
            bool gap = k == p->n_refold; /* parts the curves of two lines */
            x[at] = gap ? (k > 0 ? p->refold_deg[k - 1] : 0) : p->refold_deg[k];
            seen[at] = gap ? NAN : p->refold_seen[k];
            curve[at] = gap ? NAN : p->refold_curve[k];
            residual[at] = gap || !(p->refold_u[k] > 0) ? NAN : (seen[at] - curve[at]) / p->refold_u[k];
        }
    }
    lw_figure_series(made, LW_SERIES_POINTS, 0, "measured, background and neighbours off", x, seen, n, err);
    lw_figure_series(made, LW_SERIES_LINE, 0, "instrument x profile", x, curve, n, err);
    lw_figure_series(made, LW_SERIES_LINE, 1, "", x, residual, n, err);
    lua_pop(L, 4);
    made->caption = told(made, self, "Each line over its own window, the residual in units of a point's uncertainty.", err);
    return made;
}

/* figure("coefficients") or figure("refold"). */
static int figure(lua_State *L)
{
    static const char *const names[] = {"coefficients", "refold", NULL};
    const lw_profiles *self = self_of(L, "profiles:figure");
    lw_error err = LW_ERROR_NONE;
    const char *name = lua_isnoneornil(L, 2) ? names[0] : lwb_text(L, 2, "profiles:figure", "which figure");
    if (strcmp(name, names[0]) != 0 && strcmp(name, names[1]) != 0)
        return lwb_unknown_field(L, "profiles' figures", name, names);
    if (strcmp(name, names[0]) == 0)
        draw_coefficients(L, self, &err);
    else
        draw_refold(L, self, &err);
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
