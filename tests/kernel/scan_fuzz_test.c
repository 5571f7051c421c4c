/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Smoke test of the readers: a few thousand damaged copies of sound files (fixed seed). Whatever comes in,
 * the reader either refuses with a message and a remedy or gives a scan that keeps its promises. Meant for
 * the build with sanitizers, where a wrong access ends the program. */
#include "check.h"

#include "scan/scan.h"

#include <stdint.h>
#include <stdlib.h>
#include <zlib.h>

#define ROUNDS 6000
#define ROOM 8192

/* xorshift64* of Vigna 2016, ACM Trans. Math. Softw. 42, 30 */
static uint64_t random_state = 20240917;

static size_t below(size_t n)
{
    random_state ^= random_state >> 12;
    random_state ^= random_state << 25;
    random_state ^= random_state >> 27;
    return (size_t)((random_state * 0x2545F4914F6CDD1Du) >> 33) % n;
}

/* Changes, inserts, deletes, repeats or cuts at random places. */
static size_t damage(char *bytes, size_t size)
{
    static const char telling[] =
        "0123456789.,;:+-eE#!\"'\n\r\t _()[]{}?\0\x1a\x1f\x8b\xff\xfe\xef%nainfNAINF";
    for (size_t times = 1 + below(3); times > 0 && size > 0; times--) {
        size_t at = below(size), length = 1 + below(size - at < 40 ? size - at : 40);
        switch (below(7)) {
        case 0: bytes[at] = (char)below(256); break;
        case 1: bytes[at] = telling[below(sizeof telling - 1)]; break;
        case 2:
            memmove(bytes + at, bytes + at + length, size - at - length);
            size -= length;
            break;
        case 3:
            if (size + length < ROOM) {
                memmove(bytes + at + length, bytes + at, size - at);
                size += length;
            }
            break;
        case 4:
            if (size + 1 < ROOM) {
                memmove(bytes + at + 1, bytes + at, size - at);
                bytes[at] = telling[below(sizeof telling - 1)];
                size++;
            }
            break;
        case 5: size = below(8) == 0 ? at : size; break;
        default: bytes[at] = (char)(bytes[at] ^ (1 << below(8))); break;
        }
    }
    return size;
}

static void try_bytes(lw_engine *engine, const char *bytes, size_t size, int noise, long count[2])
{
    /* a block of just that size, so that a read beyond it is seen */
    char *exact = malloc(size > 0 ? size : 1);
    if (exact == NULL)
        return;
    memcpy(exact, bytes, size);
    lw_scan_options options = lw_scan_defaults();
    options.noise = noise;
    lw_scan *scan = NULL;
    lw_error err = LW_ERROR_NONE;
    lw_status status = lw_scan_read_bytes(engine, "fuzz", exact, size, &options, &scan, &err);
    count[status == LW_OK]++;
    bool sound = true;
    if (status == LW_OK) {
        sound = scan->n >= 3 && strlen(lw_scan_hash(scan)) == 64 && scan->variance_factor > 0 &&
                scan->correlation >= 0 && scan->correlation < 1 && strlen(scan->header) < ROOM + 2100;
        for (size_t i = 0; i < scan->n; i++)
            sound = sound && isfinite(scan->two_theta_deg[i]) && isfinite(scan->intensity[i]) &&
                    (i == 0 || scan->two_theta_deg[i] > scan->two_theta_deg[i - 1]) &&
                    (scan->sigma == NULL || scan->sigma[i] > 0) &&
                    (scan->noise != LW_NOISE_COUNTS || scan->intensity[i] >= 0);
    } else
        sound = scan == NULL && err.status == status && err.message[0] != '\0' && err.remedy[0] != '\0';
    CHECK(sound);
    if (!sound)
        fprintf(stderr, "  %s; %s\n", err.message, err.remedy);
    lw_scan_free(scan);
    free(exact);
}

int main(void)
{
    static const char *const seed[] = {
        "# header\n20.00 195\n20.02 190\n20.04 201\n20.06 188\n20.08 202\n",
        "theta;count;sigma\r\n20,00;195,5;3,1\r\n20,02;190,0;2,9\r\n20,04;201,7;3,3\r\n",
        "20.00, 195.25\n20.02, -1.5e1\n20.04, 201.125\n20.06, 177.5\n",
        "#\\#CIF_2.0\ndata_a\n_t 'text'\n_u\n;lines\n;\n_l [1 'a ]' "
        "{'k':2}]\n_diffrn_radiation_wavelength.value 1.5406(1)\n"
        "loop_\n_pd_data_point_id\n_pd_proc.2theta_corrected\n_pd_proc.intensity_total\n1 20.0 195(14)\n2 "
        "20.1 190(13)\n3 20.2 1.01e2(3)\n4 20.3 .\n",
        "data_a\n_pd_meas_2theta_range_min 20\n_pd_meas_2theta_range_max 20.06\n_pd_meas_2theta_range_inc "
        "0.02\n"
        "loop_\n_diffrn_radiation_wavelength\n_diffrn_radiation_wavelength_wt\n1.540598 1.0\n1.544390 0.5\n"
        "loop_\n_pd_meas_counts_total\n_pd_proc_ls_weight\n512 0.1\n530 0\n498 .\n500 "
        "?\ndata_b\n_x?\nloop_\n_some_other\n1 2 3\n",
        "data_a\n_diffrn_radiation_wavelength 1.5\nloop_\n_pd_proc_d_spacing\n_pd_proc_point_id\n3.0 1 2.9 2 "
        "2.8 3\n"
        "loop_\n_pd_meas_point_id\n_pd_meas_intensity_total\n_pd_meas_intensity_total_su\n1 10 1 2 11 1 3 12 "
        "1\n"};
    enum { SEEDS = sizeof seed / sizeof seed[0] };
    lw_engine engine;
    lw_engine_begin(&engine);
    long count[2] = {0};
    for (int i = 0; i < SEEDS; i++)
        try_bytes(&engine, seed[i], strlen(seed[i]), 3, count);
    CHECK(count[1] == SEEDS && count[0] == 0);
    static char bytes[ROOM], packed[ROOM];
    for (int round = 0; round < ROUNDS; round++) {
        const char *from = seed[round % SEEDS];
        size_t size = strlen(from);
        memcpy(bytes, from, size);
        size = damage(bytes, size);
        try_bytes(&engine, bytes, size, (int)below(4), count);
        if (round % 4 != 0)
            continue;
        /* a damaged text in a sound gzip, and a damaged gzip */
        z_stream stream = {0};
        if (deflateInit2(&stream, 6, Z_DEFLATED, 15 + 16, 8, Z_DEFAULT_STRATEGY) != Z_OK)
            continue;
        stream.next_in = (unsigned char *)bytes;
        stream.avail_in = (unsigned)size;
        stream.next_out = (unsigned char *)packed;
        stream.avail_out = sizeof packed;
        CHECK(deflate(&stream, Z_FINISH) == Z_STREAM_END);
        size_t packed_size = stream.total_out;
        deflateEnd(&stream);
        try_bytes(&engine, packed, packed_size, 3, count);
        try_bytes(&engine, packed, damage(packed, packed_size), 3, count);
    }
    printf("%ld damaged files read, %ld refused\n", count[1], count[0]);
    CHECK(count[0] > ROUNDS / 4 && count[1] > ROUNDS / 20);
    lw_engine_end(&engine);
    return lw_checks_end();
}
