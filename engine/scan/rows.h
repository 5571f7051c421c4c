/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rows of numbers in a form that is settled: how they are separated and where they go. */
#ifndef LW_SCAN_ROWS_H
#define LW_SCAN_ROWS_H

#include "scan/reader.h"

#include <stdint.h>

#define LW_ROWS_COLUMNS_MOST 3
#define LW_ROWS_LENGTH_MOST 48 /* bytes of a row, its newline included, that a layout describes */
#define LW_ROWS_LAYOUTS 64     /* that are remembered at a time */

/* Bytes that may be read in front of the first row: a number is taken as the eight bytes that end where it ends. */
#define LW_ROWS_FRONT 8

/* How a row was laid out: what is not a digit, and where the digits of each column are. */
typedef struct lw_row_layout {
    _Alignas(16) unsigned char marks[LW_ROWS_LENGTH_MOST];  /* what is not a digit; 0 where one stands */
    _Alignas(16) unsigned char within[LW_ROWS_LENGTH_MOST]; /* 0xff for the bytes of the row */
    /* digits before and after the decimal mark: their bits within eight bytes that begin at `from` in the row */
    _Alignas(16) uint64_t whole[LW_ROWS_COLUMNS_MOST + 1], decimals[LW_ROWS_COLUMNS_MOST + 1];
    _Alignas(16) double power[LW_ROWS_COLUMNS_MOST + 1]; /* ten to the number of decimals */
    ptrdiff_t whole_from[LW_ROWS_COLUMNS_MOST + 1], decimals_from[LW_ROWS_COLUMNS_MOST + 1];
    bool wide; /* some number has more than eight digits: before and after the mark are taken apart */
} lw_row_layout;

typedef struct lw_rows {
    const char *end;                      /* of the bytes */
    char separator;                       /* ' ' for blanks, ',' or ';' */
    char mark;                            /* decimal mark, '.' or ',' */
    unsigned columns;                     /* 2 or 3 */
    double *column[LW_ROWS_COLUMNS_MOST]; /* [room] */
    size_t n, room;                       /* rows so far, and that there is room for */
    lw_row_layout layout[LW_ROWS_LAYOUTS];
} lw_rows;

/* Empty, with no layout known. */
void lw_rows_begin(lw_rows *rows, const char *end);

/* Reads clean rows (numbers, separators, blanks and a line end) from the line start p on, at most `most` (there
 * must be room for them, LW_ROWS_FRONT bytes in front of p and LW_NUMBER_SPARE behind the end). Returns the start
 * of the first line not read. */
const char *lw_rows_read(lw_rows *rows, const char *p, size_t most);

#endif
