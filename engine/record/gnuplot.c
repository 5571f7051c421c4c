/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/gnuplot.h"

#include "record/curve.h"
#include "record/file.h"
#include "record/notes.h"
#include "record/process.h"
#include "record/typeset.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#define TIMEOUT_S 60.0
#define FAMILY "DejaVu Sans"
#define SIZE 16 /* type size on 900 px: 9 points when that is printed 180 mm wide */

/* Colours that differ in lightness as well as in hue, darkest first where few are used; with its own
 * dash and marker for each, a grey copy can be read. */
static const char *const colour[] = {"#111111", "#c2371e", "#2a74b8", "#e69f21",
                                     "#3b7d3a", "#8455a0", "#2f97a8", "#6e6e6e"};
static const char *const dash[] = {"solid",   "(14,6)",        "(3,4)", "(14,5,3,5)",
                                   "(24,6)", "(8,4,2,4,2,4)", "(6,3)", "(2,4,2,9)"};
static const int marker[] = {7, 4, 8, 13, 6, 5, 10, 2}; /* filled and open circles, squares, triangles ... */

#define LOOKS ((int)(sizeof colour / sizeof colour[0]))

lw_drawing lw_drawing_standard(const lw_figure *figure, lw_drawing_format format)
{
    lw_drawing drawing = {.format = format, .width = 900, .height = 560, .title = true};
    for (const lw_series *s = figure->first; s != NULL; s = s->next)
        if (s->panel == 1)
            drawing.height = 640;
    return drawing;
}

/* A literal string: in single quotes gnuplot takes everything as it stands, but a quote is doubled. It knows a
 * doubled quote only after another character; elsewhere a typographic one stands for it. */
static void quote(lw_text *out, const char *string)
{
    bool after_quote = true;
    lw_text_add(out, "'");
    for (const char *c = string; *c != '\0';) {
        size_t n = lw_utf8_length(c);
        if (n == 0)
            lw_text_add(out, "\xEF\xBF\xBD");
        else if (n == 1 && ((unsigned char)*c < 0x20 || *c == 0x7F))
            lw_text_add(out, " ");
        else if (*c == '\'')
            lw_text_add(out, after_quote ? "\xE2\x80\x99" : "''");
        else
            lw_text_bytes(out, c, n);
        after_quote = *c == '\'' && !after_quote;
        c += n > 0 ? n : 1;
    }
    lw_text_add(out, "'");
}

static void number(lw_text *out, double value)
{
    lw_text_add(out, " ");
    if (isfinite(value))
        lw_text_rounded(out, value, 12);
    else
        lw_text_add(out, "NaN");
}

static void at_screen(lw_text *out, const lw_layout *l, double x_px, double y_px)
{
    lw_text_add(out, " screen");
    number(out, x_px / l->width);
    lw_text_add(out, ", screen");
    number(out, 1 - y_px / l->height);
}

/* Type size at which a text of about 0.55 em a letter fits into `room` px; not below 9. */
static int fitting(const char *text, double room, int standard)
{
    double n = 0;
    for (const char *c = text; *c != '\0'; c++)
        n += ((unsigned char)*c & 0xC0) != 0x80;
    double size = room / (0.54 * fmax(n, 1));
    return size >= standard ? standard : size < 9 ? 9 : (int)size;
}

