/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Estimates joined as one against closed forms, and what a set of scans, the response and the dead time do when memory is
 * refused: an error of its own, every byte given back. */
#include "check.h"

#include "instrument/calibration.h"
#include "instrument/calibration_join.h"
#include "instrument/dead_time.h"
#include "instrument/response.h"
#include "line/lines.h"

#include <stdbool.h>
#include <stdlib.h>

/* Two values of one thing: the weighted mean, its u, and chi-square = difference^2/(u1^2 + u2^2). */
static void check_weighted_mean(lw_engine *engine)
{
    const size_t which[1] = {0};
    const double value[2] = {10, 11}, variance[2] = {0.04, 0.16}, lower[1] = {-INFINITY};
    lw_estimate estimate[2] = {{1, which, &value[0], &variance[0]}, {1, which, &value[1], &variance[1]}};
    double mean, c;
    lw_joined joined;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_join(engine, estimate, 2, 1, lower, &mean, &c, &joined, &err) == LW_OK);
    CHECK_NEAR(mean, (10 / 0.04 + 11 / 0.16) / (1 / 0.04 + 1 / 0.16), 1e-12);
    CHECK_NEAR(c, 1 / (1 / 0.04 + 1 / 0.16), 1e-14);
    CHECK_NEAR(joined.chi2, 1 / 0.2, 1e-12);
    CHECK_NEAR(joined.freedom, 1, 0);
    CHECK_NEAR(joined.p, erfc(sqrt(joined.chi2 / 2)), 1e-12); /* of one degree of freedom */
    CHECK_NEAR(joined.birge, 1, 0);
    /* ten times as far apart: beyond chance, and wider by the Birge ratio */
    const double far[2] = {10, 20};
    estimate[0].value = &far[0];
    estimate[1].value = &far[1];
    CHECK(lw_join(engine, estimate, 2, 1, lower, &mean, &c, &joined, &err) == LW_OK);
    CHECK_NEAR(joined.birge, sqrt(100 / 0.2), 1e-9);
    CHECK_NEAR(c, 100 / 0.2 / (1 / 0.04 + 1 / 0.16), 1e-9);
}

/* One estimate of a and b that correlate, one of a alone: b moves by cov(a, b)/var(a) times what a moves. */
static void check_correlation(lw_engine *engine)
{
    const size_t both[2] = {0, 1}, first[1] = {0};
    const double value[2] = {1, 5}, c[4] = {0.09, 0.06, 0.06, 0.25}, other[1] = {1.3}, other_c[1] = {0.09};
    const double lower[2] = {-INFINITY, -INFINITY};
    const lw_estimate estimate[2] = {{2, both, value, c}, {1, first, other, other_c}};
    double out[2], u[4];
    lw_joined joined;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_join(engine, estimate, 2, 2, lower, out, u, &joined, &err) == LW_OK);
    CHECK_NEAR(out[0], 1.15, 1e-12);
    CHECK_NEAR(out[1], 5 + 0.06 / 0.09 * 0.15, 1e-12);
    CHECK_NEAR(u[0], 0.045, 1e-13);
    CHECK_NEAR(u[1], 0.06 / 0.09 * 0.045, 1e-13);
    CHECK_NEAR(u[3], 0.25 - 0.06 * 0.06 / 0.09 + 0.06 / 0.09 * 0.045 * 0.06 / 0.09, 1e-13);
}

/* A value below its bound is held there, and the other follows by the covariance of the held one. */
static void check_bound(lw_engine *engine)
{
    const size_t both[2] = {0, 1};
    const double value[2] = {-0.2, 5}, c[4] = {0.09, 0.06, 0.06, 0.25}, lower[2] = {0, -INFINITY};
    const lw_estimate estimate = {2, both, value, c};
    double out[2], u[4];
    lw_joined joined;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_join(engine, &estimate, 1, 2, lower, out, u, &joined, &err) == LW_OK);
    CHECK_NEAR(out[0], 0, 0);
    CHECK_NEAR(out[1], 5 + 0.06 / 0.09 * 0.2, 1e-12);
    CHECK_NEAR(u[0], 0.09, 1e-13);
    const double none[4] = {1, 1, 1, 1};
    const lw_estimate singular = {2, both, value, none};
    CHECK(lw_join(engine, &singular, 1, 2, lower, out, u, &joined, &err) == LW_NOT_SUPPORTED);
}

typedef struct account {
    long held, requests, refuse_at;
} account;

static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    account *a = user;
    if (new_size == 0) {
        a->held -= (long)old_size;
        free(block);
        return NULL;
    }
    if (++a->requests == a->refuse_at)
        return NULL;
    void *fresh = realloc(block, new_size);
    if (fresh != NULL)
        a->held += (long)new_size - (long)old_size;
    return fresh;
}

/* SRM 660c and 640f: a = 0.4156826 and 0.5431144 nm, expanded uncertainties 0.000008 nm, k = 2 (certificates, 2015 and
 * Black et al. 2020); the intensities only make work. */
static lw_status take_standards(lw_standard out[2], lw_error *err)
{
    out[0] = (lw_standard){.name = "lab6-660c", .coverage_factor = 2, .n_intensities = 4,
                           .intensity = {{1, 1, 0, 7, 0.1}, {1, 1, 1, 3, 0.1}, {2, 0, 0, 2, 0.1}, {2, 1, 0, 4, 0.1}}};
    out[0].material = (lw_material){.name = "lab6", .space_group = 221, .cell = {.a = 0.4156826, .u_a = 4e-6}};
    out[1] = (lw_standard){.name = "si-640f", .coverage_factor = 2};
    out[1].material = (lw_material){.name = "si", .space_group = 227, .cell = {.a = 0.5431144, .u_a = 4e-6}};
    lw_status status = lw_material_settle(&out[0].material, err);
    return status == LW_OK ? lw_material_settle(&out[1].material, err) : status;
}

