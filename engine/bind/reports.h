/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reports as the job writes them. */
#ifndef LW_BIND_REPORTS_H
#define LW_BIND_REPORTS_H

#include "bind/bind.h"

/* User values of a report. */
enum {
    LWB_REPORT_FIGURES = 1, /* list of figures */
    LWB_REPORT_SUBJECT,     /* the last object of the road that it shows, for the provenance */
    LWB_REPORT_PREFIXES,    /* how the files' names of each figure begin */
    LWB_REPORT_PREFIX,      /* of the present section */
    LWB_REPORT_VALUES = LWB_REPORT_PREFIX
};

/* Writes the report at an index to out/report.html and its figures to out/figures. */
void lwb_write_report(lua_State *L, int index);

/* Tells of a verdict on stderr; one that failed makes exit code 3 under strict = true. */
void lwb_judge(lua_State *L, bool passed, const char *text);

#endif
