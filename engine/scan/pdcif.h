/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the powder CIF reader share: the scan that is being put together, and how to ask the
 * document. Functions that give an int return 1 found, 0 not there, -1 refused (err set). */
#ifndef LW_SCAN_PDCIF_H
#define LW_SCAN_PDCIF_H

#include "scan/cif.h"

typedef enum abscissa_kind { IN_DEGREES, IN_SPACING, IN_Q, IN_GRID } abscissa_kind;

typedef struct lw_powder {
    lw_arena *arena;
    const lw_content *content;
    const lw_scan_options *options;
    lw_cif_block *first, *block;
    const lw_cif_item *intensity, *su, *angle;
    abscissa_kind abscissa;
    bool measured; /* the angles are as measured, so that a stated offset still applies */
    double start, step;
    double wavelength_angstrom;
    char notes[2000]; /* for the scan's header */
} lw_powder;

/* Something that the user should know but that is no error goes into the scan's header. */
void lw_powder_note(lw_powder *p, const char *format, ...) __attribute__((format(printf, 2, 3)));

/* LW_BAD_DATA about a line of the file. */
lw_status lw_powder_refuse(const lw_powder *p, long line, const char *remedy, lw_error *err,
                           const char *format, ...) __attribute__((format(printf, 5, 6)));

/* A value as it can be shown in a message. Returns word. */
const char *lw_powder_shown(const lw_cif_value *value, char word[40]);

/* The number of a single item; 0 if it is missing or unknown. */
int lw_powder_single(const lw_powder *p, const lw_cif_block *block, const char *name, double *number,
                     lw_error *err);

/* The item if it is a column of a loop with rows, else NULL. */
const lw_cif_item *lw_powder_column(const lw_cif_block *block, const char *name);

/* Finds the radiation of the scan. It may stand in another block; if other blocks differ, none is taken. */
lw_status lw_powder_radiation(lw_powder *p, lw_columns *columns, lw_error *err);

#endif
