/* SPDX-License-Identifier: GPL-3.0-or-later */
/* reflections: the lines a material may show in a range of angles. Made by material:reflections(scan)
 * or material:reflections{low, high, radiation = ...}. */
#include "bind/reflections.h"
#include "bind/standards.h"
#include "scan/scan.h"

#include <stdio.h>
#include <string.h>

lwb_reflections *lwb_reflections_self(lua_State *L, int index, const char *verb)
{
    return lwb_self(L, index, &lwb_reflections_noun, verb);
}

static int end_reflections(lua_State *L)
{
    lwb_reflections *self = lua_touserdata(L, 1);
    lw_arena_end(&self->arena);
    self->n = 0;
    return 0;
}

static lwb_reflections *new_reflections(lua_State *L)
{
    lwb_reflections *self = lwb_new(L, &lwb_reflections_noun, sizeof *self, 0);
    lw_arena_begin(&self->arena, lwb_engine(L));
    return self;
}

int lwb_reflections_of(lua_State *L, const lw_material *material, const char *verb)
{
    static const char *const keys[] = {"low", "high", "radiation", NULL};
    lw_error err = LW_ERROR_NONE;
    double low = 0, high = 0, wavelength = 0;
    lwb_box *box = lwb_test(L, 2, &lwb_scan_noun);
    if (box != NULL) {
        const lw_scan *scan = lwb_object(L, 2, &lwb_scan_noun, verb);
        if (!scan->has_radiation)
            return lwb_refuse(L, "read it with { radiation = ... }", "%s: the scan has no radiation", verb);
        low = scan->two_theta_deg[0];
        high = scan->two_theta_deg[scan->n - 1];
        wavelength = lw_radiation_wavelength(&scan->radiation);
    } else {
        if (lua_type(L, 2) != LUA_TTABLE)
            return lwb_refuse(L, NULL, "%s: wants a scan or {low, high, radiation = ...}, not %s", verb, lwb_kind(L, 2));
        lwb_only_keys(L, 2, verb, keys);
        lua_rawgeti(L, 2, 1);
        lua_rawgeti(L, 2, 2);
        low = lwb_field_number(L, 2, "low", verb, lua_isnil(L, -2) ? 0 : lwb_number(L, -2, verb, "low"));
        high = lwb_field_number(L, 2, "high", verb, lua_isnil(L, -1) ? 0 : lwb_number(L, -1, verb, "high"));
        lua_pushcfunction(L, lwb_radiation_noun.functions[0].func);
        if (lua_getfield(L, 2, "radiation") == LUA_TNIL)
            return lwb_refuse(L, "for example radiation = \"Cu Ka\"", "%s: the radiation is missing", verb);
        lua_call(L, 1, 1);
        wavelength = lw_radiation_wavelength(lwb_self(L, -1, &lwb_radiation_noun, verb));
    }
    if (low <= 0)
        low = 1e-3;
    if (high >= 180)
        high = 180 - 1e-6;
    lwb_reflections *self = new_reflections(L);
    lw_reflection *r = NULL;
    lwb_check(L, lw_reflections(material, wavelength, low, high, &self->arena, &r, &self->n, &err), &err);
    self->reflection = r;
    self->material = *material;
    self->has_material = true;
    return 1;
}

static void push_one(lua_State *L, const lw_reflection *r)
{
    char hkl[32];
    lua_createtable(L, 0, 8);
    lua_pushstring(L, lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl));
    lua_setfield(L, -2, "hkl");
    lua_pushinteger(L, r->h);
    lua_setfield(L, -2, "h");
    lua_pushinteger(L, r->k);
    lua_setfield(L, -2, "k");
    lua_pushinteger(L, r->l);
    lua_setfield(L, -2, "l");
    lua_pushnumber(L, r->d_nm);
    lua_setfield(L, -2, "d_nm");
    lua_pushnumber(L, r->two_theta_deg);
    lua_setfield(L, -2, "two_theta_deg");
    lua_pushinteger(L, r->multiplicity);
    lua_setfield(L, -2, "multiplicity");
    lua_pushinteger(L, r->families);
    lua_setfield(L, -2, "families");
}

/* Upvalue 1: methods. */
static int at(lua_State *L)
{
    const lwb_reflections *self = lwb_reflections_self(L, 1, "reflections");
    if (lua_type(L, 2) == LUA_TNUMBER) {
        lua_Integer i = lua_tointeger(L, 2);
        if (i >= 1 && (size_t)i <= self->n)
            push_one(L, &self->reflection[i - 1]);
        else
            lua_pushnil(L);
        return 1;
    }
    lua_pushvalue(L, 2);
    if (lua_rawget(L, lua_upvalueindex(1)) == LUA_TNIL) {
        static const char *const names[] = {"select", NULL};
        return lwb_unknown_field(L, "list of reflections", luaL_tolstring(L, 2, NULL), names);
    }
    return 1;
}

static int length(lua_State *L)
{
    lua_pushinteger(L, (lua_Integer)lwb_reflections_self(L, 1, "#reflections")->n);
    return 1;
}

/* r:select(f): those for which f(reflection) is true. */
static int choose(lua_State *L)
{
    const lwb_reflections *self = lwb_reflections_self(L, 1, "reflections:select");
    luaL_checktype(L, 2, LUA_TFUNCTION);
    lw_error err = LW_ERROR_NONE;
    lwb_reflections *some = new_reflections(L);
    lw_reflection *kept = lw_arena_take(&some->arena, self->n, sizeof *kept, &err);
    lwb_check(L, LW_OK, &err);
    some->reflection = kept;
    some->material = self->material;
    some->has_material = self->has_material;
    for (size_t i = 0; i < self->n; i++) {
        lua_pushvalue(L, 2);
        push_one(L, &self->reflection[i]);
        lua_call(L, 1, 1);
        if (lua_toboolean(L, -1))
            kept[some->n++] = self->reflection[i];
        lua_pop(L, 1);
    }
    return 1;
}

static int show(lua_State *L)
{
    const lwb_reflections *self = lwb_reflections_self(L, 1, "tostring");
    luaL_Buffer out;
    luaL_buffinit(L, &out);
    luaL_addstring(&out, "hkl       2theta (deg)   d (nm)     multiplicity");
    for (size_t i = 0; i < self->n; i++) {
        char hkl[32], line[120];
        const lw_reflection *r = &self->reflection[i];
        snprintf(line, sizeof line, "\n%-8s  %12.5f  %9.7f  %13d", lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl),
                 r->two_theta_deg, r->d_nm, r->multiplicity);
        luaL_addstring(&out, line);
    }
    luaL_pushresult(&out);
    return 1;
}

static const luaL_Reg methods[] = {{"select", choose}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__index", at}, {"__len", length}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_reflections_noun = {
    .name = "reflections", .methods = methods, .metamethods = metamethods, .gc = end_reflections};
