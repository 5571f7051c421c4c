/* SPDX-License-Identifier: GPL-3.0-or-later */
/* calibration:compare(previous, options) and lw.history(calibrations, options). */
#include "bind/comparison.h"

#include "bind/outputs.h"
#include "bind/roads.h"
#include "bind/standards.h"
#include "instrument/compare.h"
#include "instrument/history.h"
#include "instrument/profile_shape.h"

#include <string.h>

/* One calibration as the comparison tells of it. */
static void describe(lw_node *record, const char *name, const lw_calibration *calibration, lw_error *err)
{
    lw_node *group = lw_add_group(record, name, err);
    lw_add_text(group, "standard", lw_node_text(lw_node_get(calibration->record, "standard"), "name", ""), err);
    lw_add_text(group, "verdict", calibration->verdict, err);
    double range[2] = {calibration->valid_low_deg, calibration->valid_high_deg};
    lw_add_vector(group, "valid_two_theta", range, 2, "deg", err);
    const char *date = lw_node_text(lw_node_get(calibration->record, "provenance"), "date", NULL);
    if (date != NULL)
        lw_add_text(group, "made", date, err);
    if (calibration->hash[0] != '\0')
        lw_add_text(group, "sha256", calibration->hash, err);
}

/* The option `tolerances`: a table, or the path of a Lua literal. */
static void read_tolerances(lua_State *L, int options, lw_tolerances *tolerances)
{
    if (lua_getfield(L, options, "tolerances") == LUA_TSTRING) {
        lwb_load_literal(L, lua_tostring(L, -1));
        lua_replace(L, -2);
    }
    if (!lua_isnil(L, -1))
        lwb_options(L, lua_gettop(L), "compare: tolerances", lw_tolerance_table, NULL, tolerances);
    lua_pop(L, 1);
}

int lwb_calibration_compare(lua_State *L)
{
    static const char *const own[] = {"tolerances", "effects", NULL};
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 3);
    luaL_checkstack(L, 40, NULL);
    const lw_calibration *after = lwb_object(L, 1, &lwb_calibration_noun, "calibration:compare");
    const lw_calibration *before = lwb_object(L, 2, &lwb_calibration_noun, "calibration:compare");
    lw_compare_options options = lw_compare_defaults();
    if (!lua_isnil(L, 3)) {
        lwb_want_table(L, 3, "calibration:compare", "the options");
        lwb_only_keys(L, 3, "calibration:compare", own);
        read_tolerances(L, 3, &options.tolerances);
        if (lua_getfield(L, 3, "effects") != LUA_TNIL) {
            if (!lua_isboolean(L, -1))
                return lwb_refuse(L, "give true or false", "calibration:compare: the option 'effects' is a %s",
                                  lwb_kind(L, -1));
            options.effects = lua_toboolean(L, -1);
        }
        lua_pop(L, 1);
    }
    lwb_tree *tree = lwb_new_tree(L);
    lua_pushvalue(L, 1);
    lua_setiuservalue(L, -2, 1);
    lwb_check(L, lw_compare(lwb_engine(L), before, after, &options, tree->root, &err), &err);
    describe(tree->root, "before", before, &err);
    describe(tree->root, "after", after, &err);
    lwb_check(L, LW_OK, &err);
    return 1;
}

static double angle_within(lua_State *L, int index, const lw_calibration *c, const char *verb)
{
    double angle = lwb_number(L, index, verb, "the angle");
    if (!(angle >= c->valid_low_deg && angle <= c->valid_high_deg))
        lwb_refuse(L, "measure the standard further out", "%s: %g deg is outside %g to %g deg", verb, angle, c->valid_low_deg,
                   c->valid_high_deg);
    return angle;
}

#define SHAPE_POINTS 401
#define SHAPE_WIDTHS 6.0

int lwb_calibration_curve(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    const lw_calibration *c = lwb_object(L, 1, &lwb_calibration_noun, "calibration:profile_curve");
    double angle = angle_within(L, 2, c, "calibration:profile_curve");
    lw_width_figure figure;
    lw_width_figure_at(&c->profile, angle, 0, 0, &figure);
    lua_createtable(L, 0, 2);
    double *offset = lwb_new_vector(L, SHAPE_POINTS);
    lua_setfield(L, -2, "offset");
    double *density = lwb_new_vector(L, SHAPE_POINTS);
    lua_setfield(L, -2, "density");
    for (size_t i = 0; i < SHAPE_POINTS; i++)
        offset[i] = figure.middle_deg + SHAPE_WIDTHS * figure.fwhm_deg * (2 * (double)i / (SHAPE_POINTS - 1) - 1);
    lwb_check(L, lw_profile_curve(lwb_engine(L), c, angle, SHAPE_POINTS, offset, density, &err), &err);
    return 1;
}

