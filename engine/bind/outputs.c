/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a job writes: records with their provenance, reports, figures, tables. */
#include "bind/outputs.h"

#include "base/sha256.h"
#include "bind/figures.h"
#include "bind/inputs.h"
#include "bind/reports.h"
#include "bind/roads.h"
#include "instrument/calibration.h"
#include "numeric/voigt.h"
#include "record/csv.h"
#include "record/file.h"
#include "record/gnuplot.h"
#include "record/json.h"

#include <stdio.h>
#include <string.h>
#include <time.h>

/* ---- provenance ---- */

/* The calibration behind an object along the road, or NULL; what was walked through is left on the stack. */
static const lw_calibration *find_calibration(lua_State *L, int index)
{
    index = lua_absindex(L, index);
    luaL_checkstack(L, 8, NULL);
    lwb_box *box = lwb_test(L, index, &lwb_calibration_noun);
    if (box != NULL)
        return box->object;
    int next = 0;
    if (lwb_test(L, index, &lwb_lines_noun) != NULL)
        next = LWB_LINES_CALIBRATION;
    else if (lwb_test(L, index, &lwb_profiles_noun) != NULL)
        next = LWB_PROFILES_CALIBRATION;
    else if (lwb_test(L, index, &lwb_tree_noun) != NULL)
        next = 1;
    if (next == 0 || lua_getiuservalue(L, index, next) != LUA_TUSERDATA)
        return NULL;
    return find_calibration(L, -1);
}

static void add_recipe(lua_State *L, lw_node *group, int job)
{
    lwb_home *home = lwb_home_of(L);
    lw_error err = LW_ERROR_NONE;
    lw_node *recipe = lw_add_group(group, "recipe", &err);
    if (job != 0) {
        lua_getiuservalue(L, job, LWB_JOB_TITLE);
        lw_add_text(recipe, "title", lua_tostring(L, -1), &err);
        lua_pop(L, 1);
    }
    lw_add_text(recipe, "file", home->recipe, &err);
    if (home->recipe_hash[0] == '\0' && home->recipe[0] != '\0' && !home->interpreter)
        lwb_hash_file(L, home->recipe, home->recipe_hash);
    lw_add_text(recipe, "sha256", home->recipe_hash, &err);
    lwb_check(L, LW_OK, &err);
    if (job == 0)
        return;
    lw_node *inputs = lw_add_group(recipe, "inputs", &err);
    lwb_check(L, LW_OK, &err);
    lua_getiuservalue(L, job, LWB_JOB_NAMES);
    lua_getiuservalue(L, job, LWB_JOB_VALUES);
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -2); i++) {
        lua_rawgeti(L, -2, i);
        const char *name = lua_tostring(L, -1);
        lua_getfield(L, -2, name);
        lwb_add_value(L, inputs, name, lua_gettop(L));
        lua_pop(L, 2);
    }
    lua_pop(L, 2);
    lua_getiuservalue(L, job, LWB_JOB_FILES);
    lw_node *list = lw_add_list(group, "files", &err);
    lwb_check(L, LW_OK, &err);
    for (lua_Integer i = 1; i <= (lua_Integer)lua_rawlen(L, -1); i++) {
        lua_rawgeti(L, -1, i);
        lw_node *entry = lw_add_group(list, NULL, &err);
        int at = lua_gettop(L);
        lw_add_text(entry, "input", lwb_field_text(L, at, "input", "provenance", ""), &err);
        lw_add_text(entry, "file", lwb_field_text(L, at, "file", "provenance", ""), &err);
        lw_add_text(entry, "sha256", lwb_field_text(L, at, "sha256", "provenance", ""), &err);
        lwb_check(L, LW_OK, &err);
        lua_pop(L, 1);
    }
    lua_pop(L, 1);
}