/* An axis' label, then power of ten and unit in brackets, centred at a place in px. */
static void axis_label(lw_text *out, const lw_figure_axis *a, const lw_axis_scale *s, const lw_layout *l, double x,
                       double y, double upright_room)
{
    lw_text label;
    lw_text_begin(&label, out->engine);
    lw_text_add(&label, a->label);
    if (a->unit[0] != '\0' || s->power != 0) {
        lw_text_add(&label, label.n > 0 ? " (" : "(");
        if (s->power != 0) {
            char power[16];
            snprintf(power, sizeof power, "10^%d", s->power);
            lw_unit_typeset(&label, power);
            if (a->unit[0] != '\0')
                lw_text_add(&label, " ");
        }
        lw_unit_typeset(&label, a->unit);
        lw_text_add(&label, ")");
    }
    lw_text_add(out, "set label ");
    quote(out, label.bytes ? label.bytes : "");
    lw_text_add(out, " at");
    at_screen(out, l, x, y);
    double room = upright_room > 0 ? upright_room : (l->right - l->left) * l->width;
    lw_text_print(out, " center %sfront font ',%d'\n", upright_room > 0 ? "rotate by 90 " : "",
                  fitting(label.bytes ? label.bytes : "", room, SIZE));
    if (label.status != LW_OK)
        out->status = label.status;
    lw_text_end(&label);
}

/* Range, ticks (labels only if wanted) and kind of an axis. */
static void range(lw_text *out, const char *axis, const lw_axis_scale *s, double labels, bool labelled)
{
    lw_tick tick[LW_TICKS_MOST];
    int n = lw_ticks_of(s, labels, tick);
    lw_text_print(out, "set %stics (", axis);
    for (int i = 0; i < n; i++) {
        bool small = tick[i].label[0] == '\0';
        lw_text_add(out, i > 0 ? ", " : "");
        quote(out, labelled ? tick[i].label : "");
        number(out, tick[i].at);
        lw_text_add(out, small ? " 1" : "");
    }
    lw_text_add(out, ")\n");
    double factor = pow(10, -s->power);
    lw_text_print(out, "set %srange [", axis);
    number(out, s->low * factor);
    lw_text_add(out, ":");
    number(out, s->high * factor);
    lw_text_print(out, "] noextend\n%s logscale %s\n", s->log ? "set" : "unset", axis);
}

static void terminal(lw_text *out, const lw_drawing *d)
{
    int w = (int)d->width, h = (int)d->height;
    if (d->format == LW_DRAW_SVG)
        lw_text_print(out, "set terminal svg noenhanced dynamic size %d,%d font '" FAMILY ",%d' "
                           "background '#ffffff' linewidth 1\nps = 0.72\n", w, h, SIZE);
    else if (d->format == LW_DRAW_PDF) {
        lw_text_add(out, "set terminal pdfcairo noenhanced size");
        number(out, d->width * 18 / 900);
        lw_text_add(out, "cm,");
        number(out, d->height * 18 / 900);
        /* this terminal's unit of type makes 16 x 0.45 the 9 points we want */
        lw_text_print(out, "cm font '" FAMILY ",%d' fontscale 0.45 linewidth 0.9\nps = 0.62\n", SIZE);
    } else
        lw_text_print(out,
                      "if (strstrt(GPVAL_TERMINALS, 'pngcairo') > 0) { set terminal pngcairo noenhanced size "
                      "%d,%d font '" FAMILY ",%d' fontscale 1.52 linewidth 1.6 background '#ffffff' } "
                      "else { set terminal png noenhanced size %d,%d font 'DejaVuSans,%d' linewidth 2 background "
                      "'#ffffff' }\nps = 2.5\n",
                      2 * w, 2 * h, SIZE, 2 * w, 2 * h, 3 * SIZE / 2);
}

