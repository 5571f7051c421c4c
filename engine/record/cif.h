/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A result tree as a CIF 1.1 data block (Hall, Allen & Brown 1991, Acta Cryst. A47, 655-685; syntax of
 * version 1.1: International Tables for Crystallography G, 2.2.7). Names are the caller's: a child
 * named "pd_meas_2theta_scan" becomes the item _pd_meas_2theta_scan. What stands for what:
 *   text, number, flag   an item; quantity: value with its standard uncertainty, 18.42(63)
 *   limit                an item whose value is text, '> 120'
 *   list of groups       a loop, its columns the names that any row has
 *   group of vectors     a loop of columns, all of one length; its own name isn't written
 * Units aren't written: CIF's dictionaries fix them (wavelength and cell in angstrom). What isn't finite
 * is "." (not applicable) as a value that is missing on purpose; a cell that a row lacks is "?". */
#ifndef LW_RECORD_CIF_H
#define LW_RECORD_CIF_H

#include "base/tree.h"
#include "record/text.h"

/* Appends the block data_<name> of a group. Characters that a name can't have become _, characters
 * outside ASCII in text become ?, as CIF 1.1 is ASCII.
 * Status: LW_BAD_ARGUMENT for vectors of a loop that differ in length, a list of something else than
 * groups, or a group that holds no vectors; LW_OUT_OF_MEMORY; LW_CANCELLED. */
lw_status lw_cif_write(const lw_node *group, const char *name, lw_text *out, lw_error *err);

/* Writes the block to a file of its own (record/file.h). */
lw_status lw_cif_save(lw_engine *engine, const char *path, const lw_node *group, const char *name, lw_error *err);

/* Appends value(su) as CIF writes it: the uncertainty's first two digits count units of the value's last
 * place; without uncertainty (0 or not finite) the shortest digits that read back to the same value. */
void lw_cif_write_number(lw_text *out, double value, double u);

#endif
