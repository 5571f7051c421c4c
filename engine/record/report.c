/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/report.h"

#include "record/file.h"
#include "record/gnuplot.h"
#include "record/page.h"
#include "record/sheet.h"

#include <math.h>
#include <string.h>
#include <time.h>

#define SILENT_S 30 /* a drawing that failed after this long failed for want of an answer */

struct lw_report {
    lw_engine *engine;
    lw_arena arena; /* title, warning and figures made from trees */
    const char *title, *subtitle;
    const char *warning;
    bool silent; /* the drawing program did not answer: it isn't asked again, which would take as long each time */
    lw_text body, contents;
    int headings, figures;
};

lw_report *lw_report_new(lw_engine *engine, const char *title, const char *subtitle, lw_error *err)
{
    lw_report *report = lw_take(engine, sizeof *report, err);
    if (report == NULL)
        return NULL;
    *report = (lw_report){.engine = engine};
    lw_arena_begin(&report->arena, engine);
    lw_text_begin(&report->body, engine);
    lw_text_begin(&report->contents, engine);
    report->title = lw_arena_text(&report->arena, title, err);
    report->subtitle = lw_arena_text(&report->arena, subtitle, err);
    if (report->title == NULL || report->subtitle == NULL)
        lw_report_free(&report);
    return report;
}

void lw_report_free(lw_report **report)
{
    if (*report == NULL)
        return;
    lw_engine *engine = (*report)->engine;
    lw_text_end(&(*report)->body);
    lw_text_end(&(*report)->contents);
    lw_arena_end(&(*report)->arena);
    lw_give(engine, *report, sizeof **report);
    *report = NULL;
}

const char *lw_report_warning(const lw_report *report)
{
    return report->warning;
}

static lw_status done(const lw_report *report, lw_error *err)
{
    lw_status status = lw_text_check(&report->body, err);
    return status == LW_OK ? lw_text_check(&report->contents, err) : status;
}

/* <tag>text</tag> */
static void wrap(lw_text *out, const char *open, const char *text, const char *close)
{
    lw_text_add(out, open);
    lw_text_html(out, text);
    lw_text_add(out, close);
}

lw_status lw_report_heading(lw_report *report, const char *text, lw_error *err)
{
    report->headings++;
    lw_text_print(&report->body, "<h2 id=\"s%d\">", report->headings);
    wrap(&report->body, "", text, "</h2>\n");
    lw_text_print(&report->contents, "<li><a href=\"#s%d\">", report->headings);
    wrap(&report->contents, "", text, "</a></li>\n");
    return done(report, err);
}

lw_status lw_report_subheading(lw_report *report, const char *text, lw_error *err)
{
    wrap(&report->body, "<h3>", text, "</h3>\n");
    return done(report, err);
}

lw_status lw_report_fold(lw_report *report, const char *title, lw_error *err)
{
    wrap(&report->body, "<details>\n<summary>", title, "</summary>\n");
    return done(report, err);
}

lw_status lw_report_fold_end(lw_report *report, lw_error *err)
{
    lw_text_add(&report->body, "</details>\n");
    return done(report, err);
}

/* Paragraphs, parted by empty lines. */
static lw_status paragraphs(lw_report *report, const char *text, lw_error *err)
{
    char *copy = lw_arena_text(&report->arena, text, err);
    if (copy == NULL)
        return LW_OUT_OF_MEMORY;
    for (char *at = copy; at != NULL && *at != '\0';) {
        char *end = strstr(at, "\n\n");
        if (end != NULL)
            *end = '\0';
        if (at[strspn(at, " \t\r\n")] != '\0')
            wrap(&report->body, "<p>", at, "</p>\n");
        at = end ? end + 2 : NULL;
    }
    return done(report, err);
}

lw_status lw_report_text(lw_report *report, const char *text, lw_error *err)
{
    return paragraphs(report, text, err);
}

