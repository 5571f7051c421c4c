/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Regularisation: the departure x of the sample's profile from the completing shape is the one that minimises
 * chi2(x) + alpha |D x|^2, D the derivative of the order asked for with x = 0 outside the window. alpha by
 * the discrepancy principle (chi2 as noise alone would make it) or by generalised cross-validation. Linear in
 * the data, so uncertainties are propagated exactly; what the regularisation keeps back is estimated from the
 * solution. */
#include "profile/grid.h"

#include "numeric/cholesky.h"

#include <math.h>

typedef struct solver {
    const lw__grid *g;
    size_t m;
    double *penalty, *work, *z, *x; /* [m][m], [m][m], [m][m], [m] */
    const bool *held;               /* values kept at -shape, or NULL */
} solver;

static void make_penalty(const solver *s, int order)
{
    static const double row[3][3] = {{1, 0, 0}, {-1, 1, 0}, {1, -2, 1}};
    long m = (long)s->m;
    for (long first = -order; first < m; first++) /* differences that reach over either end see zeros there */
        for (int a = 0; a <= order; a++)
            for (int b = 0; b <= order; b++)
                if (first + a >= 0 && first + a < m && first + b >= 0 && first + b < m)
                    s->penalty[(first + a) * m + first + b] += row[order][a] * row[order][b];
}

/* Solves for x at alpha; held values enter as known. False if the matrix is singular. */
static bool solve_at(const solver *s, double alpha)
{
    size_t m = s->m;
    for (size_t j = 0; j < m; j++) {
        s->x[j] = s->g->pull[j];
        for (size_t k = j; k < m; k++)
            s->work[j * m + k] = s->g->normal[j * m + k] + alpha * s->penalty[j * m + k];
    }
    if (s->held != NULL) {
        for (size_t j = 0; j < m; j++)
            for (size_t k = 0; k < m && !s->held[j]; k++)
                if (s->held[k])
                    s->x[j] += (s->g->normal[j * m + k] + alpha * s->penalty[j * m + k]) * s->g->shape[k];
        for (size_t j = 0; j < m; j++) {
            for (size_t k = j; k < m; k++)
                if (s->held[j] || s->held[k])
                    s->work[j * m + k] = j == k;
            if (s->held[j])
                s->x[j] = -s->g->shape[j];
        }
    }
    if (lw_cholesky(s->work, m, m, 0) < m)
        return false;
    lw_cholesky_solve(s->work, m, m, s->x);
    return true;
}

/* Trace of Z N at the alpha that solve_at() left factored in `work`. */
static double influence(const solver *s)
{
    size_t m = s->m;
    double sum = 0;
    lw_cholesky_invert_factor(s->work, m, m);
    for (size_t j = 0; j < m; j++)
        for (size_t k = 0; k <= j; k++) {
            double z = lw_dot(s->work + j * m + j, s->work + k * m + j, m - j);
            s->z[j * m + k] = s->z[k * m + j] = z;
            sum += (j == k ? 1 : 2) * z * s->g->normal[j * m + k];
        }
    return sum;
}

static double choose(const solver *s, const lw_deconvolve_options *options, const char **rule)
{
    size_t m = s->m;
    double trace_n = 0, trace_p = 0;
    for (size_t j = 0; j < m; j++) {
        trace_n += s->g->normal[j * m + j];
        trace_p += s->penalty[j * m + j];
    }
    double unit = trace_n / trace_p, low = -8, high = 9; /* powers of ten */
    if (options->strength > 0) {
        *rule = "as given";
        return options->strength * unit;
    }
    if (options->parameter == 0) {
        *rule = "discrepancy principle";
        if (solve_at(s, unit * pow(10, high)) && lw__grid_chi2(s->g, s->x) <= s->g->expected_chi2)
            return unit * pow(10, high);
        if (solve_at(s, unit * pow(10, low)) && lw__grid_chi2(s->g, s->x) <= s->g->expected_chi2) {
            for (int i = 0; i < 16; i++) {
                double middle = 0.5 * (low + high);
                bool below =
                    solve_at(s, unit * pow(10, middle)) && lw__grid_chi2(s->g, s->x) <= s->g->expected_chi2;
                *(below ? &low : &high) = middle;
            }
            return unit * pow(10, low);
        }
        *rule = "generalised cross-validation, because no profile brings chi-square down to that of noise";
    } else {
        *rule = "generalised cross-validation";
    }
    double best = high, least = INFINITY, step = 2;
    for (int round = 0; round < 3; round++, step /= 3.5) {
        double from = round == 0 ? low : best - 1.75 * step * 2, centre = best;
        for (int i = 0; i < (round == 0 ? 9 : 7); i++) {
            double power = round == 0 ? from + step * i : centre + step * (i - 3);
            if (power > high || power < low || !solve_at(s, unit * pow(10, power)))
                continue;
            double chi2 = lw__grid_chi2(s->g, s->x), freedom = s->g->expected_chi2 - influence(s);
            double score = freedom > 0 ? chi2 / (freedom * freedom) : INFINITY;
            if (score < least) {
                least = score;
                best = power;
            }
        }
    }
    return unit * pow(10, best);
}

