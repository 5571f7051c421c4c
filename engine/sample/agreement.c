/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/agreement.h"

#include "sample/shared.h"

#include <math.h>
#include <string.h>

#define PULL_MOST 3.0

static const char *const fields[] = {"size_volume", "size_area", "strain_rms", NULL};

static bool either(const char *a, const char *b, const char *name)
{
    return strcmp(a, name) == 0 || strcmp(b, name) == 0;
}

static bool by_breadth(const char *name)
{
    return strcmp(name, "scherrer") == 0 || strcmp(name, "williamson_hall") == 0 ||
           strcmp(name, "halder_wagner") == 0 || strcmp(name, "single_line_voigt") == 0 ||
           strcmp(name, "double_voigt") == 0;
}

/* Whether a remark of any method says so. */
static bool remarked(const lw_node *methods, const char *words)
{
    for (const lw_node *m = methods->first; m != NULL; m = m->next) {
        const lw_node *remarks = lw_node_get(m, "remarks");
        for (const lw_node *r = remarks != NULL ? remarks->first : NULL; r != NULL; r = r->next)
            if (r->text != NULL && strstr(r->text, words) != NULL)
                return true;
    }
    return false;
}

static const char *by_methods(const char *field, const char *first, const char *second, double difference)
{
    bool size = strncmp(field, "size", 4) == 0;
    if (size && either(first, second, "scherrer")) {
        bool smaller = strcmp(first, "scherrer") == 0 ? difference < 0 : difference > 0;
        return smaller ? "Scherrer reads all breadth as size; strain is present, so its size is too small"
                       : "the other method finds less size broadening than the mean breadth allows: breadths "
                         "fall with s, as with planar faults or flat crystallites";
    }
    if (either(first, second, "single_line_voigt"))
        return "the single-line method takes each line's Gaussian part for strain and its Lorentzian part for size; "
               "a narrow distribution of sizes has a Gaussian part of its own";
    if (either(first, second, "variance"))
        return "the variance rests on tails far out: a background that is off, tails of dislocations (which fall as 1/s^3) or "
               "too short a range change it before anything else";
    if (either(first, second, "double_voigt"))
        return "double Voigt needs lines that are Voigts: round crystals with a spread of sizes are none, and a Voigt's "
               "area-weighted size hangs on its Lorentzian tails; the width of the size distribution decides which is right";
    if (either(first, second, "warren_averbach") && either(first, second, "whole_pattern"))
        return "Warren-Averbach reads the orders of one direction, whose coefficients hang on tails and background; the whole "
               "pattern reads all lines by a model of the crystals";
    if (either(first, second, "warren_averbach"))
        return "Warren-Averbach's coefficients are cut off where noise or neighbours begin: tails lost by truncation show as a "
               "hook and change sizes";
    if (by_breadth(first) && by_breadth(second))
        return "the methods add size and strain breadths by different rules, of which none is exact; column-length methods "
               "need no such rule";
    if (by_breadth(first) != by_breadth(second))
        return "one method reads breadths, which weigh tails and need a rule of addition, the other the whole shape";
    return "the methods treat the lines' tails and the background differently";
}

const char *lw_agreement_reason(const lw_profiles *profiles, const lw_node *methods, const char *field, const lw_node *first,
                                const lw_node *second)
{
    const lw_node *a = lw_node_get(first, field), *b = lw_node_get(second, field);
    double difference = a->quantity.value - b->quantity.value;
    bool known = strncmp(field, "size", 4) == 0 && either(first->name, second->name, "scherrer"); /* by definition */
    if (!known && (a->quantity.kind != LW_VALUE || b->quantity.kind != LW_VALUE))
        return "one method does not resolve it and gives a limit, which rests on its own rule of how size and strain add";
    if (!known && profiles->n < 3)
        return "with fewer than three lines, or two orders of a direction, nothing tests how size and strain are told apart";
    if (!known && remarked(methods, "depend on direction"))
        return "breadths depend on direction: methods that take all lines alike and methods that read some of them see "
               "different crystals";
    return by_methods(field, first->name, second->name, difference);
}

