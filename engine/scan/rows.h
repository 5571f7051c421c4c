/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rows of numbers in a form that is settled: how they are separated and where they go. */
#ifndef LW_SCAN_ROWS_H
#define LW_SCAN_ROWS_H

#include "scan/reader.h"

#define LW_ROWS_COLUMNS_MOST 3

typedef struct lw_rows {
    lw_content *content;
    char separator;                       /* ' ' for blanks, ',' or ';' */
    char mark;                            /* decimal mark, '.' or ',' */
    unsigned columns;                     /* 2 or 3 */
    double *column[LW_ROWS_COLUMNS_MOST]; /* [room] */
    size_t n, room;                       /* rows so far, and that there is room for */
} lw_rows;

/* Reads clean rows (numbers, separators, blanks and a line end) from the line start p on, at most `most` (there
 * must be room for them), and
 * carries on content->hash with the bytes that it passes. Returns the start of the first line not read. */
const char *lw_rows_read(lw_rows *rows, const char *p, size_t most);

#endif
