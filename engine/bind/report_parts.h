/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The tables of a report that tell how sure its numbers are. */
#ifndef LW_BIND_REPORT_PARTS_H
#define LW_BIND_REPORT_PARTS_H

#include "bind/bind.h"
#include "record/report.h"

/* Shows the budget and the realisations of results of lw.separate, if there are any: with `first_hand` the rows of
 * methods and cell, else those of single lines and of whatever else was collected. */
void lwb_report_parts(lua_State *L, lw_report *report, const lw_node *results, bool first_hand);

#endif
