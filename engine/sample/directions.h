/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lines that are orders of one direction (111 and 222, 200 and 400): size and strain along it alone. */
#ifndef LW_SAMPLE_DIRECTIONS_H
#define LW_SAMPLE_DIRECTIONS_H

#include "sample/breadths.h"

/* The direction of a reflection: hkl without common divisor; in the cubic system without order and signs. */
void lw_direction_of(const lw_profile *profile, bool cubic, int out[3]);

/* Adds the list `directions` to a group: for every direction with two or more orders at different s its hkl, its lines,
 * size_volume, strain_apparent and strain_rms by the form, with the distance to readings as spheres in their u
 * (sample/reading.h), or `not_determined`, the reason. A scale of the breadths plays no part: the strain is that of the
 * direction itself. Adds the description of a figure, the whole plot and a line a direction, if there is one.
 * whole: the fit of all lines. */
lw_status lw_directions_tell(const lw_breadths *breadths, const lw_breadth_fit *whole, lw_arena *arena, lw_node *group,
                             lw_error *err);

#endif
