/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Spectral purity of a tube's beam: foreign lines (K-beta, tungsten L) looked for where the strongest lines of a
 * standard would show them. */
#ifndef LW_INSTRUMENT_PURITY_H
#define LW_INSTRUMENT_PURITY_H

#include "line/lines.h"

/* Adds a list `purity` to the record: for each foreign line its wavelength, the reflections at which it was looked for,
 * and `relative_intensity`, its intensity over that of the K-alpha lines together: a quantity where it exceeds three u,
 * else an upper limit (95 %). A plain wavelength has none. Wavelengths: K-beta of the radiation; tungsten L-alpha 1 and
 * L-beta 1 by Bearden (1967) Rev. Mod. Phys. 39, 78. */
lw_status lw_purity(lw_engine *engine, const lw_lines *lines, lw_node *record, lw_error *err);

#endif