lw_status lw_report_caution(lw_report *report, const char *title, const char *text, lw_error *err)
{
    lw_text_add(&report->body, "<div class=\"caution\" role=\"note\">\n");
    wrap(&report->body, "<p class=\"head\">Caution: ", title, "</p>\n");
    lw_status status = paragraphs(report, text, err);
    lw_text_add(&report->body, "</div>\n");
    return status == LW_OK ? done(report, err) : status;
}

lw_status lw_report_verdict(lw_report *report, lw_verdict verdict, const char *text, lw_error *err)
{
    static const char *const name[] = {"pass", "attention", "fail"};
    static const char *const word[] = {"✓ PASS", "! ATTENTION", "✗ FAIL"};
    lw_text_print(&report->body, "<p class=\"verdict %s\"><b>%s</b> ", name[verdict], word[verdict]);
    wrap(&report->body, "<span>", text, "</span></p>\n");
    return done(report, err);
}

lw_status lw_report_table(lw_report *report, const char *caption, const lw_node *rows, const char *const columns[],
                          lw_error *err)
{
    lw_status status = lw_sheet_table(&report->body, caption, rows, columns, err);
    return status == LW_OK ? done(report, err) : status;
}

lw_status lw_report_remarks(lw_report *report, const char *title, const lw_node *list, lw_error *err)
{
    bool any = false;
    for (const lw_node *item = list ? list->first : NULL; item != NULL; item = item->next) {
        if (item->kind != LW_NODE_TEXT)
            continue;
        if (!any) {
            lw_text_add(&report->body, "<div class=\"remarks\" role=\"note\">\n");
            wrap(&report->body, "<p>", title, "</p>\n<ul>\n");
        }
        any = true;
        wrap(&report->body, "<li>", item->text, "</li>\n");
    }
    lw_text_add(&report->body, any ? "</ul>\n</div>\n" : "");
    return done(report, err);
}

/* ---- figures ---- */

static void add_range(lw_text *out, const char *key, const lw_axis_scale *s)
{
    lw_text_print(out, ",\"%s\":[", key);
    lw_text_rounded(out, s->low, 12);
    lw_text_add(out, ",");
    lw_text_rounded(out, s->high, 12);
    lw_text_add(out, s->log ? ",1]" : ",0]");
}

/* The frames in the drawing's px and their ranges, for the page's script. */
static void add_frames(lw_text *out, const lw_layout *l)
{
    lw_text_add(out, " data-frames='[");
    for (int p = 0; p < l->panels; p++) {
        lw_text_add(out, p > 0 ? ",{\"box\":[" : "{\"box\":[");
        lw_text_rounded(out, l->left * l->width, 6);
        lw_text_add(out, ",");
        lw_text_rounded(out, (1 - l->top[p]) * l->height, 6);
        lw_text_add(out, ",");
        lw_text_rounded(out, l->right * l->width, 6);
        lw_text_add(out, ",");
        lw_text_rounded(out, (1 - l->bottom[p]) * l->height, 6);
        lw_text_add(out, "]");
        add_range(out, "x", &l->x);
        add_range(out, "y", &l->y[p]);
        lw_text_add(out, "}");
    }
    lw_text_add(out, "]'");
}

static bool starts(const char *at, const char *with)
{
    return strncmp(at, with, strlen(with)) == 0;
}

/* Puts an SVG file into the page: without its prolog and <title>s (browsers show them as tooltips over
 * the readings), and with names of its own, as an id may stand once in a page only. */
