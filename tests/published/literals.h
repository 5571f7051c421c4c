/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reads the literals of standards/ for the published checks, through Lua itself but with none of the
 * engine's binding, so that the files and the physics are tested on their own. */
#ifndef LW_TESTS_LITERALS_H
#define LW_TESTS_LITERALS_H

#include "check.h"
#include "physics/crystal.h"
#include "physics/elasticity.h"

#include <lauxlib.h>
#include <lua.h>
#include <stdlib.h>

/* Leaves the table of standards/<kind>/<name>.lua on the stack; ends the program if there is none. */
static inline void literal_open(lua_State *L, const char *kind, const char *name)
{
    char path[512];
    snprintf(path, sizeof path, "%s/standards/%s/%s.lua", LW_SOURCE_DIR, kind, name);
    bool good = luaL_loadfilex(L, path, "t") == LUA_OK;
    if (good) {
        lua_newtable(L);
        lua_setupvalue(L, -2, 1);
        good = lua_pcall(L, 0, 1, 0) == LUA_OK && lua_istable(L, -1);
    }
    if (!good) {
        fprintf(stderr, "%s: %s\n", path, lua_isstring(L, -1) ? lua_tostring(L, -1) : "not a table");
        exit(1);
    }
}

static inline double literal_number(lua_State *L, const char *key)
{
    lua_getfield(L, -1, key);
    double value = lua_isnumber(L, -1) ? lua_tonumber(L, -1) : 0.0;
    lua_pop(L, 1);
    return value;
}

/* Copies a text; "" if missing. Longer than its place counts as a failure. */
static inline void literal_text(lua_State *L, const char *key, char *to, size_t size)
{
    lua_getfield(L, -1, key);
    const char *text = lua_isstring(L, -1) ? lua_tostring(L, -1) : "";
    CHECK(strlen(text) < size);
    snprintf(to, size, "%s", text);
    lua_pop(L, 1);
}

static inline double literal_inside(lua_State *L, const char *table, const char *key)
{
    double value = 0;
    lua_getfield(L, -1, table);
    if (lua_istable(L, -1))
        value = literal_number(L, key);
    lua_pop(L, 1);
    return value;
}

static inline lw_radiation literal_radiation(lua_State *L, const char *name)
{
    lw_radiation radiation;
    lw_error err = LW_ERROR_NONE;
    memset(&radiation, 0, sizeof radiation);
    literal_open(L, "radiation", name);
    literal_text(L, "title", radiation.name, sizeof radiation.name);
    literal_text(L, "source", radiation.source, sizeof radiation.source);
    lua_getfield(L, -1, "components");
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -1); i++) {
        lua_geti(L, -1, i);
        lw_radiation_add_energy(&radiation, literal_number(L, "energy_ev"), literal_number(L, "width_ev"),
                                literal_number(L, "height"), literal_number(L, "share"), &err);
        lua_pop(L, 1);
    }
    lua_pop(L, 1);
    double energy = literal_number(L, "k_beta_energy_ev");
    radiation.k_beta_nm = energy > 0 ? LW_HC_EV_NM / energy : literal_number(L, "k_beta_nm");
    lw_radiation_settle(&radiation, &err);
    CHECK(err.status == LW_OK);
    if (err.status != LW_OK)
        fprintf(stderr, "%s: %s\n", name, err.message);
    lua_pop(L, 1);
    return radiation;
}

/* The material in the table on top of the stack, settled. */
static inline lw_material literal_material(lua_State *L)
{
    lw_material m;
    lw_error err = LW_ERROR_NONE;
    memset(&m, 0, sizeof m);
    literal_text(L, "name", m.name, sizeof m.name);
    literal_text(L, "title", m.title, sizeof m.title);
    literal_text(L, "formula", m.formula, sizeof m.formula);
    literal_text(L, "hazard", m.hazard, sizeof m.hazard);
    literal_text(L, "source", m.source, sizeof m.source);
    m.burgers_nm = literal_number(L, "burgers_nm");
    m.density_kg_m3 = literal_number(L, "density_kg_m3");
    m.cell = (lw_cell){.a = literal_inside(L, "cell", "a"),
                       .b = literal_inside(L, "cell", "b"),
                       .c = literal_inside(L, "cell", "c"),
                       .alpha = literal_inside(L, "cell", "alpha"),
                       .beta = literal_inside(L, "cell", "beta"),
                       .gamma = literal_inside(L, "cell", "gamma"),
                       .u_a = literal_inside(L, "standard_uncertainty", "a")};
    char symbol[40];
    literal_text(L, "space_group", symbol, sizeof symbol);
    lw_space_group_find(symbol, &m.space_group, &m.hall_number, &err);
    lw_material_settle(&m, &err);
    lua_getfield(L, -1, "stiffness_gpa");
    if (err.status == LW_OK && lua_istable(L, -1)) {
        for (lua_pushnil(L); lua_next(L, -2) != 0; lua_pop(L, 1))
            lw_stiffness_set(&m, lua_tostring(L, -2), lua_tonumber(L, -1), &err);
        lw_stiffness_complete(&m, &err);
    }
    lua_pop(L, 1);
    CHECK(err.status == LW_OK);
    if (err.status != LW_OK)
        fprintf(stderr, "%s: %s; %s\n", m.name, err.message, err.remedy);
    return m;
}

static inline lw_material literal_material_of(lua_State *L, const char *kind, const char *name)
{
    literal_open(L, kind, name);
    lw_material m = literal_material(L);
    lua_pop(L, 1);
    return m;
}

#endif
