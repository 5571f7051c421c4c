/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_fitter.h"

#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

#define MEAN_H 0.2 /* of H over all directions of a cubic crystal */

/* Quantities of the form that the pattern stands at. */
static void quantities(const lw_pattern_fitter *f, bool none, const double *shape, double *value)
{
    const lw_pattern_shape *own = &f->pattern.shape;
    memset(value, 0, LW_ANSWER_MOST * sizeof *value);
    double first = lw_pattern_shape_moment(own, shape, -1), second = lw_pattern_shape_moment(own, shape, -2);
    double third = lw_pattern_shape_moment(own, shape, -3);
    value[LW_ANSWER_SIZE_VOLUME] = 0.75 * lw_pattern_shape_moment(own, shape, 1);
    value[LW_ANSWER_SIZE_AREA] = 2 / (3 * first);
    value[LW_ANSWER_DIAMETER] = second / third;
    value[LW_ANSWER_DISPERSION] = first * third / (second * second) - 1;
    double scale = fmax(1 - shape[LW_PATTERN_ANISOTROPY] * MEAN_H, 0);
    double half = f->answer->size_unresolved ? f->half_length : 0.5 * value[LW_ANSWER_SIZE_VOLUME];
    for (size_t i = 0; i <= LW_ANSWER_LENGTHS; i++) {
        double length = i == 0 ? half : f->answer->length[i - 1];
        bool there = !none && (i == 0 || i <= f->answer->n_lengths);
        double square = there ? scale * lw_pattern_shape_displacement(own, shape, length) : 0;
        value[LW_ANSWER_STRAIN + i] = there ? sqrt(fmax(square, 0)) / length : 0;
    }
    double all = 0;
    for (size_t b = 0; own->histogram != NULL && b < own->n_size; b++)
        all += shape[LW_PATTERN_SIZE + b] * own->histogram->step;
    for (size_t b = 0; own->histogram != NULL && b < own->n_size; b++)
        value[LW_ANSWER_SHARE + b] = shape[LW_PATTERN_SIZE + b] / all;
}

void lw_pattern_answer_propagate(const lw_pattern_fitter *f, lw_pattern_form *form, const double *covariance)
{
    size_t n = f->pattern.n_parameters, shared = lw_pattern_background_row(&f->pattern);
    double slope[LW_PATTERN_SHARED_MOST][LW_ANSWER_MOST] = {{0}}, up[LW_ANSWER_MOST], down[LW_ANSWER_MOST];
    quantities(f, form->none, form->shape, form->value);
    for (size_t i = 0; i < shared; i++) {
        double u = sqrt(fmax(covariance[i * n + i], 0));
        if (!(u > 0))
            continue;
        double shape[LW_PATTERN_SHARED_MOST], step = 1e-3 * u;
        memcpy(shape, form->shape, sizeof shape);
        shape[i] = form->shape[i] + step;
        quantities(f, form->none, shape, up);
        shape[i] = form->shape[i] - step;
        if (shape[i] < f->lower[i]) {
            memcpy(down, form->value, sizeof down);
            step *= 0.5;
        } else {
            quantities(f, form->none, shape, down);
        }
        for (int j = 0; j < LW_ANSWER_MOST; j++)
            slope[i][j] = (up[j] - down[j]) / (2 * step);
    }
    for (int a = 0; a < LW_ANSWER_MOST; a++)
        for (int b = 0; b < LW_ANSWER_MOST; b++) {
            double sum = 0;
            for (size_t i = 0; i < shared; i++)
                for (size_t j = 0; j < shared; j++)
                    sum += slope[i][a] * covariance[i * n + j] * slope[j][b];
            form->covariance[a][b] = sum;
        }
}

void lw_pattern_answer_lengths(lw_pattern_fitter *f)
{
    static const double nice[] = {0.5, 1,  1.5, 2,  3,  4,  5,  6,   8,   10,  12,  15,
                                  20,  25, 30,  40, 50, 60, 80, 100, 150, 200, 300, 400};
    lw_pattern_answer *a = f->answer;
    double most = fmin(1.3 * 0.75 * lw_pattern_shape_moment(&f->pattern.shape, f->p, 1), 3 * f->half_length);
    a->n_lengths = 0;
    for (size_t i = 0; i < sizeof nice / sizeof *nice && a->n_lengths < LW_ANSWER_LENGTHS; i++)
        if ((nice[i] <= most || a->n_lengths < 4) && nice[i] >= 0.01 * most)
            a->length[a->n_lengths++] = nice[i];
}

