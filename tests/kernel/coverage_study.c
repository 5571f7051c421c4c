/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How often 95 % intervals hold the truth, and how the answers scatter, over seeded realisations of the
 * counts at three levels. Samples in closed form (see deconvolution_made.h): voigt    Lorentzian size
 * broadening 1/20 nm^-1, Gaussian strain 0.002 rms (Stokes & Wilson 1944 Proc. Phys. Soc. 56, 174); breadths:
 * beta_G exp(-k^2)/erfc(k), k = beta_L/(sqrt(pi) beta_G) (Langford 1978 J. Appl. Cryst. 11, 10) spheres
 * lognormal, median 10 nm, sigma 0.3, and the same strain (Krill & Birringer 1998 Philos. Mag. A 77, 621);
 * breadths by quadrature here, size_volume and size_area by mpmath line     one Voigt line: scatter against
 * the bound of Cramer and Rao, from the Fisher information of Poisson counts at the truth usage:
 * test_coverage_study [REALISATIONS [LEVEL [PART]]] few realisations by default, with bounds that follow from
 * their number; 500 and more are held to 92 to 98 % and to a scatter within 10 % of the bound. LEVEL 1 to 3
 * and PART (voigt, spheres, line) run it by pieces. */
#include "kernel/deconvolution_made.h"
#include "line/lines.h"
#include "numeric/cholesky.h"
#include "numeric/voigt.h"
#include "sample/method.h"

#define EDGE 0.3615
#define STRAIN 0.002
#define TALLIES 40

static const double heights[3] = {300, 3000, 30000};

typedef struct tally {
    char name[60];
    int hits, of, limits, refused;
    double error, square, u, pull;
} tally;

typedef struct board {
    tally tally[TALLIES];
    int n;
} board;

static tally *entry(board *b, const char *method, const char *what)
{
    char name[60];
    snprintf(name, sizeof name, "%s %s", method, what);
    for (int i = 0; i < b->n; i++)
        if (strcmp(b->tally[i].name, name) == 0)
            return &b->tally[i];
    tally *t = &b->tally[b->n++];
    memset(t, 0, sizeof *t);
    snprintf(t->name, sizeof t->name, "%s", name);
    return t;
}

/* A one-sided 95 % limit counts as an interval of its own: it holds the truth or not. */
static void count(board *b, const char *method, const char *what, lw_quantity q, double truth)
{
    tally *t = entry(b, method, what);
    if (q.kind == LW_UPPER_LIMIT || q.kind == LW_LOWER_LIMIT) {
        t->limits++;
        t->of++;
        t->hits += q.kind == LW_UPPER_LIMIT ? truth <= q.value : truth >= q.value;
        return;
    }
    t->of++;
    t->hits += fabs(q.value - truth) < 1.96 * q.u;
    t->error += q.value / truth - 1;
    t->square += pow(q.value / truth - 1, 2);
    t->u += pow(q.u / truth, 2);
}

/* Intervals that are known not to hold the truth in 95 of 100, and why. They are told, not held. */
static const struct {
    const char *row;
    double height; /* 0: at every level */
    const char *why;
} known[] = {
    {"stokes A(L), low order", 30000, "too narrow, about 87 %: why is not settled"},
    {"single_line_voigt size_volume", 0, "too wide: u holds the whole distance to other readings"},
    {"single_line_voigt strain_rms", 0, "too wide: u holds the whole distance to other readings"},
    {"double_voigt size_volume", 0,
     "too narrow at few counts, where the Gaussian part of size, 0 here, comes out positive; else too wide"},
    {"whole_pattern size_volume", 300,
     "too narrow: where counts hide the strain by chance size takes its place"},
    {"whole_pattern size_area", 300, "too narrow: as size_volume"},
    {"warren_averbach size_area", 0, "too wide: u is 1.5 to 2 times the scatter"},
    {"richardson_lucy breadth", 300, "too wide: u is 1.3 times the scatter"},
};

static const char *known_why(const char *row, double height)
{
    for (size_t i = 0; i < sizeof known / sizeof *known; i++)
        if ((!(known[i].height > 0) || known[i].height == height) && strcmp(known[i].row, row) == 0)
            return known[i].why;
    return NULL;
}

