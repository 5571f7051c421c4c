/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sample/pattern_fitter.h"

#include "numeric/statistics.h"

#include <math.h>
#include <string.h>

#define KNOTS 6                      /* of a free strain */
#define SEEN 1e-4                    /* weight of a form that takes part */

static lw_pattern_form named(const lw_strain_form *strain)
{
    if (strain == NULL)
        return (lw_pattern_form){
            .name = "knots",
            .title = "free at knots, smooth between them",
            .source = "Green & Silverman (1994) Nonparametric Regression and Generalized Linear Models; "
                      "smoothness: MacKay (1992) Neural Comput. 4, 415",
            .why = ""};
    return (lw_pattern_form){
        .name = strain->name, .title = strain->title, .source = strain->source, .strain = strain, .why = ""};
}

static lw_pattern_form without_strain(void)
{
    return (lw_pattern_form){.name = "none",
                             .title = "no strain",
                             .source = "",
                             .strain = &lw_strain_constant,
                             .none = true,
                             .why = ""};
}

/* The forms to try, the constant first: it tells whether there is strain at all. The free one starts from a
 * decaying one. */
static void list_forms(const lw_pattern_request *request, lw_pattern_answer *a)
{
    a->n_forms = 0;
    if (request->strain == LW_PATTERN_AUTO) {
        for (int i = 0; lw_strain_form_list[i] != NULL; i++)
            a->form[a->n_forms++] = named(lw_strain_form_list[i]);
        a->form[a->n_forms++] = named(NULL);
        a->form[a->n_forms++] = without_strain();
    } else if (request->strain == LW_PATTERN_NO_STRAIN) {
        a->form[a->n_forms++] = without_strain();
    } else {
        a->form[a->n_forms++] =
            named(request->strain == LW_PATTERN_KNOTS ? NULL : lw_strain_form_list[request->strain]);
    }
}

static bool many_parameters(const lw_pattern_form *form)
{
    return form->strain == NULL || form->strain->n > 1;
}

/* Does the size stand out of its uncertainty? Looked at with the width of the distribution free and, where
 * that says no, held. */
static bool size_stands_out(const lw_pattern_fitter *f)
{
    size_t n = f->pattern.n_parameters, at = LW_PATTERN_INVERSE_SIZE;
    return !f->at_bound[at] && f->p[at] > 2 * sqrt(fmax(f->inverse[at * (n + 1)], 0));
}

/* What a first look with one form has shown. */
typedef struct look {
    lw_pattern_form form;
    lw_pattern_saved after;
    double strain, u_strain; /* first parameter of the form */
    bool strained;
} look;

static lw_status take_look(lw_pattern_fitter *f, look *first, lw_error *err)
{
    lw_pattern_answer *a = f->answer;
    first->form = a->form[0].strain != NULL ? a->form[0] : named(&lw_strain_correlated);
    if (a->n_forms == 1 && many_parameters(&first->form))
        lw_pattern_fitter_restart_strain(f, &lw_strain_constant, &first->form);
    lw_status status = lw_pattern_fitter_minimise(f, &first->form, err);
    if (status == LW_OK)
        status = lw_pattern_fitter_weigh(f, err);
    if (status == LW_OK)
        status = lw_pattern_fitter_invert(f, err);
    if (status != LW_OK)
        return status;
    first->u_strain = sqrt(fmax(f->inverse[LW_PATTERN_STRAIN * (f->pattern.n_parameters + 1)], 0));
    first->strain = f->p[LW_PATTERN_STRAIN];
    first->strained = first->strain > 3 * first->u_strain && !f->at_bound[LW_PATTERN_STRAIN];
    a->size_unresolved = !size_stands_out(f);
    if (a->size_unresolved) {
        f->p[LW_PATTERN_SIGMA] = LW_ASSUMED_SIGMA;
        f->fixed[LW_PATTERN_SIGMA] = true;
    }
    return lw_pattern_fitter_save(f, &first->after, err);
}

/* Why a form is not tried, or NULL. */
static const char *needless(const lw_pattern_answer *a, const lw_pattern_form *form, const look *first)
{
    if (a->n_forms > 1 && many_parameters(form) && !first->strained)
        return "the strain is too small to tell forms apart";
    if (a->n_forms > 1 && form->none && first->strain > 6 * first->u_strain && first->u_strain > 0)
        return "strain stands out beyond doubt";
    return NULL;
}

