/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The whole road from a scan to sizes and strains under an allocator that refuses the nth request, and
 * under a user who stops at the nth poll. Either must come back as its own status with a message, give every
 * byte back, and leave the next run as good as the first. The allocator also holds every caller to the
 * size that it took.
 *   test_refusals [seconds]   how long to sweep; 20 by default, spread over all n; 0 = every n */
#include "check.h"

#include "base/engine.h"
#include "base/tree.h"
#include "instrument/calibration.h"
#include "line/lines.h"
#include "profile/profiles.h"
#include "sample/uncertainty.h"
#include "scan/scan.h"

#include <stdbool.h>
#include <stdint.h>
#include <stdlib.h>
#include <time.h>

typedef struct account {
    size_t held;       /* bytes */
    long requests;     /* so far */
    long refuse_at;    /* this request fails; 0 = none */
    bool keep_refusing; /* and all that follow */
    long wrong_sizes;
    long polls;
    long stop_at;      /* 0 = never */
} account;

/* Each block carries its size in front. 64 bytes keep any alignment that the system gives. */
#define FRONT ((size_t)64)

static void *resize(void *user, void *block, size_t old_size, size_t new_size)
{
    account *a = user;
    unsigned char *base = block == NULL ? NULL : (unsigned char *)block - FRONT;
    size_t had = 0;
    if (base != NULL) {
        memcpy(&had, base, sizeof had);
        if (had != old_size)
            a->wrong_sizes++;
    }
    if (new_size == 0) {
        a->held -= had;
        free(base);
        return NULL;
    }
    a->requests++;
    if (a->refuse_at > 0 && (a->requests == a->refuse_at || (a->keep_refusing && a->requests > a->refuse_at)))
        return NULL;
    unsigned char *fresh = realloc(base, new_size + FRONT);
    if (fresh == NULL)
        return NULL;
    memcpy(fresh, &new_size, sizeof new_size);
    a->held += new_size - had;
    return fresh + FRONT;
}

static bool stop(void *user)
{
    account *a = user;
    a->polls++;
    return a->stop_at > 0 && a->polls >= a->stop_at;
}

/* Cu Ka as four Lorentzians: Hoelzer et al. 1997 Phys. Rev. A 56, 4554, Table II (energy, width, height). */
static lw_status copper(lw_radiation *radiation, lw_error *err)
{
    static const double line[4][3] = {
        {8047.8372, 2.285, 957}, {8045.3672, 3.358, 90}, {8027.9935, 2.667, 334}, {8026.5041, 3.571, 111}};
    memset(radiation, 0, sizeof *radiation);
    snprintf(radiation->name, sizeof radiation->name, "Cu Ka");
    for (int i = 0; i < 4; i++)
        lw_radiation_add_energy(radiation, line[i][0], line[i][1], line[i][2], 0.0, err);
    return err->status != LW_OK ? err->status : lw_radiation_settle(radiation, err);
}

typedef struct road {
    double zero_shift, size; /* what comes out, to see that a run after a fault is as good as the first */
    int lines;
} road;

/* Standard to calibration, powder to results. Whatever happens, everything is freed. */
static lw_status travel(lw_engine *engine, road *out, lw_error *err)
{
    lw_scan *scan = NULL, *powder = NULL;
    lw_lines *lines = NULL, *sample = NULL;
    lw_calibration *calibration = NULL;
    lw_profiles *profiles = NULL;
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    memset(out, 0, sizeof *out);

    lw_radiation radiation;
    lw_status status = copper(&radiation, err);
    /* SRM 660c: a = 0.4156826 nm, expanded uncertainty 0.000008 nm, k = 2 (its certificate, 2015) */
    lw_standard standard = {.name = "lab6-660c", .coverage_factor = 2.0, .temperature_c = 22.5};
    standard.material = (lw_material){.name = "lab6", .space_group = 221, .cell = {.a = 0.4156826, .u_a = 4e-6}};
    lw_material nickel = {.name = "nickel", .space_group = 225, .cell = {.a = 0.35238}};
    if (status == LW_OK)
        status = lw_material_settle(&standard.material, err);
    if (status == LW_OK)
        status = lw_material_settle(&nickel, err);

    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &radiation;
    reading.range[0] = 28.0;
    reading.range[1] = 100.0;
    lw_reflection *reflections = NULL;
    size_t n = 0;
    if (status == LW_OK)
        status = lw_scan_read(engine, LW_SOURCE_DIR "/scripts/demo/lab6_after_service.xy", &reading, &scan, err);
    if (status == LW_OK)
        status = lw_reflections(&standard.material, lw_radiation_wavelength(&radiation), 28.0, 100.0, &arena,
                                &reflections, &n, err);
    lw_fit_options fitting = lw_fit_defaults();
    if (status == LW_OK)
        status = lw_fit_lines(engine, scan, reflections, n, &standard.material, &fitting, &lines, err);
    lw_calibrate_options calibrating = lw_calibrate_defaults();
    if (status == LW_OK)
        status = lw_calibrate(engine, lines, &standard, &calibrating, &calibration, err);

    if (status == LW_OK)
        status = lw_scan_read(engine, LW_SOURCE_DIR "/scripts/demo/nickel_milled_04h.xy", &reading, &powder, err);
    if (status == LW_OK)
        status = lw_reflections(&nickel, lw_radiation_wavelength(&radiation), 35.0, 99.0, &arena, &reflections, &n, err);
    if (status == LW_OK) {
        fitting.instrument = &calibration->profile;
        status = lw_fit_lines(engine, powder, reflections, n, &nickel, &fitting, &sample, err);
    }
    lw_deconvolve_options deconvolving = lw_deconvolve_defaults();
    deconvolving.accept_refold = true;
    if (status == LW_OK)
        status = lw_deconvolve(engine, sample, calibration, &deconvolving, &profiles, err);
    if (status == LW_OK) { /* by the standard's own lines, then as before */
        lw_profiles_free(profiles);
        lw_deconvolve_options measured = deconvolving;
        profiles = NULL;
        measured.method = 1; /* stokes */
        measured.standard = lines;
        status = lw_deconvolve(engine, sample, calibration, &measured, &profiles, err);
        lw_profiles_free(profiles);
        profiles = NULL;
    }
    if (status == LW_OK)
        status = lw_deconvolve(engine, sample, calibration, &deconvolving, &profiles, err);
    lw_node *results = status == LW_OK ? lw_tree_new(&arena, err) : NULL;
    if (status == LW_OK && results == NULL)
        status = err->status;
    if (status == LW_OK)
        status = lw_separate(engine, profiles, NULL, 0, results, err);
    for (int how = LW_UNCERTAINTY_MONTE_CARLO; how <= LW_UNCERTAINTY_BOOTSTRAP && status == LW_OK; how++) {
        lw_separate_options drawing = lw_separate_defaults();
        drawing.methods = (lw_option_list){.n = 1, .item = {"single_line_voigt"}};
        drawing.uncertainty = how;
        drawing.realisations = 2;
        lw_node *drawn = lw_tree_new(&arena, err);
        status = drawn == NULL ? err->status : lw_separate_with(engine, profiles, &drawing, drawn, err);
    }
    if (status == LW_OK) {
        out->zero_shift = calibration->aberrations.value[0];
        out->lines = (int)profiles->n;
        const lw_node *method = lw_node_get(lw_node_get(results, "methods"), "single_line_voigt");
        out->size = lw_node_number(method, "size_volume", 0.0);
    }
    lw_profiles_free(profiles);
    lw_lines_free(sample);
    lw_calibration_free(calibration);
    lw_lines_free(lines);
    lw_scan_free(powder);
    lw_scan_free(scan);
    lw_arena_end(&arena);
    return status;
}

