/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A growing text in the engine's memory. Every record (JSON, CSV, HTML, plot script) is put together
 * in one. A refusal of memory is remembered: later calls do nothing, so a writer checks once, at its
 * end. Numbers come out with a decimal point whatever the host's locale says. */
#ifndef LW_RECORD_TEXT_H
#define LW_RECORD_TEXT_H

#include "base/engine.h"

typedef struct lw_text {
    lw_engine *engine;
    char *bytes; /* terminated by a zero byte that n doesn't count; NULL while empty */
    size_t n;    /* bytes of text */
    size_t room; /* bytes taken */
    lw_status status; /* LW_OK, or LW_OUT_OF_MEMORY once growth was refused */
} lw_text;

/* Starts an empty text; takes no memory yet. */
void lw_text_begin(lw_text *text, lw_engine *engine);
/* Gives its memory back. Safe on a text that was only zeroed. */
void lw_text_end(lw_text *text);

/* Append: n bytes, a string, printf (for integers and strings: %g would follow the locale). */
void lw_text_bytes(lw_text *text, const char *bytes, size_t n);
void lw_text_add(lw_text *text, const char *string);
void lw_text_print(lw_text *text, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* Append the shortest of %.15g, %.16g, %.17g that reads back to the same double. Not for NaN and
 * infinities, which the formats spell differently: those come out as "nan", "inf", "-inf". */
void lw_text_number(lw_text *text, double number);
/* Append with the given number of significant digits (1 to 17). */
void lw_text_rounded(lw_text *text, double number, int digits);
/* Append with that many decimals (0 to 300). */
void lw_text_fixed(lw_text *text, double number, int decimals);

/* Append with &, <, >, " and ' escaped for HTML and XML, control characters (but tab and newline)
 * left out and bytes that aren't UTF-8 shown as U+FFFD. NULL counts as "". */
void lw_text_html(lw_text *text, const char *string);

/* Length of the UTF-8 sequence at s (1 to 4), or 0 if there is none: a stray, overlong, surrogate or
 * cut sequence. s must end in a zero byte and not be at it. */
size_t lw_utf8_length(const char *s);

/* LW_OK, or LW_OUT_OF_MEMORY recorded in err. */
lw_status lw_text_check(const lw_text *text, lw_error *err);

#endif
