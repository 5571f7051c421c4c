/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/history.h"

#include "instrument/compare.h"
#include "instrument/control_chart.h"
#include "instrument/profile_shape.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

static const char schema[] = "linewright/history/1";

#define AT(field) offsetof(lw_history_options, field)
const lw_option lw_history_option_table[] = {
    {"run", LW_OPTION_COUNT, "", "7", 2, 30, NULL, AT(run), "points in a row on one side of the centre that are a signal"},
    {"trend", LW_OPTION_COUNT, "", "7", 2, 30, NULL, AT(trend), "points in a row that only rise, or only fall, that are a signal"},
    LW_OPTIONS_END};

lw_history_options lw_history_defaults(void)
{
    return (lw_history_options){.run = 7, .trend = 7};
}

/* One chart under construction. */
typedef struct chart {
    const char *name, *title, *unit;
    double angle_deg; /* 0: not at an angle */
    size_t n;         /* entries that have the quantity */
    size_t *entry;
    double *value, *u;
    bool *begins;
} chart;

typedef struct history {
    const lw_history_entry *entry;
    size_t n;
    const lw_history_options *options;
    lw_arena *arena, scratch;
    lw_node *charts, *signals;
    int worst;
} history;

static lw_status begin(history *h, chart *c, const char *name, const char *title, const char *unit, double angle_deg,
                       lw_error *err)
{
    *c = (chart){.name = name,
                 .title = title,
                 .unit = unit,
                 .angle_deg = angle_deg,
                 .entry = lw_arena_take(&h->scratch, h->n, sizeof *c->entry, err),
                 .value = lw_arena_take(&h->scratch, h->n, sizeof *c->value, err),
                 .u = lw_arena_take(&h->scratch, h->n, sizeof *c->u, err),
                 .begins = lw_arena_take(&h->scratch, h->n, sizeof *c->begins, err)};
    return c->entry && c->value && c->u && c->begins ? LW_OK : LW_OUT_OF_MEMORY;
}

static void add_point(const history *h, chart *c, size_t entry, double value, double u)
{
    size_t from = c->n > 0 ? c->entry[c->n - 1] + 1 : 0;
    c->entry[c->n] = entry;
    c->value[c->n] = value;
    c->u[c->n] = u;
    for (size_t i = from; i <= entry; i++) /* a service between counts, even where the calibration lacks the quantity */
        c->begins[c->n] = c->begins[c->n] || h->entry[i].after_service;
    c->n++;
}

static void write_phases(const chart *c, const lw_chart_phase *phase, size_t phases, const history *h, lw_node *group,
                         lw_error *err)
{
    lw_node *list = lw_add_list(group, "phases", err);
    for (size_t k = 0; k < phases; k++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "from", h->entry[c->entry[phase[k].first]].label, err);
        lw_add_number(row, "points", (double)phase[k].n, err);
        lw_add_quantity(row, "centre", lw_quantity_of(phase[k].centre, phase[k].sigma / sqrt((double)phase[k].n), c->unit),
                        NULL, err);
        lw_add_number(row, "sigma", phase[k].sigma, err);
        lw_add_number(row, "lower", phase[k].lower, err);
        lw_add_number(row, "upper", phase[k].upper, err);
        lw_add_flag(row, "provisional", phase[k].provisional, err);
    }
}

static lw_status finish(history *h, const chart *c, lw_error *err)
{
    if (c->n < 2)
        return LW_OK;
    lw_chart_phase phase[LW_CHART_PHASES_MOST];
    unsigned *broken = lw_arena_take(&h->scratch, c->n, sizeof *broken, err);
    if (broken == NULL)
        return LW_OUT_OF_MEMORY;
    size_t phases = lw_control_chart(c->n, c->value, c->begins, (size_t)h->options->run, (size_t)h->options->trend, phase,
                                     broken);
    lw_node *group = lw_add_group(h->charts, NULL, err);
    lw_add_text(group, "name", c->name, err);
    lw_add_text(group, "title", c->title, err);
    if (c->angle_deg > 0)
        lw_add_number(group, "two_theta", c->angle_deg, err);
    lw_add_text(group, "unit", c->unit, err);
    write_phases(c, phase, phases, h, group, err);
    lw_node *list = lw_add_list(group, "points", err);
    for (size_t i = 0; i < c->n; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        const char *label = h->entry[c->entry[i]].label;
        lw_add_text(row, "calibration", label, err);
        lw_add_number(row, "at", (double)c->entry[i] + 1, err);
        lw_add_quantity(row, "value", lw_quantity_of(c->value[i], c->u[i], c->unit), NULL, err);
        lw_add_flag(row, "after_service", c->begins[i], err);
        lw_node *rules = lw_add_list(row, "rules", err);
        bool newest_phase = i >= phase[phases - 1].first, newest = c->entry[i] == h->n - 1;
        for (unsigned rule = 0; rule < LW_RULES; rule++) {
            if ((broken[i] & (1u << rule)) == 0)
                continue;
            lw_add_text(rules, NULL, lw_chart_rule_name[rule], err);
            lw_node *signal = lw_add_group(h->signals, NULL, err);
            lw_add_text(signal, "calibration", label, err);
            lw_add_text(signal, "quantity", c->name, err);
            lw_add_text(signal, "rule", lw_chart_rule_name[rule], err);
            lw_add_text(signal, "meaning", lw_chart_rule_meaning[rule], err);
            int worth = newest && rule == LW_RULE_LIMITS ? 2 : newest_phase ? 1 : 0;
            h->worst = worth > h->worst ? worth : h->worst;
        }
    }
    return err->status;
}

