/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Scherrer, Williamson-Hall, Halder-Wagner and single-line Voigt against closed forms. */
#include "check.h"
#include "numeric/straight_line.h"
#include "numeric/voigt.h"
#include "published/by_hand.h"
#include "physics/elasticity.h"
#include "sample/breadths.h"
#include "sample/reading.h"

#define PI 3.14159265358979323846
#define RMS 0.79788456080286535588 /* sqrt(2/pi) */
static const lw_cell COPPER = {.a = 0.3615, .b = 0.3615, .c = 0.3615, .alpha = 90, .beta = 90, .gamma = 90};
#define CU 0.15405929

static lw_engine engine;
static lw_arena arena;
static by_hand h;

static lw_node *run_with(const char *name, const void *options)
{
    lw_error err = LW_ERROR_NONE;
    lw_node *node = lw_tree_new(&arena, &err);
    lw_status status = lw_method_run(&engine, lw_method_named(name), &h.profiles, options, node, &err);
    if (status != LW_OK)
        fprintf(stderr, "%s: %s\n", name, err.message);
    CHECK(status == LW_OK);
    return node;
}

/* u without the part for models that the breadths do not exclude, which the checks below do not make. */
static double counting_u(const lw_node *node, const char *name)
{
    bool strain = strcmp(name, "strain_apparent") == 0;
    double part = hand_quantity(node, "model_difference", strain ? "strain_rms" : name, NULL).value, u;
    u = hand_quantity(node, name, NULL, NULL).u;
    part = isfinite(part) ? (strain ? part / RMS : part) : 0;
    return sqrt(u * u - part * part);
}

/* Options structs begin with their choices in the order of the tables. */
static lw_node *run_choice(const char *name, const char *first, const char *value, const char *second,
                           const char *other)
{
    int options[16] = {0};
    const lw_method *method = lw_method_named(name);
    lw_error err = LW_ERROR_NONE;
    method->defaults(options);
    CHECK(lw_option_text(lw_option_find(method->options, name, first, &err), name, options, value, &err) ==
          LW_OK);
    if (second != NULL)
        CHECK(lw_option_text(lw_option_find(method->options, name, second, &err), name, options, other,
                             &err) == LW_OK);
    return run_with(name, options);
}

/* Bench A: breadths of exact Fourier coefficients, lognormal spheres (median 10 nm, sigma 0.3;
 * volume-weighted column length 10.276945 nm) with Gaussian strain of 0.002 rms, fcc a = 0.3615 nm. Breadths
 * by quadrature of the cosine transform in 50 digits. The straight lines through two exact breadths are
 * arithmetic; that they miss the truth by 8 % in size and by half in strain is the point. */
static void bench_a(void)
{
    static const double beta[4] = {0.101924542322, 0.114043393741, 0.103386069622, 0.118843942240};
    static const struct {
        int hkl[2];
        double linear[2], quadratic[2], halder[2];
    } want[2] = {
        {{111, 222}, {11.135152, 0.0012646756}, {10.251055, 0.0030823533}, {10.286152, 0.0022856216}},
        {{200, 400}, {11.372916, 0.0013970052}, {10.236314, 0.003058186}, {10.293110, 0.0022943116}}};
    for (int pair = 0; pair < 2; pair++) {
        hand_begin(&h, LW_CUBIC, COPPER, CU);
        double s = sqrt(pair == 0 ? 3 : 4) / 0.3615;
        int a = want[pair].hkl[0];
        hand_line(&h, a / 100, a / 10 % 10, a % 10, s, beta[2 * pair], 0, 0, 1e-5);
        a = want[pair].hkl[1];
        hand_line(&h, a / 100, a / 10 % 10, a % 10, 2 * s, beta[2 * pair + 1], 0, 0, 1e-5);
        hand_end(&h, 0);

        lw_node *all = run_with("williamson_hall", NULL);
        CHECK_NEAR(hand_quantity(all, "forms", "lorentzian", "size_volume").value, want[pair].linear[0],
                   6e-7);
        CHECK_NEAR(hand_quantity(all, "forms", "lorentzian", "strain_apparent").value, want[pair].linear[1],
                   6e-11);
        CHECK_NEAR(hand_quantity(all, "forms", "gaussian", "size_volume").value, want[pair].quadratic[0],
                   6e-7);
        CHECK_NEAR(hand_quantity(all, "forms", "gaussian", "strain_apparent").value, want[pair].quadratic[1],
                   6e-10);
        CHECK_NEAR(hand_quantity(all, "forms", "gaussian", "strain_rms").value, RMS * want[pair].quadratic[1],
                   6e-10);

        lw_node *one = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
        CHECK_NEAR(hand_quantity(one, "size_volume", NULL, NULL).value, want[pair].linear[0], 6e-7);
        CHECK_NEAR(hand_quantity(one, "strain_apparent", NULL, NULL).value, want[pair].linear[1], 6e-11);

        lw_node *halder = run_with("halder_wagner", NULL);
        CHECK_NEAR(hand_quantity(halder, "size_volume", NULL, NULL).value, want[pair].halder[0], 6e-7);
        CHECK_NEAR(hand_quantity(halder, "strain_apparent", NULL, NULL).value, want[pair].halder[1], 6e-11);

        /* the mixed form: the Voigt of its answer has the breadths it was given, by another routine */
        lw_quantity size = hand_quantity(all, "forms", "mixed", "size_volume");
        lw_quantity strain = hand_quantity(all, "forms", "mixed", "strain_apparent");
        for (int i = 0; i < 2; i++) {
            double gauss = 2 * strain.value * s * (i + 1) * 2 * sqrt(log(2) / PI);
            CHECK_RELATIVE(lw_voigt_breadth(gauss, 2 / PI / size.value), beta[2 * pair + i], 1e-11);
        }

        /* the range of the three forms is in the headline: half range over sqrt(3), JCGM 100:2008 4.3.7 */
        double low = INFINITY, high = 0;
        static const char *const forms[3] = {"lorentzian", "gaussian", "mixed"};
        for (int i = 0; i < 3; i++) {
            double value = hand_quantity(all, "forms", forms[i], "size_volume").value;
            low = fmin(low, value);
            high = fmax(high, value);
        }
        double spread = (high - low) / 2 / sqrt(3);
        CHECK_RELATIVE(hand_quantity(all, "spread_between_forms", "size_volume", NULL).value, spread, 1e-12);
        /* and so is the distance to the readings as spheres, as far as it is more than that range */
        double distance = hand_quantity(all, "model_difference", "size_volume", NULL).value;
        CHECK_RELATIVE(hand_quantity(all, "size_volume", NULL, NULL).u, hypot(size.u, fmax(spread, distance)), 1e-12);
        CHECK(strcmp(lw_node_text(all, "form", ""), "mixed") == 0);
        /* and the truth is within 2 u of what is told, wrong as it is */
        const lw_node *told[2] = {all, halder};
        for (int i = 0; i < 2; i++) {
            lw_quantity D = hand_quantity(told[i], "size_volume", NULL, NULL);
            lw_quantity rms = hand_quantity(told[i], "strain_rms", NULL, NULL);
            CHECK(fabs(D.value - 10.27694483) < 2 * D.u);
            CHECK(fabs(rms.value - 0.002) < 2 * rms.u);
        }
    }
}

