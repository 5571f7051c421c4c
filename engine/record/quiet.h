/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Holds one signal back in this thread, so that a broken pipe (SIGPIPE) or a full file-size limit
 * (SIGXFSZ) comes as an error code and doesn't kill the host. The host's handlers aren't touched. */
#ifndef LW_RECORD_QUIET_H
#define LW_RECORD_QUIET_H

#include <signal.h>
#include <stdbool.h>

typedef struct lw_quiet {
    int signal;
    bool pending; /* was waiting before we began: not ours to take */
    sigset_t before;
} lw_quiet;

void lw_quiet_begin(lw_quiet *quiet, int signal);
/* Takes the signal away if it came meanwhile, then restores the mask. errno is kept. */
void lw_quiet_end(lw_quiet *quiet);

#endif
