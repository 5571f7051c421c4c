/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Starting values for a fit, from the scan and the expected places alone. */
#ifndef LW_LINE_START_H
#define LW_LINE_START_H

#include "scan/scan.h"

typedef struct lw_line_start {
    double expected_deg;  /* where the line should be */
    double position_deg;  /* where it seems to be */
    double height;        /* above the background, intensity */
    double fwhm_deg;
    bool visible;         /* stands out of the noise */
    bool width_seen;      /* its width is its own, not taken from narrower lines */
} lw_line_start;

/* First point of a scan at or above an angle (deg), scan->n if there is none. */
size_t lw_point_at(const lw_scan *scan, double angle);

/* Background under the lines by repeated clipping of the square-rooted scan with a growing window.
 * Given: window_deg, the widest structure that counts as a line; background[scan->n] receives it.
 * Source: Ryan, Clayton, Griffin, Sie & Cousens (1988) Nucl. Instrum. Methods B 34, 396. */
lw_status lw_start_background(const lw_scan *scan, double window_deg, double *background, lw_arena *scratch,
                              lw_error *err);

/* Finds the lines near their expected places.
 * Given:  start[n] with expected_deg set, ascending; background[scan->n]; search_deg how far off all may be;
 *         doublet: the beam has a second component close above the first
 * Returned: the other fields; *explained: share of the scan's strong peaks that lie where lines are expected. */
lw_status lw_start_lines(const lw_scan *scan, const double *background, double search_deg, lw_line_start *start,
                         size_t n, double *explained, lw_arena *scratch, lw_error *err);

#endif
