/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole pattern on a made scan: every line is the Fourier integral of lognormal spheres, strain and a
 * Voigt instrument, summed by Simpson's rule at every point (no FFT, no tails by rule, no interpolation), so
 * that the fit must give back what went in; then with seeded counts. */
#include "check.h"
#include "instrument/calibration.h"
#include "numeric/random.h"
#include "physics/size_distribution.h"
#include "physics/strain.h"
#include "sample/method.h"

#include <stdlib.h>

#define PI 3.14159265358979323846
#define DEGREE (PI / 180)
#define LAMBDA 0.15405929
#define A_FCC 0.3615
#define POINTS 1801
#define LINES_MOST 16

static const lw_spheres SPHERES = {10, 0.3};
static const lw_spheres SMALL = {4, 0.25}, LARGE = {16, 0.25}; /* a mixture, half of the volume each */
static bool mixed;
static double kappa;   /* relative variance of the mean square strain from crystal to crystal */
static double turn;    /* mean square strain falls with direction as 1 - turn H, to 0 */
static double odd = 1; /* one line has this times the strain of the others */
static double angle[POINTS], ideal[POINTS], counts[POINTS];

typedef struct made {
    lw_engine *engine;
    lw_arena arena;
    lw_radiation radiation;
    lw_material material;
    lw_reflection *reflection;
    size_t n;
    lw_width_function instrument;
} made;

static double factor_at(double two_theta)
{
    double c = cos(two_theta * DEGREE), s = sin(two_theta * DEGREE / 2);
    return (1 + c * c) / s; /* polarisation; across a broad line the Lorentz factor is 1/s */
}

/* Volume-weighted coefficients add. */
static double coefficient(double length)
{
    return mixed ? 0.5 * lw_spheres_coefficient(&SMALL, length, NULL) +
                       0.5 * lw_spheres_coefficient(&LARGE, length, NULL)
                 : lw_spheres_coefficient(&SPHERES, length, NULL);
}

/* Mean of exp(-x v) over crystals whose v is gamma distributed, of mean 1 and variance kappa: the Laplace
 * transform of the gamma density. */
static double strained(double x)
{
    return kappa > 0 ? pow(1 + kappa * x, -1 / kappa) : exp(-x);
}

static void make_ideal(const made *m, const lw_strain_form *strain, const double *p, double scale)
{
    double step = 0.02, last = 60;
    size_t n = (size_t)(last / step + 0.5) + 1;
    double *a = malloc(n * sizeof *a);
    for (size_t i = 0; i < POINTS; i++)
        ideal[i] = scale * (0.02 + 1e-4 * (angle[i] - 80));
    for (size_t k = 0; k < m->n; k++) {
        double at = m->reflection[k].two_theta_deg, s0 = 1 / m->reflection[k].d_nm;
        double h = m->reflection[k].h * m->reflection[k].h, q = m->reflection[k].k * m->reflection[k].k,
               l2 = m->reflection[k].l * m->reflection[k].l;
        double own = fmax(1 - turn * (h * q + h * l2 + q * l2) / ((h + q + l2) * (h + q + l2)), 0) *
                     (k == 1 ? odd * odd : 1);
        double per = DEGREE * cos(at * DEGREE / 2) / LAMBDA, variance = 0.0036 * per * per,
               lorentz = 0.02 * per;
        for (size_t j = 0; j < n; j++) {
            double l = step * (double)j;
            a[j] = (j == 0 || j + 1 == n ? 1
                    : j % 2 == 1         ? 4
                                         : 2) *
                   step / 3 * 2 * coefficient(l) *
                   strained(2 * PI * PI * s0 * s0 * own * strain->displacement(p, l, NULL)) *
                   exp(-PI * PI / (4 * log(2)) * variance * l * l - PI * lorentz * l);
        }
        double area = scale * 0.3 / (double)(k + 2);
        for (size_t i = 0; i < POINTS; i++) {
            double ds = 2 * sin(angle[i] * DEGREE / 2) / LAMBDA - s0, sum = 0;
            /* cos of equal steps by its recurrence, renewed every 256 */
            double turn = 2 * cos(2 * PI * step * ds), before = 0, now = 0;
            for (size_t j = 0; j < n; j++) {
                if (j % 256 == 0) {
                    before = cos(2 * PI * step * ds * ((double)j - 1));
                    now = cos(2 * PI * step * ds * (double)j);
                }
                sum += a[j] * now;
                double next = turn * now - before;
                before = now;
                now = next;
            }
            ideal[i] += area * factor_at(angle[i]) / factor_at(at) * sum;
        }
    }
    free(a);
}

