/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "bind/report_parts.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define NAME_MOST 200

/* A path as a person reads it: "methods.williamson_hall.size_volume" is size_volume of Williamson-Hall. */
static void add_place(lw_node *row, const lw_node *results, const char *path, lw_error *err)
{
    char where[NAME_MOST] = "";
    const char *last = strrchr(path, '.'), *first = strchr(path, '.');
    size_t n = last != NULL && first != NULL && last > first ? (size_t)(last - first - 1) : 0;
    if (n > 0 && n < sizeof where)
        memcpy(where, first + 1, n);
    if (strncmp(path, "methods.", 8) == 0) {
        const lw_node *method = lw_node_get(lw_node_get(results, "methods"), where);
        lw_add_text(row, "of", method != NULL ? lw_node_text(method, "title", where) : where, err);
    } else if (strncmp(path, "lines.", 6) == 0) {
        char line[NAME_MOST + 8];
        snprintf(line, sizeof line, "line %s", where);
        lw_add_text(row, "of", line, err);
    } else
        lw_add_text(row, "of", "Cell", err);
    lw_add_text(row, "quantity", last != NULL ? last + 1 : path, err);
}

/* Rows of methods themselves (not of what lies in them) and of the cell. */
static bool is_first_hand(const char *path)
{
    size_t dots = 0;
    for (const char *c = path; *c != '\0'; c++)
        dots += *c == '.';
    return (strncmp(path, "methods.", 8) == 0 && dots == 2) ||
           (strncmp(path, "lattice.", 8) == 0 && dots == 1 && strlen(path) == 9);
}

/* The parts of one row in one cell, the largest first: what is nothing comes last. */
static void add_parts(lw_node *row, const lw_node *parts, lw_error *err)
{
    char cell[700] = "";
    size_t used = 0, told = 0;
    double below = INFINITY;
    while (told < parts->n && used + 80 < sizeof cell) {
        double next = -1;
        for (const lw_node *part = parts->first; part != NULL; part = part->next) {
            double u = lw_node_number(part, "u", 0);
            if (u < below && u > next)
                next = u;
        }
        if (next < 0)
            break;
        for (const lw_node *part = parts->first; part != NULL && used + 80 < sizeof cell; part = part->next) {
            double u = lw_node_number(part, "u", 0), percent = lw_node_number(part, "percent", 0);
            if (u < next || u > next)
                continue;
            char share[24] = "0";
            if (percent >= 0.05)
                snprintf(share, sizeof share, "%.2g (%.*f %%)", u, percent < 9.95 ? 1 : 0, percent);
            else if (u > 0)
                snprintf(share, sizeof share, "%.2g", u);
            used += (size_t)snprintf(cell + used, sizeof cell - used, "%s%.20s %s", used > 0 ? ", " : "",
                                     lw_node_text(part, "source", ""), share);
            told++;
        }
        below = next;
    }
    lw_add_text(row, "parts", cell, err);
}

/* Shares of the variance in per cent, kindred sources in one column. */
static void add_shares(lw_node *row, const lw_node *parts, lw_error *err)
{
    static const struct {
        const char *column, *source[4];
    } kin[] = {{"counting", {"counting"}},       {"background", {"background"}}, {"fit", {"propagated", "breadth"}},
               {"calibration", {"calibration"}}, {"wavelength", {"wavelength"}}, {"scatter", {"misfit", "scatter", "scattering"}},
               {"model", {"form", "model"}},     {"K", {"constant"}}};
    for (size_t i = 0; i < sizeof kin / sizeof *kin; i++) {
        double sum = 0;
        bool any = false;
        for (const lw_node *part = parts->first; part != NULL; part = part->next)
            for (size_t k = 0; k < 4 && kin[i].source[k] != NULL; k++)
                if (strcmp(lw_node_text(part, "source", ""), kin[i].source[k]) == 0) {
                    sum += lw_node_number(part, "percent", 0);
                    any = true;
                }
        char text[24];
        snprintf(text, sizeof text, sum >= 9.95 ? "%.0f" : sum >= 0.05 ? "%.1f" : sum > 0 ? "< 0.1" : "0", sum);
        if (any)
            lw_add_text(row, kin[i].column, text, err);
    }
}

/* With `shares` a short table in per cent, else every part in the quantity's unit. */
static void add_budget(lua_State *L, lw_report *report, const lw_node *results, const lw_node *budget, bool first_hand,
                       bool shares)
{
    static const char *const short_ones[] = {"of",         "quantity", "stated", "counting", "background", "calibration",
                                             "wavelength", "fit",      "scatter", "model",   "K",          NULL};
    static const char *const long_ones[] = {"of", "quantity", "stated", "parts", "together", NULL};
    lw_error err = LW_ERROR_NONE;
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *rows = lw_add_list(scratch->root, "rows", &err);
    const lw_node *list = lw_node_get(budget, "rows");
    for (const lw_node *from = list != NULL ? list->first : NULL; from != NULL; from = from->next) {
        const char *path = lw_node_text(from, "quantity", "");
        /* the apparent strain is the rms strain times a number */
        if (is_first_hand(path) != first_hand || strstr(path, ".strain_apparent") != NULL)
            continue;
        char text[32];
        lw_node *row = lw_add_group(rows, NULL, &err);
        add_place(row, results, path, &err);
        lw_add_quantity(row, "stated", lw_node_get(from, "stated")->quantity, NULL, &err);
        (shares ? add_shares : add_parts)(row, lw_node_get(from, "parts"), &err);
        snprintf(text, sizeof text, "%.0f %%", lw_node_number(from, "sum_percent", 0));
        lw_add_text(row, "together", text, &err);
    }
    lwb_check(L, LW_OK, &err);
    if (rows->first != NULL) {
        if (shares) {
            lwb_check(L, lw_report_subheading(report, "Where the uncertainty comes from", &err), &err);
            lwb_check(L, lw_report_text(report, lw_node_text(budget, "definition", ""), &err), &err);
        }
        lwb_check(L,
                  lw_report_table(report,
                                  shares       ? "Budget: shares of the variance in per cent; each part in its unit is folded away below"
                                  : first_hand ? "Budget: each part as standard uncertainty and share of the variance; together, "
                                                 "of the whole"
                                               : "Budget of the lines' breadths",
                                  rows, shares ? short_ones : long_ones, &err),
                  &err);
    }
    lua_pop(L, 1);
}

