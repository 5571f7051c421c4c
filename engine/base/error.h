/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The one error type: what went wrong, where (file and line of the scan or recipe), and what to do.
 * A function that can fail returns lw_status and takes an lw_error last. The first error wins: a
 * later lw_fail() into an error that is already set changes nothing, so the cause is kept. */
#ifndef LW_BASE_ERROR_H
#define LW_BASE_ERROR_H

typedef enum lw_status {
    LW_OK = 0,
    LW_OUT_OF_MEMORY,   /* an allocation was refused */
    LW_CANCELLED,       /* the user stopped the work (Ctrl-C, time limit) */
    LW_BAD_ARGUMENT,    /* the caller's value or option can't be right */
    LW_BAD_DATA,        /* a file's content is refused */
    LW_IO,              /* the file system said no */
    LW_NO_CONVERGENCE,  /* an iteration stopped without an answer */
    LW_NOT_SUPPORTED,   /* the data can't carry the result that was asked for */
    LW_OUT_OF_RANGE,    /* outside the range for which a calibration holds */
    LW_REFOLD_FAILED    /* instrument x result doesn't give the data back */
} lw_status;

typedef struct lw_error {
    lw_status status;
    char message[480]; /* what went wrong, no full stop at the end */
    char remedy[256];  /* what to do about it; may be empty */
    char file[256];    /* file that the message is about; empty if none */
    long line;         /* line in that file, counted from 1; 0 if none */
} lw_error;

/* A fresh, unset error. */
#define LW_ERROR_NONE ((lw_error){.status = LW_OK})

/* Short name of a status, as scripts see it in the field `kind`. */
const char *lw_status_name(lw_status status);

/* Records an error, unless one is recorded already.
 * Given:  err     error to fill, or NULL
 *         status  its kind, not LW_OK
 *         remedy  what to do, or NULL
 *         format  printf format of the message
 * Returns status (that of the first error, if one was recorded before). */
lw_status lw_fail(lw_error *err, lw_status status, const char *remedy, const char *format, ...)
    __attribute__((format(printf, 4, 5)));

/* Same, with the file and line that the message is about (line 0 = the whole file). A file name
 * too long for the error is cut at its front, where it says least. */
lw_status lw_fail_at(lw_error *err, lw_status status, const char *file, long line, const char *remedy,
                     const char *format, ...) __attribute__((format(printf, 6, 7)));

/* Writes "file:line: message; remedy" into text[size], always terminated. Returns text. */
const char *lw_error_text(const lw_error *err, char *text, unsigned long size);

#endif
