/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/response.h"

#include "instrument/calibration_record.h"
#include "numeric/least_squares.h"
#include "numeric/statistics.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

enum { ORDER_MOST = 4, CURVE = 60 };

#define AT(field) offsetof(lw_response_options, field)
const lw_option lw_response_option_table[] = {
    {"order_most", LW_OPTION_COUNT, "", "3", 0, ORDER_MOST, NULL, AT(order_most),
     "highest order of the polynomial that is tried; the evidence chooses"},
    LW_OPTIONS_END};

lw_response_options lw_response_defaults(void)
{
    return (lw_response_options){.order_most = 3};
}

typedef struct row {
    const lw_line *line;
    const lw_intensity *certified;
    double angle, log_ratio, u_log; /* of observed over certified */
} row;

typedef struct fit {
    size_t n, order; /* lines; coefficients are order + 1 */
    double a[ORDER_MOST + 1], c[(ORDER_MOST + 1) * (ORDER_MOST + 1)];
    double chi2, criterion;
} fit;

static double place(double angle, double low, double high)
{
    return 2 * (angle - low) / (high - low) - 1;
}

/* Generalised least squares of a polynomial on the logarithms; inverse: of their covariance. */
static lw_status fit_order(lw_engine *engine, const row *rows, size_t n, const double *inverse, size_t order, double low,
                           double high, fit *out, lw_error *err)
{
    size_t k = order + 1, weakest;
    double h[(ORDER_MOST + 1) * (ORDER_MOST + 1)] = {0}, g[ORDER_MOST + 1] = {0};
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            double w = inverse[i * n + j], x = place(rows[i].angle, low, high), y = place(rows[j].angle, low, high), p = 1;
            for (size_t a = 0; a < k; a++, p *= x) {
                double q = 1;
                g[a] += p * w * rows[j].log_ratio;
                for (size_t b = 0; b < k; b++, q *= y)
                    h[a * k + b] += p * w * q;
            }
        }
    *out = (fit){.n = n, .order = order};
    lw_status status = lw_invert_normal(engine, h, k, NULL, out->c, &weakest, err);
    if (status != LW_OK)
        return status;
    for (size_t a = 0; a < k; a++)
        for (size_t b = 0; b < k; b++)
            out->a[a] += out->c[a * k + b] * g[b];
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            double rest[2] = {rows[i].log_ratio, rows[j].log_ratio}, p[2] = {1, 1};
            for (size_t a = 0; a < k; a++) {
                rest[0] -= out->a[a] * p[0];
                rest[1] -= out->a[a] * p[1];
                p[0] *= place(rows[i].angle, low, high);
                p[1] *= place(rows[j].angle, low, high);
            }
            out->chi2 += rest[0] * inverse[i * n + j] * rest[1];
        }
    /* known variances: chi2 itself, not its logarithm */
    double points = (double)n, terms = (double)k;
    out->criterion = points - terms - 1 > 0 ? out->chi2 + 2 * terms + 2 * terms * (terms + 1) / (points - terms - 1) : INFINITY;
    return LW_OK;
}

/* Curve against its mean over the lines: what is left of a relative response when the scale is open; its u. */
static double curve_at(const fit *f, const row *rows, double angle, double low, double high, double *u)
{
    double slope[ORDER_MOST + 1] = {0}, x = place(angle, low, high), p = 1, value = 0, variance = 0;
    size_t k = f->order + 1;
    for (size_t a = 0; a < k; a++, p *= x)
        slope[a] = p;
    for (size_t i = 0; i < f->n; i++) {
        p = 1;
        for (size_t a = 0; a < k; a++, p *= place(rows[i].angle, low, high))
            slope[a] -= p / (double)f->n;
    }
    slope[0] = 0; /* the scale is the mean: not a rounding of it */
    for (size_t a = 0; a < k; a++) {
        value += slope[a] * f->a[a];
        for (size_t b = 0; b < k; b++)
            variance += slope[a] * f->c[a * k + b] * slope[b];
    }
    *u = sqrt(fmax(variance, 0));
    return value;
}

/* Lines whose certified intensity is known: the same spacing, whatever member of the family names it. */
static size_t pair_lines(const lw_lines *lines, const lw_standard *standard, row *rows, const char **why)
{
    size_t n = 0;
    const lw_cell *cell = &standard->material.cell;
    for (size_t k = 0; k < lines->n; k++) {
        const lw_line *line = &lines->line[k];
        const lw_reflection *r = &line->reflection;
        for (size_t i = 0; i < standard->n_intensities; i++) {
            const lw_intensity *at = &standard->intensity[i];
            if (fabs(lw_cell_s(cell, at->h, at->k, at->l) / lw_cell_s(cell, r->h, r->k, r->l) - 1) > 1e-6)
                continue;
            if (!line->supported || !(line->area.value > 0)) {
                *why = "some certified lines are not supported by the scan";
                continue;
            }
            double observed = standard->intensities_are_heights ? line->height.value : line->area.value;
            double u = standard->intensities_are_heights ? line->height.u : line->area.u;
            rows[n++] = (row){.line = line, .certified = at, .angle = line->two_theta.value,
                              .log_ratio = log(observed / at->value), .u_log = hypot(u / observed, at->u / at->value)};
            break;
        }
    }
    return n;
}

