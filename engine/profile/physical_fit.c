/* SPDX-License-Identifier: GPL-3.0-or-later */
/* All lines of a scan at once, each with a physical shape of its own: lognormal spheres x Gaussian strain
 * that is correlated along the column. Every line has its area, place, size and strain; all share the width
 * of the distribution of sizes and the length over which strain is correlated; the background's Chebyshev
 * terms are fitted again, because tails of a shape that is too wide push it down. The form of the strain is
 * not known: each of a few is fitted, and they are averaged with weights exp(-chi2/2) (Burnham & Anderson
 * 2002 Model Selection and Multimodel Inference, 2nd ed., ch. 4; Hoeting et al. 1999 Stat. Sci. 14, 382),
 * their scatter being part of the uncertainty. */
#include "profile/physical_model.h"

#include "numeric/cholesky.h"
#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

/* A share of the least breadth as size, the rest of each line as strain. */
static void start(const lw__physical *f, double share, double *p)
{
    double least = INFINITY;
    for (size_t k = 0; k < f->n_lines; k++)
        least = fmin(least, lw__physical_voigt_breadth(&f->line[k]));
    double size = fmax(share * least, 2e-4);
    for (size_t k = 0; k < f->n_all; k++) {
        const lw__physical_line *line = &f->line[k];
        double breadth = lw__physical_voigt_breadth(line), s = line->profile->s_per_nm;
        p[2 * k] = line->area_u > 0 ? line->area_prior : line->profile->line->area.value;
        p[2 * k + 1] = 0;
        if (k >= f->n_lines)
            continue;
        p[line->at_size] = size;
        p[line->at_strain] = fmax(breadth * breadth - size * size, 0.04 * size * size) / (2 * M_PI * s * s);
    }
    p[f->at_sigma] = f->sigma_prior;
    p[f->at_length] = f->length_prior;
    p[f->at_common] = size;
    p[f->at_common + 1] = 0;
}

/* After the first round: the common size and strain, and how far lines may be from them: a third of the
 * size and a half of the mean square strain, as shapes of crystals and elastic anisotropy make it, and never
 * less than what a tenth of the breadth comes from. */
static void begin_ties(lw__physical *f, double *p)
{
    double sum[2] = {0}, weight[2] = {0}, least[2] = {INFINITY, INFINITY};
    for (size_t k = 0; k < f->n_lines; k++) {
        double s = f->line[k].profile->s_per_nm, breadth = lw__physical_voigt_breadth(&f->line[k]);
        double small[2] = {0.1 * breadth, 0.02 * breadth * breadth / (2 * M_PI * s * s)};
        for (size_t i = 0; i < 2; i++) {
            double w = f->line[k].profile->line->area.value / fmax(f->line[k].profile->line->area.u, 1e-300);
            sum[i] += w * p[f->line[k].at_size + i];
            weight[i] += w;
            least[i] = fmin(least[i], small[i]);
        }
    }
    for (size_t i = 0; i < 2; i++) {
        p[f->at_common + i] = sum[i] / weight[i];
        f->tie_u[i] = fmax((i == 0 ? 0.35 : 0.5) * p[f->at_common + i], least[i]);
    }
}

/* Of the background's level under every line: variance, and covariance with the counts, C J' (see window.c).
 */
static lw_status levels(const lw__physical *f, const double *c, double inflate, lw__separation *out,
                        lw_arena *arena, lw_error *err)
{
    size_t m = f->n_parameters, n = f->n;
    double *by = lw_arena_take(arena, m, sizeof *by, err);
    if (by == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < f->n_lines; k++) {
        double *with = out->line[k].with_level = lw_arena_take(arena, n, sizeof *with, err);
        if (with == NULL)
            return LW_OUT_OF_MEMORY;
        size_t at = 0;
        while (at + 1 < n &&
               f->profiles->lines->scan->two_theta_deg[at] < f->line[k].profile->line->two_theta.value)
            at++;
        memset(by, 0, m * sizeof *by);
        for (size_t t = 0; t < f->n_terms; t++)
            for (size_t q = 0; q < m; q++)
                by[q] += f->term[t * n + at] * c[(f->at_terms + t) * m + q];
        double variance = 0;
        for (size_t t = 0; t < f->n_terms; t++)
            variance += by[f->at_terms + t] * f->term[t * n + at];
        out->line[k].level_variance = inflate * fmax(variance, 0);
        for (size_t q = 0; q < m; q++)
            for (size_t i = 0; i < n && by[q] != 0; i++)
                with[i] += by[q] * f->jacobian[n * q + i];
    }
    return LW_OK;
}