static void begin(made *m, lw_engine *engine)
{
    lw_error err = LW_ERROR_NONE;
    *m = (made){.engine = engine};
    lw_arena_begin(&m->arena, engine);
    lw_radiation_plain(LAMBDA, &m->radiation, &err);
    m->material.space_group = 225;
    m->material.cell = (lw_cell){.a = A_FCC, .b = A_FCC, .c = A_FCC, .alpha = 90, .beta = 90, .gamma = 90};
    lw_material_settle(&m->material, &err);
    for (size_t i = 0; i < POINTS; i++)
        angle[i] = 36 + 0.05 * (double)i;
    lw_reflections(&m->material, LAMBDA, angle[0], angle[POINTS - 1], &m->arena, &m->reflection, &m->n, &err);
    CHECK(err.status == LW_OK && m->n == 6);
    m->instrument.value[LW_W] = 0.0036;
    m->instrument.value[LW_Z] = 0.02;
}

/* Memory that refuses after so many requests; blocks are the system's, as before and after. */
typedef struct refusing {
    long left;
} refusing;

static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    refusing *r = user;
    (void)old_size;
    if (new_size == 0) {
        free(block);
        return NULL;
    }
    return r->left-- > 0 ? realloc(block, new_size) : NULL;
}

static refusing *refuse; /* set: the method runs on memory that refuses */

/* Fits counts; the result tree lives in the arena. NULL if anything failed. */
static const char *sizes = "lognormal";

static const lw_node *fit(const made *m, const char *strain, lw_arena *arena)
{
    lw_error err = LW_ERROR_NONE;
    lw_scan *scan = NULL;
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &m->radiation;
    double sigma[POINTS];
    for (size_t i = 0; i < POINTS; i++)
        sigma[i] = sqrt(ideal[i]);
    lw_fit_options options = lw_fit_defaults();
    options.instrument = &m->instrument;
    options.background_terms = 3;
    lw_deconvolve_options how = lw_deconvolve_defaults();
    how.accept_refold = true;
    lw_lines *lines = NULL;
    lw_profiles *profiles = NULL;
    lw_node *tree = lw_tree_new(arena, &err);
    _Alignas(max_align_t) unsigned char space[LW_METHOD_OPTIONS_MOST] = {0};
    const lw_method *method = lw_method_named("whole_pattern");
    method->defaults(space);
    lw_option_text(lw_option_find(method->options, "t", "strain", &err), "t", space, strain, &err);
    lw_option_text(lw_option_find(method->options, "t", "size", &err), "t", space, sizes, &err);
    lw_option_text(lw_option_find(method->options, "t", "fall", &err), "t", space, "none", &err);
    lw_status status = lw_scan_make(m->engine, "made", POINTS, angle, counts, sigma, &reading, &scan, &err);
    if (status == LW_OK)
        status = lw_fit_lines(m->engine, scan, m->reflection, m->n, &m->material, &options, &lines, &err);
    if (status == LW_OK)
        status = lw_deconvolve(m->engine, lines, NULL, &how, &profiles, &err);
    if (status == LW_OK) {
        lw_allocator before = m->engine->allocator;
        if (refuse != NULL)
            m->engine->allocator = (lw_allocator){.resize = resize, .user = refuse};
        status = lw_method_run(m->engine, method, profiles, space, tree, &err);
        m->engine->allocator = before;
    }
    if (refuse != NULL)
        CHECK(status == LW_OK || status == LW_OUT_OF_MEMORY);
    else if (status != LW_OK)
        fprintf(stderr, "%s\n", err.message);
    lw_profiles_free(profiles);
    if (lines != NULL)
        lw_lines_free(lines);
    lw_scan_free(scan);
    return status == LW_OK ? tree : NULL;
}

