/* SPDX-License-Identifier: GPL-3.0-or-later */
/* material: lw.material "nickel", a path, or a table. */
#include "bind/standards.h"
#include "physics/elasticity.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define VERB "material"

const char *const lwb_material_fields[] = {"name",    "title",  "formula",   "space_group", "cell",    "system", "burgers_nm",
                                           "density_kg_m3", "hazard", "source", "volume_nm3",  "has_stiffness", NULL};

static void read_cell(lua_State *L, int index, const char *verb, double unit_nm, lw_material *material)
{
    static const char *const keys[] = {"a", "b", "c", "alpha", "beta", "gamma", NULL};
    static const char *const edges[] = {"a", "b", "c", NULL};
    lw_cell *cell = &material->cell;
    lua_getfield(L, index, "cell");
    int at = lua_gettop(L);
    lwb_want_table(L, at, verb, "the field 'cell'");
    lwb_only_keys(L, at, verb, keys);
    cell->a = unit_nm * lwb_field_number(L, at, "a", verb, 0);
    cell->b = unit_nm * lwb_field_number(L, at, "b", verb, 0);
    cell->c = unit_nm * lwb_field_number(L, at, "c", verb, 0);
    cell->alpha = lwb_field_number(L, at, "alpha", verb, 0);
    cell->beta = lwb_field_number(L, at, "beta", verb, 0);
    cell->gamma = lwb_field_number(L, at, "gamma", verb, 0);
    lua_pop(L, 1);
    bool expanded = lua_getfield(L, index, "expanded_uncertainty") == LUA_TTABLE;
    double k = expanded ? lwb_field_number(L, index, "coverage_factor", verb, 1) : 1;
    if (!expanded) {
        lua_pop(L, 1);
        lua_getfield(L, index, "standard_uncertainty");
    }
    if (lua_istable(L, -1)) {
        at = lua_gettop(L);
        lwb_only_keys(L, at, verb, edges);
        if (!(k > 0))
            lwb_refuse(L, NULL, "%s: the coverage factor must be above 0", verb);
        cell->u_a = unit_nm * lwb_field_number(L, at, "a", verb, 0) / k;
        cell->u_b = unit_nm * lwb_field_number(L, at, "b", verb, 0) / k;
        cell->u_c = unit_nm * lwb_field_number(L, at, "c", verb, 0) / k;
    }
    lua_pop(L, 1);
}

static void read_space_group(lua_State *L, int index, const char *verb, lw_material *material)
{
    lw_error err = LW_ERROR_NONE;
    const char *setting = lwb_field_text(L, index, "setting", verb, NULL);
    lw_status status = LW_OK;
    if (lua_getfield(L, index, "space_group") == LUA_TNUMBER) {
        material->space_group = (int)lua_tointeger(L, -1);
        status = lw_space_group_setting(material->space_group, setting, &material->hall_number, &err);
    } else {
        const char *symbol = lwb_text(L, -1, verb, "the field 'space_group'");
        if (setting != NULL && strchr(symbol, ':') == NULL) {
            lua_pushfstring(L, "%s:%s", symbol, setting);
            lua_replace(L, -2);
            symbol = lua_tostring(L, -1);
        }
        status = lw_space_group_find(symbol, &material->space_group, &material->hall_number, &err);
    }
    lwb_check(L, status, &err);
    lua_pop(L, 1);
}

static void read_stiffness(lua_State *L, int index, const char *verb, lw_material *material)
{
    lw_error err = LW_ERROR_NONE;
    if (lua_getfield(L, index, "stiffness_gpa") == LUA_TNIL) {
        lua_pop(L, 1);
        return;
    }
    lwb_want_table(L, -1, verb, "the field 'stiffness_gpa'");
    int at = lua_gettop(L);
    for (lua_pushnil(L); lua_next(L, at); lua_pop(L, 1)) {
        if (lua_type(L, -2) != LUA_TSTRING)
            lwb_refuse(L, NULL, "%s: stiffness constants are named c11, c12 ...", verb);
        double gpa = lwb_number(L, -1, verb, "a stiffness constant");
        lwb_check(L, lw_stiffness_set(material, lua_tostring(L, -2), gpa, &err), &err);
    }
    lua_pop(L, 1);
    lwb_check(L, lw_stiffness_complete(material, &err), &err);
}

void lwb_read_material(lua_State *L, int index, const char *verb, lw_material *material)
{
    lwb_copy_text(L, index, "name", verb, true, material->name, sizeof material->name);
    lwb_copy_text(L, index, "title", verb, false, material->title, sizeof material->title);
    if (material->title[0] == '\0')
        memcpy(material->title, material->name, sizeof material->name);
    lwb_copy_text(L, index, "formula", verb, false, material->formula, sizeof material->formula);
    lwb_copy_text(L, index, "hazard", verb, false, material->hazard, sizeof material->hazard);
    lwb_copy_text(L, index, "source", verb, false, material->source, sizeof material->source);
    char unit[16];
    lwb_copy_text(L, index, "unit", verb, false, unit, sizeof unit);
    if (unit[0] != '\0' && strcmp(unit, "nm") != 0 && strcmp(unit, "angstrom") != 0)
        lwb_refuse(L, "choose nm or angstrom", "%s: the unit '%s' is not known", verb, unit);
    double unit_nm = strcmp(unit, "angstrom") == 0 ? 0.1 : 1;
    read_cell(L, index, verb, unit_nm, material);
    read_space_group(L, index, verb, material);
    lw_error err = LW_ERROR_NONE;
    lwb_check(L, lw_material_settle(material, &err), &err);
    read_stiffness(L, index, verb, material);
    material->burgers_nm =
        lwb_field_number(L, index, "burgers_nm", verb, unit_nm * lwb_field_number(L, index, "burgers", verb, 0));
    material->density_kg_m3 = lwb_field_number(L, index, "density_kg_m3", verb, 0);
    const char *more = lwb_field_text(L, index, "stiffness_source", verb, NULL);
    size_t used = strlen(material->source);
    if (more != NULL && used + strlen(more) + 16 < sizeof material->source)
        snprintf(material->source + used, sizeof material->source - used, "%sstiffness: %s", used ? "; " : "", more);
}