/* All four lines at once: each direction keeps the answers of its own two orders, those of bench_a. */
static void directions_of_bench_a(void)
{
    static const struct {
        int h, k, l;
        double beta;
    } line[5] = {{1, 1, 1, 0.101924542322}, {2, 0, 0, 0.103386069622}, {3, 1, 1, 0.112795400614},
                 {2, 2, 2, 0.114043393741}, {4, 0, 0, 0.118843942240}};
    static const struct {
        const char *direction;
        double D[2], e[2];
    } want[2] = {{"111", {11.135152, 10.251055}, {0.0012646756, 0.0030823533}},
                 {"100", {11.372916, 10.236314}, {0.0013970052, 0.003058186}}};
    static const char *const forms[2] = {"lorentzian", "gaussian"};
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 0; i < 5; i++) {
        double n = line[i].h * line[i].h + line[i].k * line[i].k + line[i].l * line[i].l;
        hand_line(&h, line[i].h, line[i].k, line[i].l, sqrt(n) / 0.3615, line[i].beta, 0, 0, 1e-5);
    }
    hand_end(&h, 0);
    for (int form = 0; form < 2; form++) {
        lw_node *node = run_choice("williamson_hall", "form", forms[form], NULL, NULL);
        const lw_node *list = lw_node_get(node, "directions");
        CHECK(list != NULL && list->n == 2);
        for (size_t i = 0; i < 2; i++) {
            const lw_node *one = lw_node_at(list, i);
            CHECK(strcmp(lw_node_text(one, "direction", ""), want[i].direction) == 0);
            lw_quantity D = hand_quantity(one, "size_volume", NULL, NULL);
            lw_quantity e = hand_quantity(one, "strain_apparent", NULL, NULL);
            CHECK_NEAR(D.value, want[i].D[form], 6e-7);
            CHECK_NEAR(e.value, want[i].e[form], 6e-10);
            CHECK(fabs(D.value - 10.27694483) < 2 * D.u && fabs(RMS * e.value - 0.002) < 2 * RMS * e.u);
        }
        CHECK(lw_node_get(lw_node_get(node, "figure"), "series")->n == 4); /* points, all, two directions */
    }
    /* another order of indices is the same direction in a cubic crystal, and another one in a tetragonal one */
    lw_cell cell = {.a = 0.4594, .b = 0.4594, .c = 0.2959, .alpha = 90, .beta = 90, .gamma = 90};
    hand_begin(&h, LW_TETRAGONAL, cell, CU);
    hand_line(&h, 2, 0, 0, 2 / cell.a, 0.05, 0, 0, 1e-4);
    hand_line(&h, 0, 0, 2, 2 / cell.c, 0.08, 0, 0, 1e-4);
    hand_line(&h, 4, 0, 0, 4 / cell.a, 0.06, 0, 0, 1e-4);
    hand_end(&h, 0);
    lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    CHECK(lw_node_get(node, "directions")->n == 1);
    const lw_node *one = lw_node_at(lw_node_get(node, "directions"), 0);
    CHECK_RELATIVE(hand_quantity(one, "size_volume", NULL, NULL).value, 1 / 0.04, 1e-9);
    CHECK_RELATIVE(hand_quantity(one, "strain_apparent", NULL, NULL).value, 0.01 / (2 * 2 / cell.a), 1e-9);
}

