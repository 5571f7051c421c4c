/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The instrument as measured on a standard's neighbouring line: a calibration that is wrong, but wrong alike
 * at both angles, then gives the closed-form breadth all the same, however far the line and whatever a further
 * one says; the noise of the standard's counts is in the uncertainty, and joins lines that share a line of the standard. Truth in closed form: breadth of a
 * Voigt, beta_G exp(-k^2)/erfc(k), k = beta_L/(sqrt(pi) beta_G) (Langford 1978 J. Appl. Cryst. 11, 10). */
#include "kernel/deconvolution_made.h"
#include "line/width.h"

static double voigt(double length, double s, const void *user)
{
    const double *beta = user; /* Lorentzian, Gaussian, nm^-1 */
    (void)s;
    return exp(-2 * beta[0] * length - M_PI * beta[1] * beta[1] * length * length);
}

static double breadth_of(const double beta[2])
{
    double k = beta[0] / (sqrt(M_PI) * beta[1]);
    return beta[1] * exp(-k * k) / erfc(k);
}

#define EDGE_SAMPLE 0.3615
#define EDGE_STANDARD 0.4156826

/* Both scans, the standard's made and fitted alone. */
typedef struct pair {
    made sample, standard;
    lw_scan *scan, *standard_scan;
    lw_lines *lines, *standard_lines;
    lw_profiles *profiles;
    double reach_deg; /* of the standard; 0: as by default */
} pair;

static void fit_standard(pair *p, lw_random *random)
{
    lw_error err = LW_ERROR_NONE;
    lw_deconvolve_options none = lw_deconvolve_defaults();
    lw_profiles *profiles = NULL;
    /* without an instrument there is nothing to deconvolve: the lines are what is wanted */
    lw_status status = made_deconvolve(&p->standard, random, NULL, &none, &p->standard_scan,
                                       &p->standard_lines, &profiles, &err);
    if (p->standard_lines == NULL) {
        char text[600];
        fprintf(stderr, "%s\n", lw_error_text(&err, text, sizeof text));
        exit(1);
    }
    CHECK(status == LW_NOT_SUPPORTED && profiles == NULL);
}

static lw_status deconvolve(pair *p, lw_random *random, const lw_width_function *calibrated,
                            const char *method, bool measured, lw_error *err)
{
    lw_deconvolve_options options = lw_deconvolve_defaults();
    options.method = made_method(method);
    options.completion = 1;
    options.standard = measured ? p->standard_lines : NULL;
    if (p->reach_deg > 0)
        options.standard_reach = p->reach_deg;
    options.length_step_nm = 2; /* the same lengths in every realisation */
    options.accept_refold = true;
    return made_deconvolve(&p->sample, random, calibrated, &options, &p->scan, &p->lines, &p->profiles, err);
}

static void free_sample(pair *p)
{
    made_free(p->scan, p->lines, p->profiles);
    p->scan = NULL;
    p->lines = NULL;
    p->profiles = NULL;
}

static void free_standard(pair *p)
{
    made_free(p->standard_scan, p->standard_lines, NULL);
    p->standard_scan = NULL;
    p->standard_lines = NULL;
}

