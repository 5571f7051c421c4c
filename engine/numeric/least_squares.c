/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "numeric/least_squares.h"
#include "numeric/cholesky.h"

#include <float.h>
#include <math.h>
#include <stdint.h>
#include <string.h>

#define DAMPING_START 1e-4
#define DAMPING_MOST 1e15
#define DAMPING_LEAST 1e-14
#define UNDAMPED 1e-10   /* damping of the step that judges whether the end is reached */
#define REJECTED_MOST 60 /* in a row */

typedef struct solver {
    const lw_problem *problem;
    size_t n, ld;
    lw_normal at;         /* normal equations at p */
    double *trial;        /* parameters tried */
    double *step, *scale; /* step[n]; 1/sqrt(diagonal) */
    double *matrix;       /* factor of the free part */
    double *right;        /* its right-hand side */
    size_t *free_at;      /* which parameters are free */
    size_t *first, *end;  /* envelope of the free part */
    unsigned char *held;  /* 0 free, 1 held for this step, 2 moved onto its bound by this step */
} solver;

lw_fit_control lw_fit_control_defaults(void)
{
    return (lw_fit_control){.iterations_most = 100, .chi2_tolerance = 1e-10, .step_tolerance = 1e-4};
}

static double lower_of(const lw_problem *problem, size_t i)
{
    return problem->lower != NULL ? problem->lower[i] : -INFINITY;
}

static double upper_of(const lw_problem *problem, size_t i)
{
    return problem->upper != NULL ? problem->upper[i] : INFINITY;
}

static bool is_fixed(const lw_problem *problem, size_t i)
{
    return (problem->fixed != NULL && problem->fixed[i]) || lower_of(problem, i) == upper_of(problem, i);
}

/* On a bound with the downhill direction pointing out of the allowed range. */
static bool pressed(const lw_problem *problem, const double *p, const double *g, size_t i)
{
    return (p[i] <= lower_of(problem, i) && g[i] <= 0) || (p[i] >= upper_of(problem, i) && g[i] >= 0);
}

static double h_of(const lw_normal *normal, size_t i, size_t j)
{
    return i >= j ? normal->h[i * normal->n + j] : normal->h[j * normal->n + i];
}

/* chi2(p) - chi2(p + step) by the quadratic model. */
static double predicted_fall(const lw_normal *normal, const double *step)
{
    double fall = 0;
    for (size_t i = 0; i < normal->n; i++) {
        const double *row = normal->h + i * normal->n;
        if (step[i] != 0)
            fall += step[i] * (2 * normal->g[i] - row[i] * step[i] - 2 * lw_dot(row, step, i));
    }
    return fall;
}

/* Solves the damped equations for the free parameters; those held or moved onto a bound keep their step.
 * False if the matrix is not positive definite at this damping. */
static bool solve_free(solver *s, double damping)
{
    size_t m = 0, n = s->n;
    bool moved = false;
    for (size_t i = 0; i < n; i++) {
        if (s->held[i] == 0)
            s->free_at[m++] = i;
        moved = moved || s->held[i] == 2;
    }
    size_t border = 0;
    while (border < m && s->free_at[m - 1 - border] >= n - s->problem->border)
        border++;
    for (size_t a = 0; a < m; a++) {
        size_t i = s->free_at[a];
        const double *row = s->at.h + i * n;
        double scale = s->scale[i];
        s->first[a] = a;
        for (size_t b = 0; b < a; b++)
            if (row[s->free_at[b]] != 0) {
                s->first[a] = b;
                break;
            }
        for (size_t b = 0; b <= a; b++) {
            size_t j = s->free_at[b];
            s->matrix[b * s->ld + a] = row[j] * scale * s->scale[j];
        }
        /* a parameter that moves nothing has a zero row: the unit pivot then makes its step 0 */
        s->matrix[a * s->ld + a] = (row[i] > 0 ? 1.0 : 0.0) + (row[i] > 0 ? damping : 1.0);
        double g = s->at.g[i];
        if (moved)
            for (size_t j = 0; j < n; j++)
                if (s->held[j] == 2)
                    g -= h_of(&s->at, i, j) * s->step[j];
        s->right[a] = g * scale;
    }
    size_t done = border > 0 && lw_cholesky_envelope(s->first, m, border, s->end)
                      ? lw_cholesky_bordered(s->matrix, m, s->ld, s->end, border, 1e-15)
                      : lw_cholesky(s->matrix, m, s->ld, 1e-15);
    if (done < m)
        return false;
    lw_cholesky_solve(s->matrix, m, s->ld, s->right);
    for (size_t a = 0; a < m; a++)
        s->step[s->free_at[a]] = s->right[a] * s->scale[s->free_at[a]];
    return true;
}

