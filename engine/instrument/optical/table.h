/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The optical profile as the line fit takes it: a table of densities and the Gaussian that joins them. */
#ifndef LW_INSTRUMENT_OPTICAL_TABLE_H
#define LW_INSTRUMENT_OPTICAL_TABLE_H

#include "instrument/optical/optics.h"
#include "line/width.h"

/* Table of a geometry between two angles, a row a degree, in the arena.
 * Returned: *table, and *gauss_variance_deg2, the square of the FWHM of the Gaussian that it is to be convolved with.
 * The weights are the profile with that Gaussian taken out, limited to what the grid can carry: the widths of the
 * profile are kept to 0.5 %, its edges are as sharp as the spacing. */
lw_status lw_optics_table(lw_engine *engine, const lw_geometry *geometry, double low_deg, double high_deg,
                          lw_arena *arena, lw_profile_table **table, double *gauss_variance_deg2, lw_error *err);

#endif
