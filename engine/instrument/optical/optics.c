/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/optics.h"

#include "numeric/fft.h"

#include <math.h>
#include <string.h>

const lw_optical *const lw_optical_list[] = {&lw_optical_source, &lw_optical_slit, &lw_optical_flat,
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
    *optics = (lw_optics){.engine = engine, .geometry = *geometry, .last = LW_OPTICS_POINTS / 2};
    lw_arena_begin(&optics->arena, engine);
    lw_status status = lw_geometry_check(geometry, err);
    if (status == LW_OK)
        status = lw_axial_rays_make(geometry, &optics->arena, &optics->rays, err);
    if (status != LW_OK)
        return status;
    optics->density = lw_arena_take(&optics->arena, LW_OPTICS_POINTS, sizeof(double), err);
    optics->transform = lw_arena_take(&optics->arena, LW_OPTICS_POINTS + 2, sizeof(double), err);
    optics->second = lw_arena_take(&optics->arena, LW_OPTICS_POINTS + 2, sizeof(double), err);
    return optics->density && optics->transform && optics->second ? LW_OK : LW_OUT_OF_MEMORY;
}

void lw_optics_end(lw_optics *optics)
{
    lw_arena_end(&optics->arena);
}

lw_status lw_optics_transform(lw_optics *optics, double two_theta_deg, double stretch, double *transform, lw_error *err)
{
    const lw_geometry *g = &optics->geometry;
    lw_fft *plan = lw_fft_plan(optics->engine, LW_OPTICS_POINTS, LW_FFT_REAL, LW_FFT_MANY, err);
    if (plan == NULL)
        return err->status;
    lw_axial_rays_fill(&optics->rays, two_theta_deg, LW_OPTICS_POINTS, LW_OPTICS_STEP / stretch, optics->density);
    lw_fft_forward(plan, optics->density, transform);
    double period = LW_OPTICS_POINTS * LW_OPTICS_STEP;
    for (size_t i = optics->last + 1; i <= LW_OPTICS_POINTS / 2; i++)
        transform[2 * i] = transform[2 * i + 1] = 0;
    for (size_t i = 0; i <= optics->last; i++) {
        double k = 2 * M_PI * (double)i / period * stretch, re = transform[2 * i], im = transform[2 * i + 1];
        for (size_t j = 0; lw_optical_list[j] != NULL; j++) {
            double a, b;
            lw_optical_list[j]->transform(g, two_theta_deg, k, &a, &b);
            double turned = re * a - im * b;
            im = re * b + im * a;
            re = turned;
        }
        double damped = exp(-k * k * g->gauss_deg * g->gauss_deg / (16 * M_LN2));
        transform[2 * i] = re * damped;
        transform[2 * i + 1] = im * damped;
    }
    return LW_OK;
}

/* The transform at hand, softened, to the density. */
static void to_profile(lw_optics *optics, double sharpness_deg, lw_error *err)
{
    double period = LW_OPTICS_POINTS * LW_OPTICS_STEP;
    for (size_t i = 0; i <= LW_OPTICS_POINTS / 2; i++) {
        double k = 2 * M_PI * (double)i / period;
        double damped = exp(-k * k * sharpness_deg * sharpness_deg / (16 * M_LN2)) / period;
        optics->transform[2 * i] *= damped;
        optics->transform[2 * i + 1] *= damped;
    }
    lw_fft_back(lw_fft_plan(optics->engine, LW_OPTICS_POINTS, LW_FFT_REAL, LW_FFT_MANY, err), optics->transform,
                optics->density);
}

lw_status lw_optics_profile(lw_optics *optics, double two_theta_deg, double sharpness_deg, lw_error *err)
{
    lw_status status = lw_optics_transform(optics, two_theta_deg, 1, optics->transform, err);
    if (status == LW_OK)
        to_profile(optics, sharpness_deg, err);
    return status;
}

/* Centroid and third central moment: the first and third cumulants, from the phase of the transform at its three lowest
 * frequencies, arg(k)/k = -c_1 + c_3 k^2/6 - c_5 k^4/120; sums over the density would multiply its ringing by e^3. */
static void moments(const double *transform, lw_optics_figure *figure)
{
    double k1 = 2 * M_PI / (LW_OPTICS_POINTS * LW_OPTICS_STEP), y[3];
    for (int i = 0; i < 3; i++) {
        const double *c = transform + 2 * (i + 1);
        y[i] = atan2(c[1], c[0]) / (k1 * (i + 1));
    }
    /* through the three points at x = 1, 4, 9 in units of k1^2: value and slope at 0 */
    double d1 = (y[1] - y[0]) / 3, d2 = ((y[2] - y[1]) / 5 - d1) / 8;
    figure->centroid_deg = -(y[0] - d1 + 4 * d2);
    figure->third_moment_deg3 = 6 * (d1 - 5 * d2) / (k1 * k1);
}

lw_status lw_optics_figure_at(lw_optics *optics, double two_theta_deg, lw_optics_figure *figure, lw_error *err)
{
    lw_status status = lw_optics_transform(optics, two_theta_deg, 1, optics->transform, err);
    if (status != LW_OK)
        return status;
    moments(optics->transform, figure);
    to_profile(optics, 0.002, err);
    const double *y = optics->density;
    size_t n = LW_OPTICS_POINTS, top = 0;
    double sum = 0;
    for (size_t i = 0; i < n; i++) {
        sum += y[i];
        if (y[i] > y[top])
            top = i;
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
    figure->breadth_deg = sum * LW_OPTICS_STEP / height;
    double place = top < n / 2 ? (double)top : (double)top - (double)n;
    figure->top_deg = LW_OPTICS_STEP * (place + aside);
    figure->middle_deg = LW_OPTICS_STEP * (place + 0.5 * (edge[1] - edge[0]));
    return LW_OK;
}
