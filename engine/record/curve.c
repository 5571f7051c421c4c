/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/curve.h"

#include <math.h>
#include <string.h>

lw_pick lw_pick_begin(const lw_series *series, const lw_layout *layout)
{
    lw_pick pick = {.series = series, .log = layout->x.log, .y = layout->y[series->panel], .column = NAN};
    pick.markers = series->kind == LW_SERIES_POINTS;
    pick.height = (layout->top[series->panel] - layout->bottom[series->panel]) * layout->height;
    double width = layout->width * (layout->right - layout->left);
    double columns = ceil(pick.markers ? width : 2 * width);
    double high = pick.log ? log10(layout->x.high) : layout->x.high;
    pick.low = pick.log ? log10(layout->x.low) : layout->x.low;
    pick.step = (high - pick.low) / columns;
    pick.all = (double)series->n <= (pick.markers ? 1000 : 4 * columns) || series->u_x != NULL ||
               series->u_y != NULL || series->y == NULL || !(pick.step > 0);
    for (size_t i = 1; i < series->n && !pick.all && !pick.markers; i++)
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

/* Whether a marker's pixel is free; takes it. Those outside the frame aren't drawn. */
static bool take_pixel(lw_pick *pick, size_t i)
{
    double y = pick->series->y[i], here = column(pick, i);
    double part = pick->y.log ? log(y / pick->y.low) / log(pick->y.high / pick->y.low)
                              : (y - pick->y.low) / (pick->y.high - pick->y.low);
    double row = floor(part * pick->height);
    if (!(row >= 0 && row < LW_PICK_ROWS))
        return false;
    if (!(here == pick->column)) {
        memset(pick->taken, 0, sizeof pick->taken);
        pick->column = here;
    }
    unsigned char *cell = &pick->taken[(size_t)row / 8], bit = (unsigned char)(1u << ((unsigned)row % 8));
    bool is_free = (*cell & bit) == 0;
    *cell = (unsigned char)(*cell | bit);
    return is_free;
}

bool lw_pick_next(lw_pick *pick, size_t *index)
{
    const lw_series *s = pick->series;
    if (pick->all) {
        *index = pick->next;
        return pick->next++ < s->n;
    }
    if (pick->markers) {
        while (pick->next < s->n && !take_pixel(pick, pick->next))
            pick->next++;
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
