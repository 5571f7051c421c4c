/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where the lines of several scans stand at the joined profile, with the covariance that they have through it. */
#include "instrument/calibration_set.h"

#include "numeric/least_squares.h"

#include <math.h>
#include <string.h>

/* What the places of a scan's lines do when the profile's parameters change: cov(place, parameters) times the inverse
 * covariance of the parameters; `own` receives the covariance that is left when the parameters are known. */
static lw_status condition(lw_engine *engine, size_t n, size_t m, const double *cross, const double *of_parameters,
                           const double *of_places, double *slope, double *own, lw_arena *scratch, lw_error *err)
{
    double *inverse = lw_arena_take(scratch, m * m, sizeof *inverse, err);
    size_t weakest;
    if (inverse == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = lw_invert_normal(engine, of_parameters, m, NULL, inverse, &weakest, err);
    for (size_t i = 0; i < n && status == LW_OK; i++)
        for (size_t a = 0; a < m; a++) {
            slope[i * m + a] = 0;
            for (size_t b = 0; b < m; b++)
                slope[i * m + a] += cross[i * m + b] * inverse[b * m + a];
        }
    for (size_t i = 0; i < n && status == LW_OK; i++)
        for (size_t j = 0; j < n; j++) {
            own[i * n + j] = of_places[i * n + j];
            for (size_t a = 0; a < m; a++)
                own[i * n + j] -= slope[i * m + a] * cross[j * m + a];
        }
    return status;
}

/* One scan's places while they are gathered. */
typedef struct places {
    const lw_lines *lines;
    size_t n, m;                 /* lines; parameters of the profile that the scan tells of */
    size_t *row, *parameter;     /* [n] of the covariance of lines or of the refinement; [m] of the set */
    double *cross, *of_parameters, *of_places, *slope, *own;
} places;

static lw_status take_places(places *p, size_t n, size_t m, lw_arena *scratch, lw_error *err)
{
    p->row = lw_arena_take(scratch, n, sizeof *p->row, err);
    p->parameter = lw_arena_take(scratch, m, sizeof *p->parameter, err);
    p->cross = lw_arena_take(scratch, n * m, sizeof(double), err);
    p->slope = lw_arena_take(scratch, n * m, sizeof(double), err);
    p->of_parameters = lw_arena_take(scratch, m * m, sizeof(double), err);
    p->of_places = lw_arena_take(scratch, n * n, sizeof(double), err);
    p->own = lw_arena_take(scratch, n * n, sizeof(double), err);
    return p->row && p->parameter && p->cross && p->slope && p->of_parameters && p->of_places && p->own ? LW_OK
                                                                                                       : LW_OUT_OF_MEMORY;
}

/* Lines of the scan that count, with where they stand and where the certificate wants them. */
static lw_status choose_lines(lw_set *set, size_t k, places *p, lw_arena *arena, lw_error *err)
{
    lw_set_scan *scan = &set->scan[k];
    lw_calibration_lines *rows = &scan->rows;
    lw_status status = lw__calibration_lines_take(rows, p->lines->n, arena, err);
    double wavelength = lw_radiation_wavelength(&p->lines->radiation);
    for (size_t i = 0; i < p->lines->n && status == LW_OK; i++) {
        const lw_line *line = &p->lines->line[i];
        double d[3], angle = lw__certified_angle(scan->standard, wavelength, &line->reflection, d);
        size_t row = line->at_position;
        if (!line->supported || !(line->two_theta.u > 0) || !isfinite(angle))
            continue;
        if (set->optical) {
            row = 0;
            while (row < scan->refined.n_lines && scan->refined.line[row] != i)
                row++;
            if (row == scan->refined.n_lines)
                continue;
        }
        rows->line[rows->n] = line;
        rows->certified[rows->n] = angle;
        p->row[rows->n++] = row;
    }
    p->n = rows->n;
    return status;
}

/* Places, slopes and own covariance of one scan, at the joined profile. */
static lw_status find_places(lw_engine *engine, lw_set *set, size_t k, places *p, double *place, lw_arena *scratch,
                             lw_error *err)
{
    const lw_set_scan *scan = &set->scan[k];
    const lw_refined *refined = &scan->refined;
    const lw_lines *lines = p->lines;
    size_t rows[LW_WIDTH_PARAMETERS];
    p->m = 0;
    for (size_t a = 0; a < set->n_profile; a++) {
        size_t at = LW_NO_PARAMETER;
        if (!set->optical)
            at = scan->again ? a : lw_lines_row(lines, lw_width_name[set->width[a]]);
        for (size_t i = 0; i < refined->n && set->optical; i++)
            if (strcmp(refined->name[i], set->name[a]) == 0)
                at = i;
        bool told = at != LW_NO_PARAMETER &&
                    (scan->again || (set->optical ? refined->covariance[at][at]
                                                  : lines->covariance[at * lines->n_parameters + at]) > 0);
        if (!told)
            continue;
        rows[p->m] = at;
        p->parameter[p->m++] = a;
    }
    size_t n = p->n, m = p->m, size = lines->n_parameters;
    for (size_t i = 0; i < n; i++) {
        place[i] = set->optical ? refined->position[p->row[i]] : scan->rows.line[i]->two_theta.value;
        for (size_t j = 0; j < n; j++)
            p->of_places[i * n + j] = set->optical
                                          ? refined->position_covariance[p->row[i] * refined->n_lines + p->row[j]]
                                          : lines->covariance[p->row[i] * size + p->row[j]];
        for (size_t a = 0; a < m && !scan->again; a++)
            p->cross[i * m + a] = set->optical ? refined->cross[p->row[i] * refined->n + rows[a]]
                                               : lines->covariance[p->row[i] * size + rows[a]];
    }
    if (scan->again) { /* fitted with the joined profile: nothing to move */
        for (size_t i = 0; i < n; i++) {
            for (size_t j = 0; j < n; j++)
                p->own[i * n + j] = p->of_places[i * n + j] -
                                    (lines->from_instrument ? lines->from_instrument[p->row[i] * size + p->row[j]] : 0);
            for (size_t a = 0; a < m; a++)
                p->slope[i * m + a] =
                    lines->to_instrument ? lines->to_instrument[p->row[i] * LW_WIDTH_PARAMETERS + (size_t)set->width[a]] : 0;
        }
        return LW_OK;
    }
    for (size_t a = 0; a < m; a++)
        for (size_t b = 0; b < m; b++)
            p->of_parameters[a * m + b] =
                set->optical ? refined->covariance[rows[a]][rows[b]] : lines->covariance[rows[a] * size + rows[b]];
    lw_status status = condition(engine, n, m, p->cross, p->of_parameters, p->of_places, p->slope, p->own, scratch, err);
    for (size_t i = 0; i < n && status == LW_OK; i++)
        for (size_t a = 0; a < m; a++)
            place[i] += p->slope[i * m + a] * (set->value[p->parameter[a]] -
                                               (set->optical ? refined->value[rows[a]] : lines->parameter[rows[a]]));
    return status;
}

/* Which of the set's standards a scan's is, in order of first use. */
static size_t standard_of(const lw_set *set, size_t k)
{
    size_t found = 0;
    for (size_t i = 0; i < k; i++) {
        bool first = true;
        for (size_t j = 0; j < i; j++)
            first &= strcmp(set->scan[j].standard->name, set->scan[i].standard->name) != 0;
        if (strcmp(set->scan[i].standard->name, set->scan[k].standard->name) == 0) {
            return standard_of(set, i);
        }
        found += first;
    }
    return found;
}

lw_status lw__set_places(lw_engine *engine, lw_set *set, lw_arena *arena, lw_arena *scratch, lw_error *err)
{
    places all[LW_SET_MOST] = {{0}};
    double *place[LW_SET_MOST];
    lw_status status = LW_OK;
    set->n_lines = 0;
    for (size_t k = 0; k < set->n && status == LW_OK; k++) {
        lw_set_scan *scan = &set->scan[k];
        all[k].lines = scan->again ? scan->again : scan->lines;
        status = take_places(&all[k], all[k].lines->n, set->n_profile, scratch, err);
        if (status == LW_OK)
            status = choose_lines(set, k, &all[k], arena, err);
        place[k] = status == LW_OK ? lw_arena_take(scratch, all[k].n, sizeof(double), err) : NULL;
        if (place[k] == NULL)
            return status == LW_OK ? LW_OUT_OF_MEMORY : status;
        status = find_places(engine, set, k, &all[k], place[k], scratch, err);
        scan->first = set->n_lines;
        set->n_lines += all[k].n;
        set->n_common = 3 * (standard_of(set, k) + 1) > set->n_common ? 3 * (standard_of(set, k) + 1) : set->n_common;
    }
    if (status != LW_OK)
        return status;
    size_t n = set->n_lines, m = set->n_profile;
    set->scan_of = lw_arena_take(arena, n, sizeof *set->scan_of, err);
    set->difference = lw_arena_take(arena, n, sizeof(double), err);
    set->certified = lw_arena_take(arena, n, sizeof(double), err);
    set->places = lw_arena_take(arena, n * n, sizeof(double), err);
    set->to_profile = lw_arena_take(arena, n * m, sizeof(double), err);
    set->common = lw_arena_take(arena, n * set->n_common, sizeof(double), err);
    if (!set->scan_of || !set->difference || !set->certified || !set->places || !set->to_profile || !set->common)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < set->n; k++) {
        lw_set_scan *scan = &set->scan[k];
        const places *p = &all[k];
        const lw_cell *cell = &scan->standard->material.cell;
        double u_edge[3] = {cell->u_a, cell->u_b, cell->u_c}, d[3];
        size_t group[3], edge = 3 * standard_of(set, k);
        lw__edge_groups(scan->standard->material.system, group);
        for (size_t i = 0; i < p->n; i++) {
            size_t row = scan->first + i;
            set->scan_of[row] = k;
            set->certified[row] = scan->rows.certified[i];
            set->difference[row] = scan->rows.difference[i] = place[k][i] - scan->rows.certified[i];
            for (size_t a = 0; a < p->m; a++)
                set->to_profile[row * m + p->parameter[a]] = p->slope[i * p->m + a];
            for (size_t j = 0; j < p->n; j++)
                set->places[row * n + scan->first + j] = p->own[i * p->n + j];
            lw__certified_angle(scan->standard, lw_radiation_wavelength(&p->lines->radiation),
                                &scan->rows.line[i]->reflection, d);
            for (size_t e = 0; e < 3; e++)
                set->common[row * set->n_common + edge + group[e]] += d[e] * u_edge[e];
            double square = 0;
            for (size_t e = 0; e < 3; e++)
                square += pow(set->common[row * set->n_common + edge + e], 2);
            scan->rows.u_certified[i] = sqrt(square);
        }
    }
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++)
            for (size_t a = 0; a < m; a++)
                for (size_t b = 0; b < m; b++)
                    set->places[i * n + j] +=
                        set->to_profile[i * m + a] * set->covariance[a * m + b] * set->to_profile[j * m + b];
    for (size_t k = 0; k < set->n; k++)
        for (size_t i = 0; i < all[k].n; i++) {
            size_t row = set->scan[k].first + i;
            set->scan[k].rows.place[i] = lw_quantity_of(place[k][i], sqrt(fmax(set->places[row * n + row], 0)), "deg");
        }
    return LW_OK;
}