typedef struct work {
    int which;
    lw_calibration_scan scan[2];
    const lw_scan *strong, *weak;
} work;

static lw_status run(const work *w, account *a, lw_error *err)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    engine.allocator = (lw_allocator){.resize = resize, .user = a};
    *err = LW_ERROR_NONE;
    lw_status status;
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    if (w->which == 0) {
        lw_calibrate_options options = lw_calibrate_defaults();
        lw_calibration *calibration = NULL;
        status = lw_calibrate_set(&engine, w->scan, 2, &options, &calibration, err);
        lw_calibration_free(calibration);
    } else {
        lw_response_options response = lw_response_defaults();
        lw_dead_time_options dead = lw_dead_time_defaults();
        dead.counting_time_s = 1;
        lw_node *root = lw_tree_new(&arena, err);
        status = root == NULL      ? err->status
                 : w->which == 1 ? lw_response(&engine, w->scan[0].lines, w->scan[0].standard, &response, root, err)
                                 : lw_dead_time(&engine, w->strong, w->weak, &dead, root, err);
    }
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return status;
}

static void sweep(const work *w, long points)
{
    account sound = {0};
    lw_error err;
    lw_status status = run(w, &sound, &err);
    CHECK(status == LW_OK);
    if (status != LW_OK)
        fprintf(stderr, "  %s\n", err.message);
    CHECK(sound.held == 0);
    long step = sound.requests / points + 1;
    for (long at = 1; at <= sound.requests; at += step) {
        account a = {.refuse_at = at};
        status = run(w, &a, &err);
        CHECK(status == LW_OUT_OF_MEMORY || status == LW_OK); /* OK: a library's own workspace was got around */
        CHECK(err.status == status);
        CHECK(a.held == 0);
    }
}

/* Ten times the counts, as a counter without dead time would show them. */
static lw_status stronger(lw_engine *engine, const lw_scan *from, lw_scan **out, lw_error *err)
{
    lw_scan_options how = lw_scan_defaults();
    double *counts = malloc(from->n * sizeof *counts);
    if (counts == NULL)
        return lw_fail(err, LW_OUT_OF_MEMORY, NULL, "no memory");
    for (size_t i = 0; i < from->n; i++)
        counts[i] = 10 * from->intensity[i];
    lw_status status = lw_scan_make(engine, "stronger", from->n, from->two_theta_deg, counts, NULL, &how, out, err);
    free(counts);
    return status;
}

int main(void)
{
    static const char *const path[2] = {LW_SOURCE_DIR "/scripts/demo/lab6_after_service.xy",
                                        LW_SOURCE_DIR "/tests/data/raytraced/si.xy"};
    lw_engine engine;
    lw_engine_begin(&engine);
    check_weighted_mean(&engine);
    check_correlation(&engine);
    check_bound(&engine);
    lw_error err = LW_ERROR_NONE;
    lw_radiation radiation = {.name = "Cu Ka1"};
    /* Hoelzer et al. 1997 Phys. Rev. A 56, 4554, Table II: energy, width, height */
    const double line[4][3] = {{8047.8372, 2.285, 957}, {8045.3672, 3.358, 90}, {8027.9935, 2.667, 334}, {8026.5041, 3.571, 111}};
    for (int i = 0; i < 4; i++)
        lw_radiation_add_energy(&radiation, line[i][0], line[i][1], line[i][2], 0, &err);
    lw_status status = lw_radiation_settle(&radiation, &err);
    lw_standard standard[2];
    if (status == LW_OK)
        status = take_standards(standard, &err);
    lw_scan *scan[2] = {NULL}, *strong = NULL;
    lw_lines *lines[2] = {NULL};
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    work w = {.which = 0};
    for (int k = 0; k < 2 && status == LW_OK; k++) {
        lw_scan_options reading = lw_scan_defaults();
        reading.radiation = &radiation;
        reading.range[0] = 20;
        reading.range[1] = 150;
        lw_reflection *reflections = NULL;
        size_t n = 0;
        lw_fit_options fitting = lw_fit_defaults();
        fitting.widths = 2; /* smooth */
        fitting.axial = LW_AXIAL_SOLLER;
        status = lw_scan_read(&engine, path[k], &reading, &scan[k], &err);
        if (status == LW_OK)
            status = lw_reflections(&standard[k].material, lw_radiation_wavelength(&radiation), 20, 150, &arena, &reflections, &n,
                                    &err);
        if (status == LW_OK)
            status = lw_fit_lines(&engine, scan[k], reflections, n, &standard[k].material, &fitting, &lines[k], &err);
        w.scan[k] = (lw_calibration_scan){.lines = lines[k], .standard = &standard[k], .attenuation_per_mm = NAN};
    }
    if (status == LW_OK)
        status = stronger(&engine, scan[0], &strong, &err);
    CHECK(status == LW_OK);
    if (status != LW_OK)
        fprintf(stderr, "%s\n", err.message);
    w.strong = strong;
    w.weak = scan[0];
    for (w.which = 0; w.which < 3 && status == LW_OK; w.which++)
        sweep(&w, w.which == 0 ? 40 : 1000);
    for (int k = 0; k < 2; k++) {
        lw_lines_free(lines[k]);
        lw_scan_free(scan[k]);
    }
    lw_scan_free(strong);
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
