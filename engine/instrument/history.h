/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The history of an instrument: control charts of its calibrations in order of time. */
#ifndef LW_INSTRUMENT_HISTORY_H
#define LW_INSTRUMENT_HISTORY_H

#include "instrument/calibration.h"

typedef struct lw_history_entry {
    const lw_calibration *calibration;
    const char *label;   /* date or file, as the charts show it */
    bool after_service;  /* a service took place before it: charts begin anew */
} lw_history_entry;

typedef struct lw_history_options {
    long run, trend;     /* lengths of those rules */
} lw_history_options;
extern const lw_option lw_history_option_table[];
lw_history_options lw_history_defaults(void);

/* Adds to `record` (a root): linewright/history/1 without provenance: calibrations, charts (zero shift,
 * displacement, FWHM and asymmetry at three angles, intensity against the first of the same standard), the signals
 * (which point broke which rule), and the verdict: fail if the newest calibration lies beyond the limits of a
 * chart, attention if any rule is broken in the newest phase, else pass.
 * Errors: LW_BAD_ARGUMENT for fewer than two, or for calibrations that can't be compared. */
lw_status lw_history(lw_engine *engine, const lw_history_entry *entry, size_t n, const lw_history_options *options,
                     lw_node *record, lw_error *err);

#endif
