/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The cell that puts lines where they are, with what the specimen's own mount and transparency do to them. Private to
 * the method `lattice`. */
#ifndef LW_SAMPLE_LATTICE_FIT_H
#define LW_SAMPLE_LATTICE_FIT_H

#include "sample/cell_parameters.h"
#include "sample/generalised.h"
#include "sample/positions.h"

enum { LW_LATTICE_AUTO, LW_LATTICE_YES, LW_LATTICE_NO };

/* Calculated positions: cell, then what the calibration and the specimen add. */
typedef struct lw_lattice {
    const lw_profiles *profiles;
    size_t n;
    const size_t *use; /* [n] which profiles take part */
    lw_cell_free free;
    lw_cell cell;
    double wavelength;
    size_t n_own;
    const lw_aberration *own[2]; /* refined for this specimen, after the cell: displacement, transparency */
} lw_lattice;

typedef struct lw_lattice_trial {
    char refined[64];         /* "displacement, transparency" ..., "" for the cell alone */
    double chi2, criterion;   /* AICc */
} lw_lattice_trial;

typedef struct lw_lattice_answer {
    double p[LW_GENERALISED_MOST];
    lw_generalised_fit fit;
    size_t n_own;
    const lw_aberration *own[2];
    const char *why;         /* what was decided about the displacement, for the remarks, or NULL */
    const char *why_deep;    /* and about the transparency */
    size_t n_tried;          /* when evidence decided about the transparency */
    lw_lattice_trial tried[4];
} lw_lattice_answer;

const lw_line *lw__lattice_line(const lw_lattice *lattice, size_t i);

/* Which row of the answer an aberration of the specimen has; LW_NO_PARAMETER if it was not refined. */
size_t lw__lattice_row(const lw_lattice *lattice, const lw_lattice_answer *answer, const char *name);

/* Fits the cell to the lines in use. displacement, transparency: refined, not, or as the lines give evidence for.
 * Errors: LW_NOT_SUPPORTED (the lines don't determine it, no calibration), LW_NO_CONVERGENCE. */
lw_status lw__lattice_fit(lw_lattice *lattice, int displacement, int transparency, lw_arena *arena,
                          lw_lattice_answer *answer, lw_error *err);

#endif
