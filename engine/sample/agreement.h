/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Methods laid side by side: do they say the same? */
#ifndef LW_SAMPLE_AGREEMENT_H
#define LW_SAMPLE_AGREEMENT_H

#include "profile/profiles.h"

/* Adds `agreement` to results: for size_volume, size_area and strain_rms the values by method and, for every pair, its
 * pull and, beyond 3, the likely reason.
 * Given:  methods  the group of method results, with their sensitivities (sample/shared.h)
 * Notes:  the pull is the difference over its own standard uncertainty, u^2 = u_a^2 + u_b^2 - 2 cov. The covariance comes
 *         from the breadths that both methods read, where both tell how they move with them; it is given as `correlation`.
 *         Of other pairs (counts or coefficients read by one of them) it is not known and taken as 0, which makes their
 *         pull rather too small: such a pair has no `correlation`. A limit against a value is compared with the side that
 *         it forbids. */
void lw_agreement(const lw_profiles *profiles, const lw_node *methods, lw_node *results, lw_error *err);

/* The likely reason why two results differ in a field, one sentence: first what the results themselves show (a limit, too
 * few lines, breadths that depend on direction), then what is known of the two methods.
 * methods: the group they stand in, named children. */
const char *lw_agreement_reason(const lw_profiles *profiles, const lw_node *methods, const char *field, const lw_node *first,
                                const lw_node *second);

#endif
