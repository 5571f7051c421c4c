/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzz target: scans as powder CIF. What doesn't begin like one is read as the body of a data block. */
#include "scan_promises.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    static const char head[] = "data_input\n";
    char *whole = malloc(sizeof head + size);
    if (whole == NULL)
        return 0;
    memcpy(whole, head, sizeof head - 1);
    if (size > 0)
        memcpy(whole + sizeof head - 1, data, size);
    bool is_whole = size >= 5 && memcmp(data, "data_", 5) == 0;
    read_as_scan(is_whole ? whole + sizeof head - 1 : whole, is_whole ? size : size + sizeof head - 1);
    free(whole);
    return 0;
}