/* done: realisations so far; below `trials` nothing is held yet. */
static void tell(board *b, double height, int done, int trials)
{
    if (done < trials)
        printf("after %d of %d:\n", done, trials);
    for (int i = 0; i < b->n; i++) {
        tally *t = &b->tally[i];
        double n = fmax(t->of - t->limits, 1), share = (double)t->hits / t->of, mean = t->error / n;
        double sigma = sqrt(0.95 * 0.05 / t->of);
        printf("%6.0f counts  %-34s %5.1f %% of %d (%d limits, %d refused); u %.2f %%, scatter %.2f %%, off "
               "by %+.2f %%\n",
               height, t->name, 100 * share, t->of, t->limits, t->refused, 100 * sqrt(t->u / n),
               100 * sqrt(fmax(t->square / n - mean * mean, 0)), 100 * mean);
        if (done < trials)
            continue;
        double slack = trials >= 500 ? 0.03 : 0.03 + 3.3 * sigma;
        const char *why = known_why(t->name, height);
        if (why != NULL)
            printf("    known: %s\n", why);
        else
            CHECK(share >= 0.95 - slack && share <= 0.95 + slack);
        CHECK(t->refused == 0);
    }
    if (done == trials)
        b->n = 0;
    fflush(stdout);
}

static double voigt(double length, double s, const void *user)
{
    (void)user;
    return exp(-length / 20 - 2 * M_PI * M_PI * STRAIN * STRAIN * s * s * length * length);
}

static double voigt_breadth(double s)
{
    double beta_l = 1 / 40.0, beta_g = STRAIN * s * sqrt(2 * M_PI), k = beta_l / (sqrt(M_PI) * beta_g);
    return beta_g * exp(-k * k) / erfc(k);
}

static double spheres(double length, double s, const void *user)
{
    static const double factor[4] = {0.5, 0, -1.5, 1}, median = 10, sigma = 0.3;
    double sum = 0, moment[4], v = sigma * sigma;
    (void)user;
    for (int n = 0; n < 4; n++)
        moment[n] = pow(median, n) * exp(0.5 * n * n * v);
    for (int n = 0; n < 4; n++) {
        double x = length > 0 ? (log(length / median) - n * v) / (sigma * sqrt(2)) : -30;
        sum += factor[n] * pow(length, 3 - n) * moment[n] * 0.5 * erfc(x);
    }
    return sum / moment[3] * exp(-2 * M_PI * M_PI * STRAIN * STRAIN * s * s * length * length);
}

static double spheres_breadth(double s)
{
    double sum = 0, step = 0.01;
    for (int i = 0; i < 20000; i++)
        sum += (i == 0 ? 0.5 : 1) * step * spheres(step * i, s, NULL);
    return 1 / (2 * sum);
}

/* Numbers of a method of size and strain. */
static void ask(board *b, made *m, const lw_profiles *p, const char *method, const char *const field[],
                const double truth[], int n)
{
    lw_arena arena;
    lw_error err = LW_ERROR_NONE;
    lw_arena_begin(&arena, &m->engine);
    lw_node *result = lw_tree_new(&arena, &err);
    lw_status status = lw_method_run(&m->engine, lw_method_named(method), p, NULL, result, &err);
    for (int i = 0; i < n; i++) {
        const lw_node *q = status == LW_OK ? lw_node_get(result, field[i]) : NULL;
        if (q == NULL || q->kind != LW_NODE_QUANTITY)
            entry(b, method, field[i])->refused++;
        else
            count(b, method, field[i], q->quantity, truth[i]);
    }
    lw_arena_end(&arena);
}

typedef struct way {
    const char *name;
    int completion, every; /* every n-th realisation */
} way;

