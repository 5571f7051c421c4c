/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What a file says about its radiation, held against the radiation that the user gives: a scan that is read with
 * another wavelength than it was measured with gives wrong spacings without any other sign. */
#ifndef LW_SCAN_STATED_H
#define LW_SCAN_STATED_H

#include "scan/reader.h"

/* Compares. The file states it as a radiation of its own (pdCIF) or in the comments of its header ("wavelength: 1.5406 A",
 * "radiation: Cu Ka"); one that states nothing agrees with all.
 * Agreement is with the strongest component of the given radiation, or the mean of all, within 1e-3 relative and half
 * of the last digit that a comment shows.
 * Returned: *note is a line for the scan's header if the strongest component differs by more than 1e-5, else NULL; in
 *           columns->arena
 * Status:   LW_BAD_ARGUMENT with both wavelengths if they differ and `differs` does not say that this is meant;
 *           LW_OUT_OF_MEMORY. */
lw_status lw_stated_check(const lw_columns *columns, const char *file, const lw_radiation *given, bool differs,
                          const char **note, lw_error *err);

#endif
