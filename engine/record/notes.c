/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/notes.h"

#include <math.h>

typedef struct box {
    double left, right, top, bottom; /* px, y downwards */
} box;

static double part(const lw_axis_scale *s, double value)
{
    return s->log ? log(value / s->low) / log(s->high / s->low) : (value - s->low) / (s->high - s->low);
}

static double to_x(const lw_layout *l, double x)
{
    return (l->left + part(&l->x, x) * (l->right - l->left)) * l->width;
}

static double to_y(const lw_layout *l, int panel, double y)
{
    return (1 - l->bottom[panel] - part(&l->y[panel], y) * (l->top[panel] - l->bottom[panel])) * l->height;
}

static double overlap(const box *a, const box *b)
{
    double x = fmin(a->right, b->right) - fmax(a->left, b->left);
    double y = fmin(a->bottom, b->bottom) - fmax(a->top, b->top);
    return x > 0 && y > 0 ? x * y : 0;
}

bool lw_note_shown(const lw_note *note, const lw_layout *layout, int panel)
{
    return note->panel == panel && isfinite(note->x) && isfinite(note->y) && (!layout->x.log || note->x > 0) &&
           (!layout->y[panel].log || note->y > 0);
}

/* What a box at this place would cover: markers with their bars, curves, and the outside of the frame. */
static double covered(const lw_figure *figure, const lw_layout *l, int panel, const box *b)
{
    box frame = {l->left * l->width, l->right * l->width, (1 - l->top[panel]) * l->height,
                 (1 - l->bottom[panel]) * l->height};
    double area = (b->right - b->left) * (b->bottom - b->top);
    double sum = 4 * (area - overlap(b, &frame));
    for (const lw_series *s = figure->first; s != NULL; s = s->next) {
        if (s->panel != panel || s->y == NULL || s->n > 300 || s->kind == LW_SERIES_BAND)
            continue;
        for (size_t i = 0; i < s->n; i++) {
            double x = to_x(l, s->x[i]), y = to_y(l, panel, s->y[i]);
            if (!isfinite(x) || !isfinite(y))
                continue;
            double reach = s->kind == LW_SERIES_POINTS ? 6 : 3, bar = reach;
            if (s->kind == LW_SERIES_POINTS && s->u_y != NULL && isfinite(s->u_y[i])) {
                double end = to_y(l, panel, s->y[i] + s->u_y[i]);
                bar = isfinite(end) ? fmax(reach, y - end) : reach;
            }
            box at = {x - reach, x + reach, y - bar, y + bar};
            sum += overlap(b, &at);
            if (s->kind == LW_SERIES_LINE && i > 0) { /* a long straight piece passes between its ends */
                double x0 = to_x(l, s->x[i - 1]), y0 = to_y(l, panel, s->y[i - 1]);
                double middle = 0.5 * (b->left + b->right);
                if (isfinite(x0) && isfinite(y0) && x > x0 && middle >= x0 && middle <= x) {
                    double cross = y0 + (y - y0) * (middle - x0) / (x - x0);
                    if (cross > b->top && cross < b->bottom)
                        sum += 0.3 * area;
                }
            }
        }
    }
    return sum;
}

void lw_notes_place(const lw_figure *figure, const lw_layout *layout, int panel, double size,
                    lw_note_place place[LW_NOTES_MOST])
{
    static const lw_note_place tries[] = {{1, 1}, {-1, 1}, {0, 1}, {1, -1}, {-1, -1}, {0, -1}, {1, 0}, {-1, 0}};
    box taken[LW_NOTES_MOST];
    size_t n = 0;
    for (const lw_note *note = figure->notes; note != NULL && n < LW_NOTES_MOST; note = note->next) {
        if (!lw_note_shown(note, layout, panel))
            continue;
        double wide = 0, best = INFINITY;
        for (const char *c = note->text; *c != '\0'; c++)
            wide += ((unsigned char)*c & 0xC0) != 0x80 ? 0.6 * size : 0;
        double x = to_x(layout, note->x), y = to_y(layout, panel, note->y);
        for (size_t t = 0; t < sizeof tries / sizeof *tries; t++) {
            double gap_x = tries[t].y == 0 ? 10 : 6, gap_y = tries[t].x == 0 ? 16 : 11;
            double middle_y = y - gap_y * tries[t].y;
            double left = tries[t].x == 0 ? x - wide / 2 : tries[t].x > 0 ? x + gap_x : x - gap_x - wide;
            box b = {left, left + wide, middle_y - size / 2, middle_y + size / 2};
            double cost = covered(figure, layout, panel, &b);
            for (size_t i = 0; i < n; i++)
                cost += 3 * overlap(&b, &taken[i]);
            if (cost < best - 1e-9) {
                best = cost;
                place[n] = tries[t];
                taken[n] = b;
            }
        }
        if (!isfinite(best)) { /* beyond any reckoning: as a note without neighbours */
            place[n] = tries[0];
            taken[n] = (box){0, 0, 0, 0};
        }
        n++;
    }
}
