/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The optical aberrations against their closed forms and published limits, the whole profile against ray tracing
 * (tests/data/raytraced: rays through a diffractometer, no profile formula), and the refinement against the geometry
 * with which a standard's scan was traced. */
#include "check.h"
#include "instrument/optical/refine.h"
#include "record/file.h"
#include "record/json.h"

#include <stdlib.h>

static const double degree = M_PI / 180;

/* Mean of the shift: minus the slope of the transform's imaginary part at k = 0. */
static double mean_of(const lw_optical *what, const lw_geometry *g, double two_theta)
{
    double re, im, k = 1e-3;
    what->transform(g, two_theta, k, &re, &im);
    return -im / k;
}

static double variance_of(const lw_optical *what, const lw_geometry *g, double two_theta)
{
    double re, im, k = 0.05;
    what->transform(g, two_theta, k, &re, &im);
    return 2 * (1 - re) / (k * k);
}

static void check_closed_forms(void)
{
    /* flat specimen, full divergence 1 deg: e_M/3, e_M = -(alpha^2/2) cot(theta): Cheary & Coelho (1992) */
    lw_geometry g = {.radius = 200, .divergence_deg = 1, .source_width = 0.1, .slit_width = 0.2, .attenuation = 0.5};
    CHECK_NEAR(mean_of(&lw_optical_flat, &g, 20), -0.016497, 1e-6);
    CHECK_NEAR(mean_of(&lw_optical_flat, &g, 60), -0.005038, 1e-6);
    /* transparency of a thick specimen: mean -sin(2theta)/(2 mu R): Keating & Warren (1952) */
    CHECK_NEAR(mean_of(&lw_optical_transparency, &g, 40), -0.184145, 1e-6 + 2e-5);
    g.attenuation = 5;
    CHECK_NEAR(mean_of(&lw_optical_transparency, &g, 90), -0.028648, 1e-6);
    /* boxes: variance (w/R)^2/12 */
    CHECK_RELATIVE(variance_of(&lw_optical_source, &g, 60), pow(0.1 / 200 / degree, 2) / 12, 1e-4);
    CHECK_RELATIVE(variance_of(&lw_optical_slit, &g, 60), pow(0.2 / 200 / degree, 2) / 12, 1e-4);
    /* every transform is 1 at k = 0 and of no larger size elsewhere */
    g.tilt_deg = 0.1;
    g.thickness = 0.3;
    for (size_t i = 0; lw_optical_list[i] != NULL; i++)
        for (int j = 0; j < 200; j++) {
            double re, im;
            lw_optical_list[i]->transform(&g, 25, 16.0 * j, &re, &im);
            CHECK(hypot(re, im) <= 1 + 1e-9);
            if (j == 0)
                CHECK_NEAR(re, 1, 1e-9);
        }
    /* transforms against quadratures of the published densities: flat 1/(2 sqrt(e e_M)), thin specimen exp(e/d)/d */
    double most = -0.5 * degree * degree / tan(12.5 * degree) / degree;
    double d = sin(25 * degree) / (2 * 5 * 200) / degree, back = 2 * 0.3 * cos(12.5 * degree) / 200 / degree;
    for (double k = 10; k < 2000; k *= 1.7) {
        double sum[3] = {0}, thin[3] = {0}, turned[2] = {0}, re, im;
        for (int i = 0; i < 400000; i++) {
            double u = (i + 0.5) / 400000, e = most * u * u;
            sum[1] += cos(k * e) / 400000;
            sum[2] -= sin(k * e) / 400000;
            /* the flat specimen turned by t: e = -2 cot(theta) (phi^2 + phi t) over the beam (Wilson 1963) */
            double phi = (u - 0.5) * degree, shift = -2 / tan(12.5 * degree) * (phi * phi + phi * 0.1 * degree) / degree;
            turned[0] += cos(k * shift) / 400000;
            turned[1] -= sin(k * shift) / 400000;
            double z = -back * u, weight = exp(z / d);
            thin[0] += weight;
            thin[1] += weight * cos(k * z);
            thin[2] -= weight * sin(k * z);
        }
        lw_geometry straight = g;
        straight.tilt_deg = 0;
        lw_optical_flat.transform(&straight, 25, k, &re, &im);
        CHECK_NEAR(re, sum[1], 2e-6);
        CHECK_NEAR(im, sum[2], 2e-6);
        lw_optical_flat.transform(&g, 25, k, &re, &im);
        CHECK_NEAR(re, turned[0], 2e-6);
        CHECK_NEAR(im, turned[1], 2e-6);
        lw_optical_transparency.transform(&g, 25, k, &re, &im);
        CHECK_NEAR(re, thin[1] / thin[0], 2e-6);
        CHECK_NEAR(im, thin[2] / thin[0], 2e-6);
    }
}

