/* SPDX-License-Identifier: GPL-3.0-or-later */
/* report: lw.report{ title =, items ... }. Items appear in order: text, {heading =, prefix =},
 * {caution =, title =}, {verdict = "pass", text =}, {table = rows, columns =, caption =}, figures, and any
 * object of the road, which brings its tables, figures, definitions and sources; {brief = object} shows what
 * matters of it and {details = object} the rest, folded away. A heading's prefix begins the names of the
 * figures' files until the next heading. job:write adds the provenance. */
#include "record/report.h"
#include "bind/figures.h"
#include "bind/inputs.h"
#include "bind/outputs.h"
#include "bind/report_parts.h"
#include "bind/reports.h"
#include "bind/roads.h"

#include <string.h>

#define COLUMNS_MOST 1000

/* How much of an object is shown. */
typedef enum part { WHOLE, BRIEF, DETAILS } part;

static int end_report(lua_State *L)
{
    lwb_box *box = lua_touserdata(L, 1);
    lw_report *report = box->object;
    lw_report_free(&report);
    box->object = NULL;
    return 0;
}

static void heading(lua_State *L, lw_report *report, const char *text)
{
    lw_error err = LW_ERROR_NONE;
    lwb_check(L, lw_report_heading(report, text, &err), &err);
}

static void fold(lua_State *L, lw_report *report, const char *title)
{
    lw_error err = LW_ERROR_NONE;
    lwb_check(L, lw_report_fold(report, title, &err), &err);
}

static void fold_end(lua_State *L, lw_report *report)
{
    lw_error err = LW_ERROR_NONE;
    lwb_check(L, lw_report_fold_end(report, &err), &err);
}

/* Shows the figure on the top of the stack and keeps it for the folder of figures. Pops it. */
static void add_figure(lua_State *L, lw_report *report, int self)
{
    lw_error err = LW_ERROR_NONE;
    const lwb_figure *figure = lwb_self(L, -1, &lwb_figure_noun, "report");
    lwb_check(L, lw_report_figure(report, figure->figure, &err), &err);
    lua_getiuservalue(L, self, LWB_REPORT_FIGURES);
    lua_pushvalue(L, -2);
    lua_rawseti(L, -2, (lua_Integer)lua_rawlen(L, -2) + 1);
    lua_getiuservalue(L, self, LWB_REPORT_PREFIXES);
    lua_getiuservalue(L, self, LWB_REPORT_PREFIX);
    lua_rawseti(L, -2, (lua_Integer)lua_rawlen(L, -3));
    lua_pop(L, 3);
}

/* Calls item:figure(name), item:figure() without a name, and shows what it gives. */
static void add_figure_of(lua_State *L, lw_report *report, int self, int item, const char *name)
{
    luaL_getmetafield(L, item, "__methods");
    lua_getfield(L, -1, "figure");
    lua_pushvalue(L, item);
    if (name != NULL)
        lua_pushstring(L, name);
    lua_call(L, name != NULL ? 2 : 1, 1);
    lua_remove(L, -2);
    add_figure(L, report, self);
}

static bool is_drawing(const char *name)
{
    return name != NULL && (strcmp(name, "points") == 0 || strcmp(name, "line") == 0 || strcmp(name, "curve") == 0 ||
                            strcmp(name, "plot") == 0);
}

static bool is_remarks(const lw_node *node)
{
    return node->kind == LW_NODE_LIST && (strcmp(node->name, "remarks") == 0 || strcmp(node->name, "warnings") == 0);
}

/* Whether a part of a result is worth reading before anybody asks. */
static bool is_first_hand(const lw_node *node)
{
    return (node->kind != LW_NODE_GROUP && node->kind != LW_NODE_LIST) || is_remarks(node);
}

/* A result under its heading, without the vectors that only its figure needs, then the figure; its tables and
 * what lies deeper are folded away. A method has had its remarks among the notes, and perhaps its figure. */
