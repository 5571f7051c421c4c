/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The fixed parts of a report: its style sheet and its script. */
#ifndef LW_RECORD_PAGE_H
#define LW_RECORD_PAGE_H

extern const char lw_page_style[];
extern const char lw_page_script[];

#endif
