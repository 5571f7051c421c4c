/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scan/reader.h"
#include "scan/source.h"
#include "scan/stated.h"

#include <stdio.h>
#include <string.h>

/* The readers, most particular first; the last one claims whatever is left. */
static const lw_reader *const readers[] = {&lw_pdcif_reader, &lw_text_reader};

/* Reads the content; its bytes go over to the scan. */
static lw_status read_content(lw_engine *engine, lw_content *content, const lw_scan_options *options,
                              lw_scan **scan, lw_error *err)
{
    lw_scan_options standard = lw_scan_defaults();
    if (options == NULL)
        options = &standard;
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    lw_scan *made = lw_arena_take(&arena, 1, sizeof *made, err);
    char *file = made ? lw_arena_text(&arena, content->name, err) : NULL;
    lw_columns columns = {.arena = &arena};
    lw_status status = file == NULL ? LW_OUT_OF_MEMORY : LW_OK;
    if (status == LW_OK) {
        size_t i = 0;
        while (i + 1 < sizeof readers / sizeof readers[0] && !readers[i]->claims(content))
            i++;
        status = readers[i]->read(engine, content, options, &columns, err);
    }
    lw_noise noise = LW_NOISE_COUNTS;
    if (status == LW_OK)
        status = lw_columns_check(&columns, file, options->noise, &noise, err);
    const char *note = NULL;
    if (status == LW_OK && options->radiation != NULL)
        status = lw_stated_check(&columns, file, options->radiation, options->radiation_differs, &note, err);
    if (status == LW_OK && note != NULL) {
        bool more = columns.header != NULL && columns.header[0] != '\0';
        columns.header = lw_arena_print(&arena, err, "%s%s%s", more ? columns.header : "", more ? "\n" : "", note);
        status = columns.header ? LW_OK : LW_OUT_OF_MEMORY;
    }
    if (status != LW_OK) {
        lw_arena_end(&arena);
        return status;
    }
    made->file = file;
    made->header = columns.header ? columns.header : "";
    made->n = columns.n;
    made->two_theta_deg = columns.two_theta_deg;
    made->intensity = columns.intensity;
    made->sigma = noise == LW_NOISE_SIGMA ? columns.sigma : NULL;
    made->noise = noise;
    made->variance_factor = 1;
    made->has_radiation = columns.has_radiation;
    made->radiation = columns.radiation;
    if (options->radiation != NULL) {
        made->has_radiation = true;
        made->radiation = *options->radiation;
    }
    bool all = options->range[0] == 0 && options->range[1] == 0;
    size_t first = 0;
    while (!all && first + 1 < columns.n && columns.two_theta_deg[first] < options->range[0])
        first++;
    made->first_line = columns.line_of ? (size_t)columns.line_of(&columns, first) : 0;
    /* from here on the bytes are the scan's: nothing may look at the content again */
    status = lw_source_new(engine, content, &made->source, err);
    if (status != LW_OK) {
        lw_arena_end(&arena);
        return status;
    }
    if (noise == LW_NOISE_SCALED)
        lw_scan_estimate_noise(made, &made->variance_factor, &made->correlation);
    made->arena = arena;
    if (all) {
        *scan = made;
        return LW_OK;
    }
    size_t line = made->first_line;
    status = lw_scan_crop(made, options->range[0], options->range[1], scan, err);
    if (status == LW_OK)
        (*scan)->first_line = line;
    lw_scan_free(made);
    return status;
}

lw_status lw_scan_read(lw_engine *engine, const char *path, const lw_scan_options *options, lw_scan **scan,
                       lw_error *err)
{
    *scan = NULL;
    lw_content content;
    lw_status status = lw_content_open(engine, path, &content, err);
    if (status == LW_OK)
        status = read_content(engine, &content, options, scan, err);
    lw_content_free(engine, &content);
    return status;
}

lw_status lw_scan_read_bytes(lw_engine *engine, const char *name, const char *bytes, size_t size,
                             const lw_scan_options *options, lw_scan **scan, lw_error *err)
{
    *scan = NULL;
    lw_content content;
    lw_status status = lw_content_copy(engine, name, bytes, size, &content, err);
    if (status == LW_OK)
        status = read_content(engine, &content, options, scan, err);
    lw_content_free(engine, &content);
    return status;
}
