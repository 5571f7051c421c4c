/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The model of a whole scan: background + lines, and its normal equations.
 * A scan is cut into blocks of 64 points, and these are bundled by eight. In the core of a line it is evaluated point
 * by point; further out at a few nodes a block and interpolated, and in bundles far away at a few nodes a bundle.
 * Model and gradient keep every tail; of the normal matrix only the blocks of one far line with another are left out
 * while iterating. No Jacobian is ever stored beyond one bundle.
 *
 * Parameters, in this order: for each line position (deg), area (intensity x deg), then n_local shape
 * parameters; then the border: background terms, then globals (width-function parameters). */
#ifndef LW_LINE_MODEL_H
#define LW_LINE_MODEL_H

#include "line/nodes.h"
#include "line/shape.h"
#include "line/width.h"
#include "numeric/least_squares.h"
#include "scan/scan.h"

#define LW_BLOCK 64
#define LW_FAR_NODES 8
#define LW_BUNDLE (LW_BLOCK / LW_FAR_NODES) /* so that the nodes of its blocks are as many as the points of a block */
#define LW_BUNDLE_NODES 8
#define LW_COLUMNS (2 + LW_LOCAL_MOST + LW_VOIGT_SHAPES) /* of a line, from one evaluation of it */
#define LW_GLOBALS_MOST (2 * LW_WIDTH_PARAMETERS)

typedef struct lw_global {
    bool of_instrument; /* else of the lines' own width function */
    int parameter;      /* LW_U ... LW_AXIAL_2 */
    bool tied;          /* LW_AXIAL_1 only: moves the second axial parameter with it */
} lw_global;

/* Where lines are evaluated: angle, and what depends on it alone. */
typedef struct lw_model_places {
    double *two_theta, *sine, *factor; /* deg; sin(theta); intensity factor */
} lw_model_places;

typedef struct lw_model_line {
    double nominal_deg;          /* where widths and axial divergence are evaluated: the expected 2theta */
    size_t core_first, core_end;   /* blocks evaluated point by point */
    size_t near_first, near_end;   /* blocks in which all products of the line are taken, from the points */
    size_t close_first, close_end; /* bundles evaluated at the nodes of blocks, or nearer; else at the bundle's */
    lw_axial_count copies;       /* of the axial divergence */
} lw_model_line;

typedef struct lw_model {
    lw_engine *engine;
    const lw_voigt_kernel *kernel;
    const lw_radiation *radiation;
    const lw_line_shape *shape;
    bool on_s_axis, with_factor;
    double cos2_monochromator; /* weight of cos^2(2theta) in the polarisation, and its constant part */
    double constant_polarisation;
    /* points, padded to whole blocks; padding has weight 0 */
    size_t n, n_blocks, n_bundles;
    lw_model_places points, nodes, bundle_nodes; /* scan points; nodes of all blocks; nodes of all bundles */
    const double *y;
    double *weight;            /* 1/variance, set between iterations: then `weighed` is to be made false */
    bool weighed;              /* the products below belong to `weight` */
    const double *from_nodes;  /* [LW_FAR_NODES][LW_BLOCK] a block: interpolation from a block's nodes */
    size_t from_nodes_stride;  /* from one block to the next; 0 where the step is even: all blocks share one */
    const double *from_bundle; /* [n_blocks][LW_BUNDLE_NODES][LW_FAR_NODES]: from its bundle's nodes to a block's */
    /* background */
    size_t n_background, background_room, n_chebyshev; /* columns; most columns; how many of them are polynomials */
    double *basis;             /* [background_room][padded n] */
    double *basis_square;      /* [n_background][n_background]: basis' W basis, lower triangle */
    double *basis_moment;      /* [n_bundles][n_background][LW_BUNDLE][LW_FAR_NODES]: basis' W from_nodes */
    double *bundle_moment;     /* [n_bundles][n_background][LW_BUNDLE_NODES]: the same, handed on to the bundles */
    /* lines */
    size_t n_lines, n_local;
    lw_model_line *line;
    /* width functions: instrument's is fixed unless it stands among the globals */
    lw_axial_kind axial;
    const lw_profile_table *table; /* of the instrument, or NULL */
    double own[LW_WIDTH_PARAMETERS], instrument[LW_WIDTH_PARAMETERS];
    size_t n_globals;
    lw_global global[LW_GLOBALS_MOST];
    bool whole_normal; /* also the far line's own block, for the final covariance */
    /* scratch, sized by lw_model_prepare */
    double *near_columns;   /* [n_lines][LW_COLUMNS][LW_BLOCK] */
    double *close_columns;  /* [n_lines][LW_COLUMNS][LW_BUNDLE x LW_FAR_NODES] */
    double *bundle_columns; /* [n_lines][LW_COLUMNS][LW_BUNDLE_NODES] */
    size_t nodes_most;      /* of a line */
    lw_voigt_node *line_nodes, *merged;
    size_t *n_line_nodes, *n_merged, *near, *far, *close;
    struct lw_line_state *state;
    double *curve; /* [padded n] model at the last evaluation */
} lw_model;

size_t lw_model_parameters(const lw_model *model);
size_t lw_model_row(const lw_model *model, size_t line);   /* of the line's position */
size_t lw_model_border(const lw_model *model);             /* row of background term 0 */

/* Lays out points, blocks and interpolation for a scan, with room for a background of background_room columns. */
lw_status lw_model_points(lw_model *model, const lw_scan *scan, size_t background_room, lw_arena *arena, lw_error *err);

/* Background of `terms` Chebyshev terms on the scan's range, then optionally 1/2theta and the extra column (n values, or
 * NULL); all of them fit into the room taken. */
void lw_model_background(lw_model *model, size_t terms, bool hyperbola, const double *extra);

/* Takes scratch for the present lines and globals. Call again after their number changed. */
lw_status lw_model_prepare(lw_model *model, lw_arena *arena, lw_error *err);

/* Decides which blocks are near which line, for a typical FWHM at each: window in FWHM. True if anything changed. */
bool lw_model_windows(lw_model *model, const double *p, double window);

/* The callback of lw_problem: user is the lw_model. */
lw_status lw_model_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);

/* Total squared Gaussian FWHM (deg^2) and Lorentzian FWHM (deg) of a line, emission left out. */
void lw_model_widths(const lw_model *model, const double *p, size_t line, double *gauss_variance, double *lorentz);

/* Intensity factor P/sin^2(theta) of a scan point or line (1 when switched off), and its relative slope, 1/deg. */
double lw_model_factor(const lw_model *model, double two_theta_deg, double *relative_slope);

#endif