static void inline_svg(lw_text *out, const char *svg, int number, const char *title)
{
    static const char *const names[] = {" id='", " id=\"", "href='#", "href=\"#", "url(#"};
    const char *at = strstr(svg, "<svg");
    if (at == NULL)
        return;
    wrap(out, "<svg role=\"img\" aria-label=\"", title, "\"");
    for (at += 4; *at != '\0';) {
        const char *stop = strpbrk(at + 1, "< hu"); /* where one of the patterns may begin */
        bool skip = starts(at, "<title>") || starts(at, "<desc>");
        const char *end = skip ? strstr(at, at[1] == 't' ? "</title>" : "</desc>") : NULL;
        if (end != NULL) {
            at = strchr(end, '>') + 1;
            continue;
        }
        for (int i = 0; i < 5; i++)
            if (starts(at, names[i])) {
                lw_text_add(out, names[i]);
                lw_text_print(out, "f%d-", number);
                at += strlen(names[i]);
                stop = NULL;
                break;
            }
        if (stop == NULL) { /* after a name, or near the end: a byte at a time */
            if (*at != '\0')
                lw_text_bytes(out, at++, 1);
            continue;
        }
        lw_text_bytes(out, at, (size_t)(stop - at));
        at = stop;
    }
}

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* Draws, unless the program has kept silent before. */
static lw_status draw(lw_report *report, const lw_figure *figure, const lw_drawing *drawing, lw_text *svg, lw_error *err)
{
    if (report->silent)
        return lw_fail(err, LW_IO, "see the first figure that is missing", "an earlier figure got no answer");
    double begun = now();
    lw_status status = lw_figure_draw(figure, drawing, svg, err);
    report->silent = status == LW_IO && now() - begun > SILENT_S;
    return status;
}

lw_status lw_report_figure(lw_report *report, const lw_figure *figure, lw_error *err)
{
    lw_drawing drawing = lw_drawing_standard(figure, LW_DRAW_SVG);
    lw_text svg;
    lw_error fault = LW_ERROR_NONE;
    drawing.title = false;
    drawing.height -= 34; /* the title's row */
    lw_layout layout = lw_layout_of(figure, drawing.width, drawing.height, false);
    lw_text_begin(&svg, report->engine);
    lw_status status = draw(report, figure, &drawing, &svg, &fault);
    report->figures++;
    lw_text_print(&report->body, "<figure id=\"figure-%d\"", report->figures);
    if (status == LW_OK) {
        add_frames(&report->body, &layout);
        lw_text_add(&report->body, ">\n");
        inline_svg(&report->body, svg.bytes, report->figures, figure->title);
    } else {
        char reason[800];
        lw_error_text(&fault, reason, sizeof reason);
        wrap(&report->body, ">\n<p class=\"missing\">This figure couldn&#39;t be drawn: ", reason, "</p>\n");
        if (status == LW_IO && report->warning == NULL)
            report->warning = lw_arena_text(&report->arena, reason, err);
    }
    lw_text_print(&report->body, "<figcaption><b>Figure %d. ", report->figures);
    wrap(&report->body, "", figure->title, ".</b> ");
    wrap(&report->body, "", figure->caption, "</figcaption>\n</figure>\n");
    lw_text_end(&svg);
    if (status != LW_OK && status != LW_IO)
        return lw_fail(err, status, fault.remedy, "%s", fault.message);
    return done(report, err);
}

/* ---- result trees ---- */

static lw_status figure_of(lw_report *report, const lw_node *group, lw_error *err)
{
    lw_figure *figure = lw_figure_of_tree(&report->arena, group, err);
    return figure != NULL ? lw_report_figure(report, figure, err) : err != NULL ? err->status : LW_BAD_ARGUMENT;
}

static bool is_remarks(const lw_node *node)
{
    return node->kind == LW_NODE_LIST && node->name != NULL && node->first != NULL &&
           node->first->kind == LW_NODE_TEXT &&
           (strcmp(node->name, "remarks") == 0 || strcmp(node->name, "warnings") == 0 ||
            strcmp(node->name, "notes") == 0);
}