/* Covariance of all parameters and, by_breadth[n_lines][2], what the instrument's two widths at one line do
 * to the breadths: the parameters' answer to a model that is wider there. */
static lw_status member_covariance(lw__physical *f, const double *p, const bool *held, double inflate,
                                   lw__physical_fit *out, size_t member, double *breadth, double *covariance,
                                   lw__separation *apart, lw_arena *arena, lw_arena *scratch, lw_error *err)
{
    size_t m = f->n_parameters, n = f->n, lines = f->n_lines, weakest;
    double *h = lw_arena_take(scratch, m * m, sizeof *h, err), *g = lw_arena_take(scratch, m, sizeof *g, err);
    double *c = lw_arena_take(scratch, m * m, sizeof *c, err),
           *wide = lw_arena_take(scratch, 2 * n, sizeof *wide, err);
    double *by = lw_arena_take(scratch, lines * m, sizeof *by, err);
    double(*answer)[2] =
        lw_arena_take(scratch, lines * lines, sizeof *answer, err); /* [breadth a][widths at line k] */
    double *response = lw_arena_take(scratch, m, sizeof *response, err);
    double *angle = lw_arena_take(scratch, lines, sizeof *angle, err);
    if (!h || !g || !c || !wide || !by || !answer || !response || !angle)
        return LW_OUT_OF_MEMORY;
    lw_normal normal = {.n = m, .h = h, .g = g};
    f->whole = true;
    lw_status status = lw__physical_evaluate(f, p, true, &normal, err);
    if (status == LW_OK)
        status = lw_invert_normal(f->engine, h, m, held, c, &weakest, err);
    if (status == LW_OK && apart != NULL)
        status = levels(f, c, inflate, apart, arena, err);
    if (status != LW_OK)
        return status;
    for (size_t k = 0; k < lines; k++) {
        lw__shape shape = lw__physical_shape(f, k, p);
        double slope[4];
        size_t at[4] = {f->line[k].at_size, f->line[k].at_strain, f->at_sigma, f->at_length};
        breadth[k] = lw__shape_breadth(&shape, slope);
        out->shape[member][k] = shape;
        for (int i = 0; i < 4; i++) {
            by[k * m + at[i]] = slope[i];
            for (int j = 0; j < 4; j++)
                out->shape_covariance[member][16 * k + (size_t)(4 * i + j)] = inflate * c[at[i] * m + at[j]];
        }
    }
    for (size_t k = 0; k < lines; k++) {
        angle[k] = f->line[k].profile->line->nominal_deg;
        for (int i = 0; i < 2; i++) {
            lw__physical_widened(f, k, p, i, wide);
            for (size_t j = 0; j < n; j++)
                wide[j] *= f->weight[j];
            for (size_t q = 0; q < m; q++)
                g[q] = lw_dot(wide, f->jacobian + n * q, n);
            for (size_t q = 0; q < m; q++)
                response[q] = -lw_dot(c + q * m, g, m);
            for (size_t b = 0; b < lines; b++)
                answer[b * lines + k][i] = lw_dot(by + b * m, response, m);
        }
    }
    for (size_t a = 0; a < lines; a++)
        for (size_t b = 0; b < lines; b++) {
            double sum = 0;
            for (size_t q = 0; q < m; q++)
                for (size_t r = 0; r < m; r++)
                    sum += inflate * by[a * m + q] * c[q * m + r] * by[b * m + r];
            sum += lw__from_instrument(f->profiles, &(lw__leaning){lines, angle, answer + a * lines},
                                       &(lw__leaning){lines, angle, answer + b * lines});
            covariance[a * lines + b] = sum;
        }
    return LW_OK;
}

/* By how much variances are enlarged, of the residuals that the last evaluation left: where chi2 is beyond
 * chance by it, and where neighbours' residuals go together by their long-run variance, as in the fit of
 * lines. */
static double misfit_factor(const lw__physical *f)
{
    const lw_scan *scan = f->profiles->lines->scan;
    double square = 0, step = 0, before = 0, freedom = fmax((double)f->n - (double)f->n_parameters, 1);
    for (size_t i = 0; i < f->n; i++) {
        double z = f->model[i] * sqrt(f->weight[i]);
        square += z * z;
        step += i > 0 ? (z - before) * (z - before) : 0;
        before = z;
    }
    double rho = square > 0 ? 1 - step / (2 * square) - scan->correlation : 0;
    double factor = (1 + scan->correlation) / (1 - scan->correlation);
    if (lw_chi2_tail(square, freedom) < 1e-3)
        factor *= square / freedom;
    if (rho > 3 / sqrt((double)f->n))
        factor *= (1 + fmin(rho, 0.9)) / (1 - fmin(rho, 0.9));
    return fmax(factor, 1);
}

