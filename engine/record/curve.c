/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/curve.h"

#include <math.h>

lw_pick lw_pick_begin(const lw_series *series, const lw_layout *layout)
{
    lw_pick pick = {.series = series, .log = layout->x.log};
    /* a marker is wider than a pixel, a curve's joint isn't */
    double density = series->kind == LW_SERIES_POINTS ? 1 : 2;
    double columns = density * ceil(layout->width * (layout->right - layout->left));
    double high = pick.log ? log10(layout->x.high) : layout->x.high;
    pick.low = pick.log ? log10(layout->x.low) : layout->x.low;
    pick.step = (high - pick.low) / columns;
    pick.all = (double)series->n <= 4 * columns || series->u_x != NULL || series->u_y != NULL ||
               series->y == NULL || !(pick.step > 0);
    for (size_t i = 1; i < series->n && !pick.all; i++)
        if (!(series->x[i] >= series->x[i - 1]))
            pick.all = true;
    return pick;
}

static double column(const lw_pick *pick, size_t i)
{
    double x = pick->series->x[i];
    return floor(((pick->log ? log10(fmax(x, 1e-300)) : x) - pick->low) / pick->step);
}

static void enqueue(lw_pick *pick, size_t index)
{
    if (pick->queued == 0 || index > pick->queue[pick->queued - 1])
        pick->queue[pick->queued++] = index;
}

bool lw_pick_next(lw_pick *pick, size_t *index)
{
    const lw_series *s = pick->series;
    if (pick->all) {
        *index = pick->next;
        return pick->next++ < s->n;
    }
    if (pick->given == pick->queued) {
        if (pick->next >= s->n)
            return false;
        size_t first = pick->next, lowest = first, highest = first, end = first;
        const double *top = s->high ? s->high : s->y;
        double here = column(pick, first);
        /* a gap (NaN) ends a run, so that the line stays parted there */
        while (end < s->n && column(pick, end) == here && isfinite(s->y[end])) {
            lowest = s->y[end] < s->y[lowest] ? end : lowest;
            highest = top[end] > top[highest] ? end : highest;
            end++;
        }
        end = end > first ? end : first + 1;
        pick->queued = pick->given = 0;
        enqueue(pick, first);
        enqueue(pick, lowest < highest ? lowest : highest);
        enqueue(pick, lowest < highest ? highest : lowest);
        enqueue(pick, end - 1);
        pick->next = end;
    }
    *index = pick->queue[pick->given++];
    return true;
}
