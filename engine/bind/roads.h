/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The objects along the road keep what they were made from in user values, so that nothing needs to be
 * passed twice and nothing is freed too early. */
#ifndef LW_BIND_ROADS_H
#define LW_BIND_ROADS_H

#include "bind/bind.h"

/* User values of a lines object. */
enum {
    LWB_LINES_SCAN = 1,
    LWB_LINES_CALIBRATION, /* nil without an instrument */
    LWB_LINES_REFLECTIONS,
    LWB_LINES_BACKGROUND, /* nil without a background scan */
    LWB_LINES_TREE,
    LWB_LINES_OPTIONS, /* as they were after the defaults */
    LWB_LINES_VALUES = LWB_LINES_OPTIONS
};

/* Of a calibration. */
enum { LWB_CALIBRATION_LINES = 1, LWB_CALIBRATION_STANDARD, LWB_CALIBRATION_TREE, LWB_CALIBRATION_OPTIONS, LWB_CALIBRATION_VALUES = 4 };

/* Of profiles. */
enum {
    LWB_PROFILES_LINES = 1,
    LWB_PROFILES_CALIBRATION,
    LWB_PROFILES_TREE,
    LWB_PROFILES_OPTIONS,
    LWB_PROFILES_STANDARD, /* nil where the calibration's function stands for the instrument */
    LWB_PROFILES_VALUES = LWB_PROFILES_STANDARD
};

/* __index of such an object: entries of its list `list` by number, then methods (upvalue 1), fields of
 * the noun, and the fields of its tree (user value `tree_at`). Self and key are at 1 and 2. */
int lwb_index_road(lua_State *L, const lwb_noun *noun, int tree_at, const char *list);

/* The tree of lines, profiles or a calibration at an index, which keeps it alive; NULL for anything else. */
const lw_node *lwb_road_node(lua_State *L, int index);

/* Keeps a verb's options as a user value of the object that it made. */
void lwb_keep_options(lua_State *L, int object, int value, const char *verb, const lw_option *table, const void *options);
/* Adds options as a group. */
void lwb_add_options(lw_node *parent, const char *name, const lw_option *table, const void *options, lw_error *err);
/* Adds the kept options of an object and of what it was made from, a group a verb. */
void lwb_add_road_options(lua_State *L, lw_node *parent, int object);

#endif