/* One run with a fault planted; its account comes back. */
static lw_status run(account *a, road *out, lw_error *err)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    engine.allocator = (lw_allocator){.resize = resize, .user = a};
    engine.cancelled = stop;
    engine.user = a;
    *err = LW_ERROR_NONE;
    lw_status status = travel(&engine, out, err);
    lw_engine_end(&engine);
    return status;
}

static double now(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (double)t.tv_sec + 1e-9 * (double)t.tv_nsec;
}

/* A fault at n = 1, then at steps that grow so that the sweep fits the time, up to `most`. */
static long sweep(const road *sound, long most, bool refuse, bool keep, double one_run_s, double seconds)
{
    long points = 0;
    double runs = seconds / (one_run_s > 1e-4 ? one_run_s : 1e-4);
    long step = seconds > 0 ? (long)((double)most / (runs > 1.0 ? runs : 1.0)) + 1 : 1;
    /* a step that shares no factor with what a loop of the engine repeats */
    if (step > 1 && step % 2 == 0)
        step++;
    for (long at = 1; at <= most; at += step, points++) {
        account a = {.refuse_at = refuse ? at : 0, .keep_refusing = keep, .stop_at = refuse ? 0 : at};
        road out;
        lw_error err;
        lw_status status = run(&a, &out, &err);
        lw_status want = refuse ? LW_OUT_OF_MEMORY : LW_CANCELLED;
        /* A library's own workspace may be got around, never half used: then the answer must be whole. */
        bool around = refuse && !keep && status == LW_OK && memcmp(&out, sound, sizeof out) == 0;
        CHECK(status == want || around);
        if (status != want && !around)
            fprintf(stderr, "  %s at %ld of %ld: %s, \"%s\"\n", refuse ? "refusal" : "stop", at, most,
                    lw_status_name(status), err.message);
        CHECK(err.status == status && (status == LW_OK || err.message[0] != '\0'));
        CHECK(a.held == 0);
        if (a.held != 0)
            fprintf(stderr, "  %zu bytes kept after %s %ld\n", a.held, refuse ? "refusal" : "stop", at);
        CHECK(a.wrong_sizes == 0);
    }
    return points;
}

int main(int argc, char **argv)
{
    double seconds = argc > 1 ? strtod(argv[1], NULL) : 20.0;
    account sound = {0};
    road first;
    lw_error err;
    double began = now();
    lw_status status = run(&sound, &first, &err);
    double took = now() - began;
    CHECK(status == LW_OK);
    if (status != LW_OK) {
        char text[900];
        fprintf(stderr, "%s\n", lw_error_text(&err, text, sizeof text));
        return lw_checks_end();
    }
    CHECK(sound.held == 0);
    CHECK(sound.wrong_sizes == 0);
    CHECK(sound.requests > 50);
    CHECK(sound.polls > 5);
    CHECK(first.lines == 5); /* 111, 200, 220, 311, 222 of nickel below 99 deg */
    printf("%ld requests and %ld polls in %.3f s\n", sound.requests, sound.polls, took);

    long single = sweep(&first, sound.requests, true, false, took, seconds / 3);
    long lasting = sweep(&first, sound.requests, true, true, took, seconds / 3);
    long stops = sweep(&first, sound.polls, false, false, took, seconds / 3);
    printf("%ld single refusals, %ld lasting ones, %ld stops\n", single, lasting, stops);

    account again = {0};
    road last;
    CHECK(run(&again, &last, &err) == LW_OK);
    CHECK(memcmp(&first, &last, sizeof first) == 0);
    CHECK(again.requests == sound.requests);
    return lw_checks_end();
}
