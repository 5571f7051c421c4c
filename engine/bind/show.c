/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A result tree as aligned text: names to the left, quantities with their uncertainties, a list of
 * like groups as a table. This is what print() and the prompt show. */
#include "bind/bind.h"

#include <stdio.h>
#include <string.h>

#define CELL_MOST 48     /* characters of a table's cell */
#define COLUMN_MOST 10   /* columns that a line of a terminal can hold */
#define ROW_MOST 200
#define DEPTH_MOST 12
#define NAME_MOST 28

/* Characters, not bytes: continuation bytes of UTF-8 take no room. */
static size_t width(const char *text)
{
    size_t n = 0;
    for (; *text != '\0'; text++)
        n += ((unsigned char)*text & 0xC0) != 0x80;
    return n;
}

static void pad(luaL_Buffer *out, size_t n)
{
    while (n-- > 0)
        luaL_addchar(out, ' ');
}

/* One value as text of a line; empty for groups and lists. */
static const char *value_text(const lw_node *node, char *text, size_t size)
{
    switch (node->kind) {
    case LW_NODE_QUANTITY: return lw_quantity_text(node->quantity, text, size);
    case LW_NODE_NUMBER: snprintf(text, size, "%.6g", node->number); return text;
    case LW_NODE_TEXT: snprintf(text, size, "%s", node->text); return text;
    case LW_NODE_FLAG: return node->flag ? "yes" : "no";
    case LW_NODE_VECTOR:
        if (node->n == 0)
            return "none";
        snprintf(text, size, "%zu numbers, %.5g to %.5g%s%s", node->n, node->vector[0], node->vector[node->n - 1],
                 node->unit[0] ? " " : "", node->unit);
        return text;
    case LW_NODE_GROUP:
    case LW_NODE_LIST: break;
    }
    return "";
}

static bool is_scalar(const lw_node *node)
{
    return node->kind == LW_NODE_QUANTITY || node->kind == LW_NODE_NUMBER || node->kind == LW_NODE_TEXT ||
           node->kind == LW_NODE_FLAG;
}

/* The unit that every quantity of a column shares, or NULL. */
static const char *shared_unit(const lw_node *list, const char *name)
{
    const char *unit = NULL;
    for (const lw_node *row = list->first; row != NULL; row = row->next) {
        const lw_node *cell = lw_node_get(row, name);
        if (cell == NULL || cell->kind != LW_NODE_QUANTITY)
            continue;
        if (unit != NULL && strcmp(unit, cell->quantity.unit) != 0)
            return NULL;
        unit = cell->quantity.unit;
    }
    return unit != NULL && unit[0] != '\0' ? unit : NULL;
}

static const char *cell_text(const lw_node *row, const char *name, const char *unit, char *text, size_t size)
{
    const lw_node *cell = lw_node_get(row, name);
    if (cell == NULL || !is_scalar(cell))
        return "";
    if (unit != NULL && cell->kind == LW_NODE_QUANTITY) {
        lw_quantity bare = cell->quantity;
        bare.unit = "";
        return lw_quantity_text(bare, text, size);
    }
    return value_text(cell, text, size);
}

/* Cuts to n characters at a character's border. */
static void cut(char *text, size_t n)
{
    size_t seen = 0;
    for (char *c = text; *c != '\0'; c++)
        if (((unsigned char)*c & 0xC0) != 0x80 && seen++ == n) {
            *c = '\0';
            return;
        }
}

static void add_cell(luaL_Buffer *out, const char *text, size_t room, bool right)
{
    char shown[4 * CELL_MOST + 1];
    snprintf(shown, sizeof shown, "%s", text);
    cut(shown, CELL_MOST);
    size_t n = width(shown);
    if (right && n < room)
        pad(out, room - n);
    luaL_addstring(out, shown);
    if (!right && n < room)
        pad(out, room - n);
}

