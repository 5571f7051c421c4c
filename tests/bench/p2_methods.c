/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How long each way of taking the instrument out takes for a pair of a sample's line and the instrument's:
 * the lines of milled nickel (8 h) against the calibration, on one core; and with the standard's own lines
 * where a way takes them. usage: bench_p2_methods ROOT REPEATS     ROOT: folder of the source, for
 * scripts/demo prints one JSON line a way: median milliseconds a line with tails completed by the fitted
 * Voigts, by physical shapes (all lines fitted again first, shared out among them), and by the standard's
 * lines (with the Voigts). */
#include "bench.h"
#include "profile/profiles.h"

static lw_engine engine;
static lw_radiation copper;

static void must(lw_status status, lw_error *err)
{
    if (status != LW_OK)
        bench_stop(err);
}

static lw_lines *fit(const char *root, const char *name, lw_material *material, lw_fit_options *options,
                     const lw_calibration *calibration, lw_scan **scan)
{
    char path[600];
    lw_error err = LW_ERROR_NONE;
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &copper;
    snprintf(path, sizeof path, "%s/scripts/demo/%s.xy", root, name);
    must(lw_scan_read(&engine, path, &reading, scan, &err), &err);
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    lw_reflection *reflection;
    size_t n;
    must(lw_material_settle(material, &err), &err);
    must(lw_reflections(material, lw_radiation_wavelength(&copper), (*scan)->two_theta_deg[0],
                        (*scan)->two_theta_deg[(*scan)->n - 1], &arena, &reflection, &n, &err),
         &err);
    double *shift = lw_arena_take(&arena, n, sizeof *shift, &err);
    for (size_t i = 0; i < n && calibration != NULL && shift != NULL; i++)
        shift[i] = lw_aberrations_shift(&calibration->aberrations, reflection[i].two_theta_deg, NULL);
    options->expected_shift = calibration != NULL ? shift : NULL;
    lw_lines *lines = NULL;
    must(lw_fit_lines(&engine, *scan, reflection, n, material, options, &lines, &err), &err);
    lw_arena_end(&arena);
    return lines;
}

int main(int argc, char **argv)
{
    size_t repeats = argc == 3 ? strtoul(argv[2], NULL, 10) : 0;
    if (repeats == 0) {
        fprintf(stderr, "usage: bench_p2_methods ROOT REPEATS\n");
        return 2;
    }
    lw_error err = LW_ERROR_NONE;
    lw_engine_begin(&engine);
    /* Hoelzer et al. (1997) Phys. Rev. A 56, 4554 */
    lw_radiation_add_energy(&copper, 8047.8372, 2.285, 0.957, 0, &err);
    lw_radiation_add_energy(&copper, 8045.3672, 3.358, 0.090, 0, &err);
    lw_radiation_add_energy(&copper, 8027.9935, 2.667, 0.334, 0, &err);
    lw_radiation_add_energy(&copper, 8026.5041, 3.571, 0.111, 0, &err);
    must(lw_radiation_settle(&copper, &err), &err);
    lw_standard standard = {
        .name = "lab6",
        .material = {.name = "lab6",
                     .space_group = 221,
                     .cell = {0.4156826, 0.4156826, 0.4156826, 90, 90, 90, 4e-7, 4e-7, 4e-7}}};
    lw_material nickel = {
        .name = "nickel", .space_group = 225, .cell = {0.35238, 0.35238, 0.35238, 90, 90, 90, 0, 0, 0}};
    lw_fit_options options = lw_fit_defaults();
    options.widths = 2;
    options.axial = LW_AXIAL_SOLLER;
    lw_scan *scans[2];
    lw_lines *perfect = fit(argv[1], "lab6_after_service", &standard.material, &options, NULL, &scans[0]);
    lw_calibrate_options calibrate = lw_calibrate_defaults();
    lw_calibration *calibration = NULL;
    must(lw_calibrate(&engine, perfect, &standard, &calibrate, &calibration, &err), &err);
    options = lw_fit_defaults();
    options.instrument = &calibration->profile;
    lw_lines *lines = fit(argv[1], "nickel_milled_08h", &nickel, &options, calibration, &scans[1]);
    double *seconds = bench_take(repeats, sizeof *seconds);
    const char *const *names = lw_deconvolve_option_table[0].choices; /* the first option is the method */
    for (int method = 0; names[method] != NULL; method++) {
        double ms[3] = {0, 0, 0};
        for (int way = 0; way < 3; way++) {
            lw_deconvolve_options deconvolve = lw_deconvolve_defaults();
            deconvolve.method = method;
            deconvolve.completion = way == 1 ? 2 : 1;
            deconvolve.standard = way == 2 ? perfect : NULL;
            deconvolve.accept_refold = true;
            for (size_t i = 0; i < repeats; i++) {
                lw_profiles *profiles = NULL;
                double began = bench_now();
                lw_status status = lw_deconvolve(&engine, lines, calibration, &deconvolve, &profiles, &err);
                seconds[i] = bench_now() - began;
                if (way == 2 && status == LW_NOT_SUPPORTED) { /* a fitted shape takes no measured lines */
                    err = LW_ERROR_NONE;
                    seconds[i] = 0;
                } else {
                    must(status, &err);
                    seconds[i] /= (double)profiles->n;
                }
                lw_profiles_free(profiles);
            }
            ms[way] = 1e3 * bench_median(seconds, repeats);
        }
        printf("{\"method\": \"%s\", \"ms_a_line\": %.3f, \"by_physics\": %.3f, \"measured\": %.3f}\n",
               names[method], ms[0], ms[1], ms[2]);
        fflush(stdout);
    }
    free(seconds);
    lw_lines_free(lines);
    lw_calibration_free(calibration);
    lw_lines_free(perfect);
    lw_scan_free(scans[1]);
    lw_scan_free(scans[0]);
    lw_engine_end(&engine);
    return 0;
}
