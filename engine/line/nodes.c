/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/nodes.h"

#include "numeric/quadrature.h"

#include <math.h>

static const double degree = M_PI / 180;

/* Shift in degrees of the copy at kappa = h/L, and sin(2phi) there. */
static double axial_shift(double two_theta, double kappa, double *sin_2phi)
{
    double c = cos(two_theta) * sqrt(1 + kappa * kappa);
    c = fmin(fmax(c, -0.9999999), 0.9999999); /* beyond it the cone misses the detector plane */
    *sin_2phi = sqrt(1 - c * c);
    return (acos(c) - two_theta) / degree;
}

size_t lw_axial_count(double s_over_l, double h_over_l, double two_theta_deg, double width_deg, size_t most)
{
    double whole = s_over_l + h_over_l;
    if (!(whole > 0) || most < 2)
        return 1;
    double sine, span = fabs(axial_shift(two_theta_deg * degree, whole, &sine));
    double n = 6 + 2.5 * span / width_deg;
    size_t count = n < 48 ? (size_t)n : 48;
    count += count % 2;
    return count < most ? count : most;
}

/* Copies for given lengths, in a given number, so that derivatives can be taken at the same number. */
static void axial_fill(double s, double h, double two_theta_deg, size_t n, lw_voigt_node *node)
{
    if (n == 1 || !(s + h > 0)) {
        for (size_t i = 0; i < n; i++) {
            node[i].offset = 0;
            node[i].weight = 1.0 / (double)n;
        }
        return;
    }
    /* the overlap of specimen and slit is constant up to |S - H| and falls linearly to S + H */
    double low = fabs(s - h), high = s + h;
    size_t flat = low > 0.05 * high ? n / 2 : 0, slope = n - flat;
    double x[LW_AXIAL_NODES_MOST], w[LW_AXIAL_NODES_MOST], sum = 0;
    double two_theta = two_theta_deg * degree;
    for (int part = 0; part < 2; part++) {
        size_t count = part == 0 ? flat : slope, first = part == 0 ? 0 : flat;
        double from = part == 0 || flat == 0 ? 0 : low, to = part == 0 ? low : high;
        if (count == 0)
            continue;
        lw_gauss_legendre(count, x, w);
        for (size_t i = 0; i < count; i++) {
            double kappa = from + 0.5 * (to - from) * (1 + x[i]), sine;
            double overlap = fmin(2 * fmin(s, h), high - kappa);
            lw_voigt_node *at = &node[first + i];
            at->offset = axial_shift(two_theta, kappa, &sine);
            at->weight = 0.5 * (to - from) * w[i] * overlap / ((1 + kappa * kappa) * sine);
            sum += at->weight;
        }
    }
    for (size_t i = 0; i < n; i++)
        node[i].weight /= sum;
}

size_t lw_axial_nodes(double s_over_l, double h_over_l, double two_theta_deg, double width_deg, size_t most,
                      lw_voigt_node *node)
{
    size_t n = lw_axial_count(s_over_l, h_over_l, two_theta_deg, width_deg, most);
    for (size_t i = 0; i < n; i++)
        node[i] = (lw_voigt_node){0};
    axial_fill(s_over_l, h_over_l, two_theta_deg, n, node);
    return n;
}

/* Emission components alone: offset, width and their slopes with the line's position. */
static size_t emission_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node)
{
    const lw_radiation *radiation = recipe->radiation;
    double theta = two_theta_deg * degree / 2, t = tan(theta), sec2 = 1 + t * t;
    double reference = lw_radiation_wavelength(radiation);
    size_t n = 0;
    for (size_t c = 0; c < radiation->n; c++) {
        double ratio = radiation->component[c].wavelength_nm / reference;
        double relative = recipe->spectral_widths ? radiation->component[c].width_nm / reference : 0;
        lw_voigt_node *at = &node[n];
        *at = (lw_voigt_node){.weight = radiation->component[c].weight};
        if (recipe->on_s_axis) {
            /* at fixed spacing the wavelength is proportional to sin(theta): the spectrum keeps its shape */
            at->offset = 2 * t * (ratio - 1) / degree;
            at->offset_slope = sec2 * (ratio - 1);
            at->lorentz = 2 * t * relative / degree;
            at->lorentz_slope = sec2 * relative;
        } else {
            double sine = ratio * sin(theta);
            if (sine >= 0.9999)
                continue;
            double there = asin(sine), tan_there = tan(there);
            at->offset = 2 * (there - theta) / degree;
            at->offset_slope = ratio * cos(theta) / cos(there) - 1;
            at->lorentz = 2 * tan_there * (relative / ratio) / degree;
            at->lorentz_slope = (1 + tan_there * tan_there) * (relative / ratio) * (at->offset_slope + 1);
        }
        n++;
    }
    return n;
}

size_t lw_line_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node)
{
    lw_voigt_node emission[LW_EMISSION_MOST], axial[LW_AXIAL_NODES_MOST] = {{0}};
    size_t n_emission = emission_nodes(recipe, two_theta_deg, emission);
    size_t n_axial = recipe->axial ? recipe->axial : 1;
    double length[LW_VOIGT_SHAPES] = {recipe->s_over_l, recipe->h_over_l};
    axial_fill(length[0], length[1], two_theta_deg, n_axial, axial);
    for (int k = 0; k < LW_VOIGT_SHAPES && n_axial > 1; k++) {
        if (!recipe->slopes[k])
            continue;
        lw_voigt_node up[LW_AXIAL_NODES_MOST], down[LW_AXIAL_NODES_MOST];
        double step = 1e-4 * (length[0] + length[1]), moved[LW_VOIGT_SHAPES] = {length[0], length[1]};
        moved[k] = length[k] + step;
        axial_fill(moved[0], moved[1], two_theta_deg, n_axial, up);
        moved[k] = length[k] - step;
        axial_fill(moved[0], moved[1], two_theta_deg, n_axial, down);
        for (size_t i = 0; i < n_axial; i++) {
            axial[i].d_offset[k] = (up[i].offset - down[i].offset) / (2 * step);
            axial[i].d_weight[k] = (up[i].weight - down[i].weight) / (2 * step);
        }
    }
    size_t n = 0;
    for (size_t c = 0; c < n_emission; c++)
        for (size_t i = 0; i < n_axial; i++) {
            node[n] = emission[c];
            node[n].offset += axial[i].offset;
            node[n].weight *= axial[i].weight;
            for (int k = 0; k < LW_VOIGT_SHAPES; k++) {
                node[n].d_offset[k] = axial[i].d_offset[k];
                node[n].d_weight[k] = emission[c].weight * axial[i].d_weight[k];
            }
            n++;
        }
    return n;
}

size_t lw_line_nodes_merged(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node,
                            double *extra_variance)
{
    lw_voigt_node axial[LW_AXIAL_NODES_MOST] = {{0}};
    size_t n_axial = recipe->axial ? recipe->axial : 1, n = emission_nodes(recipe, two_theta_deg, node);
    axial_fill(recipe->s_over_l, recipe->h_over_l, two_theta_deg, n_axial, axial);
    double mean = 0, square = 0;
    for (size_t i = 0; i < n_axial; i++) {
        mean += axial[i].weight * axial[i].offset;
        square += axial[i].weight * axial[i].offset * axial[i].offset;
    }
    for (size_t c = 0; c < n; c++)
        node[c].offset += mean;
    *extra_variance = fmax(square - mean * mean, 0) * 8 * M_LN2;
    return n;
}
