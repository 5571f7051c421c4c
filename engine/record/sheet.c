/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/sheet.h"

#include "record/typeset.h"

#include <math.h>
#include <string.h>

#define SHORT_VECTOR 8 /* longer ones are curves: they are left to the record and to figures */

static void name_html(lw_text *out, const char *name, bool capital)
{
    lw_text words;
    lw_text_begin(&words, out->engine);
    lw_name_typeset(&words, name, capital);
    lw_text_html(out, words.bytes);
    if (words.status != LW_OK)
        out->status = words.status;
    lw_text_end(&words);
}

static void unit_html(lw_text *out, const char *unit)
{
    lw_text typeset;
    lw_text_begin(&typeset, out->engine);
    lw_unit_typeset(&typeset, unit);
    lw_text_html(out, typeset.bytes);
    if (typeset.status != LW_OK)
        out->status = typeset.status;
    lw_text_end(&typeset);
}

/* Whether a name has one of the stems, as a whole word of it. */
static bool has_stem(const char *name, const char *const stems[])
{
    for (int i = 0; name != NULL && stems[i] != NULL; i++) {
        const char *at = strstr(name, stems[i]);
        size_t n = strlen(stems[i]);
        if (at != NULL && (at == name || at[-1] == '_') && (at[n] == '\0' || at[n] == '_'))
            return true;
    }
    return false;
}

/* A statistic has no more than four digits to say, and a chance below one in ten thousand says no more than
 * that it is; the record keeps them whole. */
static void number_html(lw_text *out, const char *name, double number)
{
    static const char *const statistics[] = {"chi2",  "chance", "goodness", "factor", "correlation", "rwp",  "rexp",
                                             "watson", "ratio", "weight",   "pull",   "rms",         "overlap", "probability", "misfit", NULL};
    static const char *const chances[] = {"chance", "weight", "probability", NULL};
    if (!isfinite(number))
        lw_text_add(out, "not determined");
    else if (has_stem(name, chances) && number >= 0 && number < 1e-4)
        lw_text_add(out, number > 0 || strcmp(name, "chance") == 0 ? "&lt; 0.0001" : "0");
    else if (number == floor(number) && fabs(number) < 1e9)
        lw_text_fixed(out, number, 0);
    else if (has_stem(name, statistics) && fabs(number) >= 1e4 && fabs(number) < 1e9)
        lw_text_fixed(out, number, 0);
    else
        lw_text_rounded(out, number, has_stem(name, statistics) ? 4 : 6);
}

/* The unit that the name of a plain number ends in ("milling_time_h"), and the name's length without it. */
static const char *unit_in_name(const lw_node *node, size_t *length)
{
    static const char *const units[][2] = {{"_nm", "nm"}, {"_mm", "mm"}, {"_deg", "deg"}, {"_h", "h"}, {"_c", "°C"}};
    *length = strlen(node->name);
    if (node->kind != LW_NODE_NUMBER)
        return "";
    for (size_t i = 0; i < sizeof units / sizeof *units; i++) {
        size_t n = strlen(units[i][0]);
        if (*length > n && strcmp(node->name + *length - n, units[i][0]) == 0) {
            *length -= n;
            return units[i][1];
        }
    }
    return "";
}

/* The quantity's own print without its unit, which stands in the column's head. */
static void quantity_html(lw_text *out, lw_quantity q, bool with_unit)
{
    char text[64];
    const char *unit = q.unit ? q.unit : "";
    bool limit = q.kind != LW_VALUE && isfinite(q.value);
    q.unit = "";
    lw_quantity_text(q, text, sizeof text);
    char *bracket = limit ? strstr(text, " (") : NULL; /* the unit belongs before the confidence */
    if (bracket != NULL)
        *bracket = '\0';
    lw_text_html(out, text);
    if (with_unit && unit[0] != '\0' && isfinite(q.value)) {
        lw_text_add(out, strcmp(unit, "deg") == 0 ? "" : "\xC2\xA0");
        unit_html(out, unit);
    }
    if (bracket != NULL) {
        *bracket = ' ';
        lw_text_html(out, bracket);
    }
}

