/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The line fit on made scans whose lines are known: recovery for every shape, scatter against stated uncertainty,
 * limits of counting statistics, bounds, lines that the data do not carry, refusals, and refused memory. */
#include "check.h"
#include "line_made.h"

#include <stdio.h>

static lw_engine engine;

static void three_lines(made *m, int shape)
{
    static const double local[7][4] = {{0.004, 0.04}, {0.006, 0},      {0, 0.07},           {0.09, 0.45},
                                       {0.09, 1.8},   {0.07, 0.11, 0.3, 0.7}, {0.07, 0.11, 1.5, 3}};
    *m = (made){.shape = shape, .n = 3001, .n_lines = 3, .low = 30, .step = 0.01,
                .position = {36.2, 43.05, 54.4}, .area = {4000, 2500, 1500}, .background = {150, -30, 10}};
    made_radiation(m, true);
    for (size_t k = 0; k < m->n_lines; k++)
        for (int j = 0; j < 4; j++)
            m->local[k][j] = local[shape][j] * (j == 0 || shape < 3 ? 1 + 0.1 * (double)k : 1);
}

static lw_lines *fit(const made *m, unsigned seed, const lw_fit_options *options, lw_scan **scan, lw_error *err)
{
    lw_reflection reflection[MADE_LINES_MOST];
    made_reflections(m, reflection);
    *scan = made_scan(&engine, m, seed, err);
    lw_lines *lines = NULL;
    if (*scan != NULL)
        lw_fit_lines(&engine, *scan, reflection, m->n_lines, NULL, options, &lines, err);
    return lines;
}

/* (fitted - true)/u of the parameters of a line, by row; 0 where u is 0 (on a bound or held). */
static double pull(const lw_lines *lines, size_t row, double want)
{
    double u = sqrt(lines->covariance[row * lines->n_parameters + row]);
    return u > 0 ? (lines->parameter[row] - want) / u : 0;
}

static void recovers_every_shape(void)
{
    for (int shape = 0; shape < 7; shape++) {
        made m;
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan;
        three_lines(&m, shape);
        lw_fit_options options = made_options(&m);
        lw_lines *lines = fit(&m, 11, &options, &scan, &err);
        char text[1000];
        if (lines == NULL)
            fprintf(stderr, "%s: %s\n", lw_line_shape_names[shape], lw_error_text(&err, text, sizeof text));
        CHECK(lines != NULL && lines->n == 3);
        if (lines == NULL) {
            lw_scan_free(scan);
            continue;
        }
        CHECK_NEAR(lines->goodness, 1, 0.06); /* sqrt(1/(2 x 3000)) = 0.013 */
        for (size_t k = 0; k < 3; k++) {
            const lw_line *line = &lines->line[k];
            CHECK(line->supported && !line->shared_width);
            CHECK(fabs(pull(lines, line->at_position, m.position[k])) < 4);
            CHECK(fabs(pull(lines, line->at_area, m.area[k])) < 4);
            for (size_t j = 0; j < (size_t)lw_line_shape_list[shape]->n_local; j++)
                CHECK(fabs(pull(lines, line->at_position + 2 + j, m.local[k][j])) < 4);
            if (shape > 2) {
                double top = made_profile(shape, m.local[k], 0);
                CHECK_NEAR(line->breadth.value, 1 / top, 4 * line->breadth.u);
            }
        }
        double worst = 0;
        for (size_t i = 0; i < scan->n; i++) {
            double t = 2 * (double)i / (double)(scan->n - 1) - 1;
            worst = fmax(worst, fabs(lines->background[i] - (150 - 30 * t + 10 * t * t)));
        }
        CHECK(worst < 6);
        lw_lines_free(lines);
        lw_scan_free(scan);
    }
}

