/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a fuzz target gives: one call an input, whatever the bytes are. It returns 0; a promise that is not
 * kept ends the program with FUZZ_PROMISE. replay.c calls it with the files of the corpus, the fuzzer with
 * what it makes up. */
#ifndef LW_TESTS_FUZZ_H
#define LW_TESTS_FUZZ_H

#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

#define FUZZ_PROMISE(expression)                                                                           \
    do {                                                                                                   \
        if (!(expression)) {                                                                               \
            fprintf(stderr, "%s:%d: not kept: %s\n", __FILE__, __LINE__, #expression);                     \
            abort();                                                                                       \
        }                                                                                                  \
    } while (0)

#endif
