/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/observed.h"

#include "numeric/fft.h"

#include <math.h>

static const double degree = M_PI / 180;

static double factor_at(const lw_observed *o, double theta)
{
    double c = cos(2 * theta), s = sin(theta);
    return o->with_factor ? (o->constant_polarisation + o->cos2_polarisation * c * c) / (s * s) : 1;
}

/* One emission component on the axis of offsets. */
typedef struct component {
    double weight, offset, width; /* with the intensity factor at its place; deg */
    double lean;                  /* relative slope of the intensity factor, 1/deg */
    double share;                 /* its angle, between the spectrum's ends */
} component;

static void take_components(const lw_observed *o, double theta, double end, component *of)
{
    const lw_radiation *radiation = o->radiation;
    double reference = lw_radiation_wavelength(radiation), first = factor_at(o, theta);
    double own = o->domain_size_nm > 0 ? 2 / M_PI * reference / (o->domain_size_nm * cos(theta)) / degree : 0;
    for (size_t c = 0; c < radiation->n; c++) {
        double wavelength = radiation->component[c].wavelength_nm, ratio = wavelength / reference;
        double there = asin(fmin(ratio * sin(theta), 0.9999)), h = 1e-4;
        double factor = factor_at(o, there);
        of[c] = (component){.weight = radiation->component[c].weight * factor / first,
                            .offset = 2 * tan(theta) * (ratio - 1) / degree,
                            .width = 2 * tan(theta) * radiation->component[c].width_nm / reference / degree + own,
                            .lean = (factor_at(o, there + h) - factor_at(o, there - h)) / (4 * h * factor) * degree,
                            .share = end > theta || end < theta ? (there - theta) / (end - theta) : 0};
    }
}

lw_status lw_observed_curve(const lw_observed *o, lw_optics *optics, double two_theta_deg, double *curve, lw_error *err)
{
    const lw_radiation *radiation = o->radiation;
    double theta = two_theta_deg * degree / 2, reference = lw_radiation_wavelength(radiation), end = theta;
    for (size_t c = 0; c < radiation->n; c++) {
        double there = asin(fmin(radiation->component[c].wavelength_nm / reference * sin(theta), 0.9999));
        if (fabs(there - theta) > fabs(end - theta))
            end = there;
    }
    component part[LW_EMISSION_MOST];
    take_components(o, theta, end, part);
    /* beyond some frequency the narrowest component leaves nothing */
    double narrowest = INFINITY, step = 2 * M_PI / (LW_OPTICS_POINTS * LW_OPTICS_STEP);
    for (size_t c = 0; c < radiation->n; c++)
        narrowest = fmin(narrowest, part[c].width);
    optics->last = (size_t)fmin(LW_OPTICS_POINTS / 2, narrowest > 0 ? 60 / (narrowest * step) : INFINITY);
    double *near = optics->transform, *far = fabs(end - theta) > 1e-5 ? optics->second : near;
    lw_status status = lw_optics_transform(optics, two_theta_deg, 1, near, err);
    if (status == LW_OK && far != near)
        status = lw_optics_transform(optics, 2 * end / degree, cos(end) / cos(theta), far, err);
    if (status != LW_OK)
        return status;
    double period = LW_OPTICS_POINTS * LW_OPTICS_STEP, sharp = radiation->is_plain ? 0.004 : 0;
    for (size_t i = 0; i <= optics->last; i++) {
        double k = step * (double)i, x = 0.5 * k * o->step_deg;
        double re[2] = {0}, im[2] = {0}; /* of what goes through the optics at either end */
        for (size_t c = 0; c < radiation->n; c++) {
            const component *p = &part[c];
            /* times (1 + lean x') at x' from its middle: x' turns to i d/dk, which gives -i width/2 for k > 0 */
            double size = p->weight * exp(-0.5 * p->width * k), turn = i > 0 ? 0.5 * p->lean * p->width : 0;
            double cosine = cos(k * p->offset), sine = sin(k * p->offset);
            double a = size * (cosine - turn * sine), b = -size * (sine + turn * cosine);
            re[0] += (1 - p->share) * a;
            im[0] += (1 - p->share) * b;
            re[1] += p->share * a;
            im[1] += p->share * b;
        }
        double box = (x < 1e-4 ? 1 : sin(x) / x) / period * exp(-k * k * sharp * sharp / (16 * M_LN2));
        double a = near[2 * i], b = near[2 * i + 1], c = far[2 * i], d = far[2 * i + 1];
        near[2 * i] = box * (re[0] * a - im[0] * b + re[1] * c - im[1] * d);
        near[2 * i + 1] = box * (re[0] * b + im[0] * a + re[1] * d + im[1] * c);
    }
    lw_fft_back(lw_fft_plan(optics->engine, LW_OPTICS_POINTS, LW_FFT_REAL, LW_FFT_MANY, err), near, curve);
    return LW_OK;
}

double lw_observed_offset(double place_deg, double two_theta_deg)
{
    double half = place_deg * degree / 2;
    return 2 * (sin(two_theta_deg * degree / 2) - sin(half)) / cos(half) / degree;
}

/* Cubic interpolation (Catmull & Rom 1974). */
double lw_observed_at(const double *curve, double x, double *slope)
{
    double place = x / LW_OPTICS_STEP, whole = floor(place), t = place - whole;
    long n = LW_OPTICS_POINTS, i = (long)whole % n;
    if (i < 0)
        i += n;
    double y0 = curve[(i + n - 1) % n], y1 = curve[i], y2 = curve[(i + 1) % n], y3 = curve[(i + 2) % n];
    double a = 0.5 * (3 * (y1 - y2) + y3 - y0), b = y0 - 2.5 * y1 + 2 * y2 - 0.5 * y3, c = 0.5 * (y2 - y0);
    *slope = ((3 * a * t + 2 * b) * t + c) / LW_OPTICS_STEP;
    return ((a * t + b) * t + c) * t + y1;
}
