/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All methods side by side: the fields of a record, what they agree on, notes, refused memory and names. */
#include "check.h"
#include "numeric/random.h"
#include "published/by_hand.h"
#include "sample/agreement.h"
#include "sample/shared.h"

#include <stdlib.h>

#define CU 0.15405929
static const lw_cell NICKEL = {
    .a = 0.35238, .b = 0.35238, .c = 0.35238, .alpha = 90, .beta = 90, .gamma = 90};
static by_hand h;

/* Five lines of a powder with size D and Gaussian strain of apparent value e, added by the parabolic rule. */
static void make(double D, double e, double u)
{
    static const int hkl[5][3] = {{1, 1, 1}, {2, 0, 0}, {2, 2, 0}, {3, 1, 1}, {2, 2, 2}};
    hand_begin(&h, LW_CUBIC, NICKEL, CU);
    for (int i = 0; i < 5; i++) {
        double n = hkl[i][0] * hkl[i][0] + hkl[i][1] * hkl[i][1] + hkl[i][2] * hkl[i][2];
        double s = sqrt(n) / 0.35238, b = 2 * e * s;
        hand_line(&h, hkl[i][0], hkl[i][1], hkl[i][2], s, (1 / D + sqrt(1 / (D * D) + 4 * b * b)) / 2, b,
                  1 / D, u);
        h.line[i].two_theta.u = 0.002;
    }
    hand_end(&h, 0);
}

static void fields(lw_engine *engine)
{
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    lw_node *results = lw_tree_new(&arena, &err);
    make(25, 0.002, 2e-4);
    h.line[3].supported = true;
    h.line[3].overlap = 0.4;
    h.profile[0].refold_failed = true;
    h.lines.misfit = "tails heavier than a Voigt's";
    CHECK(lw_separate(engine, &h.profiles, NULL, 0, results, &err) == LW_OK && err.status == LW_OK);
    const lw_node *lines = lw_node_get(results, "lines");
    CHECK(lines != NULL && lines->kind == LW_NODE_LIST && lines->n == 5);
    static const char *const names[] = {"two_theta",          "fwhm",           "breadth_observed",
                                        "breadth_instrument", "breadth_sample", "size_scherrer"};
    for (const lw_node *line = lines->first; line != NULL; line = line->next)
        for (int i = 0; i < 6; i++) {
            const lw_node *q = lw_node_get(line, names[i]);
            CHECK(q != NULL && q->kind == LW_NODE_QUANTITY && q->definition != NULL);
            CHECK(strcmp(q->quantity.unit, i == 5 ? "nm" : "deg") == 0);
        }
    CHECK_RELATIVE(hand_quantity(lw_node_at(lines, 0), "size_scherrer", NULL, NULL).value,
                   1 / h.profile[0].breadth_s.value, 1e-12);
    CHECK_RELATIVE(hand_quantity(results, "methods", "halder_wagner", "size_volume").value, 25, 1e-9);
    CHECK_RELATIVE(hand_quantity(results, "lattice", "a", NULL).value, 0.35238, 1e-9);
    for (size_t i = 0; lw_method_list[i] != NULL; i++) {
        const lw_method *m = lw_method_list[i];
        const lw_node *node = strcmp(m->name, "lattice") == 0
                                  ? lw_node_get(results, "lattice")
                                  : lw_node_get(lw_node_get(results, "methods"), m->name);
        CHECK(lw_method_named(m->name) == m && m->options_size <= LW_METHOD_OPTIONS_MOST);
        if (lw_node_get(node, "not_applied") != NULL) /* profiles by hand have no counts or coefficients */
            continue;
        CHECK(strcmp(lw_node_text(node, "title", ""), m->title) == 0);
        CHECK(strcmp(lw_node_text(node, "assumes", ""), m->assumes) == 0);
        CHECK(strcmp(lw_node_text(node, "source", ""), m->source) == 0);
    }
    /* Scherrer reads the strain as size: flagged, with the reason */
    const lw_node *agreement = lw_node_get(results, "agreement");
    const lw_node *pairs = lw_node_get(lw_node_get(agreement, "size_volume"), "pairs");
    CHECK(!lw_node_get(agreement, "agree")->flag);
    CHECK(pairs != NULL && pairs->n == 10); /* 5 methods */
    int flagged = 0;
    for (const lw_node *pair = pairs->first; pair != NULL; pair = pair->next)
        if (strcmp(lw_node_text(pair, "first", ""), "scherrer") == 0 &&
            strcmp(lw_node_text(pair, "second", ""), "halder_wagner") == 0) {
            flagged++;
            CHECK(!lw_node_get(pair, "agree")->flag && lw_node_number(pair, "pull", 0) < -3);
            CHECK_CONTAINS(lw_node_text(pair, "likely_reason", ""), "strain is present");
        }
    CHECK(flagged == 1);
    const lw_node *notes = lw_node_get(results, "notes");
    CHECK(hand_list_has(notes, "heavier than a Voigt's"));
    CHECK(hand_list_has(notes, "line 311: more than 20 %"));
    CHECK(hand_list_has(notes, "line 111: instrument times result does not give"));
    CHECK(hand_list_has(notes, "Scherrer: the lines' sizes disagree"));
    CHECK(hand_list_has(notes, "Scherrer: K = 1 on the integral breadth"));
    CHECK(hand_list_has(notes, "has no direction"));
    CHECK(!hand_list_has(notes, "qualitative"));
    make(140, 0.0005, 1e-5); /* beyond what a laboratory's instrument tells (common practice: 100 to 120 nm) */
    results = lw_tree_new(&arena, &err);
    CHECK(lw_separate(engine, &h.profiles, NULL, 0, results, &err) == LW_OK);
    CHECK(hand_list_has(lw_node_get(results, "notes"), "sizes above about 100 nm are qualitative"));
    lw_arena_end(&arena);
}

