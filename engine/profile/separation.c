/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/separation.h"

#include "line/curve.h"
#include "numeric/quadrature.h"
#include "numeric/voigt.h"

#include <math.h>

/* Spheres of the volume-weighted column length 1/size. */
static lw_spheres spheres_of(double size, double sigma)
{
    return (lw_spheres){.median_nm = 4.0 / 3 * exp(-3.5 * sigma * sigma) / size, .sigma = sigma};
}

double lw__shape_coefficient(const lw__shape *shape, double length, double *slopes)
{
    if (shape->strain == NULL)
        return lw__voigt_coefficient(shape->gauss_s, shape->lorentz_s, length);
    lw_spheres spheres = spheres_of(shape->size, shape->sigma);
    double by_size[2], by_strain[LW_STRAIN_PARAMETERS_MOST] = {0};
    double columns = lw_spheres_coefficient(&spheres, length, slopes ? by_size : NULL);
    double square = 2 * M_PI * M_PI * shape->s * shape->s;
    double moved = shape->strain->displacement(shape->strain_parameter, length, slopes ? by_strain : NULL);
    double strain = shape->spread ? 1 / (1 + square * moved) : exp(-square * moved);
    if (shape->spread) /* exp(-x) averaged over x, exponentially distributed */
        square *= strain;
    if (slopes != NULL) {
        slopes[0] = -by_size[0] / shape->size * strain;
        slopes[1] = -square * by_strain[0] * columns * strain;
        slopes[2] = (by_size[1] - 7 * shape->sigma * by_size[0]) * strain;
        slopes[3] = -square * by_strain[1] * columns * strain;
    }
    return columns * strain;
}

double lw__shape_kink(const lw__shape *shape)
{
    if (shape->strain == NULL)
        return 2 * shape->lorentz_s;
    return shape->size * 1.125 * exp(shape->sigma * shape->sigma) +
           2 * M_PI * M_PI * shape->s * shape->s * shape->strain->kink(shape->strain_parameter, NULL);
}

double lw__shape_breadth(const lw__shape *shape, double *slopes)
{
    if (shape->strain == NULL)
        return lw_voigt_breadth(2 * shape->gauss_s * sqrt(M_LN2 / M_PI), 2 * shape->lorentz_s / M_PI);
    /* Panels that widen with L: the coefficient is smooth but for the fast fall of a wide distribution at the
     * end. */
    double x[16], w[16], integral = 0, by[4] = {0}, low = 0,
                         first = 1 / (64 * (lw__shape_kink(shape) + 1e-6));
    double strain = 2 * M_PI * M_PI * shape->s * shape->s *
                    fmax(shape->strain->displacement(shape->strain_parameter, 1, NULL), 0);
    first = fmin(first, 0.05 / sqrt(strain + 1e-12));
    lw_gauss_legendre(16, x, w);
    for (int panel = 0; panel < 60; panel++) {
        double high = low + first * (1 + 0.5 * panel), last = 0;
        for (int i = 0; i < 16; i++) {
            double slope[4], half = 0.5 * (high - low);
            last = lw__shape_coefficient(shape, low + half * (1 + x[i]), slopes ? slope : NULL);
            integral += half * w[i] * last;
            for (int k = 0; k < 4 && slopes != NULL; k++)
                by[k] += half * w[i] * slope[k];
        }
        low = high;
        if (last < 1e-14)
            break;
    }
    for (int k = 0; k < 4 && slopes != NULL; k++)
        slopes[k] = -by[k] / (2 * integral * integral);
    return 1 / (2 * integral);
}

lw_status lw__separate_by_voigts(const lw_profiles *profiles, lw_arena *arena, lw__separation *out,
                                 lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    size_t n = lines->scan->n;
    *out = (lw__separation){.how = "lines separated and their tails completed by the fitted Voigts"};
    out->line = lw_arena_take(arena, profiles->n, sizeof *out->line, err);
    out->background = lw_arena_take(arena, n, sizeof(double), err);
    out->residual = lw_arena_take(arena, n, sizeof(double), err);
    if (!out->line || !out->background || !out->residual)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++) {
        out->background[i] = lines->background[i];
        out->residual[i] = lines->scan->intensity[i] - lines->fitted[i];
    }
    for (size_t k = 0; k < profiles->n; k++) {
        const lw_profile *profile = &profiles->profile[k];
        lw__separated *line = &out->line[k];
        line->shape = (lw__shape){
            .gauss_s = profile->gauss_s.value, .lorentz_s = profile->lorentz_s.value, .s = profile->s_per_nm};
        line->area_s = profile->line->area.value * lw__s_per_degree(profiles, profile);
        if ((line->curve = lw_arena_take(arena, n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
        lw_status status =
            lw_line_curve(lines, profile->line, n, lines->scan->two_theta_deg, line->curve, err);
        if (status != LW_OK)
            return status;
    }
    return LW_OK;
}

lw_status lw__keep_model(lw_profiles *profiles, const lw__separation *separation, lw_error *err)
{
    const lw_scan *scan = profiles->lines->scan;
    profiles->model = lw_arena_take(&profiles->arena, scan->n, sizeof(double), err);
    if (profiles->model == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < scan->n; i++)
        profiles->model[i] = scan->intensity[i] - separation->residual[i];
    profiles->by_physics = true;
    return LW_OK;
}