/* The same crystals read as what they are: six breadths in closed form (bench A, mpmath), size and strain back. */
static void readings(void)
{
    static const struct {
        int h, k, l;
        double beta;
    } line[6] = {{1, 1, 1, 0.101924542322}, {2, 0, 0, 0.103386069622}, {2, 2, 0, 0.108919112593},
                 {3, 1, 1, 0.112795400614}, {2, 2, 2, 0.114043393741}, {4, 0, 0, 0.118843942240}};
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 0; i < 6; i++) {
        double n = line[i].h * line[i].h + line[i].k * line[i].k + line[i].l * line[i].l;
        hand_line(&h, line[i].h, line[i].k, line[i].l, sqrt(n) / 0.3615, line[i].beta, 0, 0, 1e-6);
    }
    hand_end(&h, 0);
    h.profiles.method = "stokes"; /* exact breadths, not those of fitted Voigts */
    lw_breadths breadths;
    lw_readings all;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_breadths_gather(&h.profiles, &arena, &breadths, &err) == LW_OK);
    CHECK(lw_breadths_read(&breadths, &arena, &all, &err) == LW_OK);
    CHECK(all.n == 15);
    double most = 0, sum = 0;
    for (size_t i = 0; i < all.n; i++) {
        const lw_reading *r = &all.reading[i];
        sum += r->weight;
        if (r->sigma != 0.3 || strcmp(r->strain, "constant") != 0)
            continue;
        most = r->weight;
        CHECK_RELATIVE(r->size_volume, 10.27694483217747, 1e-6);
        CHECK_RELATIVE(r->size_area, 8.348818107945762, 1e-6);
        CHECK_RELATIVE(r->strain_rms, 0.002, 1e-5);
    }
    CHECK_NEAR(sum, 1, 1e-12);
    CHECK(most > 0.7); /* "both" has it too, for one parameter more */
    CHECK(lw_readings_difference(&all, LW_READ_SIZE_VOLUME, 10.27694483) < 0.05);
    CHECK_NEAR(lw_readings_difference(&all, LW_READ_SIZE_VOLUME, 15), 15 - 10.277, 0.05);
}

/* Breadths made from D and e by each rule give D and e back: algebra. */
static void closed_forms(void)
{
    static const char *const forms[4] = {"lorentzian", "gaussian", "mixed", "parabolic"};
    const double D = 23.85, e = 0.001713;
    for (int form = 0; form < 4; form++) {
        hand_begin(&h, LW_CUBIC, COPPER, CU);
        static const int hkl[5][3] = {{1, 1, 1}, {2, 0, 0}, {2, 2, 0}, {3, 1, 1}, {2, 2, 2}};
        for (int i = 0; i < 5; i++) {
            double n = hkl[i][0] * hkl[i][0] + hkl[i][1] * hkl[i][1] + hkl[i][2] * hkl[i][2];
            double s = sqrt(n) / 0.3615, b = 2 * e * s, beta = 1 / D + b;
            if (form == 1)
                beta = hypot(1 / D, b);
            if (form == 2)
                beta = lw_voigt_breadth(b * 2 * sqrt(log(2) / PI), 2 / PI / D);
            if (form == 3)
                beta = (1 / D + sqrt(1 / (D * D) + 4 * b * b)) / 2;
            hand_line(&h, hkl[i][0], hkl[i][1], hkl[i][2], s, beta, b, 1 / D, 1e-4 * (1 + i));
        }
        hand_end(&h, 5e-5);
        lw_node *node = form == 3 ? run_with("halder_wagner", NULL)
                                  : run_choice("williamson_hall", "form", forms[form], NULL, NULL);
        CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, D, 1e-10);
        CHECK_RELATIVE(hand_quantity(node, "strain_apparent", NULL, NULL).value, e, 1e-10);
        CHECK_RELATIVE(hand_quantity(node, "strain_rms", NULL, NULL).value, e * sqrt(2 / PI), 1e-10);
        if (form < 3) { /* auto leads with the form that made the breadths */
            node = run_with("williamson_hall", NULL);
            CHECK(strcmp(lw_node_text(node, "form", ""), forms[form]) == 0);
            CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, D, 1e-10);
        }
        const lw_node *s = lw_node_get(lw_node_get(node, "line"), "s");
        const lw_node *curve = lw_node_get(lw_node_get(node, "line"), "breadth");
        CHECK(s != NULL && curve != NULL && s->n == 101 && s->vector[0] == 0);
        CHECK_RELATIVE(curve->vector[0], 1 / D, 1e-10);
        /* single-line Voigt reads the parts themselves */
        node = run_with("single_line_voigt", NULL);
        CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, D, 1e-12);
        CHECK_RELATIVE(hand_quantity(node, "strain_apparent", NULL, NULL).value, e, 1e-12);
    }
}

