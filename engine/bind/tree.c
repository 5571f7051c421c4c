/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Results: a tree of named values that can be read but not changed. Fields by name, list entries by
 * number, # and ipairs and pairs work; what is not there is an error that lists what is (:get(name)
 * gives nil instead). */
#include "bind/bind.h"
#include "bind/figures.h"
#include "bind/roads.h"

#include <math.h>
#include <string.h>

static int end_tree(lua_State *L)
{
    lwb_tree *self = lua_touserdata(L, 1);
    if (self->root != NULL || self->arena.engine != NULL) {
        lw_arena_end(&self->arena);
        self->root = NULL;
        self->node = NULL;
    }
    return 0;
}

lwb_tree *lwb_new_tree(lua_State *L)
{
    lwb_tree *self = lwb_new(L, &lwb_tree_noun, sizeof *self, 1);
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&self->arena, lwb_engine(L));
    self->root = lw_tree_new(&self->arena, &err);
    if (self->root == NULL)
        lwb_raise(L, &err);
    self->node = self->root;
    return self;
}

lw_arena *lwb_scratch(lua_State *L)
{
    return &lwb_new_tree(L)->arena;
}

void lwb_push_node(lua_State *L, const lw_node *node, int owner)
{
    owner = lua_absindex(L, owner);
    lwb_tree *view = lwb_new(L, &lwb_tree_noun, sizeof *view, 1);
    view->node = node;
    lua_pushvalue(L, owner);
    lua_setiuservalue(L, -2, 1);
}

void lwb_push_number(lua_State *L, double number)
{
    if (number == rint(number) && fabs(number) < 1e15)
        lua_pushinteger(L, (lua_Integer)number);
    else
        lua_pushnumber(L, number);
}

void lwb_push_value(lua_State *L, const lw_node *node, int owner)
{
    luaL_checkstack(L, 8, NULL);
    switch (node->kind) {
    case LW_NODE_QUANTITY: lwb_push_quantity(L, node->quantity); return;
    case LW_NODE_NUMBER: lwb_push_number(L, node->number); return;
    case LW_NODE_TEXT: lua_pushstring(L, node->text); return;
    case LW_NODE_FLAG: lua_pushboolean(L, node->flag); return;
    case LW_NODE_VECTOR: lwb_push_vector(L, node->vector, node->n, owner); return;
    case LW_NODE_GROUP:
    case LW_NODE_LIST: lwb_push_node(L, node, owner); return;
    }
    lua_pushnil(L);
}

void lwb_push_table(lua_State *L, const lw_node *node, int owner)
{
    owner = lua_absindex(L, owner);
    luaL_checkstack(L, 8, "result tree too deep");
    if (node->kind == LW_NODE_VECTOR) {
        lua_newtable(L);
        for (size_t i = 0; i < node->n; i++) {
            lua_pushnumber(L, node->vector[i]);
            lua_rawseti(L, -2, (lua_Integer)i + 1);
        }
        return;
    }
    if (node->kind != LW_NODE_GROUP && node->kind != LW_NODE_LIST) {
        lwb_push_value(L, node, owner);
        return;
    }
    lua_newtable(L);
    lua_Integer i = 0;
    for (const lw_node *child = node->first; child != NULL; child = child->next) {
        lwb_push_table(L, child, owner);
        if (node->kind == LW_NODE_GROUP)
            lua_setfield(L, -2, child->name);
        else
            lua_rawseti(L, -2, ++i);
    }
}

void lwb_push_child(lua_State *L, const lw_node *group, const char *name, int owner, const char *noun)
{
    const lw_node *child = lw_node_get(group, name);
    if (child != NULL) {
        lwb_push_value(L, child, owner);
        return;
    }
    const char *names[64] = {NULL};
    size_t n = 0;
    for (const lw_node *c = group->first; c != NULL && n < 63; c = c->next)
        if (c->name != NULL)
            names[n++] = c->name;
    lwb_unknown_field(L, noun, name, names);
}

static lwb_tree *self_of(lua_State *L, const char *verb)
{
    lwb_tree *self = lwb_self(L, 1, &lwb_tree_noun, verb);
    if (self->node == NULL)
        lwb_refuse(L, NULL, "%s: the result is closed", verb);
    return self;
}

/* Upvalue 1: methods. */
static int at(lua_State *L)
{
    lwb_tree *self = self_of(L, "result");
    if (lua_type(L, 2) == LUA_TNUMBER) {
        lua_Integer i = lua_tointeger(L, 2);
        const lw_node *child = i >= 1 && (self->node->kind == LW_NODE_LIST || self->node->kind == LW_NODE_GROUP)
                                   ? lw_node_at(self->node, (size_t)i - 1)
                                   : NULL;
        if (child == NULL)
            lua_pushnil(L);
        else
            lwb_push_value(L, child, 1);
        return 1;
    }
    const char *key = lwb_text(L, 2, "result", "a field's name");
    lua_pushvalue(L, 2);
    if (lua_rawget(L, lua_upvalueindex(1)) != LUA_TNIL)
        return 1;
    lua_pop(L, 1);
    lwb_push_child(L, self->node, key, 1, "result");
    return 1;
}

