/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "line/nodes.h"

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

/* A tail is the image of a variable u in 0..1 displaced by span x u^2. Copies stand at midpoints of t in
 * u = t/(1 + (t/tau)^2)^(1/4): like u near 0, where the displacement is flat, and evenly spaced in displacement
 * further out. The function is odd, so that the midpoint rule converges faster than any power of the step; copies
 * closer than half the width leave a ripple below 1e-6. Beyond u = 0.9 lies less than 1e-4 of the weight. */
#define TAIL_END 0.9

static double tail_tau(double span, double width)
{
    return sqrt(width / (2 * span));
}

/* Copies for a tail of `span` under a profile of FWHM `width`. A spread of a tenth of the width changes it by less
 * than 1e-4 and is carried by its mean. */
static size_t points_for(double span, double width)
{
    if (!(span > 0.1 * width))
        return 1;
    double tau = tail_tau(span, width), u2 = TAIL_END * TAIL_END;
    /* t at u = TAIL_END, from u^4 (1 + (t/tau)^2) = t^4 */
    double q = u2 * u2 / (tau * tau), t = sqrt(0.5 * (q + sqrt(q * q + 4 * u2 * u2)));
    return (size_t)fmin(2 + t / (0.7 * tau), LW_AXIAL_NODES_MOST);
}

/* Places u and weights du of n copies. */
static void place(size_t n, double *u, double *du)
{
    /* the number of copies fixes the ratio of span to width and with it tau */
    double most = TAIL_END, tau = fmin(fmax(1.2 * most / sqrt((double)n), 0.02), 2), u2 = most * most;
    double q = u2 * u2 / (tau * tau), end = sqrt(0.5 * (q + sqrt(q * q + 4 * u2 * u2)));
    for (size_t i = 0; i < n; i++) {
        double t = end * ((double)i + 0.5) / (double)n, base = 1 + t * t / (tau * tau);
        u[i] = t / sqrt(sqrt(base));
        du[i] = end / (double)n * (1 + 0.5 * t * t / (tau * tau)) / (base * sqrt(sqrt(base)));
    }
}

lw_axial_count lw_axial_copies(lw_axial_kind kind, const double parameter[2], double two_theta_deg, double width_deg)
{
    lw_axial_count count = {{1, 1}};
    double sine, tangent = tan(two_theta_deg * degree / 2);
    if (kind == LW_AXIAL_FINGER && parameter[0] + parameter[1] > 0) {
        double span = fabs(axial_shift(two_theta_deg * degree, parameter[0] + parameter[1], &sine));
        /* its weight has kinks, over which the midpoint rule has to take finer steps */
        count.part[0] = points_for(span, width_deg);
        if (count.part[0] > 1)
            count.part[0] = 3 * count.part[0] < LW_AXIAL_NODES_MOST ? 3 * count.part[0] : LW_AXIAL_NODES_MOST;
    }
    else if (kind == LW_AXIAL_SOLLER) {
        count.part[0] = points_for(parameter[0] * parameter[0] / tangent / degree, width_deg);
        count.part[1] = points_for(parameter[1] * parameter[1] * tangent / degree, width_deg);
        while (count.part[0] * count.part[1] > LW_AXIAL_NODES_MOST)
            count.part[count.part[0] > count.part[1] ? 0 : 1]--;
    }
    return count;
}

/* Published weight of specimen and slit lengths s, h (over the radius). */
static void fill_finger(double s, double h, double two_theta_deg, size_t n, lw_voigt_node *node)
{
    double u[LW_AXIAL_NODES_MOST], du[LW_AXIAL_NODES_MOST], sum = 0, whole = s + h, two_theta = two_theta_deg * degree;
    place(n, u, du);
    for (size_t i = 0; i < n; i++) {
        double kappa = whole * u[i] / TAIL_END, sine;
        /* the overlap of specimen and slit is constant up to |S - H| and falls linearly to S + H */
        double overlap = fmin(2 * fmin(s, h), whole - kappa);
        node[i].offset = axial_shift(two_theta, kappa, &sine);
        node[i].offset_slope = sqrt(1 + kappa * kappa) * sin(two_theta) / sine - 1;
        node[i].weight = du[i] * overlap / ((1 + kappa * kappa) * sine);
        sum += node[i].weight;
    }
    for (size_t i = 0; i < n; i++)
        node[i].weight /= sum;
}