/* The last: of a crystal's dislocations the line sees g.b of its own, none or much, and g.b changes from
 * crystal to crystal as their Burgers vectors do. The mean of exp(-x) over them is then not exp(-mean x),
 * which is right for columns that meet many kinds of dislocations: the other end is x exponentially
 * distributed, 1/(1 + x). */
static const struct member {
    const char *name;
    const lw_strain_form *form;
    bool spread;
} members[LW__MEMBERS] = {{"constant", &lw_strain_constant, false},
                          {"correlated", &lw_strain_correlated, false},
                          {"gaussian_correlated", &lw_strain_gaussian_correlated, false},
                          {"dislocations", &lw_strain_dislocations, false},
                          {"dislocations of one kind a crystal", &lw_strain_dislocations, true}};

/* What is expected of a form's second parameter: a correlation length of half a crystal; a cut-off radius of
 * dislocations, beyond which their strains screen each other, of two crystals. Both within a factor of e. */
static void take_member(lw__physical *f, size_t which)
{
    f->form = members[which].form;
    f->spread = members[which].spread;
    f->length_prior = f->size_prior + (f->form == &lw_strain_dislocations ? 0.7 : -0.7);
}

/* The scatter counts forms in reach more than evidence does, as where whole patterns are fitted: every form
 * is an approximation, so that a difference in chi-square is worth less than if one of them were true. The
 * likelihood is raised to a power for it (Miller & Dunson 2019 J. Am. Stat. Assoc. 114, 1113). */
#define COARSE 0.05
#define LEAST 0.01 /* reach, against the best, of a form that is taken along */

static void weigh(lw__physical_fit *result, double inflate)
{
    double sum = 0, reach = 0;
    for (size_t i = 0; i < result->n_members; i++) {
        result->weight[i] = exp(-0.5 * (result->chi2[i] - result->chi2[result->best]) / inflate);
        result->reach[i] = pow(result->weight[i], COARSE);
        result->reach[i] = result->reach[i] > LEAST ? result->reach[i] : 0;
        result->weight[i] = result->weight[i] < 1e-4 ? 0 : result->weight[i];
        sum += result->weight[i];
        reach += result->reach[i];
    }
    for (size_t i = 0; i < result->n_members; i++) {
        result->weight[i] /= sum;
        result->reach[i] /= reach;
    }
}

double lw__mean_of_members(const lw__physical_fit *fit, const double *value, const double *variance,
                           double *off)
{
    double mean = 0;
    for (size_t i = 0; i < fit->n_members; i++)
        mean += fit->weight[i] > 0 ? fit->weight[i] * value[i] : 0;
    for (size_t i = 0; i < fit->n_members; i++) {
        off[i] = 0;
        if (!(fit->reach[i] > 0))
            continue;
        /* read from the same counts, a form that knows less than the best lies off by as much as the
         * variances differ without meaning anything else (Hausman 1978 Econometrica 46, 1251) */
        double d = value[i] - mean, chance = fmax(variance[i] - variance[fit->best], 0);
        if (d * d > chance)
            off[i] = sqrt(fit->reach[i] * (1 - chance / (d * d))) * d;
    }
    return mean;
}

/* The scan as a member takes it apart. Beside the best, which has it already, levels are the best's. */
static lw_status take_apart(lw__physical *f, size_t which, const double *p, lw__physical_fit *result,
                            lw_arena *arena, lw_error *err)
{
    lw__separation *out = &result->apart[which];
    const lw__separation *best = &result->apart[result->best];
    size_t n = f->n, lines = f->n_lines;
    take_member(f, which);
    lw_normal normal = {.n = f->n_parameters};
    lw_status status = lw__physical_evaluate(f, p, false, &normal, err);
    if (status != LW_OK)
        return status;
    out->how = best->how;
    if (out != best)
        out->line = lw_arena_copy(arena, best->line, lines, sizeof *out->line, err);
    out->residual = lw_arena_copy(arena, f->model, n, sizeof(double), err);
    out->background = lw_arena_copy(arena, f->profiles->lines->background, n, sizeof(double), err);
    if (!out->line || !out->residual || !out->background)
        return LW_OUT_OF_MEMORY;
    for (size_t t = 0; t < f->n_terms; t++)
        for (size_t i = 0; i < n; i++)
            out->background[i] += p[f->at_terms + t] * f->term[t * n + i];
    for (size_t k = 0; k < lines; k++) {
        lw__separated *line = &out->line[k];
        line->shape = lw__physical_shape(f, k, p);
        line->curve = lw_arena_copy(arena, f->curve[k], n, sizeof(double), err);
        line->shift_s = p[2 * k + 1];
        line->area_s = p[2 * k] * f->line[k].instrument.per_degree;
        if (line->curve == NULL)
            return LW_OUT_OF_MEMORY;
    }
    return LW_OK;
}