static int length(lua_State *L)
{
    lua_pushinteger(L, (lua_Integer)self_of(L, "#result")->node->n);
    return 1;
}

/* Steps through the children: state is the tree, upvalue 1 the next child. */
static int next_child(lua_State *L)
{
    const lw_node *child = lua_touserdata(L, lua_upvalueindex(1));
    if (child == NULL)
        return 0;
    lua_Integer i = lua_tointeger(L, lua_upvalueindex(2)) + 1;
    lua_pushlightuserdata(L, child->next);
    lua_replace(L, lua_upvalueindex(1));
    lua_pushinteger(L, i);
    lua_replace(L, lua_upvalueindex(2));
    if (child->name != NULL)
        lua_pushstring(L, child->name);
    else
        lua_pushinteger(L, i);
    lwb_push_value(L, child, lua_upvalueindex(3));
    return 2;
}

static int each(lua_State *L)
{
    lwb_tree *self = self_of(L, "pairs");
    bool has_children = self->node->kind == LW_NODE_GROUP || self->node->kind == LW_NODE_LIST;
    lua_pushlightuserdata(L, has_children ? self->node->first : NULL);
    lua_pushinteger(L, 0);
    lua_pushvalue(L, 1);
    lua_pushcclosure(L, next_child, 3);
    return 1;
}

static int show(lua_State *L)
{
    lwb_push_shown(L, self_of(L, "tostring")->node);
    return 1;
}

static int table(lua_State *L)
{
    lwb_push_table(L, self_of(L, "result:table")->node, 1);
    return 1;
}

/* r:get("a.b", ...): the value there, or nil where nothing is. */
static int get(lua_State *L)
{
    const lw_node *node = self_of(L, "result:get")->node;
    const char *path = lwb_text(L, 2, "result:get", "the name");
    lua_settop(L, 2);
    while (node != NULL && *path != '\0') {
        size_t length = strcspn(path, ".");
        lua_pushlstring(L, path, length);
        const char *name = lua_tostring(L, -1);
        node = node->kind == LW_NODE_GROUP ? lw_node_get(node, name) : NULL;
        lua_pop(L, 1);
        path += length;
        if (*path == '.')
            path++;
    }
    if (node == NULL)
        lua_pushnil(L);
    else
        lwb_push_value(L, node, 1);
    return 1;
}

/* r:names(): the fields in order. */
static int names(lua_State *L)
{
    const lw_node *node = self_of(L, "result:names")->node;
    lua_newtable(L);
    lua_Integer i = 0;
    if (node->kind == LW_NODE_GROUP)
        for (const lw_node *child = node->first; child != NULL; child = child->next) {
            lua_pushstring(L, child->name);
            lua_rawseti(L, -2, ++i);
        }
    return 1;
}

/* r:describe(name): what the value means and its published source, each nil where not known. */
static int describe(lua_State *L)
{
    const lw_node *node = self_of(L, "result:describe")->node;
    if (!lua_isnoneornil(L, 2)) {
        const char *name = lwb_text(L, 2, "result:describe", "a field's name");
        const lw_node *child = lw_node_get(node, name);
        if (child == NULL)
            lwb_push_child(L, node, name, 1, "result"); /* raises */
        node = child;
    }
    lua_pushstring(L, node->definition); /* nil for NULL */
    lua_pushstring(L, node->source ? node->source : lw_node_text(node, "source", NULL));
    return 2;
}

/* r:figure() or results:figure(method): what there is to look at. */
static int figure(lua_State *L)
{
    const lw_node *node = self_of(L, "result:figure")->node;
    const char *name = node->name ? node->name : "result";
    if (!lua_isnoneornil(L, 2)) {
        name = lwb_text(L, 2, "result:figure", "the method's name");
        const lw_node *methods = lw_node_get(node, "methods");
        if (methods != NULL && lw_node_get(node, name) == NULL)
            node = methods;
        const lw_node *child = lw_node_get(node, name);
        if (child == NULL)
            lwb_push_child(L, node, name, 1, "result"); /* raises */
        node = child;
    }
    if (!lwb_push_result_figure(L, node, name))
        return lwb_refuse(L, "give the name of a method: results:figure \"williamson_hall\"",
                          "result:figure: there is nothing to draw in '%s'", name);
    return 1;
}

