/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Uncertainty by realisations and its budget, against closed forms and against the analytic propagation, on made scans
 * whose noise is known. */
#include "kernel/deconvolution_made.h"
#include "numeric/straight_line.h"
#include "published/by_hand.h"
#include "sample/budget.h"
#include "sample/collect.h"
#include "sample/realisation.h"
#include "sample/uncertainty.h"

/* A straight line through points with a known covariance: generalised least squares has the covariance
 * (X' C^-1 X)^-1 (Aitken 1936 Proc. R. Soc. Edinb. 55, 42). C = diag(u^2) + common c^2: then by the formula of Sherman
 * & Morrison (1950) C^-1 = W - W 1 1' W c^2/(1 + c^2 1'W1), worked out here. */
static void straight_line(void)
{
    enum { N = 6, TRIALS = 4000 };
    static const double x[N] = {1, 2, 3, 5, 8, 9}, u[N] = {0.1, 0.2, 0.1, 0.3, 0.2, 0.1};
    const double common = 0.25, want_start = 2, want_slope = -0.5;
    double c[N * N], factor[N * N], w = 0, wx = 0, wxx = 0;
    for (int i = 0; i < N; i++) {
        for (int j = 0; j < N; j++)
            c[i * N + j] = common * common + (i == j ? u[i] * u[i] : 0);
        w += 1 / (u[i] * u[i]);
        wx += x[i] / (u[i] * u[i]);
        wxx += x[i] * x[i] / (u[i] * u[i]);
    }
    double k = common * common / (1 + common * common * w);
    double h00 = w - k * w * w, h01 = wx - k * w * wx, h11 = wxx - k * wx * wx, det = h00 * h11 - h01 * h01;
    double u_start = sqrt(h11 / det), u_slope = sqrt(h00 / det);
    lw__square_root(c, N, factor);
    for (int i = 0; i < N; i++)
        for (int j = 0; j < N; j++) {
            double sum = 0;
            for (int l = 0; l < N; l++)
                sum += factor[i * N + l] * factor[j * N + l];
            CHECK_NEAR(sum, c[i * N + j], 1e-14);
        }

    lw_engine engine;
    lw_engine_begin(&engine);
    lw_arena arena, each;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, &engine);
    static const char *const parts[] = {"line", NULL};
    lw__collection collection = {0};
    for (int t = 0; t < TRIALS; t++) {
        lw_random random;
        lw_random_begin(&random, 7, (uint64_t)t);
        double y[N], z[N];
        for (int i = 0; i < N; i++)
            z[i] = lw_random_normal(&random);
        for (int i = 0; i < N; i++) {
            y[i] = want_start + want_slope * x[i];
            for (int l = 0; l <= i; l++)
                y[i] += factor[i * N + l] * z[l];
        }
        lw_straight_line line;
        CHECK(lw_line_correlated(&engine, N, x, y, NULL, c, &line, &err) == LW_OK);
        lw_arena_begin(&each, &engine);
        lw_node *tree = lw_tree_new(&each, &err), *group = lw_add_group(tree, "line", &err);
        lw_add_quantity(group, "start", lw_quantity_of(line.intercept, u_start, ""), NULL, &err);
        lw_add_quantity(group, "slope", lw_quantity_of(line.slope, u_slope, ""), NULL, &err);
        /* every tenth slope is a limit, to see that it is ranked and counted and not averaged */
        lw_add_quantity(group, "size", t % 10 == 0 ? lw_lower_limit(1, 0.95, "") : lw_quantity_of(line.slope, 0, ""), NULL,
                        &err);
        if (t == 0) {
            lw_node *kept = lw_tree_new(&arena, &err);
            lw_add_copy(kept, "line", group, &err);
            CHECK(lw__collect_begin(kept, parts, TRIALS, &arena, &collection, &err) == LW_OK && collection.n == 3);
        }
        lw__collect(&collection, tree);
        lw_arena_end(&each);
    }
    double *scratch = lw_arena_take(&arena, TRIALS, sizeof *scratch, &err);
    lw__summary start = lw__summarise(&collection, 0, scratch), slope = lw__summarise(&collection, 1, scratch);
    lw__summary limited = lw__summarise(&collection, 2, scratch);
    /* 4 standard deviations: u/sqrt(n) of a mean, 1/sqrt(2n) of a u; an end of the interval has the standard deviation
     * sqrt(p (1 - p)/n)/density = 2.67 u/sqrt(n) (order statistics of a normal sample) */
    double root = 4 / sqrt(TRIALS);
    CHECK_NEAR(start.mean, want_start, root * u_start);
    CHECK_NEAR(slope.mean, want_slope, root * u_slope);
    CHECK_RELATIVE(start.u, u_start, root / sqrt(2));
    CHECK_RELATIVE(slope.u, u_slope, root / sqrt(2));
    CHECK_NEAR(slope.low, want_slope - 1.959964 * u_slope, 2.67 * root * u_slope);
    CHECK_NEAR(slope.high, want_slope + 1.959964 * u_slope, 2.67 * root * u_slope);
    /* and told so, from the 20 draws beside each end: their spacings are exponential, so this scatters by 1/sqrt(20) */
    CHECK_RELATIVE(slope.u_low, 2.67 / sqrt(TRIALS) * u_slope, 4 / sqrt(20));
    CHECK_RELATIVE(slope.u_high, 2.67 / sqrt(TRIALS) * u_slope, 4 / sqrt(20));
    CHECK(slope.values == TRIALS && slope.limits == 0 && slope.missing == 0);
    CHECK(limited.values == TRIALS - TRIALS / 10 && limited.limits == TRIALS / 10);
    CHECK(isnan(limited.high) && isfinite(limited.low));
    lw_arena_end(&arena);
    lw_engine_end(&engine);
}

