/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Lattice parameters of the powder from the positions of its lines. */
#include "sample/cell_parameters.h"
#include "sample/generalised.h"
#include "sample/method.h"
#include "sample/positions.h"

#include <math.h>
#include <stddef.h>
#include <stdio.h>
#include <string.h>

#define RADIAN (3.14159265358979323846 / 180)
#define SHARED_MOST 0.98 /* multiple correlation above which a displacement can't be told from the cell */
#define LINES_FOR_DISPLACEMENT 4
#define FALL_CHANCE                                                                                          \
    1e-3 /* a fall of chi-square by one parameter rarer than this is evidence of a displacement */
#define BREADTHS_TO_END                                                                                      \
    2.0 /* a line nearer to an end of the scan has a tail cut off, which pulls its position */

typedef struct lattice_options {
    int displacement;
} lattice_options;

enum { AUTO, YES, NO };
static const char *const displacement_choices[] = {"auto", "yes", "no", NULL};

static const lw_option options[] = {{.key = "displacement",
                                     .kind = LW_OPTION_CHOICE,
                                     .standard = "auto",
                                     .choices = displacement_choices,
                                     .offset = offsetof(lattice_options, displacement),
                                     .help = "refine how far this specimen's surface lies from the axis; "
                                             "auto: for flat specimens, where the lines can tell it from the "
                                             "cell or do not fit without it"},
                                    LW_OPTIONS_END};

static void defaults(void *target)
{
    *(lattice_options *)target = (lattice_options){.displacement = AUTO};
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->lines->material == NULL) {
        snprintf(why, size, "the lines do not know their material, whose cell is to be refined");
        return why;
    }
    lw_cell_free free = lw_cell_free_of(profiles->lines->material);
    if (profiles->n >= free.n)
        return NULL;
    snprintf(why, size, "the cell has %zu free parameters and there are %zu lines", free.n, profiles->n);
    return why;
}

/* Calculated positions: cell, then what the calibration and the specimen add. */
typedef struct positions {
    const lw_profiles *profiles;
    size_t n;
    const size_t *use; /* [n] which profiles take part */
    lw_cell_free free;
    lw_cell cell;
    double wavelength;
    const lw_aberration *displacement; /* refined, or NULL */
} positions;

static double radius_of(const positions *m)
{
    return m->profiles->calibration->aberrations.radius_mm;
}

/* Shift at a true 2theta by the calibration and by this specimen's displacement (last of p), and its
 * derivative to 2theta by a central difference: without it, a short range converges slowly. */
static double shift_at(const positions *m, const double *p, double two_theta, double *derivative)
{
    static const double step = 0.01;
    double at[3];
    for (int i = 0; i < 3; i++) {
        double x = two_theta + (i - 1) * step;
        at[i] = lw_position_shift(m->profiles, m->displacement, x);
        if (m->displacement != NULL)
            at[i] += p[m->free.n] * m->displacement->slope(x, radius_of(m));
    }
    *derivative = (at[2] - at[0]) / (2 * step);
    return at[1];
}

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    positions *m = user;
    (void)x_slope;
    size_t n_free = m->free.n, columns = n_free + (m->displacement != NULL);
    lw_cell_free_set(&m->free, p, &m->cell);
    for (size_t i = 0; i < m->n; i++) {
        const lw_reflection *r = &m->profiles->profile[m->use[i]].line->reflection;
        double s = lw_cell_s(&m->cell, r->h, r->k, r->l), d[6];
        double sine = 0.5 * m->wavelength * s;
        if (!(sine > 0 && sine < 1)) {
            value[i] = NAN;
            continue;
        }
        double theta = asin(sine) / RADIAN, two_theta = 2 * theta;
        double d_shift, shift = shift_at(m, p, two_theta, &d_shift);
        double u_scattering;
        value[i] = two_theta + shift + lw_position_scattering(m->profiles, m->use[i], &u_scattering);
        lw_cell_s_slopes(&m->cell, r->h, r->k, r->l, d);
        double per_s = (1 + d_shift) / lw_position_s_slope(s, theta);
        for (size_t j = 0; j < n_free; j++)
            for (int k = 0; k < 6; k++)
                if (m->free.moves[j][k])
                    slopes[i * columns + j] += per_s * d[k];
        if (m->displacement != NULL)
            slopes[i * columns + n_free] = m->displacement->slope(two_theta, radius_of(m));
    }
}

