/*
 * guard/reserve_avx2.c - the hot loops of the reserve, 32 bytes at a time; alone built with -mavx2
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/reserve_engine.h"

#include <immintrin.h>

typedef __m256i vector;

static bool usable(void)
{
    return __builtin_cpu_supports("avx2") != 0;
}

static inline vector load(const uint8_t *at)
{
    return _mm256_loadu_si256((const __m256i *)(const void *)at);
}

static inline void store(uint8_t *at, vector v)
{
    _mm256_storeu_si256((__m256i *)(void *)at, v);
}

static inline vector repeat16(const uint8_t *at)
{
    return _mm256_broadcastsi128_si256(_mm_loadu_si128((const __m128i *)(const void *)at));
}

static inline vector low_nibbles(vector v)
{
    return _mm256_and_si256(v, _mm256_set1_epi8(15));
}

static inline vector high_nibbles(vector v)
{
    return _mm256_and_si256(_mm256_srli_epi64(v, 4), _mm256_set1_epi8(15));
}

static inline vector lookup(vector table, vector nibbles)
{
    return _mm256_shuffle_epi8(table, nibbles);
}

#include "guard/reserve_shuffle.inc"

const struct firn_reserve_engine firn_reserve_avx2 = {
    "avx2", usable, inverse2, inverse4, inverse4_add, forward2, forward4, combine,
};
