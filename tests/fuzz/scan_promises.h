/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Reads bytes as a scan with every kind of noise and holds what comes out against what scan.h promises. */
#ifndef LW_TESTS_FUZZ_SCAN_PROMISES_H
#define LW_TESTS_FUZZ_SCAN_PROMISES_H

#include "fuzz.h"

#include "scan/scan.h"

#include <math.h>
#include <string.h>

static inline void read_as_scan(const char *bytes, size_t size)
{
    lw_engine engine;
    lw_engine_begin(&engine);
    /* with "counts" also under a radiation that the bytes may contradict */
    lw_radiation radiation;
    FUZZ_PROMISE(lw_radiation_plain(0.15406, &radiation, NULL) == LW_OK);
    for (int noise = 0; noise < 4; noise++) {
        lw_scan_options options = lw_scan_defaults();
        options.noise = noise;
        options.radiation = noise == 1 ? &radiation : NULL;
        lw_error err = LW_ERROR_NONE;
        lw_scan *scan = NULL;
        lw_status status = lw_scan_read_bytes(&engine, "input", bytes, size, &options, &scan, &err);
        FUZZ_PROMISE(status == err.status && (status == LW_OK) == (scan != NULL));
        if (status != LW_OK) {
            FUZZ_PROMISE(err.message[0] != '\0');
            continue;
        }
        FUZZ_PROMISE(scan->n >= 3 && strlen(lw_scan_hash(scan)) == 64);
        for (size_t i = 0; i < scan->n; i++) {
            FUZZ_PROMISE(scan->two_theta_deg[i] > (i > 0 ? scan->two_theta_deg[i - 1] : 0));
            FUZZ_PROMISE(scan->two_theta_deg[i] < 180 && isfinite(scan->intensity[i]));
            FUZZ_PROMISE(scan->sigma == NULL || (scan->sigma[i] > 0 && isfinite(scan->sigma[i])));
        }
        FUZZ_PROMISE(isfinite(scan->variance_factor) && fabs(scan->correlation) <= 1);
        lw_scan *part = NULL;
        double low = scan->two_theta_deg[0], high = scan->two_theta_deg[scan->n - 1];
        if (lw_scan_crop(scan, low, low + 0.7 * (high - low), &part, &err) == LW_OK)
            FUZZ_PROMISE(part->n <= scan->n && part->two_theta_deg[0] == low);
        lw_scan_free(part);
        lw_scan_free(scan);
    }
    lw_engine_end(&engine);
}

#endif