void lwb_add_provenance(lua_State *L, lw_node *record, int object)
{
    lwb_home *home = lwb_home_of(L);
    lw_error err = LW_ERROR_NONE;
    object = lua_absindex(L, object);
    int top = lua_gettop(L);
    luaL_checkstack(L, 20, NULL);
    lw_node *group = lw_add_group(record, "provenance", &err);
    lw_add_text(group, "engine", "linewright " LW_VERSION, &err);
    lw_add_text(group, "cpu", lw_voigt_kernel_for(home->engine.cpu)->rung, &err);
    lw_add_flag(group, "trusted", !home->confined, &err);
    char date[32];
    time_t now = time(NULL);
    struct tm utc;
    strftime(date, sizeof date, "%Y-%m-%dT%H:%M:%SZ", gmtime_r(&now, &utc));
    lw_add_text(group, "date", date, &err);
    lwb_check(L, LW_OK, &err);
    int job = lua_getfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY) == LUA_TUSERDATA ? lua_gettop(L) : 0;
    add_recipe(L, group, job);
    lw_node *options = lw_add_group(group, "options", &err);
    lwb_check(L, LW_OK, &err);
    lwb_add_road_options(L, options, object);
    bool itself = lwb_test(L, object, &lwb_calibration_noun) != NULL; /* its own hash isn't known before it is written */
    const lw_calibration *calibration = itself ? NULL : find_calibration(L, object);
    if (calibration != NULL && calibration->hash[0] != '\0')
        lw_add_text(group, "calibration_sha256", calibration->hash, &err);
    if (job != 0) {
        lua_getiuservalue(L, job, LWB_JOB_VALUES);
        if (lua_getfield(L, -1, "seed") == LUA_TNUMBER)
            lw_add_number(group, "seed", lua_tonumber(L, -1), &err);
    }
    lwb_check(L, LW_OK, &err);
    lua_settop(L, top);
}

/* ---- methods of the job ---- */

/* job:path(name): out/name, its folders made; for the things that save themselves. */
int lwb_job_path(lua_State *L)
{
    lwb_self(L, 1, &lwb_recipe_noun, "job:path");
    lwb_push_out_path(L, lwb_text(L, 2, "job:path", "the name"), "job:path");
    return 1;
}

/* Copies a result without what only a drawing needs. */
static void copy_plain(lw_node *to, const lw_node *from, lw_error *err)
{
    for (const lw_node *child = from->first; child != NULL; child = child->next) {
        if (child->name != NULL && (strcmp(child->name, "figure") == 0 || strcmp(child->name, "figures") == 0))
            continue;
        if (child->name != NULL && strcmp(child->name, "schema") == 0 && lw_node_get(to, "schema") != NULL)
            continue;
        if (child->kind == LW_NODE_GROUP || child->kind == LW_NODE_LIST) {
            lw_node *copy = child->kind == LW_NODE_GROUP ? lw_add_group(to, child->name, err)
                                                         : lw_add_list(to, child->name, err);
            if (copy == NULL)
                return;
            copy->definition = child->definition ? lw_arena_text(to->arena, child->definition, err) : NULL;
            copy->source = child->source ? lw_arena_text(to->arena, child->source, err) : NULL;
            copy_plain(copy, child, err);
        } else
            lw_add_copy(to, child->name, child, err);
    }
}

static bool has_failed(const lw_node *node)
{
    return strcmp(lw_node_text(node, "verdict", ""), "fail") == 0;
}

/* The file of a result: results.json, or, for one that is a record of another schema (linewright/comparison/1),
 * a file of that name. */
static const char *record_file(const lw_node *node, char *file, size_t size)
{
    const char *schema = node ? lw_node_text(node, "schema", "") : "";
    size_t n = strncmp(schema, "linewright/", 11) == 0 ? strspn(schema + 11, "abcdefghijklmnopqrstuvwxyz_") : 0;
    if (n == 0 || n + sizeof ".json" > size || schema[11 + n] != '/') {
        snprintf(file, size, "results.json");
        return "linewright/results/1";
    }
    snprintf(file, size, "%.*s.json", (int)n, schema + 11);
    return schema;
}