/* Uncertainties of the straight line through two points, written out: k = (s2 b1 - s1 b2)/(s2 - s1). A part
 * common to all breadths moves the intercept alone. */
static void uncertainties(void)
{
    const double D = 20, e = 0.002, s1 = 4.8, s2 = 9.6, u1 = 3e-4, u2 = 7e-4, common = 5e-4;
    for (int with = 0; with < 2; with++) {
        double c = with ? common : 0;
        hand_begin(&h, LW_CUBIC, COPPER, CU);
        hand_line(&h, 1, 1, 1, s1, 1 / D + 2 * e * s1, 0, 0, u1);
        hand_line(&h, 2, 2, 2, s2, 1 / D + 2 * e * s2, 0, 0, u2);
        hand_end(&h, c);
        lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
        double u_k = sqrt((s2 * s2 * u1 * u1 + s1 * s1 * u2 * u2) / ((s2 - s1) * (s2 - s1)) + c * c);
        double u_e = hypot(u1, u2) / (s2 - s1) / 2;
        CHECK_RELATIVE(counting_u(node, "size_volume"), D * D * u_k, 1e-9);
        CHECK_RELATIVE(counting_u(node, "strain_apparent"), u_e, 1e-9);
        /* position errors enter through the slope: u(beta)^2 grows by (2 e u(s))^2 on both lines */
        if (!with)
            continue;
        double u_theta = 0.02; /* deg 2theta */
        double grown[2];
        for (int i = 0; i < 2; i++) {
            double theta = h.profile[i].theta_deg * HAND_DEGREE;
            double u_s = cos(theta) / CU * u_theta * HAND_DEGREE; /* ds = cos(theta)/lambda d(2theta) */
            h.line[i].two_theta.u = u_theta;
            grown[i] = hypot(i ? u2 : u1, 2 * e * u_s);
        }
        node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
        CHECK_RELATIVE(counting_u(node, "strain_apparent"),
                       hypot(grown[0], grown[1]) / (s2 - s1) / 2, 1e-9);
    }
    /* scatter beyond the uncertainties enlarges them: Birge ratio of three points, one off by d */
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    const double d = 0.006, u = 5e-4;
    for (int i = 0; i < 3; i++)
        hand_line(&h, i + 1, 0, 0, 3.0 * (i + 1), 1 / D + 2 * e * 3 * (i + 1) + (i == 1 ? d : 0), 0, 0, u);
    hand_end(&h, 0);
    lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    /* residuals of a straight line through three equidistant points: -d/3, 2d/3, -d/3 */
    CHECK_RELATIVE(lw_node_number(node, "chi2", 0), d * d * 6 / 9 / (u * u), 1e-9);
    CHECK_RELATIVE(lw_node_number(node, "scatter_factor", 0), d * sqrt(6) / 3 / u, 1e-9);
    CHECK_RELATIVE(counting_u(node, "strain_apparent"),
                   u / sqrt(2) / 3 / 2 * d * sqrt(6) / 3 / u, 1e-9);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "scatter"));
}

