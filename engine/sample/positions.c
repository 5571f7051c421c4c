/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/positions.h"

#include <math.h>

#define RADIAN (3.14159265358979323846 / 180)

double *lw_position_covariance(const lw_profiles *profiles, const lw_aberration *without, lw_arena *arena,
                               lw_error *err)
{
    size_t n = profiles->n;
    const lw_lines *lines = profiles->lines;
    double *c = lw_arena_take(arena, n * n, sizeof *c, err);
    if (c == NULL)
        return NULL;
    const lw_aberrations *set = profiles->calibration != NULL ? &profiles->calibration->aberrations : NULL;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            const lw_line *a = profiles->profile[i].line, *b = profiles->profile[j].line;
            double sum = 0;
            if (lines->covariance != NULL && a->at_position != LW_NO_PARAMETER &&
                b->at_position != LW_NO_PARAMETER)
                sum = lines->covariance[a->at_position * lines->n_parameters + b->at_position];
            else if (i == j)
                sum = a->two_theta.u * a->two_theta.u;
            for (size_t k = 0; set != NULL && k < set->n; k++)
                for (size_t l = 0; l < set->n; l++)
                    if (set->kind[k] != without && set->kind[l] != without)
                        sum += set->kind[k]->slope(a->two_theta.value, set->radius_mm) *
                               set->covariance[k][l] *
                               set->kind[l]->slope(b->two_theta.value, set->radius_mm);
            c[i * n + j] = sum;
        }
    return c;
}

double lw_position_shift(const lw_profiles *profiles, const lw_aberration *without, double two_theta_deg)
{
    double sum = 0;
    if (profiles->calibration == NULL)
        return 0;
    const lw_aberrations *set = &profiles->calibration->aberrations;
    for (size_t k = 0; k < set->n; k++)
        if (set->kind[k] != without)
            sum += set->value[k] * set->kind[k]->slope(two_theta_deg, set->radius_mm);
    return sum;
}

double lw_position_s_slope(double s_per_nm, double theta_deg)
{
    return 0.5 * s_per_nm / tan(theta_deg * RADIAN) * RADIAN;
}
