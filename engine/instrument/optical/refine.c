/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "instrument/optical/refine.h"

#include "instrument/optical/observed.h"
#include "numeric/least_squares.h"

#include <math.h>
#include <string.h>

static const double degree = M_PI / 180;

#define AT(field) offsetof(lw_geometry, field)
/* step: for central differences, about a hundredth of a usual value */
static const struct {
    const char *name;
    size_t at;
    double step, lower, upper;
} fields[] = {{"source_width", AT(source_width), 5e-4, 1e-3, 1},
              {"slit_width", AT(slit_width), 5e-4, 1e-3, 2},
              {"divergence", AT(divergence_deg), 0.005, 0.01, 5},
              {"source_length", AT(source_length), 0.2, 0.5, 40},
              {"specimen_length", AT(specimen_length), 0.2, 0.5, 60},
              {"slit_length", AT(slit_length), 0.2, 0.5, 60},
              {"soller_incident", AT(soller_incident), 4e-4, 0.002, 0.25},
              {"soller_diffracted", AT(soller_diffracted), 4e-4, 0.002, 0.25},
              {"tilt", AT(tilt_deg), 0.005, 0, 2},
              {"attenuation", AT(attenuation), 0.05, 0.2, 1000},
              {"gauss", AT(gauss_deg), 5e-4, 0, 0.5}};
enum { FIELDS = sizeof fields / sizeof *fields };

const char *const lw_geometry_names[] = {"source_width",    "slit_width",      "divergence",      "source_length",
                                         "specimen_length", "slit_length",     "soller_incident", "soller_diffracted",
                                         "tilt",            "attenuation",     "gauss",           NULL};

double *lw_geometry_field(lw_geometry *geometry, const char *name)
{
    for (size_t i = 0; i < FIELDS; i++)
        if (strcmp(fields[i].name, name) == 0)
            return (double *)(void *)((char *)geometry + fields[i].at);
    return NULL;
}

/* One line's window of the scan. */
typedef struct window {
    double nominal_deg;
    size_t first, n, line;
} window;

enum { OWN = 4 }; /* parameters of a line: position, area, background, its slope */

typedef struct problem {
    lw_engine *engine;
    const lw_lines *lines;
    const lw_refine_options *options;
    lw_geometry start;
    size_t field[LW_REFINED_MOST];
    lw_observed observed;
    size_t n_lines;
    window *window;
    lw_optics optics[1 + 2 * LW_REFINED_MOST]; /* at the point, and moved up and down in each quantity */
    double *curve;                             /* [1 + 2 n][LW_OPTICS_POINTS] of one line */
    double *column;                            /* [OWN + n] at one point */
} problem;

/* Rays and transforms of the geometry at p and next to it. */
static lw_status set_optics(problem *q, const double *p, bool slopes, lw_error *err)
{
    lw_status status = LW_OK;
    for (size_t i = 0; i < 1 + 2 * (slopes ? q->options->n : 0) && status == LW_OK; i++) {
        lw_geometry g = q->start;
        for (size_t j = 0; j < q->options->n; j++)
            *(double *)(void *)((char *)&g + fields[q->field[j]].at) = p[j];
        if (i > 0) {
            double *moved = (double *)(void *)((char *)&g + fields[q->field[(i - 1) / 2]].at);
            *moved = fmax(*moved + (i % 2 ? 1 : -1) * fields[q->field[(i - 1) / 2]].step, 0);
        }
        lw_optics_end(&q->optics[i]);
        status = lw_optics_begin(q->engine, &g, &q->optics[i], err);
    }
    return status;
}

/* What is known apart from the profile: its chi-square, added to the normal equations. */
static double add_known(const problem *q, const double *p, bool want_normal, lw_normal *normal)
{
    double sum = 0;
    for (size_t j = 0; j < q->options->n; j++) {
        double u = q->options->u_known[j], residual = q->options->known[j] - p[j];
        if (!(u > 0))
            continue;
        sum += residual * residual / (u * u);
        if (want_normal) {
            normal->g[j] += residual / (u * u);
            normal->h[j * normal->n + j] += 1 / (u * u);
        }
    }
    return sum;
}

