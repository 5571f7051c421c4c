/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The meaning of the data names of a powder scan in CIF: the powder dictionary of COMCIFS (cif_pow) and, for the
 * wavelength, the core dictionary. Toby, Von Dreele & Larson 2003, J. Appl. Cryst. 36, 1290-1294.
 *
 * Refinement weights (_pd_proc_ls_weight) are not taken for uncertainties, and points of weight 0 are kept:
 * they belong to somebody's earlier fit, not to the measurement. Rows without an intensity are left out. */
#include "scan/cif.h"

#include <math.h>
#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#define NOTES_MOST 2000
#define DEGREES (180.0 / 3.14159265358979323846)

typedef enum abscissa_kind { IN_DEGREES, IN_SPACING, IN_Q, IN_GRID } abscissa_kind;

typedef struct powder {
    lw_arena *arena;
    const lw_content *content;
    const lw_scan_options *options;
    lw_cif_block *first, *block;
    const lw_cif_item *intensity, *su, *angle;
    abscissa_kind abscissa;
    bool measured; /* the angles are as measured, so that a stated offset still applies */
    double start, step;
    double wavelength_angstrom;
    char notes[NOTES_MOST];
} powder;

static const char *const intensity_names[] = {"_pd_meas_counts_total", "_pd_meas_intensity_total",
                                              "_pd_proc_intensity_total", "_pd_proc_intensity_net", NULL};
static const char *const not_angles[] = {"_pd_meas_time_of_flight",     "_pd_meas_position",
                                         "_pd_proc_energy_incident",    "_pd_proc_energy_detection",
                                         "_pd_meas_2theta_fixed",       NULL};

/* Something that the user should know but that is no error goes into the scan's header. */
__attribute__((format(printf, 2, 3))) static void note(powder *p, const char *format, ...)
{
    size_t used = strlen(p->notes);
    va_list arguments;
    va_start(arguments, format);
    if (used > 0 && used + 1 < sizeof p->notes)
        p->notes[used++] = '\n';
    vsnprintf(p->notes + used, sizeof p->notes - used, format, arguments);
    va_end(arguments);
}

__attribute__((format(printf, 5, 6))) static lw_status refuse(const powder *p, long line, const char *remedy,
                                                              lw_error *err, const char *format, ...)
{
    char message[400];
    va_list arguments;
    va_start(arguments, format);
    vsnprintf(message, sizeof message, format, arguments);
    va_end(arguments);
    return lw_fail_at(err, LW_BAD_DATA, p->content->name, line, remedy, "%s", message);
}

/* A value as it can be shown in a message. */
static const char *shown(const lw_cif_value *value, char word[40])
{
    size_t n = 0;
    for (; n < value->length && n < 32; n++)
        word[n] = value->text[n] >= 32 && value->text[n] < 127 ? value->text[n] : '?';
    word[n] = '\0';
    return word;
}

static bool same_word(const char *a, const char *b)
{
    for (; *a != '\0' || *b != '\0'; a++, b++)
        if ((*a >= 'A' && *a <= 'Z' ? *a + 32 : *a) != (*b >= 'A' && *b <= 'Z' ? *b + 32 : *b))
            return false;
    return true;
}

/* The number of a single item: 1 if there, 0 if missing or unknown, -1 (refused) if it is not a number. */
static int single(const powder *p, const lw_cif_block *block, const char *name, double *number, lw_error *err)
{
    const lw_cif_item *item = lw_cif_find(block, name);
    double su;
    char word[40];
    if (item == NULL || item->loop != NULL || lw_cif_is_missing(&item->value))
        return 0;
    if (lw_cif_number(&item->value, number, &su) && isfinite(*number))
        return 1;
    refuse(p, item->value.line, "correct it, or write ? if it is not known", err, "%s is '%s', not a number", name,
           shown(&item->value, word));
    return -1;
}

static const lw_cif_item *column(const lw_cif_block *block, const char *name)
{
    const lw_cif_item *item = lw_cif_find(block, name);
    return item != NULL && item->loop != NULL && item->loop->rows > 0 ? item : NULL;
}

