/* SPDX-License-Identifier: GPL-3.0-or-later */
/* report: lw.report{ title =, items ... }. Items appear in order: text, {heading =}, {caution =, title =},
 * {verdict = "pass", text =}, {table = rows, caption =}, figures, and any object of the road, which
 * brings its tables, figures, definitions and sources. job:write adds the provenance. */
#include "record/report.h"
#include "bind/figures.h"
#include "bind/inputs.h"
#include "bind/outputs.h"
#include "bind/reports.h"
#include "bind/roads.h"
#include "record/gnuplot.h"

#include <stdio.h>
#include <string.h>

/* User values: list of figures. */
enum { FIGURES = 1, SUBJECT, VALUES = 2 };

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

/* Shows the figure on the top of the stack and keeps it for the folder of figures. Pops it. */
static void add_figure(lua_State *L, lw_report *report, int self)
{
    lw_error err = LW_ERROR_NONE;
    const lwb_figure *figure = lwb_self(L, -1, &lwb_figure_noun, "report");
    lwb_check(L, lw_report_figure(report, figure->figure, &err), &err);
    lua_getiuservalue(L, self, FIGURES);
    lua_pushvalue(L, -2);
    lua_rawseti(L, -2, (lua_Integer)lua_rawlen(L, -2) + 1);
    lua_pop(L, 2);
}

/* Calls item:figure(...) and shows what it gives. */
static void add_figure_of(lua_State *L, lw_report *report, int self, int item)
{
    luaL_getmetafield(L, item, "__methods");
    lua_getfield(L, -1, "figure");
    lua_pushvalue(L, item);
    lua_call(L, 1, 1);
    lua_remove(L, -2);
    add_figure(L, report, self);
}

static bool is_drawing(const char *name)
{
    return name != NULL && (strcmp(name, "points") == 0 || strcmp(name, "line") == 0 || strcmp(name, "curve") == 0 ||
                            strcmp(name, "plot") == 0);
}

/* A result under its heading, without the vectors that only its figure needs, then the figure. */
static void add_result(lua_State *L, lw_report *report, int self, const lw_node *node, const char *name, int owner)
{
    lw_error err = LW_ERROR_NONE;
    owner = lua_absindex(L, owner);
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *copy = lw_add_group(scratch->root, name, &err);
    for (const lw_node *child = node->first; child != NULL && copy != NULL; child = child->next)
        if (!is_drawing(child->name))
            lw_add_copy(copy, child->name, child, &err);
    lwb_check(L, LW_OK, &err);
    copy->definition = node->definition;
    copy->source = node->source;
    lwb_check(L, lw_report_result(report, copy, &err), &err);
    if (lwb_push_result_figure(L, node, name))
        add_figure(L, report, self);
    lua_pop(L, 1);
}

/* One row a method: what each says. */
static void add_summary(lua_State *L, lw_report *report, const lw_node *methods)
{
    static const char *const shown[] = {"size_volume", "size_area", "strain_rms", "strain_apparent"};
    lw_error err = LW_ERROR_NONE;
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *rows = lw_add_list(scratch->root, "methods", &err);
    for (const lw_node *method = methods->first; method != NULL; method = method->next) {
        const char *reason = lw_node_text(method, "not_applied", NULL);
        lw_node *row = lw_add_group(rows, NULL, &err);
        lw_add_text(row, "method", lw_node_text(method, "title", method->name), &err);
        for (size_t i = 0; i < sizeof shown / sizeof *shown; i++) {
            const lw_node *value = lw_node_get(method, shown[i]);
            if (value != NULL && value->kind == LW_NODE_QUANTITY)
                lw_add_quantity(row, shown[i], value->quantity, value->definition, &err);
        }
        lw_add_text(row, "remark", reason ? reason : "", &err);
    }
    lwb_check(L, LW_OK, &err);
    if (rows->first != NULL)
        lwb_check(L, lw_report_table(report, "What each method says", rows, &err), &err);
    lua_pop(L, 1);
}

static void add_notes(lua_State *L, lw_report *report, const lw_node *notes)
{
    lw_error err = LW_ERROR_NONE;
    for (const lw_node *note = notes ? notes->first : NULL; note != NULL; note = note->next)
        if (note->kind == LW_NODE_TEXT)
            lwb_check(L, lw_report_caution(report, "mind", note->text, &err), &err);
}