static lw_status evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    problem *q = user;
    const lw_scan *scan = q->lines->scan;
    size_t n = q->options->n, size = normal->n, all = want_normal ? n : 0;
    lw_status status = set_optics(q, p, want_normal, err);
    normal->chi2 = add_known(q, p, want_normal, normal);
    for (size_t k = 0; k < q->n_lines && status == LW_OK; k++) {
        const window *w = &q->window[k];
        for (size_t i = 0; i < 1 + 2 * all && status == LW_OK; i++)
            status = lw_observed_curve(&q->observed, &q->optics[i], w->nominal_deg, q->curve + i * LW_OPTICS_POINTS, err);
        if (status != LW_OK)
            return status;
        double step[LW_REFINED_MOST], moved_step;
        for (size_t j = 0; j < all; j++)
            step[j] = p[j] + fields[q->field[j]].step - fmax(p[j] - fields[q->field[j]].step, 0);
        const double *own = p + n + k * OWN;
        for (size_t i = w->first; i < w->first + w->n; i++) {
            double angle = scan->two_theta_deg[i], x = lw_observed_offset(own[0], angle), slope;
            double value = lw_observed_at(q->curve, x, &slope);
            double *c = q->column;
            double residual = scan->intensity[i] - (own[1] * value + own[2] + own[3] * (angle - w->nominal_deg));
            double weight = 1 / q->lines->variance[i];
            normal->chi2 += weight * residual * residual;
            if (!want_normal)
                continue;
            for (size_t j = 0; j < n; j++)
                c[j] = own[1] / step[j] *
                       (lw_observed_at(q->curve + (1 + 2 * j) * LW_OPTICS_POINTS, x, &moved_step) -
                        lw_observed_at(q->curve + (2 + 2 * j) * LW_OPTICS_POINTS, x, &moved_step));
            c[n] = -own[1] * slope;
            c[n + 1] = value;
            c[n + 2] = 1;
            c[n + 3] = angle - w->nominal_deg;
            for (size_t a = 0; a < n + OWN; a++) {
                size_t row = a < n ? a : a + k * OWN;
                normal->g[row] += weight * c[a] * residual;
                for (size_t b = 0; b <= a; b++)
                    normal->h[row * size + (b < n ? b : b + k * OWN)] += weight * c[a] * c[b];
            }
        }
        status = lw_engine_poll(q->engine, err);
    }
    return status;
}

/* Windows of the lines that stand alone: from 8 widths below to 8 beyond the spectrum's last component. */
static lw_status choose_windows(problem *q, lw_arena *arena, double *start, lw_error *err)
{
    const lw_lines *lines = q->lines;
    const lw_scan *scan = lines->scan;
    double reference = lw_radiation_wavelength(&lines->radiation), longest = reference;
    for (size_t c = 0; c < lines->radiation.n; c++)
        longest = fmax(longest, lines->radiation.component[c].wavelength_nm);
    q->window = lw_arena_take(arena, lines->n, sizeof *q->window, err);
    if (q->window == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < lines->n; k++) {
        const lw_line *line = &lines->line[k];
        double place = line->two_theta.value, theta = place * degree / 2;
        double last = 2 * asin(fmin(longest / reference * sin(theta), 0.999)) / degree - place;
        double low = place - 8 * line->fwhm.value - 0.2, high = place + last + 8 * line->fwhm.value + 0.2;
        /* the window may be cut by the scan's end, the line itself not */
        double core = 4 * line->fwhm.value + 0.1;
        bool alone = line->supported && place - core > scan->two_theta_deg[0] &&
                     place + core < scan->two_theta_deg[scan->n - 1] && high - low < 0.5 * LW_OPTICS_POINTS * LW_OPTICS_STEP;
        if (k > 0)
            alone = alone && lines->line[k - 1].two_theta.value + 2 * last < place - 4 * line->fwhm.value;
        if (!alone)
            continue;
        window *w = &q->window[q->n_lines];
        *w = (window){.nominal_deg = place, .line = k};
        for (size_t i = 0; i < scan->n; i++)
            if (scan->two_theta_deg[i] >= low && scan->two_theta_deg[i] <= high) {
                if (w->n == 0)
                    w->first = i;
                w->n++;
            }
        double *own = start + q->n_lines * OWN;
        own[0] = place;
        own[1] = line->area.value;
        own[2] = lines->background[w->first];
        q->n_lines++;
    }
    return q->n_lines >= 3 ? LW_OK
                           : lw_fail_at(err, LW_NOT_SUPPORTED, scan->file, 0, "measure a standard with lines apart",
                                        "%zu lines stand alone, three at least are needed for the optical profile", q->n_lines);
}

