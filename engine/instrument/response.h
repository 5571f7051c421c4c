/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The response of an instrument: relative intensities of a standard's lines against those that its certificate states, as
 * a smooth curve of the angle. A mask in the beam, a slit that cuts it at low angles, or a counter that loses counts bends
 * the curve. */
#ifndef LW_INSTRUMENT_RESPONSE_H
#define LW_INSTRUMENT_RESPONSE_H

#include "base/options.h"
#include "base/tree.h"
#include "line/lines.h"

typedef struct lw_response_options {
    long order_most; /* highest order of the polynomial that is tried, 0 to 4 */
} lw_response_options;
extern const lw_option lw_response_option_table[];
lw_response_options lw_response_defaults(void);

/* Fills result with lines (observed over certified, the curve there), curve (with band), order and how each did, the test
 * against a flat response, cautions, warnings and verdict (pass: flat within u; else attention).
 * The logarithm of observed over certified is fitted by a polynomial in the angle whose order has the lowest criterion
 * (AICc: Hurvich & Tsai 1989 Biometrika 76, 297); its constant is the scale, which a certificate of relative intensities
 * leaves open. Covariances of the fitted areas are kept; the certificate's u are taken as independent from line to line.
 * Errors: LW_NOT_SUPPORTED for a standard without intensities, or fewer than 4 of its lines in the scan. */
lw_status lw_response(lw_engine *engine, const lw_lines *lines, const lw_standard *standard, const lw_response_options *options,
                      lw_node *result, lw_error *err);

#endif