static void add_table(lua_State *L, lw_node *parent, const char *name, int index)
{
    lw_error err = LW_ERROR_NONE;
    luaL_checkstack(L, 8, "table too deep");
    lwb_check(L, lw_engine_poll(&lwb_home_of(L)->engine, &err), &err); /* a few tables may stand for very many values */
    if (lua_rawlen(L, index) > 0) {
        lw_node *list = lw_add_list(parent, name, &err);
        lwb_check(L, LW_OK, &err);
        for (lua_Integer i = 1, n = (lua_Integer)lua_rawlen(L, index); i <= n; i++) {
            lua_rawgeti(L, index, i);
            lwb_add_value(L, list, NULL, lua_gettop(L));
            lua_pop(L, 1);
        }
        return;
    }
    /* names in alphabetical order: the order of a table's keys is not the same from run to run */
    lw_node *group = lw_add_group(parent, name, &err);
    lwb_check(L, LW_OK, &err);
    lua_newtable(L);
    int sorted = lua_gettop(L);
    lua_Integer n = 0;
    for (lua_pushnil(L); lua_next(L, index); lua_pop(L, 1)) {
        if (lua_type(L, -2) != LUA_TSTRING)
            lwb_refuse(L, NULL, "a table for a record needs names or a plain list");
        lua_pushvalue(L, -2);
        lua_Integer at = ++n; /* insertion sort: such tables are small */
        for (; at > 1; at--) {
            lua_rawgeti(L, sorted, at - 1);
            bool placed = strcmp(lua_tostring(L, -1), lua_tostring(L, -2)) <= 0;
            if (placed) {
                lua_pop(L, 1);
                break;
            }
            lua_rawseti(L, sorted, at);
        }
        lua_rawseti(L, sorted, at);
    }
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, sorted, i);
        lua_pushvalue(L, -1);
        lua_rawget(L, index);
        lwb_add_value(L, group, lua_tostring(L, -2), lua_gettop(L));
        lua_pop(L, 2);
    }
    lua_pop(L, 1);
}

void lwb_add_value(lua_State *L, lw_node *parent, const char *name, int index)
{
    lw_error err = LW_ERROR_NONE;
    const lw_quantity *quantity = lwb_test_quantity(L, index);
    const lwb_tree *tree = lwb_test(L, index, &lwb_tree_noun);
    const lw_node *road = lwb_road_node(L, index);
    int type = lua_type(L, index);
    if (road != NULL)
        lw_add_copy(parent, name, road, &err);
    else if (quantity != NULL)
        lw_add_quantity(parent, name, *quantity, NULL, &err);
    else if (tree != NULL && tree->node != NULL)
        lw_add_copy(parent, name, tree->node, &err);
    else if (lwb_test(L, index, &lwb_vector_noun) != NULL) {
        size_t n = 0;
        const double *x = lwb_to_vector(L, index, "record", "a vector", &n);
        lw_add_vector(parent, name, x, n, "", &err);
        lua_pop(L, 1);
    } else if (type == LUA_TNUMBER)
        lw_add_number(parent, name, lua_tonumber(L, index), &err);
    else if (type == LUA_TSTRING)
        lw_add_text(parent, name, lua_tostring(L, index), &err);
    else if (type == LUA_TBOOLEAN)
        lw_add_flag(parent, name, lua_toboolean(L, index), &err);
    else if (type == LUA_TTABLE)
        add_table(L, parent, name, index);
    else
        lwb_refuse(L, NULL, "a %s can't be written to a record", lwb_kind(L, index));
    lwb_check(L, LW_OK, &err);
}

/* lw.result{ name = value, ... }: a tree of one's own, for results a recipe computes itself. */
static int make(lua_State *L)
{
    lwb_want_table(L, 1, "result", "the argument");
    lua_settop(L, 1);
    lwb_tree *self = lwb_new_tree(L);
    luaL_checkstack(L, 10, NULL);
    lua_pushnil(L);
    lw_error err = LW_ERROR_NONE;
    lw_node *holder = lw_tree_new(&self->arena, &err);
    lwb_check(L, LW_OK, &err);
    lwb_add_value(L, holder, "result", 1);
    self->node = lw_node_get(holder, "result");
    lua_settop(L, 2);
    return 1;
}

static const luaL_Reg functions[] = {{"result", make}, {NULL, NULL}};
static const luaL_Reg methods[] = {{"table", table},       {"get", get},       {"names", names},
                                   {"describe", describe}, {"figure", figure}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {
    {"__index", at}, {"__len", length}, {"__pairs", each}, {"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_tree_noun = {
    .name = "result", .functions = functions, .methods = methods, .metamethods = metamethods, .gc = end_tree};
