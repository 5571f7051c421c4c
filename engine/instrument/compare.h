/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Two calibrations of one instrument laid side by side: what changed, whether the laboratory accepts it, and what
 * results would be if the old calibration were still used. */
#ifndef LW_INSTRUMENT_COMPARE_H
#define LW_INSTRUMENT_COMPARE_H

#include "instrument/effects.h"

/* How much each quantity may change. The defaults are common practice, not a standard's: a laboratory sets its own. */
typedef struct lw_tolerances {
    double zero_shift_deg, displacement_mm, flat_specimen_deg, transparency_deg, wavelength_relative;
    double shift_deg;             /* of a line's place, all aberrations together, at each of three angles */
    double fwhm_percent, breadth_percent; /* at each of three angles, of the value before */
    double asymmetry_deg;         /* centroid minus the middle at half height, at each of three angles */
    double intensity_percent;     /* of the lines' areas, same standard and counting time taken for granted */
} lw_tolerances;
extern const lw_option lw_tolerance_table[];
lw_tolerances lw_tolerances_default(void);

typedef struct lw_compare_options {
    lw_tolerances tolerances;
    bool effects;                 /* compute the effect on results (about two seconds) */
    const lw_effect_lines *lines; /* where the samples' lines stand; NULL = eight lines over the common range */
} lw_compare_options;
lw_compare_options lw_compare_defaults(void);

/* Whether two calibrations can be compared: same radiation, same geometry, same radius within 0.1 %, ranges that
 * overlap by 20 deg or half of the shorter one. LW_BAD_ARGUMENT says what differs. */
lw_status lw_comparable(const lw_calibration *before, const lw_calibration *after, lw_error *err);

/* Compares. Adds to `record` (a root): linewright/comparison/1 without provenance. Each quantity has before, after,
 * difference (quantities), z (difference in units of its u), tolerance and verdict: pass, |difference| within the
 * tolerance; fail, beyond it by more than two u; attention, beyond it by less, or u itself larger than the tolerance.
 * The overall verdict is the worst; `reasons` says why in words. */
lw_status lw_compare(lw_engine *engine, const lw_calibration *before, const lw_calibration *after,
                     const lw_compare_options *options, lw_node *record, lw_error *err);
/* The parts that the history shares. Areas of the lines that both have: geometric mean of after over before, percent, u from the scatter of the lines.
 * False if the standards differ or fewer than three lines are common. */
bool lw_compare_intensity(const lw_calibration *before, const lw_calibration *after, lw_quantity *percent);
/* The low, middle and high angle (which = 0, 1, 2) of a range, deg. */
double lw_compare_angle(double low_deg, double high_deg, int which);

#endif
