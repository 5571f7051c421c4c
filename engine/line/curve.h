/* SPDX-License-Identifier: GPL-3.0-or-later */
/* One fitted line by itself. */
#ifndef LW_LINE_CURVE_H
#define LW_LINE_CURVE_H

#include "line/lines.h"
#include "line/nodes.h"

/* The axis on which a line is symmetric: x in degrees, 0 at the line, for a 2theta in degrees. */
double lw_line_offset(const lw_lines *lines, const lw_line *line, double two_theta_deg);

/* Intensity factor at an angle over that at the line (1 when the fit had none). */
double lw_line_relative_factor(const lw_lines *lines, const lw_line *line, double two_theta_deg);

/* Nodes of the line: emission times the axial divergence that was folded in or refined. Voigt shapes only.
 * node[LW_NODES_MOST]; *variance (deg^2) and *lorentz (deg) receive the total widths of the line, emission left out.
 * With instrument_alone the line's own widths are left out. Returns the number of nodes. */
size_t lw_line_all_nodes(const lw_lines *lines, const lw_line *line, bool instrument_alone, lw_voigt_node *node,
                         double *variance, double *lorentz);

/* The fitted line at n angles (ascending, degrees), intensity without background. Voigt shapes only. */
lw_status lw_line_curve(const lw_lines *lines, const lw_line *line, size_t n, const double *two_theta_deg,
                        double *intensity, lw_error *err);

#endif