static void push_edge(lua_State *L, const char *name, double value, double u, const char *unit)
{
    lwb_push_quantity(L, lw_quantity_of(value, u, unit));
    lua_setfield(L, -2, name);
}

bool lwb_material_field(lua_State *L, const lw_material *m, const char *key)
{
    static const char *const systems[] = {"triclinic", "monoclinic", "orthorhombic", "tetragonal",
                                          "trigonal",  "hexagonal",  "cubic"};
    if (strcmp(key, "name") == 0)
        lua_pushstring(L, m->name);
    else if (strcmp(key, "title") == 0)
        lua_pushstring(L, m->title);
    else if (strcmp(key, "formula") == 0)
        lua_pushstring(L, m->formula);
    else if (strcmp(key, "space_group") == 0)
        lua_pushstring(L, m->space_group_symbol);
    else if (strcmp(key, "system") == 0)
        lua_pushstring(L, systems[m->system]);
    else if (strcmp(key, "burgers_nm") == 0)
        lua_pushnumber(L, m->burgers_nm);
    else if (strcmp(key, "density_kg_m3") == 0)
        lua_pushnumber(L, m->density_kg_m3);
    else if (strcmp(key, "hazard") == 0)
        lua_pushstring(L, m->hazard);
    else if (strcmp(key, "source") == 0)
        lua_pushstring(L, m->source);
    else if (strcmp(key, "volume_nm3") == 0)
        lua_pushnumber(L, lw_cell_volume(&m->cell));
    else if (strcmp(key, "has_stiffness") == 0)
        lua_pushboolean(L, m->has_stiffness);
    else if (strcmp(key, "cell") == 0) {
        lua_createtable(L, 0, 6);
        push_edge(L, "a", m->cell.a, m->cell.u_a, "nm");
        push_edge(L, "b", m->cell.b, m->cell.u_b, "nm");
        push_edge(L, "c", m->cell.c, m->cell.u_c, "nm");
        push_edge(L, "alpha", m->cell.alpha, 0, "deg");
        push_edge(L, "beta", m->cell.beta, 0, "deg");
        push_edge(L, "gamma", m->cell.gamma, 0, "deg");
    } else
        return false;
    return true;
}

static int make(lua_State *L)
{
    static const char *const keys[] = {"name",      "title",      "aliases",       "formula",          "space_group",
                                       "setting",   "unit",       "cell",          "standard_uncertainty", "stiffness_gpa",
                                       "stiffness_source", "burgers_nm", "burgers", "density_kg_m3",    "hazard",
                                       "source",    NULL};
    lua_settop(L, 1);
    if (lwb_test(L, 1, &lwb_material_noun) != NULL)
        return 1;
    lw_material *material = lwb_new(L, &lwb_material_noun, sizeof *material, 0);
    const char *called = VERB; /* in messages: a file by its name */
    if (lua_type(L, 1) == LUA_TTABLE)
        lua_pushvalue(L, 1);
    else {
        called = lwb_text(L, 1, VERB, "the name");
        lwb_find_literal(L, "materials", VERB, called);
    }
    int at = lua_gettop(L);
    lwb_only_keys(L, at, called, keys);
    lwb_read_material(L, at, called, material);
    lua_settop(L, 2);
    return 1;
}

static int reflections(lua_State *L)
{
    return lwb_reflections_of(L, lwb_self(L, 1, &lwb_material_noun, "material:reflections"), "material:reflections");
}

/* m:young_modulus(h, k, l): GPa along the normal of hkl. */
static int young_modulus(lua_State *L)
{
    const lw_material *m = lwb_self(L, 1, &lwb_material_noun, "material:young_modulus");
    lw_error err = LW_ERROR_NONE;
    double gpa = 0;
    lwb_check(L,
              lw_young_modulus(m, (int)luaL_checkinteger(L, 2), (int)luaL_checkinteger(L, 3),
                               (int)luaL_checkinteger(L, 4), &gpa, &err),
              &err);
    lua_pushnumber(L, gpa);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    return lwb_material_field(L, lwb_test(L, 1, &lwb_material_noun), key);
}

static int show(lua_State *L)
{
    const lw_material *m = lwb_self(L, 1, &lwb_material_noun, "tostring");
    char text[300];
    snprintf(text, sizeof text, "%s, %s, %s, a = %.7g nm", m->title, m->formula, m->space_group_symbol, m->cell.a);
    lua_pushstring(L, text);
    return 1;
}

static const luaL_Reg functions[] = {{"material", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"reflections", reflections}, {"young_modulus", young_modulus}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_material_noun = {.name = "material",
                                    .functions = functions,
                                    .methods = methods,
                                    .metamethods = metamethods,
                                    .fields = lwb_material_fields,
                                    .field = field};
