/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the Warren-Averbach method finds from one set of orders, and its figures (private to sample/). */
#ifndef LW_SAMPLE_WARREN_AVERBACH_H
#define LW_SAMPLE_WARREN_AVERBACH_H

#include "sample/column_lengths.h"
#include "sample/harmonics.h"
#include "sample/reading.h"

typedef struct lw__averbach {
    lw_orders orders;
    lw_harmonics harmonics;
    lw_size_coefficients size;
    lw_initial_slope slope;
    bool has_slope, has_volume;
    double size_volume, u_volume;
    lw_readings readings; /* of the breadths, where the coefficients are those of fitted Voigts */
    const char *no_slope, *no_volume;
    lw_column_density density;
    bool has_density;
    double strain, u_strain, strain_length; /* at half the size; strain 0 = not determined */
    size_t first_strain, end_strain;        /* lengths at which the strain is determined */
    double chi2, chi2_length, chi2_p;
} lw__averbach;

/* Adds the descriptions of the figures to a result: coefficients (`figure`), and in the group `figures` the orders, the
 * strain and the column lengths, as far as they were determined. Refused memory is in err. */
void lw__averbach_draw(const lw__averbach *set, lw_arena *arena, lw_node *result, lw_error *err);

#endif
