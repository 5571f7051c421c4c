/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Variance method: size from how fast a line's variance grows with the range it is taken over, strain from its start.
 * Read from the counts, so that it checks methods that rest on a shape of line. */
#include "line/curve.h"
#include "numeric/statistics.h"
#include "numeric/voigt.h"
#include "sample/generalised.h"
#include "sample/method.h"
#include "sample/truncated.h"

#include <math.h>
#include <stdio.h>

#define PI 3.14159265358979323846
#define RANGES 15
#define NARROWEST 2.0 /* half of the narrowest range, in observed breadths: the law of the tails holds beyond the top only */
#define WIDEST 12.0   /* of the widest */
#define LEAST_GAIN 2.0 /* widest over narrowest */

static const lw_option options[] = {LW_OPTIONS_END};

static void defaults(void *target)
{
    (void)target;
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->n > 0 && profiles->lines->scan != NULL && profiles->lines->fitted != NULL)
        return NULL;
    snprintf(why, size, profiles->n == 0 ? "one line is needed, none found" : "the counts of the lines are needed");
    return why;
}

/* One line's answer. */
typedef struct tailed_line {
    const lw_profile *profile;
    const char *missing; /* why it has none, or NULL */
    double low, high;    /* half of the narrowest and widest range, nm^-1 */
    lw_truncated w;
    lw_variance_fit fit;
    double by_width[2][LW_WIDTH_PARAMETERS]; /* of start and slope to the instrument's widths */
} tailed_line;

/* Half width that neighbours and the ends of the scan leave about the line's middle, nm^-1. */
static double room(const lw_lines *lines, const lw_line *line, double per_degree, double middle, double doublet)
{
    const lw_scan *scan = lines->scan;
    double least = fmin(middle - per_degree * lw_line_offset(lines, line, scan->two_theta_deg[0]),
                        per_degree * lw_line_offset(lines, line, scan->two_theta_deg[scan->n - 1]) - middle);
    for (size_t i = 0; i < lines->n; i++) {
        const lw_line *other = &lines->line[i];
        if (other == line || !other->supported)
            continue;
        /* half-way from the nearer end of one doublet to that of the other */
        double distance = per_degree * lw_line_offset(lines, line, other->two_theta.value);
        least = fmin(least, distance > 0 ? 0.5 * (distance + doublet) - middle : middle - 0.5 * (distance + doublet));
    }
    return least;
}

/* Columns of the data around a line on the reciprocal axis about its middle. */
typedef struct columns {
    size_t n;
    double *s, *net, *variance, *whole; /* whole: the fitted line, instrument included, of unit area */
} columns;

