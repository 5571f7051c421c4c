/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The meaning of the data names of a powder scan in CIF: the powder dictionary of COMCIFS (cif_pow) and, for
 * the wavelength, the core dictionary. Toby, Von Dreele & Larson 2003, J. Appl. Cryst. 36, 1290-1294.
 *
 * Refinement weights (_pd_proc_ls_weight) are not taken for uncertainties, and points of weight 0 are kept:
 * they belong to somebody's earlier fit, not to the measurement. Rows without an intensity are left out. */
#include "scan/pdcif.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define DEGREES (180.0 / 3.14159265358979323846)

static const char *const intensity_names[] = {"_pd_meas_counts_total", "_pd_meas_intensity_total",
                                              "_pd_proc_intensity_total", "_pd_proc_intensity_net", NULL};
static const char *const not_angles[] = {"_pd_meas_time_of_flight",  "_pd_meas_position",
                                         "_pd_proc_energy_incident", "_pd_proc_energy_detection",
                                         "_pd_meas_2theta_fixed",    NULL};

static bool same_word(const char *a, const char *b)
{
    for (; *a != '\0' || *b != '\0'; a++, b++)
        if ((*a >= 'A' && *a <= 'Z' ? *a + 32 : *a) != (*b >= 'A' && *b <= 'Z' ? *b + 32 : *b))
            return false;
    return true;
}

static const lw_cif_item *find_intensity(const lw_cif_block *block)
{
    for (int i = 0; intensity_names[i] != NULL; i++) {
        const lw_cif_item *item = lw_powder_column(block, intensity_names[i]);
        if (item != NULL)
            return item;
    }
    return NULL;
}

/* The first of the names of x values that are not angles, which the block uses. */
static const lw_cif_item *find_not_angle(const lw_cif_block *block)
{
    for (int i = 0; not_angles[i] != NULL; i++) {
        const lw_cif_item *item = lw_cif_find(block, not_angles[i]);
        if (item != NULL && (item->loop != NULL || !lw_cif_is_missing(&item->value)))
            return item;
    }
    return NULL;
}

static lw_status choose_block(lw_powder *p, lw_error *err)
{
    char names[200] = "";
    size_t scans = 0, used = 0;
    const lw_cif_block *other = NULL;
    for (lw_cif_block *block = p->first; block != NULL; block = block->next) {
        bool wanted = p->options->block == NULL || same_word(block->name, p->options->block);
        if (find_intensity(block) == NULL) {
            other = wanted && find_not_angle(block) ? block : other;
            continue;
        }
        if (used < sizeof names)
            used +=
                (size_t)snprintf(names + used, sizeof names - used, "%s%s", used ? ", " : "", block->name);
        if (wanted) {
            p->block = block;
            scans++;
        }
    }
    if (scans == 1)
        return LW_OK;
    char remedy[256];
    if (scans > 1) {
        snprintf(remedy, sizeof remedy, "say which with the option block: %s", names);
        return lw_powder_refuse(p, 0, remedy, err, "%zu data blocks hold a scan", scans);
    }
    if (p->options->block != NULL) {
        snprintf(remedy, sizeof remedy, used ? "blocks with a scan: %s" : "no block of this file holds one%s",
                 names);
        return lw_fail_at(err, LW_BAD_ARGUMENT, p->content->name, 0, remedy,
                          "no data block '%.60s' with a scan", p->options->block);
    }
    if (other != NULL)
        return lw_powder_refuse(p, 0, "only scans against 2theta are read", err,
                                "not an angle scan: it has %s", find_not_angle(other)->name);
    return lw_powder_refuse(
        p, 0, "a scan needs a loop with _pd_meas_counts_total or another intensity of the powder dictionary",
        err, "the CIF holds no powder scan");
}

static lw_status refuse_not_angle(lw_powder *p, lw_error *err)
{
    const lw_cif_item *item = find_not_angle(p->block);
    if (item != NULL)
        return lw_powder_refuse(p, item->loop ? item->loop->line : item->value.line,
                                "only scans against 2theta are read", err, "not an angle scan: it has %s",
                                item->name);
    const lw_cif_item *method = lw_cif_find(p->block, "_pd_meas_scan_method");
    static const char *const refused[] = {"tof", "disp", "fixed", NULL};
    char word[40];
    for (int i = 0;
         method != NULL && method->loop == NULL && method->value.text != NULL && refused[i] != NULL; i++)
        if (same_word(lw_powder_shown(&method->value, word), refused[i]))
            return lw_powder_refuse(p, method->value.line, "only scans against 2theta are read", err,
                                    "not an angle scan: _pd_meas_scan_method is %s", refused[i]);
    return LW_OK;
}

