/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/curve.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

double lw_line_offset(const lw_lines *lines, const lw_line *line, double two_theta_deg)
{
    double position = line->two_theta.value;
    if (!lines->on_s_axis)
        return two_theta_deg - position;
    double theta0 = position * degree / 2;
    return 2 * (sin(two_theta_deg * degree / 2) / cos(theta0) - tan(theta0)) / degree;
}

static double factor_at(const lw_lines *lines, double two_theta_deg)
{
    double c = cos(two_theta_deg * degree), s = sin(two_theta_deg * degree / 2);
    return (lines->constant_polarisation + lines->cos2_polarisation * c * c) / (s * s);
}

double lw_line_relative_factor(const lw_lines *lines, const lw_line *line, double two_theta_deg)
{
    return lines->with_factor ? factor_at(lines, two_theta_deg) / factor_at(lines, line->two_theta.value) : 1;
}

size_t lw_line_all_nodes(const lw_lines *lines, const lw_line *line, bool instrument_alone, lw_voigt_node *node,
                         double *variance, double *lorentz)
{
    const lw_width_function *axial = lines->has_instrument ? &lines->instrument : &lines->smooth;
    *variance = instrument_alone ? 0 : line->own_variance_deg2;
    *lorentz = instrument_alone ? 0 : line->own_lorentz_deg;
    if (lines->has_instrument) {
        *variance += lw_width_gauss_variance(lines->instrument.value, line->nominal_deg, NULL);
        *lorentz += lw_width_lorentz(lines->instrument.value, line->nominal_deg, NULL);
    }
    lw_node_recipe recipe = {.radiation = &lines->radiation,
                             .on_s_axis = lines->on_s_axis,
                             .spectral_widths = true,
                             .axial = axial->axial,
                             .table = axial->table,
                             .table_deg = line->nominal_deg,
                             .parameter = {axial->value[LW_AXIAL_1], axial->value[LW_AXIAL_2]}};
    double width = lw_voigt_fwhm(sqrt(fmax(*variance, 1e-12)), *lorentz);
    recipe.copies = lw_recipe_copies(&recipe, line->nominal_deg, width);
    return lw_line_nodes(&recipe, line->two_theta.value, node);
}

lw_status lw_line_curve(const lw_lines *lines, const lw_line *line, size_t n, const double *two_theta_deg,
                        double *intensity, lw_error *err)
{
    lw_arena scratch;
    lw_arena_begin(&scratch, lines->arena.engine);
    lw_voigt_node *node = lw_arena_take(&scratch, LW_NODES_MOST, sizeof *node, err);
    double *x = lw_arena_take(&scratch, n, sizeof *x, err);
    if (node == NULL || x == NULL) {
        lw_arena_end(&scratch);
        return LW_OUT_OF_MEMORY;
    }
    double variance, lorentz;
    size_t n_nodes = lw_line_all_nodes(lines, line, false, node, &variance, &lorentz);
    for (size_t i = 0; i < n; i++)
        x[i] = lw_line_offset(lines, line, two_theta_deg[i]);
    lw_voigt_sums sums = {.value = intensity};
    lw_voigt_kernel_for(lines->arena.engine->cpu)->sum(n, x, node, n_nodes, variance, lorentz, 1, &sums);
    for (size_t i = 0; i < n; i++)
        intensity[i] *= line->area.value * lw_line_relative_factor(lines, line, two_theta_deg[i]);
    lw_arena_end(&scratch);
    return LW_OK;
}