typedef struct answer {
    double p[LW_GENERALISED_MOST];
    lw_generalised_fit fit;
    bool displaced;  /* the displacement was refined */
    const char *why; /* what was decided about it, for the remarks, or NULL */
} answer;

static const lw_line *line_at(const positions *m, size_t i)
{
    return m->profiles->profile[m->use[i]].line;
}

/* Fits the cell, with this specimen's displacement (not NULL) or without. */
static lw_status fit_cell(positions *m, const lw_aberration *displacement, lw_arena *arena, answer *out,
                          lw_error *err)
{
    size_t n = m->n;
    m->displacement = displacement;
    double *y = lw_arena_take(arena, n, sizeof *y, err);
    double *covariance = lw_arena_take(arena, n * n, sizeof *covariance, err);
    const double *all = lw_position_covariance(m->profiles, displacement, arena, err);
    if (y == NULL || covariance == NULL || all == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++) {
        y[i] = line_at(m, i)->two_theta.value;
        for (size_t j = 0; j < n; j++)
            covariance[i * n + j] = all[m->use[i] * m->profiles->n + m->use[j]];
    }
    m->cell = m->profiles->lines->material->cell;
    memset(out, 0, sizeof *out);
    out->displaced = displacement != NULL;
    lw_cell_free_read(&m->free, &m->cell, out->p);
    lw_generalised problem = {.n = n,
                              .m = m->free.n + (displacement != NULL),
                              .y = y,
                              .covariance = covariance,
                              .model = model,
                              .user = m};
    size_t weakest = 0;
    lw_error each = LW_ERROR_NONE;
    lw_status status = lw_generalised_solve(&problem, arena, out->p, &out->fit, &weakest, &each);
    if (status == LW_NOT_SUPPORTED && n >= problem.m && out->fit.iterations == 0 && weakest > 0)
        return lw_fail(err, status, "measure lines of other directions",
                       "the lines measured do not determine %s of the cell",
                       weakest < m->free.n ? m->free.name[weakest] : "displacement beside the parameters");
    if (status != LW_OK)
        *err = each;
    return status;
}

static bool is_flat(const lw_calibration *calibration)
{
    return calibration != NULL && strcmp(calibration->geometry, "reflection") == 0;
}

/* Chance that chi-square falls as far as from `without` to `with` though the specimen lies where the standard
 * lay. The fall counts in units of what scatters about the better fit (F test with one parameter, its
 * denominator's own scatter left out, which the strict limit covers). */
static double chance_of_fall(const answer *without, const answer *with)
{
    double scatter = with->fit.scatter;
    return lw_generalised_p((without->fit.chi2 - with->fit.chi2) / (scatter * scatter), 1);
}

/* Chooses between the two fits by what the lines can tell and by how well each stands. */
static lw_status choose(positions *m, const lw_aberration *displacement, lw_arena *arena, answer *out,
                        lw_error *err)
{
    answer with, without;
    lw_error each = LW_ERROR_NONE;
    size_t needed = m->free.n + 2 > LINES_FOR_DISPLACEMENT ? m->free.n + 2 : LINES_FOR_DISPLACEMENT;
    lw_status status = m->n < needed ? LW_NOT_SUPPORTED : fit_cell(m, displacement, arena, &with, &each);
    if (status == LW_OUT_OF_MEMORY) {
        *err = each;
        return status;
    }
    if (status == LW_OK && with.fit.shared[m->free.n] < SHARED_MOST) {
        *out = with;
        out->why = "this specimen's displacement was refined";
        return LW_OK;
    }
    lw_status plain = fit_cell(m, NULL, arena, &without, err);
    if (plain != LW_OK)
        return plain;
    if (status == LW_OK && chance_of_fall(&without, &with) < FALL_CHANCE) {
        *out = with;
        m->displacement = displacement;
        out->why = "this specimen's displacement was refined: the lines hardly tell it from the cell, which "
                   "enlarges the uncertainty, but do not fit without it";
        return LW_OK;
    }
    *out = without;
    out->why = m->n < needed
                   ? "too few lines to refine this specimen's displacement: the calibration's was used, "
                     "a difference is not in the uncertainty"
                   : "the lines cannot tell this specimen's displacement from the cell and fit without "
                     "it: the calibration's was used, a difference is not in the uncertainty";
    return LW_OK;
}

