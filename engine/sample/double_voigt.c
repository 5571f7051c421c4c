/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Double Voigt: size and strain profiles are both Voigts, told apart by how the parts of the lines go with s. */
#include "sample/breadths.h"
#include "sample/generalised.h"
#include "sample/method.h"
#include "sample/reading.h"
#include "sample/shared.h"

#include "numeric/statistics.h"
#include "numeric/voigt.h"

#include <math.h>
#include <stdio.h>

/* Of a line at s:  lorentz = SL + DL s^2,  gauss^2 = SG2 + DG2 s^2. */
enum { SL, DL, SG2, DG2, PARAMETERS };

static const lw_option options[] = {LW_OPTIONS_END};

static void defaults(void *target)
{
    (void)target;
}

static bool usable(const lw_profile *p)
{
    return p->gauss_s.kind == LW_VALUE && p->lorentz_s.kind == LW_VALUE && isfinite(p->gauss_s.value) &&
           isfinite(p->lorentz_s.value) && p->gauss_s.u > 0 && p->lorentz_s.u > 0 && isfinite(p->gauss_s.u) &&
           isfinite(p->lorentz_s.u);
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    size_t n = 0;
    double least = INFINITY, most = 0;
    for (size_t i = 0; i < profiles->n; i++)
        if (usable(&profiles->profile[i])) {
            n++;
            least = fmin(least, profiles->profile[i].s_per_nm);
            most = fmax(most, profiles->profile[i].s_per_nm);
        }
    if (n >= 2 && most > 1.05 * least)
        return NULL;
    snprintf(why, size, "two lines at different angles whose Gaussian and Lorentzian parts have uncertainties are needed, "
                        "%zu found",
             n);
    return why;
}

typedef struct parts {
    size_t n;                /* lines */
    const lw_profile **line; /* [n] */
    double *y, *covariance;  /* [2n]: Lorentzian breadths, then squares of Gaussian ones; [2n][2n] */
    double *scale;           /* [2n] slopes of y to the breadths */
    size_t *row;             /* [2n] of the breadths in the profiles' covariance */
} parts;

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const parts *m = user;
    (void)x_slope; /* positions are known far better than breadths */
    for (size_t i = 0; i < m->n; i++) {
        double s2 = m->line[i]->s_per_nm * m->line[i]->s_per_nm;
        value[i] = p[SL] + p[DL] * s2;
        slopes[i * PARAMETERS + SL] = 1;
        slopes[i * PARAMETERS + DL] = s2;
        value[m->n + i] = p[SG2] + p[DG2] * s2;
        slopes[(m->n + i) * PARAMETERS + SG2] = 1;
        slopes[(m->n + i) * PARAMETERS + DG2] = s2;
    }
}

static lw_status gather(const lw_profiles *profiles, lw_arena *arena, parts *out, lw_error *err)
{
    size_t all = profiles->n, stride = profiles->n_covariance;
    *out = (parts){.line = lw_arena_take(arena, all, sizeof *out->line, err),
                   .y = lw_arena_take(arena, 2 * all, sizeof(double), err),
                   .covariance = lw_arena_take(arena, 4 * all * all, sizeof(double), err)};
    double *scale = out->scale = lw_arena_take(arena, 2 * all, sizeof *scale, err);
    size_t *row = out->row = lw_arena_take(arena, 2 * all, sizeof *row, err);
    if (err->status != LW_OK)
        return err->status;
    for (size_t i = 0; i < all; i++)
        if (usable(&profiles->profile[i]))
            out->line[out->n++] = &profiles->profile[i];
    size_t n = out->n;
    for (size_t i = 0; i < n; i++) {
        const lw_profile *p = out->line[i];
        out->y[i] = p->lorentz_s.value;
        out->y[n + i] = p->gauss_s.value * p->gauss_s.value;
        scale[i] = 1;
        scale[n + i] = 2 * fmax(p->gauss_s.value, p->gauss_s.u); /* at 0 the square has no slope, but an uncertainty */
        row[i] = p->at_lorentz;
        row[n + i] = p->at_gauss;
    }
    for (size_t i = 0; i < 2 * n; i++)
        for (size_t j = 0; j < 2 * n; j++) {
            double c = 0;
            if (profiles->covariance != NULL && row[i] < stride && row[j] < stride)
                c = profiles->covariance[row[i] * stride + row[j]];
            else if (i == j)
                c = pow(i < n ? out->line[i]->lorentz_s.u : out->line[i - n]->gauss_s.u, 2);
            out->covariance[i * 2 * n + j] = scale[i] * c * scale[j];
        }
    return LW_OK;
}

