/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What methods have in common: they read the same breadths, so their answers move together. A method leaves in its result
 * how each of its quantities moves with the numbers behind the profiles; two of those give the covariance. */
#ifndef LW_SAMPLE_SHARED_H
#define LW_SAMPLE_SHARED_H

#include "profile/profiles.h"
#include "sample/generalised.h"

/* Adds the slopes of a quantity to the rows of profiles->covariance under `sensitivity` of a result.
 * Given:  field       name of the quantity
 *         fit, n, m   observations and parameters of the fit that it comes from; its scatter is a factor, as in u
 *         of[m]       slopes of the quantity to the parameters
 *         row[n]      the row of each observation in profiles->covariance
 *         by[n]       slope of each observation to its row, NULL = 1 */
lw_status lw_shared_tell(const lw_profiles *profiles, const char *field, const lw_generalised_fit *fit, size_t n, size_t m,
                         const double *of, const size_t *row, const double *by, lw_arena *arena, lw_node *result,
                         lw_error *err);

/* Covariance of a field of two results by what they share; false if one of them does not tell. */
bool lw_shared_covariance(const lw_profiles *profiles, const lw_node *a, const lw_node *b, const char *field,
                          double *covariance);

/* Takes `sensitivity` out of a result again: it means nothing without the profiles. */
void lw_shared_forget(lw_node *result);

#endif
