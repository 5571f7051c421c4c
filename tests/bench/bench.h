/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the benchmark programs share: clock, median, numbers of a text file, rungs, and giving up. The clock is the
 * processor time of the process, as in the baselines: on a machine that does other things too, wall time would
 * favour whoever runs shorter. */
#ifndef LW_BENCH_H
#define LW_BENCH_H

#include "base/engine.h"
#include "base/error.h"

#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

static inline double bench_now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

static inline int bench_ascending(const void *a, const void *b)
{
    double x = *(const double *)a, y = *(const double *)b;
    return (x > y) - (x < y);
}

static inline double bench_median(double *value, size_t n)
{
    qsort(value, n, sizeof *value, bench_ascending);
    return value[n / 2];
}

static inline void *bench_take(size_t n, size_t size)
{
    void *block = calloc(n > 0 ? n : 1, size);
    if (block == NULL) {
        perror("bench");
        exit(2);
    }
    return block;
}

/* All numbers of the file FOLDER/NAME. */
static inline double *bench_numbers(const char *folder, const char *name, size_t *n)
{
    char path[4096];
    snprintf(path, sizeof path, "%s/%s", folder, name);
    FILE *file = fopen(path, "r");
    if (file == NULL) {
        perror(path);
        exit(2);
    }
    size_t room = 1024;
    double *value = malloc(room * sizeof *value);
    *n = 0;
    while (value != NULL && fscanf(file, "%lf", &value[*n]) == 1)
        if (++*n == room)
            value = realloc(value, (room *= 2) * sizeof *value);
    fclose(file);
    return value;
}

/* The rung called auto, plain, avx2 or avx512. */
static inline lw_cpu bench_rung(const char *name)
{
    static const char *const rungs[] = {"auto", "plain", "avx2", "avx512"};
    for (int i = 0; i < 4; i++)
        if (strcmp(name, rungs[i]) == 0)
            return (lw_cpu)i;
    fprintf(stderr, "no rung is called '%s'; choose auto, plain, avx2 or avx512\n", name);
    exit(2);
}

static inline void bench_stop(const lw_error *err)
{
    char text[2000];
    fprintf(stderr, "%s\n", lw_error_text(err, text, sizeof text));
    exit(1);
}

#endif
