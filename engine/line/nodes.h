/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Nodes of a line: emission components times axial divergence. */
#ifndef LW_LINE_NODES_H
#define LW_LINE_NODES_H

#include "line/width.h"
#include "numeric/voigt.h"
#include "physics/radiation.h"

#include <stdbool.h>
#include <stddef.h>

#define LW_AXIAL_NODES_MOST 64
#define LW_NODES_MOST (LW_TABLE_MOST * LW_EMISSION_MOST) /* a table has more places than an axial description */

/* How many copies the two parts of an axial description take (the second is 1 where there is one part). */
typedef struct lw_axial_count {
    size_t part[2];
} lw_axial_count;
lw_axial_count lw_axial_copies(lw_axial_kind kind, const double parameter[2], double two_theta_deg, double width_deg);

/* Axial divergence as a sum of displaced copies.
 * Given:  kind, parameter[2]  see lw_axial_kind; both 0 = no axial divergence
 *         two_theta_deg       0 to 180
 *         width_deg           FWHM of what the copies are convolved with: sets how many are needed
 * Returned: node[LW_AXIAL_NODES_MOST].offset (deg), .offset_slope (the same against 2theta), .weight (sum 1); the
 *           return value is their number.
 * Notes: for LW_AXIAL_FINGER the substitution kappa = h/L takes the inverse-square-root singularity of the
 *   published weight away, W(kappa) dkappa / ((1 + kappa^2) sin(2phi)), cos(2phi) = cos(2theta) sqrt(1 + kappa^2);
 *   for LW_AXIAL_SOLLER the variable is the angle m or p itself. */
size_t lw_axial_nodes(lw_axial_kind kind, const double parameter[2], double two_theta_deg, double width_deg,
                      lw_voigt_node *node);

/* The same in a given number of copies, so that values and slopes stay smooth while parameters move.
 * slopes[k]: also d_offset[k] and d_weight[k], the derivatives to the axial parameter k (parameter > 0). */
size_t lw_axial_nodes_at(lw_axial_kind kind, const double parameter[2], double two_theta_deg, lw_axial_count count,
                         const bool slopes[LW_VOIGT_SHAPES], lw_voigt_node *node);

typedef struct lw_node_recipe {
    const lw_radiation *radiation;
    bool on_s_axis;          /* x is 2 tan(theta0) (sin(theta)/sin(theta0) - 1), degrees; else 2theta - 2theta0 */
    bool spectral_widths;    /* give the components their Lorentzian widths */
    lw_axial_kind axial;
    double parameter[LW_VOIGT_SHAPES];
    bool slopes[LW_VOIGT_SHAPES]; /* derivatives to the axial parameters wanted */
    const lw_profile_table *table; /* instead of an axial description, at table_deg; NULL = none */
    double table_deg;
    lw_axial_count copies;   /* from lw_recipe_copies; kept while a fit iterates, so that it stays smooth */
} lw_node_recipe;

/* How many copies the recipe's axial description takes under a profile of FWHM width_deg; with a table: how many of
 * its neighbours may be taken together. */
lw_axial_count lw_recipe_copies(const lw_node_recipe *recipe, double two_theta_deg, double width_deg);

/* Nodes of the profile at one wavelength: axial divergence or table, without the emission; most LW_TABLE_MOST. */
size_t lw_profile_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node);

/* All nodes of a line at two_theta_deg (its position at the reference wavelength), most LW_NODES_MOST.
 * Emission components beyond 2theta = 180 are left out and the weights kept (their intensity is not seen). */
size_t lw_line_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node);

/* The same with all axial copies of a component merged into one at their mean, for use far from the line;
 * *extra_variance (deg^2 of Gaussian FWHM^2) is the variance of the copies that was merged. */
size_t lw_line_nodes_merged(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node,
                            double *extra_variance);

#endif
