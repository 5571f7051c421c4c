/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Scherrer: each line's breadth read as size alone. */
#include "sample/scherrer.h"

#include "numeric/statistics.h"
#include "physics/scherrer.h"
#include "sample/breadths.h"
#include "sample/method.h"
#include "sample/shared.h"

#include <math.h>
#include <stddef.h>
#include <stdio.h>

#define CHANCE_OF_3U 0.0026997960632601866

typedef struct scherrer_options {
    int shape;
    int breadth;
} scherrer_options;

enum { INTEGRAL, FWHM };
static const char *const breadth_choices[] = {"integral", "fwhm", NULL};
static const char *const shape_choices[] = {"column", "sphere", "cube", "octahedron", "tetrahedron", NULL};
static const lw_shape shape_of[] = {LW_SHAPE_COLUMN, LW_SHAPE_SPHERE, LW_SHAPE_CUBE, LW_SHAPE_OCTAHEDRON,
                                    LW_SHAPE_TETRAHEDRON};

static const lw_option options[] = {
    {.key = "shape",
     .kind = LW_OPTION_CHOICE,
     .standard = "column",
     .choices = shape_choices,
     .offset = offsetof(scherrer_options, shape),
     .help = "what the size is of: column = volume-weighted column length (K = 1), else the cube root of the "
             "volume of crystallites of that shape"},
    {.key = "breadth",
     .kind = LW_OPTION_CHOICE,
     .standard = "integral",
     .choices = breadth_choices,
     .offset = offsetof(scherrer_options, breadth),
     .help = "the breadth that K belongs to; fwhm needs a shape"},
    LW_OPTIONS_END};

static void defaults(void *target)
{
    *(scherrer_options *)target = (scherrer_options){.shape = 0, .breadth = INTEGRAL};
}

static const char *lacks(const lw_profiles *profiles, char *why, size_t size)
{
    if (profiles->n >= 1)
        return NULL;
    snprintf(why, size, "one line is needed, none found");
    return why;
}

static lw_quantity size_of(double breadth, double u, bool resolved, double K)
{
    if (!resolved)
        return lw_lower_limit(K / (fmax(0, breadth) + LW_ONE_SIDED_95 * u), 0.95, "nm");
    return lw_quantity_of(K / breadth, K * u / (breadth * breadth), "nm");
}

lw_quantity lw_scherrer_size(const lw_profile *profile, double K)
{
    lw_quantity breadth = profile->breadth_s;
    if (breadth.kind == LW_UPPER_LIMIT)
        return lw_lower_limit(K / breadth.value, breadth.confidence, "nm");
    return size_of(breadth.value, breadth.u, profile->resolved && breadth.value > 0, K);
}

/* Observations beta_i = K_i/D and their covariance. */
typedef struct sizes {
    size_t n;
    double *K;
} sizes;

static void model(void *user, const double *p, double *value, double *slopes, double *x_slope)
{
    const sizes *m = user;
    (void)x_slope; /* the breadth on the s axis of a size alone does not depend on the angle */
    for (size_t i = 0; i < m->n; i++) {
        value[i] = m->K[i] * p[0];
        slopes[i] = m->K[i];
    }
}

/* Replaces integral breadths by FWHM: values and covariance through the Gaussian and Lorentzian parts. */
static lw_status use_fwhm(const lw_profiles *profiles, lw_breadths *breadths, lw_arena *arena, lw_error *err)
{
    size_t n = breadths->n, all = profiles->n_covariance;
    double *slopes = lw_arena_take(arena, 2 * n, sizeof *slopes, err);
    if (slopes == NULL)
        return LW_OUT_OF_MEMORY;
    if (profiles->covariance == NULL)
        return lw_fail(
            err, LW_NOT_SUPPORTED, "use breadth = \"integral\"",
            "the profiles carry no covariance of their Gaussian and Lorentzian parts, which the FWHM "
            "needs");
    for (size_t i = 0; i < n; i++)
        breadths->beta[i] = lw_breadths_fwhm(breadths->profile[i], slopes + 2 * i);
    for (size_t i = 0; i < n; i++)
        for (size_t j = 0; j < n; j++) {
            const lw_profile *a = breadths->profile[i], *b = breadths->profile[j];
            const size_t at[2] = {a->at_gauss, a->at_lorentz}, bt[2] = {b->at_gauss, b->at_lorentz};
            double sum = 0;
            for (size_t k = 0; k < 2; k++)
                for (size_t l = 0; l < 2; l++)
                    if (at[k] < all && bt[l] < all)
                        sum +=
                            slopes[2 * i + k] * profiles->covariance[at[k] * all + bt[l]] * slopes[2 * j + l];
            breadths->covariance[i * n + j] = sum;
        }
    return LW_OK;
}