static void add_result(lua_State *L, lw_report *report, int self, const lw_node *node, bool is_method, bool with_figure)
{
    const char *name = node->name ? node->name : "results";
    lw_error err = LW_ERROR_NONE;
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *first = lw_add_group(scratch->root, name, &err), *rest = lw_add_group(scratch->root, "", &err);
    bool any = false;
    for (const lw_node *child = node->first; child != NULL && rest != NULL; child = child->next) {
        bool drawn = is_drawing(child->name) ||
                     (child->name != NULL && (strcmp(child->name, "figure") == 0 || strcmp(child->name, "figures") == 0));
        if (is_method && is_remarks(child))
            continue;
        if (!drawn)
            lw_add_copy(is_first_hand(child) ? first : rest, child->name, child, &err);
        any = any || (!drawn && !is_first_hand(child) && child->first != NULL);
    }
    lwb_check(L, LW_OK, &err);
    first->definition = node->definition;
    first->source = node->source;
    lwb_check(L, lw_report_result(report, first, &err), &err);
    if (with_figure && lwb_push_result_figure(L, node, name))
        add_figure(L, report, self);
    /* a method shown alone shows all its figures, beside others only the first */
    const lw_node *figures = is_method ? NULL : lw_node_get(node, "figures");
    for (const lw_node *more = figures != NULL ? figures->first : NULL; more != NULL && with_figure; more = more->next)
        if (more->kind == LW_NODE_GROUP) {
            lwb_push_figure(L, more);
            add_figure(L, report, self);
        }
    if (any) {
        fold(L, report, "Its tables");
        lwb_check(L, lw_report_result(report, rest, &err), &err);
        fold_end(L, report);
    }
    lua_pop(L, 1);
}

/* One row a method: what each says. */
static void add_summary(lua_State *L, lw_report *report, const lw_node *methods)
{
    static const char *const columns[] = {"method",     "size_volume",     "size_area", "strain_rms",
                                          "strain_apparent", "remark", NULL};
    lw_error err = LW_ERROR_NONE;
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *rows = lw_add_list(scratch->root, "methods", &err);
    for (const lw_node *method = methods->first; method != NULL; method = method->next) {
        const char *reason = lw_node_text(method, "not_applied", NULL);
        lw_node *row = lw_add_group(rows, NULL, &err);
        lw_add_text(row, "method", lw_node_text(method, "title", method->name), &err);
        for (size_t i = 1; columns[i] != NULL; i++) {
            const lw_node *value = lw_node_get(method, columns[i]);
            if (value != NULL && value->kind == LW_NODE_QUANTITY)
                lw_add_quantity(row, columns[i], value->quantity, value->definition, &err);
        }
        if (reason != NULL)
            lw_add_text(row, "remark", reason, &err);
    }
    lwb_check(L, LW_OK, &err);
    if (rows->first != NULL)
        lwb_check(L, lw_report_table(report, "What each method says", rows, columns, &err), &err);
    lua_pop(L, 1);
}

#define BRIEF_PLOT "williamson_hall"

/* The methods' answers beside each other, what to mind, and the plot in which most can be seen. */
static void add_brief_methods(lua_State *L, lw_report *report, int self, const lw_node *node, const lw_node *methods)
{
    lw_error err = LW_ERROR_NONE;
    add_summary(L, report, methods);
    lwb_check(L, lw_report_remarks(report, "To mind", lw_node_get(node, "notes"), &err), &err);
    const lw_node *plot = lw_node_get(methods, BRIEF_PLOT);
    if (plot != NULL && lwb_push_result_figure(L, plot, plot->name))
        add_figure(L, report, self);
}

/* Shown by lwb_report_parts. */
static bool is_parts(const lw_node *node)
{
    return strcmp(node->name, "budget") == 0 || strcmp(node->name, "uncertainty") == 0;
}

/* Lines and methods one by one. */
static void add_each_method(lua_State *L, lw_report *report, int self, const lw_node *node, const lw_node *methods)
{
    lw_error err = LW_ERROR_NONE;
    const lw_node *lines = lw_node_get(node, "lines");
    if (lines != NULL && lines->first != NULL)
        lwb_check(L, lw_report_table(report, "Lines of the sample", lines, NULL, &err), &err);
    for (const lw_node *method = methods->first; method != NULL; method = method->next)
        if (lw_node_get(method, "not_applied") == NULL)
            add_result(L, report, self, method, true, strcmp(method->name, BRIEF_PLOT) != 0);
    if (lw_node_get(node, "budget") != NULL || lw_node_get(node, "uncertainty") != NULL) {
        fold(L, report, "Every uncertainty in its parts");
        lwb_report_parts(L, report, node, false);
        fold_end(L, report);
    }
    for (const lw_node *rest = node->first; rest != NULL; rest = rest->next)
        if (rest->kind == LW_NODE_GROUP && rest != methods && !is_parts(rest))
            add_result(L, report, self, rest, false, true);
}