/* Coordinates of one series as a data block $d<index>. */
static void data(lw_text *out, const lw_series *s, int index, const lw_layout *l, int tick_row)
{
    const lw_axis_scale *y = &l->y[s->panel];
    double fx = pow(10, -l->x.power), fy = pow(10, -y->power);
    lw_text_print(out, "$d%d << LWEND\n", index);
    lw_pick pick = lw_pick_begin(s, l);
    size_t i;
    while (lw_pick_next(&pick, &i)) {
        if (s->kind == LW_SERIES_LINE && isnan(s->y[i])) { /* a missing value would be bridged, an empty row parts */
            lw_text_add(out, "\n");
            continue;
        }
        number(out, s->x[i] * fx);
        if (s->kind == LW_SERIES_TICKS) { /* a row of marks above the lower edge */
            double from = 0.015 + 0.05 * tick_row, to = from + 0.035;
            double low = y->log ? log10(y->low) : y->low, span = (y->log ? log10(y->high) : y->high) - low;
            from = low + from * span;
            to = low + to * span;
            number(out, fy * (y->log ? pow(10, from) : from));
            number(out, fy * (y->log ? pow(10, to) : to));
        } else
            number(out, s->y[i] * fy);
        if (s->kind == LW_SERIES_BAND)
            number(out, (s->high ? s->high[i] : s->y[i]) * fy);
        if (s->kind == LW_SERIES_POINTS && (s->u_x || s->u_y)) {
            double ux = s->u_x && isfinite(s->u_x[i]) ? s->u_x[i] : 0;
            double uy = s->u_y && isfinite(s->u_y[i]) ? s->u_y[i] : 0;
            /* on a log axis a bar that reaches zero ends at the frame */
            number(out, fx * (l->x.log ? fmax(s->x[i] - ux, l->x.low) : s->x[i] - ux));
            number(out, fx * (s->x[i] + ux));
            number(out, fy * (y->log ? fmax(s->y[i] - uy, y->low) : s->y[i] - uy));
            number(out, fy * (s->y[i] + uy));
        }
        lw_text_add(out, "\n");
    }
    lw_text_add(out, "LWEND\n");
}

/* How a series is drawn. */
typedef struct look {
    const char *colour, *dash;
    int marker;
    double size, width; /* of the marker and of lines */
} look;

static look look_of(const lw_figure *figure, const lw_series *series)
{
    /* dashes and markers count within their kind: a lone curve among points is solid */
    bool points = series->kind == LW_SERIES_POINTS;
    int nth = 0;
    for (const lw_series *s = figure->first; s != series; s = s->next)
        if (points)
            nth += s->kind == LW_SERIES_POINTS;
        else
            nth += (s->kind == LW_SERIES_LINE || s->kind == LW_SERIES_STEP) && s->panel == series->panel;
    look l = {.colour = colour[series->style % LOOKS], .dash = dash[nth % LOOKS], .marker = marker[nth % LOOKS]};
    bool many = series->n > 300;
    if (points && many)
        l.marker = 7;
    l.size = points && many ? 0.28 : l.marker == 7 || l.marker == 5 ? 0.9 : 1.1;
    l.width = points ? 1.5 : series->panel == 1 && many ? 1 : 2;
    return l;
}

/* One element of the plot command. */
static void element(lw_text *out, const lw_figure *figure, const lw_series *s, int index)
{
    look l = look_of(figure, s);
    lw_text_print(out, "$d%d ", index);
    switch (s->kind) {
    case LW_SERIES_POINTS:
        if (s->u_x != NULL || s->u_y != NULL)
            lw_text_print(out, "using 1:2:%s with %serrorbars ",
                          s->u_x && s->u_y ? "3:4:5:6" : s->u_x ? "3:4" : "5:6",
                          s->u_x && s->u_y ? "xy" : s->u_x ? "x" : "y");
        else
            lw_text_add(out, "using 1:2 with points ");
        lw_text_print(out, "pt %d ps ps*", l.marker);
        lw_text_rounded(out, l.size, 3);
        lw_text_print(out, " lc rgb '%s' lw 1.5", l.colour);
        break;
    case LW_SERIES_LINE:
    case LW_SERIES_STEP:
        lw_text_print(out, "using 1:2 with %s lc rgb '%s' lw %d dt %s",
                      s->kind == LW_SERIES_LINE ? "lines" : "histeps", l.colour, (int)l.width, l.dash);
        break;
    case LW_SERIES_BAND:
        lw_text_print(out, "using 1:2:3 with filledcurves fs transparent solid 0.22 noborder lc rgb '%s'", l.colour);
        break;
    case LW_SERIES_TICKS:
        lw_text_print(out, "using 1:2:(0):($3-$2) with vectors nohead lc rgb '%s' lw 1.6", l.colour);
        break;
    }
    lw_text_add(out, " notitle");
}

