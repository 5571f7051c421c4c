/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/optics.h"

#include "numeric/fft.h"

#include <math.h>
#include <string.h>

const lw_optical *const lw_optical_list[] = {&lw_optical_source, &lw_optical_slit, &lw_optical_flat, &lw_optical_tilt,
                                             &lw_optical_transparency, NULL};

lw_status lw_geometry_check(const lw_geometry *g, lw_error *err)
{
    const struct {
        const char *name, *unit;
        double value, least, most;
    } part[] = {{"radius", "mm", g->radius, 10, 2000},
                {"source_width", "mm", g->source_width, 0, 10},
                {"slit_width", "mm", g->slit_width, 0, 20},
                {"divergence", "deg", g->divergence_deg, 0, 20},
                {"source_length", "mm", g->source_length, 0, 100},
                {"specimen_length", "mm", g->specimen_length, 0, 200},
                {"slit_length", "mm", g->slit_length, 0, 200},
                {"soller_incident", "rad", g->soller_incident, 0, 0.3},
                {"soller_diffracted", "rad", g->soller_diffracted, 0, 0.3},
                {"attenuation", "1/mm", g->attenuation, 0, 1e5},
                {"thickness", "mm", g->thickness, 0, 100},
                {"tilt", "deg", g->tilt_deg, -5, 5},
                {"gauss", "deg", g->gauss_deg, 0, 2}};
    for (size_t i = 0; i < sizeof part / sizeof *part; i++)
        if (!(part[i].value >= part[i].least && part[i].value <= part[i].most))
            return lw_fail(err, LW_BAD_ARGUMENT, "give it as the diffractometer has it, in the unit named",
                           "optics: %s = %g %s is outside %g to %g %s", part[i].name, part[i].value, part[i].unit,
                           part[i].least, part[i].most, part[i].unit);
    return LW_OK;
}

lw_status lw_optics_begin(lw_engine *engine, const lw_geometry *geometry, lw_optics *optics, lw_error *err)
{
    *optics = (lw_optics){.engine = engine, .geometry = *geometry};
    lw_arena_begin(&optics->arena, engine);
    lw_status status = lw_geometry_check(geometry, err);
    if (status == LW_OK)
        status = lw_axial_rays_make(geometry, &optics->arena, &optics->rays, err);
    if (status != LW_OK)
        return status;
    optics->density = lw_arena_take(&optics->arena, LW_OPTICS_POINTS, sizeof(double), err);
    optics->transform = lw_arena_take(&optics->arena, LW_OPTICS_POINTS + 2, sizeof(double), err);
    return optics->density && optics->transform ? LW_OK : LW_OUT_OF_MEMORY;
}

void lw_optics_end(lw_optics *optics)
{
    lw_arena_end(&optics->arena);
}

lw_status lw_optics_transform(lw_optics *optics, double two_theta_deg, lw_error *err)
{
    const lw_geometry *g = &optics->geometry;
    lw_fft *plan = lw_fft_plan(optics->engine, LW_OPTICS_POINTS, LW_FFT_REAL, LW_FFT_MANY, err);
    if (plan == NULL)
        return err->status;
    memset(optics->density, 0, LW_OPTICS_POINTS * sizeof(double));
    lw_axial_rays_fill(&optics->rays, two_theta_deg, LW_OPTICS_POINTS, LW_OPTICS_STEP, optics->density);
    lw_fft_forward(plan, optics->density, optics->transform);
    double period = LW_OPTICS_POINTS * LW_OPTICS_STEP;
    for (size_t i = 0; i <= LW_OPTICS_POINTS / 2; i++) {
        double k = 2 * M_PI * (double)i / period, re = optics->transform[2 * i], im = optics->transform[2 * i + 1];
        for (size_t j = 0; lw_optical_list[j] != NULL; j++) {
            double a, b;
            lw_optical_list[j]->transform(g, two_theta_deg, k, &a, &b);
            double turned = re * a - im * b;
            im = re * b + im * a;
            re = turned;
        }
        double damped = exp(-k * k * g->gauss_deg * g->gauss_deg / (16 * M_LN2));
        optics->transform[2 * i] = re * damped;
        optics->transform[2 * i + 1] = im * damped;
    }
    return LW_OK;
}

lw_status lw_optics_profile(lw_optics *optics, double two_theta_deg, double sharpness_deg, lw_error *err)
{
    lw_status status = lw_optics_transform(optics, two_theta_deg, err);
    if (status != LW_OK)
        return status;
    double period = LW_OPTICS_POINTS * LW_OPTICS_STEP;
    for (size_t i = 0; i <= LW_OPTICS_POINTS / 2; i++) {
        double k = 2 * M_PI * (double)i / period;
        double damped = exp(-k * k * sharpness_deg * sharpness_deg / (16 * M_LN2)) / period;
        optics->transform[2 * i] *= damped;
        optics->transform[2 * i + 1] *= damped;
    }
    lw_fft_back(lw_fft_plan(optics->engine, LW_OPTICS_POINTS, LW_FFT_REAL, LW_FFT_MANY, err), optics->transform,
                optics->density);
    return LW_OK;
}

lw_status lw_optics_figure_at(lw_optics *optics, double two_theta_deg, lw_optics_figure *figure, lw_error *err)
{
    lw_status status = lw_optics_profile(optics, two_theta_deg, 0.002, err);
    if (status != LW_OK)
        return status;
    const double *y = optics->density;
    size_t n = LW_OPTICS_POINTS, top = 0;
    double sum[4] = {0};
    for (size_t i = 0; i < n; i++) {
        double x = LW_OPTICS_STEP * (i < n / 2 ? (double)i : (double)i - (double)n);
        sum[0] += y[i];
        sum[1] += y[i] * x;
        if (y[i] > y[top])
            top = i;
    }
    double mean = sum[1] / sum[0];
    for (size_t i = 0; i < n; i++) {
        double x = LW_OPTICS_STEP * (i < n / 2 ? (double)i : (double)i - (double)n) - mean;
        sum[2] += y[i] * x * x;
        sum[3] += y[i] * x * x * x;
    }
    double before = y[(top + n - 1) % n], after = y[(top + 1) % n];
    double bend = before - 2 * y[top] + after, aside = bend < 0 ? 0.5 * (before - after) / bend : 0;
    double height = y[top] - 0.25 * (before - after) * aside, half = 0.5 * height, edge[2];
    for (int side = 0; side < 2; side++) {
        size_t i = top, step = side == 0 ? n - 1 : 1, count = 0;
        while (y[(i + step) % n] > half && count < n) {
            i = (i + step) % n;
            count++;
        }
        double inside = y[i], outside = y[(i + step) % n];
        edge[side] = (double)count + (inside - half) / (inside - outside);
    }
    figure->fwhm_deg = LW_OPTICS_STEP * (edge[0] + edge[1]);
    figure->breadth_deg = sum[0] * LW_OPTICS_STEP / height;
    figure->centroid_deg = mean;
    figure->top_deg = LW_OPTICS_STEP * ((top < n / 2 ? (double)top : (double)top - (double)n) + aside);
    figure->third_moment_deg3 = sum[3] / sum[0];
    return LW_OK;
}
