/* SPDX-License-Identifier: GPL-3.0-or-later */
/* NIST/ITL Statistical Reference Datasets, nonlinear regression: certified parameters, standard
 * deviations and residual sums of squares, from both starts where the method can be asked to. The data
 * and their sources are in published/strd. Jacobians by complex step, which is exact to rounding. */
#include "check.h"
#include "numeric/least_squares.h"

#include <complex.h>
#include <stdlib.h>

#define ROWS_MOST 250
#define PARAMETERS_MOST 9

typedef double complex model_fn(const double complex *b, double x);

typedef struct set {
    size_t n_parameters, n;
    double rss, start[2][PARAMETERS_MOST], certified[PARAMETERS_MOST], sd[PARAMETERS_MOST];
    double y[ROWS_MOST], x[ROWS_MOST];
    model_fn *model;
} set;

static double complex square(double complex v)
{
    return v * v;
}

static double complex gauss(const double complex *b, double x)
{
    return b[0] * cexp(-b[1] * x) + b[2] * cexp(-square((x - b[3]) / b[4])) +
           b[5] * cexp(-square((x - b[6]) / b[7]));
}

static double complex eckerle4(const double complex *b, double x)
{
    return b[0] / b[1] * cexp(-0.5 * square((x - b[2]) / b[1]));
}

static double complex lanczos3(const double complex *b, double x)
{
    return b[0] * cexp(-b[1] * x) + b[2] * cexp(-b[3] * x) + b[4] * cexp(-b[5] * x);
}

static double complex enso(const double complex *b, double x)
{
    double complex t = 2 * 3.14159265358979323846 * x;
    return b[0] + b[1] * ccos(t / 12) + b[2] * csin(t / 12) + b[4] * ccos(t / b[3]) + b[5] * csin(t / b[3]) +
           b[7] * ccos(t / b[6]) + b[8] * csin(t / b[6]);
}

static double complex cubic_cubic(const double complex *b, double x)
{
    return (b[0] + x * (b[1] + x * (b[2] + x * b[3]))) / (1 + x * (b[4] + x * (b[5] + x * b[6])));
}

static double complex mgh09(const double complex *b, double x)
{
    return b[0] * (x * x + x * b[1]) / (x * x + x * b[2] + b[3]);
}

static double complex mgh10(const double complex *b, double x)
{
    return b[0] * cexp(b[1] / (x + b[2]));
}

static double complex rat43(const double complex *b, double x)
{
    return b[0] * cpow(1 + cexp(b[1] - b[2] * x), -1 / b[3]);
}

static double complex bennett5(const double complex *b, double x)
{
    return b[0] * cpow(b[1] + x, -1 / b[2]);
}

static double complex kirby2(const double complex *b, double x)
{
    return (b[0] + x * (b[1] + x * b[2])) / (1 + x * (b[3] + x * b[4]));
}

static int read_set(const char *name, set *s)
{
    char path[512], line[256];
    snprintf(path, sizeof path, LW_SOURCE_DIR "/tests/published/strd/%s.dat", name);
    FILE *file = fopen(path, "r");
    if (file == NULL)
        return 0;
    size_t row = 0;
    int good = 1;
    while (good && fgets(line, sizeof line, file) != NULL) {
        if (line[0] == '#')
            continue;
        char *at = line;
        double v[4] = {0};
        int count = 0;
        for (char *end; count < 4; count++, at = end) {
            v[count] = strtod(at, &end);
            if (end == at)
                break;
        }
        if (row == 0) {
            s->n_parameters = (size_t)v[0];
            s->n = (size_t)v[1];
            s->rss = v[2];
            good = count == 3 && s->n_parameters <= PARAMETERS_MOST && s->n <= ROWS_MOST;
        } else if (row <= s->n_parameters) {
            s->start[0][row - 1] = v[0];
            s->start[1][row - 1] = v[1];
            s->certified[row - 1] = v[2];
            s->sd[row - 1] = v[3];
            good = count == 4;
        } else if (row <= s->n_parameters + s->n) {
            s->y[row - 1 - s->n_parameters] = v[0];
            s->x[row - 1 - s->n_parameters] = v[1];
            good = count == 2;
        } else
            good = 0;
        row++;
    }
    fclose(file);
    return good && row == 1 + s->n_parameters + s->n;
}

