/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "profile/line_by_line.h"

#include <math.h>

double lw__tail_variance(const lw__job *job, double *share)
{
    const lw__window *data = &job->data;
    double inside = 0, most = 0, cross = 0, square = 0, level = 0, with = 0;
    for (size_t i = 0; i < data->n; i++) {
        inside += data->curve[i] * data->step[i];
        most = fmax(most, fabs(data->s[i]));
    }
    for (size_t i = 0; i < data->n; i++) {
        if (fabs(data->s[i]) < 0.5 * most)
            continue;
        double w = 1 / data->variance[i];
        cross += w * data->curve[i] * data->residual[i];
        square += w * data->curve[i] * data->curve[i];
        level += w * data->curve[i];
        with += w * data->curve[i] * data->with_level[i];
    }
    *share = fmin(fmax(1 - inside / job->line->area_s, 0), 1);
    if (!(square > 0))
        return *share * *share;
    double wrong = cross / square,
           variance = 1 / square + level / (square * square) * (level * data->background_variance - 2 * with);
    return *share * *share * fmin(fmax(wrong * wrong, fmax(variance, 0)), 1);
}

/* The refold where the fit's shape stands as it is. */
static lw_status refold_shape(const lw__job *job, lw_error *err)
{
    lw_status status = lw__take_refold(job->profiles, job->profile, job->data.first, job->data.n, err);
    if (status != LW_OK)
        return status;
    const lw__window *data = &job->data;
    double chi2 = 0, freedom = 0, lost = 0, net = 0;
    for (size_t i = 0; i < data->n; i++) {
        lw__set_refold_point(job->profile, i, data->curve[i] + data->residual[i], data->own_variance[i],
                             data->curve[i]);
        if (!(data->own_variance[i] > 0))
            continue;
        double square = data->residual[i] * data->residual[i];
        chi2 += square / data->own_variance[i];
        lost += square - data->own_variance[i];
        net += data->curve[i] * data->curve[i];
        freedom += 1;
    }
    lw__set_refold(job->profile, chi2, freedom, data->n, lost, net);
    return LW_OK;
}

/* What a line's breadth leans on besides its own counts. */
typedef struct leaning {
    double angle_deg[3], by[3][2]; /* widths of the instrument: at its own angle, at the standard's lines */
    lw__measured measured;
    double *by_point[2];     /* [points of the standard's line's window] */
    double off[LW__MEMBERS]; /* with the other forms for completion; squares add up to their variance */
} leaning;

static lw_status one_line(lw__job *job, const lw__separation *separation, lw__standard *standard, size_t k,
                          const lw__physical_fit *physical, lw__solve_fn *solve, lw__answer *answer,
                          leaning *lean, lw_arena *arena, lw_error *err)
{
    lw_arena scratch;
    lw_arena_begin(&scratch, job->engine);
    lw_profile *profile = job->profile = &job->profiles->profile[k];
    job->separation = separation;
    job->line = &separation->line[k];
    job->shape_breadth = lw__shape_breadth(&job->line->shape, NULL);
    job->shape_variance = job->profiles->covariance[profile->at_breadth * (job->profiles->n_covariance + 1)];
    *lean = (leaning){0};
    job->measured = (lw__measured){0};
    lw_status status = lw__take_lengths(job->profiles, profile, job->options, err);
    if (status == LW_OK)
        status =
            lw__take_window(job->profiles, k, separation, job->options->window, &scratch, &job->data, err);
    if (status == LW_OK)
        status = lw__take_instrument(job->profiles, profile, &scratch, &job->instrument, err);
    if (status == LW_OK && standard != NULL) {
        const char *how;
        status = lw__take_measured(job->profiles, profile, standard, job->options->standard_reach, arena,
                                   &job->measured, &how, err);
        if (status == LW_OK && (profile->assumed = lw_arena_print(&job->profiles->arena, err, "%s; %s",
                                                                  profile->assumed, how)) == NULL)
            status = LW_OUT_OF_MEMORY;
    }
    lw__instrument taken = job->instrument;
    taken.measured = standard != NULL ? &job->measured : NULL;
    *answer = (lw__answer){.breadth = job->shape_breadth, .from_shape = true};
    if (status == LW_OK && job->data.n >= 8 && job->line->area_s > 0 && job->shape_breadth > 0)
        status = solve(job, standard != NULL ? &taken : &job->instrument, true, &scratch, answer, err);
    if (status == LW_OK && answer->from_shape)
        status = refold_shape(job, err);
    /* noise whose neighbours go together weighs more in every sum over points, by its long-run variance */
    double together = job->profiles->lines->scan->correlation, factor = (1 + together) / (1 - together);
    answer->variance *= factor;
    for (size_t i = 0; i < profile->n_coefficients && factor > 1; i++) {
        profile->u_cosine[i] *= sqrt(factor);
        profile->u_sine[i] *= sqrt(factor);
    }
    for (int i = 0; i < 2 && status == LW_OK && !answer->from_shape; i++) {
        /* the same data with an instrument a little wider */
        lw__instrument wider = taken;
        double step = 0.02 * (i == 0 ? wider.fwhm_deg * wider.fwhm_deg : wider.fwhm_deg);
        *(i == 0 ? &wider.variance : &wider.lorentz) += step;
        lw__answer other = *answer;
        status = solve(job, &wider, false, &scratch, &other, err);
        lean->by[0][i] = (other.breadth - answer->breadth) / step;
    }
    lean->angle_deg[0] = profile->line->nominal_deg;
    lean->measured = job->measured;
    for (size_t j = 0; j < job->measured.n; j++) {
        /* the calibration's widths at the standard's line divide what stands at this one; lengths there are
         * longer by the stretch */
        double stretch = job->measured.stretch[j], weight = job->measured.weight[j];
        lean->angle_deg[1 + j] = job->measured.line[j]->angle_deg;
        lean->by[1 + j][0] = -weight * stretch * stretch * lean->by[0][0];
        lean->by[1 + j][1] = -weight * stretch * lean->by[0][1];
    }
    for (int j = 0; j < 2; j++)
        lean->by_point[j] = answer->by_point[j];
    if (status == LW_OK && standard != NULL && !answer->from_shape && lean->by_point[0] == NULL)
        status = lw__measured_slopes(&job->measured, job->instrument.per_degree, profile, answer->breadth,
                                     arena, lean->by_point, err);
    for (size_t m = 0; m < physical->n_members && status == LW_OK && !answer->from_shape; m++) {
        /* the same data, taken apart and completed by another form within reach */
        if (m == physical->best || !(physical->reach[m] > 0))
            continue;
        job->separation = &physical->apart[m];
        job->line = &job->separation->line[k];
        job->shape_breadth = lw__shape_breadth(&job->line->shape, NULL);
        status = lw__take_window(job->profiles, k, job->separation, job->options->window, &scratch,
                                 &job->data, err);
        lw__answer other = *answer;
        if (status == LW_OK)
            status = solve(job, &taken, false, &scratch, &other, err);
        lean->off[m] = sqrt(physical->reach[m]) * (other.breadth - answer->breadth);
    }
    lw_arena_end(&scratch);
    return status == LW_OK ? lw_engine_poll(job->engine, err) : status;
}

