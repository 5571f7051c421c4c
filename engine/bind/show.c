/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A result tree as aligned text: names to the left, quantities with their uncertainties, a list of
 * like groups as a table. This is what print() and the prompt show. */
#include "bind/bind.h"

#include <math.h>
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

/* The columns of a table: names of the rows' children, and how each is set. */
typedef struct columns {
    size_t n;
    const char *name[COLUMN_MOST], *unit[COLUMN_MOST];
    bool right[COLUMN_MOST];
} columns;

/* The text of a cell; a column without a name holds the rows' own names. */
static const char *column_text(const columns *c, size_t i, const lw_node *row, char *text, size_t size)
{
    return c->name[i] == NULL ? row->name : cell_text(row, c->name[i], c->unit[i], text, size);
}

static void show_table(luaL_Buffer *out, const lw_node *list, const columns *c, size_t indent)
{
    size_t room[COLUMN_MOST];
    char text[256];
    for (size_t i = 0; i < c->n; i++) {
        const char *name = c->name[i] ? c->name[i] : list->name;
        size_t head = width(name) + (c->unit[i] ? width(c->unit[i]) + 3 : 0);
        room[i] = head;
        for (const lw_node *row = list->first; row != NULL; row = row->next) {
            size_t w = width(column_text(c, i, row, text, sizeof text));
            if (w > room[i])
                room[i] = w < CELL_MOST ? w : (head > CELL_MOST ? head : CELL_MOST);
        }
    }
    pad(out, indent);
    for (size_t i = 0; i < c->n; i++) {
        const char *name = c->name[i] ? c->name[i] : list->name;
        snprintf(text, sizeof text, c->unit[i] ? "%s (%s)" : "%s", name, c->unit[i] ? c->unit[i] : "");
        if (i > 0)
            luaL_addstring(out, "  ");
        add_cell(out, text, i + 1 < c->n || c->right[i] ? room[i] : 0, c->right[i]);
    }
    luaL_addchar(out, '\n');
    size_t rows = 0;
    for (const lw_node *row = list->first; row != NULL; row = row->next) {
        pad(out, indent);
        if (++rows > ROW_MOST) {
            snprintf(text, sizeof text, "... and %zu more rows\n", list->n - ROW_MOST);
            luaL_addstring(out, text);
            break;
        }
        size_t last = c->n; /* no blanks after the last cell that holds something */
        while (last > 0 && column_text(c, last - 1, row, text, sizeof text)[0] == '\0')
            last--;
        for (size_t i = 0; i < last; i++) {
            if (i > 0)
                luaL_addstring(out, "  ");
            add_cell(out, column_text(c, i, row, text, sizeof text), i + 1 < last || c->right[i] ? room[i] : 0, c->right[i]);
        }
        luaL_addchar(out, '\n');
    }
}

/* A list of groups as a table of their scalars. */
static void show_rows(luaL_Buffer *out, const lw_node *list, size_t indent)
{
    columns c = {.n = 0};
    for (const lw_node *cell = list->first->first; cell != NULL && c.n < COLUMN_MOST; cell = cell->next)
        if (is_scalar(cell)) {
            c.name[c.n] = cell->name;
            c.right[c.n] = cell->kind != LW_NODE_TEXT;
            c.unit[c.n++] = shared_unit(list, cell->name);
        }
    show_table(out, list, &c, indent);
}

static void show(luaL_Buffer *out, const lw_node *node, size_t indent, int depth);

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

static void show_list(luaL_Buffer *out, const lw_node *list, size_t indent, int depth)
{
    if (list->first != NULL && list->first->kind == LW_NODE_GROUP) {
        show_rows(out, list, indent);
        return;
    }
    for (const lw_node *child = list->first; child != NULL; child = child->next) {
        if (child->kind == LW_NODE_TEXT) {
            pad(out, indent);
            luaL_addstring(out, "- ");
            add_wrapped(out, child->text, indent + 2);
            luaL_addchar(out, '\n');
        } else
            show(out, child, indent, depth);
    }
}

