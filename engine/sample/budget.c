/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/budget.h"

#include "physics/scherrer.h"
#include "sample/breadths.h"
#include "sample/budget_parts.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define METHODS_MOST 32

static const char AVERBACH[] = "warren_averbach";

/* Methods that read the counts anew: moving what was fitted does not move them. */
static bool reads_counts(const char *name)
{
    return strcmp(name, "whole_pattern") == 0 || strcmp(name, "variance") == 0;
}

typedef struct budget {
    const lw_profiles *profiles;
    const lw_node *methods, *lattice;
    bool parted; /* the parts below have been found */
    lw__collection collection;
    double *variance; /* [collection.n][LW__PARTS] */
    lw_node *rows;
} budget;

/* A row in the making. */
typedef struct row {
    lw_node *parts;
    double whole, sum; /* variances */
} row;

static void add_part(row *r, const char *source, double variance, lw_error *err)
{
    if (!(r->whole > 0))
        return;
    lw_node *part = lw_add_group(r->parts, NULL, err);
    lw_add_text(part, "source", source, err);
    lw_add_number(part, "u", sqrt(fmax(variance, 0)), err);
    lw_add_number(part, "percent", 100 * variance / r->whole, err);
    r->sum += variance;
}

static row begin_row(const budget *b, const char *path, lw_quantity stated, const char *definition, lw_node **group,
                     lw_error *err)
{
    *group = lw_add_group(b->rows, NULL, err);
    lw_add_text(*group, "quantity", path, err);
    lw_add_quantity(*group, "stated", stated, definition, err);
    return (row){.parts = lw_add_list(*group, "parts", err), .whole = stated.u * stated.u};
}

static void end_row(const row *r, lw_node *group, lw_error *err)
{
    lw_add_number(group, "sum_percent", 100 * r->sum / r->whole, err);
}

/* By how much a method enlarged its u because the lines scatter about its model. */
static double scatter_of(const lw_node *method, const char *quantity)
{
    static const char *const places[] = {"statistics", "size_mean", "strain_mean"};
    double factor = lw_node_number(method, "scatter_factor", 0);
    for (int i = 0; i < 3 && !(factor > 0); i++) {
        bool mine = i == 0 || (strncmp(quantity, "size", 4) == 0) == (i == 1);
        const lw_node *node = lw_node_get(method, places[i]);
        if (mine && node != NULL)
            factor = lw_node_number(node, "scatter_factor", 0);
    }
    return factor > 1 ? factor : 1;
}

/* Variance that the choice of a form stands for: stated by the method, or that of its forms by their weights. */
static double form_variance(const lw_node *method, const char *quantity)
{
    const lw_node *spread = lw_node_get(method, "spread_between_forms"), *forms = lw_node_get(method, "forms");
    if (spread != NULL) {
        bool rms = strcmp(quantity, "strain_rms") == 0;
        double u = lw_node_number(spread, rms ? "strain_apparent" : quantity, 0) * (rms ? LW_RMS_PER_APPARENT : 1);
        return u * u;
    }
    if (forms == NULL || forms->kind != LW_NODE_LIST)
        return 0;
    bool apparent = strcmp(quantity, "strain_apparent") == 0;
    double weight = 0, sum = 0, square = 0, per = apparent ? 1 / LW_RMS_PER_APPARENT : 1;
    if (apparent)
        quantity = "strain_rms";
    for (const lw_node *form = forms->first; form != NULL; form = form->next) {
        double w = lw_node_number(form, "weight", 0), x = lw_node_number(form, quantity, NAN);
        if (!(w > 0) || !isfinite(x))
            continue;
        weight += w;
        sum += w * x;
        square += w * x * x;
    }
    return weight > 0 ? per * per * fmax(square / weight - sum * sum / (weight * weight), 0) : 0;
}

/* Variance that the distance to other readings of the same breadths stands for (see reading.h). */
static double model_variance(const lw_node *method, const char *quantity)
{
    const lw_node *told = lw_node_get(method, "model_difference");
    bool apparent = strcmp(quantity, "strain_apparent") == 0;
    double u = told != NULL ? lw_node_number(told, apparent ? "strain_rms" : quantity, 0) : 0;
    return u * u / (apparent ? LW_RMS_PER_APPARENT * LW_RMS_PER_APPARENT : 1);
}

/* What came through fit and calibration; its sum. */
static double add_propagated(const budget *b, size_t entry, row *r, lw_error *err)
{
    static const char *const names[LW__PARTS] = {"counting", "background", "misfit", "calibration", "wavelength", "scattering"};
    const double *variance = b->variance + entry * LW__PARTS;
    double sum = 0;
    for (int p = 0; p < LW__PARTS; p++) {
        sum += variance[p];
        bool asked = p != LW__MISFIT && p != LW__SCATTERING; /* told even if it is nothing */
        if (asked || variance[p] > 1e-4 * r->whole)
            add_part(r, names[p], variance[p], err);
    }
    return sum;
}

