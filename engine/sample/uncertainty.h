/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Uncertainty by doing the whole chain again: counts -> fit -> deconvolution -> methods. */
#ifndef LW_SAMPLE_UNCERTAINTY_H
#define LW_SAMPLE_UNCERTAINTY_H

#include "sample/method.h"

enum { LW_UNCERTAINTY_ANALYTIC, LW_UNCERTAINTY_MONTE_CARLO, LW_UNCERTAINTY_BOOTSTRAP };

typedef struct lw_separate_options {
    lw_option_list methods; /* names; empty or "all" = every one that applies */
    int uncertainty;        /* "analytic", "monte_carlo", "bootstrap" */
    long realisations;
    long seed;
    lw_option_list sources; /* what is drawn: "counting", "calibration", "wavelength"; empty = all */
    bool budget;            /* tell of which parts the uncertainties consist */
} lw_separate_options;
extern const lw_option lw_separate_option_table[];
lw_separate_options lw_separate_defaults(void);

/* lw_separate() and, as the options say, the budget (sample/budget.h) and the group `uncertainty`:
 *   how, source, sources (what was drawn), drawn_about, realisations, seed, relative_accuracy (of every u, 1/sqrt(2 (n - 1))),
 *   failed (realisations that gave nothing) with failed_because, methods_left_out, block_lengths (bootstrap),
 *   quantities: list of { quantity (path in the results), analytic, mean, u, low, high (95 %, probabilistically
 *   symmetric), ratio (u over the analytic one), ratio_of_parts (u over what the budget has for the sources drawn),
 *   values, limits, missing }.
 * Monte Carlo draws counts about the fitted curve, or that of physical shapes where it describes them better (Poisson; normal where sigma was given or intensities are scaled),
 * and the calibration's widths and aberrations from their covariance, once a realisation for all lines. The bootstrap
 * adds blocks of the residuals to the curve instead. Each realisation is fitted again from where the fit ended, with
 * the same options, deconvolved and separated. Methods not named leave out the whole pattern, which takes the longest.
 * The same seed gives the same numbers.
 * Errors: those of lw_separate(); LW_NOT_SUPPORTED where there are no counts to draw from (lines that do not come from
 *         a fit with an instrument); LW_NO_CONVERGENCE if hardly a realisation succeeds.
 * Source: JCGM 101:2008; blocks: Kuensch (1989) Ann. Stat. 17, 1217; residuals: Efron & Tibshirani (1993) An
 *         Introduction to the Bootstrap, ch. 9. */
lw_status lw_separate_with(lw_engine *engine, const lw_profiles *profiles, const lw_separate_options *options,
                           lw_node *results, lw_error *err);

#endif