static void add_tree(lua_State *L, lw_report *report, int self, int item, part shown)
{
    lw_error err = LW_ERROR_NONE;
    const lw_node *node = ((lwb_tree *)lua_touserdata(L, item))->node;
    if (node->kind == LW_NODE_LIST) {
        lwb_check(L, lw_report_table(report, "Results", node, NULL, &err), &err);
        return;
    }
    const lw_node *methods = lw_node_get(node, "methods");
    if (methods == NULL || methods->kind != LW_NODE_GROUP) {
        add_result(L, report, self, node, false, true);
        return;
    }
    if (shown == WHOLE)
        heading(L, report, "Size and strain");
    if (shown != DETAILS)
        add_brief_methods(L, report, self, node, methods);
    if (shown == WHOLE) {
        lwb_report_parts(L, report, node, true);
        add_each_method(L, report, self, node, methods);
    }
    if (shown == DETAILS) {
        fold(L, report, "Every method: values, assumptions and sources");
        lwb_report_parts(L, report, node, true);
        add_each_method(L, report, self, node, methods);
        fold_end(L, report);
    }
}

/* Copies the named parts of a record, or with `but` all others. */
static lw_node *copy_parts(lwb_tree *scratch, const lw_node *record, const char *title, const char *const names[],
                           bool but, lw_error *err)
{
    lw_node *copy = lw_add_group(scratch->root, title, err);
    for (const lw_node *child = record->first; child != NULL && copy != NULL; child = child->next) {
        size_t i = 0;
        while (names[i] != NULL && strcmp(names[i], child->name) != 0)
            i++;
        if ((names[i] == NULL) == but)
            lw_add_copy(copy, child->name, child, err);
    }
    return copy;
}

static void add_verdict(lua_State *L, lw_report *report, const lw_node *record)
{
    lw_error err = LW_ERROR_NONE;
    const char *verdict = lw_node_text(record, "verdict", "");
    lw_verdict which = strcmp(verdict, "pass") == 0   ? LW_VERDICT_PASS
                       : strcmp(verdict, "fail") == 0 ? LW_VERDICT_FAIL
                                                      : LW_VERDICT_ATTENTION;
    if (verdict[0] != '\0')
        lwb_check(L,
                  lw_report_verdict(report, which,
                                    lw_node_text(record, "verdict_reason", "The calibration's own verdict."), &err),
                  &err);
}

static void add_calibration(lua_State *L, lw_report *report, int self, int item, part shown)
{
    static const char *const brief[] = {"warnings", "aberrations", NULL};
    static const char *const shown_before[] = {"covariance", "schema", "provenance", "warnings", "aberrations", NULL};
    lw_error err = LW_ERROR_NONE;
    lua_getiuservalue(L, item, LWB_CALIBRATION_TREE);
    const lw_node *record = ((lwb_tree *)lua_touserdata(L, -1))->node;
    lwb_tree *scratch = lwb_new_tree(L);
    if (shown == WHOLE)
        heading(L, report, "Calibration of the instrument");
    if (shown != DETAILS) {
        add_verdict(L, report, record);
        lwb_check(L, lw_report_result(report, copy_parts(scratch, record, "", brief, false, &err), &err), &err);
    }
    if (shown == WHOLE)
        add_figure_of(L, report, self, item, NULL);
    if (shown != BRIEF) {
        fold(L, report, "The whole record");
        lwb_check(L, lw_report_result(report, copy_parts(scratch, record, "", shown_before, true, &err), &err), &err);
        fold_end(L, report);
    }
    lua_pop(L, 2);
}

