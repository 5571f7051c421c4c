/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The calibration as a record: what is written when it is made (private to instrument/). */
#ifndef LW_INSTRUMENT_CALIBRATION_RECORD_H
#define LW_INSTRUMENT_CALIBRATION_RECORD_H

#include "instrument/calibration.h"

/* One set of aberrations that was tried, and its criterion (lower is better). */
typedef struct lw_calibration_trial {
    lw_aberrations set;
    double criterion;
} lw_calibration_trial;

/* Lines of the standard against the certificate. */
typedef struct lw_calibration_lines {
    size_t n;
    const lw_line **line;
    lw_quantity *place;              /* fitted 2theta, by the line fit or the optical profile */
    const lw_refined *refined;       /* of the optical profile, or NULL */
    double *certified, *u_certified; /* deg */
    double *difference, *residual;   /* deg, observed minus certified, before and after the aberrations */
    double chi2, p, birge, rms;      /* of the residuals; rms in deg */
    const char *radius_from;
    bool given;                      /* the aberrations were named, not chosen */
    lw_calibration_trial tried[4];
    size_t n_tried;
} lw_calibration_lines;

/* The record of a calibration that differs from `from` in its aberrations and profile. */
lw_status lw__calibration_rewrite(lw_calibration *calibration, const lw_node *from, lw_error *err);
lw_status lw__calibration_record(lw_calibration *calibration, const lw_lines *lines, const lw_standard *standard,
                                 const lw_calibration_lines *rows, lw_error *err);

#endif
