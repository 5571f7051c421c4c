/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Options as they were after the defaults had been filled in, for the record's provenance. */
#include "bind/roads.h"

#include <math.h>

static void add_one(lw_node *group, const lw_option *option, const void *options, lw_error *err)
{
    const void *field = (const char *)options + option->offset;
    switch (option->kind) {
    case LW_OPTION_NUMBER:
        if (isfinite(*(const double *)field)) /* NaN: not given, and the verb found its own */
            lw_add_number(group, option->key, *(const double *)field, err);
        break;
    case LW_OPTION_COUNT: lw_add_number(group, option->key, (double)*(const long *)field, err); break;
    case LW_OPTION_FLAG: lw_add_flag(group, option->key, *(const bool *)field, err); break;
    case LW_OPTION_TEXT:
        if (*(const char *const *)field != NULL)
            lw_add_text(group, option->key, *(const char *const *)field, err);
        break;
    case LW_OPTION_CHOICE: lw_add_text(group, option->key, option->choices[*(const int *)field], err); break;
    case LW_OPTION_LIST: {
        const lw_option_list *list = field;
        lw_node *node = lw_add_list(group, option->key, err);
        for (size_t i = 0; i < list->n; i++)
            lw_add_text(node, NULL, list->item[i], err);
        break;
    }
    case LW_OPTION_RANGE: lw_add_vector(group, option->key, field, 2, option->unit, err); break;
    case LW_OPTION_NOUN: break; /* the record names scans and calibrations by their hashes */
    }
}

void lwb_keep_options(lua_State *L, int object, int value, const char *verb, const lw_option *table, const void *options)
{
    lw_error err = LW_ERROR_NONE;
    object = lua_absindex(L, object);
    lwb_tree *tree = lwb_new_tree(L);
    lwb_add_options(tree->root, verb, table, options, &err);
    lwb_check(L, LW_OK, &err);
    lua_setiuservalue(L, object, value);
}

void lwb_add_options(lw_node *parent, const char *name, const lw_option *table, const void *options, lw_error *err)
{
    lw_node *group = lw_add_group(parent, name, err);
    for (const lw_option *option = table; group != NULL && option != NULL && option->key != NULL; option++)
        add_one(group, option, options, err);
}

void lwb_add_road_options(lua_State *L, lw_node *parent, int object)
{
    lw_error err = LW_ERROR_NONE;
    object = lua_absindex(L, object);
    luaL_checkstack(L, 10, NULL);
    int kept = 0, before = 0;
    if (lwb_test(L, object, &lwb_lines_noun) != NULL)
        kept = LWB_LINES_OPTIONS;
    else if (lwb_test(L, object, &lwb_profiles_noun) != NULL)
        kept = LWB_PROFILES_OPTIONS, before = LWB_PROFILES_LINES;
    else if (lwb_test(L, object, &lwb_calibration_noun) != NULL)
        kept = LWB_CALIBRATION_OPTIONS, before = LWB_CALIBRATION_LINES;
    else if (lwb_test(L, object, &lwb_tree_noun) != NULL)
        before = 1;
    if (before != 0) {
        if (lua_getiuservalue(L, object, before) == LUA_TUSERDATA)
            lwb_add_road_options(L, parent, -1);
        lua_pop(L, 1);
    }
    if (kept != 0) {
        lua_getiuservalue(L, object, kept);
        const lwb_tree *tree = lwb_test(L, -1, &lwb_tree_noun);
        if (tree != NULL && tree->node->first != NULL)
            lw_add_copy(parent, tree->node->first->name, tree->node->first, &err);
        lwb_check(L, LW_OK, &err);
        lua_pop(L, 1);
    }
}