static void add_lines(lua_State *L, lw_report *report, int self, int item, part shown)
{
    lw_error err = LW_ERROR_NONE;
    bool profiles = lwb_test(L, item, &lwb_profiles_noun) != NULL;
    lua_getiuservalue(L, item, profiles ? (int)LWB_PROFILES_TREE : (int)LWB_LINES_TREE);
    const lw_node *tree = ((lwb_tree *)lua_touserdata(L, -1))->node;
    const lw_node *list = lw_node_get(tree, profiles ? "profiles" : "lines");
    const char *caption = profiles ? "Profiles, the instrument taken out" : "Fitted lines";
    if (shown == WHOLE)
        heading(L, report, profiles ? "The sample's own profiles" : "Lines");
    if (shown != DETAILS)
        add_figure_of(L, report, self, item, NULL);
    if (profiles && shown == WHOLE)
        add_figure_of(L, report, self, item, "refold");
    if (shown == DETAILS)
        fold(L, report, caption);
    if (shown != BRIEF) {
        if (list != NULL && list->first != NULL)
            lwb_check(L, lw_report_table(report, caption, list, NULL, &err), &err);
        for (const lw_node *child = tree->first; child != NULL; child = child->next)
            if (child->kind == LW_NODE_GROUP)
                lwb_check(L, lw_report_result(report, child, &err), &err);
    }
    if (shown == DETAILS)
        fold_end(L, report);
    lua_pop(L, 1);
}

/* An object of the road; false if it is none. */
static bool add_object(lua_State *L, lw_report *report, int self, int item, part shown)
{
    if (lwb_test(L, item, &lwb_lines_noun) != NULL || lwb_test(L, item, &lwb_profiles_noun) != NULL)
        add_lines(L, report, self, item, shown);
    else if (lwb_test(L, item, &lwb_calibration_noun) != NULL)
        add_calibration(L, report, self, item, shown);
    else if (lwb_test(L, item, &lwb_tree_noun) != NULL)
        add_tree(L, report, self, item, shown);
    else
        return false;
    lua_pushvalue(L, item); /* the last of them tells the provenance which calibration was used */
    lua_setiuservalue(L, self, LWB_REPORT_SUBJECT);
    return true;
}

/* The field `columns`: an array of names ended by NULL that lives on the stack; NULL if there is none. */
static const char *const *push_columns(lua_State *L, int item)
{
    if (lua_getfield(L, item, "columns") == LUA_TNIL)
        return NULL;
    int list = lua_gettop(L);
    lwb_want_table(L, list, "report", "the field 'columns'");
    size_t n = (size_t)lua_rawlen(L, list);
    if (n > COLUMNS_MOST) /* the length of a table can be as large as a number can */
        lwb_refuse(L, "choose fewer", "report: %zu columns are too many", n);
    const char **columns = lua_newuserdatauv(L, (n + 1) * sizeof *columns, 0);
    for (size_t i = 0; i < n; i++) {
        lua_rawgeti(L, list, (lua_Integer)i + 1);
        columns[i] = lwb_text(L, -1, "report", "a column's name"); /* the list keeps it alive */
        lua_pop(L, 1);
    }
    columns[n] = NULL;
    return columns;
}

static void add_part(lua_State *L, lw_report *report, int self, int item, const char *key, part shown)
{
    if (lua_getfield(L, item, key) != LUA_TNIL && !add_object(L, report, self, lua_gettop(L), shown))
        lwb_refuse(L, "give a calibration, lines, profiles or a result", "report: a %s has no '%s' part",
                   lwb_kind(L, -1), key);
}

