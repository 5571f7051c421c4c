/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A progress bar with time left on standard error, if that is a terminal. */
#ifndef LW_APP_PROGRESS_H
#define LW_APP_PROGRESS_H

#include <stdbool.h>

typedef struct lwa_progress {
    bool wanted;  /* standard error is a terminal */
    bool drawn;   /* a bar stands on the line now */
    char what[80];
    double begun, last; /* s, monotonic clock */
} lwa_progress;

void lwa_progress_begin(lwa_progress *progress);
/* For lw_engine.progress; user is the lwa_progress. */
void lwa_progress_show(void *user, const char *what, double fraction);
/* Takes the bar off the line, before anything else is written there. */
void lwa_progress_clear(lwa_progress *progress);

#endif