static lw_quantity quantity(const lw_node *tree, const char *name)
{
    const lw_node *node = tree != NULL ? lw_node_get(tree, name) : NULL;
    return node != NULL && node->kind == LW_NODE_QUANTITY ? node->quantity : lw_quantity_of(NAN, NAN, "");
}

static void exact(const made *m)
{
    struct {
        const lw_strain_form *form;
        double p[2];
    } cases[] = {{&lw_strain_constant, {4e-6, 0}},
                 {&lw_strain_correlated, {9e-6, 1.4}},
                 {&lw_strain_dislocations, {2e-6, 2.5}},
                 {&lw_strain_voigt, {2e-6, 1e-5}}};
    for (size_t i = 0; i < sizeof cases / sizeof *cases; i++) {
        lw_arena arena;
        lw_arena_begin(&arena, m->engine);
        make_ideal(m, cases[i].form, cases[i].p, 1e6);
        memcpy(counts, ideal, sizeof counts);
        const lw_node *tree = fit(m, cases[i].form->name, &arena);
        CHECK_RELATIVE(quantity(tree, "size_area").value, lw_spheres_size_area(&SPHERES, NULL), 3e-6);
        CHECK_RELATIVE(quantity(tree, "size_volume").value, lw_spheres_size_volume(&SPHERES, NULL), 3e-6);
        CHECK_RELATIVE(quantity(tree, "diameter_mean").value, lw_spheres_diameter_mean(&SPHERES, NULL), 1e-4);
        CHECK_RELATIVE(quantity(tree, "diameter_dispersion").value,
                       lw_spheres_diameter_dispersion(&SPHERES, NULL), 1e-3);
        double half = lw_spheres_size_volume(&SPHERES, NULL) / 2;
        CHECK_RELATIVE(quantity(tree, "strain_rms").value,
                       sqrt(cases[i].form->displacement(cases[i].p, half, NULL)) / half, 1e-5);
        lw_arena_end(&arena);
    }
}

/* The form is found by evidence, and strain that isn't there is a limit. */
static void choice(const made *m)
{
    static const double correlated[2] = {1.6e-5, 1.4}, none[2] = {0, 0};
    lw_random random;
    for (int strained = 0; strained < 2; strained++) {
        lw_arena arena;
        lw_arena_begin(&arena, m->engine);
        lw_random_begin(&random, 5, (unsigned)strained);
        make_ideal(m, strained ? &lw_strain_correlated : &lw_strain_constant, strained ? correlated : none,
                   1e5);
        for (size_t i = 0; i < POINTS; i++)
            counts[i] = lw_random_poisson(&random, ideal[i]);
        const lw_node *tree = fit(m, "auto", &arena);
        CHECK(tree != NULL);
        if (tree != NULL && strained) {
            CHECK(quantity(tree, "strain_rms").kind == LW_VALUE);
            const lw_node *forms = lw_node_get(tree, "forms");
            CHECK(lw_node_number(lw_node_at(forms, 0), "weight", 1) < 1e-6); /* constant */
            CHECK(lw_node_number(lw_node_at(forms, 1), "weight", 0) > 0.05); /* correlated */
        } else if (tree != NULL) {
            CHECK(strcmp(lw_node_text(tree, "strain_form", ""), "none") == 0);
            CHECK(quantity(tree, "strain_rms").kind == LW_UPPER_LIMIT);
        }
        lw_quantity volume = quantity(tree, "size_volume");
        CHECK(fabs(volume.value - lw_spheres_size_volume(&SPHERES, NULL)) < 3 * volume.u);
        lw_arena_end(&arena);
    }
}

static void draw_counts(unsigned seed)
{
    lw_random random;
    lw_random_begin(&random, seed, 11);
    for (size_t i = 0; i < POINTS; i++)
        counts[i] = lw_random_poisson(&random, ideal[i]);
}