/* The results as a record. */
static void write_results(lua_State *L, int index)
{
    lw_error err = LW_ERROR_NONE;
    const lwb_tree *given = lwb_test(L, index, &lwb_tree_noun);
    char file[64];
    const char *schema = record_file(given ? given->node : NULL, file, sizeof file);
    const char *path = lwb_push_out_path(L, file, "job:write");
    lwb_tree *record = lwb_new_tree(L);
    lw_add_text(record->root, "schema", schema, &err);
    lua_getiuservalue(L, 1, LWB_JOB_TITLE);
    lw_add_text(record->root, "title", lua_tostring(L, -1), &err);
    lua_pop(L, 1);
    const lwb_tree *results = lwb_test(L, index, &lwb_tree_noun);
    if (results != NULL)
        copy_plain(record->root, results->node, &err);
    else {
        lwb_want_table(L, index, "job:write", "the results");
        lw_node *holder = lw_tree_new(&record->arena, &err);
        lwb_check(L, LW_OK, &err);
        lwb_add_value(L, holder, "results", index);
        copy_plain(record->root, holder->first, &err);
    }
    lwb_check(L, LW_OK, &err);
    lwb_add_provenance(L, record->root, index);
    lwb_check(L, lw_json_save(lwb_engine(L), path, record->root, &err), &err);
    if (has_failed(record->root))
        lwb_judge(L, false, "the results' verdict is 'fail'");
    lua_pop(L, 2);
}

void lwb_judge(lua_State *L, bool passed, const char *text)
{
    if (passed)
        return;
    fflush(stdout);
    fprintf(stderr, "verdict failed: %s\n", text);
    lua_getfield(L, LUA_REGISTRYINDEX, LWB_JOB_KEY);
    lua_getiuservalue(L, -1, LWB_JOB_VALUES);
    lua_getfield(L, -1, "strict");
    if (lua_toboolean(L, -1))
        lwb_home_of(L)->verdict_failed = true;
    lua_pop(L, 3);
}

/* job:check(passed, text): a verdict of the recipe's own. */
int lwb_job_check(lua_State *L)
{
    lwb_self(L, 1, &lwb_recipe_noun, "job:check");
    lwb_judge(L, lua_toboolean(L, 2), lua_isnoneornil(L, 3) ? "a check of the recipe" : lwb_text(L, 3, "job:check", "the text"));
    lua_pushboolean(L, lua_toboolean(L, 2));
    return 1;
}

/* job:progress(what, fraction): how far a long job has come. Until it is at 1 the engine's own steps are
 * silent, so that one bar tells of the whole. */
int lwb_job_progress(lua_State *L)
{
    lwb_home *home = lwb_home_of(L);
    lwb_self(L, 1, &lwb_recipe_noun, "job:progress");
    const char *what = lwb_text(L, 2, "job:progress", "what is done");
    double fraction = lwb_number(L, 3, "job:progress", "the fraction");
    if (home->progress == NULL) {
        home->progress = home->engine.progress;
        home->engine.progress = NULL;
    }
    if (home->progress != NULL)
        home->progress(home->engine.user, what, fraction);
    if (!(fraction < 1)) {
        home->engine.progress = home->progress;
        home->progress = NULL;
    }
    return 0;
}

/* job:write(results, report): each thing by its kind: results to results.json, a calibration to
 * calibration.json, a report to report.html with its figures, a figure to figures/. */
int lwb_job_write(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lwb_self(L, 1, &lwb_recipe_noun, "job:write");
    int n = lua_gettop(L);
    luaL_checkstack(L, 20, NULL);
    if (n < 2)
        return lwb_refuse(L, "job:write(results, report)", "job:write: nothing was given to write");
    for (int i = 2; i <= n; i++) {
        if (lwb_test(L, i, &lwb_calibration_noun) != NULL) {
            const lw_calibration *calibration = lwb_object(L, i, &lwb_calibration_noun, "job:write");
            lwb_calibration_save(L, i, lwb_push_out_path(L, "calibration.json", "job:write"));
            if (strcmp(calibration->verdict, "fail") == 0)
                lwb_judge(L, false, "the calibration's verdict is 'fail'");
        } else if (lwb_test(L, i, &lwb_report_noun) != NULL)
            lwb_write_report(L, i);
        else if (lwb_test(L, i, &lwb_figure_noun) != NULL) {
            const lwb_figure *figure = lwb_self(L, i, &lwb_figure_noun, "job:write");
            char name[256];
            static const char *const suffix[] = {"svg", "png"};
            for (int k = 0; k < 2; k++) {
                snprintf(name, sizeof name, "figures/%.200s.%s", figure->figure->name, suffix[k]);
                const char *path = lwb_push_out_path(L, name, "job:write");
                lwb_check(L, lw_figure_save_as(lwb_engine(L), figure->figure, path, &err), &err);
            }
        } else
            write_results(L, i);
        lua_settop(L, n);
    }
    return 0;
}

