/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The rung for processors with SHA instructions. Hashing is then faster than reading the numbers of a
 * scan; without it, the hash would take most of the time of reading. This file alone gets the flags. */
#include "base/sha256.h"

#if defined(__x86_64__) && defined(__SHA__) && defined(__SSE4_1__)

#include <cpuid.h>
#include <immintrin.h>

bool lw_sha256_has_fast(void)
{
    /* Leaf 7 exists wherever AVX2 does. Asking the processor itself is slow on virtual machines (some
     * 10 us), so it is asked once only; the other two answers were found out when the program was loaded. */
    if (!__builtin_cpu_supports("sse4.1") || !__builtin_cpu_supports("avx2"))
        return false;
    unsigned a, b, c, d;
    __cpuid_count(7, 0, a, b, c, d);
    return (b >> 29 & 1) != 0;
}

void lw_sha256_blocks_fast(uint32_t state[8], const unsigned char *blocks, size_t count)
{
    const __m128i order = _mm_set_epi64x(0x0c0d0e0f08090a0bLL, 0x0405060700010203LL);
    /* the instructions want the working variables as (a b e f) and (c d g h), highest word first */
    __m128i abcd = _mm_shuffle_epi32(_mm_loadu_si128((const __m128i *)(const void *)state), 0x1b);
    __m128i efgh = _mm_shuffle_epi32(_mm_loadu_si128((const __m128i *)(const void *)(state + 4)), 0x1b);
    __m128i abef = _mm_unpackhi_epi64(efgh, abcd);
    __m128i cdgh = _mm_unpacklo_epi64(efgh, abcd);
    for (; count > 0; count--, blocks += 64) {
        __m128i abef_before = abef, cdgh_before = cdgh, w[4];
        for (int i = 0; i < 4; i++)
            w[i] = _mm_shuffle_epi8(_mm_loadu_si128((const __m128i *)(const void *)(blocks + 16 * i)), order);
        for (int round = 0; round < 16; round++) {
            int now = round & 3, next = (round + 1) & 3, last = (round + 3) & 3;
            __m128i k = _mm_loadu_si128((const __m128i *)(const void *)(lw_sha256_constants + 4 * round));
            __m128i wk = _mm_add_epi32(w[now], k);
            cdgh = _mm_sha256rnds2_epu32(cdgh, abef, wk);
            abef = _mm_sha256rnds2_epu32(abef, cdgh, _mm_shuffle_epi32(wk, 0x0e));
            if (round < 12) {
                /* w[now] becomes the four words of the schedule sixteen places on */
                __m128i sum = _mm_sha256msg1_epu32(w[now], w[next]);
                sum = _mm_add_epi32(sum, _mm_alignr_epi8(w[last], w[(round + 2) & 3], 4));
                w[now] = _mm_sha256msg2_epu32(sum, w[last]);
            }
        }
        abef = _mm_add_epi32(abef, abef_before);
        cdgh = _mm_add_epi32(cdgh, cdgh_before);
    }
    __m128i feba = _mm_shuffle_epi32(abef, 0x1b), dchg = _mm_shuffle_epi32(cdgh, 0xb1);
    _mm_storeu_si128((__m128i *)(void *)state, _mm_blend_epi16(feba, dchg, 0xf0));
    _mm_storeu_si128((__m128i *)(void *)(state + 4), _mm_alignr_epi8(dchg, feba, 8));
}

#else

bool lw_sha256_has_fast(void)
{
    return false;
}

void lw_sha256_blocks_fast(uint32_t state[8], const unsigned char *blocks, size_t count)
{
    lw_sha256_blocks_plain(state, blocks, count);
}

#endif