void lw_pattern_answer_weigh(lw_pattern_answer *a)
{
    double best = INFINITY, total = 0;
    for (size_t i = 0; i < a->n_forms; i++) {
        lw_pattern_form *form = &a->form[i];
        if (!form->fitted)
            continue;
        form->weight = form->chi2 / (a->misfit * a->misfit) + form->parameters * log((double)a->n_points);
        if (form->weight < best) {
            best = form->weight;
            a->best = i;
        }
    }
    for (size_t i = 0; i < a->n_forms; i++) {
        lw_pattern_form *form = &a->form[i];
        form->weight = form->fitted ? exp(-0.5 * (form->weight - best)) : 0;
        total += form->weight;
    }
    for (size_t i = 0; i < a->n_forms; i++)
        a->form[i].weight /= total;
}

/* Mean by evidence. Its spread over the forms counts forms in reach more than evidence does: every form is an
 * approximation of what the powder is, so that a difference in chi-square is worth less than if one of them
 * were true. The likelihood is raised to a power for it (Miller & Dunson 2019 J. Am. Stat. Assoc. 114, 1113);
 * at a twentieth a form 28 in chi-square behind the best still counts half. Forms read the same counts: a
 * form that determines a quantity less well than the best lies off by as much as the variances differ without
 * meaning anything else (Hausman 1978 Econometrica 46, 1251); only what is beyond that is spread. */
#define COARSE 0.05

double lw_pattern_answer_reach(const lw_pattern_form *form)
{
    return form->none ? form->weight : pow(form->weight, COARSE);
}

static double beyond_chance(const lw_pattern_answer *a, const lw_pattern_form *form, int k)
{
    double off = form->value[k] - a->value[k];
    double chance = fmax(form->covariance[k][k] - a->form[a->best].covariance[k][k], 0);
    return off * off > chance ? off * sqrt(1 - chance / (off * off)) : 0;
}

/* No strain is the edge of every form rather than another one: what it knows better of the size, it knows by
 * leaving strain out, and it is preferred where counts hide strain by chance. It counts with the covariance
 * of the likeliest form that has strain. */
static const lw_pattern_form *uncertain_as(const lw_pattern_answer *a, const lw_pattern_form *form)
{
    const lw_pattern_form *found = form;
    for (size_t i = 0; i < a->n_forms && form->none; i++)
        if (!a->form[i].none && a->form[i].weight > 0 && (found->none || a->form[i].weight > found->weight))
            found = &a->form[i];
    return lw_pattern_answer_reach(found) > 0.01 ? found : form;
}

void lw_pattern_answer_join(lw_pattern_answer *a)
{
    double coarse[LW_PATTERN_FORMS_MOST], total = 0;
    for (size_t i = 0; i < a->n_forms; i++)
        total += coarse[i] = lw_pattern_answer_reach(&a->form[i]);
    for (int k = 0; k < LW_ANSWER_MOST; k++) {
        a->value[k] = 0;
        for (size_t i = 0; i < a->n_forms; i++)
            if (a->form[i].weight > 0)
                a->value[k] += a->form[i].weight * a->form[i].value[k];
    }
    for (int k = 0; k < LW_ANSWER_MOST; k++)
        for (int l = 0; l < LW_ANSWER_MOST; l++) {
            double sum = 0;
            for (size_t i = 0; i < a->n_forms; i++)
                if (a->form[i].weight > 0)
                    sum += a->form[i].weight * uncertain_as(a, &a->form[i])->covariance[k][l] +
                           coarse[i] / total * beyond_chance(a, &a->form[i], k) *
                               beyond_chance(a, &a->form[i], l);
            a->covariance[k][l] = sum;
        }
}

/* Factor on u as the fit of the lines has it: for a chi-square that chance does not give, and for residuals
 * that go together, whose long-run variance is larger (noise that is itself correlated included). */
void lw_pattern_answer_misfit(const lw_pattern_fitter *f)
{
    lw_pattern_answer *a = f->answer;
    const lw_pattern_form *best = NULL;
    for (size_t i = 0; i < a->n_forms; i++)
        if (a->form[i].fitted && (best == NULL || a->form[i].chi2 < best->chi2))
            best = &a->form[i];
    if (best == NULL)
        return;
    double degrees = fmax((double)a->n_points - best->parameters, 1);
    a->goodness = sqrt(best->chi2 / degrees);
    double noise = f->pattern.profiles->lines->scan->correlation, rho = best->correlation - noise;
    double factor2 = (1 + noise) / (1 - noise);
    if (lw_chi2_tail(best->chi2, degrees) < 1e-3)
        factor2 *= a->goodness * a->goodness;
    if (rho > 3 / sqrt((double)a->n_points))
        factor2 *= (1 + fmin(rho, 0.9)) / (1 - fmin(rho, 0.9));
    a->misfit = sqrt(fmax(factor2, 1));
}
