/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reflections of a material between two angles. */
#include "physics/crystal.h"
#include "physics/space_group.h"

#include <math.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { REFLECTIONS_MOST = 5000, POLL_EVERY = 4096 };

static const double RADIAN = 180.0 / 3.14159265358979323846;

/* Points of the reciprocal lattice that a call may look at: 5000 lines of any space group need fewer. */
static const double POINTS_MOST = 1.2e7;
static const double EQUAL_SPACING = 1e-7; /* relative */

typedef struct candidate {
    int h, k, l, multiplicity;
    double s;
} candidate;

/* Rotations of the Laue group. */
typedef struct laue {
    int n;
    int rotation[48][3][3];
} laue;

static void laue_add(laue *group, const int rotation[3][3], int sign)
{
    int turned[3][3];
    for (int i = 0; i < 3; i++)
        for (int j = 0; j < 3; j++)
            turned[i][j] = sign * rotation[i][j];
    for (int i = 0; i < group->n; i++)
        if (memcmp(group->rotation[i], turned, sizeof turned) == 0)
            return;
    if (group->n < 48)
        memcpy(group->rotation[group->n++], turned, sizeof turned);
}

static void turn(const int rotation[3][3], const int from[3], int to[3])
{
    for (int j = 0; j < 3; j++)
        to[j] = from[0] * rotation[0][j] + from[1] * rotation[1][j] + from[2] * rotation[2][j];
}

/* Rank among equivalents; the highest one stands for all. Few negative indices first, then l not
 * negative, then large h, k, l: this gives the indices in common use (311, 10-2 becomes 012). */
static uint64_t rank(const int h[3])
{
    uint64_t negative = (uint64_t)((h[0] < 0) + (h[1] < 0) + (h[2] < 0));
    uint64_t key = (3 - negative) * 2 + (h[2] >= 0);
    for (int i = 0; i < 3; i++)
        key = key << 16 | (uint64_t)(h[i] + 32768);
    return key;
}

/* Number of different equivalents of h, or 0 if one of them ranks higher. */
static int multiplicity(const laue *group, const int h[3])
{
    uint64_t own = rank(h);
    int fixing = 0;
    for (int i = 0; i < group->n; i++) {
        int other[3];
        turn(group->rotation[i], h, other);
        uint64_t key = rank(other);
        if (key > own)
            return 0;
        fixing += key == own;
    }
    return group->n / fixing; /* orbit and stabiliser */
}

static bool is_absent(const lw_operations *operations, const int h[3])
{
    for (int op = 0; op < operations->n; op++) {
        const int *t = operations->shift[op];
        if ((h[0] * t[0] + h[1] * t[1] + h[2] * t[2]) % 24 == 0)
            continue;
        int other[3];
        turn(operations->rotation[op], h, other);
        if (other[0] == h[0] && other[1] == h[1] && other[2] == h[2])
            return true;
    }
    return false;
}

static int by_spacing(const void *left, const void *right)
{
    const candidate *p = left, *q = right;
    if (p->s != q->s)
        return p->s < q->s ? -1 : 1;
    if (p->h != q->h)
        return p->h > q->h ? -1 : 1;
    if (p->k != q->k)
        return p->k > q->k ? -1 : 1;
    return (p->l < q->l) - (p->l > q->l);
}

typedef struct found {
    lw_engine *engine;
    candidate *item;
    size_t n, room;
} found;

static lw_status push(found *list, candidate item, lw_error *err)
{
    if (list->n == list->room) {
        size_t room = list->room == 0 ? 256 : 2 * list->room;
        candidate *block = lw_take(list->engine, room * sizeof *block, err);
        if (block == NULL)
            return LW_OUT_OF_MEMORY;
        if (list->n > 0)
            memcpy(block, list->item, list->n * sizeof *block);
        if (list->item != NULL)
            lw_give(list->engine, list->item, list->room * sizeof *block);
        list->item = block;
        list->room = room;
    }
    list->item[list->n++] = item;
    return LW_OK;
}

static lw_status too_many(const lw_material *material, double low_deg, double high_deg, lw_error *err)
{
    return lw_fail(err, LW_BAD_ARGUMENT,
                   "narrow the range of angles, or check cell and wavelength (both in nm)",
                   "%s has more than %d reflections between %g and %g degrees", material->name,
                   REFLECTIONS_MOST, low_deg, high_deg);
}