/* No incident divergence, specimen a point: the outermost ray stands at acos[cos(2theta) sqrt(1 + (H/L)^2)] (van Laar & Yelon
 * 1984; Finger, Cox & Jephcoat 1994): -0.126267 deg at 20, -0.054635 at 40, +0.054635 at 140 for H/L = 0.04; no ray falls
 * on the other side of 2theta; and the density is that of the same paper, proportional to 1/(h(2phi) cos(2phi)),
 * h = sqrt(cos^2(2phi)/cos^2(2theta) - 1), here by quadrature. */
static void check_axial_limits(lw_engine *engine)
{
    static const double angle[] = {20, 40, 140}, limit[] = {-0.126267, -0.054635, 0.054635};
    enum { POINTS = 8192, PIECES = 20000 };
    const double step = 0.001;
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    lw_error err = LW_ERROR_NONE;
    lw_geometry g = {.radius = 200, .slit_length = 2 * 0.04 * 200 * 28 / 27.0}; /* the outermost of 28 points is at 0.04 */
    lw_axial_rays rays;
    double *density = lw_arena_take(&arena, POINTS, sizeof *density, &err);
    CHECK(lw_axial_rays_make(&g, &arena, &rays, &err) == LW_OK);
    for (int i = 0; i < 3; i++) {
        double far = 0, sum = 0, moment[3] = {0}, expected[3] = {0}, theta2 = angle[i] * degree;
        for (size_t k = 0; k < rays.n; k++) {
            double shift = lw_axial_shift(&rays, k, angle[i]);
            CHECK(shift * limit[i] >= 0);
            far = fabs(shift) > fabs(far) ? shift : far;
            sum += rays.weight[k];
        }
        CHECK_RELATIVE(far, limit[i], 1e-5); /* the limits are given to six digits */
        CHECK_NEAR(sum, 1, 1e-12);
        lw_axial_rays_fill(&rays, angle[i], POINTS, step, density);
        for (int k = 0; k < POINTS; k++) {
            double e = step * (k < POINTS / 2 ? k : k - POINTS);
            moment[0] += density[k];
            moment[1] += density[k] * e;
            moment[2] += density[k] * e * e * e;
        }
        /* 28 points stand for a slit that reaches half a spacing further than the outermost */
        double end = acos(cos(theta2) * hypot(1, 0.04 * 28 / 27.0)) - theta2;
        for (int k = 0; k < PIECES; k++) { /* 2phi = 2theta + end v^2 takes the pole at 2theta away */
            double v = (k + 0.5) / PIECES, e = end * v * v, phi2 = theta2 + e;
            double weight = v / fabs(sqrt(pow(cos(phi2) / cos(theta2), 2) - 1) * cos(phi2));
            expected[0] += weight;
            expected[1] += weight * e / degree;
            expected[2] += weight * pow(e / degree, 3);
        }
        /* the mean of z^2 over n points at the middles of n pieces is (1 - 1/n^2) of that over the length, of z^6 (1 - 7/n^2) */
        CHECK_NEAR(moment[0], 1, 1e-12);
        CHECK_RELATIVE(moment[1], expected[1] / expected[0] * (1 - 1 / 784.0), 2e-4);
        CHECK_RELATIVE(moment[2], expected[2] / expected[0], 0.012);
    }
    /* both beams, to second order -m^2 cot(theta) + p^2 tan(theta) (Cheary & Coelho 1998): a long specimen between points
     * has m = alpha, p = 0; source and slit long, the specimen a point, reach p = alpha on the other side */
    lw_geometry beam[2] = {{.radius = 200, .specimen_length = 8 * 28 / 27.0},
                           {.radius = 200, .source_length = 8 * 28 / 27.0, .slit_length = 8 * 28 / 27.0}};
    for (int i = 0; i < 2; i++) {
        double low = 0, high = 0, t = tan(40 * degree);
        CHECK(lw_axial_rays_make(&beam[i], &arena, &rays, &err) == LW_OK);
        for (size_t k = 0; k < rays.n; k++) {
            double shift = lw_axial_shift(&rays, k, 80);
            low = fmin(low, shift);
            high = fmax(high, shift);
        }
        CHECK_RELATIVE(low, -0.02 * 0.02 / t / degree, 2e-3);
        CHECK_NEAR(high, i == 0 ? 0 : 0.02 * 0.02 * t / degree, 3e-5);
    }
    lw_arena_end(&arena);
}