static void add_tree(lua_State *L, lw_report *report, int self, int item)
{
    lw_error err = LW_ERROR_NONE;
    const lw_node *node = ((lwb_tree *)lua_touserdata(L, item))->node;
    if (node->kind == LW_NODE_LIST) {
        lwb_check(L, lw_report_table(report, "Results", node, &err), &err);
        return;
    }
    const lw_node *methods = lw_node_get(node, "methods");
    if (methods == NULL || methods->kind != LW_NODE_GROUP) {
        add_result(L, report, self, node, node->name ? node->name : "results", item);
        return;
    }
    heading(L, report, "Size and strain");
    add_summary(L, report, methods);
    add_notes(L, report, lw_node_get(node, "notes"));
    const lw_node *lines = lw_node_get(node, "lines");
    if (lines != NULL && lines->first != NULL)
        lwb_check(L, lw_report_table(report, "Lines of the sample", lines, &err), &err);
    for (const lw_node *method = methods->first; method != NULL; method = method->next)
        if (lw_node_get(method, "not_applied") == NULL)
            add_result(L, report, self, method, method->name, item);
    for (const lw_node *rest = node->first; rest != NULL; rest = rest->next)
        if (rest->kind == LW_NODE_GROUP && rest != methods)
            add_result(L, report, self, rest, rest->name, item);
}

static void add_calibration(lua_State *L, lw_report *report, int self, int item)
{
    lw_error err = LW_ERROR_NONE;
    lua_getiuservalue(L, item, LWB_CALIBRATION_TREE);
    const lw_node *record = ((lwb_tree *)lua_touserdata(L, -1))->node;
    const char *verdict = lw_node_text(record, "verdict", "");
    heading(L, report, "Calibration of the instrument");
    if (verdict[0] != '\0')
        lwb_check(L,
                  lw_report_verdict(report,
                                    strcmp(verdict, "pass") == 0   ? LW_VERDICT_PASS
                                    : strcmp(verdict, "fail") == 0 ? LW_VERDICT_FAIL
                                                                   : LW_VERDICT_ATTENTION,
                                    lw_node_text(record, "verdict_reason", "The calibration's own verdict."), &err),
                  &err);
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *copy = lw_add_group(scratch->root, "record", &err);
    for (const lw_node *child = record->first; child != NULL && copy != NULL; child = child->next)
        if (strcmp(child->name, "covariance") != 0 && strcmp(child->name, "schema") != 0 &&
            strcmp(child->name, "provenance") != 0)
            lw_add_copy(copy, child->name, child, &err);
    lw_add_text(copy, "title", "Record", &err);
    lwb_check(L, LW_OK, &err);
    lwb_check(L, lw_report_result(report, copy, &err), &err);
    lua_pop(L, 2);
    add_figure_of(L, report, self, item);
}

static void add_lines(lua_State *L, lw_report *report, int self, int item, bool profiles)
{
    lw_error err = LW_ERROR_NONE;
    lua_getiuservalue(L, item, profiles ? (int)LWB_PROFILES_TREE : (int)LWB_LINES_TREE);
    const lw_node *tree = ((lwb_tree *)lua_touserdata(L, -1))->node;
    const lw_node *list = lw_node_get(tree, profiles ? "profiles" : "lines");
    heading(L, report, profiles ? "The sample's own profiles" : "Lines");
    if (list != NULL && list->first != NULL)
        lwb_check(L, lw_report_table(report, profiles ? "Profiles, the instrument taken out" : "Fitted lines", list, &err),
                  &err);
    for (const lw_node *child = tree->first; child != NULL; child = child->next)
        if (child->kind == LW_NODE_GROUP)
            lwb_check(L, lw_report_result(report, child, &err), &err);
    lua_pop(L, 1);
    add_figure_of(L, report, self, item);
}