/* The step at a damping, inside the bounds: a coordinate that would cross its bound is put onto it and
 * the others are solved anew for that; the last resort is a plain cut. */
static bool find_step(solver *s, const double *p, double damping)
{
    const lw_problem *problem = s->problem;
    size_t n = s->n;
    for (size_t i = 0; i < n; i++) {
        s->step[i] = 0;
        s->held[i] = is_fixed(problem, i) || pressed(problem, p, s->at.g, i);
        double diagonal = s->at.h[i * n + i];
        s->scale[i] = diagonal > 0 ? 1 / sqrt(diagonal) : 1.0;
    }
    for (int pass = 0;; pass++) {
        if (!solve_free(s, damping))
            return false;
        bool crossed = false;
        for (size_t i = 0; i < n; i++) {
            if (s->held[i])
                continue;
            double to = p[i] + s->step[i], low = lower_of(problem, i), high = upper_of(problem, i);
            if (to >= low && to <= high)
                continue;
            s->step[i] = (to < low ? low : high) - p[i];
            s->held[i] = 2;
            crossed = true;
        }
        if (!crossed || pass == 8)
            break;
    }
    for (size_t i = 0; i < n; i++)
        s->trial[i] = fmin(fmax(p[i] + s->step[i], lower_of(problem, i)), upper_of(problem, i));
    return true;
}

static bool finite_normal(const lw_normal *normal)
{
    for (size_t i = 0; i < normal->n; i++)
        if (!isfinite(normal->g[i]) || !isfinite(normal->h[i * normal->n + i]))
            return false;
    return true;
}

static lw_status evaluate(const lw_problem *problem, const double *p, bool want_normal, lw_normal *normal,
                          lw_fit_outcome *outcome, lw_error *err)
{
    normal->chi2 = INFINITY;
    normal->rounding = 0;
    if (want_normal) {
        memset(normal->h, 0, problem->n * problem->n * sizeof *normal->h);
        memset(normal->g, 0, problem->n * sizeof *normal->g);
    }
    outcome->evaluations++;
    lw_status status = problem->evaluate(problem->user, p, want_normal, normal, err);
    if (status == LW_OK && (!isfinite(normal->chi2) || (want_normal && !finite_normal(normal))))
        normal->chi2 = INFINITY;
    return status;
}

/* Whether a fall that was foretold is not worth having, or can't be told from rounding. */
static bool is_nothing(const lw_normal *at, double fall, double tolerance, double chi2_start)
{
    return fall <= tolerance * at->chi2 || fall <= 1e-22 * chi2_start || fall <= at->rounding;
}

/* Largest step in units of 1/sqrt(diagonal of H), and whether any parameter moved beyond rounding. */
static bool measure_step(const solver *s, const double *p, lw_fit_outcome *outcome)
{
    bool moved = false;
    outcome->largest_step = 0;
    for (size_t i = 0; i < s->n; i++) {
        double diagonal = s->at.h[i * s->n + i], size = fabs(s->step[i]) * sqrt(diagonal > 0 ? diagonal : 0);
        if (size > outcome->largest_step) {
            outcome->largest_step = size;
            outcome->largest_at = i;
        }
        moved = moved || fabs(s->step[i]) > 4 * DBL_EPSILON * fabs(p[i]);
    }
    return moved;
}