/* ------------------------------------------------------------------------------------------------- made scans */

static double voigt(double length, double s, const void *user)
{
    const double *beta = user;
    return exp(-2 * beta[0] * length - M_PI * (beta[1] * beta[1] + beta[2] * beta[2] * s * s) * length * length);
}
static const double sample[3] = {0.03, 0.02, 0.004};

typedef struct job {
    made m;
    lw_scan *scan;
    lw_lines *lines;
    lw_profiles *profiles;
    lw_arena arena;
    lw_node *results;
} job;

/* kind of noise: counts, sigma, scaled */
static void begin(job *j, int noise, double u_calibration)
{
    lw_error err = LW_ERROR_NONE;
    made *m = &j->m;
    made_begin(m, 0.3615, 0.06, 0.03);
    m->instrument.covariance[LW_W][LW_W] = pow(u_calibration * m->instrument.value[LW_W], 2);
    m->instrument.covariance[LW_Z][LW_Z] = pow(u_calibration * m->instrument.value[LW_Z], 2);
    made_scan(m, 36, 100, 0.03, 8000, 100, 0, voigt, sample);
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &m->radiation;
    reading.noise = noise == 2 ? 3 : 0;
    lw_random random;
    lw_random_begin(&random, 11, (uint64_t)noise);
    double before = lw_random_normal(&random);
    for (size_t i = 0; i < m->n; i++) {
        m->noisy[i] = lw_random_poisson(&random, m->clean[i]);
        m->sigma[i] = 2 * sqrt(m->clean[i]);
        if (noise == 1)
            m->noisy[i] = m->clean[i] + m->sigma[i] * lw_random_normal(&random);
        if (noise == 2) { /* ten times the noise of counts, next points correlated by 0.4 (sin 2 phi = 0.8) */
            double now = lw_random_normal(&random), phase = 0.5 * asin(0.8);
            m->noisy[i] = m->clean[i] + sqrt(10 * m->clean[i]) * (cos(phase) * now + sin(phase) * before);
            before = now;
        }
    }
    CHECK(lw_scan_make(&m->engine, "made", m->n, m->two_theta, m->noisy, noise == 1 ? m->sigma : NULL, &reading, &j->scan,
                       &err) == LW_OK);
    lw_fit_options fit = lw_fit_defaults();
    fit.instrument = &m->instrument;
    fit.intensity_factor = 1;
    fit.widths = 1;
    fit.background_terms = 3;
    fit.misfit = false; /* the shape is right, and chance is not to widen anything */
    CHECK(lw_fit_lines(&m->engine, j->scan, m->reflection, m->n_reflections, &m->material, &fit, &j->lines, &err) == LW_OK);
    lw_deconvolve_options options = lw_deconvolve_defaults();
    CHECK(lw_deconvolve(&m->engine, j->lines, NULL, &options, &j->profiles, &err) == LW_OK);
    lw_arena_begin(&j->arena, &m->engine);
    j->results = lw_tree_new(&j->arena, &err);
}

static void end(job *j)
{
    lw_arena_end(&j->arena);
    made_free(j->scan, j->lines, j->profiles);
    made_end(&j->m);
}

