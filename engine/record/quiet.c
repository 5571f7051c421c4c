/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/quiet.h"

#include <errno.h>
#include <time.h>

static bool is_pending(int signal)
{
    sigset_t set;
    return sigpending(&set) == 0 && sigismember(&set, signal) == 1;
}

void lw_quiet_begin(lw_quiet *quiet, int signal)
{
    sigset_t set;
    quiet->signal = signal;
    quiet->pending = is_pending(signal);
    sigemptyset(&set);
    sigaddset(&set, signal);
    pthread_sigmask(SIG_BLOCK, &set, &quiet->before);
}

void lw_quiet_end(lw_quiet *quiet)
{
    int kept = errno;
    if (!quiet->pending && is_pending(quiet->signal)) {
        sigset_t set;
        sigemptyset(&set);
        sigaddset(&set, quiet->signal);
        const struct timespec now = {0, 0};
        while (sigtimedwait(&set, NULL, &now) == -1 && errno == EINTR)
            continue;
    }
    pthread_sigmask(SIG_SETMASK, &quiet->before, NULL);
    errno = kept;
}
