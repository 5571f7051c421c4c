/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Aberrations of position: where the instrument puts a line, against where it belongs. Each is one
 * constant that describes itself; the list names them. Observed 2theta = true + sum of shifts. */
#ifndef LW_INSTRUMENT_ABERRATIONS_H
#define LW_INSTRUMENT_ABERRATIONS_H

#include <stdbool.h>
#include <stddef.h>

#define LW_ABERRATION_MOST 6

typedef struct lw_aberration {
    const char *name;       /* field name in records: "zero_shift", "displacement", "flat_specimen" ... */
    const char *unit;       /* of its parameter */
    const char *definition; /* one sentence with the sign */
    const char *source;
    bool of_specimen;       /* each specimen has its own; else it is the instrument's, shared by all scans */
    /* shift of 2theta in degrees for a parameter of 1, at a true 2theta; radius_mm of the goniometer */
    double (*slope)(double two_theta_deg, double radius_mm);
} lw_aberration;

extern const lw_aberration *const lw_aberration_list[]; /* NULL-terminated */
const lw_aberration *lw_aberration_named(const char *name); /* NULL if unknown */

/* A set of aberrations with values. */
typedef struct lw_aberrations {
    size_t n;
    const lw_aberration *kind[LW_ABERRATION_MOST];
    double value[LW_ABERRATION_MOST];
    double covariance[LW_ABERRATION_MOST][LW_ABERRATION_MOST];
    double radius_mm;
} lw_aberrations;

/* Sum of shifts, degrees, at a true 2theta; *u (may be NULL) its standard uncertainty. */
double lw_aberrations_shift(const lw_aberrations *set, double two_theta_deg, double *u);

#endif