/* What is not resolved becomes a limit: one-sided 95 %, 1.6448536 u above the estimate or 0. */
static void limits(void)
{
    const double s1 = 5, s2 = 10, u = 4e-4, quantile = 1.6448536269514722;
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    hand_line(&h, 1, 1, 1, s1, 0.05, 0, 0, u);
    hand_line(&h, 2, 2, 2, s2, 0.05, 0, 0, u);
    hand_end(&h, 0);
    lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    lw_quantity strain = hand_quantity(node, "strain_apparent", NULL, NULL);
    CHECK(strain.kind == LW_UPPER_LIMIT && strain.confidence == 0.95);
    CHECK_RELATIVE(strain.value, quantile * u * sqrt(2) / (s2 - s1) / 2, 1e-9);
    CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, 20, 1e-10);

    hand_begin(&h, LW_CUBIC, COPPER, CU);
    hand_line(&h, 1, 1, 1, s1, 0.02, 0, 0, u);
    hand_line(&h, 2, 2, 2, s2, 0.0405, 0, 0, u); /* intercept -0.0005: negative */
    hand_end(&h, 0);
    node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    lw_quantity size = hand_quantity(node, "size_volume", NULL, NULL);
    CHECK(size.kind == LW_LOWER_LIMIT && size.confidence == 0.95);
    CHECK_RELATIVE(size.value, 1 / (quantile * u * sqrt(s1 * s1 + s2 * s2) / (s2 - s1)), 1e-9);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "share of size is negative"));
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "grow faster than s"));
    /* the same beside an instrument three times as broad: that is named */
    for (int i = 0; i < 2; i++)
        h.line[i].instrument_breadth_deg = 3 * h.profile[i].breadth_deg.value;
    node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "over-corrected"));

    /* breadths that fall with s: no form may fail, strain is a limit in all */
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 1; i <= 4; i++)
        hand_line(&h, i, 0, 0, 2.5 * i, 0.06 - 0.002 * i, 0, 0, u);
    hand_end(&h, 0);
    node = run_with("williamson_hall", NULL);
    static const char *const forms[3] = {"lorentzian", "gaussian", "mixed"};
    for (int i = 0; i < 3; i++) {
        CHECK(hand_quantity(node, "forms", forms[i], "strain_apparent").kind == LW_UPPER_LIMIT);
        CHECK(hand_quantity(node, "forms", forms[i], "size_volume").kind == LW_VALUE);
    }
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "do not grow"));
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "too small to be seen"));
    node = run_with("halder_wagner", NULL);
    CHECK(hand_quantity(node, "strain_rms", NULL, NULL).kind == LW_UPPER_LIMIT);
    for (int i = 0; i < 4; i++)
        h.line[i].instrument_breadth_deg = 3 * h.profile[i].breadth_deg.value;
    CHECK(hand_list_has(lw_node_get(run_with("williamson_hall", NULL), "remarks"), "over-corrected"));
    /* fall and scatter: faults or shape; two orders of 100 above, two of 111 below: directions */
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 1; i <= 4; i++)
        hand_line(&h, i, 0, 1, 2.5 * i, 0.06 - 0.002 * i + (i % 2 == 0 ? 0.004 : 0), 0, 0, u);
    hand_end(&h, 0);
    CHECK(hand_list_has(lw_node_get(run_choice("williamson_hall", "form", "lorentzian", NULL, NULL), "remarks"), "planar faults"));
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 0; i < 4; i++) {
        int a = i / 2 + 1, b = i % 2 == 0 ? a : 0;
        double s = sqrt(a * a + 2 * b * b) / 0.3615;
        hand_line(&h, a, b, b, s, 0.06 - 0.001 * s + (b == 0 ? 0.006 : 0), 0, 0, u);
    }
    hand_end(&h, 0);
    CHECK(hand_list_has(lw_node_get(run_choice("williamson_hall", "form", "lorentzian", NULL, NULL), "remarks"),
                        "directions differ"));
    /* one line known ten times better than the rest */
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 1; i <= 4; i++)
        hand_line(&h, i, 0, 0, 2.5 * i, 0.04 + 0.002 * i, 0, 0, i == 2 ? u / 10 : u);
    hand_end(&h, 0);
    CHECK(hand_list_has(lw_node_get(run_choice("williamson_hall", "form", "lorentzian", NULL, NULL), "remarks"),
                        "line 200 alone carries 97 %"));

    /* one line whose breadth is a limit: a lower limit for its size */
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    lw_profile *p = hand_line(&h, 1, 1, 1, 4.8, 0.001, 0.0005, 0.0007, 0.001);
    hand_end(&h, 0);
    p->resolved = false;
    p->breadth_s = lw_upper_limit(0.0026, 0.95, "nm^-1");
    node = run_with("scherrer", NULL);
    size = hand_quantity(lw_node_at(lw_node_get(node, "lines"), 0), "size", NULL, NULL);
    CHECK(size.kind == LW_LOWER_LIMIT && size.confidence == 0.95);
    CHECK_RELATIVE(size.value, 1 / 0.0026, 1e-12);
    CHECK(hand_quantity(node, "size_volume", NULL, NULL).kind == LW_LOWER_LIMIT);
}

/* 0.5 deg at 2theta 40 deg, Cu Ka1 0.15405929 nm: K = 0.9: 16.908 nm, K = 1: 18.787 nm, beta/(4 tan) =
 * 0.0059941 (arithmetic on Scherrer's
 * and Stokes & Wilson's formulas). Constants of bodies (common-volume functions by quadrature; compare
 * Langford & Wilson 1978, table 2): sphere 1.07466130 and 0.89195888, cube 110 1.060660, octahedron
 * 111 1.1438. */