/* ------------------------------------------------------------------------------------------------ quantities */

/* 1/breadth of the size Voigt: exp(k^2) erfc(k)/beta_SG, k = beta_SL/(sqrt(pi) beta_SG) (Langford 1978). */
static double size_volume(const double *p)
{
    double gauss = sqrt(fmax(p[SG2], 0)), lorentz = fmax(p[SL], 0);
    if (!(gauss > 0) && !(lorentz > 0))
        return INFINITY;
    return 1 / lw_voigt_breadth(2 * gauss * sqrt(M_LN2 / M_PI), 2 * lorentz / M_PI);
}

static double size_area(const double *p)
{
    return p[SL] > 0 ? 0.5 / p[SL] : INFINITY;
}

/* <eps^2(L)> = DG2/(2 pi) + DL/(pi^2 L). */
static double strain_square(const double *p, double length)
{
    return p[DG2] / (2 * M_PI) + p[DL] / (M_PI * M_PI * length);
}

/* Slopes of a function of the parameters by central differences of a thousandth of each u. */
static void slopes_of(const lw_generalised_fit *fit, const double *p, double (*of)(const double *), double slope[PARAMETERS])
{
    for (int i = 0; i < PARAMETERS; i++) {
        double up[PARAMETERS], down[PARAMETERS], step = 1e-3 * sqrt(fmax(fit->covariance[i][i], 0));
        for (int j = 0; j < PARAMETERS; j++)
            up[j] = down[j] = p[j];
        up[i] += step;
        down[i] -= step;
        slope[i] = step > 0 ? (of(up) - of(down)) / (2 * step) : 0;
    }
}

static double u_of(const lw_generalised_fit *fit, const double *p, double (*of)(const double *))
{
    double slope[PARAMETERS], var = 0;
    slopes_of(fit, p, of, slope);
    for (int i = 0; i < PARAMETERS; i++)
        for (int j = 0; j < PARAMETERS; j++)
            var += slope[i] * slope[j] * fit->covariance[i][j];
    return fit->scatter * sqrt(fmax(var, 0));
}

/* rms strain over half the volume-weighted size, which moves with the parameters too. */
static double strain_at_half(const double *p)
{
    return sqrt(fmax(strain_square(p, size_volume(p) / 2), 0));
}

static lw_status share(const lw_profiles *profiles, const parts *m, const lw_generalised_fit *fit, const double *p,
                       lw_arena *arena, lw_node *result, lw_error *err)
{
    static const struct {
        const char *field;
        double (*of)(const double *);
    } told[] = {{"size_volume", size_volume}, {"size_area", size_area}, {"strain_rms", strain_at_half}};
    for (size_t i = 0; i < sizeof told / sizeof *told; i++) {
        const lw_node *node = lw_node_get(result, told[i].field);
        double slope[PARAMETERS];
        if (node == NULL || node->quantity.kind != LW_VALUE)
            continue;
        slopes_of(fit, p, told[i].of, slope);
        lw_status status = lw_shared_tell(profiles, told[i].field, fit, 2 * m->n, PARAMETERS, slope, m->row, m->scale, arena,
                                          result, err);
        if (status != LW_OK)
            return status;
    }
    return LW_OK;
}

