/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The result tree: ordered named values in which every method gives its answer. The Lua layer, the
 * JSON record, tables, CSV and the report all read this one form. Nodes live in an arena. */
#ifndef LW_BASE_TREE_H
#define LW_BASE_TREE_H

#include "base/arena.h"
#include "base/quantity.h"

#include <stdbool.h>

typedef enum lw_node_kind {
    LW_NODE_GROUP,    /* named children in order */
    LW_NODE_LIST,     /* unnamed children in order */
    LW_NODE_QUANTITY, /* value with uncertainty and unit, or a limit */
    LW_NODE_NUMBER,   /* a count, an index, a statistic: no uncertainty of its own */
    LW_NODE_TEXT,
    LW_NODE_FLAG,
    LW_NODE_VECTOR    /* numbers of one kind, for curves */
} lw_node_kind;

/* Whoever walks a tree calls itself for each level, so there are never more than this. */
#define LW_TREE_DEEPEST 250

typedef struct lw_node lw_node;
struct lw_node {
    lw_node_kind kind;
    const char *name;       /* in a group; NULL in a list */
    const char *definition; /* what the value means, one sentence; NULL if plain */
    const char *source;     /* published source; NULL if none */
    lw_quantity quantity;
    double number;
    const char *text;
    bool flag;
    const double *vector;
    size_t n;               /* of the vector, or children of a group or list */
    const char *unit;       /* of the vector */
    lw_node *first, *last;  /* children */
    lw_node *next;          /* sibling */
    int depth;              /* 0 at the root */
    lw_arena *arena;
};

/* A root: an empty group in the arena. NULL on refusal of memory (err set). */
lw_node *lw_tree_new(lw_arena *arena, lw_error *err);

/* Each adds one child to a group (name != NULL) or list (name NULL) and returns it, NULL on refusal.
 * `parent` may be NULL (an earlier refusal): the call then does nothing, so that a chain of calls
 * needs one check, of err->status, at its end. Strings and vectors are copied. LW_BAD_ARGUMENT beyond
 * LW_TREE_DEEPEST levels. */
lw_node *lw_add_group(lw_node *parent, const char *name, lw_error *err);
lw_node *lw_add_list(lw_node *parent, const char *name, lw_error *err);
lw_node *lw_add_quantity(lw_node *parent, const char *name, lw_quantity quantity, const char *definition,
                         lw_error *err);
lw_node *lw_add_number(lw_node *parent, const char *name, double number, lw_error *err);
lw_node *lw_add_text(lw_node *parent, const char *name, const char *text, lw_error *err);
lw_node *lw_add_flag(lw_node *parent, const char *name, bool flag, lw_error *err);
lw_node *lw_add_vector(lw_node *parent, const char *name, const double *values, size_t n, const char *unit,
                       lw_error *err);

/* Adds a deep copy of `from` as a child named `name`. */
lw_node *lw_add_copy(lw_node *parent, const char *name, const lw_node *from, lw_error *err);

/* The child of that name, or NULL. `at` counts children from 0. */
const lw_node *lw_node_get(const lw_node *group, const char *name);
const lw_node *lw_node_at(const lw_node *parent, size_t at);

/* Reads a number from a child that is a number or a quantity; `otherwise` if it is missing. */
double lw_node_number(const lw_node *group, const char *name, double otherwise);
/* Reads a text child; `otherwise` if it is missing. */
const char *lw_node_text(const lw_node *group, const char *name, const char *otherwise);

#endif
