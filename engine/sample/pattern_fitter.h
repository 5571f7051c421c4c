/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the whole pattern's fit share (private to sample/): a pattern with its parameters, and
 * the steps from them to an answer. */
#ifndef LW_SAMPLE_PATTERN_FITTER_H
#define LW_SAMPLE_PATTERN_FITTER_H

#include "sample/pattern_fit.h"

#define LW_ASSUMED_SIGMA 0.3 /* of ln(diameter), where the size is not resolved */

typedef struct lw_pattern_fitter {
    lw_pattern pattern;
    const lw_pattern_request *request;
    lw_arena *arena;
    lw_pattern_answer *answer;
    double *p, *lower, *upper, *inverse, *normal_h, *normal_g;
    bool *fixed, *at_bound, *skip;
    double *by_instrument[LW_WIDTH_PARAMETERS]; /* [n] change of the model by one u of each width parameter */
    double start_shape[2];                      /* inverse size and sigma of the start */
    double half_length;                         /* where the strain is quoted without a size, nm */
} lw_pattern_fitter;

/* Parameters after a fit, so that covariances can be taken once the weights are known. */
typedef struct lw_pattern_saved {
    double *p;
    bool *fixed, *at_bound;
    lw_pattern_prior prior[2];
} lw_pattern_saved;

/* ----------------------------------------------------------------------------------------- pattern_start.c */

/* Lays out a pattern with lognormal spheres and bounds; f->request, arena and answer stand already. Start:
 * breadths against s, and the line fit. */
lw_status lw_pattern_fitter_begin(lw_pattern_fitter *f, lw_engine *engine, const lw_profiles *profiles,
                                  lw_error *err);
/* The same with a histogram (f->answer->histogram, set here), from where `from` ended with lognormal spheres. */
lw_status lw_pattern_fitter_begin_histogram(lw_pattern_fitter *f, const lw_pattern_fitter *from,
                                            lw_error *err);
/* Parameters of a fit with lognormal spheres, as a start with the histogram. */
void lw_pattern_fitter_carry(lw_pattern_fitter *f, const lw_pattern_fitter *from, const double *p);
/* Whether the lines lie in directions that differ enough to tell them apart. */
bool lw_pattern_fitter_directions(const lw_pattern_fitter *f);

/* ------------------------------------------------------------------------------------------ pattern_form.c */

/* Minimises chi-square for the form from f->p; smoothed curves with the strength that the data make most
 * probable. */
lw_status lw_pattern_fitter_minimise(lw_pattern_fitter *f, lw_pattern_form *form, lw_error *err);
/* f->inverse at f->p; parameters that the data can't tell apart are held, one after another. */
lw_status lw_pattern_fitter_invert(lw_pattern_fitter *f, lw_error *err);
/* Weights follow the model where they are a matter of counting. */
lw_status lw_pattern_fitter_weigh(lw_pattern_fitter *f, lw_error *err);
/* Strain parameters of another form that give the same strain near half the size; free knots take the whole
 * curve. */
void lw_pattern_fitter_restart_strain(lw_pattern_fitter *f, const lw_strain_form *from,
                                      const lw_pattern_form *to);
lw_status lw_pattern_fitter_save(lw_pattern_fitter *f, lw_pattern_saved *to, lw_error *err);
void lw_pattern_fitter_restore(lw_pattern_fitter *f, const lw_pattern_saved *from,
                               const lw_pattern_form *form);
/* What one u of each width parameter of the instrument does to the curve, into f->by_instrument. */
lw_status lw_pattern_fitter_instrument(lw_pattern_fitter *f, lw_error *err);
/* Covariance of the shared parameters at f->p, [n n]: counting times misfit^2, plus the calibration's part. */
lw_status lw_pattern_fitter_covariance(lw_pattern_fitter *f, double misfit, double *covariance,
                                       lw_error *err);

/* -------------------------------------------------------------------------------------- pattern_positive.c */

/* Puts what shares that can't be negative are known to in place of counting times misfit^2; right after the
 * latter. */
lw_status lw_pattern_fitter_positive(lw_pattern_fitter *f, double misfit, double *covariance, lw_error *err);

/* ---------------------------------------------------------------------------------------- pattern_robust.c */

/* Enlarges the covariance where lines contradict each other beyond chance, after
 * lw_pattern_fitter_covariance. */
lw_status lw_pattern_fitter_widen(lw_pattern_fitter *f, double misfit, double *covariance, lw_error *err);

/* ---------------------------------------------------------------------------------------- pattern_answer.c */

/* Column lengths at which the strain is told. */
void lw_pattern_answer_lengths(lw_pattern_fitter *f);
/* Values and covariance of a form's quantities from its parameters and their covariance. */
void lw_pattern_answer_propagate(const lw_pattern_fitter *f, lw_pattern_form *form, const double *covariance);
/* Factor on u. */
void lw_pattern_answer_misfit(const lw_pattern_fitter *f);
/* Weights of the forms, and the best. */
void lw_pattern_answer_weigh(lw_pattern_answer *a);
/* For how much a form counts in the spread over the forms, before all are made to sum to 1. */
double lw_pattern_answer_reach(const lw_pattern_form *form);
/* Mean over the forms and its covariance. */
void lw_pattern_answer_join(lw_pattern_answer *a);

#endif
