/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Which cell parameters a crystal system leaves free. */
#ifndef LW_SAMPLE_CELL_PARAMETERS_H
#define LW_SAMPLE_CELL_PARAMETERS_H

#include "physics/crystal.h"

#define LW_CELL_FREE_MOST 6

typedef struct lw_cell_free {
    size_t n;
    const char *name[LW_CELL_FREE_MOST]; /* "a" ... "gamma" */
    bool moves[LW_CELL_FREE_MOST][6];    /* parameter i sets these of a, b, c, alpha, beta, gamma */
} lw_cell_free;

/* The free parameters of a material's cell. Trigonal cells with gamma = 120 are on hexagonal axes, others
 * rhombohedral; the unique axis of a monoclinic cell is told by the angle that is not 90 degrees (b, if
 * none). */
lw_cell_free lw_cell_free_of(const lw_material *material);

/* Reads and sets free parameters. */
void lw_cell_free_read(const lw_cell_free *free, const lw_cell *cell, double *p);
void lw_cell_free_set(const lw_cell_free *free, const double *p, lw_cell *cell);

#endif