/* Sum of squared pulls over seeds follows chi-square; the mean pull is zero. */
static void scatter_is_as_stated(void)
{
    enum { SEEDS = 40 };
    double sum[4] = {0}, square[4] = {0};
    made m;
    three_lines(&m, 0);
    lw_fit_options options = made_options(&m);
    options.misfit = false;
    for (unsigned seed = 1; seed <= SEEDS; seed++) {
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan;
        lw_lines *lines = fit(&m, 100 + seed, &options, &scan, &err);
        CHECK(lines != NULL);
        for (size_t k = 0; lines != NULL && k < 3; k++)
            for (size_t j = 0; j < 4; j++) {
                double want = j == 0 ? m.position[k] : j == 1 ? m.area[k] : m.local[k][j - 2];
                double z = pull(lines, lines->line[k].at_position + j, want);
                sum[j] += z;
                square[j] += z * z;
            }
        lw_lines_free(lines);
        lw_scan_free(scan);
    }
    double n = 3 * SEEDS;
    for (int j = 0; j < 4; j++) {
        CHECK_NEAR(sum[j] / n, 0, 4 / sqrt(n));
        CHECK_NEAR(square[j] / n, 1, 4 * sqrt(2 / n));
    }
}

/* Without background: Gaussian u(position) = sigma/sqrt(N), u(sigma) = sigma/sqrt(2N); Lorentzian u(position) =
 * u(gamma) = gamma sqrt(2/N); u(area) = sqrt(N) (Fisher information, closed forms). Exact data, scaled noise of
 * factor 1 has the same variance as counts, with the level at least 1e-4 of the mean. */
static void counting_limits(void)
{
    for (int shape = 1; shape <= 2; shape++) {
        made m = {.shape = shape, .n = 8001, .n_lines = 1, .low = 30, .step = 0.005, .position = {50}, .area = {2000}};
        made_radiation(&m, false);
        double fwhm = 0.5;
        m.local[0][0] = shape == 1 ? fwhm * fwhm : 0;
        m.local[0][1] = shape == 2 ? fwhm : 0;
        m.background[0] = 1.5; /* counts: keeps the level above the floor of one count */
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan;
        lw_fit_options options = made_options(&m);
        options.background_terms = 1;
        options.misfit = false;
        lw_lines *lines = fit(&m, 5, &options, &scan, &err);
        CHECK(lines != NULL);
        if (lines != NULL) {
            const lw_line *line = &lines->line[0];
            double n = line->area.value / m.step, sigma = fwhm / sqrt(8 * log(2)), gamma = fwhm / 2;
            double least = shape == 1 ? sigma / sqrt(n) : gamma * sqrt(2 / n);
            CHECK(line->two_theta.u > 0.99 * least && line->two_theta.u < 1.06 * least);
            double u_width = shape == 1 ? line->gauss_fwhm.u / sqrt(8 * log(2)) : line->lorentz_fwhm.u / 2;
            double least_width = shape == 1 ? sigma / sqrt(2 * n) : gamma * sqrt(2 / n);
            CHECK(u_width > 0.98 * least_width && u_width < 1.12 * least_width);
            CHECK(line->area.u > 0.99 * sqrt(n) * m.step && line->area.u < 1.15 * sqrt(n) * m.step);
        }
        lw_lines_free(lines);
        lw_scan_free(scan);
    }
}

/* Gaussian data under a Voigt: the Lorentzian part ends at zero, or within its uncertainty, and the rest is right. */
static void bounds_do_not_stick(void)
{
    for (unsigned seed = 1; seed <= 4; seed++) {
        made m;
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan;
        three_lines(&m, 1);
        lw_fit_options options = made_options(&m);
        options.shape = 0;
        lw_lines *lines = fit(&m, 40 + seed, &options, &scan, &err);
        CHECK(lines != NULL);
        for (size_t k = 0; lines != NULL && k < 3; k++) {
            const lw_line *line = &lines->line[k];
            CHECK(line->lorentz_fwhm.value >= 0 && line->lorentz_fwhm.value < 4 * fmax(line->lorentz_fwhm.u, 1e-4));
            CHECK_NEAR(line->two_theta.value, m.position[k], 4 * line->two_theta.u);
            double sigma = sqrt(m.local[k][0] / (8 * log(2))), n = m.area[k] / m.step;
            CHECK(line->two_theta.u > 0.9 * sigma / sqrt(n) && line->two_theta.u < 3 * sigma / sqrt(n));
        }
        lw_lines_free(lines);
        lw_scan_free(scan);
    }
}

/* Exact data: the fit ends, and with the truth. Chi-square is then nothing but rounding, from which no step can be told
 * to lower it; weak, strong, and without a background, where the weights differ the most. */
