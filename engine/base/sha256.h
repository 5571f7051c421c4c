/* SPDX-License-Identifier: GPL-3.0-or-later */
/* SHA-256, by which scans, calibrations and recipes are told apart in a record.
 * Source: FIPS PUB 180-4, Secure Hash Standard (2015), sections 4.1.2, 5.1.1, 6.2. */
#ifndef LW_BASE_SHA256_H
#define LW_BASE_SHA256_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef struct lw_sha256 {
    uint32_t state[8];
    uint64_t size;           /* bytes so far */
    unsigned char block[64]; /* the block that is not full yet */
    bool fast;               /* the processor has instructions for it; the digest is the same */
} lw_sha256;

/* Begin, add bytes as often as needed, end: 64 hexadecimal digits, lower case, and a NUL. */
void lw_sha256_begin(lw_sha256 *hash);
void lw_sha256_add(lw_sha256 *hash, const void *bytes, size_t size);
void lw_sha256_end(lw_sha256 *hash, char hex[65]);

/* All of it at once. */
void lw_sha256_hex(const void *bytes, size_t size, char hex[65]);

/* One rung of the ladder each: mix `count` blocks of 64 bytes into the state. The fast one may be
 * called only if lw_sha256_has_fast() says so. */
void lw_sha256_blocks_plain(uint32_t state[8], const unsigned char *blocks, size_t count);
void lw_sha256_blocks_fast(uint32_t state[8], const unsigned char *blocks, size_t count);
bool lw_sha256_has_fast(void);

/* The 64 round constants of section 4.2.2. */
extern const uint32_t lw_sha256_constants[64];

#endif
