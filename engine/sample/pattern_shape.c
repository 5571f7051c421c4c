/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_shape.h"

#include <math.h>

lw_status lw_pattern_shape_begin(lw_pattern_shape *shape, size_t n, double step,
                                 const lw_size_histogram *histogram, lw_arena *arena, lw_error *err)
{
    *shape = (lw_pattern_shape){
        .n = n, .step = step, .histogram = histogram, .n_size = histogram != NULL ? histogram->n : 2};
    lw_pattern_shape_set_strain(shape, &lw_strain_constant, NULL);
    shape->size = lw_arena_take(arena, n, sizeof(double), err);
    shape->displacement = lw_arena_take(arena, n, sizeof(double), err);
    for (size_t i = 0; i < shape->n_size; i++)
        shape->size_slope[i] = lw_arena_take(arena, n, sizeof(double), err);
    for (size_t i = 0; i < LW_PATTERN_STRAIN_MOST; i++)
        shape->strained[i] = lw_arena_take(arena, n, sizeof(double), err);
    for (size_t i = 0; i < shape->n_size && histogram != NULL; i++) {
        shape->hat[i] = lw_arena_take(arena, n, sizeof(double), err);
        for (size_t j = 0; j < n && err->status == LW_OK; j++)
            shape->hat[i][j] = lw_size_histogram_coefficient(histogram, i, step * (double)j);
    }
    return err->status;
}

void lw_pattern_shape_set_strain(lw_pattern_shape *shape, const lw_strain_form *form,
                                 const lw_strain_knots *knots)
{
    shape->strain = form;
    shape->knots = knots;
    shape->n_strain = knots != NULL ? knots->n : (size_t)form->n;
}

lw_spheres lw_pattern_spheres(const double *p)
{
    double sigma = p[LW_PATTERN_SIGMA];
    return (lw_spheres){1.5 * exp(-2.5 * sigma * sigma) / p[LW_PATTERN_INVERSE_SIZE], sigma};
}

static double share_sum(const lw_pattern_shape *shape, const double *p)
{
    double sum = 0;
    for (size_t b = 0; b < shape->n_size; b++)
        sum += p[LW_PATTERN_SIZE + b];
    return sum;
}

double lw_pattern_shape_moment(const lw_pattern_shape *shape, const double *p, double power)
{
    if (shape->histogram == NULL) {
        lw_spheres spheres = lw_pattern_spheres(p);
        return lw_spheres_moment(&spheres, 3 + power) / lw_spheres_moment(&spheres, 3);
    }
    double sum = 0;
    for (size_t b = 0; b < shape->n_size; b++)
        sum += p[LW_PATTERN_SIZE + b] * lw_size_histogram_moment(shape->histogram, b, power);
    return sum / share_sum(shape, p);
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

static void fill_histogram(lw_pattern_shape *shape, const double *p, bool slopes)
{
    const double *share = p + LW_PATTERN_SIZE;
    double all = share_sum(shape, p);
    for (size_t j = 0; j < shape->n; j++)
        shape->size[j] = 0;
    for (size_t b = 0; b < shape->n_size; b++)
        for (size_t j = 0; j < shape->n && share[b] != 0; j++)
            shape->size[j] += share[b] / all * shape->hat[b][j];
    shape->size_kink = 1.5 * lw_pattern_shape_moment(shape, p, -1);
    for (size_t b = 0; b < shape->n_size && slopes; b++) {
        shape->size_kink_slope[b] =
            (1.5 * lw_size_histogram_moment(shape->histogram, b, -1) - shape->size_kink) / all;
        for (size_t j = 0; j < shape->n; j++)
            shape->size_slope[b][j] = (shape->hat[b][j] - shape->size[j]) / all;
    }
}

static void fill_form(lw_pattern_shape *shape, const double *own, bool slopes)
{
    const lw_strain_form *strain = shape->strain;
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

void lw_pattern_shape_knots(const lw_pattern_shape *shape, const double *p, double *y)
{
    y[0] = p[LW_PATTERN_STRAIN];
    for (size_t i = 1; i < shape->n_strain; i++)
        y[i] = y[i - 1] + p[LW_PATTERN_STRAIN + i];
}

static void fill_knots(lw_pattern_shape *shape, const double *p, bool slopes)
{
    double y[LW_STRAIN_KNOTS_MOST];
    lw_pattern_shape_knots(shape, p, y);
    shape->strain_kink = 0;
    for (size_t j = 0; j < shape->n; j++) {
        double by[LW_STRAIN_KNOTS_MOST], length = shape->step * (double)j;
        shape->displacement[j] =
            length * length * lw_strain_knots_square(shape->knots, y, length, slopes ? by : NULL);
        for (size_t i = shape->n_strain - 1; i > 0 && slopes; i--)
            by[i - 1] += by[i]; /* a step moves all knots from its own on */
        for (size_t i = 0; i < shape->n_strain && slopes; i++)
            shape->strained[i][j] = shape->size[j] * shape->displacement[j] * by[i];
    }
    for (size_t i = 0; i < shape->n_strain; i++) {
        shape->strain_kink_slope[i] = 0;
        shape->combine[i] = i == 0; /* the first moves ln <eps^2> as a whole */
    }
}

void lw_pattern_shape_fill(lw_pattern_shape *shape, const double *p, bool slopes)
{
    if (shape->histogram != NULL)
        fill_histogram(shape, p, slopes);
    else
        fill_spheres(shape, p, slopes);
    if (shape->knots != NULL)
        fill_knots(shape, p, slopes);
    else
        fill_form(shape, p + LW_PATTERN_STRAIN, slopes);
}

double lw_pattern_shape_displacement(const lw_pattern_shape *shape, const double *p, double length_nm)
{
    if (shape->knots != NULL) {
        double y[LW_STRAIN_KNOTS_MOST];
        lw_pattern_shape_knots(shape, p, y);
        return length_nm * length_nm * lw_strain_knots_square(shape->knots, y, length_nm, NULL);
    }
    return shape->strain->displacement(p + LW_PATTERN_STRAIN, length_nm, NULL);
}

bool lw_pattern_shape_possible(const lw_pattern_shape *shape, const double *p)
{
    if (shape->histogram != NULL)
        return p[LW_PATTERN_VARIATION] >= 0 && share_sum(shape, p) > 0;
    return p[LW_PATTERN_VARIATION] >= 0 && p[LW_PATTERN_INVERSE_SIZE] > 0 && p[LW_PATTERN_SIGMA] > 0;
}