static lw_status refine(problem *q, lw_arena *arena, lw_refined *out, lw_error *err)
{
    size_t n = q->options->n, most = n + q->lines->n * OWN;
    double *p = lw_arena_take(arena, most, sizeof *p, err), *lower = lw_arena_take(arena, most, sizeof *lower, err);
    double *upper = lw_arena_take(arena, most, sizeof *upper, err);
    double *h = lw_arena_take(arena, most * most, sizeof *h, err), *g = lw_arena_take(arena, most, sizeof *g, err);
    double *c = lw_arena_take(arena, most * most, sizeof *c, err);
    bool *at_bound = lw_arena_take(arena, most, sizeof *at_bound, err);
    q->curve = lw_arena_take(arena, (1 + 2 * n) * LW_OPTICS_POINTS, sizeof(double), err);
    q->column = lw_arena_take(arena, n + OWN, sizeof(double), err);
    if (!p || !lower || !upper || !h || !g || !c || !at_bound || !q->curve || !q->column)
        return LW_OUT_OF_MEMORY;
    lw_status status = choose_windows(q, arena, p + n, err);
    if (status != LW_OK)
        return status;
    size_t size = n + q->n_lines * OWN;
    for (size_t i = 0; i < size; i++) {
        lower[i] = -INFINITY;
        upper[i] = INFINITY;
    }
    for (size_t j = 0; j < n; j++) {
        lower[j] = fields[q->field[j]].lower;
        upper[j] = fields[q->field[j]].upper;
        p[j] = fmin(fmax(*lw_geometry_field(&q->start, q->options->name[j]), lower[j]), upper[j]);
    }
    lw_problem fit = {.n = size, .lower = lower, .upper = upper, .evaluate = evaluate, .user = q};
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-7;
    control.step_tolerance = 1e-2;
    lw_fit_outcome outcome;
    status = lw_least_squares(q->engine, &fit, &control, p, at_bound, &outcome, err);
    if (status != LW_OK)
        return status;
    if (!outcome.converged)
        return lw_fail_at(err, LW_NO_CONVERGENCE, q->lines->scan->file, 0, "refine fewer quantities, or give better starting values",
                          "the optical profile did not converge in %zu iterations: %s", outcome.iterations, outcome.reason);
    lw_normal normal = {.n = size, .h = h, .g = g};
    status = evaluate(q, p, true, &normal, err);
    normal.chi2 -= add_known(q, p, false, &normal);
    size_t weakest = 0;
    if (status == LW_OK)
        status = lw_invert_normal(q->engine, h, size, at_bound, c, &weakest, err);
    if (status != LW_OK)
        return status;
    *out = (lw_refined){.geometry = q->optics[0].geometry, .n = n, .chi2 = normal.chi2, .n_parameters = size,
                        .iterations = outcome.iterations, .n_lines = q->n_lines};
    for (size_t k = 0; k < q->n_lines; k++) {
        const window *w = &q->window[k];
        out->n_points += w->n;
        for (size_t i = w->first; i < w->first + w->n; i++) {
            double residual = q->lines->scan->intensity[i] - q->lines->fitted[i];
            out->chi2_as_fitted += residual * residual / q->lines->variance[i];
        }
    }
    for (size_t i = 0; i < n; i++) {
        out->name[i] = fields[q->field[i]].name;
        out->value[i] = p[i];
        for (size_t j = 0; j < n; j++)
            out->covariance[i][j] = c[i * size + j];
    }
    out->position = lw_arena_take(arena, q->n_lines, sizeof(double), err);
    out->position_covariance = lw_arena_take(arena, q->n_lines * q->n_lines, sizeof(double), err);
    out->line = lw_arena_take(arena, q->n_lines, sizeof *out->line, err);
    out->cross = lw_arena_take(arena, q->n_lines * n, sizeof(double), err);
    if (!out->position || !out->position_covariance || !out->line || !out->cross)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < q->n_lines; i++) {
        out->position[i] = p[n + i * OWN];
        out->line[i] = q->window[i].line;
        for (size_t j = 0; j < n; j++)
            out->cross[i * n + j] = c[(n + i * OWN) * size + j];
        for (size_t j = 0; j < q->n_lines; j++)
            out->position_covariance[i * q->n_lines + j] = c[(n + i * OWN) * size + n + j * OWN];
    }
    return LW_OK;
}

lw_status lw_geometry_refine(lw_engine *engine, const lw_lines *lines, const lw_geometry *start,
                             const lw_refine_options *options, lw_arena *arena, lw_refined *refined, lw_error *err)
{
    lw_status status = lw_geometry_check(start, err);
    problem *q = status == LW_OK ? lw_arena_take(arena, 1, sizeof *q, err) : NULL;
    if (q == NULL)
        return status != LW_OK ? status : LW_OUT_OF_MEMORY;
    *q = (problem){.engine = engine, .lines = lines, .options = options, .start = *start};
    for (size_t i = 0; i < options->n && status == LW_OK; i++) {
        q->field[i] = FIELDS;
        for (size_t j = 0; j < FIELDS; j++)
            if (strcmp(fields[j].name, options->name[i]) == 0)
                q->field[i] = j;
        if (q->field[i] == FIELDS)
            status = lw_fail(err, LW_BAD_ARGUMENT,
                             "choose from: source_width, slit_width, divergence, source_length, specimen_length, "
                             "slit_length, soller_incident, soller_diffracted, tilt, attenuation, gauss",
                             "optics: unknown quantity '%s'", options->name[i]);
    }
    const lw_scan *scan = lines->scan;
    q->observed = (lw_observed){.radiation = &lines->radiation,
                                .with_factor = lines->with_factor,
                                .constant_polarisation = lines->constant_polarisation,
                                .cos2_polarisation = lines->cos2_polarisation,
                                .domain_size_nm = options->domain_size_nm};
    if (options->summed)
        q->observed.step_deg = (scan->two_theta_deg[scan->n - 1] - scan->two_theta_deg[0]) / (double)(scan->n - 1);
    if (status == LW_OK)
        status = refine(q, arena, refined, err);
    for (size_t i = 0; i < sizeof q->optics / sizeof *q->optics; i++)
        lw_optics_end(&q->optics[i]);
    return status;
}
