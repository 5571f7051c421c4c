/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Draws a figure with the program gnuplot, which is run as a process of its own (no shell) and told
 * what to do through a pipe. All text is literal: no markup, no escapes. */
#ifndef LW_RECORD_GNUPLOT_H
#define LW_RECORD_GNUPLOT_H

#include "record/layout.h"
#include "record/text.h"

typedef enum lw_drawing_format { LW_DRAW_SVG, LW_DRAW_PNG, LW_DRAW_PDF } lw_drawing_format;

typedef struct lw_drawing {
    lw_drawing_format format;
    double width, height; /* px; PNG is drawn at twice that, PDF at 900 px = 180 mm */
    bool title;           /* draw the title above; off where a caption has it */
} lw_drawing;

/* 900 x 560 (640 with a lower panel), with title. */
lw_drawing lw_drawing_standard(const lw_figure *figure, lw_drawing_format format);

/* Appends the drawing's bytes to `out`. An SVG scales to the room it is given.
 * Status: LW_IO (gnuplot not installed: package gnuplot-nox; or its complaint; or no answer in 60 s),
 *         LW_CANCELLED, LW_OUT_OF_MEMORY. */
lw_status lw_figure_draw(const lw_figure *figure, const lw_drawing *drawing, lw_text *out, lw_error *err);

/* Draws to a file, written whole, whose suffix .svg, .png or .pdf says the format.
 * Status: also LW_BAD_ARGUMENT for another suffix. */
lw_status lw_figure_save_as(lw_engine *engine, const lw_figure *figure, const char *path, lw_error *err);

/* The script that gnuplot is fed, for tests and the curious. */
void lw_figure_script(const lw_figure *figure, const lw_drawing *drawing, lw_text *out);

#endif
