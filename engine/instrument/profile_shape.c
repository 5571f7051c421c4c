/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/profile_shape.h"

#include "instrument/calibration_optical.h"
#include "line/nodes.h"

#include <math.h>

static lw_status optical_curve(lw_engine *engine, const lw_calibration *calibration, double two_theta_deg, size_t n,
                               const double *offset, double *density, lw_error *err)
{
    lw_optics optics;
    lw_status status = lw_optics_begin(engine, &calibration->optical, &optics, err);
    if (status == LW_OK)
        status = lw_optics_profile(&optics, two_theta_deg, 0.002, err);
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        double place = offset[i] / LW_OPTICS_STEP, whole = floor(place), share = place - whole;
        density[i] = 0;
        if (!(fabs(place) < LW_OPTICS_POINTS / 2 - 2))
            continue;
        size_t at = (size_t)(whole < 0 ? whole + LW_OPTICS_POINTS : whole);
        density[i] = (1 - share) * optics.density[at] + share * optics.density[(at + 1) % LW_OPTICS_POINTS];
    }
    lw_optics_end(&optics);
    return status;
}

lw_status lw_profile_curve(lw_engine *engine, const lw_calibration *calibration, double two_theta_deg, size_t n,
                           const double *offset_deg, double *density, lw_error *err)
{
    if (calibration->has_optical)
        return optical_curve(engine, calibration, two_theta_deg, n, offset_deg, density, err);
    const lw_width_function *f = &calibration->profile;
    double variance = lw_width_gauss_variance(f->value, two_theta_deg, NULL);
    double lorentz = lw_width_lorentz(f->value, two_theta_deg, NULL);
    lw_node_recipe recipe = {.axial = f->axial, .parameter = {f->value[LW_AXIAL_1], f->value[LW_AXIAL_2]},
                             .table = f->table, .table_deg = two_theta_deg};
    recipe.copies = lw_recipe_copies(&recipe, two_theta_deg, lw_voigt_fwhm(sqrt(variance), lorentz));
    lw_voigt_node node[LW_TABLE_MOST];
    size_t nodes = lw_profile_nodes(&recipe, two_theta_deg, node);
    lw_voigt_sums sums = {.value = density};
    lw_voigt_kernel_for(LW_CPU_PLAIN)->sum(n, offset_deg, node, nodes, variance, lorentz, 1, &sums);
    return LW_OK;
}

lw_status lw_profile_figure(lw_engine *engine, const lw_calibration *calibration, double two_theta_deg,
                            lw_width_figure *figure, lw_error *err)
{
    lw_width_figure_at(&calibration->profile, two_theta_deg, 0, 0, figure);
    if (!calibration->has_optical)
        return LW_OK;
    lw_optics optics;
    lw_optics_figure sharp;
    lw_status status = lw_optics_begin(engine, &calibration->optical, &optics, err);
    if (status == LW_OK)
        status = lw_optics_figure_at(&optics, two_theta_deg, &sharp, err);
    lw_optics_end(&optics);
    if (status != LW_OK)
        return status;
    figure->fwhm_deg = sharp.fwhm_deg;
    figure->breadth_deg = sharp.breadth_deg;
    figure->centroid_deg = sharp.centroid_deg;
    figure->top_deg = sharp.top_deg;
    figure->middle_deg = sharp.middle_deg;
    return LW_OK;
}

static double asymmetry_of(const lw_width_function *function, double two_theta_deg)
{
    lw_width_figure figure;
    lw_width_figure_at(function, two_theta_deg, 0, 0, &figure);
    return figure.centroid_deg - figure.middle_deg;
}

/* Moves one parameter of a width function by a share of its u, to where it still can be. */
static double moved(const lw_width_function *function, int parameter, double by, double two_theta_deg, double *step)
{
    lw_width_function f = *function;
    f.value[parameter] += by;
    if (parameter >= LW_AXIAL_1)
        f.value[parameter] = fmax(f.value[parameter], 0);
    *step = f.value[parameter] - function->value[parameter];
    return asymmetry_of(&f, two_theta_deg);
}

static void empirical(const lw_width_function *f, double two_theta_deg, lw_quantity *asymmetry)
{
    double slope[LW_WIDTH_PARAMETERS] = {0}, variance = 0;
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++) {
        double u = sqrt(fmax(f->covariance[i][i], 0)), up, down;
        if (!(u > 0))
            continue;
        double high = moved(f, i, 0.1 * u, two_theta_deg, &up), low = moved(f, i, -0.1 * u, two_theta_deg, &down);
        slope[i] = up > down ? (high - low) / (up - down) : 0;
    }
    for (int i = 0; i < LW_WIDTH_PARAMETERS; i++)
        for (int j = 0; j < LW_WIDTH_PARAMETERS; j++)
            variance += slope[i] * f->covariance[i][j] * slope[j];
    *asymmetry = lw_quantity_of(asymmetry_of(f, two_theta_deg), sqrt(fmax(variance, 0)), "deg");
}

static lw_status optical(lw_engine *engine, const lw_calibration *c, size_t n, const double *two_theta_deg,
                         lw_quantity *asymmetry, lw_error *err)
{
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    lw_refined_set refined = lw__refined_set(c);
    lw_optics_figure *figure = lw_arena_take(&scratch, 2 * n, sizeof *figure, err);
    lw_optics_figure(*slope)[LW_REFINED_MOST] = lw_arena_take(&scratch, n, sizeof *slope, err);
    lw_status status = figure && slope ? lw_optics_figures(engine, &c->optical, &refined, n, two_theta_deg, figure, figure + n,
                                                           slope, err)
                                       : LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        double variance = 0;
        for (size_t a = 0; a < refined.n; a++)
            for (size_t b = 0; b < refined.n; b++)
                variance += (slope[i][a].centroid_deg - slope[i][a].middle_deg) * refined.covariance[a][b] *
                            (slope[i][b].centroid_deg - slope[i][b].middle_deg);
        asymmetry[i] = lw_quantity_of(figure[i].centroid_deg - figure[i].middle_deg, sqrt(fmax(variance, 0)), "deg");
    }
    lw_arena_end(&scratch);
    return status;
}

lw_status lw_profile_asymmetry(lw_engine *engine, const lw_calibration *calibration, size_t n, const double *two_theta_deg,
                               lw_quantity *asymmetry, lw_error *err)
{
    if (calibration->has_optical)
        return optical(engine, calibration, n, two_theta_deg, asymmetry, err);
    for (size_t i = 0; i < n; i++)
        empirical(&calibration->profile, two_theta_deg[i], &asymmetry[i]);
    return LW_OK;
}