/* Every form with lognormal spheres. */
static lw_status fit_forms(lw_pattern_fitter *f, look *first, lw_pattern_saved *after, lw_error *err)
{
    lw_pattern_answer *a = f->answer;
    const lw_pattern_saved *decaying = NULL; /* where the first form with more than one parameter ended */
    const lw_strain_form *decaying_form = NULL;
    if (a->n_forms == 1 && first->form.strain->n > 1) {
        decaying = &first->after;
        decaying_form = first->form.strain;
    }
    lw_status status = LW_OK;
    for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
        lw_pattern_form *form = &a->form[i];
        lw_engine_progress(f->pattern.engine, "whole pattern", (double)i / (double)a->n_forms);
        const char *why = needless(a, form, first);
        if (why != NULL) {
            form->why = why;
            continue;
        }
        memcpy(f->p, first->after.p, f->pattern.n_parameters * sizeof *f->p);
        if (many_parameters(form)) {
            /* a constant strain that decays in truth drives sigma up: not from there */
            if (decaying != NULL)
                memcpy(f->p, decaying->p, f->pattern.n_parameters * sizeof *f->p);
            else if (!a->size_unresolved)
                memcpy(f->p + LW_PATTERN_SIZE, f->start_shape, sizeof f->start_shape);
            if (form->strain == NULL) {
                double size = 0.75 * lw_pattern_shape_moment(&f->pattern.shape, f->p, 1);
                size = fmin(size, 2 * f->half_length);
                lw_strain_knots_make(KNOTS, size / 4, 2 * size, &a->knots);
            }
            if (form->strain == NULL || form->strain != decaying_form)
                lw_pattern_fitter_restart_strain(f, decaying != NULL ? decaying_form : &lw_strain_constant,
                                                 form);
        }
        status = lw_pattern_fitter_minimise(f, form, err);
        if (status == LW_OK)
            status = lw_pattern_fitter_save(f, &after[i], err);
        if (form->strain != NULL && form->strain->n > 1 && decaying == NULL && form->fitted) {
            decaying = &after[i];
            decaying_form = form->strain;
        }
    }
    return status;
}

/* The best form with few parameters, and the best of all, again with strain that varies from crystal to
 * crystal. */
static lw_status try_variation(lw_pattern_fitter *f, lw_pattern_saved *after, lw_error *err)
{
    lw_pattern_answer *a = f->answer;
    size_t plain = a->n_forms, tried[2] = {a->n_forms, a->best};
    for (size_t i = 0; i < plain; i++) {
        bool better = tried[0] == plain || a->form[i].weight > a->form[tried[0]].weight;
        if (a->form[i].fitted && a->form[i].strain != NULL && better)
            tried[0] = i;
    }
    for (int i = 0; i < 2 && a->n_forms < LW_PATTERN_FORMS_MOST; i++) {
        if (tried[i] == plain || (i == 1 && tried[1] == tried[0]))
            continue;
        lw_pattern_form *form = &a->form[a->n_forms];
        *form = a->form[tried[i]];
        form->varying = true;
        lw_pattern_fitter_restore(f, &after[tried[i]], form);
        lw_status status = lw_pattern_fitter_minimise(f, form, err);
        if (status == LW_OK)
            status = lw_pattern_fitter_save(f, &after[a->n_forms++], err);
        if (status != LW_OK)
            return status;
    }
    lw_pattern_answer_misfit(f);
    lw_pattern_answer_weigh(a);
    return LW_OK;
}

/* Lets the strain of the forms vary with direction, if that is worth a parameter to the best of them. */
static lw_status try_directions(lw_pattern_fitter *f, lw_pattern_saved *after, lw_error *err)
{
    lw_pattern_answer *a = f->answer;
    lw_pattern_form trial = a->form[a->best];
    lw_pattern_fitter_restore(f, &after[a->best], &trial);
    f->fixed[LW_PATTERN_ANISOTROPY] = false;
    double before = trial.chi2;
    lw_status status = lw_pattern_fitter_minimise(f, &trial, err);
    if (status != LW_OK || !(before - trial.chi2 > a->misfit * a->misfit * (log((double)a->n_points) + 10)))
        return status;
    a->anisotropic = true;
    double q = f->p[LW_PATTERN_ANISOTROPY];
    for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
        if (!a->form[i].fitted || a->form[i].none)
            continue;
        lw_pattern_fitter_restore(f, &after[i], &a->form[i]);
        f->fixed[LW_PATTERN_ANISOTROPY] = false;
        f->p[LW_PATTERN_ANISOTROPY] = q;
        status = lw_pattern_fitter_minimise(f, &a->form[i], err);
        if (status == LW_OK)
            status = lw_pattern_fitter_save(f, &after[i], err);
    }
    lw_pattern_answer_misfit(f);
    lw_pattern_answer_weigh(a);
    return status;
}

/* The forms that take part, with a histogram of sizes. */
static lw_status fit_histogram(lw_pattern_fitter *f, lw_pattern_fitter *from, lw_pattern_saved *after,
                               lw_error *err)
{
    lw_pattern_answer *a = f->answer;
    lw_pattern_fitter_restore(from, &after[a->best], &a->form[a->best]);
    lw_status status = lw_pattern_fitter_begin_histogram(f, from, err);
    for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
        lw_pattern_form *form = &a->form[i];
        if (!form->fitted)
            continue;
        form->fitted = form->weight > SEEN;
        form->why = "far from the counts with lognormal spheres already";
        if (!form->fitted)
            continue;
        lw_pattern_fitter_carry(f, from, after[i].p);
        memcpy(f->fixed, after[i].fixed, LW_PATTERN_SIZE * sizeof(bool));
        status = lw_pattern_fitter_minimise(f, form, err);
        if (status == LW_OK)
            status = lw_pattern_fitter_save(f, &after[i], err);
    }
    lw_pattern_answer_misfit(f);
    lw_pattern_answer_weigh(a);
    return status;
}

