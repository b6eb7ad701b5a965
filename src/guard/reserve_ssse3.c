/*
 * guard/reserve_ssse3.c - the hot loops of the reserve, 16 bytes at a time; alone built with -mssse3
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/reserve_engine.h"

#include <tmmintrin.h>

typedef __m128i vector;

static bool usable(void)
{
    return __builtin_cpu_supports("ssse3") != 0;
}

static inline vector load(const uint8_t *at)
{
    return _mm_loadu_si128((const __m128i *)(const void *)at);
}

static inline void store(uint8_t *at, vector v)
{
    _mm_storeu_si128((__m128i *)(void *)at, v);
}

static inline vector repeat16(const uint8_t *at)
{
    return load(at);
}

static inline vector low_nibbles(vector v)
{
    return _mm_and_si128(v, _mm_set1_epi8(15));
}

static inline vector high_nibbles(vector v)
{
    return _mm_and_si128(_mm_srli_epi64(v, 4), _mm_set1_epi8(15));
}

static inline vector lookup(vector table, vector nibbles)
{
    return _mm_shuffle_epi8(table, nibbles);
}

#include "guard/reserve_shuffle.inc"

const struct firn_reserve_engine firn_reserve_ssse3 = {
    "ssse3", usable, inverse2, inverse4, inverse4_add, forward2, forward4, combine,
};
