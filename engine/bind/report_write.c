/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a report leaves behind: report.html and its figures. */
#include "bind/figures.h"
#include "bind/outputs.h"
#include "bind/reports.h"
#include "record/gnuplot.h"
#include "record/report.h"

#include <stdio.h>
#include <string.h>

/* figures/NAME with the prefix of its section, without a suffix. The lists lie at `figures` and after it. */
static void file_name(lua_State *L, int figures, lua_Integer i, char name[256])
{
    lua_rawgeti(L, figures, i);
    const lwb_figure *figure = lwb_self(L, -1, &lwb_figure_noun, "job:write");
    lua_rawgeti(L, figures + 1, i);
    const char *prefix = lua_tostring(L, -1);
    snprintf(name, 256, "figures/%.100s%s%.100s", prefix, prefix[0] != '\0' ? "_" : "", figure->figure->name);
    lua_pop(L, 2);
}

/* Writes every figure that the report shows; the second of a name gets a number. */
static void write_figures(lua_State *L, int index)
{
    static const char *const suffix[] = {"svg", "png"};
    lw_error err = LW_ERROR_NONE;
    lua_getiuservalue(L, index, LWB_REPORT_FIGURES);
    int figures = lua_gettop(L);
    lua_getiuservalue(L, index, LWB_REPORT_PREFIXES);
    for (lua_Integer i = 1, n = (lua_Integer)lua_rawlen(L, figures); i <= n; i++) {
        char name[256], other[256], whole[300], number[16] = "";
        int same = 1;
        file_name(L, figures, i, name);
        for (lua_Integer j = 1; j < i; j++) {
            file_name(L, figures, j, other);
            same += strcmp(other, name) == 0;
        }
        if (same > 1)
            snprintf(number, sizeof number, "_%d", same);
        lua_rawgeti(L, figures, i);
        const lwb_figure *figure = lwb_self(L, -1, &lwb_figure_noun, "job:write");
        for (int k = 0; k < 2; k++) {
            snprintf(whole, sizeof whole, "%s%s.%s", name, number, suffix[k]);
            const char *file = lwb_push_out_path(L, whole, "job:write");
            lwb_check(L, lw_figure_save_as(lwb_engine(L), figure->figure, file, &err), &err);
            lua_pop(L, 1);
        }
        lua_pop(L, 1);
    }
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
    lua_getiuservalue(L, index, LWB_REPORT_SUBJECT);
    lwb_add_provenance(L, tree->root, -1);
    lwb_check(L, lw_report_provenance(report, tree->root->first, &err), &err);
    lwb_check(L, lw_report_save(lwb_engine(L), report, path, &err), &err);
    if (lw_report_warning(report) != NULL)
        fprintf(stderr, "warning: figures are missing: %s\n", lw_report_warning(report));
    else
        write_figures(L, index);
    lua_settop(L, top);
}
