/*
 * guard/lanes_avx2.c - the syndrome of all 64 lanes, four words at a time and without leaving the registers
 *
 * Alone built with -mavx2. A vector holds the words of four neighbouring labels, an octet is eight vectors (32 labels):
 * label bits 2..4 are settled inside an octet, bits 5..8 among the 16 octets, bits 0 and 1 inside a vector, last.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/lanes_engine.h"

#include <immintrin.h>

enum { OCTETS = 16, GUARD_AT = 8 * FIRN_LANES_DATA_WORDS };

static bool usable(void)
{
    return __builtin_cpu_supports("avx2") != 0;
}

static inline __m256i load(const uint8_t *at)
{
    return _mm256_loadu_si256((const __m256i *)(const void *)at);
}

/* Folds eight vectors: returns their sum and adds to bits[j] those whose index has bit j. */
static inline __m256i fold_octet(const __m256i v[8], __m256i bits[3])
{
    __m256i v01 = v[0] ^ v[1], v23 = v[2] ^ v[3], v45 = v[4] ^ v[5], v67 = v[6] ^ v[7];

    bits[0] ^= v[1] ^ v[3] ^ (v[5] ^ v[7]);
    bits[1] ^= v23 ^ v67;
    bits[2] ^= v45 ^ v67;
    return v01 ^ v23 ^ (v45 ^ v67);
}

static inline __m256i put_first(__m256i v, const uint8_t *word)
{
    return _mm256_blend_epi32(v, _mm256_castsi128_si256(_mm_loadl_epi64((const __m128i *)(const void *)word)), 3);
}

/* The octet whose labels stand in a row from `at` on; its first word is replaced when `head` is not NULL. */
static inline __m256i fold_run(const uint8_t *at, const uint8_t *head, __m256i bits[3])
{
    __m256i v[8];

    for (unsigned i = 0; i < 8; i++)
        v[i] = load(at + 32 * i);
    if (head != NULL)
        v[0] = put_first(v[0], head);
    return fold_octet(v, bits);
}

/* Labels 0..31, where the guard words 1, 2, 4, 8 and 16 and the overall parity are sprinkled in. */
static inline __m256i fold_first(const uint8_t *block, __m256i bits[3])
{
    const uint8_t *guard = block + GUARD_AT;
    const __m128i low = _mm_loadu_si128((const __m128i *)(const void *)guard);           /* labels 1 and 2 */
    const __m128i all = _mm_loadl_epi64((const __m128i *)(const void *)(guard + 72));    /* label 0 */
    const __m128i third = _mm_loadl_epi64((const __m128i *)(const void *)block);
    const __m256i v[8] = {
        _mm256_set_m128i(_mm_unpacklo_epi64(_mm_unpackhi_epi64(low, low), third), _mm_unpacklo_epi64(all, low)),
        put_first(load(block), guard + 16), put_first(load(block + 24), guard + 24), load(block + 56),
        put_first(load(block + 80), guard + 32), load(block + 112), load(block + 144), load(block + 176),
    };

    return fold_octet(v, bits);
}

/* XOR of the four words of each of four vectors. */
static inline __m256i fold_across(__m256i a, __m256i b, __m256i c, __m256i d)
{
    __m256i ab = _mm256_unpacklo_epi64(a, b) ^ _mm256_unpackhi_epi64(a, b);
    __m256i cd = _mm256_unpacklo_epi64(c, d) ^ _mm256_unpackhi_epi64(c, d);

    return _mm256_permute2x128_si256(ab, cd, 0x20) ^ _mm256_permute2x128_si256(ab, cd, 0x31);
}

static void syndrome(const uint8_t *block, uint64_t syndromes[FIRN_LANES_SYNDROME_WORDS])
{
    const __m256i none = _mm256_setzero_si256();
    __m256i bits[3] = { none, none, none }, high[4] = { none, none, none, none }, sums[OCTETS], all, odd, ends;

    sums[0] = fold_first(block, bits);
    for (unsigned j = 5, octet = 1; j <= 8; j++) {
        const uint8_t *run = block + 8 * ((size_t)(1U << j) - 2 - j);

        sums[octet++] = fold_run(run, block + GUARD_AT + 8 * j, bits);
        for (unsigned i = 1; i < 1U << (j - 5); i++)
            sums[octet++] = fold_run(run + 256 * i, NULL, bits);
    }
    for (unsigned bit = 3; bit < 4; bit--)
        for (unsigned i = 0; i < 1U << bit; i++) {
            high[bit] ^= sums[(1U << bit) + i];
            sums[i] ^= sums[(1U << bit) + i];
        }
    all = sums[0];
    odd = _mm256_unpackhi_epi64(all, all);                       /* labels 1 and 3, mod 4 */
    ends = _mm256_permute4x64_epi64(all, 0xEE);                  /* labels 2 and 3, mod 4 */
    syndromes[0] = (uint64_t)_mm_cvtsi128_si64(_mm256_castsi256_si128(odd) ^ _mm256_extracti128_si256(odd, 1));
    syndromes[1] = (uint64_t)_mm256_extract_epi64(ends, 0) ^ (uint64_t)_mm256_extract_epi64(ends, 1);
    _mm256_storeu_si256((__m256i *)(void *)&syndromes[2], fold_across(bits[0], bits[1], bits[2], high[0]));
    _mm256_storeu_si256((__m256i *)(void *)&syndromes[6], fold_across(high[1], high[2], high[3], none));
    syndromes[9] = syndromes[1] ^ (uint64_t)_mm256_extract_epi64(all, 0) ^ (uint64_t)_mm256_extract_epi64(all, 1);
}

const struct firn_lanes_engine firn_lanes_avx2 = { "avx2", usable, syndrome };