/* Active set: values that went negative are held at zero until none does. */
static lw_status keep_positive(solver *s, double alpha, lw_arena *scratch, lw_error *err)
{
    bool *held = lw_arena_take(scratch, s->m, sizeof *held, err);
    if (held == NULL)
        return LW_OUT_OF_MEMORY;
    for (int round = 0; round < 30; round++) {
        bool added = false;
        for (size_t j = 0; j < s->m; j++)
            if (!held[j] && s->g->shape[j] + s->x[j] < -1e-12 * s->g->shape[s->g->middle])
                held[j] = added = true;
        if (!added)
            break;
        s->held = held;
        if (!solve_at(s, alpha))
            break;
    }
    s->held = NULL;
    return LW_OK;
}

static lw_status solve(const lw__job *job, const lw__instrument *instrument, bool first, lw_arena *scratch,
                       lw__answer *answer, lw_error *err)
{
    lw__grid g;
    lw_status status = lw__take_grid(job, instrument, 10, scratch, &g, err);
    if (status != LW_OK)
        return status;
    size_t m = g.m;
    solver s = {.g = &g, .m = m};
    double **square[] = {&s.penalty, &s.work, &s.z};
    for (size_t i = 0; i < 3; i++)
        if ((*square[i] = lw_arena_take(scratch, m * m, sizeof(double), err)) == NULL)
            return LW_OUT_OF_MEMORY;
    double *c = lw_arena_take(scratch, m * m, sizeof *c, err),
           *zn = lw_arena_take(scratch, m * m, sizeof *zn, err);
    if ((s.x = lw_arena_take(scratch, m, sizeof(double), err)) == NULL || c == NULL || zn == NULL)
        return LW_OUT_OF_MEMORY;
    make_penalty(&s, job->options->order);
    const char *rule = "";
    if (first)
        answer->choice = choose(&s, job->options, &rule);
    if (!solve_at(&s, answer->choice))
        return LW_OK; /* no data to speak of: the fit's breadth stands */
    answer->from_shape = false;
    double followed = 0;
    if (first) {
        influence(&s);
        for (size_t j = 0; j < m; j++)
            for (size_t k = 0; k < m; k++)
                zn[j * m + k] = lw_dot(s.z + j * m, g.normal + k * m, m);
        for (size_t j = 0; j < m; j++)
            for (size_t k = 0; k < m; k++)
                c[j * m + k] = lw_dot(zn + j * m, s.z + k * m, m);
        followed = lw__grid_followed(&g, s.z, zn);
        if ((status = lw__add_background(job, &g, s.z, c, scratch, err)) != LW_OK)
            return status;
        solve_at(&s, answer->choice);
    }
    if (job->options->non_negative && (status = keep_positive(&s, answer->choice, scratch, err)) != LW_OK)
        return status;
    answer->breadth = lw__grid_breadth(job, &g, s.x, NULL);
    if (!first)
        return LW_OK;
    double share, bias;
    status = lw__grid_variance(job, &g, s.x, s.z, c, &answer->variance, &share, &bias, scratch, err);
    if (status != LW_OK)
        return status;
    if ((status = lw__grid_refold(job, &g, s.x, followed, err)) != LW_OK)
        return status;
    if ((status = lw__add_standard(job, &g, s.x, s.z, c, answer, scratch, err)) != LW_OK)
        return status;
    job->profile->assumed =
        lw_arena_print(&job->profiles->arena, err,
                       "%s; departure from that shape smooth in its derivative of order %d, parameter "
                       "%.3g by %s%s; %.2g of the breadth remains the shape's, the smoothing may keep "
                       "back %.2g nm^-1",
                       job->profile->assumed, job->options->order, answer->choice, rule,
                       job->options->non_negative ? ", not negative" : "", share, fabs(bias));
    if (job->profile->assumed == NULL)
        return LW_OUT_OF_MEMORY;
    return lw__grid_coefficients(job, &g, s.x, c, false, err);
}

static lw_status run(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                     lw_error *err)
{
    return lw__line_by_line(engine, profiles, options, solve, "tikhonov", err);
}

const lw_deconvolution lw_deconvolution_tikhonov = {
    .name = "tikhonov",
    .source = "Tikhonov (1963) Dokl. Akad. Nauk SSSR 151, 501; discrepancy principle: Morozov (1966) Dokl. "
              "Akad. Nauk SSSR 167, "
              "510; generalised cross-validation: Golub, Heath & Wahba (1979) Technometrics 21, 215",
    .by_lines = true,
    .run = run};