/* Parts that only a figure needs aren't shown. */
static bool is_drawing(const lw_node *node)
{
    static const char *const names[] = {"points", "line", "curve", "plot", "figure", "figures"};
    for (size_t i = 0; node->kind == LW_NODE_GROUP && i < sizeof names / sizeof *names; i++)
        if (strcmp(node->name, names[i]) == 0)
            return true;
    return false;
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

/* Which pairs of methods disagree, and why. */
static void show_disagreement(luaL_Buffer *out, const lw_node *field)
{
    char text[600];
    const lw_node *pairs = lw_node_get(field, "pairs");
    for (const lw_node *pair = pairs ? pairs->first : NULL; pair != NULL; pair = pair->next) {
        const lw_node *agree = lw_node_get(pair, "agree");
        if (agree == NULL || agree->flag)
            continue;
        const char *reason = lw_node_text(pair, "reason", "");
        snprintf(text, sizeof text, "%s: %s and %s differ by %.1f u%s%s", field->name, lw_node_text(pair, "first", "?"),
                 lw_node_text(pair, "second", "?"), fabs(lw_node_number(pair, "pull", 0)), reason[0] ? ": " : "", reason);
        luaL_addstring(out, "  - ");
        add_wrapped(out, text, 4);
        luaL_addchar(out, '\n');
    }
}

/* The results of several methods, short: what each says, where they differ, what to mind. Each method's
 * own result shows the rest. */
static void show_methods(luaL_Buffer *out, const lw_node *results, const lw_node *methods)
{
    static const char *const shown[] = {"size_volume", "size_area", "strain_rms", "strain_apparent", "not_applied"};
    columns c = {.n = 1};
    for (size_t i = 0; i < sizeof shown / sizeof *shown; i++) {
        bool any = false;
        for (const lw_node *method = methods->first; method != NULL && !any; method = method->next)
            any = lw_node_get(method, shown[i]) != NULL;
        if (!any)
            continue;
        c.name[c.n] = shown[i];
        c.right[c.n] = strcmp(shown[i], "not_applied") != 0;
        c.unit[c.n++] = shared_unit(methods, shown[i]);
    }
    const lw_node *lines = lw_node_get(results, "lines"), *lattice = lw_node_get(results, "lattice"),
                  *agreement = lw_node_get(results, "agreement"), *notes = lw_node_get(results, "notes");
    char text[256];
    if (lines != NULL && lines->first != NULL && lines->first->kind == LW_NODE_GROUP) {
        show_rows(out, lines, 0);
        luaL_addchar(out, '\n');
    }
    if (methods->first != NULL)
        show_table(out, methods, &c, 0);
    if (lattice != NULL) {
        luaL_addstring(out, "\nlattice");
        for (const lw_node *cell = lattice->first; cell != NULL; cell = cell->next)
            if (cell->kind == LW_NODE_QUANTITY && strcmp(cell->name, "wavelength") != 0) {
                luaL_addstring(out, "  ");
                luaL_addstring(out, cell->name);
                luaL_addstring(out, " = ");
                luaL_addstring(out, lw_quantity_text(cell->quantity, text, sizeof text));
            }
        luaL_addstring(out, lw_node_text(lattice, "not_applied", ""));
        luaL_addchar(out, '\n');
    }
    if (agreement != NULL) {
        const lw_node *agree = lw_node_get(agreement, "agree");
        luaL_addstring(out, agree == NULL || agree->flag ? "\nthe methods agree\n" : "\nthe methods disagree\n");
        for (const lw_node *field = agreement->first; field != NULL; field = field->next)
            if (field->kind == LW_NODE_GROUP)
                show_disagreement(out, field);
    }
    if (notes != NULL && notes->first != NULL) {
        luaL_addstring(out, "\nmind\n");
        show_list(out, notes, 2, 1);
    }
}

static void show(luaL_Buffer *out, const lw_node *node, size_t indent, int depth)
{
    if (depth > DEPTH_MOST)
        return;
    const lw_node *methods = depth == 0 && node->kind == LW_NODE_GROUP ? lw_node_get(node, "methods") : NULL;
    if (methods != NULL && methods->kind == LW_NODE_GROUP) {
        show_methods(out, node, methods);
        return;
    }
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