static const lw_cif_item *find_intensity(const lw_cif_block *block)
{
    for (int i = 0; intensity_names[i] != NULL; i++) {
        const lw_cif_item *item = column(block, intensity_names[i]);
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

static lw_status choose_block(powder *p, lw_error *err)
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
            used += (size_t)snprintf(names + used, sizeof names - used, "%s%s", used ? ", " : "", block->name);
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
        return refuse(p, 0, remedy, err, "%zu data blocks hold a scan", scans);
    }
    if (p->options->block != NULL) {
        snprintf(remedy, sizeof remedy, used ? "blocks with a scan: %s" : "no block of this file holds one%s", names);
        return lw_fail_at(err, LW_BAD_ARGUMENT, p->content->name, 0, remedy, "no data block '%.60s' with a scan",
                          p->options->block);
    }
    if (other != NULL)
        return refuse(p, 0, "only scans against 2theta are read", err, "not an angle scan: it has %s",
                      find_not_angle(other)->name);
    return refuse(p, 0, "a scan needs a loop with _pd_meas_counts_total or another intensity of the powder dictionary",
                  err, "the CIF holds no powder scan");
}

static lw_status refuse_not_angle(powder *p, lw_error *err)
{
    const lw_cif_item *item = find_not_angle(p->block);
    if (item != NULL)
        return refuse(p, item->loop ? item->loop->line : item->value.line, "only scans against 2theta are read", err,
                      "not an angle scan: it has %s", item->name);
    const lw_cif_item *method = lw_cif_find(p->block, "_pd_meas_scan_method");
    static const char *const refused[] = {"tof", "disp", "fixed", NULL};
    char word[40];
    for (int i = 0; method != NULL && method->loop == NULL && method->value.text != NULL && refused[i] != NULL; i++)
        if (same_word(shown(&method->value, word), refused[i]))
            return refuse(p, method->value.line, "only scans against 2theta are read", err,
                          "not an angle scan: _pd_meas_scan_method is %s", refused[i]);
    return LW_OK;
}

/* Two loops may be laid side by side if they have as many rows and no labels that contradict. */
static bool same_rows(powder *p, const lw_cif_loop *a, const lw_cif_loop *b)
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
static int find_grid(powder *p, const char *stem, lw_error *err)
{
    static const char *const ends[] = {"min", "max", "inc"};
    char name[64];
    double value[3] = {0};
    int found[3];
    for (int i = 0; i < 3; i++) {
        snprintf(name, sizeof name, "%s_%s", stem, ends[i]);
        found[i] = single(p, p->block, name, &value[i], err);
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
        refuse(p, p->intensity->loop->line, "correct the range, or complete the rows", err,
               "%s_min, _max and _inc make %.6g points, but the loop has %.0f rows", stem, count, rows);
        return -1;
    }
    if (fabs(count - rows) > 0.5)
        note(p, "the range %g to %g by %g makes %.1f points; the %.0f rows were laid evenly from end to end", value[0],
             value[1], value[2], count, rows);
    return 1;
}

static lw_status find_abscissa(powder *p, lw_error *err)
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
            const lw_cif_item *item = column(p->block, columns[i].name);
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
        return refuse(p, p->intensity->loop->line, "put angle and intensity into one loop", err,
                      "angles and intensities are in loops whose rows do not match");
    return refuse(p, p->intensity->loop->line,
                  "give _pd_meas_2theta_scan in the loop, or _pd_meas_2theta_range_min, _max and _inc", err,
                  "the intensities have no angles");
}

/* Gathers wavelengths of a block into *radiation. 1 found, 0 none, -1 refused. */
static int find_wavelengths(powder *p, const lw_cif_block *block, lw_radiation *radiation, lw_error *err)
{
    double value = 0, su;
    const char *names[] = {"_diffrn_radiation_wavelength", "_diffrn_radiation_wavelength_value", "_pd_proc_wavelength"};
    *radiation = (lw_radiation){.n = 0};
    for (int i = 0; i < 3; i++) {
        int found = single(p, block, names[i], &value, err);
        if (found < 0)
            return -1;
        if (found > 0) {
            *radiation = (lw_radiation){.n = 1, .component = {{.wavelength_nm = value / 10, .weight = 1}}};
            return 1;
        }
        const lw_cif_item *item = i < 2 ? column(block, names[i]) : NULL;
        if (item == NULL)
            continue;
        const lw_cif_item *weights = column(block, "_diffrn_radiation_wavelength_wt");
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
                note(p, "several wavelengths without weights were left aside");
                return 0;
            }
            if (!(weight >= 0) || !isfinite(weight)) {
                refuse(p, line, "give each wavelength its relative intensity", err,
                       "a wavelength has no _diffrn_radiation_wavelength_wt");
                return -1;
            }
            if (weight == 0)
                continue;
            if (radiation->n == LW_EMISSION_MOST) {
                refuse(p, line, "keep the strongest", err, "more than %d wavelengths", LW_EMISSION_MOST);
                return -1;
            }
            radiation->component[radiation->n++] = (lw_emission){.wavelength_nm = length / 10, .weight = weight};
        }
        return radiation->n > 0;
    }
    return 0;
}