static lw_status search(const lw_material *material, double s_low, double s_high, found *list, lw_error *err)
{
    lw_operations operations;
    lw_status status = lw_space_group_operations(material->hall_number, &operations, err);
    if (status != LW_OK)
        return status;
    laue group = {.n = 0};
    for (int op = 0; op < operations.n; op++) {
        laue_add(&group, operations.rotation[op], 1);
        laue_add(&group, operations.rotation[op], -1);
    }
    const lw_cell *cell = &material->cell;
    const int top[3] = {(int)(cell->a * s_high), (int)(cell->b * s_high), (int)(cell->c * s_high)};
    /* s^2 is a quadratic form; its six numbers come from s of six index triples. */
    double form[6];
    static const int probe[6][3] = {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}, {0, 1, 1}, {1, 0, 1}, {1, 1, 0}};
    for (int i = 0; i < 6; i++) {
        double s = lw_cell_s(cell, probe[i][0], probe[i][1], probe[i][2]);
        form[i] = s * s;
    }
    const double yz = form[3] - form[1] - form[2], xz = form[4] - form[0] - form[2],
                 xy = form[5] - form[0] - form[1];
    const double least = s_low * s_low * (1 - 1e-12), most = s_high * s_high * (1 + 1e-12);
    long looked = 0;
    for (int h = -top[0]; h <= top[0]; h++)
        for (int k = -top[1]; k <= top[1]; k++)
            for (int l = -top[2]; l <= top[2]; l++) {
                if (++looked % POLL_EVERY == 0 && (status = lw_engine_poll(list->engine, err)) != LW_OK)
                    return status;
                double square = form[0] * h * h + form[1] * k * k + form[2] * l * l + yz * k * l +
                                xz * h * l + xy * h * k;
                if (square < least || square > most)
                    continue;
                const int index[3] = {h, k, l};
                int m = multiplicity(&group, index);
                if (m == 0 || is_absent(&operations, index))
                    continue;
                status = push(list, (candidate){h, k, l, m, lw_cell_s(cell, h, k, l)}, err);
                if (status != LW_OK)
                    return status;
            }
    return LW_OK;
}

/* Joins neighbours of equal spacing in place, and gives back how many lines are left. */
static size_t join(found *list, lw_reflection *line, double wavelength_nm)
{
    size_t n = 0;
    for (size_t i = 0; i < list->n;) {
        const candidate *best = &list->item[i];
        double s = best->s;
        int sum = 0, families = 0;
        for (; i < list->n && list->item[i].s <= s * (1 + EQUAL_SPACING); i++) {
            const candidate *item = &list->item[i];
            sum += item->multiplicity;
            families++;
            if (item->multiplicity > best->multiplicity ||
                (item->multiplicity == best->multiplicity && abs(item->h) > abs(best->h)))
                best = item;
        }
        if (line != NULL) {
            double sine = fmin(0.5 * wavelength_nm * best->s, 1.0);
            line[n] = (lw_reflection){.h = best->h,
                                      .k = best->k,
                                      .l = best->l,
                                      .d_nm = 1 / best->s,
                                      .two_theta_deg = 2 * asin(sine) * RADIAN,
                                      .multiplicity = sum,
                                      .families = families};
        }
        n++;
    }
    return n;
}

lw_status lw_reflections(const lw_material *material, double wavelength_nm, double low_deg, double high_deg,
                         lw_arena *arena, lw_reflection **reflections, size_t *n, lw_error *err)
{
    *reflections = NULL;
    *n = 0;
    if (!(wavelength_nm >= 0.001 && wavelength_nm <= 1))
        return lw_fail(err, LW_BAD_ARGUMENT, "give the wavelength in nm", "a wavelength of %g nm can't be",
                       wavelength_nm);
    if (!(low_deg > 0 && low_deg < high_deg && high_deg < 180))
        return lw_fail(err, LW_BAD_ARGUMENT, "give 0 < low < high < 180 degrees 2theta",
                       "there are no reflections between %g and %g degrees", low_deg, high_deg);
    if (material->hall_number < 1 || !(lw_cell_volume(&material->cell) > 0))
        return lw_fail(err, LW_BAD_ARGUMENT, "settle the material first", "%s has no settled cell",
                       material->name);
    double s_low = 2 * sin(0.5 * low_deg / RADIAN) / wavelength_nm;
    double s_high = 2 * sin(0.5 * high_deg / RADIAN) / wavelength_nm;
    const lw_cell *cell = &material->cell;
    double longest = fmax(cell->a, fmax(cell->b, cell->c)) * s_high;
    double points = (2 * cell->a * s_high + 1) * (2 * cell->b * s_high + 1) * (2 * cell->c * s_high + 1);
    if (!(points < POINTS_MOST) || longest > 30000)
        return too_many(material, low_deg, high_deg, err);

    found list = {.engine = arena->engine};
    lw_status status = search(material, s_low, s_high, &list, err);
    if (status == LW_OK && list.n > 0) {
        qsort(list.item, list.n, sizeof *list.item, by_spacing);
        size_t lines = join(&list, NULL, wavelength_nm);
        if (lines > REFLECTIONS_MOST)
            status = too_many(material, low_deg, high_deg, err);
        else {
            lw_reflection *line = lw_arena_take(arena, lines, sizeof *line, err);
            if (line == NULL)
                status = LW_OUT_OF_MEMORY;
            else {
                *n = join(&list, line, wavelength_nm);
                *reflections = line;
            }
        }
    }
    if (list.item != NULL)
        lw_give(list.engine, list.item, list.room * sizeof *list.item);
    return status;
}

const char *lw_hkl_text(int h, int k, int l, char *text, size_t size)
{
    bool wide = abs(h) > 9 || abs(k) > 9 || abs(l) > 9;
    snprintf(text, size, wide ? "%d %d %d" : "%d%d%d", h, k, l);
    return text;
}
