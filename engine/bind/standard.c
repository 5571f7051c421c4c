/* SPDX-License-Identifier: GPL-3.0-or-later */
/* standard: a certified reference material, lw.standard "lab6-660c", a path, or a table. */
#include "bind/standards.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define VERB "standard"
#define INDEX_MOST 999 /* no line has an index like it */

/* "104", "1 0 4", "-1 0 10": three indices, parted by blanks where one has two digits. */
static bool read_hkl(const char *text, lw_intensity *out)
{
    int *const index[3] = {&out->h, &out->k, &out->l};
    if (strlen(text) == 3 && strspn(text, "0123456789") == 3) {
        for (int i = 0; i < 3; i++)
            *index[i] = text[i] - '0';
        return true;
    }
    for (int i = 0; i < 3; i++) {
        char *end;
        long number = strtol(text, &end, 10);
        if (end == text || (i < 2 && *end != ' ') || number < -INDEX_MOST || number > INDEX_MOST)
            return false;
        *index[i] = (int)number;
        text = end;
    }
    return text[strspn(text, " ")] == '\0';
}

/* intensities = { { hkl = "104", value = 100, expanded_uncertainty = 2 }, ... } */
static void read_intensities(lua_State *L, int at, const char *called, lw_standard *standard)
{
    static const char *const keys[] = {"hkl", "value", "expanded_uncertainty", NULL};
    const char *of = lwb_field_text(L, at, "intensities_of", called, "areas");
    standard->intensities_are_heights = strcmp(of, "heights") == 0;
    if (!standard->intensities_are_heights && strcmp(of, "areas") != 0)
        lwb_refuse(L, "write \"areas\" or \"heights\"", "%s: intensities_of is '%.40s'", called, of);
    if (lua_getfield(L, at, "intensities") == LUA_TNIL) {
        lua_pop(L, 1);
        return;
    }
    int list = lua_gettop(L);
    lwb_want_table(L, list, called, "intensities");
    size_t n = lua_rawlen(L, list);
    if (n == 0 || n > LW_INTENSITIES_MOST)
        lwb_refuse(L, "list the lines of the certificate", "%s: %d intensities; 1 to %d are taken", called, (int)n,
                   LW_INTENSITIES_MOST);
    for (size_t i = 0; i < n; i++) {
        lw_intensity *out = &standard->intensity[i];
        lua_rawgeti(L, list, (lua_Integer)i + 1);
        int entry = lua_gettop(L);
        lwb_want_table(L, entry, called, "an intensity");
        lwb_only_keys(L, entry, called, keys);
        const char *hkl = lwb_field_text(L, entry, "hkl", called, "");
        out->value = lwb_field_number(L, entry, "value", called, 0);
        out->u = lwb_field_number(L, entry, "expanded_uncertainty", called, 0) / standard->coverage_factor;
        if (!read_hkl(hkl, out) || (out->h == 0 && out->k == 0 && out->l == 0))
            lwb_refuse(L, "write \"104\" or \"1 0 10\"", "%s: '%.40s' are no Miller indices", called, hkl);
        if (!(out->value > 0 && out->u >= 0))
            lwb_refuse(L, "give the certificate's numbers", "%s: the intensity of %s must be positive, its uncertainty not negative",
                       called, hkl);
        for (size_t j = 0; j < i; j++)
            if (standard->intensity[j].h == out->h && standard->intensity[j].k == out->k && standard->intensity[j].l == out->l)
                lwb_refuse(L, "name each line once", "%s: the intensity of %s is given twice", called, hkl);
        lua_settop(L, list);
    }
    standard->n_intensities = n;
    lua_settop(L, list - 1);
}

