/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/layout.h"

#include <math.h>
#include <string.h>

#define HUGEST 1e290     /* beyond it a range would overflow */
#define CHARACTER_PX 9.0 /* mean width in the drawing's type size */
#define TITLE_PX 34.0
#define LEGEND_GAP_PX 26.0 /* between two entries */
#define TICK_ROW 0.06    /* of the span, a row of ticks */

typedef struct extent {
    double low, high;
    bool log, any;
} extent;

static void widen(extent *e, double value)
{
    if (!isfinite(value) || fabs(value) > HUGEST || (e->log && value <= 0))
        return;
    e->low = e->any ? fmin(e->low, value) : value;
    e->high = e->any ? fmax(e->high, value) : value;
    e->any = true;
}

static void widen_by(extent *e, double value, const double *u, size_t i)
{
    widen(e, value);
    if (u != NULL && isfinite(u[i]) && isfinite(value)) {
        widen(e, value + u[i]);
        if (!e->log) /* on a log axis an error bar that reaches to zero must not set the range */
            widen(e, value - u[i]);
    }
}

static lw_axis_scale finish(extent e, const lw_figure_axis *axis, double pad_low, double pad_high)
{
    lw_axis_scale s = {.log = axis->log};
    if (!e.any) {
        e.low = axis->log ? 1 : 0;
        e.high = axis->log ? 10 : 1;
    } else if (axis->log) {
        double ratio = e.high / e.low > 1.05 ? e.high / e.low : 10;
        if (e.high / e.low <= 1.05)
            e.low /= 2;
        e.low /= pow(ratio, pad_low);
        e.high *= pow(ratio, pad_high);
    } else {
        double span = e.high - e.low;
        if (span <= 1e-12 * fmax(fabs(e.low), fabs(e.high))) { /* all the same */
            span = e.high != 0 ? 0.2 * fabs(e.high) : 1;
            e.low -= span / 2;
            e.high += span / 2;
        }
        e.low -= pad_low * span;
        e.high += pad_high * span;
    }
    s.low = isfinite(axis->low) && (!axis->log || axis->low > 0) ? axis->low : e.low;
    s.high = isfinite(axis->high) && axis->high > s.low ? axis->high : e.high;
    if (!(s.high > s.low)) { /* a given edge lies beyond the data */
        s.high = axis->log ? 10 * s.low : s.low + fmax(fabs(s.low), 1);
    }
    double largest = fmax(fabs(s.low), fabs(s.high));
    if (!s.log && (largest >= 1e5 || largest < 1e-2))
        s.power = 3 * (int)floor((log10(largest) + (largest < 1 ? 1 : 0)) / 3); /* 0.9e-3, not 900e-6 */
    s.from = s.low;
    return s;
}

static lw_axis_scale scale_x(const lw_figure *figure)
{
    extent e = {.log = figure->axis[LW_AXIS_X].log};
    extent points = e;
    for (const lw_series *s = figure->first; s != NULL; s = s->next)
        for (size_t i = 0; i < s->n; i++) {
            widen_by(&e, s->x[i], s->u_x, i);
            if (s->kind == LW_SERIES_POINTS && s->n < 300)
                widen_by(&points, s->x[i], s->u_x, i);
        }
    double span = e.high - e.low;
    bool on_left = points.any && points.low <= e.low + 0.01 * span;
    bool on_right = points.any && points.high >= e.high - 0.01 * span;
    return finish(e, &figure->axis[LW_AXIS_X], on_left ? 0.03 : 0, on_right ? 0.03 : 0);
}

static lw_axis_scale scale_y(const lw_figure *figure, int panel, int tick_rows)
{
    const lw_figure_axis *axis = &figure->axis[panel == 0 ? LW_AXIS_Y : LW_AXIS_LOWER_Y];
    extent e = {.log = axis->log};
    for (const lw_series *s = figure->first; s != NULL; s = s->next) {
        if (s->panel != panel)
            continue;
        for (size_t i = 0; i < s->n && s->y != NULL; i++) {
            widen_by(&e, s->y[i], s->u_y, i);
            if (s->high != NULL)
                widen(&e, s->high[i]);
        }
    }
    double rows = tick_rows > 0 ? TICK_ROW * tick_rows + 0.02 : 0;
    if (axis->log || !e.any)
        return finish(e, axis, 0.04 + rows, 0.05);
    if (panel == 1 && e.low < 0 && e.high > 0) { /* residuals: zero in the middle */
        e.high = fmax(e.high, -e.low);
        e.low = -e.high;
        return finish(e, axis, 0.05, 0.05);
    }
    if (e.low >= 0 && e.low < 0.3 * e.high) { /* zero is near: show it */
        e.low = 0;
        lw_axis_scale s = finish(e, axis, rows, 0.06);
        s.from = fmax(s.low, 0);
        return s;
    }
    lw_axis_scale s = finish(e, axis, 0.06 + rows, 0.06);
    s.from = s.low + rows / (1.12 + rows) * (s.high - s.low);
    return s;
}

