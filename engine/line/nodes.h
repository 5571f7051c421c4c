/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Nodes of a line: emission components times axial divergence. */
#ifndef LW_LINE_NODES_H
#define LW_LINE_NODES_H

#include "numeric/voigt.h"
#include "physics/radiation.h"

#include <stdbool.h>
#include <stddef.h>

#define LW_AXIAL_NODES_MOST 48
#define LW_NODES_MOST (LW_AXIAL_NODES_MOST * LW_EMISSION_MOST)

/* Axial divergence as a sum of displaced copies.
 * Given:  s_over_l, h_over_l  half-lengths of specimen and slit along the axis over the radius, 0 to 0.3; both
 *                             0 = no axial divergence
 *         two_theta_deg       0 to 180
 *         width_deg           FWHM of what the copies are convolved with: sets how many are needed
 *         most                room in node[], >= 1
 * Returned: node[].offset (deg), node[].weight (sum 1); the return value is their number.
 * Notes: the substitution kappa = h/L takes the inverse-square-root singularity of the published weight
 *   away, W(kappa) dkappa / ((1 + kappa^2) sin(2phi)), cos(2phi) = cos(2theta) sqrt(1 + kappa^2), so that
 *   Gauss-Legendre points converge fast.
 * Source: Finger, Cox & Jephcoat (1994) J. Appl. Cryst. 27, 892; van Laar & Yelon (1984) J. Appl. Cryst. 17, 47. */
size_t lw_axial_nodes(double s_over_l, double h_over_l, double two_theta_deg, double width_deg, size_t most,
                      lw_voigt_node *node);
/* How many nodes that takes. */
size_t lw_axial_count(double s_over_l, double h_over_l, double two_theta_deg, double width_deg, size_t most);

typedef struct lw_node_recipe {
    const lw_radiation *radiation;
    bool on_s_axis;          /* x is 2 tan(theta0) (sin(theta)/sin(theta0) - 1), degrees; else 2theta - 2theta0 */
    bool spectral_widths;    /* give the components their Lorentzian widths */
    double s_over_l, h_over_l;
    bool slopes[LW_VOIGT_SHAPES]; /* derivatives to S/L, H/L wanted */
    size_t axial;            /* number of axial copies (lw_axial_count) */
} lw_node_recipe;

/* All nodes of a line at two_theta_deg (its position at the reference wavelength), most LW_NODES_MOST.
 * Emission components beyond 2theta = 180 are left out and the weights kept (their intensity is not seen). */
size_t lw_line_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node);

/* The same with all axial copies of a component merged into one at their mean, for use far from the line;
 * *extra_variance (deg^2 of Gaussian FWHM^2) is the variance of the copies that was merged. */
size_t lw_line_nodes_merged(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node,
                            double *extra_variance);

#endif
