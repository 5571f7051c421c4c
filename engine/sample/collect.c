/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/collect.h"

#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#define PATH_MOST 200

/* Drawings, and groups that tell parts of an uncertainty: no quantities of the powder. */
static bool is_aside(const lw_node *node)
{
    static const char *const names[] = {"figure", "figures", "spread_between_forms", "model_difference", NULL};
    for (size_t i = 0; node->name != NULL && names[i] != NULL; i++)
        if (strcmp(node->name, names[i]) == 0)
            return true;
    return false;
}

/* Appends the name of a child to a path of length `used`; its new length, or 0 if it is too long. */
static size_t append(char *path, size_t used, const lw_node *child, size_t number)
{
    const char *hkl = child->kind == LW_NODE_GROUP ? lw_node_text(child, "hkl", NULL) : NULL;
    int n = child->name != NULL ? snprintf(path + used, PATH_MOST - used, "%s%s", used ? "." : "", child->name)
            : hkl != NULL       ? snprintf(path + used, PATH_MOST - used, "%s%s", used ? "." : "", hkl)
                                : snprintf(path + used, PATH_MOST - used, "%s%zu", used ? "." : "", number);
    return n > 0 && used + (size_t)n < PATH_MOST ? used + (size_t)n : 0;
}

/* Counts the quantities below a node, or, with `entry`, notes them. */
static size_t walk(const lw_node *node, char *path, size_t used, lw_arena *arena, lw__collected *entry, size_t n,
                   lw_error *err)
{
    if (node->kind == LW_NODE_QUANTITY) {
        if (entry != NULL)
            entry[n] = (lw__collected){.path = lw_arena_text(arena, path, err), .node = node};
        return n + 1;
    }
    if ((node->kind != LW_NODE_GROUP && node->kind != LW_NODE_LIST) || is_aside(node))
        return n;
    size_t number = 1;
    for (const lw_node *child = node->first; child != NULL; child = child->next) {
        size_t longer = append(path, used, child, number++);
        if (longer > 0)
            n = walk(child, path, longer, arena, entry, n, err);
    }
    return n;
}

static size_t walk_all(const lw_node *results, const char *const *names, lw_arena *arena, lw__collected *entry,
                       lw_error *err)
{
    char path[PATH_MOST];
    size_t n = 0;
    for (size_t i = 0; names[i] != NULL; i++) {
        const lw_node *child = lw_node_get(results, names[i]);
        size_t used = child != NULL ? append(path, 0, child, 1) : 0;
        if (used > 0)
            n = walk(child, path, used, arena, entry, n, err);
    }
    return n;
}

lw_status lw__collect_begin(const lw_node *results, const char *const *names, size_t most, lw_arena *arena,
                            lw__collection *collection, lw_error *err)
{
    *collection = (lw__collection){.n = walk_all(results, names, arena, NULL, err), .most = most};
    collection->entry = lw_arena_take(arena, collection->n, sizeof *collection->entry, err);
    if (collection->entry == NULL)
        return LW_OUT_OF_MEMORY;
    walk_all(results, names, arena, collection->entry, err);
    for (size_t i = 0; i < collection->n; i++) {
        lw__collected *entry = &collection->entry[i];
        entry->value = lw_arena_take(arena, most, sizeof(double), err);
        if (entry->path == NULL || entry->value == NULL)
            return LW_OUT_OF_MEMORY;
    }
    return LW_OK;
}

/* The child that a piece of a path names. */
static const lw_node *child_named(const lw_node *parent, const char *name)
{
    if (parent->kind == LW_NODE_GROUP)
        return lw_node_get(parent, name);
    if (parent->kind != LW_NODE_LIST)
        return NULL;
    bool by_hkl = false;
    for (const lw_node *child = parent->first; child != NULL; child = child->next) {
        const char *hkl = child->kind == LW_NODE_GROUP ? lw_node_text(child, "hkl", NULL) : NULL;
        by_hkl |= hkl != NULL;
        if (hkl != NULL && strcmp(hkl, name) == 0)
            return child;
    }
    long number = strtol(name, NULL, 10);
    return !by_hkl && number >= 1 ? lw_node_at(parent, (size_t)number - 1) : NULL;
}

const lw_node *lw__node_at_path(const lw_node *results, const char *path)
{
    const lw_node *node = results;
    while (node != NULL && *path != '\0') {
        char name[PATH_MOST];
        size_t n = strcspn(path, ".");
        if (n >= sizeof name)
            return NULL;
        memcpy(name, path, n);
        name[n] = '\0';
        node = child_named(node, name);
        path += n + (path[n] == '.');
    }
    return node;
}

void lw__collect(lw__collection *collection, const lw_node *results)
{
    if (collection->taken == collection->most)
        return;
    for (size_t i = 0; i < collection->n; i++) {
        lw__collected *entry = &collection->entry[i];
        const lw_node *node = results != NULL ? lw__node_at_path(results, entry->path) : NULL;
        double value = NAN;
        if (node != NULL && node->kind == LW_NODE_QUANTITY)
            value = node->quantity.kind == LW_LOWER_LIMIT   ? INFINITY
                    : node->quantity.kind == LW_UPPER_LIMIT ? -INFINITY
                                                            : node->quantity.value;
        entry->value[collection->taken] = value;
    }
    collection->taken++;
}

/* NAN where the quantile falls on a limit, or between one and a number. */
static double quantile(const double *sorted, size_t n, double p)
{
    double value = lw_quantile_of_sorted(sorted, n, p);
    return isfinite(value) ? value : NAN;
}

/* How far a quantile of n draws may be off: the rank is binomial, its standard deviation carried to the values beside
 * it (David & Nagaraja 2003, Order Statistics, 7.1; from memory). */
static double quantile_u(const double *sorted, size_t n, double p)
{
    double spread = sqrt(p * (1 - p) / (double)n), low = fmax(p - spread, 0), high = fmin(p + spread, 1);
    return (quantile(sorted, n, high) - quantile(sorted, n, low)) * spread / (high - low);
}

lw__summary lw__summarise(const lw__collection *collection, size_t entry, double *scratch)
{
    const double *value = collection->entry[entry].value;
    lw__summary out = {.mean = NAN, .u = NAN, .low = NAN, .high = NAN, .u_low = NAN, .u_high = NAN};
    size_t n = 0;
    for (size_t i = 0; i < collection->taken; i++) {
        if (isnan(value[i]))
            out.missing++;
        else if (isinf(value[i]))
            out.limits++;
        else
            scratch[n++] = value[i];
    }
    out.values = n;
    if (n >= 2)
        out.mean = lw_mean(scratch, n, &out.u);
    for (size_t i = 0; i < collection->taken; i++)
        if (isinf(value[i]))
            scratch[n++] = value[i];
    if (n < 2)
        return out;
    lw_sort(scratch, n);
    out.low = quantile(scratch, n, 0.025);
    out.high = quantile(scratch, n, 0.975);
    out.u_low = quantile_u(scratch, n, 0.025);
    out.u_high = quantile_u(scratch, n, 0.975);
    return out;
}