/* Widths that grow as tan(theta) at both lines; the calibration takes them wider and of another shape. */
static void wrong_calibration(void)
{
    static const double beta[2] = {0.02, 0.025}, perfect[2] = {0, 0};
    double sine[2] = {0.5 * MADE_WAVELENGTH * sqrt(3) / EDGE_SAMPLE,
                      0.5 * MADE_WAVELENGTH * 2 / EDGE_STANDARD};
    double tangent[2] = {tan(asin(sine[0])), tan(asin(sine[1]))};
    pair p = {.scan = NULL};
    made_begin(&p.sample, EDGE_SAMPLE, 0.14 * tangent[0], 0.08 * tangent[0]);
    made_begin(&p.standard, EDGE_STANDARD, 0.14 * tangent[1], 0.08 * tangent[1]);
    made_scan(&p.sample, 36, 49, 0.01, 2e6, 500, 0, voigt, beta);
    made_scan(&p.standard, 39.5, 47, 0.01, 1e7, 500, 0, voigt, perfect);
    lw_random random;
    lw_random_begin(&random, 20260302, 0);
    fit_standard(&p, &random);
    lw_width_function wrong = {.low_deg = 5, .high_deg = 175};
    wrong.value[LW_U] = 0.16 * 0.16;
    wrong.value[LW_X] = 0.10;
    static const char *const methods[] = {"stokes", "tikhonov", "maximum_entropy", "richardson_lucy"};
    double truth = breadth_of(beta);
    for (int k = 0; k < 4; k++) {
        lw_error err = LW_ERROR_NONE;
        double off[2] = {NAN, NAN};
        for (int measured = 0; measured < 2; measured++) {
            char text[600];
            lw_random_begin(&random, 20260303, 0);
            if (deconvolve(&p, &random, &wrong, methods[k], measured, &err) != LW_OK)
                fprintf(stderr, "%s: %s\n", methods[k], lw_error_text(&err, text, sizeof text));
            CHECK(p.profiles != NULL);
            if (p.profiles != NULL) {
                const lw_profile *line = &p.profiles->profile[0];
                off[measured] = line->breadth_s.value / truth - 1;
                if (measured) {
                    CHECK_CONTAINS(line->assumed, "as measured on the standard's 200, ");
                    for (size_t i = 1; k < 2 && i < line->truncated_at && line->length_nm[i] < 20; i++)
                        CHECK_NEAR(line->cosine[i], voigt(line->length_nm[i], 0, beta), k == 0 ? 2e-3 : 5e-3);
                }
            }
            free_sample(&p);
        }
        printf(
            "%-16s breadth off by %+.2f %% with the wrong calibration, %+.3f %% with the standard's line\n",
            methods[k], 100 * off[0], 100 * off[1]);
        CHECK(off[0] < -0.025);
        CHECK(fabs(off[1]) < (k == 3 ? 0.02 : 0.004));
    }
    free_standard(&p);
    made_end(&p.sample);
    made_end(&p.standard);
}

/* Breadth of the sample's 111 by Stokes' quotient against the standard's lines between low and high, deg. */
static double against(pair *p, double low, double high, const lw_width_function *calibrated)
{
    static const double beta[2] = {0.02, 0.025}, perfect[2] = {0, 0};
    lw_random random;
    lw_error err = LW_ERROR_NONE;
    made_scan(&p->sample, 36, 49, 0.01, 2e6, 500, 0, voigt, beta);
    made_scan(&p->standard, low, high, 0.01, 1e7, 500, 0, voigt, perfect);
    lw_random_begin(&random, 20260304, 0);
    fit_standard(p, &random);
    CHECK(deconvolve(p, &random, calibrated, "stokes", true, &err) == LW_OK);
    double breadth = p->profiles != NULL ? p->profiles->profile[0].breadth_s.value : NAN;
    free_sample(p);
    free_standard(p);
    return breadth / breadth_of(beta) - 1;
}

/* A line of the standard far off, where the instrument is broader by the ratio of tan(theta): a calibration that is
 * wrong by one factor at all angles is put right only if its error is read at the length that the ratio of breadths
 * gives (transforms of profiles of one form depend on length x breadth alone). */
static void far_away(void)
{
    double tangent[2] = {tan(asin(0.5 * MADE_WAVELENGTH * sqrt(3) / EDGE_SAMPLE)),
                         tan(asin(0.5 * MADE_WAVELENGTH * sqrt(8) / EDGE_STANDARD))};
    pair p = {.reach_deg = 25};
    made_begin(&p.sample, EDGE_SAMPLE, 0.14 * tangent[0], 0.08 * tangent[0]);
    made_begin(&p.standard, EDGE_STANDARD, 0.14 * tangent[1], 0.08 * tangent[1]);
    lw_width_function wrong = {.low_deg = 5, .high_deg = 175};
    wrong.value[LW_U] = 0.16 * 0.16;
    wrong.value[LW_X] = 0.10;
    double off = against(&p, 60, 66, &wrong); /* 220 at 63.2 deg alone */
    printf("breadth off by %+.3f %% with a line of the standard 20 deg away\n", 100 * off);
    CHECK(fabs(off) < 0.004);
    made_end(&p.sample);
    made_end(&p.standard);
}

/* Lines of the standard on either side, 6 and 0.2 deg off, an instrument of constant widths and a calibration whose
 * widths grow as tan(theta): wrong otherwise at the further line, so that nearly all has to come from the near one. */
