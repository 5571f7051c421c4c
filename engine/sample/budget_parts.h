/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parts of variances that come through the fitted parameters and the calibration (private to sample/). */
#ifndef LW_SAMPLE_BUDGET_PARTS_H
#define LW_SAMPLE_BUDGET_PARTS_H

#include "profile/profiles.h"
#include "sample/collect.h"

enum {
    LW__COUNTING,
    LW__BACKGROUND,
    LW__MISFIT,
    LW__CALIBRATION,
    LW__WAVELENGTH,
    LW__SCATTERING,
    LW__PARTS
};

/* Variances of every quantity of the collection by part, [collection->n][LW__PARTS]; a row that can't be had (a limit
 * near by) begins with NAN. The collection names the quantities of `results`; methods are run again with one parameter
 * after the other moved.
 * Given: profiles of method "convolution" whose lines come from a fit. */
lw_status lw__budget_parts(lw_engine *engine, const lw_profiles *profiles, const char *const *methods, size_t n_methods,
                           const lw__collection *collection, lw_arena *arena, double *variance, lw_error *err);

#endif