static lw_node *read_truth(lw_arena *arena, const char *name)
{
    lw_error err = LW_ERROR_NONE;
    char path[400], *bytes = NULL;
    size_t size = 0;
    lw_node *record = NULL;
    snprintf(path, sizeof path, "%s/tests/data/raytraced/%s.truth.json", LW_SOURCE_DIR, name);
    if (lw_read_file(arena, path, LW_JSON_MOST, &bytes, &size, &err) != LW_OK ||
        lw_json_read(arena, bytes, size, path, &record, &err) != LW_OK)
        fprintf(stderr, "%s\n", err.message);
    return record;
}

static lw_geometry geometry_of(const lw_node *truth)
{
    const lw_node *i = lw_node_get(truth, "instrument");
    return (lw_geometry){.radius = lw_node_number(i, "Rd", 0),
                         .source_width = lw_node_number(i, "src_w", 0),
                         .slit_width = lw_node_number(i, "rs_w", 0),
                         .divergence_deg = 2 * atan(0.5 * lw_node_number(i, "ds_w", 0) / lw_node_number(i, "ds_dist", 1)) / degree,
                         .source_length = lw_node_number(i, "src_l", 0),
                         .specimen_length = lw_node_number(i, "sp_w", 0),
                         .slit_length = lw_node_number(i, "rs_l", 0),
                         .soller_incident = lw_node_number(i, "s1_gap", 0) / lw_node_number(i, "s1_len", 1),
                         .soller_diffracted = lw_node_number(i, "s2_gap", 0) / lw_node_number(i, "s2_len", 1),
                         .attenuation = lw_node_number(i, "mu", 0),
                         .thickness = lw_node_number(i, "thick", 0),
                         .tilt_deg = lw_node_number(i, "th_off", 0) / degree};
}

/* One-wavelength profiles of the traced diffractometer. zero and displacement are in the traced centroid. */
static void check_profile(lw_engine *engine, const lw_node *truth, const lw_geometry *g, double width_tolerance,
                          double centroid_tolerance, double moment_tolerance)
{
    lw_error err = LW_ERROR_NONE;
    lw_optics optics;
    CHECK(lw_optics_begin(engine, g, &optics, &err) == LW_OK);
    const lw_node *rows = lw_node_get(lw_node_get(truth, "instrument_profile"), "rows");
    const lw_node *aberrations = lw_node_get(truth, "aberrations");
    double zero = lw_node_number(lw_node_get(aberrations, "zero_shift"), "value", NAN);
    double s = lw_node_number(lw_node_get(aberrations, "displacement"), "value", NAN);
    size_t seen = 0;
    for (const lw_node *row = rows ? rows->first : NULL; row != NULL; row = row->next) {
        double angle = lw_node_number(row, "two_theta", 0);
        if (angle < 25 || angle > 145)
            continue;
        lw_optics_figure figure;
        CHECK(lw_optics_figure_at(&optics, angle, &figure, &err) == LW_OK);
        double shift = zero - 2 * s * cos(angle * degree / 2) / g->radius / degree;
        CHECK_RELATIVE(figure.fwhm_deg, lw_node_number(row, "fwhm", NAN), width_tolerance);
        CHECK_RELATIVE(figure.breadth_deg, lw_node_number(row, "breadth", NAN), width_tolerance);
        CHECK_NEAR(figure.centroid_deg + shift, lw_node_number(row, "shift_centroid", NAN), centroid_tolerance);
        double third = lw_node_number(row, "third_central_moment", NAN);
        CHECK_NEAR(figure.third_moment_deg3, third, moment_tolerance * fabs(third) + 1e-8);
        seen++;
    }
    CHECK(seen == 25);
    lw_optics_end(&optics);
}