/* Copies the wanted columns of rows into a list, in the order wanted. Rows are a list of tables at `rows`,
 * or groups of `from` if that isn't NULL; the names are a list at `wanted`. */
static const lw_node *choose_columns(lua_State *L, const lw_node *from, int rows, int wanted)
{
    lw_error err = LW_ERROR_NONE;
    lwb_tree *tree = lwb_new_tree(L);
    lw_node *list = lw_add_list(tree->root, "rows", &err);
    lua_Integer n_columns = (lua_Integer)lua_rawlen(L, wanted);
    lua_Integer n_rows = from ? (lua_Integer)from->n : (lua_Integer)lua_rawlen(L, rows);
    const lw_node *each = from ? from->first : NULL;
    for (lua_Integer i = 1; i <= n_rows; i++) {
        int top = lua_gettop(L);
        lw_node *row = lw_add_group(list, NULL, &err);
        lwb_check(L, LW_OK, &err);
        if (from == NULL) {
            lua_rawgeti(L, rows, i);
            lwb_want_table(L, top + 1, "job:write_csv", "a row");
        }
        for (lua_Integer c = 1; c <= n_columns; c++) {
            lua_rawgeti(L, wanted, c);
            const char *name = lwb_text(L, -1, "job:write_csv", "a column's name"); /* the list keeps it alive */
            lua_pop(L, 1);
            const lw_node *cell = each ? lw_node_get(each, name) : NULL;
            if (cell != NULL)
                lw_add_copy(row, name, cell, &err);
            else if (from == NULL && lua_getfield(L, top + 1, name) != LUA_TNIL)
                lwb_add_value(L, row, name, lua_gettop(L));
            lua_settop(L, from ? top : top + 1);
        }
        lwb_check(L, LW_OK, &err);
        each = each ? each->next : NULL;
        lua_settop(L, top);
    }
    return list;
}

/* job:write_csv(name, rows, columns): rows is a list of groups of a result, lines, or a list of tables;
 * columns says which and in what order. Without it: all, those of tables in alphabetical order. */
int lwb_job_write_csv(lua_State *L)
{
    lw_error err = LW_ERROR_NONE;
    lwb_self(L, 1, &lwb_recipe_noun, "job:write_csv");
    const char *name = lwb_text(L, 2, "job:write_csv", "the name");
    lua_settop(L, 4);
    bool chosen = !lua_isnil(L, 4);
    if (chosen)
        lwb_want_table(L, 4, "job:write_csv", "the columns");
    const char *path = lwb_push_out_path(L, name, "job:write_csv");
    const lw_node *rows = NULL;
    if (lwb_test(L, 3, &lwb_lines_noun) != NULL || lwb_test(L, 3, &lwb_profiles_noun) != NULL) {
        bool lines = lwb_test(L, 3, &lwb_lines_noun) != NULL;
        lua_getiuservalue(L, 3, lines ? (int)LWB_LINES_TREE : (int)LWB_PROFILES_TREE);
        rows = lw_node_get(((lwb_tree *)lua_touserdata(L, -1))->node, lines ? "lines" : "profiles");
    } else if (lwb_test(L, 3, &lwb_tree_noun) != NULL)
        rows = ((lwb_tree *)lua_touserdata(L, 3))->node;
    else {
        lwb_want_table(L, 3, "job:write_csv", "the rows");
        if (chosen)
            rows = choose_columns(L, NULL, 3, 4);
    }
    if (rows != NULL && chosen && (lwb_test(L, 3, &lwb_tree_noun) != NULL || lwb_road_node(L, 3) != NULL))
        rows = choose_columns(L, rows, 0, 4);
    else if (rows == NULL && lua_istable(L, 3)) {
        lwb_tree *tree = lwb_new_tree(L);
        lwb_add_value(L, tree->root, "rows", 3);
        rows = tree->root->first;
    }
    if (rows == NULL)
        return lwb_refuse(L, NULL, "job:write_csv: there are no rows");
    lwb_check(L, lw_csv_save(lwb_engine(L), path, rows, &err), &err);
    lua_pushvalue(L, 5);
    return 1;
}