/* One tail of the Soller description: u with the density of a mean of four rectangular variables. */
static void fill_tail(double most, double scale_deg, size_t n, double *offset, double *weight)
{
    if (n == 1) {
        offset[0] = scale_deg * most * most / 12; /* the mean square of u is 1/12 */
        weight[0] = 1;
        return;
    }
    double u[LW_AXIAL_NODES_MOST], sum = 0, mean = 0, square = 0;
    place(n, u, weight);
    for (size_t i = 0; i < n; i++) {
        double rest = 1 - u[i], density = u[i] < 0.5 ? 1 - 6 * u[i] * u[i] * rest : 2 * rest * rest * rest;
        offset[i] = u[i] * u[i];
        weight[i] *= density;
        sum += weight[i];
        mean += weight[i] * offset[i];
        square += weight[i] * offset[i] * offset[i];
    }
    /* few copies under a wide profile: mean (1/12) and variance (17/1440) of u^2 are kept, whatever their number */
    mean /= sum;
    double variance = square / sum - mean * mean, stretch = sqrt(17.0 / 1440 / variance);
    for (size_t i = 0; i < n; i++) {
        weight[i] /= sum;
        offset[i] = scale_deg * most * most * (1.0 / 12 + stretch * (offset[i] - mean));
    }
}

/* Copies for given parameters, in a given number, so that derivatives can be taken at the same number. */
static void axial_fill(lw_axial_kind kind, const double parameter[2], double two_theta_deg, lw_axial_count count,
                       lw_voigt_node *node)
{
    if (kind == LW_AXIAL_FINGER && count.part[0] > 1) {
        fill_finger(parameter[0], parameter[1], two_theta_deg, count.part[0], node);
        return;
    }
    if (kind != LW_AXIAL_SOLLER) {
        node[0].offset = node[0].offset_slope = 0;
        node[0].weight = 1;
        return;
    }
    double tangent = tan(two_theta_deg * degree / 2), offset[2][LW_AXIAL_NODES_MOST], weight[2][LW_AXIAL_NODES_MOST];
    fill_tail(parameter[0], -1 / (tangent * degree), count.part[0], offset[0], weight[0]);
    fill_tail(parameter[1], tangent / degree, count.part[1], offset[1], weight[1]);
    double relative = 0.5 * degree * (tangent + 1 / tangent); /* d ln(tan(theta)) / d(2theta), 1/deg */
    for (size_t i = 0; i < count.part[0]; i++)
        for (size_t j = 0; j < count.part[1]; j++) {
            lw_voigt_node *at = &node[i * count.part[1] + j];
            at->offset = offset[0][i] + offset[1][j];
            at->offset_slope = relative * (offset[1][j] - offset[0][i]);
            at->weight = weight[0][i] * weight[1][j];
        }
}

/* Derivatives of the copies to one axial parameter, at the same number of copies. */
static void axial_slopes(lw_axial_kind kind, const double parameter[2], double two_theta_deg, lw_axial_count count,
                         int which, lw_voigt_node *node)
{
    size_t n = count.part[0] * count.part[1];
    if (kind == LW_AXIAL_SOLLER) {
        /* the offsets of a tail go with the square of its parameter, the weights stay */
        double tangent = tan(two_theta_deg * degree / 2), scale = which == 0 ? -1 / (tangent * degree) : tangent / degree;
        double offset[LW_AXIAL_NODES_MOST], weight[LW_AXIAL_NODES_MOST];
        fill_tail(parameter[which], 2 * scale / parameter[which], count.part[which], offset, weight);
        for (size_t i = 0; i < n; i++)
            node[i].d_offset[which] = offset[which == 0 ? i / count.part[1] : i % count.part[1]];
        return;
    }
    lw_voigt_node up[LW_AXIAL_NODES_MOST], down[LW_AXIAL_NODES_MOST];
    double step = 1e-4 * (parameter[0] + parameter[1]), moved[LW_VOIGT_SHAPES] = {parameter[0], parameter[1]};
    moved[which] = parameter[which] + step;
    axial_fill(kind, moved, two_theta_deg, count, up);
    moved[which] = parameter[which] - step;
    axial_fill(kind, moved, two_theta_deg, count, down);
    for (size_t i = 0; i < n; i++) {
        node[i].d_offset[which] = (up[i].offset - down[i].offset) / (2 * step);
        node[i].d_weight[which] = (up[i].weight - down[i].weight) / (2 * step);
    }
}

