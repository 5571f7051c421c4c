/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/cif.h"

#include "record/file.h"

#include <math.h>
#include <stdio.h>
#include <string.h>
#include <strings.h>

#define NAME_MOST 75u  /* characters of a name, its underscore included */
#define LINE_MOST 2048 /* characters of a line */

void lw_cif_write_number(lw_text *out, double value, double u)
{
    if (!isfinite(value)) {
        lw_text_add(out, ".");
        return;
    }
    if (!(u > 0) || !isfinite(u)) {
        lw_text_number(out, value);
        return;
    }
    int place = (int)floor(log10(u)) - 1; /* power of ten of the last digit */
    if (rint(u * pow(10, -place)) >= 100)
        place++;
    double su = rint(u * pow(10, -place));
    double largest = fmax(fabs(value), u);
    int power = (int)floor(log10(largest));
    if (place > 0 || power < -5) { /* in powers of ten, so that no digit is shown that isn't known */
        lw_text_fixed(out, value * pow(10, -power), power - place);
        lw_text_print(out, "e%d(%.0f)", power, su);
    } else {
        lw_text_fixed(out, value, -place);
        lw_text_print(out, "(%.0f)", su);
    }
}

static void write_name(lw_text *out, const char *name, const char *before)
{
    lw_text_add(out, before);
    size_t n = 0;
    for (const char *c = name; *c != '\0' && n < NAME_MOST - 1; c++, n++)
        lw_text_bytes(out, *c > ' ' && *c < 0x7F ? c : "_", 1);
}

/* Whether a value can stand without quotes. */
static bool is_bare(const char *text)
{
    static const char *const words[] = {"data_", "save_", "loop_", "stop_", "global_"};
    if (text[0] == '\0' || strchr("_#$'\"[];", text[0]) != NULL || strcmp(text, "?") == 0 || strcmp(text, ".") == 0)
        return false;
    for (size_t i = 0; i < sizeof words / sizeof *words; i++)
        if (strncasecmp(text, words[i], strlen(words[i])) == 0)
            return false;
    for (const char *c = text; *c != '\0'; c++)
        if (*c <= ' ' || *c >= 0x7F)
            return false;
    return strlen(text) < 80;
}

/* A quote followed by a blank would end the value. */
static bool can_quote(const char *text, char quote)
{
    for (const char *c = text; *c != '\0'; c++)
        if (*c == quote && (c[1] == ' ' || c[1] == '\t' || c[1] == '\0'))
            return false;
    return strpbrk(text, "\r\n") == NULL && strlen(text) < 80;
}

static void write_ascii(lw_text *out, const char *text, bool lines)
{
    size_t column = 0;
    for (const char *c = text; *c != '\0';) {
        size_t n = lw_utf8_length(c);
        bool fresh = column == 0;
        if (lines && *c == ';' && fresh)
            lw_text_add(out, " "); /* a semicolon at a line's start would end the field */
        if (lines && *c == '\n')
            column = 0;
        else
            column++;
        if (*c == '\r') {
            c++;
            continue;
        }
        lw_text_bytes(out, n == 1 && (*c >= ' ' || *c == '\t' || *c == '\n') && *c < 0x7F ? c : "?", 1);
        if (column >= LINE_MOST - 8) {
            lw_text_add(out, "\n");
            column = 0;
        }
        c += n > 0 ? n : 1;
    }
}

static void write_string(lw_text *out, const char *text)
{
    if (is_bare(text))
        lw_text_add(out, text);
    else if (can_quote(text, '\'') || can_quote(text, '"')) {
        const char *quote = can_quote(text, '\'') ? "'" : "\"";
        lw_text_add(out, quote);
        write_ascii(out, text, false);
        lw_text_add(out, quote);
    } else {
        lw_text_add(out, "\n;");
        /* what stands after the semicolon is the first line's start: it can't end the field */
        lw_text_add(out, text[0] == ';' ? " " : "");
        write_ascii(out, text, true);
        lw_text_add(out, "\n;");
    }
}

static void write_value(lw_text *out, const lw_node *node)
{
    char limit[64];
    if (node == NULL) {
        lw_text_add(out, "?");
        return;
    }
    switch (node->kind) {
    case LW_NODE_QUANTITY:
        if (node->quantity.kind == LW_VALUE || !isfinite(node->quantity.value))
            lw_cif_write_number(out, node->quantity.value, node->quantity.u);
        else {
            lw_quantity plain = node->quantity;
            plain.unit = "";
            write_string(out, lw_quantity_text(plain, limit, sizeof limit));
        }
        break;
    case LW_NODE_NUMBER: lw_cif_write_number(out, node->number, 0); break;
    case LW_NODE_TEXT: write_string(out, node->text); break;
    case LW_NODE_FLAG: lw_text_add(out, node->flag ? "yes" : "no"); break;
    case LW_NODE_VECTOR: /* short, as indices of a reflection */
        lw_text_add(out, "'");
        for (size_t i = 0; i < node->n && i < 8; i++) {
            lw_text_add(out, i > 0 ? " " : "");
            lw_cif_write_number(out, node->vector[i], 0);
        }
        lw_text_add(out, "'");
        break;
    case LW_NODE_GROUP:
    case LW_NODE_LIST: lw_text_add(out, "?"); break;
    }
}