static bool strain_at(const lw_generalised_fit *fit, const double *p, double length, double *value, double *u)
{
    double square = strain_square(p, length), by_gauss = 1 / (2 * M_PI), by_lorentz = 1 / (M_PI * M_PI * length);
    double var = by_gauss * by_gauss * fit->covariance[DG2][DG2] + 2 * by_gauss * by_lorentz * fit->covariance[DG2][DL] +
                 by_lorentz * by_lorentz * fit->covariance[DL][DL];
    double u_square = fit->scatter * sqrt(fmax(var, 0));
    *value = sqrt(fmax(square, 0));
    *u = *value > 0 ? u_square / (2 * *value) : sqrt(u_square);
    return square > 2 * u_square;
}

static const char SIZE_VOLUME[] = "Volume-weighted mean column length: reciprocal of the size Voigt's integral breadth.";
static const char SIZE_AREA[] = "Area-weighted mean column length: reciprocal of twice the size's Lorentzian breadth.";
static const char STRAIN[] = "Root mean square strain over columns of half the volume-weighted size.";
static const char APPARENT[] = "sqrt(pi/2) times the rms strain: as a breadth shows it (Stokes & Wilson 1944).";

static void tell(const lw_generalised_fit *fit, const double *p, const lw_readings *readings, lw_node *result,
                 lw_node *remarks, lw_error *err)
{
    double volume = size_volume(p), u_volume = u_of(fit, p, size_volume), u_sl = fit->scatter * sqrt(fit->covariance[SL][SL]);
    bool resolved = isfinite(volume) && volume > 2 * u_volume;
    if (resolved) {
        lw_quantity size = lw_quantity_of(volume, u_volume, "nm");
        lw_readings_widen(readings, LW_READ_SIZE_VOLUME, 0, &size, result, err);
        lw_add_quantity(result, "size_volume", size, SIZE_VOLUME, err);
    } else {
        double inverse = isfinite(volume) ? 1 / volume : 0, u = isfinite(volume) ? u_volume / (volume * volume) : u_sl;
        lw_add_quantity(result, "size_volume", lw_lower_limit(1 / (inverse + LW_ONE_SIDED_95 * fmax(u, 1e-9)), 0.95, "nm"),
                        SIZE_VOLUME, err);
    }
    if (p[SL] > 2 * u_sl) {
        lw_quantity size = lw_quantity_of(size_area(p), u_sl * 2 * size_area(p) * size_area(p), "nm");
        lw_readings_widen(readings, LW_READ_SIZE_AREA, 0, &size, result, err);
        lw_add_quantity(result, "size_area", size, SIZE_AREA, err);
    } else
        lw_add_quantity(result, "size_area", lw_lower_limit(0.5 / (fmax(p[SL], 0) + LW_ONE_SIDED_95 * u_sl), 0.95, "nm"), SIZE_AREA,
                        err);
    double half = resolved ? volume / 2 : 10, value, u;
    bool strained = strain_at(fit, p, half, &value, &u);
    if (strained && resolved)
        u = u_of(fit, p, strain_at_half); /* half the size moves as well */
    lw_quantity rms = strained ? lw_quantity_of(value, u, "")
                               : lw_upper_limit(sqrt(fmax(value * value, 0) + LW_ONE_SIDED_95 * 2 * fmax(value, u) * u), 0.95, "");
    lw_readings_widen(readings, LW_READ_STRAIN, 0, &rms, result, err);
    lw_add_quantity(result, "strain_rms", rms, STRAIN, err);
    rms.value /= LW_RMS_PER_APPARENT;
    rms.u /= LW_RMS_PER_APPARENT;
    lw_add_quantity(result, "strain_apparent", rms, APPARENT, err);
    static const double nice[] = {1, 2, 3, 4, 5, 6, 8, 10, 15, 20, 30, 40, 60, 80, 100};
    lw_node *list = lw_add_list(result, "strain_rms_at", err);
    for (size_t i = 0; strained && i < sizeof nice / sizeof *nice && nice[i] <= (resolved ? 1.3 * volume : 20); i++) {
        if (!strain_at(fit, p, nice[i], &value, &u))
            continue;
        lw_node *row = lw_add_group(list, NULL, err);
        lw_add_number(row, "length", nice[i], err);
        lw_add_number(row, "value", value, err);
        lw_add_number(row, "u", u, err);
    }

    static const char *const names[] = {"size_lorentz", "strain_lorentz_per_s2", "size_gauss_squared",
                                        "strain_gauss_squared_per_s2"};
    static const char *const units[] = {"nm^-1", "nm", "nm^-2", ""};
    static const char *const meanings[] = {"Lorentzian integral breadth of the size Voigt.",
                                           "Lorentzian integral breadth of the strain Voigt over s^2.",
                                           "Square of the Gaussian integral breadth of the size Voigt.",
                                           "Square of the Gaussian integral breadth of the strain Voigt over s^2."};
    lw_node *group = lw_add_group(result, "parts", err);
    for (int i = 0; i < PARAMETERS; i++)
        lw_add_quantity(group, names[i], lw_quantity_of(p[i], fit->scatter * sqrt(fit->covariance[i][i]), units[i]),
                        meanings[i], err);
    lw_node *rows = lw_add_list(lw_add_group(result, "covariance", err), "rows", err);
    for (int i = 0; i < PARAMETERS; i++) {
        double row[PARAMETERS];
        for (int j = 0; j < PARAMETERS; j++)
            row[j] = fit->scatter * fit->scatter * fit->covariance[i][j];
        lw_add_vector(rows, NULL, row, PARAMETERS, "", err);
    }
    lw_node *statistics = lw_add_group(result, "statistics", err);
    lw_add_number(statistics, "chi2", fit->chi2, err);
    lw_add_number(statistics, "degrees_of_freedom", (double)fit->degrees, err);
    lw_add_number(statistics, "probability", fit->p, err);
    lw_add_number(statistics, "scatter_factor", fit->scatter, err);

    char text[320];
    for (int i = 0; i < PARAMETERS; i++)
        if (p[i] < -2 * fit->scatter * sqrt(fit->covariance[i][i])) {
            snprintf(text, sizeof text,
                     "%s comes out negative by more than 2 u: the lines' parts don't go with s as two Voigts would "
                     "(anisotropy, or a shape that is no Voigt)",
                     names[i]);
            lw_add_text(remarks, NULL, text, err);
        }
    /* A''(0) = 4 SL^2 - 2 pi SG2 is the density of the shortest columns (Balzar & Ledbetter 1993) */
    if (resolved && p[SL] > 0 && 4 * p[SL] * p[SL] < 2 * M_PI * p[SG2])
        lw_add_text(remarks, NULL,
                    "the size Voigt has a negative number of short columns: its size_area is a matter of the Voigt's shape "
                    "near L = 0 more than of the powder",
                    err);
    if (fit->degrees > 0 && fit->p < 0.0027) {
        snprintf(text, sizeof text,
                 "the lines scatter about the two Voigts (chi-square %.3g for %zu degrees of freedom): uncertainties were "
                 "enlarged %.1f times; breadths that depend on direction do that",
                 fit->chi2, fit->degrees, fit->scatter);
        lw_add_text(remarks, NULL, text, err);
    }
}

