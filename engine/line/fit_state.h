/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the files of the line fit share while a fit is under way (private to line/). */
#ifndef LW_LINE_FIT_STATE_H
#define LW_LINE_FIT_STATE_H

#include "line/lines.h"
#include "line/model.h"
#include "line/start.h"

#define LW_BACKGROUND_CHOICE 20 /* terms that are chosen from */

enum { LW_WIDTHS_AUTO, LW_WIDTHS_FREE, LW_WIDTHS_SMOOTH }; /* lw_fit_options.widths */

#define LW_BEYOND_MOST 8
#define LW_BEYOND_DEG 30 /* how far beyond the ends they are looked for */
typedef struct lw_area_tie {
    double mean, weight; /* the area expected, and 1/u^2 of that */
} lw_area_tie;

typedef struct lw_fit_state {
    lw_engine *engine;
    lw_arena scratch;              /* freed at the end of the fit */
    const lw_scan *scan;
    const lw_fit_options *options;
    lw_lines *lines;               /* the result under construction */
    lw_model model;
    size_t n;                      /* lines */
    size_t n_beyond;               /* lines beyond the scan's ends, behind them in all arrays and in the model */
    lw_area_tie tie[LW_BEYOND_MOST];
    lw_reflection *reflection;
    lw_line_start *start;
    const char **remark;           /* [n] */
    /* the present point, by meaning */
    double *position, *area;       /* [n] */
    double (*local)[LW_LOCAL_MOST];/* [n] */
    bool *hold_position, *hold_local; /* [n] */
    double background[LW_BACKGROUND_MOST];
    double global[LW_GLOBALS_MOST], global_lower[LW_GLOBALS_MOST];
    bool hold_global[LW_GLOBALS_MOST];
    size_t terms;                  /* Chebyshev terms */
    double *extra;                 /* background scan at the points, or NULL */
    double *extra_variance;        /* of one unit of it */
    /* the same as a parameter vector, laid out for the model */
    size_t n_parameters;
    double *p, *lower, *upper;
    bool *fixed, *at_bound;
    size_t iterations;
    const char *stopped;
    bool converged;
    bool steep_upwards;            /* the Gaussian width function was seen to want V > 0 */
    double crop_deg;               /* > 0: from here on the lines overlap too much; fit again below it */
    double chi2;                   /* of the last iteration */
    lw_width_function shared;      /* the smooth width function, kept when lines get widths of their own */
} lw_fit_state;

/* Sets the model up from scan, options and instrument; takes the instrument into the lines. */
void lw__fit_begin(lw_fit_state *fit);

/* Takes what there is one of for each line, once fit->n is known. */
lw_status lw__fit_take_state(lw_fit_state *fit, lw_error *err);

/* A copy of the options that lives in the arena, for lines->options. */
const lw_fit_options *lw__fit_keep_options(const lw_fit_options *options, const lw_width_function *instrument,
                                           lw_arena *arena, lw_error *err);

/* The stages in their order. With fit->crop_deg set at its end the fit is to be run again below that angle. */
lw_status lw__fit_run(lw_fit_state *fit, lw_error *err);

#define LW_FINAL_ROUNDS 24
/* One stage: least squares, then weights and windows from the new model, until both agree. */
lw_status lw__fit_stage(lw_fit_state *fit, int rounds, bool final, lw_error *err);

/* Takes arrays for the layout that the model now has, and fills them from the state. */
lw_status lw__fit_pack(lw_fit_state *fit, lw_error *err);
/* And back. */
void lw__fit_unpack(lw_fit_state *fit);

/* Takes lines beyond the scan whose tails would be seen in it, where the reflections came with a material. */
lw_status lw__fit_add_beyond(lw_fit_state *fit, lw_error *err);

/* Their places and expected areas from the lines inside as they are now. */
lw_status lw__fit_tie_beyond(lw_fit_state *fit, lw_error *err);

/* The callback of lw_problem, user is the lw_fit_state: the model, and the ties of the areas beyond. */
lw_status lw__fit_evaluate(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);

/* The Gaussian width function U, V, W as U, t, c while it is fitted; see fit_caglioti.c. */
typedef struct lw_width_form {
    lw_fit_state *fit;
    size_t row[3];
    double *p;
} lw_width_form;

/* Brings the packed parameters and their bounds into the form, and back; false where it does not apply (err set if
 * memory was refused). In between, lw__fit_evaluate_form with the form as its user stands for lw__fit_evaluate. */
bool lw__fit_enter_form(lw_fit_state *fit, lw_width_form *form, lw_error *err);
void lw__fit_leave_form(lw_fit_state *fit, const lw_width_form *form);
lw_status lw__fit_evaluate_form(void *user, const double *p, bool want_normal, lw_normal *normal, lw_error *err);

/* Most columns that the background may come to have. */
size_t lw__fit_background_room(const lw_fit_options *options);

/* Whether the user holds a parameter (or "positions", "background") of that name. */
bool lw__fit_is_fixed(const lw_fit_options *options, const char *name);

/* Background scan at the points of this scan, with the variance of one unit of it. */
lw_status lw__fit_take_background_scan(lw_fit_state *fit, lw_error *err);

/* Background with `terms` Chebyshev terms; keeps the coefficients there are. */
void lw__fit_set_background(lw_fit_state *fit, size_t terms);

/* First background: few terms, or those that were asked for, through the level of the scan without its lines
 * (level[scan->n]). */
lw_status lw__fit_start_background(lw_fit_state *fit, const double *level, lw_error *err);

/* Areas and background, in which the model is linear, with everything else held: one step. */
lw_status lw__fit_linear_start(lw_fit_state *fit, lw_error *err);

/* More background terms while the Bayesian information criterion falls (Schwarz 1978 Ann. Stat. 6, 461), by the normal
 * equations at the present point. *more: there are; they stand at zero as yet. */
lw_status lw__fit_choose_background(lw_fit_state *fit, bool *more, lw_error *err);

/* Share of a line's area that lies under its neighbours. */
double lw_fit_overlap(const lw_fit_state *fit, size_t line);

/* Fills fit->lines from the converged state: covariance, statistics, quantities. */
lw_status lw_fit_result(lw_fit_state *fit, lw_error *err);

/* Standard uncertainties of the areas at the present point, and the shared width function with its
 * covariance into fit->shared, by a normal matrix of the present layout. */
lw_status lw_fit_survey(lw_fit_state *fit, double *u_area, lw_error *err);

/* Variance of each point from the present model curve, into fit->lines->variance and the weights. */
void lw_fit_weigh(lw_fit_state *fit, bool from_model);

#endif