static void cell(lw_text *out, const lw_node *node, bool with_unit)
{
    switch (node->kind) {
    case LW_NODE_QUANTITY: quantity_html(out, node->quantity, with_unit); break;
    case LW_NODE_NUMBER: number_html(out, node->name, node->number); break;
    case LW_NODE_TEXT: lw_text_html(out, node->text); break;
    case LW_NODE_FLAG: lw_text_add(out, node->flag ? "yes" : "no"); break;
    case LW_NODE_VECTOR:
        for (size_t i = 0; i < node->n && node->n <= SHORT_VECTOR; i++) {
            lw_text_add(out, i > 0 ? " " : "");
            number_html(out, NULL, node->vector[i]);
        }
        if (node->n > SHORT_VECTOR)
            lw_text_print(out, "%zu values, in the JSON record", node->n);
        if (with_unit && node->unit != NULL && node->unit[0] != '\0') {
            lw_text_add(out, strcmp(node->unit, "deg") == 0 ? "" : "\xC2\xA0");
            unit_html(out, node->unit);
        }
        break;
    case LW_NODE_LIST: lw_text_print(out, "%zu entries", node->n); break;
    case LW_NODE_GROUP:
        for (const lw_node *child = node->first; child != NULL; child = child->next) {
            name_html(out, child->name, false);
            lw_text_add(out, "\xC2\xA0");
            cell(out, child, true);
            lw_text_add(out, child->next ? "; " : "");
        }
        break;
    }
}

/* ---- tables ---- */

typedef struct head {
    const char *name, *unit; /* unit NULL: differs from row to row */
    size_t length;           /* of the name, without a unit in it */
    bool numeric;
} head;

static const char *unit_of(const lw_node *node)
{
    size_t length;
    if (node->kind == LW_NODE_NUMBER)
        return unit_in_name(node, &length);
    const char *unit = node->kind == LW_NODE_QUANTITY ? node->quantity.unit
                       : node->kind == LW_NODE_VECTOR ? node->unit
                                                      : "";
    return unit ? unit : "";
}

/* A name as words, without a unit in it. */
static void head_html(lw_text *out, const char *name, size_t length)
{
    lw_text words;
    lw_text_begin(&words, out->engine);
    lw_text_bytes(&words, name, length);
    if (words.status == LW_OK)
        name_html(out, words.bytes, false);
    else
        out->status = words.status;
    lw_text_end(&words);
}

static bool is_wanted(const char *const columns[], const char *name)
{
    for (size_t i = 0; columns != NULL && columns[i] != NULL; i++)
        if (strcmp(columns[i], name) == 0)
            return true;
    return columns == NULL;
}

/* Brings the columns into the order wanted. */
static void order(head *heads, size_t n, const char *const columns[])
{
    size_t done = 0;
    for (size_t i = 0; columns != NULL && columns[i] != NULL; i++)
        for (size_t k = done; k < n; k++)
            if (strcmp(heads[k].name, columns[i]) == 0) {
                head found = heads[k];
                memmove(heads + done + 1, heads + done, (k - done) * sizeof *heads);
                heads[done++] = found;
                break;
            }
}

static lw_status collect(lw_arena *arena, const lw_node *rows, const char *const columns[], head **heads, size_t *n,
                         lw_error *err)
{
    size_t room = 0;
    for (const lw_node *row = rows->first; row != NULL; row = row->next)
        for (const lw_node *child = row->first; child != NULL; child = child->next) {
            bool numeric = child->kind == LW_NODE_QUANTITY || child->kind == LW_NODE_NUMBER;
            size_t i = 0, length;
            if (!is_wanted(columns, child->name))
                continue;
            while (i < *n && strcmp((*heads)[i].name, child->name) != 0)
                i++;
            if (i < *n) {
                head *h = &(*heads)[i];
                h->numeric = h->numeric && numeric;
                if (h->unit != NULL && strcmp(h->unit, unit_of(child)) != 0)
                    h->unit = NULL;
                continue;
            }
            if (*n == room) {
                room = room > 0 ? 2 * room : 16;
                head *more = lw_arena_take(arena, room, sizeof *more, err);
                if (more == NULL)
                    return LW_OUT_OF_MEMORY;
                if (*n > 0)
                    memcpy(more, *heads, *n * sizeof *more);
                *heads = more;
            }
            unit_in_name(child, &length);
            (*heads)[(*n)++] = (head){child->name, unit_of(child), length, numeric};
        }
    order(*heads, *n, columns);
    return LW_OK;
}

