/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "app/progress.h"

#include <stdio.h>
#include <string.h>
#include <time.h>
#include <unistd.h>

#define EVERY_S 0.1
#define AFTER_S 0.5 /* what is done sooner needs no bar */
#define CELLS 24

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

void lwa_progress_begin(lwa_progress *progress)
{
    *progress = (lwa_progress){.wanted = isatty(STDERR_FILENO) == 1};
}

void lwa_progress_clear(lwa_progress *progress)
{
    if (progress->drawn)
        fputs("\r\033[K", stderr);
    progress->drawn = false;
}

void lwa_progress_show(void *user, const char *what, double fraction)
{
    lwa_progress *progress = user;
    if (!progress->wanted)
        return;
    double at = now();
    if (strncmp(progress->what, what, sizeof progress->what - 1) != 0) {
        snprintf(progress->what, sizeof progress->what, "%s", what);
        progress->begun = at;
        progress->last = 0;
    }
    if (fraction >= 1) {
        lwa_progress_clear(progress);
        progress->what[0] = '\0';
        return;
    }
    if (at - progress->begun < AFTER_S || at - progress->last < EVERY_S || !(fraction >= 0))
        return;
    progress->last = at;
    char bar[CELLS + 1];
    for (int i = 0; i < CELLS; i++)
        bar[i] = i < (int)(fraction * CELLS) ? '#' : '.';
    bar[CELLS] = '\0';
    fprintf(stderr, "\r%.40s [%s] %3.0f %%", progress->what, bar, 100 * fraction);
    if (fraction > 0.02) {
        double left = (at - progress->begun) * (1 - fraction) / fraction;
        fprintf(stderr, "  %d:%02d left", (int)left / 60, (int)left % 60);
    }
    fputs("\033[K", stderr);
    fflush(stderr);
    progress->drawn = true;
}
