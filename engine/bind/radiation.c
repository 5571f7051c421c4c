/* SPDX-License-Identifier: GPL-3.0-or-later */
/* radiation: lw.radiation "Cu Ka", "0.05168 nm", a path, or a table. */
#include "physics/radiation.h"
#include "bind/standards.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define VERB "radiation"

/* "0.05168nm", "0.5168 angstrom", "51.68 pm": the wavelength in nm, or 0 if it is no such text. */
static double plain_wavelength(const char *text)
{
    char *end = NULL;
    double value = strtod(text, &end);
    if (end == text)
        return 0;
    while (*end == ' ')
        end++;
    if (strcmp(end, "nm") == 0)
        return value;
    if (strcmp(end, "angstrom") == 0 || strcmp(end, "A") == 0)
        return value / 10;
    if (strcmp(end, "pm") == 0)
        return value / 1000;
    return 0;
}

static void read_component(lua_State *L, double unit_nm, lw_radiation *radiation)
{
    static const char *const keys[] = {"energy_ev", "width_ev",   "height", "share", "wavelength_nm",
                                       "width_nm",  "wavelength", "width",  NULL};
    lw_error err = LW_ERROR_NONE;
    int at = lua_gettop(L);
    lwb_want_table(L, at, VERB, "a component");
    lwb_only_keys(L, at, VERB, keys);
    double energy = lwb_field_number(L, at, "energy_ev", VERB, 0);
    double share = lwb_field_number(L, at, "share", VERB, 0);
    lw_status status;
    if (energy != 0)
        status = lw_radiation_add_energy(radiation, energy, lwb_field_number(L, at, "width_ev", VERB, 0),
                                         lwb_field_number(L, at, "height", VERB, 0), share, &err);
    else {
        double wavelength = lwb_field_number(L, at, "wavelength_nm", VERB,
                                             unit_nm * lwb_field_number(L, at, "wavelength", VERB, 0));
        double width = lwb_field_number(L, at, "width_nm", VERB, unit_nm * lwb_field_number(L, at, "width", VERB, 0));
        status = lw_radiation_add_wavelength(radiation, wavelength, width, share, &err);
    }
    lwb_check(L, status, &err);
}

static void read_table(lua_State *L, int index, lw_radiation *radiation)
{
    static const char *const keys[] = {"name",   "title",      "aliases", "source",           "components",
                                       "k_beta_energy_ev", "k_beta_nm", "unit",    "hc_ev_angstrom", NULL};
    lwb_only_keys(L, index, VERB, keys);
    char unit[16];
    lwb_copy_text(L, index, "title", VERB, false, radiation->name, sizeof radiation->name);
    if (radiation->name[0] == '\0')
        lwb_copy_text(L, index, "name", VERB, true, radiation->name, sizeof radiation->name);
    lwb_copy_text(L, index, "source", VERB, false, radiation->source, sizeof radiation->source);
    lwb_copy_text(L, index, "unit", VERB, false, unit, sizeof unit);
    if (unit[0] != '\0' && strcmp(unit, "nm") != 0 && strcmp(unit, "angstrom") != 0)
        lwb_refuse(L, "choose nm or angstrom", VERB ": the unit '%s' is not known", unit);
    lua_getfield(L, index, "components");
    lwb_want_table(L, -1, VERB, "the field 'components'");
    lua_Integer n = (lua_Integer)lua_rawlen(L, -1);
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, -1, i);
        read_component(L, strcmp(unit, "angstrom") == 0 ? 0.1 : 1, radiation);
        lua_pop(L, 1);
    }
    lua_pop(L, 1);
    double beta = lwb_field_number(L, index, "k_beta_energy_ev", VERB, 0);
    radiation->k_beta_nm = beta > 0 ? LW_HC_EV_NM / beta : lwb_field_number(L, index, "k_beta_nm", VERB, 0);
    lw_error err = LW_ERROR_NONE;
    lwb_check(L, lw_radiation_settle(radiation, &err), &err);
}

static int make(lua_State *L)
{
    lua_settop(L, 1);
    if (lwb_test(L, 1, &lwb_radiation_noun) != NULL)
        return 1;
    lw_radiation *radiation = lwb_new(L, &lwb_radiation_noun, sizeof *radiation, 0);
    lw_error err = LW_ERROR_NONE;
    double wavelength = 0;
    if (lua_type(L, 1) == LUA_TNUMBER || lwb_test_quantity(L, 1) != NULL)
        wavelength = lwb_number(L, 1, VERB, "the wavelength in nm");
    else if (lua_type(L, 1) == LUA_TSTRING)
        wavelength = plain_wavelength(lua_tostring(L, 1));
    if (wavelength != 0) {
        lwb_check(L, lw_radiation_plain(wavelength, radiation, &err), &err);
        return 1;
    }
    if (lua_type(L, 1) == LUA_TTABLE)
        read_table(L, 1, radiation);
    else {
        lwb_find_literal(L, "radiation", VERB, lwb_text(L, 1, VERB, "the name"));
        read_table(L, lua_gettop(L), radiation);
    }
    lua_settop(L, 2);
    return 1;
}

static bool field(lua_State *L, const char *key)
{
    const lw_radiation *r = lwb_test(L, 1, &lwb_radiation_noun);
    if (strcmp(key, "name") == 0)
        lua_pushstring(L, r->name);
    else if (strcmp(key, "wavelength_nm") == 0)
        lua_pushnumber(L, lw_radiation_wavelength(r));
    else if (strcmp(key, "k_beta_nm") == 0)
        lua_pushnumber(L, r->k_beta_nm);
    else if (strcmp(key, "is_plain") == 0)
        lua_pushboolean(L, r->is_plain);
    else if (strcmp(key, "source") == 0)
        lua_pushstring(L, r->source);
    else if (strcmp(key, "components") == 0) {
        lua_newtable(L);
        for (size_t i = 0; i < r->n; i++) {
            lua_createtable(L, 0, 3);
            lua_pushnumber(L, r->component[i].wavelength_nm);
            lua_setfield(L, -2, "wavelength_nm");
            lua_pushnumber(L, r->component[i].width_nm);
            lua_setfield(L, -2, "width_nm");
            lua_pushnumber(L, r->component[i].weight);
            lua_setfield(L, -2, "weight");
            lua_rawseti(L, -2, (lua_Integer)i + 1);
        }
    } else
        return false;
    return true;
}

static int show(lua_State *L)
{
    const lw_radiation *r = lwb_self(L, 1, &lwb_radiation_noun, "tostring");
    char text[200];
    snprintf(text, sizeof text, "%s, %.8g nm, %zu component%s", r->name, lw_radiation_wavelength(r), r->n,
             r->n == 1 ? "" : "s");
    lua_pushstring(L, text);
    return 1;
}

static int equal(lua_State *L)
{
    const lw_radiation *a = lwb_test(L, 1, &lwb_radiation_noun), *b = lwb_test(L, 2, &lwb_radiation_noun);
    lua_pushboolean(L, a != NULL && b != NULL && lw_radiation_same(a, b));
    return 1;
}

static const char *const fields[] = {"name", "wavelength_nm", "k_beta_nm", "is_plain", "source", "components", NULL};
static const luaL_Reg functions[] = {{"radiation", make}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__tostring", show}, {"__eq", equal}, {NULL, NULL}};

const lwb_noun lwb_radiation_noun = {
    .name = "radiation", .functions = functions, .metamethods = metamethods, .fields = fields, .field = field};