/* Two loops may be laid side by side if they have as many rows and no labels that contradict. */
static bool same_rows(lw_powder *p, const lw_cif_loop *a, const lw_cif_loop *b)
{
    if (a->rows != b->rows)
        return false;
    const lw_cif_item *label[2] = {NULL, NULL};
    for (const lw_cif_item *item = p->block->items; item != NULL; item = item->next) {
        size_t length = strlen(item->name);
        if (length > 9 && strcmp(item->name + length - 9, "_point_id") == 0) {
            if (item->loop == a)
                label[0] = item;
            if (item->loop == b)
                label[1] = item;
        }
    }
    if (label[0] == NULL || label[1] == NULL)
        return true;
    lw_cif_cursor cursor[2] = {lw_cif_walk(p->content, a), lw_cif_walk(p->content, b)};
    for (size_t row = 0; row < a->rows; row++) {
        lw_cif_value id[2] = {{0}};
        for (int side = 0; side < 2; side++) {
            lw_cif_value value;
            for (size_t k = 0; k < (side == 0 ? a : b)->columns; k++) {
                lw_cif_next(&cursor[side], &value, NULL);
                if (k == label[side]->column)
                    id[side] = value;
            }
        }
        if (id[0].length != id[1].length || memcmp(id[0].text, id[1].text, id[0].length) != 0)
            return false;
    }
    return true;
}

/* A constant-step grid from three items. 1 found, 0 not there, -1 refused. */
static int find_grid(lw_powder *p, const char *stem, lw_error *err)
{
    static const char *const ends[] = {"min", "max", "inc"};
    char name[64];
    double value[3] = {0};
    int found[3];
    for (int i = 0; i < 3; i++) {
        snprintf(name, sizeof name, "%s_%s", stem, ends[i]);
        found[i] = lw_powder_single(p, p->block, name, &value[i], err);
        if (found[i] < 0)
            return -1;
    }
    double rows = (double)p->intensity->loop->rows;
    if (!found[0] || (!found[1] && !found[2]) || rows < 2)
        return 0;
    p->start = value[0];
    p->step = found[1] ? (value[1] - value[0]) / (rows - 1) : value[2];
    p->abscissa = IN_GRID;
    if (!found[1] || !found[2])
        return 1;
    double count = (value[1] - value[0]) / value[2] + 1;
    if (!(fabs(p->step / value[2] - 1) < 0.02)) {
        lw_powder_refuse(p, p->intensity->loop->line, "correct the range, or complete the rows", err,
                         "%s_min, _max and _inc make %.6g points, but the loop has %.0f rows", stem, count,
                         rows);
        return -1;
    }
    if (fabs(count - rows) > 0.5)
        lw_powder_note(
            p, "the range %g to %g by %g makes %.1f points; the %.0f rows were laid evenly from end to end",
            value[0], value[1], value[2], count, rows);
    return 1;
}