static lw_status decide(positions *m, int wanted, lw_arena *arena, answer *out, lw_error *err)
{
    const lw_calibration *calibration = m->profiles->calibration;
    const lw_aberration *displacement = lw_aberration_named("displacement");
    if (wanted == YES && (calibration == NULL || displacement == NULL))
        return lw_fail(err, LW_NOT_SUPPORTED, "give a calibration",
                       "the specimen's displacement needs the goniometer radius of a calibration");
    if (wanted == AUTO && displacement != NULL && is_flat(calibration))
        return choose(m, displacement, arena, out, err);
    lw_status status = fit_cell(m, wanted == YES ? displacement : NULL, arena, out, err);
    if (wanted == NO && is_flat(calibration))
        out->why =
            "this specimen was taken to lie where the standard lay; a difference is not in the uncertainty";
    return status;
}

/* Whether a line's tails were measured on both sides. */
static bool is_whole(const lw_profiles *profiles, const lw_line *line)
{
    const lw_scan *scan = profiles->lines->scan;
    if (scan == NULL || scan->n < 2)
        return true;
    double room = fmin(line->two_theta.value - scan->two_theta_deg[0],
                       scan->two_theta_deg[scan->n - 1] - line->two_theta.value);
    return room >= BREADTHS_TO_END * line->breadth.value;
}

/* The fit with the lines that are whole; with all lines where those do not suffice. */
static lw_status fit_whole(positions *m, int wanted, lw_arena *arena, answer *out, lw_error *err)
{
    size_t n = m->profiles->n, whole = 0;
    size_t *use = lw_arena_take(arena, n, sizeof *use, err);
    if (use == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < n; i++)
        if (is_whole(m->profiles, m->profiles->profile[i].line))
            use[whole++] = i;
    m->use = use;
    m->n = whole;
    if (whole < n && whole > m->free.n) {
        lw_error each = LW_ERROR_NONE;
        lw_status status = decide(m, wanted, arena, out, &each);
        if (status == LW_OK)
            return LW_OK;
        if (status != LW_NOT_SUPPORTED) {
            *err = each;
            return status;
        }
    }
    for (size_t i = 0; i < n; i++)
        use[i] = i;
    m->n = n;
    return decide(m, wanted, arena, out, err);
}

/* Volume with its uncertainty; the slopes by central differences over a millionth. */
static lw_quantity volume_of(const positions *m, const answer *a)
{
    double slope[LW_CELL_FREE_MOST], variance = 0;
    lw_cell cell = m->cell;
    for (size_t i = 0; i < m->free.n; i++) {
        double p[LW_GENERALISED_MOST], step = 1e-6 * a->p[i];
        memcpy(p, a->p, sizeof p);
        p[i] = a->p[i] + step;
        lw_cell_free_set(&m->free, p, &cell);
        double high = lw_cell_volume(&cell);
        p[i] = a->p[i] - step;
        lw_cell_free_set(&m->free, p, &cell);
        slope[i] = (high - lw_cell_volume(&cell)) / (2 * step);
    }
    lw_cell_free_set(&m->free, a->p, &cell);
    for (size_t i = 0; i < m->free.n; i++)
        for (size_t j = 0; j < m->free.n; j++)
            variance += slope[i] * a->fit.covariance[i][j] * slope[j];
    return lw_quantity_of(lw_cell_volume(&cell), sqrt(fmax(0, variance)) * a->fit.scatter, "nm^3");
}