/* How it was done, in a sentence or two. */
static void tell_how(lua_State *L, lw_report *report, const lw_node *uncertainty)
{
    lw_error err = LW_ERROR_NONE;
    luaL_Buffer text;
    char numbers[240];
    luaL_buffinit(L, &text);
    snprintf(numbers, sizeof numbers, "%.0f realisations, seed %.0f; every u of theirs is good to %.1f %%. ",
             lw_node_number(uncertainty, "realisations", 0), lw_node_number(uncertainty, "seed", 0),
             100 * lw_node_number(uncertainty, "relative_accuracy", 0));
    luaL_addstring(&text, numbers);
    double failed = lw_node_number(uncertainty, "failed", 0);
    if (failed > 0) {
        snprintf(numbers, sizeof numbers, "%.0f of them gave nothing: %.150s. ", failed,
                 lw_node_text(uncertainty, "failed_because", ""));
        luaL_addstring(&text, numbers);
    }
    luaL_addstring(&text, "Drawn: ");
    const lw_node *sources = lw_node_get(uncertainty, "sources");
    for (const lw_node *source = sources != NULL ? sources->first : NULL; source != NULL; source = source->next) {
        luaL_addstring(&text, source->text);
        luaL_addstring(&text, source->next != NULL ? "; " : ". ");
    }
    luaL_addstring(&text, lw_node_text(uncertainty, "definition", ""));
    luaL_pushresult(&text);
    lwb_check(L, lw_report_text(report, lua_tostring(L, -1), &err), &err);
    lua_pop(L, 1);
}

static void add_realisations(lua_State *L, lw_report *report, const lw_node *results, const lw_node *uncertainty,
                             bool first_hand)
{
    static const char *const columns[] = {"of",    "quantity",       "analytic", "drawn",   "low", "high",
                                          "ratio", "ratio_of_parts", "limits",   "missing", NULL};
    lw_error err = LW_ERROR_NONE;
    bool bootstrap = strcmp(lw_node_text(uncertainty, "how", ""), "bootstrap") == 0;
    lwb_tree *scratch = lwb_new_tree(L);
    lw_node *rows = lw_add_list(scratch->root, "rows", &err);
    const lw_node *list = lw_node_get(uncertainty, "quantities");
    for (const lw_node *from = list != NULL ? list->first : NULL; from != NULL; from = from->next) {
        const char *path = lw_node_text(from, "quantity", "");
        if (is_first_hand(path) != first_hand || (first_hand && strstr(path, ".strain_apparent") != NULL))
            continue;
        lw_node *row = lw_add_group(rows, NULL, &err);
        add_place(row, results, path, &err);
        for (size_t i = 2; columns[i] != NULL; i++) {
            const lw_node *value = lw_node_get(from, columns[i]);
            bool nothing = i >= 8 && value != NULL && !(value->number > 0); /* no limits, none missing */
            if (value != NULL && value->kind == LW_NODE_NUMBER && i < 8) {
                char ratio[24];
                snprintf(ratio, sizeof ratio, "%.2f", value->number);
                lw_add_text(row, columns[i], ratio, &err);
            } else if (value != NULL && !nothing)
                lw_add_copy(row, columns[i], value, &err);
        }
    }
    lwb_check(L, LW_OK, &err);
    if (rows->first != NULL) {
        if (first_hand) {
            lwb_check(L, lw_report_subheading(report, bootstrap ? "By bootstrap" : "By Monte Carlo", &err), &err);
            tell_how(L, report, uncertainty);
        }
        lwb_check(L,
                  lw_report_table(report,
                                  first_hand ? "Stated values beside mean and standard deviation of the realisations, their 95 % "
                                               "interval, and the ratio of their u to the stated one and to what the budget "
                                               "has for the sources drawn"
                                             : "The same of lines, and of what the methods tell besides",
                                  rows, columns, &err),
                  &err);
    }
    lua_pop(L, 1);
}

void lwb_report_parts(lua_State *L, lw_report *report, const lw_node *results, bool first_hand)
{
    const lw_node *budget = lw_node_get(results, "budget"), *uncertainty = lw_node_get(results, "uncertainty");
    if (budget != NULL && budget->kind == LW_NODE_GROUP) {
        if (!first_hand)
            add_budget(L, report, results, budget, true, false);
        add_budget(L, report, results, budget, first_hand, first_hand);
    }
    if (uncertainty != NULL && uncertainty->kind == LW_NODE_GROUP)
        add_realisations(L, report, results, uncertainty, first_hand);
}
