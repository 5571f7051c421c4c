/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Every quantity of a result tree, over many trees of the same kind (private to sample/). */
#ifndef LW_SAMPLE_COLLECT_H
#define LW_SAMPLE_COLLECT_H

#include "base/tree.h"

typedef struct lw__collected {
    const char *path; /* names parted by dots; entries of a list by their hkl, else by number from 1 */
    const lw_node *node; /* in the tree that was collected first */
    double *value;       /* [most]: INFINITY for a lower limit, -INFINITY for an upper one, NAN where missing */
} lw__collected;

typedef struct lw__collection {
    size_t n, most, taken;
    lw__collected *entry;
} lw__collection;

/* Names the quantities below the groups and lists `names` (NULL-terminated) of `results`, with room for `most` values
 * of each. */
lw_status lw__collect_begin(const lw_node *results, const char *const *names, size_t most, lw_arena *arena,
                            lw__collection *collection, lw_error *err);
/* Takes the same quantities from another tree; NULL notes all of them as missing. */
void lw__collect(lw__collection *collection, const lw_node *results);

/* The node at a path, or NULL. */
const lw_node *lw__node_at_path(const lw_node *results, const char *path);

/* What is told of one quantity. */
typedef struct lw__summary {
    size_t values, limits, missing;
    double mean, u;   /* over the values; NAN below two */
    double low, high; /* 2.5 and 97.5 % quantiles, limits ranked where they point to; NAN where they fall on a limit */
    double u_low, u_high; /* standard uncertainties of the two for want of draws; NAN where they can't be had */
} lw__summary;
/* scratch[collection->taken]. */
lw__summary lw__summarise(const lw__collection *collection, size_t entry, double *scratch);

#endif