static void exact_data(void)
{
    static const double area[4] = {1, 1e-4, 1, 1e6}, level[4] = {1, 1e-4, 0, 1};
    for (int which = 0; which < 4; which++)
        for (int shape = 0; shape < 7; shape++)
            for (int weights = 0; weights < 2; weights++) {
                made m;
                lw_error err = LW_ERROR_NONE;
                lw_scan *scan;
                three_lines(&m, shape);
                for (int k = 0; k < 3; k++) {
                    m.area[k] *= area[which];
                    m.background[k] *= level[which];
                }
                lw_fit_options options = made_options(&m);
                options.weights = weights;
                lw_lines *lines = fit(&m, 0, &options, &scan, &err);
                CHECK(lines != NULL);
                for (size_t k = 0; lines != NULL && k < 3; k++) {
                    const lw_line *line = &lines->line[k];
                    CHECK_NEAR(line->two_theta.value, m.position[k], 1e-7);
                    CHECK_RELATIVE(line->area.value, m.area[k], 1e-6);
                    for (size_t j = 0; j < (size_t)lw_line_shape_list[shape]->n_local; j++)
                        CHECK_NEAR(lines->parameter[line->at_position + 2 + j], m.local[k][j],
                                   1e-6 * fmax(m.local[k][j], 1e-3));
                }
                lw_lines_free(lines);
                lw_scan_free(scan);
            }
}

/* Widths that the parabola in tan(theta) can follow only by going below zero between them: the fit ends, on the bound,
 * with a function that is negative nowhere. */
static void width_function_on_its_bound(void)
{
    made m = {.shape = 1, .n = 6001, .n_lines = 7, .low = 20, .step = 0.02,
              .position = {25.3, 38.1, 51.7, 66.2, 82.9, 101.4, 123.8},
              .area = {900, 900, 900, 900, 900, 900, 900}, .background = {150, -30, 10}};
    static const double fwhm[7] = {0.32, 0.22, 0.1, 0.045, 0.05, 0.2, 0.5};
    for (size_t k = 0; k < m.n_lines; k++)
        m.local[k][0] = fwhm[k] * fwhm[k];
    made_radiation(&m, false);
    lw_error err = LW_ERROR_NONE;
    lw_scan *scan;
    lw_fit_options options = made_options(&m);
    options.shape = 0;
    options.widths = 2;
    options.weights = 1;
    lw_lines *lines = fit(&m, 23, &options, &scan, &err);
    char text[1000];
    if (lines == NULL)
        fprintf(stderr, "%s\n", lw_error_text(&err, text, sizeof text));
    CHECK(lines != NULL);
    if (lines != NULL) {
        const double *value = lines->smooth.value;
        CHECK(value[LW_U] > 0 && value[LW_V] < 0);
        double bottom = value[LW_W] - value[LW_V] * value[LW_V] / (4 * value[LW_U]);
        CHECK_NEAR(bottom, 0, 1e-9);
        for (double angle = 15; angle < 150; angle += 0.5) {
            double t = tan(angle * M_PI / 360);
            CHECK(value[LW_U] * t * t + value[LW_V] * t + value[LW_W] > -1e-12);
        }
        for (size_t k = 0; k < m.n_lines; k++)
            CHECK_NEAR(lines->line[k].two_theta.value, m.position[k], 0.02);
    }
    lw_lines_free(lines);
    lw_scan_free(scan);
}

/* Broad lines of a face-centred cubic powder; the scan ends a width before the last one's place. With the material the
 * tail beyond is known for what it is and the last line inside comes out right; without it line and background are off by dozens of u. */