static void study(board *b, made *m, double height, const way *ways, int n_ways, int trials,
                  double (*breadth)(double s), bool is_voigt)
{
    for (int t = 0; t < trials; t++) {
        if (t > 0 && t % 20 == 0) /* a run that is stopped has said something */
            tell(b, height, t, trials);
        for (int k = 0; k < n_ways; k++) {
            if (t % ways[k].every != 0)
                continue;
            lw_error err = LW_ERROR_NONE;
            char text[600];
            lw_random random;
            lw_random_begin(&random, is_voigt ? 20260401 : 20260402, (uint64_t)t);
            lw_deconvolve_options options = lw_deconvolve_defaults();
            options.method = made_method(ways[k].name);
            options.completion = ways[k].completion;
            lw_scan *scan = NULL;
            lw_lines *lines;
            lw_profiles *p;
            if (made_deconvolve(m, &random, &m->instrument, &options, &scan, &lines, &p, &err) != LW_OK) {
                entry(b, ways[k].name, "breadth")->refused++;
                fprintf(stderr, "%d %s: %s\n", t, ways[k].name, lw_error_text(&err, text, sizeof text));
            }
            for (size_t i = 0; p != NULL && i < p->n; i++)
                count(b, ways[k].name, "breadth", p->profile[i].breadth_s,
                      breadth(1 / p->profile[i].line->reflection.d_nm));
            /* a low and a middle coefficient: the background's level rules the first */
            for (size_t i = 0; p != NULL && is_voigt && strcmp(ways[k].name, "stokes") == 0 && i < p->n;
                 i++) {
                static const char *const what[] = {"A(L), low order", "A(L), middle"};
                const lw_profile *line = &p->profile[i];
                for (int c = 0; c < 2; c++) {
                    size_t at = c == 0 ? 2 : 12;
                    count(b, "stokes", what[c], lw_quantity_of(line->cosine[at], line->u_cosine[at], ""),
                          voigt(line->length_nm[at], 1 / line->line->reflection.d_nm, NULL));
                }
            }
            if (p != NULL && is_voigt && strcmp(ways[k].name, "convolution") == 0) {
                static const char *const field[] = {"size_volume", "strain_rms"};
                static const double truth[] = {40, STRAIN};
                ask(b, m, p, "single_line_voigt", field, truth, 2);
                ask(b, m, p, "double_voigt", field, truth, 1);
            }
            if (p != NULL && !is_voigt && strcmp(ways[k].name, "physical") == 0) {
                static const char *const field[] = {"size_volume", "size_area", "strain_rms"};
                static const double truth[] = {10.27694483217747, 8.348818107945762, STRAIN};
                ask(b, m, p, "whole_pattern", field, truth, 3);
            }
            if (p != NULL && !is_voigt && strcmp(ways[k].name, "stokes") == 0) {
                static const char *const field[] = {"size_area"};
                static const double truth[] = {8.348818107945762};
                ask(b, m, p, "warren_averbach", field, truth, 1);
            }
            made_free(scan, lines, p);
        }
    }
    tell(b, height, trials, trials);
}

/* ------------------------------------------------------------------------------------------------- the bound
 */

enum { POSITION, AREA, GAUSS, LORENTZ, LEVEL, SLOPE, PARAMETERS };

static double model(const double *p, double x, double middle)
{
    double theta0 = p[POSITION] * made_degree / 2;
    double offset = 2 * (sin(x * made_degree / 2) / cos(theta0) - tan(theta0)) / made_degree;
    return p[LEVEL] + p[SLOPE] * (x - middle) + p[AREA] * lw_voigt(offset, sqrt(p[GAUSS]), p[LORENTZ]);
}

static void bound(const made *m, const double *p, double u[4])
{
    double h[PARAMETERS * PARAMETERS] = {0}, unit[PARAMETERS],
                          middle = 0.5 * (m->two_theta[0] + m->two_theta[m->n - 1]);
    static const double scale[PARAMETERS] = {1e-4, 1e-3, 1e-5, 1e-4, 1e-2, 1e-3};
    for (size_t i = 0; i < m->n; i++) {
        double slope[PARAMETERS], q[PARAMETERS], x = m->two_theta[i];
        for (int a = 0; a < PARAMETERS; a++) {
            double d = a == AREA ? scale[a] * p[AREA] : scale[a], high;
            memcpy(q, p, sizeof q);
            q[a] = p[a] + d;
            high = model(q, x, middle);
            q[a] = p[a] - d;
            slope[a] = (high - model(q, x, middle)) / (2 * d);
        }
        for (int a = 0; a < PARAMETERS; a++)
            for (int b = a; b < PARAMETERS; b++)
                h[a * PARAMETERS + b] += slope[a] * slope[b] / model(p, x, middle);
    }
    CHECK(lw_cholesky(h, PARAMETERS, PARAMETERS, 0) == PARAMETERS);
    for (int a = 0; a < 4; a++) {
        memset(unit, 0, sizeof unit);
        unit[a] = 1;
        lw_cholesky_solve(h, PARAMETERS, PARAMETERS, unit);
        u[a] = sqrt(unit[a]);
    }
}