static void tell_row(const budget *b, size_t entry, const lw_node *method, const char *quantity, lw_error *err)
{
    const lw__collected *c = &b->collection.entry[entry];
    if (c->node->quantity.kind != LW_VALUE || !(c->node->quantity.u > 0) || !isfinite(c->node->quantity.u))
        return;
    const char *name = method != NULL ? method->name : "";
    double scatter = method != NULL ? scatter_of(method, quantity) : 1;
    double form = method != NULL ? form_variance(method, quantity) : 0;
    double model = method != NULL ? fmax(model_variance(method, quantity) - form, 0) : 0; /* it holds the form */
    bool parted = b->parted && !reads_counts(name), averbach = strcmp(name, AVERBACH) == 0;
    if (parted && isnan(b->variance[entry * LW__PARTS]))
        return;
    if (parted && averbach) { /* its ranges go by whole steps of L: where one jumps, slopes tell nothing */
        double sum = 0;
        for (int p = 0; p < LW__PARTS; p++)
            sum += b->variance[entry * LW__PARTS + (size_t)p];
        parted = sum <= c->node->quantity.u * c->node->quantity.u;
    }
    lw_node *group;
    row r = begin_row(b, c->path, c->node->quantity, c->node->definition, &group, err);
    double rest = fmax(r.whole - form - model, 0), enlarged = rest * (1 - 1 / (scatter * scatter));
    if (parted)
        enlarged = add_propagated(b, entry, &r, err) * (scatter * scatter - 1);
    else
        add_part(&r, "propagated", rest - enlarged, err);
    if (enlarged > 0)
        add_part(&r, "scatter", enlarged, err);
    if (form > 0)
        add_part(&r, "form", form, err);
    if (parted && averbach) /* its range of the slope, the Voigts' own shape: by difference */
        model = fmax(r.whole - r.sum, 0);
    if (model > 0)
        add_part(&r, "model", model, err);
    end_row(&r, group, err);
}

/* Scherrer's constant where nobody named a shape: means over the lines for each shape, lowest and highest. */
static bool constants(const lw_profiles *profiles, double *low, double *high)
{
    static const lw_shape shapes[] = {LW_SHAPE_SPHERE, LW_SHAPE_CUBE, LW_SHAPE_TETRAHEDRON, LW_SHAPE_OCTAHEDRON};
    *low = INFINITY;
    *high = -INFINITY;
    if (profiles->lines->material == NULL || profiles->lines->material->system != LW_CUBIC)
        return false;
    for (size_t i = 0; i < sizeof shapes / sizeof *shapes; i++) {
        double sum = 0;
        for (size_t k = 0; k < profiles->n; k++) {
            const lw_reflection *r = &profiles->profile[k].line->reflection;
            lw_error none = LW_ERROR_NONE;
            double K;
            if (lw_scherrer_constant(shapes[i], true, r->h, r->k, r->l, &K, &none) != LW_OK)
                return false;
            sum += K / (double)profiles->n;
        }
        *low = fmin(*low, sum);
        *high = fmax(*high, sum);
    }
    return true;
}

/* The size of crystallites whose shape is not known, from the column length above it. */
static void tell_constant(const budget *b, size_t entry, const lw_node *method, lw_error *err)
{
    const lw_quantity *columns = &b->collection.entry[entry].node->quantity;
    double low, high;
    if (columns->kind != LW_VALUE || strcmp(lw_node_text(method, "shape", ""), "column") != 0 ||
        !constants(b->profiles, &low, &high))
        return;
    double K = 0.5 * (low + high), u_K = 0.5 * (high - low) / sqrt(3), from_K = columns->value * u_K;
    lw_node *group;
    row r = begin_row(b, "methods.scherrer.size", lw_quantity_of(K * columns->value, hypot(K * columns->u, from_K), "nm"),
                      "Cube root of the volume of crystallites that are spheres, cubes, tetrahedra or octahedra: nobody said "
                      "which, so the constant K is the middle of its range, and the range is in u.",
                      &group, err);
    add_part(&r, "breadth", K * K * columns->u * columns->u, err);
    add_part(&r, "constant", from_K * from_K, err);
    lw_add_number(group, "K", K, err);
    lw_add_number(group, "u_K", u_K, err);
    end_row(&r, group, err);
}

static bool is_main(const char *name)
{
    static const char *const names[] = {"size_volume", "size_area", "strain_rms", "strain_apparent", NULL};
    for (size_t i = 0; names[i] != NULL; i++)
        if (strcmp(names[i], name) == 0)
            return true;
    return false;
}

