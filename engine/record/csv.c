/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/csv.h"

#include "record/file.h"

#include <math.h>
#include <string.h>

/* A column: where it is in a row, and for a quantity its unit. */
typedef struct column {
    const char *path; /* names from the row down, parted by dots */
    const char *unit; /* of a quantity or vector; "" = none */
    bool quantity;
} column;

typedef struct columns {
    lw_arena arena;
    column *item;
    size_t n, room;
} columns;

static const char *unit_of(const lw_node *node)
{
    const char *unit = node->kind == LW_NODE_QUANTITY ? node->quantity.unit
                       : node->kind == LW_NODE_VECTOR ? node->unit
                                                      : NULL;
    return unit ? unit : "";
}

static bool same(const column *c, const char *path, const lw_node *node)
{
    return c->quantity == (node->kind == LW_NODE_QUANTITY) && strcmp(c->path, path) == 0 &&
           strcmp(c->unit, unit_of(node)) == 0;
}

static lw_status add_column(columns *all, const char *path, const lw_node *node, lw_error *err)
{
    for (size_t i = 0; i < all->n; i++)
        if (same(&all->item[i], path, node))
            return LW_OK;
    if (all->n == all->room) {
        size_t room = all->room > 0 ? 2 * all->room : 32;
        column *item = lw_arena_take(&all->arena, room, sizeof *item, err);
        if (item == NULL)
            return LW_OUT_OF_MEMORY;
        if (all->n > 0)
            memcpy(item, all->item, all->n * sizeof *item);
        all->item = item;
        all->room = room;
    }
    all->item[all->n++] = (column){path, unit_of(node), node->kind == LW_NODE_QUANTITY};
    return LW_OK;
}

static lw_status collect(columns *all, const char *prefix, const lw_node *group, lw_error *err)
{
    for (const lw_node *child = group->first; child != NULL; child = child->next) {
        const char *path = prefix[0] ? lw_arena_print(&all->arena, err, "%s.%s", prefix, child->name) : child->name;
        lw_status status = LW_OK;
        if (path == NULL)
            return LW_OUT_OF_MEMORY;
        if (child->kind == LW_NODE_GROUP)
            status = collect(all, path, child, err);
        else if (child->kind != LW_NODE_LIST)
            status = add_column(all, path, child, err);
        if (status != LW_OK)
            return status;
    }
    return LW_OK;
}

/* The row's node of that column, or NULL. */
static const lw_node *find(const lw_node *group, const char *path, const column *c)
{
    for (const lw_node *child = group->first; child != NULL; child = child->next) {
        size_t n = strlen(child->name);
        if (strncmp(path, child->name, n) != 0)
            continue;
        const lw_node *found = NULL;
        if (child->kind == LW_NODE_GROUP && path[n] == '.')
            found = find(child, path + n + 1, c);
        else if (path[n] == '\0' && child->kind != LW_NODE_LIST && child->kind != LW_NODE_GROUP &&
                 c->quantity == (child->kind == LW_NODE_QUANTITY) && strcmp(c->unit, unit_of(child)) == 0)
            found = child;
        if (found != NULL)
            return found;
    }
    return NULL;
}

static void write_text(lw_text *out, const char *text)
{
    if (text[0] != '\0' && strpbrk(text, "\",\r\n") == NULL && text[0] != ' ' && text[strlen(text) - 1] != ' ') {
        lw_text_add(out, text);
        return;
    }
    if (text[0] == '\0')
        return;
    lw_text_add(out, "\"");
    for (const char *c = text; *c != '\0'; c++)
        lw_text_bytes(out, *c == '"' ? "\"\"" : c, *c == '"' ? 2 : 1);
    lw_text_add(out, "\"");
}

static void write_number(lw_text *out, double number)
{
    if (isfinite(number))
        lw_text_number(out, number);
}

static void write_cell(lw_text *out, const lw_node *node)
{
    switch (node->kind) {
    case LW_NODE_QUANTITY:
        if (node->quantity.kind != LW_VALUE && isfinite(node->quantity.value))
            lw_text_add(out, node->quantity.kind == LW_LOWER_LIMIT ? ">" : "<");
        write_number(out, node->quantity.value);
        break;
    case LW_NODE_NUMBER: write_number(out, node->number); break;
    case LW_NODE_TEXT: write_text(out, node->text); break;
    case LW_NODE_FLAG: lw_text_add(out, node->flag ? "true" : "false"); break;
    case LW_NODE_VECTOR:
        for (size_t i = 0; i < node->n; i++) {
            lw_text_add(out, i > 0 ? " " : "");
            write_number(out, node->vector[i]);
        }
        break;
    case LW_NODE_GROUP:
    case LW_NODE_LIST: break;
    }
}

static void write_header(lw_text *out, lw_engine *engine, const columns *all)
{
    lw_text name;
    lw_text_begin(&name, engine);
    for (size_t i = 0; i < all->n; i++) {
        const column *c = &all->item[i];
        for (int u = 0; u < (c->quantity ? 2 : 1); u++) {
            name.n = 0;
            lw_text_print(&name, "%s%s%s%s", u ? "u_" : "", c->path, c->unit[0] ? "_" : "", c->unit);
            if (i > 0 || u > 0)
                lw_text_add(out, ",");
            write_text(out, name.bytes ? name.bytes : "");
        }
    }
    lw_text_add(out, "\n");
    if (name.status != LW_OK)
        out->status = name.status;
    lw_text_end(&name);
}

lw_status lw_csv_write(const lw_node *rows, lw_text *out, lw_error *err)
{
    columns all = {.item = NULL};
    lw_status status = LW_OK;
    if (rows == NULL || rows->kind != LW_NODE_LIST)
        return lw_fail(err, LW_BAD_ARGUMENT, "give a list of groups", "CSV is made of a list of rows");
    for (const lw_node *row = rows->first; row != NULL; row = row->next)
        if (row->kind != LW_NODE_GROUP)
            return lw_fail(err, LW_BAD_ARGUMENT, "give a list of groups", "a row of CSV must have named values");
    lw_arena_begin(&all.arena, rows->arena->engine);
    for (const lw_node *row = rows->first; row != NULL && status == LW_OK; row = row->next)
        status = collect(&all, "", row, err);
    if (status == LW_OK && all.n > 0)
        write_header(out, rows->arena->engine, &all);
    for (const lw_node *row = rows->first; row != NULL && status == LW_OK && all.n > 0; row = row->next) {
        for (size_t i = 0; i < all.n; i++) {
            const lw_node *node = find(row, all.item[i].path, &all.item[i]);
            lw_text_add(out, i > 0 ? "," : "");
            if (node != NULL)
                write_cell(out, node);
            if (all.item[i].quantity) {
                lw_text_add(out, ",");
                if (node != NULL && node->quantity.kind == LW_VALUE)
                    write_number(out, node->quantity.u);
            }
        }
        lw_text_add(out, "\n");
    }
    lw_arena_end(&all.arena);
    return status == LW_OK ? lw_text_check(out, err) : status;
}

lw_status lw_csv_save(lw_engine *engine, const char *path, const lw_node *rows, lw_error *err)
{
    lw_text text;
    lw_text_begin(&text, engine);
    lw_status status = lw_csv_write(rows, &text, err);
    if (status == LW_OK)
        status = lw_write_file(engine, path, text.bytes ? text.bytes : "", text.n, err);
    lw_text_end(&text);
    return status;
}
