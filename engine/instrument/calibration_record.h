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
    const lw_lines *lines;
    const lw_standard *standard;
    size_t n;
    const lw_line **line;
    lw_quantity *place;              /* fitted 2theta, by the line fit or the optical profile */
    const lw_refined *refined;       /* of the optical profile, or NULL */
    double *certified, *u_certified; /* deg */
    double *difference, *residual;   /* deg, observed minus certified, before and after the aberrations */
    double *u_residual;              /* deg, with what lines have in common and what the aberrations took up */
    double chi2, p, birge, rms;      /* of the residuals; rms in deg */
    const char *radius_from;
    bool given;                      /* the aberrations were named, not chosen */
    lw_calibration_trial tried[4];
    size_t n_tried;
} lw_calibration_lines;

/* Takes the arrays for `most` lines in the calibration's arena. */
lw_status lw__calibration_lines_take(lw_calibration_lines *rows, size_t most, lw_arena *arena, lw_error *err);

/* Where the certificate puts a line, degrees 2theta at a wavelength, NAN beyond 180; slopes to the three edges by *d. */
double lw__certified_angle(const lw_standard *standard, double wavelength_nm, const lw_reflection *r, double d[3]);
/* Equal edges of the crystal system move together: the group of each edge; returns how many groups. */
size_t lw__edge_groups(lw_crystal_system system, size_t group[3]);
/* The named aberrations (NULL ends the list early) as a set without values. */
lw_status lw__take_named(const char *const *names, size_t n, lw_aberrations *set, lw_error *err);
/* Lines over a range wide enough to tell smooth functions of the angle apart. */
bool lw__wide_range(const lw_lines *lines);
/* Akaike's criterion for few data (Hurvich & Tsai 1989 Biometrika 76, 297); infinite where n does not allow it. */
double lw__aicc(double chi2, size_t n, size_t parameters);
/* Uncertainties of the residuals r = y - X E y from the covariance of y [n*n], slopes X [n][k] and estimator E [n][k];
 * `common` [n][m] holds what the m edges of certificates do to each line, already times their u. */
lw_status lw__residual_u(size_t n, size_t k, size_t m, const double *slope, const double *estimator, const double *covariance,
                         const double *common, double *u, lw_arena *scratch, lw_error *err);
/* The goniometer's radius, mm, and where it is from. */
double lw__goniometer_radius(const lw_calibrate_options *options, const lw_scan *scan, const char **from);

/* The record of a calibration that differs from `from` in its aberrations and profile. */
lw_status lw__calibration_rewrite(lw_calibration *calibration, const lw_node *from, lw_error *err);
/* From the lines of each scan; set: how they were joined, NULL for a single scan. */
struct lw_set;
lw_status lw__calibration_record(lw_calibration *calibration, const lw_calibration_lines *const *all, size_t n_all,
                                 const struct lw_set *set, lw_error *err);

/* calibration_check.c: refuses a record that was read back if what it says twice does not agree: the table of the profile
 * and the uncertainties beside the parameters against the parameters themselves and their covariance. */
lw_status lw__calibration_check(lw_engine *engine, const lw_calibration *calibration, const lw_node *record, const char *file,
                                lw_error *err);

/* calibration_lines.c: the list `lines`; the lists `warnings` and `off_certificate` with the verdict that follows. */
void lw__write_lines(const lw_calibration_lines *rows, lw_node *root, lw_error *err);
void lw__write_verdict(lw_calibration *calibration, const lw_calibration_lines *const *all, size_t n_all,
                       const struct lw_set *set, lw_node *root, lw_error *err);

#endif
