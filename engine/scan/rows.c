/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The fast loop of the text reader. It knows clean rows only and leaves everything else to text.c. */
#include "scan/rows.h"

#include "scan/number.h"

/* Steps over one separator; NULL if there is none. */
static inline const char *gap(const char *p, char separator)
{
    const char *q = p;
    while (*q == ' ' || *q == '\t')
        q++;
    if (separator == ' ')
        return q > p ? q : NULL;
    if (*q != separator)
        return NULL;
    for (q++; *q == ' ' || *q == '\t';)
        q++;
    return q;
}

/* Steps over the separator at *at, and the blanks behind it. False if there is none, or the row is too long.
 */
static inline bool plain_gap(const char *row, uint64_t *mask, unsigned *at, unsigned width, char separator)
{
    char c = row[*at];
    if (c != separator && !(separator == ' ' && c == '\t'))
        return false;
    do
        c = row[++*at];
    while (c == ' ' || c == '\t');
    if (*at >= width - 1)
        return false;
    *mask &= ~(uint64_t)0 << *at;
    return true;
}

/* Reads one row of plain numbers. Returns the start of the next line; NULL if the row is anything else. */
static inline __attribute__((always_inline)) const char *
plain_row(const char *p, double *x, double *y, double *sigma, unsigned columns, char separator, char mark)
{
    unsigned width = columns == 2 ? 32 : 64, at = 0;
    uint64_t mask = lw_not_digits(p, width);
    if (!lw_plain_number(p, &mask, &at, mark, x) || !plain_gap(p, &mask, &at, width, separator) ||
        !lw_plain_number(p, &mask, &at, mark, y))
        return NULL;
    if (columns == 3 &&
        (!plain_gap(p, &mask, &at, width, separator) || !lw_plain_number(p, &mask, &at, mark, sigma)))
        return NULL;
    at += p[at] == '\r';
    return p[at] == '\n' ? p + at + 1 : NULL;
}

/* Reads clean rows from p on, until one is not clean or `most` are read. The digest is
 * carried on alongside, a block whenever the rows have passed one: hashing waits for its own results, and
 * the processor reads the next rows meanwhile (one seventh less time than in portions of 1024 bytes). Returns
 * the start of the first line that was not read. */
static inline __attribute__((always_inline)) const char *read_clean(lw_rows *rows, const char *p, size_t most,
                                                                    unsigned columns, char separator)
{
    lw_content *content = rows->content;
    const char *end = content->bytes + content->size;
    const char *block = content->bytes + content->hashed;
    lw_sha256 *hash = content->hash;
    size_t i = rows->n;
    double *x = rows->column[0], *y = rows->column[1], *sigma = rows->column[2];
    char mark = rows->mark;
    for (size_t stop = i + most; i < stop && p < end; i++) {
        const char *q = plain_row(p, x + i, y + i, columns == 3 ? sigma + i : NULL, columns, separator, mark);
        if (q == NULL) {
            q = p;
            while (*q == ' ' || *q == '\t')
                q++;
            q = lw_number(q, mark, &x[i]);
            if (q == NULL || (q = gap(q, separator)) == NULL || (q = lw_number(q, mark, &y[i])) == NULL)
                break;
            if (columns == 3 &&
                ((q = gap(q, separator)) == NULL || (q = lw_number(q, mark, &sigma[i])) == NULL))
                break;
            while (*q == ' ' || *q == '\t' || *q == '\r')
                q++;
            if (*q++ != '\n')
                break;
        }
        p = q;
        if (hash != NULL)
            for (; block + 64 <= p; block += 64)
                lw_sha256_add(hash, block, 64);
    }
    if (hash != NULL)
        content->hashed = (size_t)(block - content->bytes);
    rows->n = i;
    return p;
}

const char *lw_rows_read(lw_rows *rows, const char *p, size_t most)
{
    /* the usual form gets a loop of its own */
    if (rows->columns == 2 && rows->separator == ' ')
        return read_clean(rows, p, most, 2, ' ');
    return read_clean(rows, p, most, rows->columns, rows->separator);
}
