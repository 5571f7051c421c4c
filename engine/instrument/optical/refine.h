/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Refines a geometry against the scan of a standard: every line is the emission spectrum convolved with the optical
 * profile at its angle, on a background straight across its window. */
#ifndef LW_INSTRUMENT_OPTICAL_REFINE_H
#define LW_INSTRUMENT_OPTICAL_REFINE_H

#include "instrument/optical/optics.h"
#include "line/lines.h"

#define LW_REFINED_MOST 6

/* Quantities of a geometry that can be refined; NULL-terminated: "source_width", "slit_width", "divergence" ... */
extern const char *const lw_geometry_names[];
double *lw_geometry_field(lw_geometry *geometry, const char *name); /* NULL if unknown */

typedef struct lw_refine_options {
    size_t n;
    const char *name[LW_REFINED_MOST];
    /* what is known of a quantity apart from the profile, as a value with its u; u = 0: nothing. It counts as one more
     * observation, not in chi2 */
    double known[LW_REFINED_MOST], u_known[LW_REFINED_MOST];
    double domain_size_nm; /* mean column length of the standard: a Lorentzian of lambda/(D cos theta); 0 = none */
    bool summed;           /* counts are summed over each step: a box of the step's width */
} lw_refine_options;

typedef struct lw_refined {
    lw_geometry geometry;
    size_t n;
    const char *name[LW_REFINED_MOST];
    double value[LW_REFINED_MOST], covariance[LW_REFINED_MOST][LW_REFINED_MOST];
    double chi2, chi2_as_fitted; /* the second: of the lines' own fit, at the same points */
    size_t n_points, n_parameters, iterations;
    size_t n_lines;
    size_t *line;           /* [n_lines], which of the fitted lines */
    double *position, *position_covariance; /* deg, [n_lines], [n_lines^2]; in the arena of the call */
    bool attenuation_from_positions; /* for the caller's use: a value known from the lines' places went in */
    double *cross;          /* [n_lines][n]: covariance of the positions with the refined quantities */
} lw_refined;

/* Refines. `lines` are the fitted lines of the scan (any shape): where they stand, how high they are.
 * Errors: LW_BAD_ARGUMENT for an impossible geometry or an unknown name; LW_NO_CONVERGENCE. */
lw_status lw_geometry_refine(lw_engine *engine, const lw_lines *lines, const lw_geometry *start,
                             const lw_refine_options *options, lw_arena *arena, lw_refined *refined, lw_error *err);

#endif