static lw_status chart_aberration(history *h, const char *name, const char *title, lw_error *err)
{
    const lw_aberration *kind = lw_aberration_named(name);
    chart c;
    lw_status status = begin(h, &c, name, title, kind->unit, 0, err);
    for (size_t i = 0; status == LW_OK && i < h->n; i++) {
        const lw_aberrations *set = &h->entry[i].calibration->aberrations;
        for (size_t k = 0; k < set->n; k++)
            if (set->kind[k] == kind)
                add_point(h, &c, i, set->value[k], sqrt(set->covariance[k][k]));
    }
    return status == LW_OK ? finish(h, &c, err) : status;
}

static lw_status chart_profile(history *h, bool width, const char *name, const char *title, double angle, lw_error *err)
{
    chart c;
    lw_status status = begin(h, &c, name, title, "deg", angle, err);
    for (size_t i = 0; status == LW_OK && i < h->n; i++) {
        const lw_calibration *calibration = h->entry[i].calibration;
        lw_width_figure figure = {0};
        lw_quantity lean = {0};
        status = width ? lw_profile_figure(h->arena->engine, calibration, angle, &figure, err)
                       : lw_profile_asymmetry(h->arena->engine, calibration, 1, &angle, &lean, err);
        if (status == LW_OK)
            add_point(h, &c, i, width ? figure.fwhm_deg : lean.value, width ? figure.u_fwhm : lean.u);
    }
    return status == LW_OK ? finish(h, &c, err) : status;
}

static lw_status chart_intensity(history *h, lw_error *err)
{
    chart c;
    lw_status status = begin(h, &c, "intensity", "Areas of the lines against the first", "%", 0, err);
    for (size_t i = 0; status == LW_OK && i < h->n; i++) {
        lw_quantity ratio;
        if (i == 0)
            add_point(h, &c, i, 100, 0);
        else if (lw_compare_intensity(h->entry[0].calibration, h->entry[i].calibration, &ratio))
            add_point(h, &c, i, ratio.value, ratio.u);
    }
    return status == LW_OK ? finish(h, &c, err) : status;
}

static lw_status draw_up(history *h, double low, double high, lw_error *err)
{
    static const char *const widths[] = {"fwhm_low", "fwhm_middle", "fwhm_high"};
    static const char *const leans[] = {"asymmetry_low", "asymmetry_middle", "asymmetry_high"};
    lw_status status = chart_aberration(h, "zero_shift", "Zero shift", err);
    if (status == LW_OK)
        status = chart_aberration(h, "displacement", "Specimen displacement", err);
    for (int i = 0; i < 3 && status == LW_OK; i++)
        status = chart_profile(h, true, widths[i], "FWHM", lw_compare_angle(low, high, i), err);
    for (int i = 0; i < 3 && status == LW_OK; i++)
        status = chart_profile(h, false, leans[i], "Asymmetry (centroid minus middle)", lw_compare_angle(low, high, i), err);
    return status == LW_OK ? chart_intensity(h, err) : status;
}

lw_status lw_history(lw_engine *engine, const lw_history_entry *entry, size_t n, const lw_history_options *options,
                     lw_node *record, lw_error *err)
{
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    if (n < 2)
        return lw_fail(err, LW_BAD_ARGUMENT, "give two calibrations or more", "a history of %zu calibration%s has no course",
                       n, n == 1 ? "" : "s");
    double low = 0, high = 180;
    for (size_t i = 0; i < n; i++) {
        low = fmax(low, entry[i].calibration->valid_low_deg);
        high = fmin(high, entry[i].calibration->valid_high_deg);
        lw_error why = LW_ERROR_NONE;
        if (i > 0 && lw_comparable(entry[0].calibration, entry[i].calibration, &why) != LW_OK)
            return lw_fail(err, why.status, why.remedy, "%s and %s: %s", entry[0].label, entry[i].label, why.message);
    }
    if (!(high - low > 5))
        return lw_fail(err, LW_BAD_ARGUMENT, "leave out the calibrations of short range",
                       "the calibrations have no range of angles in common");
    history h = {.entry = entry, .n = n, .options = options, .arena = record->arena};
    lw_arena_begin(&h.scratch, engine);
    lw_add_text(record, "schema", schema, err);
    lw_node *verdict = lw_add_text(record, "verdict", "pass", err);
    lw_add_text(record, "rules",
                "Shewhart charts of single values after ISO 7870-2: limits at three standard deviations (mean moving range "
                "over 1.128) about the mean of each phase between services; a phase of fewer than eight points has "
                "provisional limits", err);
    lw_node *list = lw_add_list(record, "calibrations", err);
    for (size_t i = 0; i < n; i++) {
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_text(row, "calibration", entry[i].label, err);
        lw_add_text(row, "standard", lw_node_text(lw_node_get(entry[i].calibration->record, "standard"), "name", ""), err);
        lw_add_flag(row, "after_service", entry[i].after_service, err);
        lw_add_text(row, "sha256", entry[i].calibration->hash, err);
    }
    h.signals = lw_add_list(record, "signals", err);
    h.charts = lw_add_list(record, "charts", err);
    lw_status status = draw_up(&h, low, high, err);
    static const char *const verdicts[] = {"pass", "attention", "fail"};
    if (verdict != NULL)
        verdict->text = verdicts[h.worst];
    lw_arena_end(&h.scratch);
    return status != LW_OK ? status : err->status;
}