static void add_table_item(lua_State *L, lw_report *report, int item)
{
    static const char *const keys[] = {"heading", "text", "caution", "title", "verdict", "table", "caption", NULL};
    lw_error err = LW_ERROR_NONE;
    lwb_only_keys(L, item, "report", keys);
    const char *text = lwb_field_text(L, item, "text", "report", NULL);
    const char *head = lwb_field_text(L, item, "heading", "report", NULL);
    const char *caution = lwb_field_text(L, item, "caution", "report", NULL);
    const char *verdict = lwb_field_text(L, item, "verdict", "report", NULL);
    if (head != NULL)
        heading(L, report, head);
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
        lwb_check(L, lw_report_table(report, lwb_field_text(L, item, "caption", "report", ""), list, &err), &err);
    }
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
    } else if (lwb_test(L, item, &lwb_lines_noun) != NULL)
        add_lines(L, report, self, item, false);
    else if (lwb_test(L, item, &lwb_profiles_noun) != NULL)
        add_lines(L, report, self, item, true);
    else if (lwb_test(L, item, &lwb_calibration_noun) != NULL)
        add_calibration(L, report, self, item);
    else if (lwb_test(L, item, &lwb_tree_noun) != NULL)
        add_tree(L, report, self, item);
    else if (lwb_test(L, item, &lwb_scan_noun) != NULL)
        add_figure_of(L, report, self, item);
    else if (lua_type(L, item) == LUA_TTABLE)
        add_table_item(L, report, item);
    else
        lwb_refuse(L, "give texts, tables, figures, or objects of the road", "report: a %s can't be shown",
                   lwb_kind(L, item));
    if (lwb_test(L, item, &lwb_tree_noun) != NULL || lwb_test(L, item, &lwb_lines_noun) != NULL ||
        lwb_test(L, item, &lwb_profiles_noun) != NULL || lwb_test(L, item, &lwb_calibration_noun) != NULL) {
        lua_pushvalue(L, item); /* the last of them tells the provenance which calibration was used */
        lua_setiuservalue(L, self, SUBJECT);
    }
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
    lwb_box *box = lwb_new_box(L, &lwb_report_noun, VALUES);
    int self = lua_gettop(L);
    lua_newtable(L);
    lua_setiuservalue(L, self, FIGURES);
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

void lwb_write_report(lua_State *L, int index)
{
    lw_error err = LW_ERROR_NONE;
    index = lua_absindex(L, index);
    int top = lua_gettop(L);
    luaL_checkstack(L, 20, NULL);
    lw_report *report = lwb_object(L, index, &lwb_report_noun, "job:write");
    const char *path = lwb_push_out_path(L, "report.html", "job:write");
    lwb_tree *tree = lwb_new_tree(L);
    lua_getiuservalue(L, index, SUBJECT);
    lwb_add_provenance(L, tree->root, -1);
    lwb_check(L, lw_report_heading(report, "Where this comes from", &err), &err);
    lwb_check(L, lw_report_provenance(report, tree->root->first, &err), &err);
    lwb_check(L, lw_report_save(lwb_engine(L), report, path, &err), &err);
    lua_getiuservalue(L, index, FIGURES);
    int figures = lua_gettop(L);
    static const char *const suffix[] = {"svg", "png"};
    lua_Integer n = (lua_Integer)lua_rawlen(L, figures);
    if (lw_report_warning(report) != NULL) {
        fprintf(stderr, "warning: figures are missing: %s\n", lw_report_warning(report));
        n = 0;
    }
    for (lua_Integer i = 1; i <= n; i++) {
        lua_rawgeti(L, figures, i);
        const lwb_figure *figure = lwb_self(L, -1, &lwb_figure_noun, "job:write");
        int same = 1; /* the second of a name gets a number */
        for (lua_Integer j = 1; j < i; j++) {
            lua_rawgeti(L, figures, j);
            const lwb_figure *other = lwb_self(L, -1, &lwb_figure_noun, "job:write");
            same += strcmp(other->figure->name, figure->figure->name) == 0;
            lua_pop(L, 1);
        }
        for (int k = 0; k < 2; k++) {
            char name[256], number[16] = "";
            if (same > 1)
                snprintf(number, sizeof number, "_%d", same);
            snprintf(name, sizeof name, "figures/%.200s%s.%s", figure->figure->name, number, suffix[k]);
            const char *file = lwb_push_out_path(L, name, "job:write");
            lwb_check(L, lw_figure_save_as(lwb_engine(L), figure->figure, file, &err), &err);
            lua_pop(L, 1);
        }
        lua_pop(L, 1);
    }
    lua_settop(L, top);
}

static int show(lua_State *L)
{
    lwb_self(L, 1, &lwb_report_noun, "tostring");
    lua_getiuservalue(L, 1, FIGURES);
    lua_pushfstring(L, "report with %d figures; write it with job:write", (int)lua_rawlen(L, -1));
    return 1;
}

static const luaL_Reg functions[] = {{"report", make}, {NULL, NULL}};
static const luaL_Reg metamethods[] = {{"__tostring", show}, {NULL, NULL}};

const lwb_noun lwb_report_noun = {
    .name = "report", .functions = functions, .metamethods = metamethods, .gc = end_report};