static void near_and_far(void)
{
    pair p = {.scan = NULL};
    made_begin(&p.sample, EDGE_SAMPLE, 0.06, 0.03);
    made_begin(&p.standard, EDGE_STANDARD, 0.06, 0.03);
    lw_width_function trend = {.low_deg = 5, .high_deg = 175};
    trend.value[LW_U] = 0.15 * 0.15; /* 0.06 and 0.03 deg at 43.4 deg */
    trend.value[LW_X] = 0.075;
    double both = against(&p, 34, 47, &trend), alone = against(&p, 34, 41, &trend); /* 111 at 37.5 deg, 200 at 43.5 */
    printf("breadth off by %+.3f %% with the standard's lines 6 and 0.2 deg away, %+.3f %% with the first alone\n",
           100 * both, 100 * alone);
    CHECK(fabs(both) < 0.004);
    CHECK(fabs(alone) > 0.02);
    made_end(&p.sample);
    made_end(&p.standard);
}

#define TRIALS 200
#define AT 4 /* coefficient whose scatter is held against its u: L = 8 nm */

/* Few counts of the standard under many of a narrow sample: 95 % intervals hold the truth, the standard's
 * part rules u, and two lines' breadths go together as the realisations do. */
static void noise_of_the_standard(void)
{
    static const double beta[2] = {0.008, 0.012}, perfect[2] = {0, 0};
    double truth = breadth_of(beta);
    static const char *const methods[] = {"stokes", "tikhonov"};
    for (int k = 0; k < 2; k++) {
        pair p = {.scan = NULL};
        made_begin(&p.sample, EDGE_SAMPLE, 0.08, 0.04);
        made_begin(&p.standard, EDGE_STANDARD, 0.08, 0.04);
        made_scan(&p.sample, 40, 53, 0.02, 400000, 100, 0, voigt, beta);
        made_scan(&p.standard, 40, 47, 0.02, 2000, 40, 0, voigt,
                  perfect); /* 200 at 43.51 deg serves both lines */
        int hits = 0, of = 0, trials = k == 0 ? TRIALS : TRIALS / 4;
        double sum[2] = {0}, square[2] = {0}, cross = 0, u[2] = {0}, together = 0, alone = 0;
        double cosine = 0, cosine_square = 0, u_cosine = 0;
        for (int t = 0; t < trials; t++) {
            lw_error err = LW_ERROR_NONE;
            lw_random random;
            lw_random_begin(&random, 20260301, (uint64_t)t);
            fit_standard(&p, &random);
            CHECK(deconvolve(&p, &random, &p.sample.instrument, methods[k], true, &err) == LW_OK);
            if (p.profiles == NULL || p.profiles->n != 2)
                continue;
            const lw_profiles *found = p.profiles;
            size_t a = found->profile[0].at_breadth, b = found->profile[1].at_breadth;
            double value[2];
            for (size_t i = 0; i < 2; i++) {
                lw_quantity q = found->profile[i].breadth_s;
                value[i] = q.value;
                hits += fabs(q.value - truth) < 1.96 * q.u;
                of++;
                sum[i] += q.value / trials;
                square[i] += q.value * q.value / trials;
                u[i] += q.u * q.u / trials;
            }
            cross += value[0] * value[1] / trials;
            cosine += found->profile[0].cosine[AT] / trials;
            cosine_square += pow(found->profile[0].cosine[AT], 2) / trials;
            u_cosine += pow(found->profile[0].u_cosine[AT], 2) / trials;
            together += found->covariance[a * found->n_covariance + b] / trials;
            free_sample(&p);
            if (t == 0) { /* the same counts with the calibration: only the sample's own noise */
                lw_random_begin(&random, 20260301, (uint64_t)t);
                CHECK(deconvolve(&p, &random, &p.sample.instrument, methods[k], false, &err) == LW_OK);
                alone = p.profiles != NULL ? p.profiles->profile[0].breadth_s.u : 0;
                free_sample(&p);
            }
            free_standard(&p);
        }
        double scatter[2], r_seen, r_told;
        for (int i = 0; i < 2; i++)
            scatter[i] = sqrt(square[i] - sum[i] * sum[i]);
        r_seen = (cross - sum[0] * sum[1]) / (scatter[0] * scatter[1]);
        r_told = together / sqrt(u[0] * u[1]);
        printf("%-16s %d of %d hold the truth; u %.2f %% (%.2f %% by the sample alone), scatter %.2f %%, "
               "correlation told "
               "%.2f, seen %.2f\n",
               methods[k], hits, of, 100 * sqrt(u[0]) / truth, 100 * alone / truth, 100 * scatter[0] / truth,
               r_told, r_seen);
        CHECK(hits >= 0.90 * of && hits <= 0.99 * of + 1);
        CHECK(sqrt(u[0]) > 2 * alone);
        double scatter_cosine = sqrt(cosine_square - cosine * cosine);
        printf("%-16s A(8 nm) %.4f, u %.4f, scatter %.4f\n", methods[k], cosine, sqrt(u_cosine), scatter_cosine);
        /* relative u of a scatter: 1/sqrt(2 n) */
        if (k == 0)
            CHECK_RELATIVE(sqrt(u_cosine), scatter_cosine, 4 / sqrt(2.0 * trials));
        /* u of a correlation: (1 - r^2)/sqrt(n) */
        CHECK_NEAR(r_told, r_seen, 4 * (1 - r_seen * r_seen) / sqrt(trials) + 0.05);
        made_end(&p.sample);
        made_end(&p.standard);
    }
}

