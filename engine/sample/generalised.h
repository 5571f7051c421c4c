/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Generalised least squares: a small model fitted to observations whose full covariance is known. Every
 * method of this floor that draws a line through breadths or a cell through positions goes through it, so
 * that lines which share a calibration are weighted as the correlated numbers they are. Source: Aitken (1935)
 * Proc. R. Soc. Edinburgh 55, 42 (generalised least squares); errors of the abscissa by effective variance,
 * Orear (1982) Am. J. Phys. 50, 912, which at convergence is the condition of York et al. (2004) Am. J. Phys.
 * 72, 367 to first order in u(x)/x. */
#ifndef LW_SAMPLE_GENERALISED_H
#define LW_SAMPLE_GENERALISED_H

#include "base/arena.h"

#include <stdbool.h>
#include <stddef.h>

typedef struct lw_generalised {
    size_t n;                   /* observations */
    size_t m;                   /* parameters, <= LW_GENERALISED_MOST */
    const double *y;            /* [n] observed */
    const double *covariance;   /* [n*n] of y, symmetric; every variance > 0 */
    const double *x_covariance; /* [n*n] of the abscissas, or NULL: taken as known */
    /* value[n] at parameters p[m], slopes[n*m] = d(value)/d(p), row a point, and x_slope[n] = d(value)/d(x)
     * (all 0 on entry). A point where the model does not exist is told by a value that is not finite. */
    void (*model)(void *user, const double *p, double *value, double *slopes, double *x_slope);
    void *user;
} lw_generalised;
#define LW_GENERALISED_MOST 12

typedef struct lw_generalised_fit {
    double covariance[LW_GENERALISED_MOST][LW_GENERALISED_MOST]; /* of the parameters, not enlarged */
    double shared[LW_GENERALISED_MOST]; /* multiple correlation of each parameter with all others, 0 to 1 */
    double chi2;
    size_t rank; /* independent numbers among the observations: below n when their covariance is singular */
    size_t degrees;     /* rank - m */
    double p;           /* probability of a chi2 this large by chance; 1 without degrees of freedom */
    double scatter;     /* sqrt(chi2/degrees) where above 1, else 1 (Birge 1932 Phys. Rev. 40, 207) */
    double *calculated; /* [n] in the arena */
    double *gain;       /* [m*n] slopes of the parameters to the observations */
    double *residual;   /* [n] y - calculated */
    double *u;          /* [n] standard uncertainty of each observation, abscissa's part included */
    size_t iterations;
} lw_generalised_fit;

/* Fits. p[m] is the start on entry and the answer on return.
 * Notes:  eigenvectors of the observations' correlation matrix with eigenvalues below 1e-7 of the largest are
 *         left out: they are combinations that a common function of angle fixes, no measurement.
 * Status: LW_BAD_ARGUMENT (too many parameters); LW_NOT_SUPPORTED (a variance that is not above 0, fewer
 *         independent numbers than parameters, or parameters that the observations cannot tell apart:
 *         *weakest, may be NULL, is the one concerned); LW_NO_CONVERGENCE. */
lw_status lw_generalised_solve(const lw_generalised *problem, lw_arena *arena, double *p,
                               lw_generalised_fit *fit, size_t *weakest, lw_error *err);

/* Probability that a chi-square of `degrees` degrees of freedom exceeds chi2; 1 for 0 degrees. */
double lw_generalised_p(double chi2, size_t degrees);

#endif
