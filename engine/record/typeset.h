/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The engine's plain units and names as type sets them. */
#ifndef LW_RECORD_TYPESET_H
#define LW_RECORD_TYPESET_H

#include "record/text.h"

/* Appends a unit: "nm^-1" as nm⁻¹, "deg" as °. */
void lw_unit_typeset(lw_text *out, const char *unit);

/* Appends a field's name as words: "size_volume" as "size volume"; capital: first letter raised. */
void lw_name_typeset(lw_text *out, const char *name, bool capital);

#endif