/* Another radiation, another standard, no line near, a method that fits: each says what is wrong. */
static void refusals(void)
{
    static const double beta[2] = {0.02, 0.025}, perfect[2] = {0, 0};
    pair p = {.scan = NULL};
    char text[600];
    lw_error err = LW_ERROR_NONE;
    lw_random random;
    lw_random_begin(&random, 5, 0);
    made_begin(&p.sample, EDGE_SAMPLE, 0.08, 0.04);
    made_begin(&p.standard, EDGE_STANDARD, 0.08, 0.04);
    made_scan(&p.sample, 40, 49, 0.02, 5000, 50, 0, voigt, beta);
    made_scan(&p.standard, 60, 66, 0.02, 20000, 50, 0, voigt,
              perfect); /* 220 at 63.22 deg, the sample's 111 at 43.32 */
    fit_standard(&p, &random);
    CHECK(deconvolve(&p, &random, &p.sample.instrument, "stokes", true, &err) == LW_OUT_OF_RANGE);
    CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), "within 10 deg of 111 at 43.3");
    CHECK_CONTAINS(text, "the nearest, 220, is 19.9");
    CHECK_CONTAINS(text, "standard_reach");
    free_sample(&p);
    static const char *const fits[] = {"convolution", "physical"};
    for (int i = 0; i < 2; i++) {
        err = LW_ERROR_NONE;
        CHECK(deconvolve(&p, &random, &p.sample.instrument, fits[i], true, &err) == LW_NOT_SUPPORTED);
        CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), fits[i]);
        CHECK_CONTAINS(text, "say method = stokes");
        free_sample(&p);
    }
    /* far enough when asked for; then against other lines of a calibration, and another wavelength */
    lw_deconvolve_options options = lw_deconvolve_defaults();
    options.method = made_method("stokes");
    options.standard = p.standard_lines;
    options.standard_reach = 20.5;
    err = LW_ERROR_NONE;
    CHECK(made_deconvolve(&p.sample, &random, &p.sample.instrument, &options, &p.scan, &p.lines, &p.profiles,
                          &err) == LW_OK);
    lw_profiles_free(p.profiles);
    p.profiles = NULL;
    lw_calibration calibration = {.profile = p.sample.instrument};
    calibration.record = lw_tree_new(&p.sample.arena, &err);
    lw_node *certified = lw_add_group(calibration.record, "standard", &err);
    lw_add_text(certified, "name", "silicon", &err);
    lw_add_quantity(certified, "a", lw_quantity_of(0.5431144, 0, "nm"), NULL, &err);
    CHECK(lw_deconvolve(&p.sample.engine, p.lines, &calibration, &options, &p.profiles, &err) ==
          LW_BAD_ARGUMENT);
    CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), "the calibration is from silicon");
    CHECK_CONTAINS(text, "of made");
    err = LW_ERROR_NONE;
    CHECK(lw_radiation_plain(0.0709317, &p.standard_lines->radiation, &err) == LW_OK);
    CHECK(lw_deconvolve(&p.sample.engine, p.lines, NULL, &options, &p.profiles, &err) == LW_BAD_ARGUMENT);
    CHECK_CONTAINS(lw_error_text(&err, text, sizeof text), "measure both with one radiation");
    free_sample(&p);
    free_standard(&p);
    made_end(&p.sample);
    made_end(&p.standard);
}

int main(void)
{
    wrong_calibration();
    far_away();
    near_and_far();
    noise_of_the_standard();
    refusals();
    return lw_checks_end();
}