static void lines_beyond_the_end(void)
{
    lw_error err = LW_ERROR_NONE;
    lw_material material = {.name = "made", .space_group = 225, .cell = {0.36, 0.36, 0.36, 90, 90, 90, 0, 0, 0}};
    CHECK(lw_material_settle(&material, &err) == LW_OK);
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    lw_reflection *all = NULL;
    size_t n_all = 0;
    CHECK(lw_reflections(&material, 0.15405929, 30, 150, &arena, &all, &n_all, &err) == LW_OK);
    CHECK(n_all == 8); /* 111 200 220 311 222, and 400 331 420 beyond */
    made m = {.n = 4201, .n_lines = n_all, .low = 30, .step = 0.02, .background = {200, -60, 20}};
    made_radiation(&m, false);
    for (size_t k = 0; k < n_all; k++) {
        double theta = all[k].two_theta_deg * M_PI / 360, c = cos(2 * theta), s = sin(theta);
        m.position[k] = all[k].two_theta_deg;
        /* multiplicity, polarisation and Lorentz factor, and what atoms lose with 1/d; 3 % off it here and there */
        m.area[k] = 4000 * (double)all[k].multiplicity * 0.5 * (1 + c * c) / (s * s * cos(theta)) * exp(-0.1 / all[k].d_nm) *
                    (k % 2 ? 1.03 : 0.97);
        m.local[k][0] = 0.3 + 1.2 * tan(theta) * tan(theta);
        m.local[k][1] = 0.8 / cos(theta);
    }
    double beyond = m.position[5], last = m.position[4];
    m.n = (size_t)((beyond - 1.1 - m.low) / m.step);
    CHECK(last < m.low + m.step * (double)m.n - 1);
    lw_scan *scan = made_scan(&engine, &m, 31, &err);
    lw_fit_options options = made_options(&m);
    options.misfit = false; /* u from counting alone */
    double off[2], areas[2];
    for (int with = 0; with < 2; with++) {
        lw_lines *lines = NULL;
        CHECK(lw_fit_lines(&engine, scan, all, n_all, with ? &material : NULL, &options, &lines, &err) == LW_OK);
        if (lines == NULL)
            continue;
        CHECK(lines->n == 5);
        CHECK(with ? lines->n_beyond > 0 : lines->n_beyond == 0);
        const lw_line *line = &lines->line[4];
        double breadth = lw_voigt_breadth(sqrt(m.local[4][0]), m.local[4][1]);
        off[with] = (line->breadth.value - breadth) / line->breadth.u;
        areas[with] = (line->area.value - m.area[4]) / line->area.u;
        if (with) {
            CHECK(lines->beyond[0].reflection.h == all[5].h);
            CHECK_RELATIVE(lines->beyond[0].area, m.area[5], 0.1); /* three times the scatter of 3 % */
            CHECK_NEAR(lines->beyond[0].two_theta_deg, beyond, 0.1);
        }
        lw_lines_free(lines);
    }
    CHECK(fabs(off[1]) < 4 && fabs(areas[1]) < 4);
    CHECK(fabs(off[0]) > 6 && fabs(areas[0]) > 6);
    lw_scan_free(scan);
    lw_arena_end(&arena);
}

/* A reflection without intensity and one on top of another: reported, and the others are as good as without them. */
static void lines_that_are_not_there(void)
{
    made m;
    lw_error err = LW_ERROR_NONE;
    three_lines(&m, 0);
    lw_scan *scan = made_scan(&engine, &m, 3, &err);
    lw_reflection reflection[5];
    made_reflections(&m, reflection);
    reflection[4] = reflection[2];
    reflection[2] = reflection[3] = reflection[1];
    reflection[2].two_theta_deg += 0.002;
    reflection[2].h = 8;
    reflection[3].two_theta_deg = 48;
    reflection[3].h = 9;
    lw_fit_options options = made_options(&m);
    options.widths = 0;
    lw_lines *lines = NULL;
    lw_status status = lw_fit_lines(&engine, scan, reflection, 5, NULL, &options, &lines, &err);
    CHECK(status == LW_OK);
    if (lines != NULL) {
        size_t remarks = 0;
        for (size_t k = 0; k < lines->n; k++) {
            const lw_line *line = &lines->line[k];
            remarks += line->remark[0] != '\0';
            if (line->reflection.h == 9) {
                CHECK(!line->supported);
                CHECK_CONTAINS(line->remark, "not supported");
            }
            if (line->reflection.h == 1)
                CHECK_NEAR(line->two_theta.value, m.position[0], 4 * line->two_theta.u);
        }
        CHECK(remarks >= 2);
    }
    lw_lines_free(lines);
    lw_scan_free(scan);
}

static void expect(const made *m, lw_scan *scan, const lw_fit_options *options, lw_reflection *reflection, lw_status want,
                   const char *part)
{
    lw_error err = LW_ERROR_NONE;
    lw_lines *lines = NULL;
    char text[2000];
    CHECK(lw_fit_lines(&engine, scan, reflection, m->n_lines, NULL, options, &lines, &err) == want);
    CHECK(lines == NULL);
    CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), part);
    lw_lines_free(lines);
}

