/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The command line of the interpreter. */
#ifndef LW_APP_OPTIONS_H
#define LW_APP_OPTIONS_H

#include "base/engine.h"

#include <stdbool.h>

#define LWA_CHUNKS_MOST 32

typedef struct lwa_options {
    bool help, version, trusted, prompt, from_stdin;
    lw_cpu cpu;
    double memory_mb; /* 0 = no limit */
    double time_s;    /* 0 = no limit */
    const char *standards;               /* NULL = found next to the program */
    const char *chunk[LWA_CHUNKS_MOST];  /* of -e, in order */
    int n_chunks;
    const char *recipe;                  /* NULL = none */
    int first_argument;                  /* index in argv of what follows the recipe */
} lwa_options;

/* Reads argv. False, with `message` worded, if it is not understood. */
bool lwa_read_options(int argc, char **argv, lwa_options *options, char *message, size_t size);

extern const char lwa_usage[];

#endif