/* Pull of two values, or of a value against the side that a limit forbids; false if they can't be compared. */
static bool pull_of(lw_quantity a, lw_quantity b, double covariance, double *pull)
{
    if (a.kind != LW_VALUE && b.kind != LW_VALUE)
        return false;
    double u_a = a.kind == LW_VALUE ? a.u : 0, u_b = b.kind == LW_VALUE ? b.u : 0;
    /* two methods that do the same to the same breadths differ by rounding, which is no disagreement */
    double u = sqrt(fmax(u_a * u_a + u_b * u_b - 2 * covariance, 1e-6 * (u_a * u_a + u_b * u_b)));
    if (!(u > 0) || !isfinite(a.value) || !isfinite(b.value))
        return false;
    *pull = (a.value - b.value) / u;
    bool fine = (a.kind == LW_LOWER_LIMIT && *pull < 0) || (a.kind == LW_UPPER_LIMIT && *pull > 0) ||
                (b.kind == LW_LOWER_LIMIT && *pull > 0) || (b.kind == LW_UPPER_LIMIT && *pull < 0);
    if (fine)
        *pull = 0;
    return true;
}

/* One field: values, pairs. True if all pairs agree. */
static bool tell_field(const lw_profiles *profiles, const lw_node *methods, const char *field, lw_node *agreement,
                       lw_error *err)
{
    size_t n = 0;
    for (const lw_node *m = methods->first; m != NULL; m = m->next) {
        const lw_node *value = lw_node_get(m, field);
        n += value != NULL && value->kind == LW_NODE_QUANTITY;
    }
    if (n == 0)
        return true;
    bool agree = true;
    lw_node *group = lw_add_group(agreement, field, err);
    lw_node *values = lw_add_group(group, "values", err);
    lw_node *pairs = lw_add_list(group, "pairs", err);
    for (const lw_node *a = methods->first; a != NULL; a = a->next) {
        const lw_node *first = lw_node_get(a, field);
        if (first == NULL || first->kind != LW_NODE_QUANTITY)
            continue;
        lw_add_quantity(values, a->name, first->quantity, first->definition, err);
        for (const lw_node *b = a->next; b != NULL; b = b->next) {
            const lw_node *second = lw_node_get(b, field);
            double pull, covariance;
            bool shared = lw_shared_covariance(profiles, a, b, field, &covariance);
            if (second == NULL || second->kind != LW_NODE_QUANTITY ||
                !pull_of(first->quantity, second->quantity, covariance, &pull))
                continue;
            bool fits = fabs(pull) <= PULL_MOST;
            lw_node *pair = lw_add_group(pairs, NULL, err);
            lw_add_text(pair, "first", a->name, err);
            lw_add_text(pair, "second", b->name, err);
            lw_add_number(pair, "pull", pull, err);
            if (shared)
                lw_add_number(pair, "correlation", covariance / (first->quantity.u * second->quantity.u), err);
            lw_add_flag(pair, "agree", fits, err);
            if (!fits)
                lw_add_text(pair, "likely_reason", lw_agreement_reason(profiles, methods, field, a, b), err);
            agree = agree && fits;
        }
    }
    lw_add_flag(group, "agree", agree, err);
    return agree;
}

void lw_agreement(const lw_profiles *profiles, const lw_node *methods, lw_node *results, lw_error *err)
{
    lw_node *agreement = lw_add_group(results, "agreement", err);
    if (methods == NULL || agreement == NULL)
        return;
    bool agree = true;
    for (size_t i = 0; fields[i] != NULL; i++)
        agree = tell_field(profiles, methods, fields[i], agreement, err) && agree;
    lw_add_flag(agreement, "agree", agree, err);
    lw_add_text(
        agreement, "definition",
        "A pull is the difference of two methods over its standard uncertainty. Methods that read the same breadths move "
        "together: where both tell how, their correlation is in it and given; else it is taken as 0, and the pull is rather "
        "too small than too large. Beyond 3 the methods disagree.",
        err);
}
