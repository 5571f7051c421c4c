/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "base/sha256.h"

#include <string.h>

const uint32_t lw_sha256_constants[64] = {
    0x428a2f98u, 0x71374491u, 0xb5c0fbcfu, 0xe9b5dba5u, 0x3956c25bu, 0x59f111f1u, 0x923f82a4u, 0xab1c5ed5u,
    0xd807aa98u, 0x12835b01u, 0x243185beu, 0x550c7dc3u, 0x72be5d74u, 0x80deb1feu, 0x9bdc06a7u, 0xc19bf174u,
    0xe49b69c1u, 0xefbe4786u, 0x0fc19dc6u, 0x240ca1ccu, 0x2de92c6fu, 0x4a7484aau, 0x5cb0a9dcu, 0x76f988dau,
    0x983e5152u, 0xa831c66du, 0xb00327c8u, 0xbf597fc7u, 0xc6e00bf3u, 0xd5a79147u, 0x06ca6351u, 0x14292967u,
    0x27b70a85u, 0x2e1b2138u, 0x4d2c6dfcu, 0x53380d13u, 0x650a7354u, 0x766a0abbu, 0x81c2c92eu, 0x92722c85u,
    0xa2bfe8a1u, 0xa81a664bu, 0xc24b8b70u, 0xc76c51a3u, 0xd192e819u, 0xd6990624u, 0xf40e3585u, 0x106aa070u,
    0x19a4c116u, 0x1e376c08u, 0x2748774cu, 0x34b0bcb5u, 0x391c0cb3u, 0x4ed8aa4au, 0x5b9cca4fu, 0x682e6ff3u,
    0x748f82eeu, 0x78a5636fu, 0x84c87814u, 0x8cc70208u, 0x90befffau, 0xa4506cebu, 0xbef9a3f7u, 0xc67178f2u,
};

static uint32_t turn(uint32_t x, unsigned by)
{
    return x >> by | x << (32 - by);
}

static uint32_t big_endian(const unsigned char *p)
{
    return (uint32_t)p[0] << 24 | (uint32_t)p[1] << 16 | (uint32_t)p[2] << 8 | p[3];
}

/* One round. Instead of moving the eight variables along, the place of `a` moves back by one. */
static inline void turn_once(uint32_t v[8], unsigned at, uint32_t word)
{
    uint32_t a = v[at & 7], b = v[(at + 1) & 7], c = v[(at + 2) & 7];
    uint32_t e = v[(at + 4) & 7], f = v[(at + 5) & 7], g = v[(at + 6) & 7];
    uint32_t t1 = v[(at + 7) & 7] + (turn(e, 6) ^ turn(e, 11) ^ turn(e, 25)) + ((e & f) ^ (~e & g)) + word;
    v[(at + 3) & 7] += t1;
    v[(at + 7) & 7] = t1 + (turn(a, 2) ^ turn(a, 13) ^ turn(a, 22)) + ((a & b) ^ (a & c) ^ (b & c));
}

void lw_sha256_blocks_plain(uint32_t state[8], const unsigned char *blocks, size_t count)
{
    for (; count > 0; count--, blocks += 64) {
        uint32_t w[64], v[8];
        for (int t = 0; t < 16; t++)
            w[t] = big_endian(blocks + 4 * t);
        for (int t = 16; t < 64; t++) {
            uint32_t a = w[t - 15], b = w[t - 2];
            w[t] = w[t - 16] + (turn(a, 7) ^ turn(a, 18) ^ a >> 3) + w[t - 7] +
                   (turn(b, 17) ^ turn(b, 19) ^ b >> 10);
        }
        memcpy(v, state, sizeof v);
        for (int t = 0; t < 64; t += 8) {
            const uint32_t *k = lw_sha256_constants + t, *m = w + t;
            turn_once(v, 0, k[0] + m[0]);
            turn_once(v, 7, k[1] + m[1]);
            turn_once(v, 6, k[2] + m[2]);
            turn_once(v, 5, k[3] + m[3]);
            turn_once(v, 4, k[4] + m[4]);
            turn_once(v, 3, k[5] + m[5]);
            turn_once(v, 2, k[6] + m[6]);
            turn_once(v, 1, k[7] + m[7]);
        }
        for (int i = 0; i < 8; i++)
            state[i] += v[i];
    }
}

static void mix(lw_sha256 *hash, const unsigned char *blocks, size_t count)
{
    if (hash->fast)
        lw_sha256_blocks_fast(hash->state, blocks, count);
    else
        lw_sha256_blocks_plain(hash->state, blocks, count);
}

void lw_sha256_begin(lw_sha256 *hash)
{
    *hash = (lw_sha256){.state = {0x6a09e667u, 0xbb67ae85u, 0x3c6ef372u, 0xa54ff53au, 0x510e527fu,
                                  0x9b05688cu, 0x1f83d9abu, 0x5be0cd19u}};
    hash->fast = lw_sha256_has_fast();
}

void lw_sha256_add(lw_sha256 *hash, const void *bytes, size_t size)
{
    const unsigned char *from = bytes;
    size_t held = (size_t)(hash->size % 64);
    hash->size += size;
    if (held > 0) {
        size_t part = size < 64 - held ? size : 64 - held;
        memcpy(hash->block + held, from, part);
        from += part;
        size -= part;
        if (held + part < 64)
            return;
        mix(hash, hash->block, 1);
    }
    mix(hash, from, size / 64);
    if (size % 64 > 0)
        memcpy(hash->block, from + size / 64 * 64, size % 64);
}

void lw_sha256_end(lw_sha256 *hash, char hex[65])
{
    unsigned char tail[128] = {0};
    size_t held = (size_t)(hash->size % 64), blocks = held < 56 ? 1 : 2;
    memcpy(tail, hash->block, held);
    tail[held] = 0x80;
    for (unsigned i = 0; i < 8; i++)
        tail[64 * blocks - 1 - i] = (unsigned char)(hash->size * 8 >> (8 * i));
    mix(hash, tail, blocks);
    for (unsigned i = 0; i < 64; i++)
        hex[i] = "0123456789abcdef"[hash->state[i / 8] >> (28 - 4 * (i % 8)) & 15];
    hex[64] = '\0';
}

void lw_sha256_hex(const void *bytes, size_t size, char hex[65])
{
    lw_sha256 hash;
    lw_sha256_begin(&hash);
    lw_sha256_add(&hash, bytes, size);
    lw_sha256_end(&hash, hex);
}
