/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the readers share: bytes in, raw columns out. A reader is a constant that describes itself; the
 * list of them is in read.c and the first that claims the bytes reads them. */
#ifndef LW_SCAN_READER_H
#define LW_SCAN_READER_H

#include "scan/scan.h"

/* The inflated content of a file. */
typedef struct lw_content {
    const char *name; /* of the file, for messages */
    char *bytes;      /* [size], then LW_NUMBER_SPARE zero bytes */
    size_t size;
    char hash[65]; /* SHA-256 of the file's own bytes; "" while `bytes` are just those */
} lw_content;

/* Columns as read, before they are checked. Memory belongs to the arena. */
typedef struct lw_columns {
    lw_arena *arena;
    size_t n;
    double *two_theta_deg, *intensity; /* [n] */
    double *sigma;                     /* [n] or NULL */
    const char *header;
    bool has_radiation;
    lw_radiation radiation;
    const char *doubt; /* likely cause if angles repeat or fall, as a remedy; NULL = none known */
    /* line of the file that holds point i; called for messages only, so it may be slow. NULL = no lines */
    long (*line_of)(const struct lw_columns *columns, size_t i);
    const void *origin; /* for line_of */
} lw_columns;

typedef struct lw_reader {
    const char *name; /* as help shows it */
    bool (*claims)(const lw_content *content);
    lw_status (*read)(lw_engine *engine, lw_content *content, const lw_scan_options *options,
                      lw_columns *columns, lw_error *err);
} lw_reader;

extern const lw_reader lw_text_reader;
extern const lw_reader lw_pdcif_reader;

/* Fills content->bytes from a file or from memory, inflated if gzipped, and drops a byte order mark.
 * Inflated size is limited to 512 MB. Give it back with lw_content_free(). Errors: LW_IO, LW_BAD_DATA,
 * LW_OUT_OF_MEMORY, LW_CANCELLED.
 * Whatever changes the bytes (inflating, dropping the mark, a reader) settles their hash first. */
lw_status lw_content_open(lw_engine *engine, const char *path, lw_content *content, lw_error *err);
lw_status lw_content_copy(lw_engine *engine, const char *name, const char *bytes, size_t size,
                          lw_content *content, lw_error *err);
/* Makes the hash, if it isn't there yet. To be called before `bytes` are changed. */
void lw_content_settle(lw_content *content);
/* Refuses bytes that are no text of ASCII or UTF-8, and makes lines that end with carriage returns alone end with
 * newlines; an old end mark is taken off. Status: LW_BAD_DATA. */
lw_status lw_content_check_text(lw_content *content, lw_error *err);
void lw_content_free(lw_engine *engine, lw_content *content);

/* Refuses columns that can't be a scan: fewer than 3 points, angles that don't ascend or lie outside 0 to
 * 180 degrees, values that are not finite or beyond 1e15, sigma that is not positive, intensities that the
 * kind of noise can't have. Settles "auto" into *noise. file: for messages. */
lw_status lw_columns_check(const lw_columns *columns, const char *file, int wanted, lw_noise *noise,
                           lw_error *err);

#endif