lw_status lw_sheet_table(lw_text *out, const char *caption, const lw_node *rows, const char *const columns[],
                         lw_error *err)
{
    lw_arena arena;
    head *heads = NULL;
    size_t n = 0;
    if (rows == NULL || rows->kind != LW_NODE_LIST)
        return lw_fail(err, LW_BAD_ARGUMENT, "give a list of groups", "a table is made of a list of rows");
    for (const lw_node *row = rows->first; row != NULL; row = row->next)
        if (row->kind != LW_NODE_GROUP)
            return lw_fail(err, LW_BAD_ARGUMENT, "give a list of groups", "a row of a table must have named values");
    lw_arena_begin(&arena, out->engine);
    lw_status status = collect(&arena, rows, columns, &heads, &n, err);
    if (status == LW_OK) {
        /* many columns are set smaller, so that they fit the page */
        lw_text_print(out, "<div class=\"scroll\"><table%s>\n",
                      n > 8 ? " class=\"wide most\"" : n > 5 ? " class=\"wide\"" : "");
        if (caption != NULL && caption[0] != '\0') {
            lw_text_add(out, "<caption>");
            lw_text_html(out, caption);
            lw_text_add(out, "</caption>\n");
        }
        lw_text_add(out, "<thead><tr>");
        for (size_t i = 0; i < n; i++) {
            lw_text_add(out, heads[i].numeric ? "<th scope=\"col\" class=\"n\">" : "<th scope=\"col\">");
            head_html(out, heads[i].name, heads[i].length);
            if (heads[i].unit != NULL && heads[i].unit[0] != '\0') {
                lw_text_add(out, " <span class=\"unit\">");
                unit_html(out, heads[i].unit);
                lw_text_add(out, "</span>");
            }
            lw_text_add(out, "</th>");
        }
        lw_text_add(out, "</tr></thead>\n<tbody>\n");
        for (const lw_node *row = rows->first; row != NULL; row = row->next) {
            lw_text_add(out, "<tr>");
            for (size_t i = 0; i < n; i++) {
                const lw_node *node = lw_node_get(row, heads[i].name);
                const char *style = heads[i].numeric ? " class=\"n\"" : "";
                lw_text_print(out, i == 0 ? "<th scope=\"row\"%s>" : "<td%s>", style);
                if (node != NULL)
                    cell(out, node, heads[i].unit == NULL);
                lw_text_add(out, i == 0 ? "</th>" : "</td>");
            }
            lw_text_add(out, "</tr>\n");
        }
        lw_text_add(out, "</tbody>\n</table></div>\n");
    }
    lw_arena_end(&arena);
    return status == LW_OK ? lw_text_check(out, err) : status;
}

/* ---- groups ---- */

/* Shown elsewhere: as the heading, as the line below, or as a table of its own. */
static bool is_value(const lw_node *node)
{
    if (node->kind == LW_NODE_GROUP || node->kind == LW_NODE_LIST)
        return false;
    return node->kind != LW_NODE_TEXT || (node->text[0] != '\0' && strcmp(node->name, "title") != 0 &&
                                          strcmp(node->name, "source") != 0);
}

/* One row of a group's table: name, value, what it means. */
static void value_row(lw_text *out, const lw_node *child)
{
    bool text = child->kind == LW_NODE_TEXT || child->kind == LW_NODE_VECTOR;
    bool alone = child->definition == NULL && child->source == NULL;
    size_t length;
    const char *unit = unit_in_name(child, &length);
    lw_text_add(out, "<tr><th scope=\"row\">");
    head_html(out, child->name, length);
    lw_text_print(out, "</th><td class=\"value%s\"%s>", text ? " long" : "", alone ? " colspan=\"2\"" : "");
    cell(out, child, true);
    if (unit[0] != '\0') {
        lw_text_add(out, strcmp(unit, "deg") == 0 ? "" : "\xC2\xA0");
        unit_html(out, unit);
    }
    lw_text_add(out, "</td>");
    if (!alone) {
        lw_text_add(out, "<td class=\"note\">");
        lw_text_html(out, child->definition);
        if (child->source != NULL) {
            lw_text_add(out, child->definition ? " <span>(" : "<span>(");
            lw_text_html(out, child->source);
            lw_text_add(out, ")</span>");
        }
        lw_text_add(out, "</td>");
    }
    lw_text_add(out, "</tr>\n");
}