static lw_status find_abscissa(lw_powder *p, lw_error *err)
{
    static const struct {
        const char *name;
        abscissa_kind kind;
        bool measured;
    } columns[] = {{"_pd_proc_2theta_corrected", IN_DEGREES, false},
                   {"_pd_meas_2theta_scan", IN_DEGREES, true},
                   {"_pd_meas_angle_2theta", IN_DEGREES, true},
                   {"_pd_proc_d_spacing", IN_SPACING, false},
                   {"_pd_proc_recip_len_q", IN_Q, false}};
    bool apart = false;
    for (int pass = 0; pass < 4; pass++) { /* angles beside the intensity, angles elsewhere, grids, d or Q */
        if (pass == 2) {
            int grid = find_grid(p, "_pd_proc_2theta_range", err);
            if (grid == 0) {
                grid = find_grid(p, "_pd_meas_2theta_range", err);
                p->measured = grid > 0;
            }
            if (grid != 0)
                return grid > 0 ? LW_OK : err ? err->status : LW_BAD_DATA;
            continue;
        }
        for (size_t i = pass == 3 ? 3 : 0; i < (pass == 3 ? 5 : 3); i++) {
            const lw_cif_item *item = lw_powder_column(p->block, columns[i].name);
            if (item == NULL)
                continue;
            bool beside = item->loop == p->intensity->loop;
            if (pass == 0 ? !beside : !beside && !same_rows(p, item->loop, p->intensity->loop)) {
                apart = true;
                continue;
            }
            p->angle = item;
            p->abscissa = columns[i].kind;
            p->measured = columns[i].measured;
            return LW_OK;
        }
    }
    if (apart)
        return lw_powder_refuse(p, p->intensity->loop->line, "put angle and intensity into one loop", err,
                                "angles and intensities are in loops whose rows do not match");
    return lw_powder_refuse(
        p, p->intensity->loop->line,
        "give _pd_meas_2theta_scan in the loop, or _pd_meas_2theta_range_min, _max and _inc", err,
        "the intensities have no angles");
}

static long line_of(const lw_columns *columns, size_t i)
{
    const long *lines = columns->origin;
    return lines[i];
}

static double angle_of(const lw_powder *p, double x)
{
    if (p->abscissa == IN_SPACING)
        return 2 * asin(p->wavelength_angstrom / (2 * x)) * DEGREES;
    if (p->abscissa == IN_Q)
        return 2 * asin(p->wavelength_angstrom * x / (4 * 3.14159265358979323846)) * DEGREES;
    return x;
}

/* Walks the loop (or two loops side by side) and fills the columns. */
static lw_status read_rows(lw_powder *p, lw_columns *columns, double offset, lw_error *err)
{
    const lw_cif_loop *loop = p->intensity->loop, *beside = p->angle ? p->angle->loop : loop;
    size_t rows = loop->rows, n = 0, with_su = 0;
    double *x = lw_arena_take(p->arena, 3 * rows, sizeof(double), err);
    long *lines = x ? lw_arena_take(p->arena, rows, sizeof(long), err) : NULL;
    if (lines == NULL)
        return LW_OUT_OF_MEMORY;
    double *y = x + rows, *sigma = y + rows;
    lw_cif_cursor cursor = lw_cif_walk(p->content, loop), other = lw_cif_walk(p->content, beside);
    lw_status status = LW_OK;
    char word[40];
    for (size_t row = 0; row < rows && status == LW_OK; row++) {
        lw_cif_value intensity = {0}, angle = {0}, su = {0}, value;
        for (size_t k = 0; k < loop->columns && status == LW_OK; k++) {
            status = lw_cif_next(&cursor, &value, err);
            if (k == p->intensity->column)
                intensity = value;
            if (p->angle != NULL && beside == loop && k == p->angle->column)
                angle = value;
            if (p->su != NULL && k == p->su->column)
                su = value;
        }
        for (size_t k = 0; beside != loop && k < beside->columns && status == LW_OK; k++) {
            status = lw_cif_next(&other, &value, err);
            if (k == p->angle->column)
                angle = value;
        }
        if (status != LW_OK)
            return status;
        if (lw_cif_is_missing(&intensity))
            continue;
        double bracket, unused, at = p->start + p->step * (double)row;
        if (!lw_cif_number(&intensity, &y[n], &sigma[n]))
            return lw_powder_refuse(p, intensity.line, "correct it, or write ? if it is not known", err,
                                    "the intensity is '%s', not a number", lw_powder_shown(&intensity, word));
        if (p->su != NULL && !lw_cif_is_missing(&su) && lw_cif_number(&su, &bracket, &unused))
            sigma[n] = bracket;
        if (p->angle != NULL && !lw_cif_number(&angle, &at, &unused))
            return lw_powder_refuse(p, angle.line ? angle.line : intensity.line,
                                    "correct it or delete the row", err, "the angle is '%s', not a number",
                                    lw_powder_shown(&angle, word));
        with_su += isnan(sigma[n]) ? 0 : 1;
        x[n] = angle_of(p, at) + offset;
        lines[n] = intensity.line;
        n++;
        if (row % 65536 == 65535)
            status = lw_engine_poll(p->arena->engine, err);
    }
    /* d falls as the angle rises */
    if (n > 1 && p->abscissa == IN_SPACING && x[0] > x[n - 1])
        for (size_t i = 0, j = n - 1; i < j; i++, j--) {
            double sx = x[i], sy = y[i], ss = sigma[i];
            long line = lines[i];
            x[i] = x[j], y[i] = y[j], sigma[i] = sigma[j], lines[i] = lines[j];
            x[j] = sx, y[j] = sy, sigma[j] = ss, lines[j] = line;
        }
    columns->n = n;
    columns->two_theta_deg = x;
    columns->intensity = y;
    columns->sigma = with_su > 0 ? sigma : NULL;
    columns->line_of = line_of;
    columns->origin = lines;
    return status;
}