static lw_status iterate(solver *s, const lw_fit_control *control, double *p, lw_normal *other,
                         lw_fit_outcome *outcome, lw_engine *engine, lw_error *err)
{
    const lw_problem *problem = s->problem;
    lw_status status = evaluate(problem, p, true, &s->at, outcome, err);
    if (status != LW_OK)
        return status;
    if (!isfinite(s->at.chi2))
        return lw_fail(err, LW_BAD_ARGUMENT, "choose other starting values",
                       "the model can't be evaluated at the starting values");
    const double chi2_start = s->at.chi2;
    outcome->at_last_evaluation = true;
    double damping = DAMPING_START, growth = 2;
    size_t rejected = 0;
    bool foretold = true;
    outcome->reason = "iteration limit reached";
    while (outcome->iterations < control->iterations_most) {
        if ((status = lw_engine_poll(engine, err)) != LW_OK)
            return status;
        outcome->iterations++;
        if (!find_step(s, p, damping)) {
            damping = fmax(10 * damping, 1e-13);
            if (damping < DAMPING_MOST)
                continue;
            outcome->reason = "the normal equations are not positive";
            break;
        }
        double predicted = predicted_fall(&s->at, s->step);
        bool moved = measure_step(s, p, outcome);
        if (!moved || s->at.chi2 == 0) {
            /* a heavily damped step that rounds away proves nothing: the undamped one has to */
            if (damping <= 1e-3 || s->at.chi2 == 0 || !find_step(s, p, UNDAMPED) ||
                !measure_step(s, p, outcome) ||
                is_nothing(&s->at, predicted_fall(&s->at, s->step), control->chi2_tolerance, chi2_start)) {
                outcome->converged = true;
                outcome->reason = "the step is below rounding";
            } else {
                outcome->reason = "no step lowers chi-square further";
            }
            break;
        }
        /* Nothing worth a further evaluation is left, by a model that foretold the last step well: then a
         * tenth of the tolerances (a hundredth of the fall) does. The answer stays at the point evaluated
         * last. */
        if (rejected == 0 && foretold && damping <= 1e-3 && predicted >= 0 &&
            predicted <= 0.01 * control->chi2_tolerance * s->at.chi2 &&
            outcome->largest_step <= 0.1 * control->step_tolerance) {
            outcome->converged = true;
            outcome->reason = "the next step would change nothing";
            break;
        }
        /* right after a rejection the trial is cheap: chi-square alone */
        bool want_normal = rejected == 0;
        double actual = -INFINITY;
        if (predicted > 0) {
            other->n = s->n;
            status = evaluate(problem, s->trial, want_normal, other, outcome, err);
            if (status != LW_OK)
                return status;
            outcome->at_last_evaluation = false;
            actual = s->at.chi2 - other->chi2;
        }
        double gain = predicted > 0 ? actual / predicted : -1, limit = control->chi2_tolerance * s->at.chi2;
        bool small = predicted > 0 && predicted <= limit && fabs(actual) <= limit &&
                     outcome->largest_step <= control->step_tolerance;
        if (gain > 1e-4 && isfinite(other->chi2)) {
            memcpy(p, s->trial, s->n * sizeof *p);
            outcome->at_last_evaluation = true;
            if (!want_normal && (status = evaluate(problem, p, true, other, outcome, err)) != LW_OK)
                return status;
            lw_normal swap = s->at;
            s->at = *other;
            *other = swap;
            double t = 2 * gain - 1;
            foretold = gain > 0.25 && gain < 4;
            damping = fmax(damping * fmax(gain > 0.9 ? 0.02 : 0.1, 1 - t * t * t), DAMPING_LEAST);
            growth = 2;
            rejected = 0;
        } else {
            rejected++;
            damping = fmin(damping * growth * (isfinite(actual) ? 1 : 5), DAMPING_MOST);
            growth *= 2;
        }
        if (small && damping > 1e-3) {
            /* small only because it is damped? Ask the undamped step. */
            small = !find_step(s, p, UNDAMPED) ||
                    predicted_fall(&s->at, s->step) <= 10 * control->chi2_tolerance * s->at.chi2;
            if (!small && rejected == 0)
                damping *= 1e-2;
        }
        if (small) {
            outcome->converged = true;
            outcome->reason = "chi-square and parameters no longer change";
            break;
        }
        if (rejected == REJECTED_MOST) {
            bool done = find_step(s, p, UNDAMPED);
            double left = done ? predicted_fall(&s->at, s->step) : INFINITY;
            outcome->converged = is_nothing(&s->at, left, control->chi2_tolerance, chi2_start);
            outcome->reason =
                outcome->converged ? "chi-square no longer falls" : "no step lowers chi-square further";
            break;
        }
    }
    return LW_OK;
}