static void scherrer(void)
{
    double theta = 20 * HAND_DEGREE, s = 2 * sin(theta) / CU, beta = 0.5 * HAND_DEGREE * cos(theta) / CU;
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    lw_profile *p = hand_line(&h, 1, 1, 0, s, beta, beta, beta, beta / 50);
    hand_end(&h, 0);
    lw_node *node = run_with("scherrer", NULL);
    lw_quantity size = hand_quantity(node, "size_volume", NULL, NULL);
    CHECK_NEAR(size.value, 18.787, 5e-4);
    CHECK_RELATIVE(size.u, size.value / 50, 1e-12);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "K = 1 on the integral breadth"));
    CHECK_NEAR(0.9 * size.value, 16.908, 5e-4);
    node = run_with("single_line_voigt", NULL);
    CHECK_NEAR(hand_quantity(node, "strain_apparent", NULL, NULL).value, 0.0059941, 5e-8);
    CHECK_NEAR(hand_quantity(node, "size_volume", NULL, NULL).value, 18.787, 5e-4);

    node = run_choice("scherrer", "shape", "sphere", NULL, NULL);
    CHECK_RELATIVE(hand_quantity(node, "size", NULL, NULL).value, 1.07466130 / beta, 1e-8);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "0.806 of its diameter")); /* cube root of pi/6 */
    node = run_choice("scherrer", "shape", "cube", NULL, NULL);
    CHECK_RELATIVE(hand_quantity(node, "size", NULL, NULL).value, 1.060660 / beta, 1e-6);
    p->gauss_s.value = 0; /* a Lorentzian: FWHM = 2/pi of its integral breadth */
    node = run_choice("scherrer", "shape", "sphere", "breadth", "fwhm");
    CHECK_RELATIVE(hand_quantity(node, "size", NULL, NULL).value, 0.89195888 / (2 / PI * beta), 1e-8);
    CHECK_RELATIVE(hand_quantity(node, "size", NULL, NULL).u, 0.89195888 / (2 / PI * beta) / 50, 1e-6);
    h.line[0].reflection = (lw_reflection){.h = 1, .k = 1, .l = 1};
    node = run_choice("scherrer", "shape", "octahedron", NULL, NULL);
    CHECK_RELATIVE(hand_quantity(node, "size", NULL, NULL).value, 1.1438 / beta, 5e-5);

    /* no FWHM of a column: it depends on the line's shape */
    int options[2] = {0, 1};
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_method_run(&engine, lw_method_named("scherrer"), &h.profiles, options, lw_tree_new(&arena, NULL),
                        &err) == LW_NOT_SUPPORTED);

    /* mean over lines by 1/u^2 of the breadths; strain shows as sizes that disagree */
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 1; i <= 4; i++)
        hand_line(&h, i, 0, 0, 2.5 * i, 0.05 + 0.004 * i, 0, 0, 0.0005);
    hand_end(&h, 0);
    node = run_with("scherrer", NULL);
    CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, 1 / 0.06, 1e-10);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "which strain does"));
}

/* Breadths that all come from one function with two parameters: rank 2, still the right answer. */
static void common_function(void)
{
    const double D = 30, e = 0.0015;
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 1; i <= 4; i++)
        hand_line(&h, i, 0, 0, 2.5 * i, 1 / D + 2 * e * 2.5 * i, 0, 0, 1e-3);
    hand_end(&h, 0);
    double v[2] = {4e-6, 1e-9};
    size_t m = 3 * h.n;
    for (size_t i = 0; i < h.n; i++)
        for (size_t j = 0; j < h.n; j++)
            h.covariance[h.profile[i].at_breadth * m + h.profile[j].at_breadth] =
                v[0] + v[1] * h.profile[i].s_per_nm * h.profile[j].s_per_nm;
    lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, D, 1e-8);
    CHECK_RELATIVE(counting_u(node, "size_volume"), D * D * sqrt(v[0]), 1e-6);
    CHECK_RELATIVE(counting_u(node, "strain_apparent"), sqrt(v[1]) / 2, 1e-6);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "2 independent numbers"));
}

/* Families off the line are named: 200 and 400 broader by 5 u than the line of 111 and 222. */
static void directions(void)
{
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    static const int hkl[6][3] = {{1, 1, 1}, {2, 0, 0}, {2, 2, 0}, {3, 1, 1}, {2, 2, 2}, {4, 0, 0}};
    for (int i = 0; i < 6; i++) {
        double n = hkl[i][0] * hkl[i][0] + hkl[i][1] * hkl[i][1] + hkl[i][2] * hkl[i][2];
        double s = sqrt(n) / 0.3615;
        hand_line(&h, hkl[i][0], hkl[i][1], hkl[i][2], s, 0.05 + 0.003 * s + (i % 4 == 1 ? 0.012 : 0), 0, 0,
                  0.001);
    }
    hand_end(&h, 0);
    lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    CHECK(hand_list_has(lw_node_get(node, "remarks"), "the 2 orders of direction 100 lie above the line"));
}

/* Uniform stress and uniform energy density in nickel, C11 246.5, C12 147.3, C44 124.7 GPa: E100 136.31, E110
 * 232.51, E111 304.03, E311 184.17 GPa (from the compliances, Nye 1957). Breadths made from them give them
 * back. */
static void stiffness(void)
{
    static const struct {
        int h, k, l;
        double gpa;
    } line[5] = {
        {1, 1, 1, 304.03}, {2, 0, 0, 136.31}, {2, 2, 0, 232.51}, {3, 1, 1, 184.17}, {2, 2, 2, 304.03}};
    for (int energy = 0; energy < 2; energy++) {
        hand_begin(&h, LW_CUBIC, COPPER, CU);
        const double D = 18, stress = 0.45, density = 1.5e-3; /* GPa */
        for (int i = 0; i < 5; i++) {
            double n = line[i].h * line[i].h + line[i].k * line[i].k + line[i].l * line[i].l;
            double s = sqrt(n) / 0.3615;
            double e = energy ? sqrt(2 * density / line[i].gpa) : stress / line[i].gpa;
            hand_line(&h, line[i].h, line[i].k, line[i].l, s, 1 / D + 2 * e * s, 0, 0, 1e-4);
        }
        hand_end(&h, 0);
        int options[2] = {1, 0};
        lw_error err = LW_ERROR_NONE, settling = LW_ERROR_NONE;
        CHECK(lw_method_run(&engine, lw_method_named("williamson_hall"), &h.profiles, (int[2]){1, 1},
                            lw_tree_new(&arena, NULL), &err) == LW_NOT_SUPPORTED); /* no stiffness known */
        h.material.space_group = 225;
        CHECK(lw_material_settle(&h.material, &settling) == LW_OK);
        h.material.has_stiffness = true;
        for (int i = 0; i < 3; i++)
            for (int j = 0; j < 3; j++) {
                h.material.stiffness_gpa[i][j] = i == j ? 246.5 : 147.3;
                h.material.stiffness_gpa[i + 3][j + 3] = i == j ? 124.7 : 0;
            }
        options[1] = 1 + energy;
        lw_node *node = run_with("williamson_hall", options);
        CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, D, 1e-4); /* E to five figures */
        if (energy)
            CHECK_RELATIVE(hand_quantity(node, "energy_density", NULL, NULL).value, 1000 * density, 1e-4);
        else
            CHECK_RELATIVE(hand_quantity(node, "stress_apparent", NULL, NULL).value, stress, 1e-4);
    }
}