size_t lw_axial_nodes_at(lw_axial_kind kind, const double parameter[2], double two_theta_deg, lw_axial_count count,
                         const bool slopes[LW_VOIGT_SHAPES], lw_voigt_node *node)
{
    size_t n = count.part[0] * count.part[1];
    for (size_t i = 0; i < n; i++)
        node[i] = (lw_voigt_node){0};
    axial_fill(kind, parameter, two_theta_deg, count, node);
    for (int k = 0; k < LW_VOIGT_SHAPES && kind != LW_AXIAL_NONE; k++)
        if (slopes[k])
            axial_slopes(kind, parameter, two_theta_deg, count, k, node);
    return n;
}

size_t lw_axial_nodes(lw_axial_kind kind, const double parameter[2], double two_theta_deg, double width_deg,
                      lw_voigt_node *node)
{
    const bool none[LW_VOIGT_SHAPES] = {false};
    return lw_axial_nodes_at(kind, parameter, two_theta_deg,
                             lw_axial_copies(kind, parameter, two_theta_deg, width_deg), none, node);
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

lw_axial_count lw_recipe_copies(const lw_node_recipe *recipe, double two_theta_deg, double width_deg)
{
    if (recipe->table == NULL)
        return lw_axial_copies(recipe->axial, recipe->parameter, two_theta_deg, width_deg);
    /* neighbours within a twelfth of the width are one: they add less than 0.4 % to its square */
    double together = floor(width_deg / (12 * recipe->table->spacing_deg));
    return (lw_axial_count){{(size_t)fmin(fmax(together, 1), 16), 1}};
}

/* Copies of a tabulated profile, `together` neighbours taken as one at their mean. */
static size_t table_nodes(const lw_profile_table *table, double angle_deg, size_t together, lw_voigt_node *node)
{
    double at = table->n_angles > 1 ? (angle_deg - table->first_deg) / table->step_deg : 0;
    at = fmin(fmax(at, 0), (double)(table->n_angles - 1));
    size_t row = (size_t)at;
    if (row + 2 > table->n_angles && row > 0)
        row = table->n_angles - 2;
    double share = at - (double)row;
    const double *low = table->weight + row * table->n, *high = table->n_angles > 1 ? low + table->n : low;
    size_t n = 0;
    for (size_t i = 0; i < table->n; i += together) {
        double sum = 0, moment = 0;
        for (size_t j = i; j < i + together && j < table->n; j++) {
            double weight = (1 - share) * low[j] + share * high[j];
            sum += weight;
            moment += weight * (table->low_deg + (double)j * table->spacing_deg);
        }
        if (!(fabs(sum) > 1e-7))
            continue;
        node[n++] = (lw_voigt_node){.offset = moment / sum, .weight = sum};
    }
    return n;
}

/* Copies of the instrument's profile at one wavelength. */
static size_t profile_nodes(const lw_node_recipe *recipe, double two_theta_deg, const bool slopes[LW_VOIGT_SHAPES],
                            lw_voigt_node *node)
{
    if (recipe->table != NULL)
        return table_nodes(recipe->table, recipe->table_deg, recipe->copies.part[0], node);
    return lw_axial_nodes_at(recipe->axial, recipe->parameter, two_theta_deg, recipe->copies, slopes, node);
}

size_t lw_profile_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node)
{
    return profile_nodes(recipe, two_theta_deg, recipe->slopes, node);
}

size_t lw_line_nodes(const lw_node_recipe *recipe, double two_theta_deg, lw_voigt_node *node)
{
    lw_voigt_node emission[LW_EMISSION_MOST], axial[LW_TABLE_MOST];
    size_t n_emission = emission_nodes(recipe, two_theta_deg, emission);
    size_t n_axial = profile_nodes(recipe, two_theta_deg, recipe->slopes, axial);
    size_t n = 0;
    for (size_t c = 0; c < n_emission; c++)
        for (size_t i = 0; i < n_axial; i++) {
            node[n] = emission[c];
            node[n].offset += axial[i].offset;
            node[n].offset_slope += axial[i].offset_slope;
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
    lw_voigt_node axial[LW_TABLE_MOST];
    const bool none[LW_VOIGT_SHAPES] = {false};
    size_t n = emission_nodes(recipe, two_theta_deg, node);
    size_t n_axial = profile_nodes(recipe, two_theta_deg, none, axial);
    double mean = 0, square = 0, slope = 0;
    for (size_t i = 0; i < n_axial; i++) {
        mean += axial[i].weight * axial[i].offset;
        square += axial[i].weight * axial[i].offset * axial[i].offset;
        slope += axial[i].weight * axial[i].offset_slope;
    }
    for (size_t c = 0; c < n; c++) {
        node[c].offset += mean;
        node[c].offset_slope += slope;
    }
    *extra_variance = fmax(square - mean * mean, 0) * 8 * M_LN2;
    return n;
}
