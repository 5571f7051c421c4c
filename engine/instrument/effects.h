/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a change of the instrument does to results: samples of known size and strain are measured on the
 * instrument as it is now and analysed with the calibration from before. Nothing is approximated: the scan is
 * computed without noise worth the name and goes through the line fit that every sample goes through. */
#ifndef LW_INSTRUMENT_EFFECTS_H
#define LW_INSTRUMENT_EFFECTS_H

#include "instrument/calibration.h"

#include <stdint.h>

/* What breadths line by line give: 0 = the lines show no such part. */
typedef struct lw_effect_breadths {
    double scherrer_nm;        /* mean of lambda/(beta cos theta) */
    double williamson_hall_nm; /* reciprocal of the intercept of beta* against s */
    double williamson_hall_strain; /* root mean square, from its slope */
} lw_effect_breadths;

/* One sample, and what would be reported of it. A size of 0 stands for none: crystals so large, or strain so
 * small, that they do not widen the lines. */
typedef struct lw_effect {
    double size_nm;          /* volume-weighted mean column length; Lorentzian line */
    double strain;           /* root mean square, Gaussian line */
    /* what one size and one strain for all lines give, with the old calibration (a Voigt each, in the model) */
    double reported_size_nm; /* 0: no size broadening would be seen */
    double reported_strain;
    lw_effect_breadths by_old, by_new; /* each line with widths of its own, by either calibration */
    /* misfit of the fit with the old calibration: root mean square residual over the highest point */
    double misfit;
} lw_effect;

/* Where the lines of the samples stand: angles within the range of both calibrations and their heights. */
typedef struct lw_effect_lines {
    size_t n;
    const lw_reflection *reflection; /* ascending */
    const double *height;            /* [n] of the widest of them 1; NULL = all equal */
} lw_effect_lines;

/* Computes a sample's scan on an instrument.
 * Given:  instrument   whose profile the lines have, at its radiation
 *         lines        where, 2theta at the reference wavelength; aberrations of position are not applied
 *         size_nm, strain as in lw_effect; polarised as in lw_fit_options
 *         low_deg, high_deg, step_deg of the scan; counts at the top of the highest line, background counts;
 *         seed of the counting noise, 0 = none: expected counts, rounded
 * Returned: *scan; free with lw_scan_free(). */
typedef struct lw_effect_scan {
    double size_nm, strain, polarised, low_deg, high_deg, step_deg, counts, background;
    uint64_t seed;
} lw_effect_scan;
lw_status lw_effect_simulate(lw_engine *engine, const lw_calibration *instrument, const lw_effect_lines *lines,
                             const lw_effect_scan *how, lw_scan **scan, lw_error *err);

/* Fills the reported figures of one effect, whose size and strain are given. */
lw_status lw_effect_find(lw_engine *engine, const lw_calibration *old, const lw_calibration *now,
                         const lw_effect_lines *lines, lw_effect *effect, lw_error *err);

#endif