static void tell_parameters(const positions *m, const answer *a, lw_node *result, lw_error *err)
{
    const lw_cell *stated = &m->profiles->lines->material->cell;
    double start[LW_CELL_FREE_MOST];
    lw_cell_free_read(&m->free, stated, start);
    for (size_t i = 0; i < m->free.n; i++) {
        bool edge = m->free.name[i][1] == '\0';
        lw_add_quantity(
            result, m->free.name[i],
            lw_quantity_of(a->p[i], sqrt(a->fit.covariance[i][i]) * a->fit.scatter, edge ? "nm" : "deg"),
            edge ? "Edge of the unit cell at the temperature of the measurement, from the lines' positions."
                 : "Angle of the unit cell at the temperature of the measurement, from the lines' positions.",
            err);
    }
    lw_add_quantity(result, "volume", volume_of(m, a), "Volume of the unit cell.", err);
    lw_node *change = lw_add_group(result, "relative_change", err);
    const double stated_u[3] = {stated->u_a, stated->u_b, stated->u_c};
    for (size_t i = 0; i < m->free.n; i++) {
        size_t which = 0;
        while (which < 3 && !m->free.moves[i][which])
            which++;
        if (which == 3)
            continue;
        double u = hypot(sqrt(a->fit.covariance[i][i]) * a->fit.scatter, stated_u[which]);
        lw_add_quantity(change, m->free.name[i], lw_quantity_of(a->p[i] / start[i] - 1, u / start[i], ""),
                        "Relative difference from the edge that the material states.", err);
    }
}

static bool takes_part(const positions *m, size_t profile)
{
    for (size_t i = 0; i < m->n; i++)
        if (m->use[i] == profile)
            return true;
    return false;
}

/* The lines that took part; those that did not are named in the remarks. */
static void tell_lines(const positions *m, const answer *a, lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "lines", err);
    for (size_t i = 0; i < m->n; i++) {
        const lw_line *line = line_at(m, i);
        const lw_reflection *r = &line->reflection;
        char text[24];
        lw_node *node = lw_add_group(list, NULL, err);
        lw_add_text(node, "hkl", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        lw_add_quantity(node, "two_theta", line->two_theta, "Position as observed, aberrations included.",
                        err);
        lw_add_quantity(node, "residual", lw_quantity_of(a->fit.residual[i], a->fit.u[i], "deg"),
                        "Observed position minus that of the refined cell with all aberrations.", err);
    }
}

/* Names the lines whose tails are cut off, and what was done with them. */
static void tell_cut(const positions *m, lw_node *remarks, lw_error *err)
{
    char names[160] = "", hkl[24], text[320];
    size_t used = 0, cut = 0;
    bool left_out = m->n < m->profiles->n;
    for (size_t i = 0; i < m->profiles->n; i++) {
        const lw_line *line = m->profiles->profile[i].line;
        const lw_reflection *r = &line->reflection;
        if (left_out ? takes_part(m, i) : is_whole(m->profiles, line))
            continue;
        lw_hkl_text(r->h, r->k, r->l, hkl, sizeof hkl);
        if (used + strlen(hkl) + 3 < sizeof names)
            used += (size_t)snprintf(names + used, sizeof names - used, "%s%s", cut > 0 ? ", " : "", hkl);
        cut++;
    }
    if (cut == 0)
        return;
    snprintf(text, sizeof text, "%s %s within %.0f integral breadths of the scan's end: %s",
             cut == 1 ? "line" : "lines", names, BREADTHS_TO_END,
             left_out ? "left out, since a cut tail pulls the position"
                      : "used, since the others do not determine the cell; a cut tail pulls the position");
    lw_add_text(remarks, NULL, text, err);
}