static lw_status evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err)
{
    const set *s = user;
    double chi2 = 0, column[PARAMETERS_MOST];
    double complex b[PARAMETERS_MOST];
    (void)err;
    for (size_t k = 0; k < s->n_parameters; k++)
        b[k] = p[k];
    for (size_t i = 0; i < s->n; i++) {
        double r = s->y[i] - creal(s->model(b, s->x[i]));
        chi2 += r * r;
        if (!want_normal)
            continue;
        for (size_t k = 0; k < s->n_parameters; k++) {
            double h = 1e-150;
            b[k] = p[k] + I * h;
            column[k] = cimag(s->model(b, s->x[i])) / h;
            b[k] = p[k];
        }
        for (size_t k = 0; k < s->n_parameters; k++) {
            normal->g[k] += column[k] * r;
            for (size_t j = 0; j <= k; j++)
                normal->h[k * normal->n + j] += column[k] * column[j];
        }
    }
    normal->chi2 = chi2;
    return LW_OK;
}

/* Fits from a start; checks the certified values. tolerance: relative, of the parameters. */
static void check_set(lw_engine *engine, const char *name, model_fn *model, int start, double tolerance)
{
    static set s;
    s.model = model;
    int readable = read_set(name, &s);
    CHECK(readable);
    if (!readable)
        return;
    lw_problem problem = {.n = s.n_parameters, .evaluate = evaluate, .user = &s};
    lw_fit_control control = lw_fit_control_defaults();
    control.iterations_most = 500;
    control.chi2_tolerance = 1e-14;
    control.step_tolerance = INFINITY; /* weights are 1: a parameter's u is not known beforehand */
    lw_fit_outcome outcome;
    lw_error err = LW_ERROR_NONE;
    double p[PARAMETERS_MOST], worst = 0, worst_sd = 0;
    memcpy(p, s.start[start - 1], sizeof p);
    CHECK(lw_least_squares(engine, &problem, &control, p, NULL, &outcome, &err) == LW_OK);
    CHECK(outcome.converged);
    CHECK_RELATIVE(outcome.chi2, s.rss, 1e-9);
    double h[PARAMETERS_MOST * PARAMETERS_MOST] = {0}, g[PARAMETERS_MOST] = {0},
                               c[PARAMETERS_MOST * PARAMETERS_MOST];
    lw_normal normal = {.n = s.n_parameters, .h = h, .g = g};
    evaluate(&s, p, true, &normal, &err);
    size_t weakest = 0;
    CHECK(lw_invert_normal(engine, h, s.n_parameters, NULL, c, &weakest, &err) == LW_OK);
    double variance = normal.chi2 / (double)(s.n - s.n_parameters);
    for (size_t k = 0; k < s.n_parameters; k++) {
        CHECK_RELATIVE(p[k], s.certified[k], tolerance);
        worst = fmax(worst, fabs(p[k] / s.certified[k] - 1));
        double sd = sqrt(c[k * (s.n_parameters + 1)] * variance);
        CHECK_RELATIVE(sd, s.sd[k], 1e-5);
        worst_sd = fmax(worst_sd, fabs(sd / s.sd[k] - 1));
    }
    printf("%-9s start %d: %3zu iterations, parameters %.1e, standard deviations %.1e, sum %.1e (%s)\n", name,
           start, outcome.iterations, worst, worst_sd, fabs(outcome.chi2 / s.rss - 1), outcome.reason);
}

int main(void)
{
    static const struct {
        const char *name;
        model_fn *model;
        int first_start; /* 1: from both starts; 2: from the nearer one, as start 1 lies on a plateau from
                          * which chi-square falls to infinity */
        double tolerance;
    } sets[] = {
        {"Gauss1", gauss, 1, 1e-8},      {"Gauss2", gauss, 1, 1e-8},        {"Gauss3", gauss, 1, 1e-8},
        {"Eckerle4", eckerle4, 2, 1e-8}, {"Lanczos3", lanczos3, 1, 1e-5},   {"ENSO", enso, 1, 2e-6},
        {"Hahn1", cubic_cubic, 1, 1e-5}, {"Thurber", cubic_cubic, 1, 1e-7}, {"MGH09", mgh09, 1, 1e-6},
        {"MGH10", mgh10, 2, 1e-6},       {"Rat43", rat43, 1, 1e-6},         {"Bennett5", bennett5, 1, 1e-4},
        {"Kirby2", kirby2, 1, 1e-6}};
    lw_engine engine;
    lw_engine_begin(&engine);
    for (size_t i = 0; i < sizeof sets / sizeof *sets; i++)
        for (int start = sets[i].first_start; start <= 2; start++)
            check_set(&engine, sets[i].name, sets[i].model, start, sets[i].tolerance);
    lw_engine_end(&engine);
    return lw_checks_end();
}
