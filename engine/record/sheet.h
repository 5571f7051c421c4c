/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Parts of a result tree as HTML: tables, lists of values, provenance. record/report puts them into a
 * page. All text is escaped. */
#ifndef LW_RECORD_SHEET_H
#define LW_RECORD_SHEET_H

#include "base/tree.h"
#include "record/text.h"

/* A table from a list of groups.
 * Given: columns  names of those to show in their order, ended by NULL; one that no row has is left out.
 *                 NULL = the names that any row has, as they come
 * Status: LW_BAD_ARGUMENT if `rows` isn't a list of groups; LW_OUT_OF_MEMORY. */
lw_status lw_sheet_table(lw_text *out, const char *caption, const lw_node *rows, const char *const columns[],
                         lw_error *err);

/* A table of a group's own values: name, value, and what it means. Only its quantities, if it has any; the
 * statistics and words beside them are left to lw_sheet_small. Nothing if it has none. */
void lw_sheet_values(lw_text *out, const lw_node *group);

/* What lw_sheet_values leaves: numbers and single words in one line, sentences below, in small type. */
void lw_sheet_small(lw_text *out, const lw_node *group);

/* A named list: groups as a table, others as a bulleted list. */
lw_status lw_sheet_list(lw_text *out, const lw_node *list, lw_error *err);

/* <dt>, <dd> pairs of a group; names of groups within stand before a comma. */
void lw_sheet_definitions(lw_text *out, const char *prefix, const lw_node *group);

/* A group's title: its text `title`, else its name as words; escaped. */
void lw_sheet_title(lw_text *out, const lw_node *group);

#endif
