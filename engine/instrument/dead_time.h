/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The dead time of a counter, from two scans of one specimen at two tube currents or attenuations: where the stronger
 * scan is not stronger by the same factor at every rate, counts were lost.
 * Models (Knoll, Radiation Detection and Measurement, from memory), true rate n, observed rate m, dead time tau:
 *   non-paralysable  m = n/(1 + n tau)
 *   paralysable      m = n exp(-n tau), below its largest rate 1/(e tau) */
#ifndef LW_INSTRUMENT_DEAD_TIME_H
#define LW_INSTRUMENT_DEAD_TIME_H

#include "base/options.h"
#include "base/tree.h"
#include "scan/scan.h"

typedef struct lw_dead_time_options {
    double counting_time_s;        /* of a point; NAN = from the scan's header ("counting time 2 s") */
    double weaker_counting_time_s; /* of a point of the weaker scan; NAN = from its header, else as the stronger */
    int model;                     /* "non_paralysable", "paralysable" */
    double dead_time_s;            /* stated, instead of a weaker scan; NAN = none */
} lw_dead_time_options;
extern const lw_option lw_dead_time_option_table[];
lw_dead_time_options lw_dead_time_defaults(void);

/* Fills result with dead_time (s; an upper limit, 95 %, where it is below 2 u), intensity_ratio, loss at the strongest
 * point, levels (ratio of the scans against the rate), chi-square, warnings and verdict (attention above 1 % loss).
 * Given:  stronger, weaker  counts on the same angles; weaker NULL: options->dead_time_s is taken
 * Counts are neighbouring points together until the weaker scan has 100; the true rate of each group is a parameter of the
 * fit (errors in both scans), eliminated group by group.
 * Errors: LW_BAD_ARGUMENT for scans of other angles, no counts, no counting time, or rates that do not differ. */
lw_status lw_dead_time(lw_engine *engine, const lw_scan *stronger, const lw_scan *weaker, const lw_dead_time_options *options,
                       lw_node *result, lw_error *err);

#endif