/* Says so where the shift by the atoms' scattering is more than half of a position's uncertainty. */
static void tell_scattering(const positions *m, lw_node *remarks, lw_error *err)
{
    double u, largest = 0;
    bool matters = false;
    for (size_t i = 0; i < m->n; i++) {
        double shift = lw_position_scattering(m->profiles, m->use[i], &u);
        matters |= fabs(shift) > 0.5 * line_at(m, i)->two_theta.u;
        largest = fmax(largest, fabs(shift));
    }
    if (!matters)
        return;
    char text[200];
    snprintf(text, sizeof text,
             "the atoms' scattering falls across these broad lines: their shift by it, up to %.1g deg, was "
             "taken off "
             "as -0.25(9) nm b^2/(2 pi)",
             largest);
    lw_add_text(remarks, NULL, text, err);
}

static void tell(const positions *m, const answer *a, lw_node *result, lw_error *err)
{
    const lw_profiles *profiles = m->profiles;
    const lw_generalised_fit *fit = &a->fit;
    tell_parameters(m, a, result, err);
    lw_add_flag(result, "displacement_refined", a->displaced, err);
    if (a->displaced) {
        size_t at = m->free.n;
        lw_add_quantity(result, "displacement",
                        lw_quantity_of(a->p[at], sqrt(fit->covariance[at][at]) * fit->scatter, "mm"),
                        m->displacement->definition, err);
        lw_add_number(result, "displacement_correlation", fit->shared[at], err);
    }
    lw_add_quantity(result, "wavelength", lw_quantity_of(m->wavelength, 0, "nm"),
                    "Wavelength that the positions refer to; its own uncertainty is not in the cell's.", err);
    lw_add_number(result, "chi2", fit->chi2, err);
    lw_add_number(result, "degrees_of_freedom", (double)fit->degrees, err);
    if (fit->degrees > 0) {
        lw_add_number(result, "chi2_per_degree", fit->chi2 / (double)fit->degrees, err);
        lw_add_number(result, "chance", fit->p, err);
    }
    lw_add_number(result, "scatter_factor", fit->scatter, err);
    tell_lines(m, a, result, err);
    lw_node *remarks = lw_add_list(result, "remarks", err);
    if (a->why != NULL)
        lw_add_text(remarks, NULL, a->why, err);
    tell_cut(m, remarks, err);
    tell_scattering(m, remarks, err);
    if (fit->degrees > 0 && fit->scatter > 1 && fit->p < 0.01) {
        char text[240];
        snprintf(text, sizeof text,
                 "positions scatter %.1f times their u about the cell (chance %.1g): u enlarged by that; "
                 "faults and "
                 "stress shift lines by direction",
                 fit->scatter, fit->p);
        lw_add_text(remarks, NULL, text, err);
    }
    if (profiles->calibration == NULL)
        lw_add_text(remarks, NULL, "no calibration: the positions were taken as they stand", err);
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    const lattice_options *o = given;
    const lw_radiation *radiation =
        profiles->calibration != NULL ? &profiles->calibration->radiation : &profiles->lines->radiation;
    positions m = {.profiles = profiles,
                   .free = lw_cell_free_of(profiles->lines->material),
                   .wavelength = lw_radiation_wavelength(radiation)};
    answer a;
    lw_status status = fit_whole(&m, o->displacement, arena, &a, err);
    if (status == LW_OK) {
        tell(&m, &a, result, err);
        status = err->status;
    }
    return status;
}

const lw_method lw_method_lattice = {
    .name = "lattice",
    .title = "Lattice parameters",
    .purpose = "cell of the powder from the positions of all its lines",
    .assumes = "The lines stand where one cell puts them: no stacking faults, no stress. The calibration was "
               "measured on the same mount, but for the height of the specimen.",
    .source = "least squares on 2theta with the full covariance of positions and aberrations: Wilson (1963) "
              "Mathematical Theory of X-ray Powder Diffractometry; Cohen (1935) Rev. Sci. Instrum. 6, 68",
    .options = options,
    .options_size = sizeof(lattice_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
