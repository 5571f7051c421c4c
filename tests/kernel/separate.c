/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All methods side by side: the fields of a record, what they agree on, notes, refused memory and names. */
#include "check.h"
#include "published/by_hand.h"

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
    refused_memory();
    cancelled(&engine);
    lw_engine_end(&engine);
    return lw_checks_end();
}
