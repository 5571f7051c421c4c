/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Variance of a line as a function of the range over which it is taken. Because a line's tails fall as 1/s^2 the
 * variance has no limit: it grows in proportion to the range, and rate and start of that growth are what is read.
 * Source: Wilson (1962) Proc. Phys. Soc. 80, 286; Langford & Wilson (1963) in Crystallography and Crystal Perfection
 * (ed. Ramachandran), 207. */
#ifndef LW_SAMPLE_TRUNCATED_H
#define LW_SAMPLE_TRUNCATED_H

#include "base/arena.h"

#include <stdbool.h>
#include <stddef.h>

/* A line without background on an axis whose origin is the middle of all ranges. */
typedef struct lw_tailed {
    size_t n;
    const double *s;         /* [n] ascending, nm^-1 */
    const double *intensity; /* [n] */
    const double *variance;  /* [n] of intensity, independent from point to point; NULL = exact */
} lw_tailed;

/* Moments over ranges: half[n] ascending half widths; zeroth[n] and second[n] integrals of I and s^2 I over
 * -half to half, each point's cell taken as constant and cut where the range ends. */
void lw_truncated_moments(const lw_tailed *line, size_t n, const double *half, double *zeroth, double *second);

typedef struct lw_truncated {
    size_t n;
    double *half;       /* [n] half widths of the ranges, nm^-1 */
    double *variance;   /* [n] second moment over the line's whole area, what `taken` names taken off, nm^-2 */
    double *range;      /* [n] whole widths, corrected for the area beyond the widest (see .c), nm^-1 */
    double *level;      /* [n] what one unit of intensity left under the line would add to `variance` */
    double *covariance; /* [n*n] of `variance`, by the counts */
} lw_truncated;

/* Variance against range, normalised by the whole area.
 * Given:  line
 *         n, half    ranges
 *         inside     share of the line's area within the widest range if its tail were `tail`/s^2 (1 and 0 if nothing
 *                    is known)
 *         tail       nm^-1; what the answer's own tail is more than this is corrected for
 *         taken[n]   variance to take off at each range (the instrument's), NULL = nothing
 * Returned: *out in the arena. LW_NOT_SUPPORTED if there is no area. */
lw_status lw_truncated_variance(const lw_tailed *line, size_t n, const double *half, double inside, double tail,
                                const double *taken, lw_arena *arena, lw_truncated *out, lw_error *err);

typedef struct lw_variance_fit {
    double slope, start;     /* nm^-1 and nm^-2 */
    double level;            /* intensity under the line that the fitted background left */
    double covariance[2][2]; /* of start, slope: counts and level, the third term, and the lower third of the ranges */
    double chi2, p;
    size_t degrees, first;   /* ranges from `first` on were used */
} lw_variance_fit;

/* Fits  W = start + slope range - 12 f start slope/range + level x (what a level adds),  from the narrowest range on from
 * which that describes it (chance above 5 %), at least three fifths of the ranges short of the widest.
 *   The level is free because the background was fitted together with the very tails that are in question.
 *   The third term is what a variance `start` does to a tail slope/(2 s^2) when the two are convolved, f = 1; where strain
 *   falls with length as exp(-t/xi), f = 1 + L/(3 xi) with L the area-weighted size. xi is not known: f is taken as 2, and
 *   1 to 3 as a rectangular distribution (JCGM 100:2008, 4.3.7). Without strain the term is 0; a negative start is a
 *   taper of the crystals, which has no such term.
 *   What leaving out the lower third of the ranges changes is taken likewise.
 * Status: LW_NOT_SUPPORTED when no stretch is straight: the tails have not reached their law within the range. */
lw_status lw_variance_line(const lw_truncated *w, lw_arena *arena, lw_variance_fit *fit, lw_error *err);

#endif
