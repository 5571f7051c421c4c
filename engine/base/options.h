/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Option tables: each verb declares its options once, as data. The same table fills the verb's
 * options struct, words the errors (with the nearest spelling), and feeds help and --help. */
#ifndef LW_BASE_OPTIONS_H
#define LW_BASE_OPTIONS_H

#include "base/error.h"

#include <stdbool.h>
#include <stddef.h>

typedef enum lw_option_kind {
    LW_OPTION_NUMBER, /* double */
    LW_OPTION_COUNT,  /* long */
    LW_OPTION_FLAG,   /* bool */
    LW_OPTION_TEXT,   /* const char *, owned by the caller for the call's duration */
    LW_OPTION_CHOICE, /* int, index into choices */
    LW_OPTION_LIST,   /* lw_option_list of texts */
    LW_OPTION_RANGE,  /* double[2], low and high */
    LW_OPTION_NOUN    /* const void *: another noun, whose type the help text names; bind checks it */
} lw_option_kind;

#define LW_OPTION_LIST_MOST 64
typedef struct lw_option_list {
    size_t n;
    const char *item[LW_OPTION_LIST_MOST];
} lw_option_list;

typedef struct lw_option {
    const char *key;
    lw_option_kind kind;
    const char *unit;           /* "" = none; for LW_OPTION_NOUN the noun's name */
    const char *standard;       /* default, as a person reads it; "" = none, "required" = must be given */
    double least, most;         /* range of a number, count or range; both 0 = any finite */
    const char *const *choices; /* NULL-terminated, for LW_OPTION_CHOICE */
    size_t offset;              /* of the field in the verb's options struct */
    const char *help;           /* one line */
} lw_option;

/* A table ends in an entry whose key is NULL. */
#define LW_OPTIONS_END {.key = NULL}

/* The entry for a key; NULL with an error that lists the valid keys and the nearest spelling.
 * verb: name of the function for the message. */
const lw_option *lw_option_find(const lw_option *table, const char *verb, const char *key, lw_error *err);

/* Each stores one value into the options struct `target` after checking its kind and range; the
 * message names verb, key, what was given, what is allowed and the unit. */
lw_status lw_option_number(const lw_option *option, const char *verb, void *target, double value, lw_error *err);
lw_status lw_option_flag(const lw_option *option, const char *verb, void *target, bool value, lw_error *err);
lw_status lw_option_text(const lw_option *option, const char *verb, void *target, const char *value, lw_error *err);
lw_status lw_option_range(const lw_option *option, const char *verb, void *target, double low, double high,
                          lw_error *err);
lw_status lw_option_item(const lw_option *option, const char *verb, void *target, const char *item, lw_error *err);
lw_status lw_option_noun(const lw_option *option, const char *verb, void *target, const void *noun, lw_error *err);

/* The nearest of a NULL-terminated list to `word` by edit distance, or NULL if none is near. */
const char *lw_nearest(const char *const *words, const char *word);

#endif