/* Whether a name appears in a row before `row`, or in it before `child`. */
static bool seen(const lw_node *list, const lw_node *row, const lw_node *child)
{
    for (const lw_node *r = list->first; r != NULL; r = r->next) {
        const lw_node *found = lw_node_get(r, child->name);
        if (r == row)
            return found != child;
        if (found != NULL)
            return true;
    }
    return false;
}

static lw_status write_rows(lw_text *out, const lw_node *list, lw_error *err)
{
    for (const lw_node *row = list->first; row != NULL; row = row->next)
        if (row->kind != LW_NODE_GROUP)
            return lw_fail(err, LW_BAD_ARGUMENT, "give a list of groups", "a loop of CIF has rows of named values");
    lw_arena arena;
    lw_arena_begin(&arena, out->engine);
    const char **names = NULL;
    size_t n = 0, room = 0;
    lw_status status = LW_OK;
    lw_text_add(out, list->first != NULL ? "\nloop_\n" : "");
    for (const lw_node *row = list->first; row != NULL && status == LW_OK; row = row->next)
        for (const lw_node *child = row->first; child != NULL && status == LW_OK; child = child->next) {
            if (seen(list, row, child))
                continue;
            if (n == room) {
                room = room > 0 ? 2 * room : 16;
                const char **more = lw_arena_take(&arena, room, sizeof *more, err);
                if (more == NULL) {
                    status = LW_OUT_OF_MEMORY;
                    break;
                }
                if (n > 0)
                    memcpy(more, names, n * sizeof *more);
                names = more;
            }
            names[n++] = child->name;
            write_name(out, child->name, " _");
            lw_text_add(out, "\n");
        }
    for (const lw_node *row = list->first; row != NULL && status == LW_OK; row = row->next)
        for (size_t i = 0; i < n; i++) {
            lw_text_add(out, i > 0 ? " " : "");
            write_value(out, lw_node_get(row, names[i]));
            lw_text_add(out, i + 1 == n ? "\n" : "");
        }
    lw_arena_end(&arena);
    return status;
}

static lw_status write_columns(lw_text *out, const lw_node *group, lw_error *err)
{
    const lw_node *first = group->first;
    for (const lw_node *child = first; child != NULL; child = child->next)
        if (child->kind != LW_NODE_VECTOR || child->n != first->n)
            return lw_fail(err, LW_BAD_ARGUMENT, "give vectors of one length",
                           "the loop %s of CIF has a column %s that is no vector, or of another length",
                           group->name ? group->name : "", child->name);
    if (first == NULL || first->n == 0)
        return LW_OK;
    lw_text_add(out, "\nloop_\n");
    for (const lw_node *child = first; child != NULL; child = child->next) {
        write_name(out, child->name, " _");
        lw_text_add(out, "\n");
    }
    lw_status status = LW_OK;
    for (size_t i = 0; i < first->n && status == LW_OK; i++) {
        for (const lw_node *child = first; child != NULL; child = child->next) {
            lw_cif_write_number(out, child->vector[i], 0);
            lw_text_add(out, child->next != NULL ? " " : "\n");
        }
        if (i % 65536 == 65535)
            status = lw_engine_poll(out->engine, err);
    }
    return status;
}

lw_status lw_cif_write(const lw_node *group, const char *name, lw_text *out, lw_error *err)
{
    lw_status status = LW_OK;
    if (group == NULL || group->kind != LW_NODE_GROUP)
        return lw_fail(err, LW_BAD_ARGUMENT, "give a group of named values", "a CIF block is made of a group");
    if (out->n == 0)
        lw_text_add(out, "#\\#CIF_1.1\n");
    write_name(out, name, "data_");
    lw_text_add(out, "\n");
    for (const lw_node *child = group->first; child != NULL && status == LW_OK; child = child->next) {
        if (child->kind == LW_NODE_LIST)
            status = write_rows(out, child, err);
        else if (child->kind == LW_NODE_GROUP)
            status = write_columns(out, child, err);
        else {
            write_name(out, child->name, "_");
            lw_text_add(out, " ");
            write_value(out, child);
            lw_text_add(out, "\n");
        }
    }
    return status == LW_OK ? lw_text_check(out, err) : status;
}

lw_status lw_cif_save(lw_engine *engine, const char *path, const lw_node *group, const char *name, lw_error *err)
{
    lw_text text;
    lw_text_begin(&text, engine);
    lw_status status = lw_cif_write(group, name, &text, err);
    if (status == LW_OK)
        status = lw_write_file(engine, path, text.bytes, text.n, err);
    lw_text_end(&text);
    return status;
}
