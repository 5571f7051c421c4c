/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "bind/roads.h"

int lwb_index_road(lua_State *L, const lwb_noun *noun, int tree_at, const char *list)
{
    lua_settop(L, 2);
    lua_getiuservalue(L, 1, tree_at);
    const lwb_tree *tree = lwb_test(L, 3, &lwb_tree_noun);
    if (lua_type(L, 2) == LUA_TNUMBER) {
        const lw_node *node = tree && list ? lw_node_get(tree->node, list) : NULL;
        lua_Integer i = lua_tointeger(L, 2);
        const lw_node *child = node != NULL && i >= 1 ? lw_node_at(node, (size_t)i - 1) : NULL;
        if (child != NULL)
            lwb_push_value(L, child, 3);
        else
            lua_pushnil(L);
        return 1;
    }
    lua_pushvalue(L, 2);
    if (lua_rawget(L, lua_upvalueindex(1)) != LUA_TNIL)
        return 1;
    lua_pop(L, 1);
    const char *key = lwb_text(L, 2, noun->name, "a field's name");
    if (noun->field(L, key))
        return 1;
    const lw_node *child = tree ? lw_node_get(tree->node, key) : NULL;
    if (child != NULL) {
        lwb_push_value(L, child, 3);
        return 1;
    }
    const char *names[96] = {NULL};
    size_t n = 0;
    for (size_t i = 0; noun->fields != NULL && noun->fields[i] != NULL && n < 95; i++)
        names[n++] = noun->fields[i];
    for (size_t i = 0; noun->methods != NULL && noun->methods[i].name != NULL && n < 95; i++)
        names[n++] = noun->methods[i].name;
    for (const lw_node *c = tree ? tree->node->first : NULL; c != NULL && n < 95; c = c->next)
        if (c->name != NULL)
            names[n++] = c->name;
    return lwb_unknown_field(L, noun->name, key, names);
}

const lw_node *lwb_road_node(lua_State *L, int index)
{
    int at = lwb_test(L, index, &lwb_lines_noun) != NULL         ? (int)LWB_LINES_TREE
             : lwb_test(L, index, &lwb_profiles_noun) != NULL    ? (int)LWB_PROFILES_TREE
             : lwb_test(L, index, &lwb_calibration_noun) != NULL ? (int)LWB_CALIBRATION_TREE
                                                                 : 0;
    if (at == 0)
        return NULL;
    lua_getiuservalue(L, index, at);
    const lwb_tree *tree = lwb_test(L, -1, &lwb_tree_noun);
    lua_pop(L, 1);
    return tree != NULL ? tree->node : NULL;
}