static lw_status separate(job *j, int how, long realisations, const char *source, lw_error *err)
{
    lw_separate_options options = lw_separate_defaults();
    options.uncertainty = how;
    options.realisations = realisations;
    if (source != NULL)
        options.sources = (lw_option_list){.n = 1, .item = {source}};
    options.methods = (lw_option_list){.n = 3, .item = {"scherrer", "williamson_hall", "halder_wagner"}};
    j->results = lw_tree_new(&j->arena, err);
    return lw_separate_with(&j->m.engine, j->profiles, &options, j->results, err);
}

static const lw_node *row_of(const job *j, const char *group, const char *list, const char *quantity)
{
    const lw_node *rows = lw_node_get(lw_node_get(j->results, group), list);
    for (const lw_node *row = rows != NULL ? rows->first : NULL; row != NULL; row = row->next)
        if (strcmp(lw_node_text(row, "quantity", ""), quantity) == 0)
            return row;
    fprintf(stderr, "no %s.%s of %s\n", group, list, quantity);
    CHECK(false);
    return NULL;
}

static double part_of(const job *j, const char *quantity, const char *source)
{
    const lw_node *parts = lw_node_get(row_of(j, "budget", "rows", quantity), "parts");
    for (const lw_node *part = parts != NULL ? parts->first : NULL; part != NULL; part = part->next)
        if (strcmp(lw_node_text(part, "source", ""), source) == 0)
            return lw_node_number(part, "u", NAN);
    return NAN;
}

static const char *const breadths[] = {"lines.111.breadth_sample", "lines.200.breadth_sample", "lines.220.breadth_sample",
                                       "lines.311.breadth_sample", "lines.222.breadth_sample"};

/* u over realisations against the analytic one. 4 standard deviations of an u from n; a breadth's u is not linear by
 * more than a hundredth here. */
static void against_analytic(int noise)
{
    enum { TRIALS = 300 };
    job j;
    lw_error err = LW_ERROR_NONE;
    begin(&j, noise, 0.03);
    CHECK(separate(&j, LW_UNCERTAINTY_MONTE_CARLO, TRIALS, NULL, &err) == LW_OK);
    double allowed = 4 / sqrt(2.0 * TRIALS) + 0.01;
    for (int i = 0; i < 5; i++) {
        const lw_node *row = row_of(&j, "uncertainty", "quantities", breadths[i]);
        double ratio = lw_node_number(row, "ratio", NAN), values = lw_node_number(row, "values", 0);
        CHECK_RELATIVE(ratio, 1.0, allowed);
        CHECK(values == TRIALS);
        lw_quantity drawn = lw_node_get(row, "drawn")->quantity, stated = lw_node_get(row, "analytic")->quantity;
        CHECK_NEAR(drawn.value, stated.value, (4 / sqrt(TRIALS) + 0.05) * stated.u);
    }
    const lw_node *row = row_of(&j, "uncertainty", "quantities", "methods.halder_wagner.size_volume");
    CHECK_RELATIVE(lw_node_number(row, "ratio_of_parts", NAN), 1.0, allowed + 0.03);
    CHECK(lw_node_number(lw_node_get(j.results, "uncertainty"), "seed", 0) == 1);
    CHECK_RELATIVE(lw_node_number(lw_node_get(j.results, "uncertainty"), "relative_accuracy", 0), 1 / sqrt(2.0 * (TRIALS - 1)),
                   1e-12);
    end(&j);
}

/* The parts add up to the whole; the calibration's is what taking its uncertainty away takes off; one that is not there
 * is nothing; a source alone gives its part. */
