/* SPDX-License-Identifier: GPL-3.0-or-later */
/* lw_fit_lines: what is checked and taken before a fit runs, and what is made of it. */
#include "line/fit_state.h"

#include <math.h>
#include <string.h>

/* Lines inside the scan, ascending; of lines closer than `closest` degrees the one of larger multiplicity. */
static lw_status choose_reflections(lw_fit_state *fit, const lw_reflection *all, size_t n_all, double closest,
                                    lw_error *err)
{
    const lw_scan *scan = fit->scan;
    double low = scan->two_theta_deg[0], high = scan->two_theta_deg[scan->n - 1];
    size_t room = n_all + LW_BEYOND_MOST;
    fit->reflection = lw_arena_take(&fit->scratch, room, sizeof *fit->reflection, err);
    fit->start = lw_arena_take(&fit->scratch, room, sizeof *fit->start, err);
    fit->remark = lw_arena_take(&fit->scratch, room, sizeof *fit->remark, err);
    if (!fit->reflection || !fit->start || !fit->remark)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n_all; i++) {
        double expected = all[i].two_theta_deg + (fit->options->expected_shift ? fit->options->expected_shift[i] : 0);
        /* a line whose top is cut off tells nothing about its shape */
        if (expected < low + fit->options->search_deg || expected > high - fit->options->search_deg)
            continue;
        size_t n = fit->n;
        if (n > 0 && expected < fit->start[n - 1].expected_deg)
            return lw_fail(err, LW_BAD_ARGUMENT, "sort them by 2theta", "reflections do not ascend in 2theta");
        if (n > 0 && expected - fit->start[n - 1].expected_deg < closest) {
            fit->remark[n - 1] = "a neighbour of nearly the same place is contained in it";
            if (all[i].multiplicity <= fit->reflection[n - 1].multiplicity)
                continue;
            n = --fit->n;
        } else
            fit->remark[n] = "";
        fit->reflection[n] = all[i];
        fit->start[n] = (lw_line_start){.expected_deg = expected};
        fit->n++;
    }
    if (fit->n == 0)
        return lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0, "check material, radiation and range of the scan",
                          "no reflection of the list lies inside the scan (%.2f to %.2f deg)", low, high);
    return LW_OK;
}

lw_status lw__fit_take_state(lw_fit_state *fit, lw_error *err)
{
    size_t n = fit->n + LW_BEYOND_MOST;
    fit->position = lw_arena_take(&fit->scratch, n, sizeof *fit->position, err);
    fit->area = lw_arena_take(&fit->scratch, n, sizeof *fit->area, err);
    fit->local = lw_arena_take(&fit->scratch, n, sizeof *fit->local, err);
    fit->hold_position = lw_arena_take(&fit->scratch, n, sizeof *fit->hold_position, err);
    fit->hold_local = lw_arena_take(&fit->scratch, n, sizeof *fit->hold_local, err);
    fit->model.line = lw_arena_take(&fit->scratch, n, sizeof *fit->model.line, err);
    fit->lines->variance = lw_arena_take(&fit->lines->arena, fit->scan->n, sizeof(double), err);
    bool all = fit->position && fit->area && fit->local && fit->hold_position && fit->hold_local &&
               fit->model.line && fit->lines->variance;
    return all ? LW_OK : LW_OUT_OF_MEMORY;
}

static lw_status check_options(const lw_scan *scan, const lw_fit_options *options, lw_error *err)
{
    const lw_line_shape *shape = lw_line_shape_list[options->shape];
    if (!scan->has_radiation)
        return lw_fail_at(err, LW_BAD_ARGUMENT, scan->file, 0, "give radiation = \"Cu Ka\" or a wavelength when reading it",
                          "the scan does not say with which radiation it was measured");
    if (!shape->is_voigt && (options->instrument != NULL || options->axial != LW_AXIAL_NONE))
        return lw_fail(err, LW_BAD_ARGUMENT, "use shape = \"voigt\"",
                       "fit_lines: an instrument or axial divergence can only be folded into a Voigt, not into '%s'",
                       shape->name);
    if (!shape->is_voigt && options->widths == LW_WIDTHS_SMOOTH)
        return lw_fail(err, LW_BAD_ARGUMENT, "use shape = \"voigt\"", "fit_lines: widths = \"smooth\" needs a Voigt");
    if (lw__fit_is_fixed(options, "background"))
        return lw_fail(err, LW_BAD_ARGUMENT, "give background = a scan of the holder instead",
                       "fit_lines: the background can't be held before it is known");
    if (options->instrument != NULL && options->axial != LW_AXIAL_NONE)
        return lw_fail(err, LW_BAD_ARGUMENT, "leave axial out",
                       "fit_lines: the instrument brings its axial divergence; it can't be refined again");
    return LW_OK;
}

void lw__fit_begin(lw_fit_state *fit)
{
    const lw_fit_options *options = fit->options;
    lw_lines *lines = fit->lines;
    fit->model = (lw_model){.engine = fit->engine,
                            .kernel = lw_voigt_kernel_for(fit->engine->cpu),
                            .radiation = &lines->radiation,
                            .on_s_axis = options->axis == 0,
                            .with_factor = options->intensity_factor == 0,
                            .axial = (lw_axial_kind)options->axial};
    double mono = cos(options->monochromator_deg * M_PI / 180);
    fit->model.constant_polarisation = 1 - options->polarised;
    fit->model.cos2_monochromator = options->polarised * mono * mono;
    if (options->instrument != NULL) {
        lines->has_instrument = true;
        lines->instrument = *options->instrument;
        memcpy(fit->model.instrument, options->instrument->value, sizeof fit->model.instrument);
        fit->model.axial = options->instrument->axial;
        fit->model.table = options->instrument->table;
    }
}