/* Strain that is free at knots follows a form that it does not know. */
static void knots(const made *m)
{
    static const double p[2] = {1.6e-5, 1.4};
    const lw_strain_form *form = &lw_strain_correlated;
    make_ideal(m, form, p, 1e6);
    draw_counts(3);
    lw_arena arena;
    lw_arena_begin(&arena, m->engine);
    const lw_node *tree = fit(m, "knots", &arena);
    CHECK(tree != NULL);
    if (tree != NULL) {
        lw_quantity area = quantity(tree, "size_area"), volume = quantity(tree, "size_volume");
        CHECK(fabs(area.value - lw_spheres_size_area(&SPHERES, NULL)) < 3 * area.u &&
              area.u < 0.05 * area.value);
        CHECK(fabs(volume.value - lw_spheres_size_volume(&SPHERES, NULL)) < 3 * volume.u &&
              volume.u < 0.1 * volume.value);
        const lw_node *list = lw_node_get(tree, "strain_rms_at");
        size_t seen = 0;
        for (size_t i = 0; i < list->n; i++) {
            const lw_node *row = lw_node_at(list, i);
            double length = lw_node_number(row, "length", 0), u = lw_node_number(row, "u", 0);
            double truth = sqrt(form->displacement(p, length, NULL)) / length;
            CHECK(fabs(lw_node_number(row, "value", 0) - truth) < 3 * u);
            seen += u < 0.03 * truth;
        }
        CHECK(seen >= 4);
        const lw_node *knot = lw_node_get(lw_node_at(lw_node_get(tree, "forms"), 0), "knots");
        CHECK(knot != NULL && knot->n == 6 && lw_node_number(lw_node_at(knot, 0), "length", 1) == 0);
    }
    lw_arena_end(&arena);
}

/* Strain that varies from crystal to crystal is found, and its size with it. */
static void variation(const made *m)
{
    static const double p[2] = {2.5e-5, 1.4};
    kappa = 0.6;
    make_ideal(m, &lw_strain_correlated, p, 1e6);
    kappa = 0;
    draw_counts(5);
    lw_arena arena;
    lw_arena_begin(&arena, m->engine);
    const lw_node *tree = fit(m, "auto", &arena);
    CHECK(tree != NULL);
    lw_quantity found = quantity(tree, "strain_variation"), area = quantity(tree, "size_area");
    printf("variation %.3f(%.3f), truth 0.6; size_area %.3f(%.3f), truth %.3f\n", found.value, found.u,
           area.value, area.u, lw_spheres_size_area(&SPHERES, NULL));
    CHECK(fabs(found.value - 0.6) < 3 * found.u && found.u < 0.2);
    CHECK(fabs(area.value - lw_spheres_size_area(&SPHERES, NULL)) < 3 * area.u && area.u < 0.05 * area.value);
    lw_arena_end(&arena);
}

static bool says(const lw_node *tree, const char *what)
{
    const lw_node *remarks = tree != NULL ? lw_node_get(tree, "remarks") : NULL;
    for (const lw_node *r = remarks != NULL ? remarks->first : NULL; r != NULL; r = r->next)
        if (r->kind == LW_NODE_TEXT && strstr(r->text, what) != NULL)
            return true;
    return false;
}

/* A line that is strained unlike the others: said, and the uncertainty holds it. */
static void contradiction(const made *m)
{
    static const double p[2] = {8e-6, 0};
    double u[2] = {0, 0};
    for (int contradicts = 0; contradicts < 2; contradicts++) {
        odd = contradicts ? 1.15 : 1;
        make_ideal(m, &lw_strain_constant, p, 1e5);
        odd = 1;
        draw_counts(6);
        lw_arena arena;
        lw_arena_begin(&arena, m->engine);
        const lw_node *tree = fit(m, "constant", &arena);
        CHECK(says(tree, "contradict") == (contradicts == 1));
        u[contradicts] = quantity(tree, "strain_rms").u;
        lw_arena_end(&arena);
    }
    CHECK(u[1] > 2 * u[0]);
}

/* Strain that depends on direction: q where it is possible, a limit where the fit goes to the end of what is. */
static void directions(const made *m)
{
    static const double p[2] = {1.6e-5, 0}, turns[2] = {1.5, 4};
    for (int i = 0; i < 2; i++) {
        turn = turns[i];
        make_ideal(m, &lw_strain_constant, p, 1e6);
        turn = 0;
        draw_counts(8);
        lw_arena arena;
        lw_arena_begin(&arena, m->engine);
        const lw_node *tree = fit(m, "constant", &arena);
        lw_quantity q = quantity(tree, "strain_anisotropy");
        if (i == 0) {
            CHECK(q.kind == LW_VALUE && fabs(q.value - 1.5) < 3 * q.u && q.u < 0.1);
        } else {
            CHECK(q.kind == LW_LOWER_LIMIT && q.value > 2.5 && q.value < 2.99);
            CHECK(says(tree, "at its bound"));
        }
        lw_arena_end(&arena);
    }
}