static void budget(void)
{
    static const char *const all[] = {"counting", "background", "misfit", "calibration", "wavelength", "scatter", "form",
                                      "model",    NULL};
    job with, without;
    lw_error err = LW_ERROR_NONE;
    begin(&with, 0, 0.05);
    begin(&without, 0, 0);
    CHECK(separate(&with, LW_UNCERTAINTY_ANALYTIC, 200, NULL, &err) == LW_OK);
    CHECK(separate(&without, LW_UNCERTAINTY_ANALYTIC, 200, NULL, &err) == LW_OK);
    CHECK(lw_node_get(with.results, "uncertainty") == NULL);
    const char *const quantities[] = {breadths[0],
                                      breadths[1],
                                      breadths[3],
                                      "methods.halder_wagner.size_volume",
                                      "methods.halder_wagner.strain_rms",
                                      "methods.williamson_hall.size_volume"};
    for (size_t i = 0; i < sizeof quantities / sizeof *quantities; i++) {
        const char *q = quantities[i];
        double whole = lw_node_get(row_of(&with, "budget", "rows", q), "stated")->quantity.u;
        double bare = lw_node_get(row_of(&without, "budget", "rows", q), "stated")->quantity.u;
        /* slopes by differences of a tenth of u: curvature of the second order, (0.1 u/value)^2, and the methods'
         * weights, which move with the breadths */
        CHECK_RELATIVE(lw_budget_u(with.results, q, all), whole, 0.02);
        CHECK_RELATIVE(lw_node_number(row_of(&with, "budget", "rows", q), "sum_percent", 0), 100, 0.04);
        CHECK(part_of(&without, q, "calibration") == 0);
        CHECK(part_of(&with, q, "calibration") > 0);
        CHECK_RELATIVE(part_of(&without, q, "counting"), part_of(&with, q, "counting"), 0.2);
        if (i < 3)
            CHECK_RELATIVE(part_of(&with, q, "calibration"), sqrt(whole * whole - bare * bare), 1e-3);
        CHECK(part_of(&with, q, "background") > 0 && part_of(&with, q, "background") < part_of(&with, q, "counting"));
        CHECK(part_of(&with, q, "wavelength") == 0);
    }
    /* K of a cube's edge along 00l is 1 and a sphere's is (pi/6)^(1/3) 4/3 = 1.0747 (Langford & Wilson 1978): the range
     * is at least that wide */
    const lw_node *shape = row_of(&with, "budget", "rows", "methods.scherrer.size");
    CHECK(lw_node_number(shape, "u_K", 0) > 0 && lw_node_number(shape, "K", 0) > 1 && lw_node_number(shape, "K", 0) < 1.25);
    double K = lw_node_number(shape, "K", 0), u_K = lw_node_number(shape, "u_K", 0);
    lw_quantity columns = lw_node_get(row_of(&with, "budget", "rows", "methods.scherrer.size_volume"), "stated")->quantity;
    CHECK_RELATIVE(lw_node_get(shape, "stated")->quantity.u, hypot(K * columns.u, columns.value * u_K), 1e-12);

    enum { TRIALS = 300 };
    static const char *const counted[] = {"counting", "background", NULL}, *const calibrated[] = {"calibration", NULL};
    for (int k = 0; k < 2; k++) {
        CHECK(separate(&with, LW_UNCERTAINTY_MONTE_CARLO, TRIALS, k == 0 ? "counting" : "calibration", &err) == LW_OK);
        for (int i = 0; i < 5; i++) {
            double u = lw_node_get(row_of(&with, "uncertainty", "quantities", breadths[i]), "drawn")->quantity.u;
            CHECK_RELATIVE(u, lw_budget_u(with.results, breadths[i], k == 0 ? counted : calibrated),
                           4 / sqrt(2.0 * TRIALS) + 0.02);
        }
    }
    /* nothing to draw: every realisation is the same */
    CHECK(separate(&without, LW_UNCERTAINTY_MONTE_CARLO, 5, "calibration", &err) == LW_OK);
    lw_quantity same = lw_node_get(row_of(&without, "uncertainty", "quantities", breadths[0]), "drawn")->quantity;
    CHECK(same.u <= 1e-12 * same.value);
    end(&with);
    end(&without);
}

