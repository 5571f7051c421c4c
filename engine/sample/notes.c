/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/notes.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define SIZE_QUALITATIVE_NM                                                                                  \
    100.0 /* common practice: beyond 100 to 120 nm a laboratory size is qualitative                          \
           */
#define OVERLAP_NOTED 0.2

static void say(lw_node *notes, lw_error *err, const char *format, ...) __attribute__((format(printf, 3, 4)));

static void say(lw_node *notes, lw_error *err, const char *format, ...)
{
    char text[640];
    va_list list;
    va_start(list, format);
    vsnprintf(text, sizeof text, format, list);
    va_end(list);
    lw_add_text(notes, NULL, text, err);
}

/* Names of lines, as many as fit. */
typedef struct names {
    size_t n, used;
    char text[200];
} names;

static void name(names *list, const lw_line *line)
{
    char hkl[24];
    const lw_reflection *r = &line->reflection;
    lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
    if (list->used + strlen(hkl) + 8 < sizeof list->text)
        list->used += (size_t)snprintf(list->text + list->used, sizeof list->text - list->used, "%s%s",
                                       list->n > 0 ? ", " : "", hkl);
    else if (list->used + 6 < sizeof list->text && list->text[list->used - 1] != '.')
        list->used += (size_t)snprintf(list->text + list->used, sizeof list->text - list->used, " ...");
    list->n++;
}

static const char *lines_word(const names *list)
{
    return list->n == 1 ? "line" : "lines";
}

static void about_lines(const lw_profiles *profiles, lw_node *notes, lw_error *err)
{
    names unseen = {0}, unresolved = {0}, overlapped = {0}, refold = {0};
    for (size_t i = 0; i < profiles->lines->n; i++)
        if (!profiles->lines->line[i].supported)
            name(&unseen, &profiles->lines->line[i]);
    for (size_t i = 0; i < profiles->n; i++) {
        const lw_profile *profile = &profiles->profile[i];
        if (!profile->resolved)
            name(&unresolved, profile->line);
        if (profile->line->overlap > OVERLAP_NOTED)
            name(&overlapped, profile->line);
        if (profile->refold_failed)
            name(&refold, profile->line);
    }
    if (unseen.n > 0)
        say(notes, err, "%s %s: not seen in the data, left out", lines_word(&unseen), unseen.text);
    if (unresolved.n > 0)
        say(notes, err,
            "%s %s: the sample's breadth is below twice its uncertainty, so size has a lower limit only",
            lines_word(&unresolved), unresolved.text);
    if (overlapped.n > 0)
        say(notes, err,
            "%s %s: more than %.0f %% of the area lies under neighbours, so breadths depend on the model of "
            "tails",
            lines_word(&overlapped), overlapped.text, 100 * OVERLAP_NOTED);
    if (refold.n > 0)
        say(notes, err,
            "%s %s: instrument times result does not give the data back, do not trust their shape",
            lines_word(&refold), refold.text);
    if (profiles->n < 3)
        say(notes, err,
            "%zu line%s: with fewer than three nothing tests whether size and strain describe the powder",
            profiles->n, profiles->n == 1 ? "" : "s");
}

static void about_fit(const lw_profiles *profiles, lw_node *notes, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    if (lines->misfit != NULL && lines->misfit[0] != '\0')
        say(notes, err, "fit of the lines: %s; breadths may still be off by several per cent", lines->misfit);
    if (profiles->calibration == NULL)
        say(notes, err, "no calibration: the instrument's breadth is in everything");
    else if (strcmp(profiles->calibration->verdict, "fail") == 0 ||
             strcmp(profiles->calibration->verdict, "attention") == 0)
        say(notes, err, "the calibration's own verdict is %s", profiles->calibration->verdict);
}

static bool has_remark(const lw_node *method, const char *text)
{
    const lw_node *remarks = lw_node_get(method, "remarks");
    for (const lw_node *r = remarks != NULL ? remarks->first : NULL; r != NULL; r = r->next)
        if (strcmp(r->text, text) == 0)
            return true;
    return false;
}

/* A remark once, behind the titles of all methods that make it. */
static void say_once(const lw_node *methods, const lw_node *method, const char *text, lw_node *notes,
                     lw_error *err)
{
    char titles[200] = "";
    size_t used = 0;
    for (const lw_node *m = methods->first; m != method; m = m->next)
        if (has_remark(m, text))
            return;
    for (const lw_node *m = method; m != NULL; m = m->next) {
        const char *title = lw_node_text(m, "title", m->name);
        if (has_remark(m, text) && used + strlen(title) + 3 < sizeof titles)
            used +=
                (size_t)snprintf(titles + used, sizeof titles - used, "%s%s", used > 0 ? ", " : "", title);
    }
    say(notes, err, "%s: %s", titles, text);
}

static void about_methods(const lw_node *methods, lw_node *notes, lw_error *err)
{
    if (methods == NULL)
        return;
    bool large = false, strained = false;
    for (const lw_node *m = methods->first; m != NULL; m = m->next) {
        const lw_node *size = lw_node_get(m, "size_volume"), *remarks = lw_node_get(m, "remarks");
        if (size != NULL && size->kind == LW_NODE_QUANTITY && size->quantity.kind == LW_VALUE &&
            size->quantity.value > SIZE_QUALITATIVE_NM)
            large = true;
        strained = strained || lw_node_get(m, "strain_rms") != NULL;
        if (remarks == NULL)
            continue;
        for (const lw_node *remark = remarks->first; remark != NULL; remark = remark->next)
            say_once(methods, m, remark->text, notes, err);
    }
    if (strained)
        say(notes, err,
            "strain from broadening is the spread of spacings and has no direction: whether lines are drawn or pressed on "
            "the whole shows in their positions only");
    if (large)
        say(notes, err,
            "sizes above about %.0f nm are qualitative: they rest on small differences from the instrument's "
            "breadth",
            SIZE_QUALITATIVE_NM);
}

void lw_notes(const lw_profiles *profiles, const lw_node *methods, lw_node *results, lw_error *err)
{
    lw_node *notes = lw_add_list(results, "notes", err);
    about_lines(profiles, notes, err);
    about_fit(profiles, notes, err);
    about_methods(methods, notes, err);
}
