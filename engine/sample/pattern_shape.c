/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_shape.h"

#include <math.h>

lw_status lw_pattern_shape_begin(lw_pattern_shape *shape, size_t n, double step, lw_arena *arena, lw_error *err)
{
    *shape = (lw_pattern_shape){.n = n, .step = step, .n_size = 2};
    lw_pattern_shape_set_strain(shape, &lw_strain_constant);
    shape->log_length = lw_arena_take(arena, n, sizeof(double), err);
    shape->size = lw_arena_take(arena, n, sizeof(double), err);
    shape->displacement = lw_arena_take(arena, n, sizeof(double), err);
    for (size_t i = 0; i < shape->n_size; i++)
        shape->size_slope[i] = lw_arena_take(arena, n, sizeof(double), err);
    for (size_t i = 0; i < LW_STRAIN_PARAMETERS_MOST; i++)
        shape->strained[i] = lw_arena_take(arena, n, sizeof(double), err);
    for (size_t j = 1; j < n && err->status == LW_OK; j++)
        shape->log_length[j] = log(step * (double)j);
    return err->status;
}

void lw_pattern_shape_set_strain(lw_pattern_shape *shape, const lw_strain_form *strain)
{
    shape->strain = strain;
    shape->n_strain = (size_t)strain->n;
}

lw_spheres lw_pattern_spheres(const double *p)
{
    double sigma = p[LW_PATTERN_SIGMA];
    return (lw_spheres){1.5 * exp(-2.5 * sigma * sigma) / p[LW_PATTERN_INVERSE_SIZE], sigma};
}

static void fill_spheres(lw_pattern_shape *shape, const double *p, bool slopes)
{
    lw_spheres spheres = lw_pattern_spheres(p);
    shape->size_kink = p[LW_PATTERN_INVERSE_SIZE];
    shape->size_kink_slope[0] = 1;
    shape->size_kink_slope[1] = 0;
    for (size_t j = 0; j < shape->n; j++) {
        double by[2];
        shape->size[j] = lw_spheres_coefficient(&spheres, shape->step * (double)j, slopes ? by : NULL);
        if (!slopes)
            continue;
        shape->size_slope[0][j] = -by[0] / p[LW_PATTERN_INVERSE_SIZE];
        shape->size_slope[1][j] = by[1] - 5 * spheres.sigma * by[0];
    }
}

static void fill_strain(lw_pattern_shape *shape, const double *p, bool slopes)
{
    const lw_strain_form *strain = shape->strain;
    const double *own = p + LW_PATTERN_STRAIN;
    shape->strain_kink = strain->kink(own, shape->strain_kink_slope);
    for (size_t j = 0; j < shape->n; j++) {
        double by[LW_STRAIN_PARAMETERS_MOST];
        shape->displacement[j] = strain->displacement(own, shape->step * (double)j, slopes ? by : NULL);
        for (size_t i = 0; i < shape->n_strain && slopes; i++)
            shape->strained[i][j] = shape->size[j] * by[i];
    }
    for (size_t i = 0; i < shape->n_strain; i++)
        shape->combine[i] = i == 0 || strain->linear ? own[i] : 0;
}

void lw_pattern_shape_fill(lw_pattern_shape *shape, const double *p, bool slopes)
{
    fill_spheres(shape, p, slopes);
    fill_strain(shape, p, slopes);
}

double lw_pattern_shape_displacement(const lw_pattern_shape *shape, const double *p, double length_nm)
{
    return shape->strain->displacement(p + LW_PATTERN_STRAIN, length_nm, NULL);
}

bool lw_pattern_shape_possible(const lw_pattern_shape *shape, const double *p)
{
    (void)shape;
    return p[LW_PATTERN_INVERSE_SIZE] > 0 && p[LW_PATTERN_SIGMA] > 0;
}
