/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/positions.h"

#include <math.h>

#define PI 3.14159265358979323846
#define RADIAN (PI / 180)

static bool is_among(const lw_aberration *kind, const lw_aberration *const *list, size_t n)
{
    for (size_t i = 0; i < n; i++)
        if (list[i] == kind)
            return true;
    return false;
}

double *lw_position_covariance(const lw_profiles *profiles, const lw_aberration *const *without, size_t n_without,
                               lw_arena *arena, lw_error *err)
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
                    if (!is_among(set->kind[k], without, n_without) && !is_among(set->kind[l], without, n_without))
                        sum += set->kind[k]->slope(a->two_theta.value, set->radius_mm) *
                               set->covariance[k][l] *
                               set->kind[l]->slope(b->two_theta.value, set->radius_mm);
            double u_a, u_b;
            lw_position_scattering(profiles, i, &u_a);
            lw_position_scattering(profiles, j, &u_b);
            c[i * n + j] = sum + u_a * u_b;
        }
    return c;
}

double lw_position_shift(const lw_profiles *profiles, const lw_aberration *const *without, size_t n_without,
                         double two_theta_deg)
{
    double sum = 0;
    if (profiles->calibration == NULL)
        return 0;
    const lw_aberrations *set = &profiles->calibration->aberrations;
    for (size_t k = 0; k < set->n; k++)
        if (!is_among(set->kind[k], without, n_without))
            sum += set->value[k] * set->kind[k]->slope(two_theta_deg, set->radius_mm);
    return sum;
}

double lw_position_scattering(const lw_profiles *profiles, size_t which, double *u)
{
    static const double steepest = -0.4, gentlest = -0.1; /* nm */
    const lw_profile *profile = &profiles->profile[which];
    *u = 0;
    if (!profiles->lines->with_factor || profile->breadth_s.kind != LW_VALUE ||
        !(profile->breadth_s.value > 0) || !(profile->s_per_nm > 0))
        return 0;
    double breadth = profile->breadth_s.value;
    double share = breadth * breadth / (2 * PI) / lw_position_s_slope(profile->s_per_nm, profile->theta_deg);
    *u = (gentlest - steepest) / sqrt(12) * share;
    return 0.5 * (gentlest + steepest) * share;
}

double lw_position_s_slope(double s_per_nm, double theta_deg)
{
    return 0.5 * s_per_nm / tan(theta_deg * RADIAN) * RADIAN;
}
