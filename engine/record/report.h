/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A report: one HTML file that holds everything it shows (style, figures as SVG, a little script for
 * reading places off a figure) and asks nothing of the network. All text that comes in is shown as it
 * stands, never taken as markup. Sections appear in the order in which they are added. */
#ifndef LW_RECORD_REPORT_H
#define LW_RECORD_REPORT_H

#include "record/figure.h"
#include "record/text.h"

typedef struct lw_report lw_report;

typedef enum lw_verdict { LW_VERDICT_PASS, LW_VERDICT_ATTENTION, LW_VERDICT_FAIL } lw_verdict;

/* An empty report; subtitle may be NULL. Release it with lw_report_free. NULL on refusal of memory. */
lw_report *lw_report_new(lw_engine *engine, const char *title, const char *subtitle, lw_error *err);
/* Accepts NULL; clears *report. */
void lw_report_free(lw_report **report);

/* Each adds one section. Status: LW_OUT_OF_MEMORY; LW_BAD_ARGUMENT where the tree has the wrong form. */

/* A heading, which also enters the table of contents. */
lw_status lw_report_heading(lw_report *report, const char *text, lw_error *err);
/* Text; an empty line begins a new paragraph. */
lw_status lw_report_text(lw_report *report, const char *text, lw_error *err);
/* A boxed warning: what the reader must not overlook. */
lw_status lw_report_caution(lw_report *report, const char *title, const char *text, lw_error *err);
/* The outcome in one line, told by word and mark, not by colour alone. */
lw_status lw_report_verdict(lw_report *report, lw_verdict verdict, const char *text, lw_error *err);
/* A heading below the last one, not in the table of contents. */
lw_status lw_report_subheading(lw_report *report, const char *text, lw_error *err);
/* Rows from a list of groups. Units stand in the head where a column has one unit.
 * columns: names of those to show in their order, ended by NULL; NULL = all that any row has. */
lw_status lw_report_table(lw_report *report, const char *caption, const lw_node *rows, const char *const columns[],
                          lw_error *err);
/* Remarks in one compact list under one heading; nothing if there is no text among the list's children. */
lw_status lw_report_remarks(lw_report *report, const char *title, const lw_node *list, lw_error *err);
/* What is added between the two is folded away under its title until the reader opens it. */
lw_status lw_report_fold(lw_report *report, const char *title, lw_error *err);
lw_status lw_report_fold_end(lw_report *report, lw_error *err);
/* A result group under a heading of its own (its text `title`, else its name): quantities with
 * uncertainty and definition; lists `remarks` and `warnings`; statistics, words and published source in
 * small type; other lists as tables; groups within, a level lower. A
 * group `figure` within it, and each of a list `figures`, is drawn (lw_figure_of_tree). */
lw_status lw_report_result(lw_report *report, const lw_node *group, lw_error *err);
/* A figure with its title and caption. If it can't be drawn (no gnuplot), the report says so in its
 * place and goes on: see lw_report_warning. Status: also LW_CANCELLED. */
lw_status lw_report_figure(lw_report *report, const lw_figure *figure, lw_error *err);
/* Where everything came from: hashes, versions, options, in small type. */
lw_status lw_report_provenance(lw_report *report, const lw_node *group, lw_error *err);

/* The first reason why a figure isn't drawn; NULL if all are. Owned by the report. */
const char *lw_report_warning(const lw_report *report);

/* Appends the whole page. */
lw_status lw_report_html(const lw_report *report, lw_text *out, lw_error *err);
/* Writes it to a file, whole (record/file.h). */
lw_status lw_report_save(lw_engine *engine, const lw_report *report, const char *path, lw_error *err);

#endif