/* The legend, by hand: gnuplot's own depends on each terminal's idea of type. */
static void legend(lw_text *out, const lw_figure *figure, const lw_layout *l)
{
    double top = (1 - l->top[0]) * l->height - LW_LEGEND_ROW_PX * l->legend_rows - 4;
    for (const lw_series *s = figure->first; s != NULL; s = s->next) {
        double x;
        int row;
        if (s->label[0] == '\0')
            continue;
        lw_layout_legend(figure, l, s, &x, &row);
        look k = look_of(figure, s);
        double sample = lw_layout_sample(s);
        double y = top + LW_LEGEND_ROW_PX * (row + 0.5), middle = x + sample / 2;
        bool upright = s->kind == LW_SERIES_TICKS || (s->kind == LW_SERIES_POINTS && s->u_y != NULL);
        if (s->kind == LW_SERIES_BAND) {
            lw_text_add(out, "set object rectangle from");
            at_screen(out, l, x, y - 7);
            lw_text_add(out, " to");
            at_screen(out, l, x + sample, y + 7);
            lw_text_print(out, " fc rgb '%s' fs transparent solid 0.22 noborder\n", k.colour);
        } else if (s->kind != LW_SERIES_POINTS || upright) {
            lw_text_add(out, "set arrow from");
            at_screen(out, l, upright ? middle : x, upright ? y - 9 : y);
            lw_text_add(out, " to");
            at_screen(out, l, upright ? middle : x + sample, upright ? y + 9 : y);
            lw_text_print(out, " nohead lc rgb '%s' lw %s dt %s\n", k.colour, upright ? "1.5" : "2",
                          upright ? "solid" : k.dash);
        }
        if (s->kind == LW_SERIES_POINTS) {
            lw_text_add(out, "set label '' at");
            at_screen(out, l, middle, y);
            lw_text_print(out, " point pt %d ps ps*", k.marker);
            lw_text_rounded(out, k.size < 0.5 ? 0.5 : k.size, 3);
            lw_text_print(out, " lc rgb '%s' lw 1.5\n", k.colour);
        }
        lw_text_add(out, "set label ");
        quote(out, s->label);
        lw_text_add(out, " at");
        at_screen(out, l, x + sample + 9, y);
        lw_text_add(out, " left\n");
    }
}

static void notes(lw_text *out, const lw_figure *figure, int panel, const lw_layout *l)
{
    lw_note_place place[LW_NOTES_MOST];
    size_t n = 0;
    lw_notes_place(figure, l, panel, SIZE - 2, place);
    for (const lw_note *note = figure->notes; note != NULL; note = note->next) {
        if (!lw_note_shown(note, l, panel))
            continue;
        lw_note_place p = n < LW_NOTES_MOST ? place[n] : (lw_note_place){1, 1};
        n++;
        lw_text_add(out, "set label ");
        quote(out, note->text);
        lw_text_add(out, " at first ");
        number(out, note->x * pow(10, -l->x.power));
        lw_text_add(out, ", first ");
        number(out, note->y * pow(10, -l->y[panel].power));
        lw_text_print(out, " %s offset screen", p.x == 0 ? "center" : p.x > 0 ? "left" : "right");
        number(out, (p.y == 0 ? 10 : 6) * p.x / l->width);
        lw_text_add(out, ", screen");
        number(out, (p.x == 0 ? 16 : 11) * p.y / l->height);
        lw_text_print(out, " front font ',%d' textcolor rgb '#222222'\n", SIZE - 2);
    }
}

