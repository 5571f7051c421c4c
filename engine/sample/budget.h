/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Of which parts an uncertainty consists. */
#ifndef LW_SAMPLE_BUDGET_H
#define LW_SAMPLE_BUDGET_H

#include "sample/method.h"

/* Adds the group `budget` to results of lw_separate(): rows (list of { quantity, whole, parts (list of { source, u,
 * percent }), sum_percent }), definition and source. Rows are the sizes, strains and breadths of methods, cell and
 * lines that have a value; parts:
 *   counting, background, misfit, calibration, wavelength  propagated: the fit's covariance with the background held,
 *       what freeing the background adds to it, by how much the misfit widened both, and the calibration's; times the
 *       slopes of the quantity to the fitted parameters and aberrations, by central differences through deconvolution
 *       and method (JCGM 100:2008, 5.1.3 note 2 and 5.2.2). For deconvolution by convolution.
 *   propagated  all of these together, by difference, where they can't be told apart: other deconvolutions, and methods
 *       that read the counts anew (whole pattern, variance), and Warren-Averbach where its ranges jump
 *   scattering  of the atoms, across broad lines (positions only)
 *   scatter     enlargement because lines scatter about the method's model
 *   form        choice of the form that size and strain add by, or of the strain's form
 *   model       distance to other readings of the same breadths (reading.h); Warren-Averbach: its ranges, by difference
 *   constant    Scherrer's K where the shape is not known: rectangular over the shapes (JCGM 100:2008, 4.3.7), in the
 *       row methods.scherrer.size, the size of crystallites of any of these shapes; of a column length it has no part
 * Nothing is added where the lines come from no fit.
 * Source: JCGM 100:2008, 5 and 8. */
lw_status lw_budget(lw_engine *engine, const lw_profiles *profiles, lw_node *results, lw_error *err);

/* What a row of the budget has for these sources together (NULL-terminated); NAN where there is no such row or its
 * parts are not told apart. */
double lw_budget_u(const lw_node *results, const char *path, const char *const *sources);

#endif