/* Values, covariances and limits, once it is known which forms count for how much. */
static lw_status conclude(lw_pattern_fitter *f, const look *first, const lw_pattern_saved *after,
                          lw_error *err)
{
    lw_pattern_answer *a = f->answer;
    size_t n = f->pattern.n_parameters;
    double *covariance = lw_arena_take(f->arena, n * n, sizeof *covariance, err), inverse_size = 0,
           u_inverse_size = 0;
    if (covariance == NULL)
        return LW_OUT_OF_MEMORY;
    lw_pattern_fitter_restore(f, &after[a->best], &a->form[a->best]);
    lw_pattern_answer_lengths(f);
    lw_status status = lw_pattern_fitter_instrument(f, err);
    for (size_t i = 0; i < a->n_forms && status == LW_OK; i++) {
        lw_pattern_form *form = &a->form[i];
        if (!form->fitted)
            continue;
        memset(covariance, 0, n * n * sizeof *covariance);
        lw_pattern_fitter_restore(f, &after[i], form);
        if (lw_pattern_answer_reach(form) > 0.01)
            status = lw_pattern_fitter_covariance(f, a->misfit, covariance, err);
        if (status == LW_OK && form->weight > SEEN)
            status = lw_pattern_fitter_widen(f, a->misfit, covariance, err);
        if (status != LW_OK)
            return status;
        lw_pattern_answer_propagate(f, form, covariance);
        if (i != a->best)
            continue;
        if (a->histogram.n == 0) {
            inverse_size = form->shape[LW_PATTERN_INVERSE_SIZE];
            u_inverse_size = sqrt(fmax(covariance[LW_PATTERN_INVERSE_SIZE * (n + 1)], 0));
            a->sigma_at_bound = f->at_bound[LW_PATTERN_SIGMA];
        }
        a->u_variation = sqrt(fmax(covariance[LW_PATTERN_VARIATION * (n + 1)], 0));
        a->anisotropy = form->shape[LW_PATTERN_ANISOTROPY];
        a->u_anisotropy = sqrt(fmax(covariance[LW_PATTERN_ANISOTROPY * (n + 1)], 0));
        a->anisotropy_at_bound = f->at_bound[LW_PATTERN_ANISOTROPY];
    }
    if (status != LW_OK)
        return status;
    lw_pattern_answer_join(a);
    if (a->size_unresolved) {
        /* the width of the distribution is assumed, so that both sizes go with the one parameter */
        lw_spheres spheres = {1, LW_ASSUMED_SIGMA};
        double ratio = lw_spheres_size_volume(&spheres, NULL) / lw_spheres_size_area(&spheres, NULL);
        double limit = fmax(inverse_size, 0) + LW_ONE_SIDED_95 * u_inverse_size;
        a->size_area_limit = 1 / limit;
        a->size_volume_limit = ratio / limit;
    }
    const lw_pattern_form *best = &a->form[a->best];
    bool told =
        best->strain == &lw_strain_constant || best->strain == NULL; /* their limit is one for every length */
    if (best->none || (told && !first->strained))
        a->strain_limit = sqrt(fmax(first->strain, 0) + LW_ONE_SIDED_95 * fmax(first->u_strain, 0));
    return LW_OK;
}

lw_status lw_pattern_fit(lw_engine *engine, const lw_profiles *profiles, const lw_pattern_request *request,
                         lw_arena *arena, lw_pattern_answer *answer, lw_error *err)
{
    lw_pattern_fitter f = {.request = request, .arena = arena, .answer = answer}, with_histogram = f,
                      *last = &f;
    lw_pattern_saved after[LW_PATTERN_FORMS_MOST] = {{0}};
    look first;
    lw_pattern_answer *a = answer;
    memset(a, 0, sizeof *a);
    lw_status status = lw_pattern_fitter_begin(&f, engine, profiles, err);
    if (status != LW_OK)
        return status;
    a->n_points = f.pattern.n;
    a->misfit = 1;
    list_forms(request, a);
    status = take_look(&f, &first, err);
    if (status == LW_OK)
        status = fit_forms(&f, &first, after, err);
    if (status != LW_OK)
        return status;
    lw_pattern_answer_misfit(&f);
    lw_pattern_answer_weigh(a);
    if (!a->form[a->best].fitted)
        return lw_fail(err, LW_NO_CONVERGENCE, NULL,
                       "no form of strain could be fitted to the whole pattern");
    if (a->n_forms > 1 && first.strained && !a->form[a->best].none)
        status = try_variation(&f, after, err);
    bool directions = lw_pattern_fitter_directions(&f);
    a->anisotropic = request->anisotropy == 2 && directions;
    if (status == LW_OK && request->anisotropy == 0 && directions && !a->form[a->best].none && first.strained)
        status = try_directions(&f, after, err);
    if (status == LW_OK && request->histogram && !a->size_unresolved) {
        last = &with_histogram;
        status = fit_histogram(last, &f, after, err);
    }
    if (status == LW_OK)
        status = conclude(last, &first, after, err);
    lw_engine_progress(engine, "whole pattern", 1);
    return status;
}