lw_status lw_least_squares(lw_engine *engine, const lw_problem *problem, const lw_fit_control *control,
                           double *p, bool *at_bound, lw_fit_outcome *outcome, lw_error *err)
{
    size_t n = problem->n;
    lw_fit_control standard = lw_fit_control_defaults();
    lw_fit_outcome ignored;
    if (control == NULL)
        control = &standard;
    if (outcome == NULL)
        outcome = &ignored;
    *outcome = (lw_fit_outcome){.reason = "not started", .chi2 = INFINITY};
    if (n == 0)
        return lw_fail(err, LW_BAD_ARGUMENT, NULL, "a fit without parameters was asked for");
    for (size_t i = 0; i < n; i++) {
        if (!isfinite(p[i]) || !(lower_of(problem, i) <= upper_of(problem, i)))
            return lw_fail(err, LW_BAD_ARGUMENT, "give finite starting values and bounds in order",
                           "parameter %zu starts at %g with bounds %g to %g", i + 1, p[i],
                           lower_of(problem, i), upper_of(problem, i));
        if (problem->fixed == NULL || !problem->fixed[i])
            p[i] = fmin(fmax(p[i], lower_of(problem, i)), upper_of(problem, i));
    }
    lw_arena own;
    lw_arena_begin(&own, engine);
    lw_arena *arena = control->scratch != NULL ? control->scratch : &own;
    lw_arena_mark mark = lw_arena_mark_now(arena);
    size_t ld = (n + 7) / 8 * 8;
    solver s = {.problem = problem, .n = n, .ld = ld};
    lw_normal other = {.n = n};
    s.at.n = n;
    s.at.h = lw_arena_take_raw(arena, n * n, sizeof(double), err); /* zeroed before each evaluation */
    s.at.g = lw_arena_take_raw(arena, n, sizeof(double), err);
    other.h = lw_arena_take_raw(arena, n * n, sizeof(double), err);
    other.g = lw_arena_take_raw(arena, n, sizeof(double), err);
    s.matrix = lw_arena_take_raw(arena, n * ld, sizeof(double), err);
    s.right = lw_arena_take(arena, n, sizeof(double), err);
    s.trial = lw_arena_take(arena, n, sizeof(double), err);
    s.step = lw_arena_take(arena, n, sizeof(double), err);
    s.scale = lw_arena_take(arena, n, sizeof(double), err);
    s.free_at = lw_arena_take(arena, n, sizeof(size_t), err);
    s.held = lw_arena_take(arena, n, 1, err);
    s.first = lw_arena_take(arena, n, sizeof(size_t), err);
    s.end = lw_arena_take(arena, n, sizeof(size_t), err);
    lw_status status = LW_OUT_OF_MEMORY;
    if (s.at.h && s.at.g && other.h && other.g && s.matrix && s.right && s.trial && s.step && s.scale &&
        s.free_at && s.held && s.first && s.end)
        status = iterate(&s, control, p, &other, outcome, engine, err);
    if (status == LW_OK) {
        outcome->chi2 = s.at.chi2;
        for (size_t i = 0; i < n; i++) {
            bool bound =
                !is_fixed(problem, i) && (p[i] <= lower_of(problem, i) || p[i] >= upper_of(problem, i));
            outcome->n_active += bound;
            if (at_bound != NULL)
                at_bound[i] = bound;
        }
    }
    lw_arena_rewind(arena, mark);
    lw_arena_end(&own);
    return status;
}

/* Which of the first k + 1 parameters carries most of the direction that the data do not see: the null
 * vector of the leading block, in scaled parameters. */