static void line(double height, int trials)
{
    static const char *const what[4] = {"position", "area", "Gaussian FWHM squared", "Lorentzian FWHM"};
    made m;
    made_begin(&m, EDGE, 0.06, 0.03);
    made_scan(&m, 38, 49, 0.02, height, 100, 0, voigt, NULL);
    /* what the scan was made of: area by its height, widths by the closed forms */
    double s0 = sqrt(3) / EDGE, theta0 = asin(0.5 * MADE_WAVELENGTH * s0),
           d = made_degree * cos(theta0) / MADE_WAVELENGTH;
    double own_gauss = 2 * sqrt(M_LN2 / M_PI) * STRAIN * s0 * sqrt(2 * M_PI) / d,
           own_lorentz = 1 / (20 * M_PI * d);
    double truth[PARAMETERS] = {2 * theta0 / made_degree, 0,   own_gauss * own_gauss + 0.06 * 0.06,
                                own_lorentz + 0.03,       100, 0};
    double top = lw_voigt(0, sqrt(truth[GAUSS]), truth[LORENTZ]), u[4], sum[4] = {0}, square[4] = {0},
           told[4] = {0};
    double nearest = 0; /* the scan's highest point is `height`, not the line's top */
    for (size_t i = 0; i < m.n; i++)
        if (m.clean[i] > m.clean[(size_t)nearest])
            nearest = (double)i;
    truth[AREA] = 1;
    truth[LEVEL] = 0;
    truth[AREA] = height / model(truth, m.two_theta[(size_t)nearest], 0);
    truth[LEVEL] = 100;
    CHECK(top > 0);
    for (size_t i = 0; i < m.n; i++)
        CHECK(fabs(model(truth, m.two_theta[i], 0) / m.clean[i] - 1) < 1e-4);
    bound(&m, truth, u);
    for (int t = 0; t < trials; t++) {
        lw_error err = LW_ERROR_NONE;
        lw_random random;
        lw_random_begin(&random, 20260403, (uint64_t)t);
        lw_deconvolve_options options = lw_deconvolve_defaults();
        lw_scan *scan = NULL;
        lw_lines *lines;
        lw_profiles *p;
        made_deconvolve(&m, &random, &m.instrument, &options, &scan, &lines, &p, &err);
        CHECK(lines != NULL);
        if (lines != NULL) {
            const lw_line *l = &lines->line[0];
            double value[4] = {l->two_theta.value - truth[POSITION], l->area.value - truth[AREA],
                               l->own_variance_deg2 - own_gauss * own_gauss,
                               l->own_lorentz_deg - own_lorentz};
            size_t at[4] = {l->at_position, l->at_area, l->at_gauss, l->at_lorentz};
            for (int a = 0; a < 4; a++) {
                sum[a] += value[a] / trials;
                square[a] += value[a] * value[a] / trials;
                told[a] += lines->covariance[at[a] * (lines->n_parameters + 1)] / trials;
            }
        }
        made_free(scan, lines, p);
    }
    for (int a = 0; a < 4; a++) {
        double scatter = sqrt(square[a] - sum[a] * sum[a]) / u[a], sigma = 1 / sqrt(2.0 * trials);
        printf("%6.0f counts  line: %-28s scatter %.3f of the bound, u %.3f of it, off by %+.2f u\n", height,
               what[a], scatter, sqrt(told[a]) / u[a], sum[a] / u[a]);
        CHECK(fabs(scatter - 1) < (trials >= 500 ? 0.1 : 0.1 + 3 * sigma));
    }
    fflush(stdout);
    made_end(&m);
}

int main(int argc, char **argv)
{
    int trials = argc > 1 ? atoi(argv[1]) : 30, only = argc > 2 ? atoi(argv[2]) : 0;
    const char *part = argc > 3 ? argv[3] : "";
    static const way by_voigt[] = {{"convolution", 1, 1},
                                   {"stokes", 1, 1},
                                   {"tikhonov", 1, 1},
                                   {"maximum_entropy", 1, 1},
                                   {"richardson_lucy", 1, 3}};
    static const way by_spheres[] = {{"physical", 2, 1}, {"stokes", 2, 1}};
    for (int level = 0; level < 3; level++) {
        board b = {.n = 0};
        made m;
        if (only > 0 && level != only - 1)
            continue;
        if (part[0] == '\0' || strcmp(part, "line") == 0)
            line(heights[level], argc > 1 ? trials : 200);
        if (part[0] == '\0' || strcmp(part, "voigt") == 0) {
            made_begin(&m, EDGE, 0.06, 0.03);
            made_scan(&m, 36, 82, 0.04, heights[level], 100, 0, voigt, NULL);
            study(&b, &m, heights[level], by_voigt, argc > 1 ? 5 : 4, trials, voigt_breadth, true);
            made_end(&m);
        }
        if (part[0] == '\0' || strcmp(part, "spheres") == 0) {
            made_begin(&m, EDGE, 0.06, 0.03);
            made_scan(&m, 36, 103, 0.05, heights[level], 100, 0, spheres, NULL);
            study(&b, &m, heights[level], by_spheres, 2, trials, spheres_breadth, false);
            made_end(&m);
        }
    }
    return lw_checks_end();
}