/* The same in a hexagonal crystal (titanium, Fisher & Renken 1964 as in the CRC Handbook, 98th ed.) and a tetragonal one
 * (rutile): 1/E in closed form (Nye 1957, ch. VIII) from compliances by the 2 x 2 blocks of the stiffness, in this file. */
static void uniaxial_stiffness(void)
{
    static const double constants[2][6] = {{162.4, 92.0, 69.0, 180.7, 46.7, 35.2}, {268, 175, 147, 484.2, 123.8, 190.2}};
    static const int hkl[5][3] = {{1, 0, 0}, {0, 0, 2}, {1, 0, 1}, {1, 1, 0}, {1, 1, 2}};
    for (int kind = 0; kind < 2; kind++)
        for (int energy = 0; energy < 2; energy++) {
            bool hexagonal = kind == 0;
            const double *c = constants[kind], D = 21, stress = 0.3, density = 8e-4;
            lw_cell cell = {.a = hexagonal ? 0.2951 : 0.4594, .c = hexagonal ? 0.4684 : 0.2959, .alpha = 90, .beta = 90};
            cell.b = cell.a;
            cell.gamma = hexagonal ? 120 : 90;
            double det = c[3] * (c[0] + c[1]) - 2 * c[2] * c[2], half = 1 / (c[0] - c[1]);
            double s11 = 0.5 * (c[3] / det + half), s12 = 0.5 * (c[3] / det - half), s13 = -c[2] / det;
            double s33 = (c[0] + c[1]) / det;
            hand_begin(&h, hexagonal ? LW_HEXAGONAL : LW_TETRAGONAL, cell, 0.05);
            for (int i = 0; i < 5; i++) {
                int a = hkl[i][0], b = hkl[i][1];
                /* normal on the axes x along a, y along b* */
                double n[3] = {a / cell.a, (hexagonal ? (a + 2 * b) / sqrt(3) : b) / cell.a, hkl[i][2] / cell.c};
                double s2 = n[0] * n[0] + n[1] * n[1] + n[2] * n[2], s = sqrt(s2);
                double x = n[0] * n[0] / s2, y = n[1] * n[1] / s2, z = n[2] * n[2] / s2;
                double inverse = (x * x + y * y) * s11 + z * z * s33 + x * y * (2 * s12 + 1 / c[5]) +
                                 z * (1 - z) * (2 * s13 + 1 / c[4]);
                double e = energy ? sqrt(2 * density * inverse) : stress * inverse;
                hand_line(&h, a, b, hkl[i][2], s, 1 / D + 2 * e * s, 0, 0, 1e-4);
            }
            hand_end(&h, 0);
            h.material.space_group = hexagonal ? 194 : 136;
            lw_error err = LW_ERROR_NONE;
            CHECK(lw_material_settle(&h.material, &err) == LW_OK);
            static const char *const names[] = {"c11", "c12", "c13", "c33", "c44", "c66"};
            for (int i = 0; i < (hexagonal ? 5 : 6); i++)
                CHECK(lw_stiffness_set(&h.material, names[i], c[i], &err) == LW_OK);
            CHECK(lw_stiffness_complete(&h.material, &err) == LW_OK);
            lw_node *node = run_with("williamson_hall", (int[2]){1, 1 + energy});
            CHECK_RELATIVE(hand_quantity(node, "size_volume", NULL, NULL).value, D, 1e-8);
            if (energy)
                CHECK_RELATIVE(hand_quantity(node, "energy_density", NULL, NULL).value, 1000 * density, 1e-8);
            else
                CHECK_RELATIVE(hand_quantity(node, "stress_apparent", NULL, NULL).value, stress, 1e-8);
        }
}

/* The Lorentzian form is a straight line: the same numbers as the exact line with errors in both coordinates
 * (York et al. 2004), to second order in the relative error of the abscissa. */