/* Characters of a text, counting a UTF-8 sequence as one. */
static size_t characters(const char *text)
{
    size_t n = 0;
    for (; *text != '\0'; text++)
        n += ((unsigned char)*text & 0xC0) != 0x80;
    return n;
}

double lw_layout_sample(const lw_series *series)
{
    return series->kind == LW_SERIES_POINTS || series->kind == LW_SERIES_TICKS ? 14 : 40;
}

/* Walks through the legend up to `until` (NULL = all); *row and *x are where the walk stands. */
static void flow(const lw_figure *figure, double room, const lw_series *until, double *x, int *row)
{
    *x = 0;
    *row = 0;
    for (const lw_series *s = figure->first; s != NULL; s = s->next) {
        if (s->label[0] == '\0')
            continue;
        double wide = lw_layout_sample(s) + 9 + CHARACTER_PX * (double)characters(s->label);
        if (*x > 0 && *x + wide > room) {
            *x = 0;
            ++*row;
        }
        if (s == until)
            return;
        *x += wide + LEGEND_GAP_PX;
    }
}

void lw_layout_legend(const lw_figure *figure, const lw_layout *layout, const lw_series *series, double *x, int *row)
{
    flow(figure, (layout->right - layout->left) * layout->width, series, x, row);
    *x += layout->left * layout->width;
}

double lw_layout_labels(const lw_layout *layout, int panel)
{
    if (panel < 0)
        return (layout->right - layout->left) * layout->width / 90;
    return (layout->top[panel] - layout->bottom[panel]) * layout->height / (panel == 0 ? 45 : 30);
}

/* px that the widest tick label of a panel takes. */
static double label_width(const lw_layout *l, int panel)
{
    lw_tick tick[LW_TICKS_MOST];
    size_t longest = 1;
    int n = lw_ticks_of(&l->y[panel], lw_layout_labels(l, panel), tick);
    for (int i = 0; i < n; i++)
        longest = characters(tick[i].label) > longest ? characters(tick[i].label) : longest;
    return 10.2 * (double)longest; /* digits are wider than letters on the average */
}

lw_layout lw_layout_of(const lw_figure *figure, double width, double height, bool title)
{
    lw_layout l = {.width = width, .height = height, .panels = 1};
    bool labelled = false;
    for (const lw_series *s = figure->first; s != NULL; s = s->next) {
        if (s->panel == 1)
            l.panels = 2;
        else
            l.tick_rows += s->kind == LW_SERIES_TICKS;
        labelled = labelled || s->label[0] != '\0';
    }
    l.x = scale_x(figure);
    l.y[0] = scale_y(figure, 0, l.tick_rows);
    l.y[1] = scale_y(figure, 1, 0);
    l.right = 1 - 24 / width;
    /* margins depend on the labels, labels on the panels' heights, heights on the legend's rows */
    l.left = 90 / width;
    for (int round = 0; round < 2; round++) {
        double x;
        if (labelled) {
            flow(figure, (l.right - l.left) * width, NULL, &x, &l.legend_rows);
            l.legend_rows++;
        }
        l.top[0] = 1 - (14 + LW_LEGEND_ROW_PX * l.legend_rows + (title ? TITLE_PX : 0)) / height;
        l.bottom[0] = 70 / height;
        if (l.panels == 2) {
            double tall = l.top[0] - l.bottom[0];
            l.bottom[1] = l.bottom[0];
            l.top[1] = l.bottom[1] + 0.26 * tall;
            l.bottom[0] = l.top[1] + 14 / height;
        }
        double wide = label_width(&l, 0);
        if (l.panels == 2)
            wide = fmax(wide, label_width(&l, 1));
        l.left = (52 + fmax(wide, 30)) / width;
    }
    return l;
}