/* Without strain all sizes are one, and everything agrees. */
static void agreement(lw_engine *engine)
{
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    lw_node *results = lw_tree_new(&arena, &err);
    make(25, 0, 2e-4);
    static const char *const names[] = {"scherrer", "williamson_hall"};
    CHECK(lw_separate(engine, &h.profiles, names, 2, results, &err) == LW_OK);
    CHECK(lw_node_get(lw_node_get(results, "agreement"), "agree")->flag);
    CHECK(lw_node_get(results, "methods")->n == 2);
    CHECK(lw_node_get(results, "lattice") != NULL);

    /* one line: what cannot be done says why */
    h.profiles.n = 1;
    results = lw_tree_new(&arena, &err);
    CHECK(lw_separate(engine, &h.profiles, NULL, 0, results, &err) == LW_OK);
    CHECK_CONTAINS(
        lw_node_text(lw_node_get(lw_node_get(results, "methods"), "williamson_hall"), "not_applied", ""),
        "two lines");
    CHECK(hand_list_has(lw_node_get(results, "notes"), "fewer than three"));

    static const char *const wrong[] = {"wiliamson_hall"};
    CHECK(lw_separate(engine, &h.profiles, wrong, 1, lw_tree_new(&arena, NULL), &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.remedy, "did you mean williamson_hall?");
    lw_arena_end(&arena);
}

/* Methods that read the same breadths move together: how each of their answers moves with each breadth or part is told as
 * its slope, times the factor on u for scatter, and here compared with what really happens when one is changed. */
static void together(lw_engine *engine)
{
    static const char *const names[] = {"scherrer", "williamson_hall", "halder_wagner", "single_line_voigt", "double_voigt"};
    static const char *const fields[] = {"size_volume", "strain_rms", "size_area"};
    enum { METHODS = 5, FIELDS = 3, ROWS = 15 };
    const double u = 2e-4, step = 1e-7;
    int compared = 0;
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    for (int m = 0; m < METHODS; m++) {
        const void *options = m == 1 ? (int[2]){2, 0} : NULL; /* one form, so that another can't come to lead */
        const lw_method *method = lw_method_named(names[m]);
        make(25, 0.002, u);
        lw_node *base = lw_tree_new(&arena, &err), *own = lw_tree_new(&arena, &err);
        CHECK(lw_method_run_sharing(engine, method, &h.profiles, options, base, &err) == LW_OK);
        CHECK(lw_method_run(engine, method, &h.profiles, options, own, &err) == LW_OK);
        CHECK(lw_node_get(base, "sensitivity") != NULL && lw_node_get(own, "sensitivity") == NULL);
        double scatter = lw_node_number(base, "scatter_factor", 1), slope[FIELDS][ROWS] = {{0}};
        for (int row = 0; row < ROWS; row++)
            for (int sign = -1; sign <= 1; sign += 2) {
                make(25, 0.002, u);
                h.profiles.values_only = true;
                lw_profile *profile = &h.profile[row / 3];
                lw_quantity *part[3] = {&profile->gauss_s, &profile->lorentz_s, &profile->breadth_s};
                part[row % 3]->value += sign * step;
                lw_node *moved = lw_tree_new(&arena, &err);
                CHECK(lw_method_run(engine, method, &h.profiles, options, moved, &err) == LW_OK);
                for (int f = 0; f < FIELDS; f++)
                    slope[f][row] += sign * hand_quantity(moved, fields[f], NULL, NULL).value / (2 * step);
            }
        for (int f = 0; f < FIELDS; f++) {
            const lw_node *told = lw_node_get(lw_node_get(base, "sensitivity"), fields[f]);
            CHECK((told != NULL) == (hand_quantity(base, fields[f], NULL, NULL).kind == LW_VALUE &&
                                     isfinite(hand_quantity(base, fields[f], NULL, NULL).value)));
            double largest = 0;
            for (int row = 0; told != NULL && row < ROWS; row++)
                largest = fmax(largest, fabs(told->vector[row]));
            for (int row = 0; told != NULL && row < ROWS; row++) {
                CHECK_NEAR(scatter * slope[f][row] / largest, told->vector[row] / largest, 2e-3);
                compared++;
            }
        }
    }
    CHECK(compared == ROWS * (5 + 4 + 1));
    lw_arena_end(&arena);
}

/* Reasons: what the results show comes before what is known of the methods. */
static void reasons(lw_engine *engine)
{
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    make(25, 0.002, 2e-4);
    lw_node *methods = lw_tree_new(&arena, &err);
    static const char *const names[] = {"scherrer", "warren_averbach", "whole_pattern", "variance", "halder_wagner"};
    lw_node *node[5], *remarks = NULL;
    for (int i = 0; i < 5; i++) {
        node[i] = lw_add_group(methods, names[i], &err);
        lw_add_quantity(node[i], "size_area", lw_quantity_of(10 + 5 * i, 0.1, "nm"), "", &err);
        lw_add_quantity(node[i], "size_volume", lw_quantity_of(10 + 5 * i, 0.1, "nm"), "", &err);
        remarks = lw_add_list(node[i], "remarks", &err);
    }
    lw_add_quantity(node[4], "strain_rms", lw_upper_limit(1e-4, 0.95, ""), "", &err);
    lw_add_quantity(node[2], "strain_rms", lw_quantity_of(1e-3, 1e-5, ""), "", &err);
    const lw_profiles *p = &h.profiles;
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "size_area", node[1], node[2]), "orders of one direction");
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "size_area", node[1], node[4]), "truncation");
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "size_area", node[3], node[2]), "background");
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "strain_rms", node[2], node[4]), "limit");
    lw_add_text(remarks, NULL, "the 2 orders of direction 100 lie above the line: breadths depend on direction", &err);
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "size_area", node[1], node[2]), "depend on direction");
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "size_volume", node[0], node[2]), "all breadth as size");
    h.profiles.n = 2;
    CHECK_CONTAINS(lw_agreement_reason(p, methods, "size_area", node[1], node[2]), "fewer than three");

    /* pulls: independent where nothing is told, and with the covariance where it is */
    lw_node *results = lw_tree_new(&arena, &err);
    lw_agreement(p, methods, results, &err);
    const lw_node *pair = lw_node_at(lw_node_get(lw_node_get(lw_node_get(results, "agreement"), "size_area"), "pairs"), 0);
    CHECK_RELATIVE(lw_node_number(pair, "pull", 0), -5 / hypot(0.1, 0.1), 1e-12);
    CHECK(lw_node_get(pair, "correlation") == NULL);
    double slopes[15] = {0};
    lw_profiles three = h.profiles;
    three.n_covariance = 3;
    double covariance[9] = {0.01, 0, 0, 0, 1, 0, 0, 0, 1};
    three.covariance = covariance;
    slopes[0] = 1; /* both follow the first row, whose u is 0.1 */
    for (int i = 0; i < 2; i++)
        lw_add_vector(lw_add_group(node[i], "sensitivity", &err), "size_area", slopes, 3, "", &err);
    results = lw_tree_new(&arena, &err);
    lw_node *twice = lw_add_group(methods, "again", &err);
    lw_add_quantity(twice, "size_area", lw_quantity_of(10.05, 0.2, "nm"), "", &err);
    slopes[0] = 0.5;
    lw_add_vector(lw_add_group(twice, "sensitivity", &err), "size_area", slopes, 3, "", &err);
    lw_agreement(&three, methods, results, &err);
    const lw_node *pairs = lw_node_get(lw_node_get(lw_node_get(results, "agreement"), "size_area"), "pairs");
    for (pair = pairs->first; pair != NULL; pair = pair->next)
        if (strcmp(lw_node_text(pair, "first", ""), "scherrer") == 0 && strcmp(lw_node_text(pair, "second", ""), "again") == 0) {
            CHECK_RELATIVE(lw_node_number(pair, "correlation", 0), 0.5 * 0.01 / (0.1 * 0.2), 1e-12);
            CHECK_RELATIVE(lw_node_number(pair, "pull", 0), -0.05 / sqrt(0.01 + 0.04 - 2 * 0.005), 1e-12);
        }
    lw_arena_end(&arena);
}