static void tell_rows(const budget *b, lw_error *err)
{
    for (size_t i = 0; i < b->collection.n; i++) {
        const char *path = b->collection.entry[i].path, *last = strrchr(path, '.');
        size_t dots = 0;
        for (const char *c = path; *c != '\0'; c++)
            dots += *c == '.';
        if (dots == 2 && strncmp(path, "methods.", 8) == 0 && is_main(last + 1)) {
            char name[64] = "";
            size_t n = (size_t)(last - path) - 8;
            if (n >= sizeof name)
                continue;
            memcpy(name, path + 8, n);
            const lw_node *method = lw_node_get(b->methods, name);
            tell_row(b, i, method, last + 1, err);
            if (strcmp(path, "methods.scherrer.size_volume") == 0)
                tell_constant(b, i, method, err);
        } else if (dots == 1 && strncmp(path, "lattice.", 8) == 0 && strlen(last) == 2)
            tell_row(b, i, b->lattice, last + 1, err);
        else if (dots == 2 && strncmp(path, "lines.", 6) == 0 && strcmp(last, ".breadth_sample") == 0)
            tell_row(b, i, NULL, last + 1, err);
    }
}

static bool knows_wavelength(const lw_profiles *profiles)
{
    const lw_aberrations *set = profiles->calibration != NULL ? &profiles->calibration->aberrations : NULL;
    for (size_t i = 0; set != NULL && i < set->n; i++)
        if (strcmp(set->kind[i]->name, "wavelength") == 0)
            return set->covariance[i][i] > 0;
    return false;
}

double lw_budget_u(const lw_node *results, const char *path, const char *const *sources)
{
    const lw_node *rows = lw_node_get(lw_node_get(results, "budget"), "rows");
    for (const lw_node *r = rows != NULL ? rows->first : NULL; r != NULL; r = r->next) {
        if (strcmp(lw_node_text(r, "quantity", ""), path) != 0)
            continue;
        double sum = 0;
        for (const lw_node *part = lw_node_get(r, "parts")->first; part != NULL; part = part->next) {
            if (strcmp(lw_node_text(part, "source", ""), "propagated") == 0)
                return NAN;
            for (size_t i = 0; sources[i] != NULL; i++)
                if (strcmp(lw_node_text(part, "source", ""), sources[i]) == 0)
                    sum += pow(lw_node_number(part, "u", 0), 2);
        }
        return sqrt(sum);
    }
    return NAN;
}

lw_status lw_budget(lw_engine *engine, const lw_profiles *profiles, lw_node *results, lw_error *err)
{
    static const char *const parts[] = {"methods", "lattice", "lines", NULL};
    const lw_lines *lines = profiles->lines;
    const lw_node *methods = lw_node_get(results, "methods");
    if (lines->options == NULL || profiles->options == NULL || lines->covariance == NULL || methods == NULL)
        return LW_OK;
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    budget b = {.profiles = profiles, .methods = methods, .lattice = lw_node_get(results, "lattice"),
                .parted = strcmp(profiles->method, "convolution") == 0};
    lw_status status = lw__collect_begin(results, parts, 0, &arena, &b.collection, err);
    const char *names[METHODS_MOST];
    size_t n = 0;
    for (const lw_node *m = methods->first; m != NULL && n < METHODS_MOST; m = m->next)
        if (!reads_counts(m->name) && lw_node_get(m, "not_applied") == NULL)
            names[n++] = m->name;
    if (status == LW_OK && b.parted) {
        b.variance = lw_arena_take(&arena, b.collection.n * LW__PARTS, sizeof(double), err);
        status = b.variance == NULL ? LW_OUT_OF_MEMORY
                                    : lw__budget_parts(engine, profiles, names, n, &b.collection, &arena, b.variance, err);
    }
    lw_node *group = status == LW_OK ? lw_add_group(results, "budget", err) : NULL;
    if (group != NULL) {
        lw_add_text(group, "definition",
                    "Parts of each quantity's standard uncertainty, in its unit and as a share of its variance. counting, "
                    "background (what not knowing it adds), misfit (by how much it widened both), calibration and wavelength "
                    "come through the fit of the lines; propagated: all of these together; scatter: the lines scatter about "
                    "the method's model; form: how size and strain add; model: distance to other readings of the same "
                    "breadths, or ranges chosen; constant: Scherrer's K of an unknown shape. A column length is free of K.",
                    err);
        if (!b.parted)
            lw_add_text(group, "remark",
                        "this way of taking the instrument out reads the counts again: what comes through the fit is told "
                        "together, as propagated; sources = \"counting\" or \"calibration\" with uncertainty = "
                        "\"monte_carlo\" parts it",
                        err);
        if (!knows_wavelength(profiles))
            lw_add_text(group, "wavelength",
                        "taken as exact: neither the calibration nor the radiation's table gives it an uncertainty", err);
        lw_add_text(group, "source", "JCGM 100:2008, 4.3.7, 5 and 8", err);
        b.rows = lw_add_list(group, "rows", err);
        tell_rows(&b, err);
        status = err->status;
    }
    lw_arena_end(&arena);
    return status;
}