static void show_rows(luaL_Buffer *out, const lw_node *list, size_t indent)
{
    const char *column[COLUMN_MOST], *unit[COLUMN_MOST];
    size_t room[COLUMN_MOST], n = 0;
    bool right[COLUMN_MOST];
    char text[256];
    for (const lw_node *cell = list->first->first; cell != NULL && n < COLUMN_MOST; cell = cell->next)
        if (is_scalar(cell)) {
            column[n] = cell->name;
            right[n] = cell->kind != LW_NODE_TEXT;
            unit[n++] = shared_unit(list, cell->name);
        }
    for (size_t i = 0; i < n; i++) {
        size_t head = width(column[i]) + (unit[i] ? width(unit[i]) + 3 : 0);
        room[i] = head;
        for (const lw_node *row = list->first; row != NULL; row = row->next) {
            size_t w = width(cell_text(row, column[i], unit[i], text, sizeof text));
            if (w > room[i])
                room[i] = w < CELL_MOST ? w : (head > CELL_MOST ? head : CELL_MOST);
        }
    }
    pad(out, indent);
    for (size_t i = 0; i < n; i++) {
        snprintf(text, sizeof text, unit[i] ? "%s (%s)" : "%s", column[i], unit[i] ? unit[i] : "");
        if (i > 0)
            luaL_addstring(out, "  ");
        add_cell(out, text, i + 1 < n || right[i] ? room[i] : 0, right[i]);
    }
    luaL_addchar(out, '\n');
    size_t rows = 0;
    for (const lw_node *row = list->first; row != NULL; row = row->next) {
        if (++rows > ROW_MOST) {
            pad(out, indent);
            snprintf(text, sizeof text, "... and %zu more rows\n", list->n - ROW_MOST);
            luaL_addstring(out, text);
            break;
        }
        pad(out, indent);
        for (size_t i = 0; i < n; i++) {
            if (i > 0)
                luaL_addstring(out, "  ");
            add_cell(out, cell_text(row, column[i], unit[i], text, sizeof text), i + 1 < n || right[i] ? room[i] : 0,
                     right[i]);
        }
        luaL_addchar(out, '\n');
    }
}

static void show(luaL_Buffer *out, const lw_node *node, size_t indent, int depth);

static void show_list(luaL_Buffer *out, const lw_node *list, size_t indent, int depth)
{
    if (list->first != NULL && list->first->kind == LW_NODE_GROUP) {
        show_rows(out, list, indent);
        return;
    }
    for (const lw_node *child = list->first; child != NULL; child = child->next)
        show(out, child, indent, depth);
}

/* Parts that only a figure needs aren't shown. */
static bool is_drawing(const lw_node *node)
{
    static const char *const names[] = {"points", "line", "curve", "figure", "figures"};
    for (size_t i = 0; node->kind == LW_NODE_GROUP && i < sizeof names / sizeof *names; i++)
        if (strcmp(node->name, names[i]) == 0)
            return true;
    return false;
}

/* Long texts go on below themselves. */
static void add_wrapped(luaL_Buffer *out, const char *text, size_t column)
{
    size_t room = column + 30 < 100 ? 100 - column : 30;
    while (width(text) > room) {
        size_t at = 0, seen = 0, best = 0;
        while (text[at] != '\0' && seen <= room) {
            seen += ((unsigned char)text[at] & 0xC0) != 0x80;
            if (text[at] == ' ')
                best = at;
            at++;
        }
        if (best == 0)
            break;
        luaL_addlstring(out, text, best);
        luaL_addchar(out, '\n');
        pad(out, column);
        text += best + 1;
    }
    luaL_addstring(out, text);
}

static void show_children(luaL_Buffer *out, const lw_node *group, size_t indent, int depth)
{
    size_t longest = 0;
    for (const lw_node *child = group->first; child != NULL; child = child->next)
        if (child->kind != LW_NODE_GROUP && child->kind != LW_NODE_LIST && child->name != NULL) {
            size_t w = width(child->name);
            if (w > longest)
                longest = w;
        }
    if (longest > NAME_MOST)
        longest = NAME_MOST;
    for (const lw_node *child = group->first; child != NULL; child = child->next) {
        if (is_drawing(child))
            continue;
        pad(out, indent);
        luaL_addstring(out, child->name);
        if (child->kind == LW_NODE_GROUP || child->kind == LW_NODE_LIST) {
            luaL_addstring(out, child->n == 0 ? ": none\n" : "\n");
            show(out, child, indent + 2, depth + 1);
            continue;
        }
        size_t w = width(child->name);
        pad(out, (w < longest ? longest - w : 0) + 2);
        char text[1024];
        add_wrapped(out, value_text(child, text, sizeof text), indent + longest + 2);
        luaL_addchar(out, '\n');
    }
}

static void show(luaL_Buffer *out, const lw_node *node, size_t indent, int depth)
{
    if (depth > DEPTH_MOST)
        return;
    if (node->kind == LW_NODE_GROUP)
        show_children(out, node, indent, depth);
    else if (node->kind == LW_NODE_LIST)
        show_list(out, node, indent, depth);
    else {
        char text[1024];
        pad(out, indent);
        luaL_addstring(out, value_text(node, text, sizeof text));
        luaL_addchar(out, '\n');
    }
}

void lwb_push_shown(lua_State *L, const lw_node *node)
{
    luaL_Buffer out;
    luaL_buffinit(L, &out);
    show(&out, node, 0, 0);
    luaL_pushresult(&out);
    size_t n = 0;
    const char *text = lua_tolstring(L, -1, &n);
    if (n > 0 && text[n - 1] == '\n') {
        lua_pushlstring(L, text, n - 1);
        lua_replace(L, -2);
    }
}
