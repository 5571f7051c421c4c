/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The calibration's profile by the full optical model (private to instrument/). */
#ifndef LW_INSTRUMENT_CALIBRATION_OPTICAL_H
#define LW_INSTRUMENT_CALIBRATION_OPTICAL_H

#include "instrument/calibration.h"
#include "instrument/optical/sensitivity.h"

/* The number after some words in the comments at the top of a scan; `otherwise` if they are not there. */
double lw__in_header(const char *header, const char *words, double otherwise);

/* The geometry of a scan from the options and its header, and its refinement; attenuation may be among the quantities. */
lw_status lw__optical_refine(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                             const lw_calibrate_options *options, double radius_mm, lw_arena *arena, lw_refined *refined,
                             lw_error *err);

/* Geometry from the options and, where they are silent, from the scan's header ("divergence slit 0.75 deg; receiving
 * slit 0.15 mm; Soller slits 0.040 and 0.040 rad") or usual values; refined against the scan; the profile of the
 * calibration becomes its table. `optical` of the record is filled. attenuation: what is known of the specimen's, which is
 * then refined as well; NULL: it is as the options say. */
lw_status lw__calibrate_optical(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                                const lw_calibrate_options *options, const lw_quantity *attenuation,
                                lw_calibration *calibration, lw_refined *refined, lw_error *err);

/* Attenuation of the standard from the transparency among the calibration's aberrations, whose mean shift is
 * -sin(2theta)/(2 mu R): true if the options leave it open and the shift is there (3 u). */
bool lw__optical_transparency(const lw_calibrate_options *options, const lw_calibration *calibration, lw_quantity *attenuation);

/* With profile = "auto": whether the optical profile is to be used, which then is the calibration's; profile_why says why or
 * why not. It is where the specimen is flat, the slits are known from the header or the options, and Akaike's criterion, at the
 * points of the lines that stand alone, is lower than that of the width functions. */
lw_status lw__optical_or_not(lw_engine *engine, const lw_lines *lines, const lw_standard *standard,
                             const lw_calibrate_options *options, lw_calibration *calibration, lw_refined *refined,
                             bool *optical, lw_error *err);

/* The quantities that were refined, borrowed. */
lw_refined_set lw__refined_set(const lw_calibration *calibration);

/* The group `optical` of a record's profile, and back. */
void lw__optical_write(const lw_calibration *calibration, const lw_refined *refined, lw_node *profile, lw_error *err);
/* Table of the calibration's geometry between two angles, as its profile. */
lw_status lw__optical_profile(lw_engine *engine, lw_calibration *calibration, double low_deg, double high_deg, lw_error *err);
lw_status lw__optical_read(lw_engine *engine, const lw_node *optical, const char *file, lw_calibration *calibration,
                           lw_error *err);

#endif
