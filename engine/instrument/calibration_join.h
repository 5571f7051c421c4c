/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Several estimates of the same parameters as one: generalised least squares with full covariances (Aitken 1935 Proc.
 * R. Soc. Edinburgh 55, 42), which to first order is the fit of all the data at once. Private to instrument/. */
#ifndef LW_INSTRUMENT_CALIBRATION_JOIN_H
#define LW_INSTRUMENT_CALIBRATION_JOIN_H

#include "base/arena.h"

#include <stdbool.h>

/* What one scan says of some of the parameters. */
typedef struct lw_estimate {
    size_t n;
    const size_t *which;      /* [n], of the joined parameters */
    const double *value;      /* [n] */
    const double *covariance; /* [n^2] */
} lw_estimate;

typedef struct lw_joined {
    double chi2, freedom, p; /* of the estimates about the joined values */
    double birge;            /* sqrt(chi2/freedom) where p < 0.001, else 1: factor of all u (Birge 1932 Phys. Rev. 40, 207) */
} lw_joined;

/* Joins n_estimates estimates of n parameters.
 * Given:  lower[n]       bounds, -INFINITY where there is none
 * Returned: value[n], covariance[n^2] (with the Birge ratio), *joined; a parameter that no estimate tells of: zeros
 * Errors: LW_NOT_SUPPORTED if a covariance has no inverse. */
lw_status lw_join(lw_engine *engine, const lw_estimate *estimate, size_t n_estimates, size_t n, const double *lower,
                  double *value, double *covariance, lw_joined *joined, lw_error *err);

#endif