/* Two kinds of crystals: the histogram gives back means that a lognormal distribution does not, and both
 * humps. Volume over ln D is normal about ln(median) + 3 sigma^2 (Hatch & Choate 1929). */
static void histogram(const made *m)
{
    static const double none[2] = {0, 0};
    mixed = true;
    make_ideal(m, &lw_strain_constant, none, 1e6);
    draw_counts(4);
    mixed = false;
    double volume = 0.5 * lw_spheres_size_volume(&SMALL, NULL) + 0.5 * lw_spheres_size_volume(&LARGE, NULL);
    double area = 1 / (0.5 / lw_spheres_size_area(&SMALL, NULL) + 0.5 / lw_spheres_size_area(&LARGE, NULL));
    lw_arena arena;
    lw_arena_begin(&arena, m->engine);
    const lw_node *one = fit(m, "none", &arena);
    sizes = "histogram";
    const lw_node *tree = fit(m, "none", &arena);
    sizes = "lognormal";
    CHECK(one != NULL && tree != NULL);
    if (one != NULL && tree != NULL) {
        lw_quantity v = quantity(tree, "size_volume"), a = quantity(tree, "size_area");
        printf("two kinds: size_volume %.3f(%.3f), truth %.3f, lognormal %.3f; size_area %.3f(%.3f), %.3f, "
               "%.3f\n",
               v.value, v.u, volume, quantity(one, "size_volume").value, a.value, a.u, area,
               quantity(one, "size_area").value);
        CHECK(fabs(v.value - volume) < 3 * v.u && v.u < 0.05 * volume);
        CHECK(fabs(a.value - area) < 3 * a.u && a.u < 0.05 * area);
        CHECK(fabs(v.value - volume) < 0.5 * fabs(quantity(one, "size_volume").value - volume));
        const lw_node *list = lw_node_get(tree, "diameter_distribution");
        double all = 0, before = 0, last = 0, at_small = 0, at_middle = INFINITY, at_large = 0;
        size_t beyond = 0;
        for (size_t i = 0; i < list->n; i++) {
            const lw_node *row = lw_node_at(list, i);
            double d = lw_node_number(row, "diameter", 0), value = lw_node_number(row, "value", 0) * d;
            double u = lw_node_number(row, "u", 0) * d, truth = 0;
            for (int k = 0; k < 2; k++) {
                const lw_spheres *kind = k == 0 ? &SMALL : &LARGE;
                double z = (log(d / kind->median_nm) - 3 * kind->sigma * kind->sigma) / kind->sigma;
                truth += 0.5 * exp(-0.5 * z * z) / (kind->sigma * sqrt(2 * PI));
            }
            beyond += fabs(value - truth) > 3 * u;
            if (d > 3 && d < 7)
                at_small = fmax(at_small, value);
            if (d > 7 && d < 13)
                at_middle = fmin(at_middle, value);
            if (d > 13 && d < 26)
                at_large = fmax(at_large, value);
            all += i > 0 ? 0.5 * (value + last) * (log(d) - before) : 0;
            before = log(d);
            last = value;
        }
        CHECK_NEAR(all, 1, 0.02); /* the outer halves of the end hats are missing */
        CHECK(at_middle < 0.5 * fmin(at_small, at_large));
        CHECK(beyond <= list->n / 8);
        CHECK(lw_node_get(tree, "figures") != NULL);
    }
    lw_arena_end(&arena);
}

/* Seeded counts: the scatter is what u says, and 95 % intervals hold the truth in 92 to 98 % (of 100: 89 to
 * 100). */
