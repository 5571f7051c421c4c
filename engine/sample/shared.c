/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/shared.h"

#include <string.h>

static const char SENSITIVITY[] = "sensitivity";

lw_status lw_shared_tell(const lw_profiles *profiles, const char *field, const lw_generalised_fit *fit, size_t n, size_t m,
                         const double *of, const size_t *row, const double *by, lw_arena *arena, lw_node *result, lw_error *err)
{
    size_t rows = profiles->n_covariance;
    if (profiles->covariance == NULL)
        return LW_OK;
    double *slope = lw_arena_take(arena, rows, sizeof *slope, err);
    if (slope == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < m && row[i] < rows; j++)
            slope[row[i]] += fit->scatter * of[j] * fit->gain[j * n + i] * (by != NULL ? by[i] : 1);
    lw_node *group = NULL;
    for (lw_node *child = result != NULL ? result->first : NULL; child != NULL; child = child->next)
        if (child->name != NULL && strcmp(child->name, SENSITIVITY) == 0)
            group = child;
    if (group == NULL)
        group = lw_add_group(result, SENSITIVITY, err);
    lw_add_vector(group, field, slope, rows, "", err);
    return err->status;
}

static const double *slopes_of(const lw_node *result, const char *field, size_t rows)
{
    const lw_node *group = lw_node_get(result, SENSITIVITY), *slopes = group != NULL ? lw_node_get(group, field) : NULL;
    return slopes != NULL && slopes->n == rows ? slopes->vector : NULL;
}

bool lw_shared_covariance(const lw_profiles *profiles, const lw_node *a, const lw_node *b, const char *field,
                          double *covariance)
{
    size_t rows = profiles->n_covariance;
    const double *x = slopes_of(a, field, rows), *y = slopes_of(b, field, rows);
    *covariance = 0;
    if (x == NULL || y == NULL || profiles->covariance == NULL)
        return false;
    for (size_t i = 0; i < rows; i++)
        for (size_t j = 0; j < rows; j++)
            *covariance += x[i] * profiles->covariance[i * rows + j] * y[j];
    return true;
}

void lw_shared_forget(lw_node *result)
{
    lw_node *before = NULL;
    for (lw_node *child = result->first; child != NULL; before = child, child = child->next) {
        if (child->name == NULL || strcmp(child->name, SENSITIVITY) != 0)
            continue;
        if (before == NULL)
            result->first = child->next;
        else
            before->next = child->next;
        if (result->last == child)
            result->last = before;
        result->n--;
        return;
    }
}