static void add_table_item(lua_State *L, lw_report *report, int self, int item)
{
    static const char *const keys[] = {"heading", "prefix",  "text",    "caution", "title",   "verdict",
                                       "table",   "caption", "columns", "brief",   "details", NULL};
    lw_error err = LW_ERROR_NONE;
    lwb_only_keys(L, item, "report", keys);
    const char *text = lwb_field_text(L, item, "text", "report", NULL);
    const char *head = lwb_field_text(L, item, "heading", "report", NULL);
    const char *caution = lwb_field_text(L, item, "caution", "report", NULL);
    const char *verdict = lwb_field_text(L, item, "verdict", "report", NULL);
    if (head != NULL) {
        heading(L, report, head);
        lua_pushstring(L, lwb_field_text(L, item, "prefix", "report", ""));
        lua_setiuservalue(L, self, LWB_REPORT_PREFIX);
    }
    if (verdict != NULL) {
        static const char *const words[] = {"pass", "attention", "fail", NULL};
        int which = 0;
        while (words[which] != NULL && strcmp(words[which], verdict) != 0)
            which++;
        if (words[which] == NULL)
            lwb_refuse(L, "choose from: pass, attention, fail", "report: a verdict can't be '%s'", verdict);
        lwb_check(L, lw_report_verdict(report, (lw_verdict)which, text ? text : "", &err), &err);
    } else if (text != NULL)
        lwb_check(L, lw_report_text(report, text, &err), &err);
    if (caution != NULL)
        lwb_check(L, lw_report_caution(report, lwb_field_text(L, item, "title", "report", "mind"), caution, &err), &err);
    if (lua_getfield(L, item, "table") != LUA_TNIL) {
        int rows = lua_gettop(L);
        const lw_node *list = NULL;
        if (lwb_test(L, rows, &lwb_tree_noun) != NULL)
            list = ((lwb_tree *)lua_touserdata(L, rows))->node;
        else {
            lwb_want_table(L, rows, "report", "the field 'table'");
            lwb_tree *scratch = lwb_new_tree(L);
            lwb_add_value(L, scratch->root, "rows", rows);
            list = scratch->root->first;
        }
        const char *caption = lwb_field_text(L, item, "caption", "report", "");
        lwb_check(L, lw_report_table(report, caption, list, push_columns(L, item), &err), &err);
    }
    add_part(L, report, self, item, "brief", BRIEF);
    add_part(L, report, self, item, "details", DETAILS);
}

static void add_item(lua_State *L, lw_report *report, int self, int item)
{
    lw_error err = LW_ERROR_NONE;
    luaL_checkstack(L, 20, NULL);
    if (lua_type(L, item) == LUA_TSTRING)
        lwb_check(L, lw_report_text(report, lua_tostring(L, item), &err), &err);
    else if (lwb_test(L, item, &lwb_figure_noun) != NULL) {
        lua_pushvalue(L, item);
        add_figure(L, report, self);
    } else if (lwb_test(L, item, &lwb_scan_noun) != NULL)
        add_figure_of(L, report, self, item, NULL);
    else if (lua_type(L, item) == LUA_TTABLE)
        add_table_item(L, report, self, item);
    else if (!add_object(L, report, self, item, WHOLE))
        lwb_refuse(L, "give texts, tables, figures, or objects of the road", "report: a %s can't be shown",
                   lwb_kind(L, item));
}

static int make(lua_State *L)
{
    static const char *const keys[] = {"title", "subtitle", NULL};
    lw_error err = LW_ERROR_NONE;
    lwb_want_table(L, 1, "report", "the argument");
    lua_settop(L, 1);
    lwb_only_keys(L, 1, "report", keys);
    const char *title = lwb_field_text(L, 1, "title", "report", NULL);
    if (title == NULL && lua_getfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY) == LUA_TUSERDATA) {
        lua_getiuservalue(L, -1, LWB_JOB_TITLE);
        title = lua_tostring(L, -1); /* the job keeps it alive */
    }
    lwb_box *box = lwb_new_box(L, &lwb_report_noun, LWB_REPORT_VALUES);
    int self = lua_gettop(L);
    lua_newtable(L);
    lua_setiuservalue(L, self, LWB_REPORT_FIGURES);
    lua_newtable(L);
    lua_setiuservalue(L, self, LWB_REPORT_PREFIXES);
    lua_pushliteral(L, "");
    lua_setiuservalue(L, self, LWB_REPORT_PREFIX);
    lw_report *report = lw_report_new(lwb_engine(L), title ? title : "Report",
                                      lwb_field_text(L, 1, "subtitle", "report", NULL), &err);
    box->object = report;
    lwb_check(L, LW_OK, &err);
    lua_Integer n = (lua_Integer)lua_rawlen(L, 1);
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, 1, i);
        add_item(L, report, self, self + 1);
        lua_settop(L, self);
    }
    return 1;
}

static int show(lua_State *L)
{
    lwb_self(L, 1, &lwb_report_noun, "tostring");
    lua_getiuservalue(L, 1, LWB_REPORT_FIGURES);
    lua_pushfstring(L, "report with %d figures; write it with job:write", (int)lua_rawlen(L, -1));
    return 1;
}

static const luaL_Reg functions[] = {{"report", make}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_report_noun = {
    .name = "report", .functions = functions, .metamethods = metamethods, .gc = end_report};