static lw_status covariance_inverse(lw_engine *engine, const lw_lines *lines, const lw_standard *standard, const row *rows,
                                    size_t n, double *inverse, lw_arena *scratch, lw_error *err)
{
    double *c = lw_arena_take(scratch, n * n, sizeof *c, err);
    size_t weakest;
    if (c == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            size_t a = rows[i].line->at_area, b = rows[j].line->at_area;
            if (i == j)
                c[i * n + i] = rows[i].u_log * rows[i].u_log;
            else if (!standard->intensities_are_heights && a != LW_NO_PARAMETER && b != LW_NO_PARAMETER)
                c[i * n + j] = lines->covariance[a * lines->n_parameters + b] / (rows[i].line->area.value * rows[j].line->area.value);
        }
    return lw_invert_normal(engine, c, n, NULL, inverse, &weakest, err);
}

/* Factor on u where the lines scatter about the curve beyond chance (Birge 1932 Phys. Rev. 40, 207), else 1. */
static double birge_ratio(const fit *f)
{
    double freedom = (double)f->n - (double)f->order - 1;
    return lw_chi2_tail(f->chi2, freedom) < 1e-3 ? sqrt(f->chi2 / freedom) : 1;
}

static void write_rows(const fit *f, const row *rows, bool heights, double low, double high, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "lines", err);
    double mean = 0, birge = birge_ratio(f);
    for (size_t i = 0; i < f->n; i++) { /* the scale: the curve's mean over the lines is 1 */
        double x = place(rows[i].angle, low, high), p = 1;
        for (size_t a = 0; a <= f->order; a++, p *= x)
            mean += f->a[a] * p / (double)f->n;
    }
    for (size_t i = 0; i < f->n; i++) {
        char hkl[24];
        double u, value = curve_at(f, rows, rows[i].angle, low, high, &u), ratio = exp(rows[i].log_ratio - mean);
        lw_node *at = lw_add_group(list, NULL, err);
        lw_add_text(at, "hkl", lw_hkl_text(rows[i].certified->h, rows[i].certified->k, rows[i].certified->l, hkl, sizeof hkl), err);
        lw_add_quantity(at, "two_theta", rows[i].line->two_theta, NULL, err);
        lw_add_quantity(at, "observed", heights ? rows[i].line->height : rows[i].line->area, NULL, err);
        lw_add_quantity(at, "certified", lw_quantity_of(rows[i].certified->value, rows[i].certified->u, ""), NULL, err);
        lw_add_quantity(at, "ratio", lw_quantity_of(ratio, ratio * rows[i].u_log, ""), NULL, err);
        lw_add_quantity(at, "curve", lw_quantity_of(exp(value), exp(value) * u * birge, ""), NULL, err);
        lw_add_number(at, "pull", (rows[i].log_ratio - mean - value) / rows[i].u_log, err);
    }
    double angle[CURVE], response[CURVE], band[CURVE];
    for (size_t i = 0; i < CURVE; i++) {
        double u, value = curve_at(f, rows, angle[i] = low + (high - low) * (double)i / (CURVE - 1), low, high, &u);
        response[i] = exp(value);
        band[i] = response[i] * u * birge;
    }
    lw_node *group = lw_add_group(result, "curve", err);
    lw_add_vector(group, "two_theta", angle, CURVE, "deg", err);
    lw_add_vector(group, "response", response, CURVE, "", err);
    lw_add_vector(group, "u", band, CURVE, "", err);
}