/* Whether a value stands in the table, or below it in small type: beside quantities, statistics and words do. */
static bool is_small(const lw_node *node, bool quantities)
{
    return quantities && node->kind != LW_NODE_QUANTITY;
}

static bool has_quantities(const lw_node *group)
{
    const lw_node *child = group->first;
    while (child != NULL && child->kind != LW_NODE_QUANTITY)
        child = child->next;
    return child != NULL;
}

void lw_sheet_values(lw_text *out, const lw_node *group)
{
    bool any = false, quantities = has_quantities(group);
    for (const lw_node *child = group->first; child != NULL; child = child->next) {
        if (!is_value(child) || is_small(child, quantities))
            continue;
        lw_text_add(out, any ? "" : "<div class=\"scroll\"><table class=\"result\"><tbody>\n");
        any = true;
        value_row(out, child);
    }
    if (any)
        lw_text_add(out, "</tbody></table></div>\n");
}

void lw_sheet_small(lw_text *out, const lw_node *group)
{
    bool any = false;
    if (!has_quantities(group))
        return;
    for (int sentences = 0; sentences < 2; sentences++) { /* first what is short, in one line */
        for (const lw_node *child = group->first; child != NULL; child = child->next) {
            bool sentence = child->kind == LW_NODE_TEXT && strchr(child->text, ' ') != NULL;
            if (!is_value(child) || !is_small(child, true) || sentence != (sentences == 1))
                continue;
            lw_text_add(out, sentence ? "<p class=\"source\">" : any ? " · <span>" : "<p class=\"source\"><span>");
            any = any || !sentence;
            size_t length;
            const char *unit = unit_in_name(child, &length);
            if (sentence)
                name_html(out, child->name, true);
            else
                head_html(out, child->name, length);
            lw_text_add(out, sentence ? ": " : "\xC2\xA0");
            cell(out, child, true);
            if (unit[0] != '\0') {
                lw_text_add(out, strcmp(unit, "deg") == 0 ? "" : "\xC2\xA0");
                unit_html(out, unit);
            }
            lw_text_add(out, sentence ? "</p>\n" : "</span>");
        }
        lw_text_add(out, sentences == 0 && any ? "</p>\n" : "");
    }
}

lw_status lw_sheet_list(lw_text *out, const lw_node *list, lw_error *err)
{
    bool groups = true;
    for (const lw_node *child = list->first; child != NULL; child = child->next)
        groups = groups && child->kind == LW_NODE_GROUP;
    if (groups) {
        lw_text caption;
        lw_text_begin(&caption, out->engine);
        lw_name_typeset(&caption, list->name, true);
        lw_status status = lw_text_check(&caption, err);
        if (status == LW_OK)
            status = lw_sheet_table(out, caption.bytes, list, NULL, err);
        lw_text_end(&caption);
        return status;
    }
    lw_text_add(out, "<p>");
    name_html(out, list->name, true);
    lw_text_add(out, ":</p>\n<ul>\n");
    for (const lw_node *child = list->first; child != NULL; child = child->next) {
        lw_text_add(out, "<li>");
        cell(out, child, true);
        lw_text_add(out, "</li>\n");
    }
    lw_text_add(out, "</ul>\n");
    return lw_text_check(out, err);
}

void lw_sheet_definitions(lw_text *out, const char *prefix, const lw_node *group)
{
    for (const lw_node *child = group->first; child != NULL; child = child->next) {
        lw_text name;
        lw_text_begin(&name, out->engine);
        lw_text_add(&name, prefix);
        if (child->name != NULL)
            lw_name_typeset(&name, child->name, false);
        else
            lw_text_add(&name, "entry");
        if (child->kind == LW_NODE_GROUP || (child->kind == LW_NODE_LIST && child->first != NULL)) {
            lw_text_add(&name, ", ");
            if (name.status == LW_OK)
                lw_sheet_definitions(out, name.bytes, child);
        } else {
            lw_text_add(out, "<dt>");
            lw_text_html(out, name.bytes);
            lw_text_add(out, "</dt><dd>");
            cell(out, child, true);
            lw_text_add(out, "</dd>\n");
        }
        if (name.status != LW_OK)
            out->status = name.status;
        lw_text_end(&name);
    }
}

void lw_sheet_title(lw_text *out, const lw_node *group)
{
    const char *title = lw_node_text(group, "title", NULL);
    if (title != NULL)
        lw_text_html(out, title);
    else
        name_html(out, group->name, true);
}