static lw_status result(lw_report *report, const lw_node *group, int level, lw_error *err)
{
    lw_text *out = &report->body;
    const char *source = group->source ? group->source : lw_node_text(group, "source", NULL);
    lw_status status = LW_OK;
    if (group->definition != NULL)
        wrap(out, "<p>", group->definition, "</p>\n");
    lw_sheet_values(out, group);
    for (const lw_node *child = group->first; child != NULL && status == LW_OK; child = child->next)
        if (is_remarks(child))
            status = lw_report_remarks(report, "To mind", child, err);
    lw_sheet_small(out, group);
    if (source != NULL)
        wrap(out, "<p class=\"source\">Source: ", source, "</p>\n");
    for (const lw_node *child = group->first; child != NULL && status == LW_OK; child = child->next) {
        const char *name = child->name ? child->name : "";
        bool figures = strcmp(name, "figures") == 0 && child->kind == LW_NODE_LIST;
        if (strcmp(name, "figure") == 0 && child->kind == LW_NODE_GROUP)
            status = figure_of(report, child, err);
        else if (figures)
            for (const lw_node *f = child->first; f != NULL && status == LW_OK; f = f->next)
                status = figure_of(report, f, err);
        else if (child->kind == LW_NODE_GROUP && child->first != NULL) {
            lw_text_print(out, "<h%d>", level);
            lw_sheet_title(out, child);
            lw_text_print(out, "</h%d>\n", level);
            status = result(report, child, level < 6 ? level + 1 : 6, err);
        } else if (child->kind == LW_NODE_LIST && child->first != NULL && !is_remarks(child))
            status = lw_sheet_list(out, child, err);
    }
    return status;
}

lw_status lw_report_result(lw_report *report, const lw_node *group, lw_error *err)
{
    if (group == NULL || group->kind != LW_NODE_GROUP)
        return lw_fail(err, LW_BAD_ARGUMENT, "give a group of named values", "a report shows result groups");
    lw_text title;
    lw_text_begin(&title, report->engine);
    lw_sheet_title(&title, group);
    if (title.n > 0) {
        lw_text_print(&report->body, "<h3 id=\"r%zu\">%s</h3>\n", report->body.n, title.bytes);
    }
    lw_status status = lw_text_check(&title, err);
    lw_text_end(&title);
    if (status == LW_OK)
        status = result(report, group, 4, err);
    return status == LW_OK ? done(report, err) : status;
}

lw_status lw_report_provenance(lw_report *report, const lw_node *group, lw_error *err)
{
    if (group == NULL || group->kind != LW_NODE_GROUP)
        return lw_fail(err, LW_BAD_ARGUMENT, "give a group of named values", "provenance is a group");
    lw_status status = lw_report_heading(report, "Provenance", err);
    lw_text_add(&report->body, "<dl>\n");
    lw_sheet_definitions(&report->body, "", group);
    lw_text_add(&report->body, "</dl>\n");
    return status == LW_OK ? done(report, err) : status;
}

/* ---- the page ---- */

lw_status lw_report_html(const lw_report *report, lw_text *out, lw_error *err)
{
    lw_text_add(out, "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n"
                     "<meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n"
                     /* even if something foreign slipped in, the browser would load nothing */
                     "<meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; "
                     "style-src 'unsafe-inline'; script-src 'unsafe-inline'; img-src data:\">\n");
    wrap(out, "<title>", report->title, "</title>\n<style>\n");
    lw_text_add(out, lw_page_style);
    wrap(out, "</style>\n</head>\n<body>\n<header>\n<h1>", report->title, "</h1>\n");
    if (report->subtitle[0] != '\0')
        wrap(out, "<p>", report->subtitle, "</p>\n");
    if (report->headings > 2) {
        lw_text_add(out, "<nav aria-label=\"Contents\"><ol>\n");
        lw_text_add(out, report->contents.bytes);
        lw_text_add(out, "</ol></nav>\n");
    }
    lw_text_add(out, "</header>\n<main>\n");
    lw_text_add(out, report->body.bytes);
    lw_text_add(out, "</main>\n<footer>Written by Linewright " LW_VERSION
                     ". Uncertainties in brackets are standard uncertainties (k = 1) in the last digits; limits "
                     "hold with the confidence stated.</footer>\n<script>\n");
    lw_text_add(out, lw_page_script);
    lw_text_add(out, "</script>\n</body>\n</html>\n");
    return lw_text_check(out, err);
}

lw_status lw_report_save(lw_engine *engine, const lw_report *report, const char *path, lw_error *err)
{
    lw_text page;
    lw_text_begin(&page, engine);
    lw_status status = lw_report_html(report, &page, err);
    if (status == LW_OK)
        status = lw_write_file(engine, path, page.bytes, page.n, err);
    lw_text_end(&page);
    return status;
}