const lw_fit_options *lw__fit_keep_options(const lw_fit_options *options, const lw_width_function *instrument,
                                           lw_arena *arena, lw_error *err)
{
    lw_fit_options *kept = lw_arena_copy(arena, options, 1, sizeof *options, err);
    if (kept == NULL)
        return NULL;
    kept->range[0] = kept->range[1] = 0;
    kept->expected_shift = NULL;
    kept->instrument = options->instrument != NULL ? instrument : NULL;
    for (size_t i = 0; i < kept->fixed.n; i++)
        if ((kept->fixed.item[i] = lw_arena_text(arena, options->fixed.item[i], err)) == NULL)
            return NULL;
    return kept;
}

/* About what a fit takes: columns along the scan, and matrices of the parameters. */
static size_t bytes_of(const lw_fit_options *options, size_t points, size_t lines)
{
    size_t room = lw__fit_background_room(options), parameters = 4 * lines + room + LW_WIDTH_PARAMETERS;
    return sizeof(double) * (points * (10 + room) + 6 * parameters * parameters) + 12000 * lines;
}

/* One fit of the scan, or of the range that the options name. *crop_deg > 0 and no lines: fit again below it. */
static lw_status fit_once(lw_engine *engine, const lw_scan *scan, const lw_reflection *reflections, size_t n,
                          const lw_material *material, const lw_fit_options *options, lw_lines **out, double *crop_deg,
                          lw_error *err)
{
    lw_lines *lines = lw_take(engine, sizeof *lines, err);
    if (lines == NULL)
        return LW_OUT_OF_MEMORY;
    *lines = (lw_lines){.scan = scan, .radiation = scan->radiation, .misfit = "", .left_out = ""};
    lw_arena_begin(&lines->arena, engine);
    lw_fit_state fit = {.engine = engine, .options = options, .lines = lines};
    lw_arena_begin(&fit.scratch, engine);
    lw_status status = LW_OK;
    if (options->range[1] > options->range[0]) {
        status = lw_scan_crop(scan, options->range[0], options->range[1], &lines->cropped, err);
        lines->scan = lines->cropped;
    }
    fit.scan = lines->scan;
    if (status == LW_OK)
        status = lw_arena_reserve(&fit.scratch, bytes_of(options, fit.scan->n, n), err);
    lw__fit_begin(&fit);
    if (status == LW_OK && material != NULL &&
        (lines->material = lw_arena_copy(&lines->arena, material, 1, sizeof *material, err)) == NULL)
        status = LW_OUT_OF_MEMORY;
    if (status == LW_OK)
        status = choose_reflections(&fit, reflections, n, 1e-6, err);
    if (status == LW_OK)
        status = lw__fit_take_background_scan(&fit, err);
    if (status == LW_OK)
        status = lw__fit_take_state(&fit, err);
    if (status == LW_OK)
        status = lw__fit_run(&fit, err);
    if (status == LW_OK && !(fit.crop_deg > 0))
        status = lw_fit_result(&fit, err);
    if (status == LW_OK &&
        (lines->options = lw__fit_keep_options(options, &lines->instrument, &lines->arena, err)) == NULL)
        status = LW_OUT_OF_MEMORY;
    *crop_deg = fit.crop_deg;
    lw_arena_end(&fit.scratch);
    if (status != LW_OK || *crop_deg > 0) {
        lw_lines_free(lines);
        return status;
    }
    *out = lines;
    return LW_OK;
}

lw_status lw_fit_lines(lw_engine *engine, const lw_scan *scan, const lw_reflection *reflections, size_t n,
                       const lw_material *material, const lw_fit_options *options, lw_lines **out, lw_error *err)
{
    *out = NULL;
    double crop_deg = 0;
    lw_status status = check_options(scan, options, err);
    if (status == LW_OK)
        status = fit_once(engine, scan, reflections, n, material, options, out, &crop_deg, err);
    if (status != LW_OK || !(crop_deg > 0))
        return status;
    lw_fit_options below = *options;
    below.range[0] = scan->two_theta_deg[0];
    below.range[1] = crop_deg;
    double unused;
    status = fit_once(engine, scan, reflections, n, material, &below, out, &unused, err);
    if (status != LW_OK)
        return status;
    const char *text = lw_arena_print(&(*out)->arena, err,
                                      "beyond %.2f deg the lines overlap so much that their widths can't be told apart: "
                                      "that part of the scan was left out (give range to use it all the same)",
                                      crop_deg);
    if (text == NULL) {
        lw_lines_free(*out);
        *out = NULL;
        return LW_OUT_OF_MEMORY;
    }
    (*out)->left_out = text;
    return LW_OK;
}

size_t lw_lines_row(const lw_lines *lines, const char *name)
{
    for (size_t i = 0; i < lines->n_parameters; i++)
        if (strcmp(lines->parameter_name[i], name) == 0)
            return i;
    return LW_NO_PARAMETER;
}

void lw_lines_free(lw_lines *lines)
{
    if (lines == NULL)
        return;
    lw_engine *engine = lines->arena.engine;
    lw_scan_free(lines->cropped);
    lw_arena_end(&lines->arena);
    lw_give(engine, lines, sizeof *lines);
}