/* The wavelength may stand in another block than the scan; if the others differ, none is taken. */
static lw_status find_radiation(powder *p, lw_columns *columns, lw_error *err)
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
        if (radiation.n > 0 && (radiation.n != another.n || memcmp(radiation.component, another.component,
                                                                   sizeof radiation.component) != 0)) {
            note(p, "other data blocks state different wavelengths; none was taken");
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
    lw_status status = radiation.n == 1 ? lw_radiation_plain(radiation.component[0].wavelength_nm, &radiation, &reason)
                                        : lw_radiation_settle(&radiation, &reason);
    if (status != LW_OK)
        return refuse(p, 0, "correct _diffrn_radiation_wavelength (angstrom)", err, "the wavelength is refused: %s",
                      reason.message);
    if (radiation.n > 1)
        snprintf(radiation.name, sizeof radiation.name, "%zu wavelengths of the file", radiation.n);
    snprintf(radiation.source, sizeof radiation.source, "data block %.80s of %.200s", from->name, p->content->name);
    columns->radiation = radiation;
    columns->has_radiation = true;
    return LW_OK;
}

static long line_of(const lw_columns *columns, size_t i)
{
    const long *lines = columns->origin;
    return lines[i];
}

static double angle_of(const powder *p, double x)
{
    if (p->abscissa == IN_SPACING)
        return 2 * asin(p->wavelength_angstrom / (2 * x)) * DEGREES;
    if (p->abscissa == IN_Q)
        return 2 * asin(p->wavelength_angstrom * x / (4 * 3.14159265358979323846)) * DEGREES;
    return x;
}

/* Walks the loop (or two loops side by side) and fills the columns. */
static lw_status read_rows(powder *p, lw_columns *columns, double offset, lw_error *err)
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
            return refuse(p, intensity.line, "correct it, or write ? if it is not known", err,
                          "the intensity is '%s', not a number", shown(&intensity, word));
        if (p->su != NULL && !lw_cif_is_missing(&su) && lw_cif_number(&su, &bracket, &unused))
            sigma[n] = bracket;
        if (p->angle != NULL && !lw_cif_number(&angle, &at, &unused))
            return refuse(p, angle.line ? angle.line : intensity.line, "correct it or delete the row", err,
                          "the angle is '%s', not a number", shown(&angle, word));
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
static lw_status gather_header(powder *p, lw_columns *columns, lw_error *err)
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
    powder *p = lw_arena_take(columns->arena, 1, sizeof *p, err);
    if (p == NULL)
        return LW_OUT_OF_MEMORY;
    *p = (powder){.arena = columns->arena, .content = content, .options = options};
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
        p->su = column(p->block, name);
        if (p->su != NULL && p->su->loop != p->intensity->loop)
            p->su = NULL;
    }
    status = find_abscissa(p, err);
    if (status == LW_OK)
        status = find_radiation(p, columns, err);
    if (status != LW_OK)
        return status;
    const lw_radiation *radiation = columns->has_radiation ? &columns->radiation : options->radiation;
    if (p->abscissa == IN_SPACING || p->abscissa == IN_Q) {
        if (radiation == NULL)
            return refuse(p, p->intensity->loop->line, "say it with the option radiation", err,
                          "the points are given by %s, and the wavelength is not stated", p->angle->name);
        p->wavelength_angstrom = 10 * lw_radiation_wavelength(radiation);
    }
    double offset = 0, points = 0;
    if (p->measured && single(p, p->block, "_pd_calib_2theta_offset", &offset, err) < 0)
        return LW_BAD_DATA;
    if (offset != 0)
        note(p, "the stated offset of %g degrees was added to the measured angles", offset);
    int counted = single(p, p->block, "_pd_proc_number_of_points", &points, NULL);
    if (counted <= 0)
        counted = single(p, p->block, "_pd_meas_number_of_points", &points, NULL);
    if (counted > 0 && points != (double)p->intensity->loop->rows)
        note(p, "the file states %.0f points and has %zu rows", points, p->intensity->loop->rows);
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