static void panel(lw_text *out, const lw_figure *figure, const lw_drawing *drawing, const lw_layout *l, int p)
{
    bool last = p == l->panels - 1;
    lw_text_add(out, "set lmargin at screen");
    number(out, l->left);
    lw_text_add(out, "\nset rmargin at screen");
    number(out, l->right);
    lw_text_add(out, "\nset tmargin at screen");
    number(out, l->top[p]);
    lw_text_add(out, "\nset bmargin at screen");
    number(out, l->bottom[p]);
    lw_text_add(out, "\n");
    range(out, "x", &l->x, lw_layout_labels(l, -1), last);
    range(out, "y", &l->y[p], lw_layout_labels(l, p), true);
    lw_text_add(out, "unset label\nunset arrow\nunset object\n");
    /* labels are placed by hand too: a terminal that thinks its type wider would push them off the page */
    axis_label(out, &figure->axis[p == 0 ? LW_AXIS_Y : LW_AXIS_LOWER_Y], &l->y[p], l, 20,
               (1 - (l->top[p] + l->bottom[p]) / 2) * l->height, (l->top[p] - l->bottom[p]) * l->height + 20);
    if (last)
        axis_label(out, &figure->axis[LW_AXIS_X], &l->x, l, (l->left + l->right) / 2 * l->width, l->height - 15, 0);
    notes(out, figure, p, l);
    if (p == 0) {
        legend(out, figure, l);
        if (drawing->title && figure->title[0] != '\0') {
            lw_text_add(out, "set label ");
            quote(out, figure->title);
            lw_text_add(out, " at");
            at_screen(out, l, l->left * l->width, 24);
            lw_text_print(out, " left front font ',%d'\n",
                          fitting(figure->title, (1 - l->left) * l->width - 10, SIZE + 3));
        }
    }
    if (l->y[p].low < 0 && l->y[p].high > 0 && !l->y[p].log)
        lw_text_add(out, "set xzeroaxis lc rgb '#777777' lw 1 dt solid\n");
    else
        lw_text_add(out, "unset xzeroaxis\n");
    lw_text_add(out, "plot ");
    /* bands lie below everything, then points, then curves */
    static const int place[] = {1, 2, 2, 0, 3}; /* of points, line, step, band, ticks */
    bool any = false;
    for (int layer = 0; layer < 4; layer++) {
        int index = 0;
        for (const lw_series *s = figure->first; s != NULL; s = s->next, index++) {
            if (s->panel != p || place[s->kind] != layer)
                continue;
            lw_text_add(out, any ? ", " : "");
            element(out, figure, s, index);
            any = true;
        }
    }
    lw_text_add(out, any ? "\n" : "NaN notitle\n");
}

void lw_figure_script(const lw_figure *figure, const lw_drawing *drawing, lw_text *out)
{
    lw_layout l = lw_layout_of(figure, drawing->width, drawing->height, drawing->title);
    lw_text_add(out, "set encoding utf8\nset decimalsign '.'\n");
    terminal(out, drawing);
    int index = 0, row = 0;
    for (const lw_series *s = figure->first; s != NULL; s = s->next, index++)
        data(out, s, index, &l, s->kind == LW_SERIES_TICKS && s->panel == 0 ? row++ : 0);
    lw_text_add(out, "set border 15 lw 1 lc rgb '#333333'\n"
                     "set tics out nomirror scale 0.7 textcolor rgb '#222222'\n"
                     "set grid back lt 1 lc rgb '#dcdcdc' lw 0.7 dt solid\nunset key\n"
                     "set errorbars 0.7\n"
                     "set datafile missing NaN\n");
    if (l.panels == 2)
        lw_text_add(out, "set multiplot\n");
    for (int p = 0; p < l.panels; p++)
        panel(out, figure, drawing, &l, p);
    if (l.panels == 2)
        lw_text_add(out, "unset multiplot\n");
    lw_text_add(out, "set output\n");
}

/* The first line of gnuplot's complaint that says something. */
static const char *complaint_line(const lw_text *complaint, char *line, size_t size)
{
    const char *at = complaint->bytes ? strstr(complaint->bytes, "line ") : NULL;
    if (at == NULL)
        at = complaint->bytes ? complaint->bytes : "";
    at += strspn(at, " \t\r\n^");
    size_t n = strcspn(at, "\r\n");
    n = n < size - 1 ? n : size - 1;
    memcpy(line, at, n);
    line[n] = '\0';
    return line;
}

