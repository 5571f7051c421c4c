/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzz target: scans as columns of text. */
#include "scan_promises.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    read_as_scan((const char *)data, size);
    return 0;
}