static const char *size_definition(const scherrer_options *given)
{
    switch (shape_of[given->shape]) {
    case LW_SHAPE_COLUMN:
        return "Volume-weighted mean column length along the diffraction vector, all breadth read as size.";
    case LW_SHAPE_SPHERE:
        return "Cube root of the volume of spherical crystallites of one size, all breadth read as size.";
    case LW_SHAPE_CUBE: return "Edge of cubic crystallites of one size, all breadth read as size.";
    case LW_SHAPE_OCTAHEDRON:
        return "Cube root of the volume of octahedral crystallites of one size, all breadth read as size.";
    case LW_SHAPE_TETRAHEDRON:
        return "Cube root of the volume of tetrahedral crystallites of one size, all breadth read as size.";
    default: return NULL;
    }
}

/* What the constant chosen makes of the size. */
static const char *meaning_of_K(const scherrer_options *given)
{
    switch (shape_of[given->shape]) {
    case LW_SHAPE_COLUMN:
        return "K = 1 on the integral breadth: the size is the volume-weighted column length; a sphere of diameter D reads as "
               "3 D/4, a cube along its edge as the edge";
    case LW_SHAPE_SPHERE:
        return given->breadth == INTEGRAL
                   ? "K = 1.0747 on the integral breadth: the size is the cube root of a sphere's volume, 0.806 of its diameter"
                   : "K = 0.8920 on the FWHM: the size is the cube root of a sphere's volume, 0.806 of its diameter; it holds "
                     "for spheres of one size, whose line is no Voigt";
    default:
        return "K depends on the line: the size is the cube root of the crystal's volume, for crystals of this shape and one "
               "size";
    }
}

static void remark(const lw_breadths *breadths, const lw_generalised_fit *fit, lw_arena *arena,
                   lw_node *remarks, lw_error *err)
{
    char text[400];
    if (fit->degrees == 0 || fit->p >= CHANCE_OF_3U)
        return;
    lw_breadth_fit straight;
    lw_error none = LW_ERROR_NONE;
    const char *reason = "breadths depend on direction, or the instrument's share is wrong";
    if (lw_breadths_fit(breadths, LW_FORM_LORENTZIAN, arena, &straight, &none) == LW_OK &&
        straight.p[1] > 3 * sqrt(straight.fit.covariance[1][1]))
        reason = straight.fit.p < CHANCE_OF_3U
                     ? "breadths grow with s, which strain does, and scatter beyond that"
                     : "breadths grow with s, which strain does";
    snprintf(text, sizeof text, "the lines' sizes disagree (chi-square %.3g, %zu degrees of freedom): %s",
             fit->chi2, fit->degrees, reason);
    lw_add_text(remarks, NULL, text, err);
}

static lw_status list_lines(const lw_breadths *breadths, const double *K, const scherrer_options *given,
                            lw_node *result, lw_error *err)
{
    lw_node *list = lw_add_list(result, "lines", err);
    for (size_t i = 0; i < breadths->n; i++) {
        const lw_profile *profile = breadths->profile[i];
        const lw_reflection *r = &profile->line->reflection;
        double u = sqrt(breadths->covariance[i * breadths->n + i]);
        lw_quantity size = given->breadth == INTEGRAL
                               ? lw_scherrer_size(profile, K[i])
                               : size_of(breadths->beta[i], u, breadths->beta[i] > 2 * u, K[i]);
        char text[24];
        lw_node *line = lw_add_group(list, NULL, err);
        lw_add_text(line, "hkl", lw_hkl_text(r->h, r->k, r->l, text, sizeof text), err);
        lw_add_quantity(line, "s", lw_quantity_of(breadths->s[i], 0, "nm^-1"),
                        "Reciprocal spacing 2 sin(theta)/lambda of the line.", err);
        lw_add_quantity(line, "size", size, size_definition(given), err);
        lw_add_number(line, "K", K[i], err);
    }
    return err->status;
}

