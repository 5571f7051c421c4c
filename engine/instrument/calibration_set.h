/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A calibration from several scans of standards, while it is under way (private to instrument/). */
#ifndef LW_INSTRUMENT_CALIBRATION_SET_H
#define LW_INSTRUMENT_CALIBRATION_SET_H

#include "instrument/calibration_join.h"
#include "instrument/calibration_record.h"

#define LW_SET_ALL ((size_t)-1) /* in place of a scan: shared by all */

typedef struct lw_set_scan {
    const lw_lines *lines;      /* as they were given */
    const lw_standard *standard;
    bool joined;                /* its widths are in the profile; else it is there for the positions alone */
    const char *why;            /* not; "" if they are */
    lw_lines *again;            /* fitted once more with the joined profile folded in, or NULL. Owned */
    lw_refined refined;         /* of the optical profile */
    double attenuation, u_attenuation; /* 1/mm in its profile; 0 = not transparent */
    lw_calibration_lines rows;
    size_t first;               /* of its lines among those of all scans */
    lw_aberrations aberrations; /* as they act on its lines */
} lw_set_scan;

/* One parameter of position: an aberration, and whose it is. */
typedef struct lw_set_column {
    const lw_aberration *kind;
    size_t scan; /* or LW_SET_ALL */
} lw_set_column;
#define LW_SET_COLUMNS (LW_ABERRATION_MOST + 2 * LW_SET_MOST)

struct lw_set {
    const lw_calibrate_options *options;
    bool optical, capillary;
    double radius_mm;
    size_t n;
    lw_set_scan scan[LW_SET_MOST];
    /* the profile's parameters */
    size_t n_profile;
    const char *name[LW_WIDTH_PARAMETERS];
    int width[LW_WIDTH_PARAMETERS]; /* empirical: LW_U ... */
    double value[LW_WIDTH_PARAMETERS], covariance[LW_WIDTH_PARAMETERS * LW_WIDTH_PARAMETERS];
    lw_joined profile;
    lw_refined all;           /* optical: chi-square, points and lines of all scans together */
    /* positions of all lines of all scans */
    size_t n_lines, *scan_of;
    double *difference, *certified, *places; /* places: covariance [n_lines^2] */
    double *to_profile;                      /* [n_lines][n_profile] */
    size_t n_common;                         /* edges of certificates, three a standard */
    double *common;                          /* [n_lines][n_common], times their u */
    /* parameters of position */
    size_t n_columns, n_tried;
    lw_set_column column[LW_SET_COLUMNS];
    struct {
        char text[200];
        double criterion;
    } tried[LW_SET_COLUMNS];
    double shift[LW_SET_COLUMNS];
    double *shift_covariance; /* [n_columns^2] */
    double *shift_profile;    /* [n_columns][n_profile]: covariance with the profile's parameters */
    double chi2, p, birge;
    lw_joined shared;         /* what all scans share, against each scan by itself */
};
typedef struct lw_set lw_set;

/* calibration_places.c: where the lines of all scans stand at the joined profile; fills `places` and what belongs to it. */
lw_status lw__set_places(lw_engine *engine, lw_set *set, lw_arena *arena, lw_arena *scratch, lw_error *err);

/* Positions of all scans at the joined profile, and the aberrations fitted to them. Fills the rows and aberrations of
 * the scans. LW_BAD_DATA if the scans contradict each other far beyond chance. */
lw_status lw__set_positions(lw_engine *engine, lw_set *set, lw_arena *arena, lw_arena *scratch, lw_error *err);

#endif