/* called: how messages name it, a file by its path */
static void read_standard(lua_State *L, int at, const char *called, lw_standard *standard)
{
    static const char *const keys[] = {
        "name",       "title",   "aliases", "formula",       "space_group",      "setting",        "unit",
        "cell",       "stiffness_gpa", "stiffness_source", "burgers_nm", "burgers", "density_kg_m3", "hazard",
        "source",     "certificate", "expanded_uncertainty", "coverage_factor", "temperature_c", "domain_size_nm",
        "unverified", "intensities", "intensities_of", NULL};
    lwb_only_keys(L, at, called, keys);
    lwb_read_material(L, at, called, &standard->material);
    memcpy(standard->name, standard->material.name, sizeof standard->name);
    lwb_copy_text(L, at, "certificate", called, true, standard->certificate, sizeof standard->certificate);
    standard->coverage_factor = lwb_field_number(L, at, "coverage_factor", called, 1);
    standard->temperature_c = lwb_field_number(L, at, "temperature_c", called, 25);
    standard->domain_size_nm = lwb_field_number(L, at, "domain_size_nm", called, 0);
    standard->unverified = lwb_field_flag(L, at, "unverified", called, false);
    read_intensities(L, at, called, standard);
}

static int make(lua_State *L)
{
    lua_settop(L, 1);
    if (lwb_test(L, 1, &lwb_standard_noun) != NULL)
        return 1;
    lw_standard *standard = lwb_new(L, &lwb_standard_noun, sizeof *standard, 0);
    const char *called = VERB;
    if (lua_type(L, 1) == LUA_TTABLE)
        lua_pushvalue(L, 1);
    else {
        called = lwb_text(L, 1, VERB, "the name");
        lwb_find_literal(L, "reference", VERB, called);
    }
    read_standard(L, lua_gettop(L), called, standard);
    lua_settop(L, 2);
    return 1;
}

static int reflections(lua_State *L)
{
    const lw_standard *self = lwb_self(L, 1, &lwb_standard_noun, "standard:reflections");
    return lwb_reflections_of(L, &self->material, "standard:reflections");
}

static bool field(lua_State *L, const char *key)
{
    const lw_standard *s = lwb_test(L, 1, &lwb_standard_noun);
    if (strcmp(key, "certificate") == 0)
        lua_pushstring(L, s->certificate);
    else if (strcmp(key, "coverage_factor") == 0)
        lua_pushnumber(L, s->coverage_factor);
    else if (strcmp(key, "temperature_c") == 0)
        lua_pushnumber(L, s->temperature_c);
    else if (strcmp(key, "domain_size_nm") == 0)
        lua_pushnumber(L, s->domain_size_nm);
    else if (strcmp(key, "unverified") == 0)
        lua_pushboolean(L, s->unverified);
    else if (strcmp(key, "material") == 0) {
        lw_material *copy = lwb_new(L, &lwb_material_noun, sizeof *copy, 0);
        *copy = s->material;
    } else
        return lwb_material_field(L, &s->material, key);
    return true;
}

static int show(lua_State *L)
{
    const lw_standard *s = lwb_self(L, 1, &lwb_standard_noun, "tostring");
    char a[80], text[400];
    lw_quantity_text(lw_quantity_of(s->material.cell.a, s->material.cell.u_a, "nm"), a, sizeof a);
    snprintf(text, sizeof text, "%s, a = %s at %.4g degC%s", s->material.title, a, s->temperature_c,
             s->unverified ? " (check against your own certificate)" : "");
    lua_pushstring(L, text);
    return 1;
}

static const char *const fields[] = {"name",    "title",  "formula",   "space_group", "cell",    "system", "burgers_nm",
                                     "density_kg_m3", "hazard", "source", "volume_nm3",  "has_stiffness", "certificate",
                                     "coverage_factor", "temperature_c", "domain_size_nm", "unverified", "material", NULL};
static const luaL_Reg functions[] = {{"standard", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"reflections", reflections}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_standard_noun = {.name = "standard",
                                    .functions = functions,
                                    .methods = methods,
                                    .metamethods = metamethods,
                                    .fields = fields,
                                    .field = field};

const lw_standard *lwb_standard_at(lua_State *L, int index, const char *verb)
{
    if (lua_type(L, index) == LUA_TSTRING) {
        lua_pushcfunction(L, make);
        lua_pushvalue(L, index);
        lua_call(L, 1, 1);
        lua_replace(L, index);
    }
    return lwb_self(L, index, &lwb_standard_noun, verb);
}
