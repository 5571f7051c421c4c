/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The syntax of CIF, without any meaning of names: blocks of items and loops, by Hall, Allen & Brown 1991,
 * Acta Cryst. A47, 655-685, with the triple quotes, lists and tables of CIF 2.0 passed over as one value
 * (Bernstein et al. 2016, J. Appl. Cryst. 49, 277-284). Oddities of real files are borne: blank and comment
 * lines anywhere, indented keywords, a `?` or `.` glued to its name, bytes that are not UTF-8. */
#ifndef LW_SCAN_CIF_H
#define LW_SCAN_CIF_H

#include "scan/reader.h"

/* A value as it stands in the file, without its quotes. */
typedef struct lw_cif_value {
    const char *text; /* [length], not terminated; NULL if the value was left out */
    size_t length;
    long line;
    bool quoted;
} lw_cif_value;

typedef struct lw_cif_loop {
    size_t columns, rows;
    const char *body; /* first value, for lw_cif_cursor */
    long line;        /* of the first value */
} lw_cif_loop;

/* One data name of a block: a single value, or a column of a loop. */
typedef struct lw_cif_item {
    const char *name; /* lower case; '.' and '/' are written '_', so that both spellings of a name are one */
    lw_cif_value value;
    const lw_cif_loop *loop; /* NULL for a single value */
    size_t column;
    struct lw_cif_item *next;
} lw_cif_item;

typedef struct lw_cif_block {
    const char *name;
    lw_cif_item *items;
    struct lw_cif_block *next;
} lw_cif_block;

typedef struct lw_cif_cursor {
    const lw_content *content;
    const char *at;
    long line;
    bool second_version; /* CIF 2.0 */
} lw_cif_cursor;

/* Whether the bytes are a CIF: the first word that is not a comment opens a block. */
bool lw_cif_claims(const lw_content *content);

/* Reads the whole document; *first is its first block, NULL if there is none. All text stays in content. */
lw_status lw_cif_read(lw_arena *arena, const lw_content *content, lw_cif_block **first, lw_error *err);

/* Starts a walk through the values of a loop, row by row; lw_cif_next() gives the next value. */
lw_cif_cursor lw_cif_walk(const lw_content *content, const lw_cif_loop *loop);
lw_status lw_cif_next(lw_cif_cursor *cursor, lw_cif_value *value, lw_error *err);

/* The item of a block, or NULL. */
const lw_cif_item *lw_cif_find(const lw_cif_block *block, const char *name);

/* `.` (not applicable), `?` (unknown) or nothing. */
bool lw_cif_is_missing(const lw_cif_value *value);

/* Reads a number with or without a standard uncertainty in brackets: "1.37(4)" is 1.37 +- 0.04. *su is NaN
 * without one. False if it is not a number. */
bool lw_cif_number(const lw_cif_value *value, double *number, double *su);

#endif
