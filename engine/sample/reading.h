/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What the same breadths would say of crystals as they are thought to be: spheres with a spread of diameters, whose strain
 * may fall with length. Methods that add breadths by a rule, or take every line for a Voigt, are set beside these
 * readings; how far they stand off is the part of their uncertainty that no counting shows. */
#ifndef LW_SAMPLE_READING_H
#define LW_SAMPLE_READING_H

#include "sample/breadths.h"

#define LW_READINGS_MOST 15

/* One reading: a spread of diameters and a form of strain. */
typedef struct lw_reading {
    const char *strain; /* name of the form: "constant", "fading" ... */
    double sigma;       /* of the logarithm of the diameters */
    double weight;      /* by evidence, all add up to 1 */
    double chi2;
    double size_volume, size_area; /* nm */
    double strain_rms;  /* over half of size_volume; of unlimited size: over 10 nm */
} lw_reading;

typedef struct lw_readings {
    size_t n; /* 0: the breadths could not be read so */
    lw_reading reading[LW_READINGS_MOST];
} lw_readings;

/* Reads the breadths 1/(2 int A dL), A(L) = (lognormal spheres) exp(-2 pi^2 s^2 <Delta^2>), with sigma = 0.15, 0.3 and
 * 0.45 and <Delta^2> of five forms: b L^2 (strain the same over every length), strain correlated along the column as
 * exp(-t/xi) with xi a quarter or a twelfth of size_volume (physics/strain.h, "correlated"), a L (mean square strain
 * falling as 1/L), and b L^2 + a L (five lines or more). Each is fitted with the breadths' covariance and weighted by Akaike's
 * corrected criterion (Hurvich & Tsai 1989 Biometrika 76, 297), chi-square in units of the best one's scatter. Readings that
 * do not settle are left out.
 * Breadths that come from fitted Voigts are read as what Voigts make of such lines (sample/voigt_image.h).
 * Status: LW_OUT_OF_MEMORY, LW_CANCELLED; LW_OK otherwise, with n = 0 where nothing could be read. */
lw_status lw_breadths_read(const lw_breadths *breadths, lw_arena *arena, lw_readings *readings, lw_error *err);

/* The component that a method's value gets from the readings: the root of the weighted mean square difference to them. 0
 * without readings. */
typedef enum lw_read_field { LW_READ_SIZE_VOLUME, LW_READ_SIZE_AREA, LW_READ_STRAIN } lw_read_field;
double lw_readings_difference(const lw_readings *readings, lw_read_field field, double value);

/* Widens a quantity (limits stay) by the difference and tells that part in the group `model_difference`, which is made
 * when `group` has none. has: a component of the same origin that its u holds already; only what is more is added. */
void lw_readings_widen(const lw_readings *readings, lw_read_field field, double has, lw_quantity *quantity, lw_node *group,
                       lw_error *err);
/* The same for size and strain of a fit of breadths; has[2] of size_volume and strain_apparent. */
void lw_readings_widen_fit(const lw_readings *readings, const double has[2], lw_breadth_fit *fit, lw_node *group,
                           lw_error *err);

/* Adds a sentence that names the quantities of `group` whose uncertainty is mostly such a difference. */
void lw_readings_remark(const lw_node *group, lw_node *remarks, lw_error *err);

#endif