static lw_status fit_members(lw__physical *f, lw_arena *arena, lw__separation *out, lw__physical_fit *result,
                             lw_error *err)
{
    const size_t n_forms = LW__MEMBERS;
    size_t m = f->n_parameters, lines = f->n_lines, best = 0;
    double *p[LW__MEMBERS], *breadth[LW__MEMBERS], *covariance[LW__MEMBERS],
        *other = lw_arena_take(arena, m, sizeof *other, err),
        *lower = lw_arena_take(arena, m, sizeof *lower, err);
    double *upper = lw_arena_take(arena, m, sizeof *upper, err);
    bool *held = lw_arena_take(arena, m, sizeof *held, err),
         *at_bound = lw_arena_take(arena, m, sizeof *at_bound, err);
    if (!other || !lower || !upper || !held || !at_bound)
        return LW_OUT_OF_MEMORY;
    result->n_members = n_forms;
    for (size_t i = 0; i < n_forms; i++) {
        p[i] = lw_arena_take(arena, m, sizeof **p, err);
        breadth[i] = lw_arena_take(arena, lines, sizeof **breadth, err);
        covariance[i] = lw_arena_take(arena, lines * lines, sizeof **covariance, err);
        result->shape[i] = lw_arena_take(arena, lines, sizeof **result->shape, err);
        result->shape_covariance[i] = lw_arena_take(arena, 16 * lines, sizeof(double), err);
        if (!p[i] || !breadth[i] || !covariance[i] || !result->shape[i] || !result->shape_covariance[i])
            return LW_OUT_OF_MEMORY;
    }
    for (size_t i = 0; i < m; i++) {
        lower[i] = -INFINITY;
        upper[i] = INFINITY;
    }
    for (size_t k = 0; k < f->n_all; k++) {
        double reach = f->line[k].grid * LW__PHYSICAL_STEPS;
        lower[2 * k + 1] = -reach;
        upper[2 * k + 1] = reach;
        held[2 * k + 1] = k >= lines;
        if (k >= lines)
            lower[2 * k] = 0;
        lower[f->line[k].at_size] = 1e-5;
        upper[f->line[k].at_size] = 2;
        lower[f->line[k].at_strain] = 0;
    }
    lower[f->at_sigma] = 0.05;
    upper[f->at_sigma] = 0.8;
    lw_fit_control control = lw_fit_control_defaults();
    control.chi2_tolerance = 1e-8;
    control.step_tolerance = 0.01;
    control.iterations_most = 60;
    for (size_t i = 0; i < n_forms; i++) {
        take_member(f, i);
        f->whole = false;
        held[f->at_length] = f->form->n < 2;
        lower[f->at_length] = f->form->n < 2 ? -INFINITY : fmax(f->form->least[1], f->length_prior - 4);
        upper[f->at_length] = f->form->n < 2 ? INFINITY : fmax(f->form->most[1], f->length_prior);
        lw_problem problem = {.n = m,
                              .lower = lower,
                              .upper = upper,
                              .fixed = held,
                              .evaluate = lw__physical_evaluate,
                              .user = f};
        lw_fit_outcome outcome = {.chi2 = INFINITY};
        /* first with the shared parameters as expected, or a wide distribution takes the place of strain;
         * from two starts, since size and strain are two valleys when strain is correlated */
        lw_fit_control rough = control;
        rough.chi2_tolerance = 1e-4;
        rough.step_tolerance = 0.3;
        held[f->at_sigma] = held[f->at_length] = held[f->at_common] = held[f->at_common + 1] = true;
        f->tied = false;
        lw_status status = LW_OK;
        double least = INFINITY;
        for (int from = 0; from < 2 && status == LW_OK; from++) {
            if (from == 1 && i == 2)
                memcpy(other, p[i - 1], m * sizeof *other);
            else
                start(f, from == 0 ? 0.85 : 0.5, other);
            status = lw_least_squares(f->engine, &problem, &rough, other, at_bound, &outcome, err);
            if (outcome.chi2 < least) {
                least = outcome.chi2;
                memcpy(p[i], other, m * sizeof *other);
            }
        }
        f->tied = true;
        held[f->at_sigma] = held[f->at_common] = held[f->at_common + 1] = false;
        held[f->at_length] = f->form->n < 2;
        for (int round = 0; round < 3 && status == LW_OK;
             round++) { /* how wide the ties are depends on the outcome */
            double before = f->tie_u[1];
            begin_ties(f, p[i]);
            if (round > 0 && fabs(f->tie_u[1] / before - 1) < 0.1) {
                f->tie_u[1] = before;
                break;
            }
            memcpy(f->member_tie[i], f->tie_u, sizeof f->tie_u);
            status = lw_least_squares(f->engine, &problem, &control, p[i], at_bound, &outcome, err);
        }
        if (status != LW_OK)
            return status;
        if (!isfinite(outcome.chi2))
            return lw_fail_at(err, LW_NO_CONVERGENCE, f->profiles->lines->scan->file, 0,
                              "use method = convolution", "the fit of physical shapes found no start");
        result->form[i] = members[i].name;
        result->chi2[i] = outcome.chi2;
        best = outcome.chi2 < result->chi2[best] ? i : best;
    }
    take_member(f, best);
    f->tied = false;
    lw_normal left = {.n = m};
    lw_status looked = lw__physical_evaluate(f, p[best], false, &left, err);
    if (looked != LW_OK)
        return looked;
    result->goodness = result->chi2[best] / fmax((double)f->n - (double)m, 1);
    f->tied = true;
    double inflate = misfit_factor(f);
    result->best = best;
    weigh(result, inflate);
    for (size_t i = 0; i < n_forms; i++) {
        lw_arena scratch;
        lw_arena_begin(&scratch, f->engine);
        take_member(f, i);
        memcpy(f->tie_u, f->member_tie[i], sizeof f->tie_u);
        for (size_t j = 0; j < m; j++) {
            held[j] =
                (j == f->at_length && f->form->n < 2) || (j >= 2 * lines && j < 2 * f->n_all && j % 2 == 1);
        }
        for (size_t k = 0; k < lines; k++) { /* what rests on a bound has no freedom left */
            held[f->line[k].at_size] |= p[i][f->line[k].at_size] <= 1.0001e-5;
            held[f->line[k].at_strain] |= p[i][f->line[k].at_strain] <= 0;
        }
        lw_status status =
            !(result->reach[i] > 0)
                ? LW_OK
                : member_covariance(f, p[i], held, inflate, result, i, breadth[i], covariance[i],
                                    i == best ? out : NULL, arena, &scratch, err);
        lw_arena_end(&scratch);
        if (status != LW_OK)
            return status;
    }
    result->breadth = lw_arena_take(arena, lines, sizeof(double), err);
    result->covariance = lw_arena_take(arena, lines * lines, sizeof(double), err);
    if (!result->breadth || !result->covariance)
        return LW_OUT_OF_MEMORY;
    double(*off)[LW__MEMBERS] = lw_arena_take(arena, lines, sizeof *off, err);
    if (off == NULL)
        return LW_OUT_OF_MEMORY;
    for (size_t k = 0; k < lines; k++) {
        double value[LW__MEMBERS], variance[LW__MEMBERS];
        for (size_t i = 0; i < n_forms; i++) {
            value[i] = breadth[i][k];
            variance[i] = covariance[i][k * lines + k];
        }
        result->breadth[k] = lw__mean_of_members(result, value, variance, off[k]);
    }
    for (size_t i = 0; i < n_forms; i++)
        for (size_t a = 0; a < lines; a++)
            for (size_t b = 0; b < lines; b++)
                result->covariance[a * lines + b] +=
                    result->weight[i] * covariance[i][a * lines + b] + off[a][i] * off[b][i];
    result->apart[best] = *out;
    lw_status status = take_apart(f, best, p[best], result, arena, err);
    *out = result->apart[best];
    for (size_t i = 0; i < n_forms && status == LW_OK; i++)
        if (i != best && result->reach[i] > 0)
            status = take_apart(f, i, p[i], result, arena, err);
    return status;
}

lw_status lw__separate_by_physics(lw_engine *engine, const lw_profiles *profiles, lw_arena *arena,
                                  lw__separation *out, lw__physical_fit *result, lw_error *err)
{
    lw__physical f;
    *result = (lw__physical_fit){0};
    *out = (lw__separation){.how = "lines separated and their tails completed by fitted physical shapes"};
    out->line = lw_arena_take(arena, profiles->n, sizeof *out->line, err);
    if (out->line == NULL)
        return LW_OUT_OF_MEMORY;
    lw_status status = lw__physical_prepare(&f, engine, profiles, arena, err);
    return status == LW_OK ? fit_members(&f, arena, out, result, err) : status;
}
