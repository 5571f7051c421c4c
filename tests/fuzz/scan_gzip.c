/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Fuzz target: gzipped scans. What begins with the mark of gzip is read as it is. Anything else is packed first,
 * so that the checksum holds and the reader behind is reached: its first byte says how hard, the next two where
 * a byte of the packed file is changed (0 = nowhere). */
#include "scan_promises.h"

#include <zlib.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    if (size >= 2 && data[0] == 0x1f && data[1] == 0x8b) {
        read_as_scan((const char *)data, size);
        return 0;
    }
    if (size < 3)
        return 0;
    z_stream stream = {.zalloc = NULL};
    if (deflateInit2(&stream, data[0] % 10, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY) != Z_OK)
        return 0;
    size_t room = deflateBound(&stream, (uLong)size), where = (size_t)data[1] << 8 | data[2];
    unsigned char *packed = malloc(room);
    if (packed != NULL) {
        stream.next_in = (unsigned char *)(uintptr_t)(data + 3);
        stream.avail_in = (unsigned)(size - 3);
        stream.next_out = packed;
        stream.avail_out = (unsigned)room;
        FUZZ_PROMISE(deflate(&stream, Z_FINISH) == Z_STREAM_END);
        size_t length = room - stream.avail_out;
        if (where > 0)
            packed[where % length] = (unsigned char)(packed[where % length] ^ (data[0] | 1));
        read_as_scan((const char *)packed, length);
    }
    free(packed);
    deflateEnd(&stream);
    return 0;
}