/* Comment lines at the top and the notes. */
static lw_status gather_header(lw_powder *p, lw_columns *columns, lw_error *err)
{
    const char *end = p->content->bytes + p->content->size, *q = p->content->bytes;
    while (q < end && *q == '#') {
        const char *eol = memchr(q, '\n', (size_t)(end - q));
        q = eol ? eol + 1 : end;
    }
    size_t size = (size_t)(q - p->content->bytes);
    if (size > 65536)
        size = 65536;
    columns->header = lw_arena_print(p->arena, err, "%.*s%s", (int)size, p->content->bytes, p->notes);
    return columns->header ? LW_OK : LW_OUT_OF_MEMORY;
}

static lw_status read_pdcif(lw_engine *engine, lw_content *content, const lw_scan_options *options,
                            lw_columns *columns, lw_error *err)
{
    (void)engine;
    lw_powder *p = lw_arena_take(columns->arena, 1, sizeof *p, err);
    if (p == NULL)
        return LW_OUT_OF_MEMORY;
    *p = (lw_powder){.arena = columns->arena, .content = content, .options = options};
    lw_status status = lw_cif_read(p->arena, content, &p->first, err);
    if (status == LW_OK)
        status = choose_block(p, err);
    if (status == LW_OK)
        status = refuse_not_angle(p, err);
    if (status != LW_OK)
        return status;
    p->intensity = find_intensity(p->block);
    char name[64];
    for (int i = 0; i < 2 && p->su == NULL; i++) {
        snprintf(name, sizeof name, "%s%s", p->intensity->name, i == 0 ? "_su" : "_esd");
        p->su = lw_powder_column(p->block, name);
        if (p->su != NULL && p->su->loop != p->intensity->loop)
            p->su = NULL;
    }
    status = find_abscissa(p, err);
    if (status == LW_OK)
        status = lw_powder_radiation(p, columns, err);
    if (status != LW_OK)
        return status;
    const lw_radiation *radiation = columns->has_radiation ? &columns->radiation : options->radiation;
    if (p->abscissa == IN_SPACING || p->abscissa == IN_Q) {
        if (radiation == NULL)
            return lw_powder_refuse(p, p->intensity->loop->line, "say it with the option radiation", err,
                                    "the points are given by %s, and the wavelength is not stated",
                                    p->angle->name);
        p->wavelength_angstrom = 10 * lw_radiation_wavelength(radiation);
    }
    double offset = 0, points = 0;
    if (p->measured && lw_powder_single(p, p->block, "_pd_calib_2theta_offset", &offset, err) < 0)
        return LW_BAD_DATA;
    if (offset != 0)
        lw_powder_note(p, "the stated offset of %g degrees was added to the measured angles", offset);
    int counted = lw_powder_single(p, p->block, "_pd_proc_number_of_points", &points, NULL);
    if (counted <= 0)
        counted = lw_powder_single(p, p->block, "_pd_meas_number_of_points", &points, NULL);
    if (counted > 0 && points != (double)p->intensity->loop->rows)
        lw_powder_note(p, "the file states %.0f points and has %zu rows", points, p->intensity->loop->rows);
    status = read_rows(p, columns, offset, err);
    if (status == LW_OK)
        status = gather_header(p, columns, err);
    return status;
}

const lw_reader lw_pdcif_reader = {
    .name = "powder CIF",
    .claims = lw_cif_claims,
    .read = read_pdcif,
};