static size_t weakest_of(double *u, size_t k, size_t ld, double *work)
{
    for (size_t i = 0; i < k; i++)
        work[i] = u[i * ld + k];
    lw_cholesky_back(u, k, ld, work);
    size_t weakest = k;
    double most = 1;
    for (size_t i = 0; i < k; i++)
        if (fabs(work[i]) > most * (1 + 1e-6)) {
            most = fabs(work[i]);
            weakest = i;
        }
    return weakest;
}

lw_status lw_invert_normal(lw_engine *engine, const double *h, size_t n, const bool *skip, double *c,
                           size_t *weakest, lw_error *err)
{
    return lw_invert_bordered(engine, h, n, 0, skip, c, weakest, err);
}

lw_status lw_invert_bordered(lw_engine *engine, const double *h, size_t n, size_t border, const bool *skip, double *c,
                             size_t *weakest, lw_error *err)
{
    lw_arena arena;
    lw_arena_begin(&arena, engine);
    size_t ld = (n + 7) / 8 * 8, m = 0;
    double *u = lw_arena_take(&arena, n * ld, sizeof *u, err);
    double *scale = lw_arena_take(&arena, n, sizeof *scale, err);
    double *work = lw_arena_take(&arena, n, sizeof *work, err);
    size_t *at = lw_arena_take(&arena, n, sizeof *at, err), *first = lw_arena_take(&arena, 2 * n, sizeof *first, err);
    size_t wide = 0, *end = first != NULL ? first + n : NULL;
    lw_status status = LW_OK;
    if (!u || !scale || !work || !at || !first) {
        status = LW_OUT_OF_MEMORY;
        goto done;
    }
    for (size_t i = 0; i < n; i++) {
        if (skip != NULL && skip[i])
            continue;
        if (!(h[i * n + i] > 0) || !isfinite(h[i * n + i])) {
            if (weakest != NULL)
                *weakest = i;
            status = LW_NOT_SUPPORTED;
            goto singular;
        }
        scale[m] = 1 / sqrt(h[i * n + i]);
        at[m++] = i;
        wide += i >= n - border;
    }
    for (size_t a = 0; a < m; a++) {
        first[a] = a;
        for (size_t b = a + 1; b-- > 0;) {
            u[b * ld + a] = h[at[a] * n + at[b]] * scale[a] * scale[b];
            if (u[b * ld + a] != 0)
                first[a] = b;
        }
    }
    bool bordered = wide > 0 && lw_cholesky_envelope(first, m, wide, end);
    double least = 4 * DBL_EPSILON * (double)m;
    size_t k = bordered ? lw_cholesky_bordered(u, m, ld, end, wide, least) : lw_cholesky(u, m, ld, least);
    if (k < m) {
        if (weakest != NULL)
            *weakest = at[weakest_of(u, k, ld, work)];
        status = LW_NOT_SUPPORTED;
        goto singular;
    }
    memset(c, 0, n * n * sizeof *c);
    if (bordered) {
        double *packed = lw_arena_take_raw(&arena, m * m, sizeof *packed, err);
        if (packed == NULL) {
            status = LW_OUT_OF_MEMORY;
            goto done;
        }
        lw_cholesky_bordered_inverse(u, m, ld, end, wide, packed);
        for (size_t a = 0; a < m; a++)
            for (size_t b = 0; b < m; b++)
                c[at[a] * n + at[b]] = packed[a * m + b] * scale[a] * scale[b];
        goto done;
    }
    lw_cholesky_invert_factor(u, m, ld);
    for (size_t a = 0; a < m; a++)
        for (size_t b = 0; b <= a; b++) {
            double value = lw_dot(u + a * ld + a, u + b * ld + a, m - a) * scale[a] * scale[b];
            c[at[a] * n + at[b]] = c[at[b] * n + at[a]] = value;
        }
singular:
    if (status != LW_OK)
        lw_fail(err, status, "fix or drop a parameter, or measure a wider range",
                "the data do not determine every parameter");
done:
    lw_arena_end(&arena);
    return status;
}