static void draw(const parts *m, const lw_generalised_fit *fit, const double *p, lw_arena *arena, lw_node *result,
                 lw_error *err)
{
    size_t n = m->n;
    double *s2 = lw_arena_take(arena, n, sizeof *s2, err), most = 0;
    if (s2 == NULL)
        return;
    for (size_t i = 0; i < n; i++) {
        s2[i] = m->line[i]->s_per_nm * m->line[i]->s_per_nm;
        most = fmax(most, s2[i]);
    }
    lw_node *figure = lw_add_group(result, "figure", err);
    lw_add_text(figure, "name", "double_voigt", err);
    lw_add_text(figure, "title", "Parts of the lines against s^2, double Voigt", err);
    lw_add_text(figure, "caption",
                "Lorentzian integral breadths (above) and squares of Gaussian ones (below) of the sample's lines: starts are "
                "size, slopes strain.",
                err);
    static const char *const axes[] = {"x", "y", "lower_y"};
    static const char *const labels[] = {"s^2", "Lorentzian", "Gaussian^2"};
    static const char *const units[] = {"nm^-2", "nm^-1", "nm^-2"};
    for (int i = 0; i < 3; i++) {
        lw_node *axis = lw_add_group(figure, axes[i], err);
        lw_add_text(axis, "label", labels[i], err);
        lw_add_text(axis, "unit", units[i], err);
    }
    lw_node *series = lw_add_list(figure, "series", err);
    for (int part = 0; part < 2; part++) {
        size_t first = part == 0 ? 0 : n;
        double ends[2] = {0, 1.05 * most}, start = p[part == 0 ? SL : SG2], slope = p[part == 0 ? DL : DG2];
        double line[2] = {start, start + slope * ends[1]};
        lw_node *points = lw_add_group(series, NULL, err), *fitted = lw_add_group(series, NULL, err);
        lw_add_text(points, "kind", "points", err);
        lw_add_text(points, "label", part == 0 ? "lines" : "", err);
        lw_add_number(points, "panel", part, err);
        lw_add_vector(points, "x", s2, n, "", err);
        lw_add_vector(points, "y", m->y + first, n, "", err);
        lw_add_vector(points, "u_y", fit->u + first, n, "", err);
        lw_add_text(fitted, "kind", "line", err);
        lw_add_text(fitted, "label", part == 0 ? "fit" : "", err);
        lw_add_number(fitted, "panel", part, err);
        lw_add_vector(fitted, "x", ends, 2, "", err);
        lw_add_vector(fitted, "y", line, 2, "", err);
    }
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *given, lw_node *result, lw_error *err)
{
    (void)given;
    parts m;
    lw_generalised_fit fit;
    lw_status status = gather(profiles, arena, &m, err);
    double p[PARAMETERS] = {0};
    if (status == LW_OK) {
        p[SL] = m.y[0];
        p[SG2] = m.y[m.n];
        lw_generalised problem = {
            .n = 2 * m.n, .m = PARAMETERS, .y = m.y, .covariance = m.covariance, .model = model, .user = &m};
        status = lw_generalised_solve(&problem, arena, p, &fit, NULL, err);
    }
    lw_breadths breadths;
    lw_readings readings;
    if (status == LW_OK)
        status = lw_breadths_gather(profiles, arena, &breadths, err);
    if (status == LW_OK)
        status = lw_breadths_read(&breadths, arena, &readings, err);
    if (status == LW_OK) {
        lw_node *remarks = lw_add_list(result, "remarks", err);
        tell(&fit, p, &readings, result, remarks, err);
        status = share(profiles, &m, &fit, p, arena, result, err);
        lw_readings_remark(result, remarks, err);
        draw(&m, &fit, p, arena, result, err);
        status = status != LW_OK ? status : err->status;
    }
    return status;
}

const lw_method lw_method_double_voigt = {
    .name = "double_voigt",
    .title = "Double Voigt",
    .purpose = "size and strain Voigts from the Gaussian and Lorentzian parts of two or more lines",
    .assumes = "Size and strain profiles are Voigts, and so are the lines; both are the same in every direction. The size "
               "Voigt's Lorentzian part decides size_area, so the tails must be measured far out.",
    .source = "Langford (1980) NBS Spec. Publ. 567, 255; Balzar (1992) J. Appl. Cryst. 25, 559; Balzar & Ledbetter (1993) J. "
              "Appl. Cryst. 26, 97",
    .options = options,
    .options_size = 0,
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
