/* SPDX-License-Identifier: GPL-3.0-or-later */
/* On which side of its point each note of a figure is written, so that notes cover neither each other
 * nor markers where there is room. */
#ifndef LW_RECORD_NOTES_H
#define LW_RECORD_NOTES_H

#include "record/layout.h"

#define LW_NOTES_MOST 200 /* notes beyond are placed without looking */

typedef struct lw_note_place {
    int x, y; /* -1, 0 or 1: left of, centred on or right of the point; below, level with or above it */
} lw_note_place;

/* Fills place[] for the notes of a panel, in the list's order; those of the other panel and those
 * without a finite place are passed over. size: type size, px. */
void lw_notes_place(const lw_figure *figure, const lw_layout *layout, int panel, double size,
                    lw_note_place place[LW_NOTES_MOST]);

/* Whether a note is drawn in that panel. */
bool lw_note_shown(const lw_note *note, const lw_layout *layout, int panel);

#endif