/* Replaces the text between two marks, from `from` on; nothing if the marks aren't there. */
static void replace_between(lw_text *text, size_t from, const char *begin, const char *end, const char *with)
{
    char *at = strstr(text->bytes + from, begin);
    char *stop = at ? strstr(at, end) : NULL;
    if (stop == NULL)
        return;
    at += strlen(begin);
    size_t head = (size_t)(at - text->bytes), tail = text->n - (size_t)(stop - text->bytes);
    lw_text rest;
    lw_text_begin(&rest, text->engine);
    lw_text_bytes(&rest, stop, tail);
    text->n = head;
    lw_text_html(text, with);
    lw_text_bytes(text, rest.bytes ? rest.bytes : "", rest.n);
    if (rest.status != LW_OK)
        text->status = rest.status;
    lw_text_end(&rest);
}

lw_status lw_figure_draw(const lw_figure *figure, const lw_drawing *drawing, lw_text *out, lw_error *err)
{
    static const char *const begins[] = {"<?xml", "\x89PNG", "%PDF"};
    static const char *const arguments[] = {"gnuplot", "-d", NULL}; /* -d: nobody's start-up file */
    lw_text script, complaint;
    lw_text_begin(&script, out->engine);
    lw_text_begin(&complaint, out->engine);
    lw_figure_script(figure, drawing, &script);
    size_t before = out->n;
    int code = 0;
    lw_status status = lw_text_check(&script, err);
    if (status == LW_OK) {
        const lw_process gnuplot = {.arguments = arguments,
                                    .package = "gnuplot-nox",
                                    .input = script.bytes,
                                    .n_input = script.n,
                                    .timeout = TIMEOUT_S};
        status = lw_process_run(&gnuplot, out, &complaint, &code, err);
    }
    size_t n = strlen(begins[drawing->format]);
    if (status == LW_OK &&
        (code != 0 || out->n < before + n || memcmp(out->bytes + before, begins[drawing->format], n) != 0)) {
        char line[200];
        status = lw_fail(err, LW_IO, "look whether the package gnuplot-nox is complete and of version 5.4 or later",
                         "gnuplot didn't draw figure \"%s\" (exit code %d): %s", figure->title, code,
                         complaint_line(&complaint, line, sizeof line));
    }
    if (status == LW_OK && drawing->format == LW_DRAW_SVG) { /* what a screen reader and the tooltip say */
        replace_between(out, before, "<desc>", "</desc>", figure->caption);
        replace_between(out, before, "<title>", "</title>", figure->title);
        status = lw_text_check(out, err);
    }
    if (status != LW_OK && out->bytes != NULL) {
        out->n = before;
        out->bytes[before] = '\0';
    }
    lw_text_end(&script);
    lw_text_end(&complaint);
    return status;
}

static const char *const suffix[] = {".svg", ".png", ".pdf"};

static lw_status save(lw_engine *engine, const lw_figure *figure, const char *path, lw_drawing_format format,
                      lw_error *err)
{
    lw_drawing drawing = lw_drawing_standard(figure, format);
    lw_text bytes;
    lw_text_begin(&bytes, engine);
    lw_status status = lw_figure_draw(figure, &drawing, &bytes, err);
    if (status == LW_OK)
        status = lw_write_file(engine, path, bytes.bytes, bytes.n, err);
    lw_text_end(&bytes);
    return status;
}

lw_status lw_figure_save_as(lw_engine *engine, const lw_figure *figure, const char *path, lw_error *err)
{
    size_t n = strlen(path);
    for (int i = 0; i < 3; i++)
        if (n > 4 && strcmp(path + n - 4, suffix[i]) == 0)
            return save(engine, figure, path, (lw_drawing_format)i, err);
    return lw_fail(err, LW_BAD_ARGUMENT, "end the file's name in .svg, .png or .pdf",
                   "can't tell the format of figure %s", path);
}
