/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Questions to the document, words to the user, and the radiation. */
#include "scan/pdcif.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

void lw_powder_note(lw_powder *p, const char *format, ...)
{
    size_t used = strlen(p->notes);
    va_list arguments;
    va_start(arguments, format);
    if (used > 0 && used + 1 < sizeof p->notes)
        p->notes[used++] = '\n';
    vsnprintf(p->notes + used, sizeof p->notes - used, format, arguments);
    va_end(arguments);
}

lw_status lw_powder_refuse(const lw_powder *p, long line, const char *remedy, lw_error *err,
                           const char *format, ...)
{
    char message[400];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(message, sizeof message, format, arguments);
    va_end(arguments);
    return lw_fail_at(err, LW_BAD_DATA, p->content->name, line, remedy, "%s", message);
}

const char *lw_powder_shown(const lw_cif_value *value, char word[40])
{
    size_t n = 0;
    for (; n < value->length && n < 32; n++)
        word[n] = value->text[n] >= 32 && value->text[n] < 127 ? value->text[n] : '?';
    word[n] = '\0';
    return word;
}

int lw_powder_single(const lw_powder *p, const lw_cif_block *block, const char *name, double *number,
                     lw_error *err)
{
    const lw_cif_item *item = lw_cif_find(block, name);
    double su;
    char word[40];
    if (item == NULL || item->loop != NULL || lw_cif_is_missing(&item->value))
        return 0;
    if (lw_cif_number(&item->value, number, &su) && isfinite(*number))
        return 1;
    lw_powder_refuse(p, item->value.line, "correct it, or write ? if it is not known", err,
                     "%s is '%s', not a number", name, lw_powder_shown(&item->value, word));
    return -1;
}

const lw_cif_item *lw_powder_column(const lw_cif_block *block, const char *name)
{
    const lw_cif_item *item = lw_cif_find(block, name);
    return item != NULL && item->loop != NULL && item->loop->rows > 0 ? item : NULL;
}

/* Gathers wavelengths of a block into *radiation. 1 found, 0 none, -1 refused. */
static int find_wavelengths(lw_powder *p, const lw_cif_block *block, lw_radiation *radiation, lw_error *err)
{
    double value = 0, su;
    const char *names[] = {"_diffrn_radiation_wavelength", "_diffrn_radiation_wavelength_value",
                           "_pd_proc_wavelength"};
    *radiation = (lw_radiation){.n = 0};
    for (int i = 0; i < 3; i++) {
        int found = lw_powder_single(p, block, names[i], &value, err);
        if (found < 0)
            return -1;
        if (found > 0) {
            *radiation = (lw_radiation){.n = 1, .component = {{.wavelength_nm = value / 10, .weight = 1}}};
            return 1;
        }
        const lw_cif_item *item = i < 2 ? lw_powder_column(block, names[i]) : NULL;
        if (item == NULL)
            continue;
        const lw_cif_item *weights = lw_powder_column(block, "_diffrn_radiation_wavelength_wt");
        if (weights != NULL && weights->loop != item->loop)
            weights = NULL;
        lw_cif_cursor cursor = lw_cif_walk(p->content, item->loop);
        for (size_t row = 0; row < item->loop->rows; row++) {
            double length = NAN, weight = weights ? NAN : 1;
            long line = cursor.line;
            for (size_t k = 0; k < item->loop->columns; k++) {
                lw_cif_value word;
                if (lw_cif_next(&cursor, &word, err) != LW_OK)
                    return -1;
                line = word.line;
                if (k == item->column && !lw_cif_number(&word, &length, &su))
                    length = NAN;
                if (weights != NULL && k == weights->column && !lw_cif_number(&word, &weight, &su))
                    weight = NAN;
            }
            if (!isfinite(length)) /* unknown wavelength */
                continue;
            if (item->loop->rows == 1)
                weight = 1;
            if (weights == NULL && item->loop->rows > 1) {
                lw_powder_note(p, "several wavelengths without weights were left aside");
                return 0;
            }
            if (!(weight >= 0) || !isfinite(weight)) {
                lw_powder_refuse(p, line, "give each wavelength its relative intensity", err,
                                 "a wavelength has no _diffrn_radiation_wavelength_wt");
                return -1;
            }
            if (weight == 0)
                continue;
            if (radiation->n == LW_EMISSION_MOST) {
                lw_powder_refuse(p, line, "keep the strongest", err, "more than %d wavelengths",
                                 LW_EMISSION_MOST);
                return -1;
            }
            radiation->component[radiation->n++] =
                (lw_emission){.wavelength_nm = length / 10, .weight = weight};
        }
        return radiation->n > 0;
    }
    return 0;
}

static bool are_equal(const lw_radiation *a, const lw_radiation *b)
{
    bool equal = a->n == b->n;
    for (size_t i = 0; equal && i < a->n; i++)
        equal = a->component[i].wavelength_nm == b->component[i].wavelength_nm &&
                a->component[i].weight == b->component[i].weight;
    return equal;
}

lw_status lw_powder_radiation(lw_powder *p, lw_columns *columns, lw_error *err)
{
    lw_radiation radiation = {.n = 0};
    int found = find_wavelengths(p, p->block, &radiation, err);
    const lw_cif_block *from = p->block;
    for (const lw_cif_block *block = p->first; found == 0 && block != NULL; block = block->next) {
        lw_radiation another;
        int there = block == p->block ? 0 : find_wavelengths(p, block, &another, err);
        if (there < 0)
            return err ? err->status : LW_BAD_DATA;
        if (there == 0)
            continue;
        if (radiation.n > 0 && !are_equal(&radiation, &another)) {
            lw_powder_note(p, "other data blocks state different wavelengths; none was taken");
            return LW_OK;
        }
        radiation = another;
        from = block;
    }
    if (found < 0)
        return err ? err->status : LW_BAD_DATA;
    if (radiation.n == 0)
        return LW_OK;
    lw_error reason = LW_ERROR_NONE;
    lw_status status = radiation.n == 1
                           ? lw_radiation_plain(radiation.component[0].wavelength_nm, &radiation, &reason)
                           : lw_radiation_settle(&radiation, &reason);
    if (status != LW_OK)
        return lw_powder_refuse(p, 0, "correct _diffrn_radiation_wavelength (angstrom)", err,
                                "the wavelength is refused: %s", reason.message);
    if (radiation.n > 1)
        snprintf(radiation.name, sizeof radiation.name, "%zu wavelengths of the file", radiation.n);
    snprintf(radiation.source, sizeof radiation.source, "data block %.80s of %.200s", from->name,
             p->content->name);
    columns->radiation = radiation;
    columns->has_radiation = true;
    return LW_OK;
}