static void coverage(const made *m)
{
    static const double p[2] = {4e-6, 0};
    static const char *const names[3] = {"size_volume", "size_area", "strain_rms"};
    double truth[3] = {lw_spheres_size_volume(&SPHERES, NULL), lw_spheres_size_area(&SPHERES, NULL), 0.002};
    double sum[3] = {0}, sum2[3] = {0}, u_sum[3] = {0};
    int inside[3] = {0}, runs = 100;
    make_ideal(m, &lw_strain_constant, p, 2e4);
    for (int seed = 1; seed <= runs; seed++) {
        lw_arena arena;
        lw_random random;
        lw_arena_begin(&arena, m->engine);
        lw_random_begin(&random, (unsigned)seed, 7);
        for (size_t i = 0; i < POINTS; i++)
            counts[i] = lw_random_poisson(&random, ideal[i]);
        const lw_node *tree = fit(m, "constant", &arena);
        for (int j = 0; j < 3; j++) {
            lw_quantity q = quantity(tree, names[j]);
            double off = q.value - truth[j];
            sum[j] += off;
            sum2[j] += off * off;
            u_sum[j] += q.u;
            inside[j] += fabs(off) < 1.96 * q.u;
        }
        lw_arena_end(&arena);
    }
    for (int j = 0; j < 3; j++) {
        double scatter = sqrt(sum2[j] / runs), u = u_sum[j] / runs;
        printf("%s: scatter %.3g, u %.3g, mean off by %.2g, inside %d of %d\n", names[j], scatter, u,
               sum[j] / runs, inside[j], runs);
        CHECK(fabs(sum[j] / runs) < 0.35 * scatter);
        CHECK(scatter > 0.8 * u && scatter < 1.25 * u); /* of 100: 3 standard deviations are 21 % */
        CHECK(inside[j] >= 89);
    }
}

/* The histogram's intervals: of 40, 95 % lie within 1.96 u at 35 or more (binomial, one chance in 200 for
 * fewer). */
static void coverage_of_histogram(const made *m)
{
    static const double p[2] = {4e-6, 0};
    static const char *const names[2] = {"size_volume", "size_area"};
    double truth[2] = {lw_spheres_size_volume(&SPHERES, NULL), lw_spheres_size_area(&SPHERES, NULL)};
    double sum[2] = {0}, sum2[2] = {0}, u_sum[2] = {0};
    int inside[2] = {0}, runs = 40;
    make_ideal(m, &lw_strain_constant, p, 2e4);
    sizes = "histogram";
    for (int seed = 1; seed <= runs; seed++) {
        lw_arena arena;
        lw_arena_begin(&arena, m->engine);
        draw_counts((unsigned)seed + 100);
        const lw_node *tree = fit(m, "constant", &arena);
        for (int j = 0; j < 2; j++) {
            lw_quantity q = quantity(tree, names[j]);
            sum[j] += q.value - truth[j];
            sum2[j] += (q.value - truth[j]) * (q.value - truth[j]);
            u_sum[j] += q.u;
            inside[j] += fabs(q.value - truth[j]) < 1.96 * q.u;
        }
        lw_arena_end(&arena);
    }
    sizes = "lognormal";
    for (int j = 0; j < 2; j++) {
        printf("histogram, %s: scatter %.3g, u %.3g, mean off by %.2g, inside %d of %d\n", names[j],
               sqrt(sum2[j] / runs), u_sum[j] / runs, sum[j] / runs, inside[j], runs);
        CHECK(inside[j] >= 35);
        CHECK(u_sum[j] / runs < 0.05 * truth[j]);
    }
}

static void refused_memory(const made *m)
{
    bool done = false;
    int refusals = 0;
    for (long n = 0; !done && n < 5000; n += 1 + n / 6) {
        refusing r = {.left = n};
        lw_arena arena;
        lw_arena_begin(&arena, m->engine);
        refuse = &r;
        done = fit(m, "constant", &arena) != NULL;
        refuse = NULL;
        refusals += !done;
        lw_arena_end(&arena);
    }
    CHECK(done && refusals > 10);
}

int main(void)
{
    lw_engine engine;
    made m;
    lw_engine_begin(&engine);
    begin(&m, &engine);
    exact(&m);
    choice(&m);
    knots(&m);
    histogram(&m);
    variation(&m);
    contradiction(&m);
    directions(&m);
    coverage(&m);
    coverage_of_histogram(&m);
    refused_memory(&m);

    lw_arena_end(&m.arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
