/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a careful colleague would point out before the numbers are used. */
#ifndef LW_SAMPLE_NOTES_H
#define LW_SAMPLE_NOTES_H

#include "profile/profiles.h"

/* Adds the list `notes` of sentences to results: lines not seen or not resolved, overlaps, misfit of the line
 * shape, refolds that failed, too few lines, sizes beyond a laboratory instrument's reach, and every remark
 * of the methods with the method's title before it. */
void lw_notes(const lw_profiles *profiles, const lw_node *methods, lw_node *results, lw_error *err);

#endif