static lw_status run(lw_arena *arena, const lw_profiles *profiles, const void *options_given, lw_node *result,
                     lw_error *err)
{
    const scherrer_options *given = options_given;
    lw_breadths breadths;
    lw_status status = lw_breadths_gather(profiles, arena, &breadths, err);
    if (status == LW_OK && given->breadth == FWHM)
        status = use_fwhm(profiles, &breadths, arena, err);
    if (status != LW_OK)
        return status;
    if (breadths.n == 0)
        return lw_fail(err, LW_NOT_SUPPORTED, NULL, "no line has a breadth with an uncertainty");
    lw_shape shape = shape_of[given->shape];
    if (!breadths.cubic && shape != LW_SHAPE_COLUMN && shape != LW_SHAPE_SPHERE)
        return lw_fail(err, LW_NOT_SUPPORTED, "use shape = \"column\" or \"sphere\"",
                       "the constants of a %s are known for cubic crystals only",
                       shape_choices[given->shape]);
    sizes m = {.n = breadths.n, .K = lw_arena_take(arena, breadths.n, sizeof(double), err)};
    if (m.K == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t i = 0; i < breadths.n; i++) {
        const lw_reflection *r = &breadths.profile[i]->line->reflection;
        status = lw_scherrer_constant(shape, given->breadth == INTEGRAL, r->h, r->k, r->l, &m.K[i], err);
        if (status != LW_OK)
            return status;
    }
    lw_generalised problem = {.n = breadths.n,
                              .m = 1,
                              .y = breadths.beta,
                              .covariance = breadths.covariance,
                              .model = model,
                              .user = &m};
    lw_generalised_fit fit;
    double p[1] = {breadths.beta[0] / m.K[0]};
    status = lw_generalised_solve(&problem, arena, p, &fit, NULL, err);
    if (status != LW_OK)
        return status;
    double u = sqrt(fit.covariance[0][0]) * fit.scatter;
    if (given->breadth == INTEGRAL && shape == LW_SHAPE_COLUMN && p[0] > 2 * u) {
        size_t *row = lw_arena_take(arena, breadths.n, sizeof *row, err);
        if (row == NULL)
            return LW_OUT_OF_MEMORY;
        for (size_t i = 0; i < breadths.n; i++)
            row[i] = breadths.profile[i]->at_breadth;
        status = lw_shared_tell(profiles, "size_volume", &fit, breadths.n, 1, (double[1]){-1 / (p[0] * p[0])}, row, NULL, arena,
                                result, err);
        if (status != LW_OK)
            return status;
    }
    lw_add_quantity(result, shape == LW_SHAPE_COLUMN ? "size_volume" : "size",
                    size_of(p[0], u, p[0] > 2 * u, 1), size_definition(given), err);
    lw_add_text(result, "shape", shape_choices[given->shape], err);
    lw_add_text(result, "breadth", breadth_choices[given->breadth], err);
    lw_add_number(result, "chi2", fit.chi2, err);
    lw_add_number(result, "degrees_of_freedom", (double)fit.degrees, err);
    if (fit.degrees > 0) {
        lw_add_number(result, "chi2_per_degree", fit.chi2 / (double)fit.degrees, err);
        lw_add_number(result, "chance", fit.p, err);
    }
    lw_add_number(result, "scatter_factor", fit.scatter, err);
    list_lines(&breadths, m.K, given, result, err);
    lw_node *remarks = lw_add_list(result, "remarks", err);
    lw_add_text(remarks, NULL, meaning_of_K(given), err);
    remark(&breadths, &fit, arena, remarks, err);
    return err->status;
}

const lw_method lw_method_scherrer = {
    .name = "scherrer",
    .title = "Scherrer",
    .purpose = "size of every line, its whole breadth read as size",
    .assumes =
        "There is no strain and no fault: whatever broadens the line beyond the instrument is size. With "
        "strain present the size comes out too small, the more so at high angles.",
    .source = "Scherrer (1918) Nachr. Ges. Wiss. Goettingen 98; constants: Langford & Wilson (1978) J. Appl. "
              "Cryst. "
              "11, 102",
    .options = options,
    .options_size = sizeof(scherrer_options),
    .defaults = defaults,
    .lacks = lacks,
    .run = run,
};