static void check_refinement(lw_engine *engine, const lw_node *truth)
{
    lw_error err = LW_ERROR_NONE;
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    lw_radiation radiation = {0};
    for (const lw_node *row = lw_node_get(lw_node_get(truth, "radiation"), "lines")->first; row != NULL; row = row->next)
        lw_radiation_add_energy(&radiation, lw_node_number(row, "energy_eV", 0), lw_node_number(row, "fwhm_eV", 0),
                                lw_node_number(row, "height", 0), 0, &err);
    CHECK(lw_radiation_settle(&radiation, &err) == LW_OK);
    lw_scan_options reading = lw_scan_defaults();
    reading.radiation = &radiation;
    lw_scan *scan = NULL;
    CHECK(lw_scan_read(engine, LW_SOURCE_DIR "/scripts/demo/lab6_after_service.xy", &reading, &scan, &err) == LW_OK);
    lw_material material = {.space_group = 221, .cell.a = 0.4156826};
    CHECK(lw_material_settle(&material, &err) == LW_OK);
    lw_reflection *reflections = NULL;
    size_t n = 0;
    CHECK(lw_reflections(&material, lw_radiation_wavelength(&radiation), 20, 150, &arena, &reflections, &n, &err) == LW_OK);
    lw_fit_options options = lw_fit_defaults();
    options.widths = 2; /* smooth */
    options.axial = LW_AXIAL_SOLLER;
    lw_lines *lines = NULL;
    CHECK(lw_fit_lines(engine, scan, reflections, n, &material, &options, &lines, &err) == LW_OK);
    if (lines == NULL)
        exit(1);
    lw_geometry exact = geometry_of(truth), start = exact;
    start.specimen_length = 12; /* far from what it is */
    start.source_width = 0.08;
    start.tilt_deg = 0;
    lw_refine_options how = {.n = 2, .name = {"specimen_length", "source_width"}, .summed = true};
    lw_refined refined;
    lw_status status = lw_geometry_refine(engine, lines, &start, &how, &arena, &refined, &err);
    CHECK(status == LW_OK);
    if (status == LW_OK) {
        printf("specimen length %.2f(%.2f) mm, source %.4f(%.4f) mm, chi2/freedom %.4f\n", refined.value[0],
               sqrt(refined.covariance[0][0]), refined.value[1], sqrt(refined.covariance[1][1]),
               refined.chi2 / (double)(refined.n_points - refined.n_parameters));
        CHECK(refined.chi2 / (double)(refined.n_points - refined.n_parameters) < 1.05);
        CHECK_NEAR(refined.value[0], exact.specimen_length, 0.6);
        CHECK_NEAR(refined.value[1], exact.source_width, 0.006);
        check_profile(engine, truth, &refined.geometry, 0.012, 0.0004, 0.02);
    }
    how.name[1] = "souce_width";
    CHECK(lw_geometry_refine(engine, lines, &start, &how, &arena, &refined, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(err.message, "souce_width");
    lw_lines_free(lines);
    lw_scan_free(scan);
    lw_arena_end(&arena);
}

static void check_refusals(void)
{
    const lw_geometry good = {.radius = 217.5, .source_width = 0.04, .slit_width = 0.1, .divergence_deg = 0.5,
                              .specimen_length = 20, .slit_length = 15, .soller_incident = 0.04, .soller_diffracted = 0.04};
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_geometry_check(&good, &err) == LW_OK);
    lw_geometry bad[5] = {good, good, good, good, good};
    static const char *const names[] = {"slit_width", "radius", "soller_incident", "divergence", "attenuation"};
    bad[0].slit_width = -0.1;
    bad[1].radius = 0;
    bad[2].soller_incident = 90 * degree;
    bad[3].divergence_deg = NAN;
    bad[4].attenuation = INFINITY;
    for (int i = 0; i < 5; i++) {
        err = LW_ERROR_NONE;
        CHECK(lw_geometry_check(&bad[i], &err) == LW_BAD_ARGUMENT);
        CHECK_CONTAINS(err.message, names[i]);
    }
}

int main(void)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    check_closed_forms();
    check_axial_limits(&engine);
    check_refusals();
    lw_arena arena;
    lw_arena_begin(&arena, &engine);
    static const char *const names[] = {"lab6_before_service", "lab6_after_service"};
    for (int i = 0; i < 2; i++) {
        const lw_node *truth = read_truth(&arena, names[i]);
        CHECK(truth != NULL);
        if (truth == NULL)
            continue;
        lw_geometry g = geometry_of(truth);
        check_profile(&engine, truth, &g, 0.008, 0.0003, 0.02);
        if (i == 1)
            check_refinement(&engine, truth);
    }
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
