/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/tree.h"

#include <string.h>

lw_node *lw_tree_new(lw_arena *arena, lw_error *err)
{
    lw_node *root = lw_arena_take(arena, 1, sizeof *root, err);
    if (root != NULL) {
        root->kind = LW_NODE_GROUP;
        root->arena = arena;
    }
    return root;
}

static lw_node *add(lw_node *parent, const char *name, lw_node_kind kind, lw_error *err)
{
    if (parent == NULL)
        return NULL;
    if (parent->depth >= LW_TREE_DEEPEST) {
        lw_fail(err, LW_BAD_ARGUMENT, "see whether a table holds itself", "values are nested more than %d levels deep",
                LW_TREE_DEEPEST);
        return NULL;
    }
    lw_node *node = lw_arena_take(parent->arena, 1, sizeof *node, err);
    if (node == NULL)
        return NULL;
    node->kind = kind;
    node->depth = parent->depth + 1;
    node->arena = parent->arena;
    if (name != NULL && (node->name = lw_arena_text(parent->arena, name, err)) == NULL)
        return NULL;
    if (parent->last == NULL)
        parent->first = node;
    else
        parent->last->next = node;
    parent->last = node;
    parent->n++;
    return node;
}

lw_node *lw_add_group(lw_node *parent, const char *name, lw_error *err)
{
    return add(parent, name, LW_NODE_GROUP, err);
}

lw_node *lw_add_list(lw_node *parent, const char *name, lw_error *err)
{
    return add(parent, name, LW_NODE_LIST, err);
}

lw_node *lw_add_quantity(lw_node *parent, const char *name, lw_quantity quantity, const char *definition,
                         lw_error *err)
{
    lw_node *node = add(parent, name, LW_NODE_QUANTITY, err);
    if (node == NULL)
        return NULL;
    node->quantity = quantity;
    node->quantity.unit = lw_arena_text(parent->arena, quantity.unit, err);
    if (definition != NULL)
        node->definition = lw_arena_text(parent->arena, definition, err);
    return node;
}

lw_node *lw_add_number(lw_node *parent, const char *name, double number, lw_error *err)
{
    lw_node *node = add(parent, name, LW_NODE_NUMBER, err);
    if (node != NULL)
        node->number = number;
    return node;
}

lw_node *lw_add_text(lw_node *parent, const char *name, const char *text, lw_error *err)
{
    lw_node *node = add(parent, name, LW_NODE_TEXT, err);
    if (node != NULL)
        node->text = lw_arena_text(parent->arena, text, err);
    return node;
}

lw_node *lw_add_flag(lw_node *parent, const char *name, bool flag, lw_error *err)
{
    lw_node *node = add(parent, name, LW_NODE_FLAG, err);
    if (node != NULL)
        node->flag = flag;
    return node;
}

lw_node *lw_add_vector(lw_node *parent, const char *name, const double *values, size_t n, const char *unit,
                       lw_error *err)
{
    lw_node *node = add(parent, name, LW_NODE_VECTOR, err);
    if (node == NULL)
        return NULL;
    node->vector = lw_arena_copy(parent->arena, values, n, sizeof *values, err);
    node->n = node->vector ? n : 0;
    node->unit = lw_arena_text(parent->arena, unit, err);
    return node;
}

lw_node *lw_add_copy(lw_node *parent, const char *name, const lw_node *from, lw_error *err)
{
    lw_node *node = add(parent, name, from->kind, err);
    if (node == NULL)
        return NULL;
    switch (from->kind) {
    case LW_NODE_QUANTITY:
        node->quantity = from->quantity;
        node->quantity.unit = lw_arena_text(parent->arena, from->quantity.unit, err);
        break;
    case LW_NODE_NUMBER: node->number = from->number; break;
    case LW_NODE_TEXT: node->text = lw_arena_text(parent->arena, from->text, err); break;
    case LW_NODE_FLAG: node->flag = from->flag; break;
    case LW_NODE_VECTOR:
        node->vector = lw_arena_copy(parent->arena, from->vector, from->n, sizeof *from->vector, err);
        node->n = node->vector ? from->n : 0;
        node->unit = lw_arena_text(parent->arena, from->unit, err);
        break;
    case LW_NODE_GROUP:
    case LW_NODE_LIST:
        for (const lw_node *child = from->first; child != NULL; child = child->next)
            lw_add_copy(node, child->name, child, err);
        break;
    }
    if (from->definition != NULL)
        node->definition = lw_arena_text(parent->arena, from->definition, err);
    if (from->source != NULL)
        node->source = lw_arena_text(parent->arena, from->source, err);
    return node;
}

const lw_node *lw_node_get(const lw_node *group, const char *name)
{
    if (group == NULL)
        return NULL;
    for (const lw_node *child = group->first; child != NULL; child = child->next)
        if (child->name != NULL && strcmp(child->name, name) == 0)
            return child;
    return NULL;
}

const lw_node *lw_node_at(const lw_node *parent, size_t at)
{
    const lw_node *child = parent ? parent->first : NULL;
    while (child != NULL && at-- > 0)
        child = child->next;
    return child;
}

double lw_node_number(const lw_node *group, const char *name, double otherwise)
{
    const lw_node *child = lw_node_get(group, name);
    if (child != NULL && child->kind == LW_NODE_NUMBER)
        return child->number;
    if (child != NULL && child->kind == LW_NODE_QUANTITY)
        return child->quantity.value;
    return otherwise;
}

const char *lw_node_text(const lw_node *group, const char *name, const char *otherwise)
{
    const lw_node *child = lw_node_get(group, name);
    return child != NULL && child->kind == LW_NODE_TEXT ? child->text : otherwise;
}
