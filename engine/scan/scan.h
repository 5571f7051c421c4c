/* SPDX-License-Identifier: GPL-3.0-or-later */
/* A scan: intensity against 2theta, its noise and its radiation. Immutable once read: cropping makes
 * a new one. Angles ascend strictly and are finite; intensities are finite. */
#ifndef LW_SCAN_SCAN_H
#define LW_SCAN_SCAN_H

#include "base/arena.h"
#include "base/options.h"
#include "physics/radiation.h"

#include <stdbool.h>
#include <stddef.h>

typedef enum lw_noise {
    LW_NOISE_COUNTS, /* Poisson: variance = expected counts */
    LW_NOISE_SIGMA,  /* standard uncertainty given with each point */
    LW_NOISE_SCALED  /* variance = factor x expected intensity, neighbours correlated */
} lw_noise;

typedef struct lw_scan {
    lw_arena arena;
    const char *file;   /* as the user named it; "" for a made scan */
    struct lw_source *source; /* what the hash is made from (scan/source.h); NULL for a made scan */
    const char *header; /* comment lines at the top, newline-separated */
    size_t n;
    const double *two_theta_deg; /* [n] */
    const double *intensity;     /* [n], counts or scaled */
    const double *sigma;         /* [n] or NULL */
    lw_noise noise;
    double variance_factor; /* variance / expected intensity: 1 for counts */
    double correlation;     /* of neighbouring points' noise, 0 for counts */
    bool has_radiation;
    lw_radiation radiation;
    size_t first_line; /* line of the file that holds point 0 (text), 0 if not known */
} lw_scan;

/* Options of reading; key names are those of lw.read_scan. */
typedef struct lw_scan_options {
    int noise;                     /* index: "auto", "counts", "sigma", "scaled" */
    double range[2];               /* keep only these 2theta, degrees; both 0 = all */
    const char *block;             /* data block of a CIF with several scans; NULL = the only one */
    const lw_radiation *radiation; /* what the user says; overrides the file's; NULL = the file's, if any */
    bool radiation_differs;        /* it may contradict what the file states */
} lw_scan_options;
extern const lw_option lw_scan_option_table[];
lw_scan_options lw_scan_defaults(void);

/* Reads a scan from a file: text columns or pdCIF, plain or gzipped, told apart by content.
 * Noise "auto": sigma if a third column or s.u. is there; counts if all intensities are whole numbers
 * (and non-negative); else LW_BAD_DATA asks for noise = "scaled" or a sigma column.
 * Errors: LW_IO (can't open), LW_BAD_DATA with file, line and remedy, LW_BAD_ARGUMENT for a radiation that contradicts
 * the file. Ownership: free with lw_scan_free(). */
lw_status lw_scan_read(lw_engine *engine, const char *path, const lw_scan_options *options, lw_scan **scan,
                       lw_error *err);

/* The same from bytes in memory (name is only for messages). */
lw_status lw_scan_read_bytes(lw_engine *engine, const char *name, const char *bytes, size_t size,
                             const lw_scan_options *options, lw_scan **scan, lw_error *err);

/* SHA-256 of the file's bytes as they were read, hexadecimal; "" for a made scan. It is made when it is first asked
 * for: until then the scan keeps the bytes, so that a file that changes meanwhile can't be mistaken for them. */
const char *lw_scan_hash(const lw_scan *scan);

/* A scan from arrays, checked like a file's; sigma may be NULL. */
lw_status lw_scan_make(lw_engine *engine, const char *name, size_t n, const double *two_theta_deg,
                       const double *intensity, const double *sigma, const lw_scan_options *options,
                       lw_scan **scan, lw_error *err);

/* A new scan of the points with low <= 2theta <= high (degrees). LW_BAD_ARGUMENT if fewer than 3 remain. */
lw_status lw_scan_crop(const lw_scan *scan, double low_deg, double high_deg, lw_scan **cropped,
                       lw_error *err);

void lw_scan_free(lw_scan *scan); /* accepts NULL */

/* Factor and neighbour correlation of scaled noise, estimated from the scan itself by third differences of
 * the points scaled with the square root of a running median, so that smooth structure drops out.
 * Returned: *factor = variance / intensity, *correlation = that of next neighbours (0 <= rho < 1). */
void lw_scan_estimate_noise(const lw_scan *scan, double *factor, double *correlation);

/* Linear interpolation of the scan at an angle; 0 outside its range (*inside tells, may be NULL). */
double lw_scan_at(const lw_scan *scan, double two_theta_deg, bool *inside);

#endif
