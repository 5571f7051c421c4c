/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/table.h"

#include "numeric/fft.h"

#include <math.h>

/* Where a profile holds all but `share` of its area: offsets in degrees, widened into *low and *high. */
static void widen(const double *density, double share, double *low, double *high)
{
    const size_t n = LW_OPTICS_POINTS, half = n / 2;
    double sum = 0;
    for (size_t i = 0; i < half; i++) { /* from the far left: grid points half..n-1 are negative */
        sum += density[half + i] * LW_OPTICS_STEP;
        if (sum > share) {
            *low = fmin(*low, LW_OPTICS_STEP * ((double)i - (double)half));
            break;
        }
    }
    sum = 0;
    for (size_t i = half; i-- > 0;) {
        sum += density[i] * LW_OPTICS_STEP;
        if (sum > share) {
            *high = fmax(*high, LW_OPTICS_STEP * (double)i);
            break;
        }
    }
}

/* One row: the profile with the Gaussian taken out, its transform faded out towards what the spacing can carry. */
static lw_status fill_row(lw_optics *optics, double angle, const lw_profile_table *table, double sigma, double *row,
                          lw_error *err)
{
    lw_status status = lw_optics_transform(optics, angle, 1, optics->transform, err);
    if (status != LW_OK)
        return status;
    double period = LW_OPTICS_POINTS * LW_OPTICS_STEP, limit = M_PI / table->spacing_deg,
           smooth = 0.8 * table->spacing_deg;
    for (size_t i = 0; i <= LW_OPTICS_POINTS / 2; i++) {
        double k = 2 * M_PI * (double)i / period, fade = 0;
        if (k < limit) {
            /* flat to fourth order, then falling without ringing */
            double q = 0.5 * k * k * smooth * smooth;
            fade = (1 + q) * exp(0.5 * k * k * sigma * sigma - q) / period;
        }
        optics->transform[2 * i] *= fade;
        optics->transform[2 * i + 1] *= fade;
    }
    lw_fft *plan = lw_fft_plan(optics->engine, LW_OPTICS_POINTS, LW_FFT_REAL, LW_FFT_MANY, err);
    if (plan == NULL)
        return err->status;
    lw_fft_back(plan, optics->transform, optics->density);
    double sum = 0;
    for (size_t i = 0; i < table->n; i++) {
        double place = (table->low_deg + (double)i * table->spacing_deg) / LW_OPTICS_STEP, whole = floor(place);
        long at = (long)whole;
        size_t first = (size_t)(at < 0 ? at + LW_OPTICS_POINTS : at), next = (first + 1) % LW_OPTICS_POINTS;
        row[i] = optics->density[first] + (place - whole) * (optics->density[next] - optics->density[first]);
        sum += row[i];
    }
    for (size_t i = 0; i < table->n; i++)
        row[i] /= sum;
    return LW_OK;
}

lw_status lw_optics_table(lw_engine *engine, const lw_geometry *geometry, double low_deg, double high_deg,
                          lw_arena *arena, lw_profile_table **out, double *gauss_variance_deg2, lw_error *err)
{
    lw_optics optics;
    lw_status status = lw_optics_begin(engine, geometry, &optics, err);
    double low = 0, high = 0;
    double ends[] = {low_deg, 0.5 * (low_deg + high_deg), high_deg};
    for (int i = 0; i < 3 && status == LW_OK; i++) {
        status = lw_optics_profile(&optics, ends[i], 0.01, err);
        if (status == LW_OK)
            widen(optics.density, 2e-4, &low, &high);
    }
    lw_profile_table *table = status == LW_OK ? lw_arena_take(arena, 1, sizeof *table, err) : NULL;
    if (table != NULL) {
        double spacing = fmax(0.004, (high - low) / (LW_TABLE_MOST - 3));
        size_t angles = (size_t)ceil(high_deg - low_deg) + 1;
        *table = (lw_profile_table){.first_deg = low_deg,
                                    .step_deg = (high_deg - low_deg) / (double)(angles - 1),
                                    .n_angles = angles,
                                    .low_deg = low - spacing,
                                    .spacing_deg = spacing,
                                    .n = (size_t)fmin(ceil((high - low) / spacing) + 3, LW_TABLE_MOST)};
        double *weight = lw_arena_take(arena, angles * table->n, sizeof *weight, err), sigma = 0.5 * spacing;
        table->weight = weight;
        status = weight ? LW_OK : LW_OUT_OF_MEMORY;
        for (size_t i = 0; i < angles && status == LW_OK; i++)
            status = fill_row(&optics, low_deg + (double)i * table->step_deg, table, sigma, weight + i * table->n, err);
        *gauss_variance_deg2 = 8 * M_LN2 * sigma * sigma;
        *out = table;
    } else if (status == LW_OK)
        status = LW_OUT_OF_MEMORY;
    lw_optics_end(&optics);
    return status;
}