static void write_verdict(const fit *tried, size_t n_tried, const fit *kept, const row *rows, double low, double high,
                          lw_node *result, lw_error *err)
{
    double freedom = (double)kept->n - (double)kept->order - 1, fits = lw_chi2_tail(kept->chi2, freedom), birge = birge_ratio(kept);
    /* a response that is flat leaves chi-square of the bent curve no lower than chance: line and parabola are what a
     * cut beam or lost counts look like */
    const fit *bent = &tried[n_tried > 3 ? 2 : n_tried - 1];
    double terms = (double)bent->order, p = bent->order > 0 ? lw_chi2_tail(fmax(tried[0].chi2 - bent->chi2, 0) / (birge * birge), terms) : 1;
    bool flat = kept->order == 0 && p > 0.01;
    double largest = 0, u_largest = 0, where = low;
    const fit *worst = kept->order > 0 ? kept : bent;
    for (size_t i = 0; i < kept->n; i++) {
        double u, value = curve_at(worst, rows, rows[i].angle, low, high, &u);
        if (fabs(value) > fabs(largest)) {
            largest = value;
            u_largest = u * birge;
            where = rows[i].angle;
        }
    }
    lw_add_number(result, "chi2", kept->chi2, err);
    lw_add_number(result, "degrees_of_freedom", freedom, err);
    lw_add_number(result, "p", fits, err);
    lw_add_number(result, "birge_ratio", birge, err);
    lw_add_number(result, "p_flat", p, err);
    lw_add_flag(result, "flat_within_u", flat, err);
    lw_add_quantity(result, "largest_departure",
                    flat ? lw_upper_limit(fabs(largest) + 1.6449 * u_largest, 0.95, "")
                         : lw_quantity_of(exp(largest) - 1, exp(largest) * u_largest, ""),
                    "of the response from its mean over the lines, relative", err);
    lw_node *warnings = lw_add_list(result, "warnings", err);
    if (birge > 1)
        lw_add_text(warnings, NULL,
                    lw_arena_print(result->arena, err,
                                   "the lines scatter about the curve by %.1f times their u: texture of this specimen, few grains, "
                                   "or not the specimen of the certificate", birge), err);
    if (!flat) {
        char off[64];
        lw_quantity_text(lw_quantity_of(100 * (exp(largest) - 1), 100 * exp(largest) * u_largest, "%"), off, sizeof off);
        lw_add_text(warnings, NULL,
                    lw_arena_print(result->arena, err,
                                   "the response is not flat: off by %s at %.1f deg (p of a flat one %.1e): does the beam leave "
                                   "the specimen at low angles, is a mask in the way, are counts lost at the strong lines?",
                                   off, where, p), err);
    }
    lw_node *cautions = lw_add_list(result, "cautions", err);
    lw_add_text(cautions, NULL,
                "a plate with preferred orientation certifies the intensities of its own kind only: neither those of a powder of the "
                "same substance, nor those of another batch", err);
    lw_add_text(cautions, NULL,
                "the certificate's intensities hold for its radiation and its kind of monochromator: another polarisation bends the "
                "curve without any fault of the instrument", err);
    lw_add_text(result, "verdict", flat && !(birge > 1) ? "pass" : "attention", err);
}

static lw_status respond(lw_engine *engine, const lw_lines *lines, const lw_standard *standard, const lw_response_options *o,
                         lw_node *result, lw_arena *scratch, lw_error *err)
{
    const char *why = "";
    row *rows = lw_arena_take(scratch, lines->n, sizeof *rows, err);
    if (rows == NULL)
        return LW_OUT_OF_MEMORY;
    size_t n = pair_lines(lines, standard, rows, &why);
    if (n < 4)
        return lw_fail_at(err, LW_NOT_SUPPORTED, lines->scan->file, 0, "measure the whole range of the certificate",
                          "response: %zu lines with a certified intensity are in the scan, 4 are needed", n);
    double *inverse = lw_arena_take(scratch, n * n, sizeof *inverse, err), low = rows[0].angle, high = rows[n - 1].angle;
    if (inverse == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = covariance_inverse(engine, lines, standard, rows, n, inverse, scratch, err);
    fit tried[ORDER_MOST + 1];
    size_t n_tried = 0, best = 0;
    for (size_t order = 0; order <= (size_t)o->order_most && order + 2 < n && status == LW_OK; order++) {
        status = fit_order(engine, rows, n, inverse, order, low, high, &tried[order], err);
        n_tried++;
        if (tried[order].criterion < tried[best].criterion)
            best = order;
    }
    if (status != LW_OK)
        return status;
    lw_add_text(result, "schema", "linewright/response/1", err);
    lw_add_text(result, "standard", standard->name, err);
    lw_add_text(result, "certificate", standard->certificate, err);
    lw_add_text(result, "intensities", standard->intensities_are_heights ? "heights" : "areas", err);
    lw_add_number(result, "order", (double)best, err);
    lw_node *list = lw_add_list(result, "orders_tried", err);
    for (size_t i = 0; i < n_tried; i++) {
        lw_node *at = lw_add_group(list, NULL, err);
        lw_add_number(at, "order", (double)i, err);
        lw_add_number(at, "chi2", tried[i].chi2, err);
        lw_add_number(at, "aicc_above_best", tried[i].criterion - tried[best].criterion, err);
    }
    write_rows(&tried[best], rows, standard->intensities_are_heights, low, high, result, err);
    if (why[0] != '\0')
        lw_add_text(result, "left_out", why, err);
    write_verdict(tried, n_tried, &tried[best], rows, low, high, result, err);
    return err->status;
}

lw_status lw_response(lw_engine *engine, const lw_lines *lines, const lw_standard *standard, const lw_response_options *options,
                      lw_node *result, lw_error *err)
{
    lw_error local = LW_ERROR_NONE;
    if (err == NULL)
        err = &local;
    if (standard->n_intensities == 0)
        return lw_fail(err, LW_NOT_SUPPORTED,
                       "put intensities = { { hkl = \"104\", value =, expanded_uncertainty = }, ... } from your certificate into a "
                       "literal of your own",
                       "response: the standard %s carries no certified intensities", standard->name);
    lw_arena scratch;
    lw_arena_begin(&scratch, engine);
    lw_status status = respond(engine, lines, standard, options, result, &scratch, err);
    lw_arena_end(&scratch);
    return status;
}
