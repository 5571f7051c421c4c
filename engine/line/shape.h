/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Line shapes. The Voigt (with Gaussian and Lorentzian as its limits) is evaluated by numeric/voigt; the
 * empirical shapes here serve comparison with older work and split forms for asymmetry. Each is one
 * constant. An empirical shape takes the emission components as displaced copies of equal width. */
#ifndef LW_LINE_SHAPE_H
#define LW_LINE_SHAPE_H

#include "numeric/voigt.h"

#include <stdbool.h>

#define LW_LOCAL_MOST 4

/* What an empirical shape is at all points of a line: computed once for them. */
typedef struct lw_shape_side {
    double width, form;            /* full width of a symmetric line with this side; form parameter */
    double breadth, breadth_slope; /* integral breadth over width, and its derivative to the form */
    double pearson;                /* Pearson VII: 4 (2^(1/m) - 1) */
} lw_shape_side;
typedef struct lw_shape_ready {
    lw_shape_side side[2]; /* low angles, high angles */
    double area;           /* of the shape of unit height */
    bool split;
} lw_shape_ready;

typedef struct lw_line_shape {
    const char *name;
    const char *source;
    bool is_voigt;
    int n_local;                        /* own parameters of a line */
    const char *local[LW_LOCAL_MOST];   /* their names */
    double lower[LW_LOCAL_MOST], upper[LW_LOCAL_MOST]; /* bounds; widths are widened by the fit's scale */
    bool held[LW_LOCAL_MOST];           /* Gaussian and Lorentzian: the other width stays 0 */
    /* empirical shapes: what is the same at all points; unit-area profile at x and its derivatives to x and the
     * parameters */
    void (*ready)(const double *local, lw_shape_ready *ready);
    double (*at)(double x, const lw_shape_ready *ready, double *d_x, double *d_local);
    /* FWHM and integral breadth and their derivatives to the parameters */
    void (*breadths)(const double *local, double *fwhm, double *breadth, double *d_fwhm, double *d_breadth);
    /* parameters for a FWHM, to start from */
    void (*start)(double fwhm, double *local);
} lw_line_shape;

extern const lw_line_shape *const lw_line_shape_list[]; /* NULL-terminated, in the order of lw_line_shape_names */
extern const char *const lw_line_shape_names[];    /* for the option table */

/* An empirical shape at a single x. */
double lw_line_shape_value(const lw_line_shape *shape, double x, const double *local, double *d_x, double *d_local);

/* Sums the copies of an empirical shape at n points; without slopes only value[n] is written, with them also
 * d_position[n] and d_local[i][n]. */
void lw_line_shape_sum(const lw_line_shape *shape, size_t n, const double *x, const lw_voigt_node *node, size_t n_nodes,
                       const double *local, bool slopes, double *value, double *d_position, double *const *d_local);

#endif