static double between_forms(const leaning *a, const leaning *b)
{
    double sum = 0;
    for (size_t m = 0; m < LW__MEMBERS; m++)
        sum += a->off[m] * b->off[m];
    return sum;
}

lw_status lw__line_by_line(lw_engine *engine, lw_profiles *profiles, const lw_deconvolve_options *options,
                           lw__solve_fn *solve, const char *name, lw_error *err)
{
    size_t n = profiles->n, stride = profiles->n_covariance;
    lw_arena scratch;
    lw__separation separation;
    lw__physical_fit physical = {0};
    lw_arena_begin(&scratch, engine);
    lw__answer *answer = lw_arena_take(&scratch, n, sizeof *answer, err);
    leaning *lean = lw_arena_take(&scratch, n, sizeof *lean, err);
    lw__standard standard;
    lw_status status = answer == NULL || lean == NULL ? LW_OUT_OF_MEMORY : LW_OK;
    bool by_physics = options->completion == LW__BY_PHYSICS ||
                      (options->completion == LW__BY_MISFIT && profiles->lines->misfit_p < 0.2 && n <= 30);
    if (status == LW_OK && options->standard != NULL)
        status = lw__take_standard(profiles, options->standard, &scratch, &standard, err);
    if (status == LW_OK && by_physics)
        status = lw__separate_by_physics(engine, profiles, &scratch, &separation, &physical, err);
    else if (status == LW_OK)
        status = lw__separate_by_voigts(profiles, &scratch, &separation, err);
    if (status == LW_OK && by_physics)
        status = lw__keep_model(profiles, &separation, err);
    if (status == LW_OK && by_physics)
        for (size_t a = 0; a < n; a++) {
            const lw_profile *profile = &profiles->profile[a];
            for (size_t b = 0; b < n; b++)
                profiles->covariance[profile->at_breadth * stride + profiles->profile[b].at_breadth] =
                    physical.covariance[a * n + b];
        }
    lw__job job = {.engine = engine, .profiles = profiles, .options = options, .keep = &scratch};
    for (size_t k = 0; k < n && status == LW_OK; k++) {
        profiles->profile[k].assumed = separation.how;
        status = one_line(&job, &separation, options->standard != NULL ? &standard : NULL, k, &physical,
                          solve, &answer[k], &lean[k], &scratch, err);
        lw_engine_progress(engine, name, (double)(k + 1) / (double)n);
    }
    for (size_t a = 0; a < n && status == LW_OK; a++) {
        lw_profile *profile = &profiles->profile[a];
        double *row = profiles->covariance + profile->at_breadth * stride;
        for (size_t b = 0; b < n; b++) {
            const lw_profile *other = &profiles->profile[b];
            /* the Voigt's parts belong to another description of the line; breadths share the instrument */
            if (answer[a].from_shape && answer[b].from_shape && !by_physics)
                continue;
            size_t at[2] = {other->at_gauss, other->at_lorentz};
            for (int i = 0; i < 2; i++)
                row[at[i]] = profiles->covariance[at[i] * stride + profile->at_breadth] = 0;
            if (answer[a].from_shape && answer[b].from_shape)
                continue;
            if (answer[a].from_shape || answer[b].from_shape)
                row[other->at_breadth] =
                    profiles->covariance[other->at_breadth * stride + profile->at_breadth] = 0;
            else
                row[other->at_breadth] =
                    lw__from_instrument(
                        profiles, &(lw__leaning){1 + lean[a].measured.n, lean[a].angle_deg, lean[a].by},
                        &(lw__leaning){1 + lean[b].measured.n, lean[b].angle_deg, lean[b].by}) +
                    lw__measured_covariance(
                        &lean[a].measured, lean[a].by_point, &lean[b].measured, lean[b].by_point,
                        options->standard != NULL ? options->standard->scan->correlation : 0) +
                    between_forms(&lean[a], &lean[b]) + (a == b ? answer[a].variance : 0);
        }
        lw__set_breadth(profiles, profile, answer[a].breadth, sqrt(fmax(row[profile->at_breadth], 0)));
    }
    lw_arena_end(&scratch);
    return status;
}