static lw_status take(const lw_lines *lines, const lw_line *line, double per_degree, double middle, double half,
                      lw_arena *arena, columns *out, lw_error *err)
{
    const lw_scan *scan = lines->scan;
    size_t first = 0, end = scan->n;
    while (first < end && per_degree * lw_line_offset(lines, line, scan->two_theta_deg[first]) - middle < -half)
        first++;
    while (end > first && per_degree * lw_line_offset(lines, line, scan->two_theta_deg[end - 1]) - middle > half)
        end--;
    first -= first > 0; /* cells that the range cuts */
    end += end < scan->n;
    size_t n = end - first;
    *out = (columns){.n = n};
    double **column[] = {&out->s, &out->net, &out->variance, &out->whole};
    for (size_t i = 0; i < sizeof column / sizeof *column; i++)
        if ((*column[i] = lw_arena_take(arena, n, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    lw_status status = lw_line_curve(lines, line, n, scan->two_theta_deg + first, out->whole, err);
    for (size_t i = 0; i < n && status == LW_OK; i++) {
        double at = scan->two_theta_deg[first + i], factor = lw_line_relative_factor(lines, line, at);
        out->s[i] = per_degree * lw_line_offset(lines, line, at) - middle;
        out->net[i] = (scan->intensity[first + i] - lines->fitted[first + i] + out->whole[i]) / factor;
        out->variance[i] = lines->variance[first + i] / (factor * factor);
        out->whole[i] /= factor * line->area.value * per_degree;
    }
    return status;
}

/* Variances of the fitted sample Voigt (squared Gaussian FWHM, Lorentzian FWHM, deg) at the ranges. */
static void own_variance(const columns *c, double per_degree, double gauss_squared, double lorentz, size_t n,
                         const double *half, double *curve, double *unused, double *out)
{
    double gauss = per_degree * sqrt(fmax(gauss_squared, 1e-12));
    for (size_t i = 0; i < c->n; i++)
        curve[i] = lw_voigt(c->s[i], gauss, per_degree * fmax(lorentz, 0));
    lw_tailed own = {.n = c->n, .s = c->s, .intensity = curve};
    lw_truncated_moments(&own, n, half, unused, out);
}

/* What the instrument adds: the fitted line's variance with it less without it, over the same ranges. Where ranges are
 * wide that is the instrument's own variance (variances add); here what truncation does to the sum is in it as well. */
static lw_status read_line(const lw_profiles *profiles, tailed_line *out, lw_arena *arena, lw_error *err)
{
    const lw_lines *lines = profiles->lines;
    const lw_line *line = out->profile->line;
    double per_degree = PI / 180 * cos(out->profile->theta_deg * PI / 180) / lw_radiation_wavelength(&lines->radiation);
    lw_voigt_node *node = lw_arena_take(arena, LW_NODES_MOST, sizeof *node, err);
    if (node == NULL)
        return LW_OUT_OF_MEMORY;
    double whole_variance, whole_lorentz, middle = 0, doublet = 0;
    size_t n_nodes = lw_line_all_nodes(lines, line, false, node, &whole_variance, &whole_lorentz);
    for (size_t i = 0; i < n_nodes; i++)
        middle += per_degree * node[i].weight * node[i].offset;
    for (size_t i = 0; i < lines->radiation.n; i++)
        doublet = fmax(doublet, 2 * tan(out->profile->theta_deg * PI / 180) * 180 / PI * per_degree *
                                    (lines->radiation.component[i].wavelength_nm /
                                         lw_radiation_wavelength(&lines->radiation) - 1));
    double observed = line->breadth.value * per_degree;
    out->low = NARROWEST * observed + fmax(doublet - middle, middle);
    out->high = fmin(WIDEST * observed, room(lines, line, per_degree, middle, doublet));
    if (!(out->high > LEAST_GAIN * out->low)) {
        out->missing = "neighbours or the scan's end leave too little range for its tails";
        return LW_OK;
    }
    columns c;
    lw_status status = take(lines, line, per_degree, middle, out->high, arena, &c, err);
    double *curve = lw_arena_take(arena, c.n, sizeof *curve, err);
    if (status != LW_OK || curve == NULL)
        return err->status;
    double half[RANGES], area[RANGES], with[RANGES], without[RANGES], taken[RANGES], unused[RANGES];
    for (size_t j = 0; j < RANGES; j++)
        half[j] = out->low + (out->high - out->low) * (double)j / (RANGES - 1);
    lw_truncated_moments(&(lw_tailed){.n = c.n, .s = c.s, .intensity = c.whole}, RANGES, half, area, with);
    own_variance(&c, per_degree, line->own_variance_deg2, line->own_lorentz_deg, RANGES, half, curve, unused, without);
    for (size_t j = 0; j < RANGES; j++)
        taken[j] = with[j] - without[j];
    lw_tailed tailed = {.n = c.n, .s = c.s, .intensity = c.net, .variance = c.variance};
    double tail = per_degree * line->own_lorentz_deg / (2 * PI); /* slope of a Lorentzian of this FWHM: width/2 pi */
    status = lw_truncated_variance(&tailed, RANGES, half, area[RANGES - 1], tail, taken, arena, &out->w, err);
    lw_error each = LW_ERROR_NONE;
    if (status == LW_OK) {
        status = lw_variance_line(&out->w, arena, &out->fit, &each);
        if (status == LW_NO_CONVERGENCE) {
            out->missing = "its variance is too noisy to be fitted";
            return LW_OK;
        }
        if (status == LW_NOT_SUPPORTED) {
            out->missing = "its variance does not grow in proportion to the range: the tails have not reached their law, or "
                           "hang on the background";
            return LW_OK;
        }
        if (status != LW_OK)
            *err = each;
    }
    if (status != LW_OK || !lines->has_instrument)
        return status;
    /* The whole line is what was measured: a wider instrument leaves a narrower sample. */
    double slope[2][LW_WIDTH_PARAMETERS];
    lw_width_gauss_variance(lines->instrument.value, line->nominal_deg, slope[0]);
    lw_width_lorentz(lines->instrument.value, line->nominal_deg, slope[1]);
    double step[2] = {1e-3 * line->own_variance_deg2 + 1e-7, 1e-3 * line->own_lorentz_deg + 1e-5};
    lw_truncated moved = out->w;
    moved.variance = lw_arena_take(arena, RANGES, sizeof(double), err);
    for (int kind = 0; kind < 2 && err->status == LW_OK; kind++) {
        own_variance(&c, per_degree, line->own_variance_deg2 + (kind == 0 ? step[0] : 0),
                     line->own_lorentz_deg + (kind == 1 ? step[1] : 0), RANGES, half, curve, unused, with);
        for (size_t j = 0; j < RANGES; j++)
            moved.variance[j] = out->w.variance[j] + with[j] - without[j];
        lw_variance_fit fit;
        each = LW_ERROR_NONE;
        if (lw_variance_line(&moved, arena, &fit, &each) != LW_OK || fit.first != out->fit.first)
            continue; /* so near to the edge of a choice that the next wider ranges were taken */
        double by[2] = {-(fit.start - out->fit.start) / step[kind], -(fit.slope - out->fit.slope) / step[kind]};
        for (int i = 0; i < 2; i++)
            for (int p = 0; p < LW_WIDTH_PARAMETERS; p++)
                out->by_width[i][p] += by[i] * slope[kind][p];
    }
    return err->status;
}

/* ------------------------------------------------------------------------------------------------- all lines */

typedef struct readings {
    size_t n;
    const tailed_line **line;
    double *y, *covariance; /* [2n]: starts, then slopes; [2n][2n] */
} readings;

enum { STRAIN_SQUARE, SLOPE };

/* start = <eps^2> s^2, slope alike for all lines. */
static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const readings *r = user;
    (void)x_slope;
    for (size_t i = 0; i < r->n; i++) {
        double s = r->line[i]->profile->s_per_nm;
        value[i] = p[STRAIN_SQUARE] * s * s;
        slopes[2 * i + STRAIN_SQUARE] = s * s;
        value[r->n + i] = p[SLOPE];
        slopes[2 * (r->n + i) + SLOPE] = 1;
    }
}

static lw_status gather(const lw_profiles *profiles, const tailed_line *all, lw_arena *arena, readings *out, lw_error *err)
{
    *out = (readings){.line = lw_arena_take(arena, profiles->n, sizeof *out->line, err),
                      .y = lw_arena_take(arena, 2 * profiles->n, sizeof(double), err),
                      .covariance = lw_arena_take(arena, 4 * profiles->n * profiles->n, sizeof(double), err)};
    if (err->status != LW_OK)
        return err->status;
    for (size_t i = 0; i < profiles->n; i++)
        if (all[i].missing == NULL)
            out->line[out->n++] = &all[i];
    size_t n = out->n;
    for (size_t i = 0; i < n; i++) {
        out->y[i] = out->line[i]->fit.start;
        out->y[n + i] = out->line[i]->fit.slope;
    }
    for (size_t i = 0; i < 2 * n; i++)
        for (size_t j = 0; j < 2 * n; j++) {
            const tailed_line *a = out->line[i % n], *b = out->line[j % n];
            double sum = a == b ? a->fit.covariance[i / n][j / n] : 0;
            for (int p = 0; p < LW_WIDTH_PARAMETERS; p++)
                for (int q = 0; q < LW_WIDTH_PARAMETERS; q++)
                    sum += a->by_width[i / n][p] * profiles->lines->instrument.covariance[p][q] * b->by_width[j / n][q];
            out->covariance[i * 2 * n + j] = sum;
        }
    return LW_OK;
}

static lw_quantity size_of(double slope, double u)
{
    double per = 2 * PI * PI;
    if (slope > 2 * u)
        return lw_quantity_of(1 / (per * slope), u / (per * slope * slope), "nm");
    return lw_lower_limit(1 / (per * (fmax(slope, 0) + LW_ONE_SIDED_95 * u)), 0.95, "nm");
}

static lw_quantity strain_of(double square, double u)
{
    if (square > 2 * u)
        return lw_quantity_of(sqrt(square), u / (2 * sqrt(square)), "");
    return lw_upper_limit(sqrt(fmax(square, 0) + LW_ONE_SIDED_95 * u), 0.95, "");
}

static const char SIZE[] = "Area-weighted mean column length: 1/(2 pi^2 slope), slope of the variance against the whole range "
                           "(K = 1 on column lengths; a sphere's diameter is 3/2 of it).";
static const char LOCAL[] = "Root mean square strain over the shortest columns (L towards 0), from the variance at range 0; "
                            "crystals are taken to have no taper, as spheres.";

static void tell_lines(const lw_profiles *profiles, const tailed_line *all, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "lines", err);
    for (size_t i = 0; i < profiles->n; i++) {
        const tailed_line *t = &all[i];
        const lw_reflection *r = &t->profile->line->reflection;
        char text[24];
        lw_node *node = lw_add_group(list, NULL, err);
        lw_add_text(node, "hkl", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        if (t->missing != NULL) {
            lw_add_text(node, "not_determined", t->missing, err);
            continue;
        }
        double u[2];
        for (int k = 0; k < 2; k++) {
            u[k] = t->fit.covariance[k][k];
            for (int p = 0; p < LW_WIDTH_PARAMETERS; p++)
                for (int q = 0; q < LW_WIDTH_PARAMETERS; q++)
                    u[k] += t->by_width[k][p] * profiles->lines->instrument.covariance[p][q] * t->by_width[k][q];
            u[k] = sqrt(u[k]);
        }
        double s2 = t->profile->s_per_nm * t->profile->s_per_nm;
        lw_add_quantity(node, "size_area", size_of(t->fit.slope, u[1]), SIZE, err);
        lw_add_quantity(node, "strain_rms_local", strain_of(t->fit.start / s2, u[0] / s2), LOCAL, err);
        lw_add_quantity(node, "slope", lw_quantity_of(t->fit.slope, u[1], "nm^-1"),
                        "Growth of the variance with the whole range.", err);
        lw_add_quantity(node, "start", lw_quantity_of(t->fit.start, u[0], "nm^-2"), "Variance at range 0.", err);
        lw_add_number(node, "range_low_per_nm", 2 * t->w.half[t->fit.first], err);
        lw_add_number(node, "range_high_per_nm", 2 * t->high, err);
        lw_add_number(node, "chi2", t->fit.chi2, err);
        lw_add_number(node, "degrees_of_freedom", (double)t->fit.degrees, err);
    }
}

static void draw(const lw_profiles *profiles, const tailed_line *all, lw_node *result, lw_error *err)
{
    lw_node *figure = lw_add_group(result, "figure", err);
    lw_add_text(figure, "name", "variance", err);
    lw_add_text(figure, "title", "Variance of the lines against range", err);
    lw_add_text(figure, "caption",
                "Variance of each line, instrument and fitted level taken off, against the range it is taken over (points, with "
                "the standard uncertainty by counting): the slope of the line is size, its start strain.",
                err);
    static const char *const axes[] = {"x", "y"}, *const labels[] = {"range in s", "variance"},
                             *const units[] = {"nm^-1", "nm^-2"};
    for (int i = 0; i < 2; i++) {
        lw_node *axis = lw_add_group(figure, axes[i], err);
        lw_add_text(axis, "label", labels[i], err);
        lw_add_text(axis, "unit", units[i], err);
    }
    lw_node *series = lw_add_list(figure, "series", err);
    for (size_t i = 0; i < profiles->n; i++) {
        const tailed_line *t = &all[i];
        if (t->missing != NULL)
            continue;
        double u[RANGES], level[RANGES], x[RANGES + 1], y[RANGES + 1];
        for (size_t j = 0; j < RANGES; j++) {
            u[j] = sqrt(t->w.covariance[j * (RANGES + 1)]);
            level[j] = t->w.variance[j] - t->fit.level * t->w.level[j];
        }
        for (size_t j = 0; j <= RANGES; j++) {
            x[j] = t->w.range[RANGES - 1] * (double)j / RANGES;
            y[j] = t->fit.start + t->fit.slope * x[j];
        }
        const lw_reflection *r = &t->profile->line->reflection;
        char text[24];
        lw_node *points = lw_add_group(series, NULL, err), *line = lw_add_group(series, NULL, err);
        lw_add_text(points, "kind", "points", err);
        lw_add_text(points, "label", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        lw_add_vector(points, "x", t->w.range, RANGES, "", err);
        lw_add_vector(points, "y", level, RANGES, "", err);
        lw_add_vector(points, "u_y", u, RANGES, "", err);
        lw_add_text(line, "kind", "line", err);
        lw_add_text(line, "label", "", err);
        lw_add_vector(line, "x", x, RANGES + 1, "", err);
        lw_add_vector(line, "y", y, RANGES + 1, "", err);
    }
}

static void remark(const lw_profiles *profiles, const tailed_line *all, const lw_generalised_fit *fit, lw_node *remarks,
                   lw_error *err)
{
    char text[400];
    size_t used = 0, missing = 0;
    for (size_t i = 0; i < profiles->n; i++) {
        if (all[i].missing == NULL)
            continue;
        char hkl[24];
        const lw_reflection *r = &all[i].profile->line->reflection;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        if (used + 120 < sizeof text)
            used += (size_t)snprintf(text + used, sizeof text - used, "%s%s", missing > 0 ? ", " : "", hkl);
        missing++;
    }
    if (missing > 0) {
        snprintf(text + used, sizeof text - used, ": variance not determined, for want of range between neighbours or "
                                                  "because it does not grow straight");
        lw_add_text(remarks, NULL, text, err);
    }
    if (fit->degrees > 0 && fit->p < 0.0027) {
        snprintf(text, sizeof text,
                 "the lines' variances scatter about one size and one strain (chi-square %.3g for %zu degrees of freedom): "
                 "uncertainties were enlarged %.1f times",
                 fit->chi2, fit->degrees, fit->scatter);
        lw_add_text(remarks, NULL, text, err);
    }
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    (void)given;
    tailed_line *all = lw_arena_take(arena, profiles->n, sizeof *all, err);
    lw_status status = err->status;
    for (size_t i = 0; i < profiles->n && status == LW_OK; i++) {
        all[i].profile = &profiles->profile[i];
        status = lw_engine_poll(arena->engine, err);
        if (status == LW_OK)
            status = read_line(profiles, &all[i], arena, err);
    }
    readings r;
    if (status == LW_OK)
        status = gather(profiles, all, arena, &r, err);
    if (status == LW_OK && r.n == 0)
        status = lw_fail(err, LW_NOT_SUPPORTED, "measure a powder with lines further apart, or further out",
                         "the variance of no line can be told: %s", all[0].missing);
    if (status != LW_OK)
        return status;
    double p[2] = {r.y[0] / (r.line[0]->profile->s_per_nm * r.line[0]->profile->s_per_nm), r.y[r.n]};
    lw_generalised_fit fit;
    lw_generalised problem = {.n = 2 * r.n, .m = 2, .y = r.y, .covariance = r.covariance, .model = model, .user = &r};
    status = lw_generalised_solve(&problem, arena, p, &fit, NULL, err);
    if (status != LW_OK)
        return status;
    double u[2] = {fit.scatter * sqrt(fit.covariance[0][0]), fit.scatter * sqrt(fit.covariance[1][1])};
    lw_add_quantity(result, "size_area", size_of(p[SLOPE], u[SLOPE]), SIZE, err);
    lw_add_quantity(result, "strain_rms_local", strain_of(p[STRAIN_SQUARE], u[STRAIN_SQUARE]), LOCAL, err);
    lw_add_number(result, "correlation", -fit.covariance[0][1] / sqrt(fit.covariance[0][0] * fit.covariance[1][1]), err);
    lw_add_number(result, "chi2", fit.chi2, err);
    lw_add_number(result, "degrees_of_freedom", (double)fit.degrees, err);
    lw_add_number(result, "scatter_factor", fit.scatter, err);
    tell_lines(profiles, all, result, err);
    draw(profiles, all, result, err);
    remark(profiles, all, &fit, lw_add_list(result, "remarks", err), err);
    return err->status;
}

const lw_method lw_method_variance = {
    .name = "variance",
    .title = "Variance",
    .purpose = "area-weighted size from the growth of a line's variance with its range, strain from the start",
    .assumes = "Tails fall as 1/s^2 over the ranges used, as those of crystals with boundaries do, and crystals have no taper "
               "(spheres). An error of the background counts with the cube of the range, so its level under each line is fitted "
               "anew: this is a check of other methods, not a replacement.",
    .source = "Wilson (1962) Proc. Phys. Soc. 80, 286; Langford & Wilson (1963) in Crystallography and Crystal Perfection, "
              "Academic Press, 207",
    .options = options,
    .options_size = 0,
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