static void refusals(void)
{
    made m;
    lw_error err = LW_ERROR_NONE;
    three_lines(&m, 0);
    lw_scan *scan = made_scan(&engine, &m, 2, &err);
    lw_reflection right[MADE_LINES_MOST], wrong[MADE_LINES_MOST];
    made_reflections(&m, right);
    made_reflections(&m, wrong);
    lw_fit_options options = made_options(&m);
    lw_width_function instrument = {.low_deg = 20, .high_deg = 100};
    instrument.value[LW_W] = 0.002;
    options.shape = 3;
    options.instrument = &instrument;
    expect(&m, scan, &options, right, LW_BAD_ARGUMENT, "Voigt");
    options = made_options(&m);
    for (size_t k = 0; k < m.n_lines; k++)
        wrong[k].two_theta_deg = 100 + 5 * (double)k;
    expect(&m, scan, &options, wrong, LW_NOT_SUPPORTED, "no reflection");
    static const double nowhere[3] = {33.1, 46.9, 57.7};
    for (size_t k = 0; k < m.n_lines; k++)
        wrong[k].two_theta_deg = nowhere[k];
    expect(&m, scan, &options, wrong, LW_NOT_SUPPORTED, "right standard or material");
    wrong[0].two_theta_deg = 55;
    expect(&m, scan, &options, wrong, LW_BAD_ARGUMENT, "ascend");
    lw_scan dark = *scan;
    dark.has_radiation = false;
    expect(&m, &dark, &options, right, LW_BAD_ARGUMENT, "radiation");
    lw_scan_free(scan);
}

/* Memory that is refused at the n-th request, and what is still held. */
typedef struct meter {
    long left;
    long held;
} meter;

static void *metered(void *user, void *block, size_t old_size, size_t new_size)
{
    meter *m = user;
    if (new_size > 0 && m->left-- <= 0)
        return NULL;
    m->held += (long)new_size - (long)old_size;
    if (new_size == 0) {
        free(block);
        return NULL;
    }
    return realloc(block, new_size);
}

static void refused_memory(void)
{
    made m = {.shape = 0, .n = 401, .n_lines = 1, .low = 40, .step = 0.02, .position = {44}, .area = {900},
              .background = {100, 0, 0}};
    made_radiation(&m, false);
    m.local[0][0] = 0.02;
    m.local[0][1] = 0.1;
    lw_reflection reflection[MADE_LINES_MOST];
    made_reflections(&m, reflection);
    lw_fit_options options = made_options(&m);
    lw_engine plain = engine;
    long refused = 0, n = 0;
    for (;; n += n < 40 ? 1 : 7) {
        meter meter = {.left = 1000000};
        lw_engine_begin(&engine);
        engine.allocator = (lw_allocator){metered, &meter};
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan = made_scan(&engine, &m, 9, &err);
        lw_lines *lines = NULL;
        long before = meter.held;
        meter.left = n;
        lw_status status = lw_fit_lines(&engine, scan, reflection, 1, NULL, &options, &lines, &err);
        bool enough = status == LW_OK;
        if (!enough) {
            refused++;
            CHECK(status == LW_OUT_OF_MEMORY && lines == NULL);
            CHECK(err.status == LW_OUT_OF_MEMORY);
            CHECK(meter.held == before);
        }
        lw_lines_free(lines);
        CHECK(meter.held == before);
        lw_scan_free(scan);
        CHECK(meter.held == 0);
        lw_engine_end(&engine);
        if (enough)
            break;
        if (n > 20000) {
            CHECK(false);
            break;
        }
    }
    CHECK(refused > 5); /* most of what a fit takes is reserved in one piece */
    engine = plain;
}

int main(void)
{
    lw_engine_begin(&engine);
    recovers_every_shape();
    scatter_is_as_stated();
    counting_limits();
    bounds_do_not_stick();
    exact_data();
    width_function_on_its_bound();
    lines_beyond_the_end();
    lines_that_are_not_there();
    refusals();
    refused_memory();
    lw_engine_end(&engine);
    return lw_checks_end();
}
