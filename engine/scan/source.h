/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The bytes that a scan was read from, kept until their hash is asked for. Making the hash takes longer than
 * reading the numbers, and many a scan is never asked. Scans that were cropped from one another share it. */
#ifndef LW_SCAN_SOURCE_H
#define LW_SCAN_SOURCE_H

#include "scan/reader.h"

typedef struct lw_source lw_source;

/* Takes over the bytes of the content, whose place in it is empty then. Status: LW_OUT_OF_MEMORY. Given back by
 * lw_source_drop(), as often as it was made and shared. */
lw_status lw_source_new(lw_engine *engine, lw_content *content, lw_source **source, lw_error *err);
lw_source *lw_source_share(lw_source *source); /* accepts NULL, as the next */
void lw_source_drop(lw_source *source);

/* The hash; the bytes are given back when it is first made. */
const char *lw_source_hash(lw_source *source);

#endif
