/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Rows of a result tree as comma-separated values, quoted by RFC 4180, lines ended by a newline. */
#ifndef LW_RECORD_CSV_H
#define LW_RECORD_CSV_H

#include "base/tree.h"
#include "record/text.h"

/* Appends a header and one line for each group in the list.
 * A column is a name (and unit) that any row has, in the order of first appearance. A quantity gives
 * two, `size_nm` and `u_size_nm`; a limit stands as ">120" or "<0.001" with u empty. A group within a
 * row is spread out as `group.name`, a vector is its numbers parted by spaces, lists within a row are
 * left out. What a row lacks, and what isn't finite, is an empty cell.
 * Status: LW_BAD_ARGUMENT if `rows` isn't a list of groups; LW_OUT_OF_MEMORY. */
lw_status lw_csv_write(const lw_node *rows, lw_text *out, lw_error *err);

/* The same to a file (record/file.h). */
lw_status lw_csv_save(lw_engine *engine, const char *path, const lw_node *rows, lw_error *err);

#endif