int lwb_calibration_asymmetry(lua_State *L)
{
    enum { MOST = 200 };
    static const char verb[] = "calibration:asymmetry_at";
    lw_error err = LW_ERROR_NONE;
    const lw_calibration *c = lwb_object(L, 1, &lwb_calibration_noun, verb);
    lwb_want_table(L, 2, verb, "the angles");
    size_t n = lua_rawlen(L, 2);
    double angle[MOST];
    lw_quantity asymmetry[MOST];
    if (n == 0 || n > MOST)
        return lwb_refuse(L, "give a list of angles", "%s: %d angles; 1 to %d can be asked for", verb, (int)n, MOST);
    for (size_t i = 0; i < n; i++) {
        lua_rawgeti(L, 2, (lua_Integer)i + 1);
        angle[i] = angle_within(L, lua_gettop(L), c, verb);
        lua_pop(L, 1);
    }
    lwb_check(L, lw_profile_asymmetry(lwb_engine(L), c, n, angle, asymmetry, &err), &err);
    lua_createtable(L, (int)n, 0);
    for (size_t i = 0; i < n; i++) {
        lwb_push_quantity(L, asymmetry[i]);
        lua_rawseti(L, -2, (lua_Integer)i + 1);
    }
    return 1;
}

int lwb_calibration_for_specimen(lua_State *L)
{
    static const char *const keys[] = {"attenuation", "thickness", NULL};
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 2);
    const lw_calibration *calibration = lwb_object(L, 1, &lwb_calibration_noun, "calibration:for_specimen");
    lwb_want_table(L, 2, "calibration:for_specimen", "the specimen");
    lwb_only_keys(L, 2, "calibration:for_specimen", keys);
    double attenuation = lwb_field_number(L, 2, "attenuation", "calibration:for_specimen", 0);
    double thickness = lwb_field_number(L, 2, "thickness", "calibration:for_specimen", 0);
    lwb_box *box = lwb_new_box(L, &lwb_calibration_noun, LWB_CALIBRATION_VALUES);
    for (int i = 1; i <= LWB_CALIBRATION_VALUES; i++) {
        lua_getiuservalue(L, 1, i);
        lua_setiuservalue(L, -2, i);
    }
    lw_calibration *made = NULL;
    lw_status status =
        lw_calibration_for_specimen(lwb_engine(L), calibration, attenuation, thickness, &made, &err);
    box->object = made;
    lwb_check(L, status, &err);
    lwb_push_node(L, made->record, -1);
    lua_setiuservalue(L, -2, LWB_CALIBRATION_TREE);
    return 1;
}

int lwb_history(lua_State *L)
{
    static const char *const keys[] = {"calibration", "label", "after_service", NULL};
    lw_error err = LW_ERROR_NONE;
    lua_settop(L, 2);
    luaL_checkstack(L, 40, NULL);
    lwb_want_table(L, 1, "history", "the calibrations");
    lw_history_options options = lw_history_defaults();
    lwb_options(L, 2, "history", lw_history_option_table, NULL, &options);
    lua_Integer n = (lua_Integer)lua_rawlen(L, 1);
    lw_arena *arena = lwb_scratch(L);
    lw_history_entry *entry = lw_arena_take(arena, (size_t)n, sizeof *entry, &err);
    lwb_check(L, LW_OK, &err);
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, 1, i);
        int at = lua_gettop(L);
        lwb_want_table(L, at, "history", "an entry");
        lwb_only_keys(L, at, "history", keys);
        lw_history_entry *into = &entry[i - 1];
        lua_getfield(L, at, "calibration");
        into->calibration = lwb_object(L, -1, &lwb_calibration_noun, "history"); /* the list keeps it alive */
        into->label = lw_arena_text(arena, lwb_field_text(L, at, "label", "history", "calibration"), &err);
        lua_getfield(L, at, "after_service");
        into->after_service = lua_toboolean(L, -1);
        lua_settop(L, at - 1);
    }
    lwb_check(L, LW_OK, &err);
    lwb_tree *tree = lwb_new_tree(L);
    lwb_check(L, lw_history(lwb_engine(L), entry, (size_t)n, &options, tree->root, &err), &err);
    return 1;
}