/* Memory that refuses the n-th request: every n must end in a clean error until all is granted. */
typedef struct refusing {
    long left;
    long blocks;
} refusing;

static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    refusing *r = user;
    (void)old_size;
    if (new_size == 0) {
        r->blocks -= block != NULL;
        free(block);
        return NULL;
    }
    if (r->left-- <= 0)
        return NULL;
    void *new_block = realloc(block, new_size);
    r->blocks += block == NULL && new_block != NULL;
    return new_block;
}

static void refused_memory(void)
{
    make(25, 0.002, 2e-4);
    bool done = false;
    int refusals = 0;
    for (long n = 0; !done && n < 1000; n++) {
        h.profiles.values_only = n % 4 != 0; /* readings take long: they are run every fourth time */
        refusing r = {.left = n};
        lw_engine engine;
        lw_engine_begin(&engine);
        engine.allocator = (lw_allocator){.resize = resize, .user = &r};
        lw_arena arena;
        lw_error err = LW_ERROR_NONE;
        lw_arena_begin(&arena, &engine);
        lw_node *results = lw_tree_new(&arena, &err);
        lw_status status = err.status;
        if (results != NULL)
            status = lw_separate(&engine, &h.profiles, NULL, 0, results, &err);
        done = status == LW_OK;
        refusals += !done;
        CHECK(done || status == LW_OUT_OF_MEMORY);
        lw_arena_end(&arena);
        lw_engine_end(&engine);
        CHECK(r.blocks == 0);
    }
    CHECK(done && refusals > 5);
}

static bool always(void *user)
{
    (void)user;
    return true;
}

static void cancelled(lw_engine *engine)
{
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, engine);
    make(25, 0.002, 2e-4);
    engine->cancelled = always;
    CHECK(lw_separate(engine, &h.profiles, NULL, 0, lw_tree_new(&arena, &err), &err) == LW_CANCELLED);
    engine->cancelled = NULL;
    lw_arena_end(&arena);
}

int main(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    fields(&engine);
    agreement(&engine);
    together(&engine);
    reasons(&engine);
    refused_memory();
    cancelled(&engine);
    lw_engine_end(&engine);
    return lw_checks_end();
}
