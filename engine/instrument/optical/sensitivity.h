/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a refined geometry means at angles, and how sure that is. */
#ifndef LW_INSTRUMENT_OPTICAL_SENSITIVITY_H
#define LW_INSTRUMENT_OPTICAL_SENSITIVITY_H

#include "instrument/optical/refine.h"

/* Quantities of a geometry that were refined. */
typedef struct lw_refined_set {
    size_t n;
    const char *const *name;
    const double (*covariance)[LW_REFINED_MOST];
} lw_refined_set;

/* Figures of a geometry at n angles, with their standard uncertainties from the covariance of the refined quantities, by
 * central differences over one standard uncertainty of each (JCGM 100:2008, 5.1.4 and H.1.3.2). Quantities that were held
 * have no share in u.
 * Returned: figure[n], u[n]; slope[n][LW_REFINED_MOST] (may be NULL) per unit of the quantity. */
lw_status lw_optics_figures(lw_engine *engine, const lw_geometry *geometry, const lw_refined_set *refined, size_t n,
                            const double *two_theta_deg, lw_optics_figure *figure, lw_optics_figure *u,
                            lw_optics_figure (*slope)[LW_REFINED_MOST], lw_error *err);

#endif