/* Where the shape is right the bootstrap is the Monte Carlo in other words: the residuals are counting noise. */
static void bootstrap(void)
{
    enum { TRIALS = 300 };
    job j;
    lw_error err = LW_ERROR_NONE;
    begin(&j, 0, 0);
    CHECK(separate(&j, LW_UNCERTAINTY_BOOTSTRAP, TRIALS, NULL, &err) == LW_OK);
    for (int i = 0; i < 5; i++) {
        const lw_node *row = row_of(&j, "uncertainty", "quantities", breadths[i]);
        /* as above, and the residuals' own scatter: 1/sqrt(2 points) of 600 under lines or more */
        CHECK_RELATIVE(lw_node_number(row, "ratio", NAN), 1.0, 4 / sqrt(2.0 * TRIALS) + 4 / sqrt(2.0 * 600));
    }
    const lw_node *blocks = lw_node_get(lw_node_get(j.results, "uncertainty"), "blocks");
    CHECK(lw_node_number(lw_node_get(blocks, "between_lines"), "length", 0) >= 1);
    /* residuals by hand: an autoregression of first order with r = 0.6, n = 512 (block length by the rule:
     * (6 0.36/0.4096 512)^(1/3) = 13.92, so 14 with r = 0.6; r is found to 1/sqrt(n) or so) */
    const lw_scan *real = j.lines->scan;
    lw_scan scan = *real;
    double *intensity = lw_arena_take(&j.arena, real->n, sizeof *intensity, &err), z = 0;
    lw_random random;
    lw_random_begin(&random, 3, 0);
    for (size_t i = 0; i < real->n; i++) {
        z = 0.6 * z + 0.8 * lw_random_normal(&random);
        intensity[i] = j.lines->fitted[i] + sqrt(j.lines->variance[i]) * z;
    }
    scan.intensity = intensity;
    lw_lines lines = *j.lines;
    lines.scan = &scan;
    lw_profiles profiles = *j.profiles;
    profiles.lines = &lines;
    lw__draws draws;
    CHECK(lw__draws_begin(&profiles, true, &j.arena, &draws, &err) == LW_OK);
    double points[LW__PLACES] = {0};
    for (size_t i = 0; i < real->n; i++)
        points[draws.place[i]]++;
    for (int place = 0; place < LW__PLACES; place++) {
        double r = draws.correlation[place], n = points[place];
        CHECK_NEAR(r, 0.6, 4 * 0.8 / sqrt(n)); /* standard error sqrt((1 - r^2)/n) */
        CHECK_NEAR((double)draws.block[place], cbrt(6 * r * r / pow(1 - r * r, 2) * n), 1);
    }
    /* a realisation keeps scatter and correlation */
    lw__realisation one;
    CHECK(lw__realisation_begin(&draws, &j.arena, &one, &err) == LW_OK);
    lw__realisation_draw(&draws, 0, &one);
    double square = 0, cross = 0, before = 0;
    for (size_t i = 0; i < real->n; i++) {
        double now = (one.intensity[i] - lines.fitted[i]) / sqrt(lines.variance[i]);
        square += now * now;
        cross += now * before;
        before = now;
    }
    CHECK_RELATIVE(square / (double)real->n, 1.0, 0.2);
    /* joints of blocks lose one product in a block */
    CHECK(cross / square > 0.6 * (1 - 1.0 / 10) - 0.1 && cross / square < 0.65);
    end(&j);
}

static void refusals(void)
{
    job j;
    lw_error err = LW_ERROR_NONE;
    begin(&j, 0, 0);
    CHECK(separate(&j, LW_UNCERTAINTY_MONTE_CARLO, 1, NULL, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "1 realisations have no scatter");
    err = LW_ERROR_NONE;
    CHECK(separate(&j, LW_UNCERTAINTY_MONTE_CARLO, 10, "weather", &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "'weather'");
    err = LW_ERROR_NONE;
    /* intensities that are no counts: normalised to 1 */
    double *low = lw_arena_take(&j.arena, j.scan->n, sizeof *low, &err);
    for (size_t i = 0; i < j.scan->n; i++)
        low[i] = j.scan->intensity[i] > 4000;
    lw_scan scan = *j.scan;
    scan.intensity = low;
    lw_lines lines = *j.lines;
    lines.scan = &scan;
    const lw_lines *kept = j.profiles->lines;
    j.profiles->lines = &lines;
    CHECK(separate(&j, LW_UNCERTAINTY_MONTE_CARLO, 10, NULL, &err) == LW_NOT_SUPPORTED);
    CHECK_CONTAINS(err.message, "no counts");
    j.profiles->lines = kept;
    end(&j);

    /* profiles by hand have no scan */
    static by_hand h;
    hand_begin(&h, LW_CUBIC, (lw_cell){.a = 0.4, .b = 0.4, .c = 0.4, .alpha = 90, .beta = 90, .gamma = 90}, 0.154);
    hand_line(&h, 1, 1, 1, 4.33, 0.05, 0.02, 0.03, 1e-4);
    hand_line(&h, 2, 0, 0, 5, 0.05, 0.02, 0.03, 1e-4);
    hand_end(&h, 0);
    lw_engine engine;
    lw_engine_begin(&engine);
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    err = LW_ERROR_NONE;
    lw_separate_options options = lw_separate_defaults();
    lw_node *results = lw_tree_new(&arena, &err);
    CHECK(lw_separate_with(&engine, &h.profiles, &options, results, &err) == LW_OK);
    CHECK(lw_node_get(results, "methods") != NULL && lw_node_get(results, "budget") == NULL);
    options.uncertainty = LW_UNCERTAINTY_BOOTSTRAP;
    CHECK(lw_separate_with(&engine, &h.profiles, &options, lw_tree_new(&arena, &err), &err) == LW_NOT_SUPPORTED);
    CHECK_CONTAINS(err.message, "don't come from the fit of a scan");
    lw_arena_end(&arena);
    lw_engine_end(&engine);
}

int main(void)
{
    straight_line();
    for (int noise = 0; noise < 3; noise++)
        against_analytic(noise);
    budget();
    bootstrap();
    refusals();
    return lw_checks_end();
}
