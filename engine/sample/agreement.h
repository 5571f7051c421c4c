/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Methods laid side by side: do they say the same? */
#ifndef LW_SAMPLE_AGREEMENT_H
#define LW_SAMPLE_AGREEMENT_H

#include "base/tree.h"

/* Adds `agreement` to results: for size_volume, size_area and strain_rms the values by method and, for every
 * pair, the difference, its pull (difference over the combined standard uncertainty) and, beyond 3, the
 * likely reason. Given:  methods  the group of method results Notes:  the methods share the same lines, so
 * their errors go together and a pull is rather too small than too large. A limit against a value is compared
 * with the side that it forbids. */
void lw_agreement(const lw_node *methods, lw_node *results, lw_error *err);

/* The likely reason why two methods differ in a field, one sentence. */
const char *lw_agreement_reason(const char *field, const char *first, const char *second, double difference);

#endif
