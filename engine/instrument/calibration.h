/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The calibration of an instrument from a standard: aberrations of position and the width function,
 * with covariance and the range in which they hold. */
#ifndef LW_INSTRUMENT_CALIBRATION_H
#define LW_INSTRUMENT_CALIBRATION_H

#include "instrument/aberrations.h"
#include "instrument/optical/refine.h"
#include "line/lines.h"

typedef struct lw_calibration {
    lw_arena arena;
    lw_radiation radiation;     /* its wavelength is the refined one where that was asked for */
    char geometry[24];          /* "reflection" (flat specimen on the focusing circle) or "capillary" */
    lw_aberrations aberrations;
    lw_width_function profile;
    bool has_optical;           /* the profile comes from a geometry */
    lw_geometry optical;
    size_t n_refined;           /* of its quantities */
    const char *refined_name[LW_REFINED_MOST];
    double refined_covariance[LW_REFINED_MOST][LW_REFINED_MOST];
    double valid_low_deg, valid_high_deg;
    char verdict[16];           /* "pass", "attention", "fail" */
    char profile_why[500];      /* which profile was chosen and why, with profile = "auto"; else "" */
    char hash[65];              /* SHA-256 of the record it was saved to or loaded from; "" before */
    lw_node *record;            /* the whole record as a tree: linewright/calibration/1 without provenance */
} lw_calibration;

typedef struct lw_calibrate_options {
    double goniometer_radius_mm; /* for the displacement in mm; 0 = from the scan's header, else 200 (said so) */
    int geometry;                /* "auto", "reflection", "capillary"; auto: capillary for a plain wavelength */
    lw_option_list aberrations;  /* names; empty or "auto" = by evidence (AICc) among zero_shift, displacement,
                                    flat_specimen, transparency (reflection); zero_shift, wavelength (capillary) */
    int profile;                 /* "empirical" (width functions), "optical" (from the geometry), "auto" (optical where
                                    the scan's header gives the slits and the evidence is for it) */
    /* the geometry of the optical profile; NAN = from the scan's header, or usual */
    double source_width_mm, slit_width_mm, divergence_deg, source_length_mm, specimen_length_mm, slit_length_mm,
        soller_rad, attenuation_per_mm, thickness_mm, tilt_deg;
    lw_option_list refine;       /* which of them to refine; empty = specimen_length, source_width and, if not known,
                                    slit_width */
    bool standard_size;          /* take the standard's own domain size into account */
    bool refine_wavelength;      /* capillary default true: certified cell fixes the wavelength */
} lw_calibrate_options;
extern const lw_option lw_calibrate_option_table[];
lw_calibrate_options lw_calibrate_defaults(void);

/* Calibrates from the fitted lines of a standard.
 * Errors: LW_NOT_SUPPORTED if there are fewer lines than aberrations + 1, or if the lines do not belong to the
 * standard (wrong standard or radiation). A range that can't separate two aberrations is a warning in the record. */
lw_status lw_calibrate(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                       const lw_calibrate_options *options, lw_calibration **calibration, lw_error *err);

/* One scan of a set. */
typedef struct lw_calibration_scan {
    const lw_lines *lines;
    const lw_standard *standard;
    double attenuation_per_mm; /* of this specimen, for the optical profile; NAN = as the options say, else refined where
                                  the scan can't be described without it */
    bool positions_only;       /* take nothing of its widths into the instrument's profile */
} lw_calibration_scan;
#define LW_SET_MOST 16

/* Calibrates from scans of one or more standards on one state of the instrument. Zero shift and flat specimen are the
 * instrument's; displacement and transparency are fitted for each scan. The profile's parameters of the scans are joined
 * by generalised least squares with their covariances, and every scan's positions follow the joined profile. A standard
 * whose lines are broader than the sharpest one's beyond chance serves for positions only. What a certificate is unsure
 * of is common to all scans of its standard. `aberrations`, `standard` and `lines` of the record are the first scan's;
 * `scans` has each, `join` how well they agree, `covariance_joint` the whole covariance.
 * Errors besides those of lw_calibrate: LW_BAD_ARGUMENT for scans of different radiation, geometry or axial description,
 * or the same scan twice; LW_BAD_DATA if the scans contradict each other far beyond chance. */
lw_status lw_calibrate_set(lw_engine *engine, const lw_calibration_scan *scans, size_t n, const lw_calibrate_options *options,
                           lw_calibration **calibration, lw_error *err);

/* A calibration from its record tree (as parsed from JSON); checks schema and every number. */
lw_status lw_calibration_from_tree(lw_engine *engine, const lw_node *record, const char *file,
                                   lw_calibration **calibration, lw_error *err);
void lw_calibration_free(lw_calibration *calibration);

/* The same instrument with another specimen in it: an optical calibration whose profile has the specimen's attenuation
 * (1/mm, with its pores; 0 = not transparent) and thickness (mm; 0 = thick). The standard's own transparency leaves
 * the aberrations of position. LW_BAD_ARGUMENT if the profile is not optical. */
lw_status lw_calibration_for_specimen(lw_engine *engine, const lw_calibration *calibration, double attenuation_per_mm,
                                      double thickness_mm, lw_calibration **out, lw_error *err);

/* Checks that a sample's scan can be analysed with it: same radiation, and [low, high] 2theta inside the valid
 * range (5 % of its length is tolerated at either end, and marked). */
lw_status lw_calibration_covers(const lw_calibration *calibration, const lw_radiation *radiation, double low_deg,
                                double high_deg, lw_error *err);

#endif