static void straight(void)
{
    static const double s[5] = {4.8, 5.5, 7.8, 9.2, 9.6}, beta[5] = {0.071, 0.0745, 0.0811, 0.0894, 0.0885};
    double cy[25], cx[25], x[5];
    const double u_theta = 0.01;
    hand_begin(&h, LW_CUBIC, COPPER, CU);
    for (int i = 0; i < 5; i++)
        hand_line(&h, i + 1, 0, 0, s[i], beta[i], 0, 0, 4e-4 * (1 + i % 3));
    hand_end(&h, 6e-4);
    for (int i = 0; i < 5; i++) {
        h.line[i].two_theta.u = u_theta;
        x[i] = 2 * s[i];
        for (int j = 0; j < 5; j++) {
            double u = h.profile[i].breadth_s.u;
            cy[5 * i + j] = 6e-4 * 6e-4 + (i == j ? u * u : 0);
            double u_s = cos(h.profile[i].theta_deg * HAND_DEGREE) / CU * u_theta * HAND_DEGREE;
            cx[5 * i + j] = i == j ? 4 * u_s * u_s : 0;
        }
    }
    lw_straight_line line;
    lw_error err = LW_ERROR_NONE;
    CHECK(lw_line_correlated(&engine, 5, x, beta, cx, cy, &line, &err) == LW_OK);
    lw_node *node = run_choice("williamson_hall", "form", "lorentzian", NULL, NULL);
    double scatter = lw_node_number(node, "scatter_factor", 0);
    lw_quantity size = hand_quantity(node, "size_volume", NULL, NULL);
    lw_quantity strain = hand_quantity(node, "strain_apparent", NULL, NULL);
    CHECK_RELATIVE(1 / size.value, line.intercept, 1e-6);
    CHECK_RELATIVE(strain.value, line.slope, 1e-6);
    CHECK_RELATIVE(lw_node_number(node, "chi2", 0), line.chi2, 1e-6);
    CHECK_RELATIVE(counting_u(node, "strain_apparent"), scatter * sqrt(line.slope_variance), 1e-5);
    CHECK_RELATIVE(counting_u(node, "size_volume") / size.value / size.value, scatter * sqrt(line.intercept_variance), 1e-5);
}

/* A normal deviate of Box and Muller (1958) from a 64-bit linear congruential generator (Knuth's MMIX
 * constants). */
static double normal(unsigned long long *state)
{
    double uniform[2];
    for (int i = 0; i < 2; i++) {
        *state = *state * 6364136223846793005ULL + 1442695040888963407ULL;
        uniform[i] = ((double)(*state >> 11) + 0.5) / 9007199254740992.0;
    }
    return sqrt(-2 * log(uniform[0])) * cos(2 * PI * uniform[1]);
}

/* Stated uncertainties are those that noise makes: over TRIALS noisy sets, with a part common to all lines,
 * 1/D and the strain parameter deviate by their u in the mean square. The standard deviation of TRIALS pulls
 * is known to 1/sqrt(2 TRIALS); 4.5 of that is allowed. Seed fixed. */
#define TRIALS 2000
static void pulls(void)
{
    static const int n[7] = {3, 4, 8, 11, 12, 16, 19};
    const double u = 6e-4, common = 3e-4, allowed = 4.5 / sqrt(2.0 * TRIALS);
    unsigned long long state = 20240229;
    for (lw_form form = LW_FORM_LORENTZIAN; form < LW_FORMS; form++) {
        double sum[2] = {0, 0}, p[2] = {1 / 60.0, 0.0015};
        p[0] = form == LW_FORM_GAUSSIAN ? p[0] * p[0] : p[0];
        p[1] = form == LW_FORM_LORENTZIAN ? p[1] : p[1] * p[1];
        int failed = 0;
        for (int trial = 0; trial < TRIALS; trial++) {
            double together = common * normal(&state), slopes[2], s_slope;
            hand_begin(&h, LW_CUBIC, COPPER, CU);
            for (int i = 0; i < 7; i++) {
                double s = sqrt(n[i]) / 0.3615, beta = lw_form_breadth(form, p, s, slopes, &s_slope);
                hand_line(&h, i + 1, 0, 0, s, beta + together + u * normal(&state), 0, 0, u);
            }
            hand_end(&h, common);
            lw_arena scratch;
            lw_arena_begin(&scratch, &engine);
            lw_breadths breadths;
            lw_breadth_fit fit;
            lw_error err = LW_ERROR_NONE;
            failed += lw_breadths_gather(&h.profiles, &scratch, &breadths, &err) != LW_OK ||
                      lw_breadths_fit(&breadths, form, &scratch, &fit, &err) != LW_OK;
            for (int i = 0; i < 2 && err.status == LW_OK; i++)
                sum[i] += pow(fit.p[i] - p[i], 2) / fit.fit.covariance[i][i];
            lw_arena_end(&scratch);
        }
        CHECK(failed == 0);
        CHECK_NEAR(sqrt(sum[0] / TRIALS), 1, allowed);
        CHECK_NEAR(sqrt(sum[1] / TRIALS), 1, allowed);
    }
}

int main(void)
{
    lw_engine_begin(&engine);
    lw_arena_begin(&arena, &engine);
    bench_a();
    directions_of_bench_a();
    readings();
    closed_forms();
    uncertainties();
    limits();
    scherrer();
    common_function();
    directions();
    stiffness();
    uniaxial_stiffness();
    straight();
    pulls();
    lw_arena_end(&arena);
    lw_engine_end(&engine);
    return lw_checks_end();
}
