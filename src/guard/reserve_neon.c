/*
 * guard/reserve_neon.c - the hot loops of the reserve, 16 bytes at a time, for AArch64, which always has NEON
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/reserve_engine.h"

#include <arm_neon.h>

typedef uint8x16_t vector;

static bool usable(void)
{
    return true;
}

static inline vector load(const uint8_t *at)
{
    return vld1q_u8(at);
}

static inline void store(uint8_t *at, vector v)
{
    vst1q_u8(at, v);
}

static inline vector repeat16(const uint8_t *at)
{
    return vld1q_u8(at);
}

static inline vector low_nibbles(vector v)
{
    return vandq_u8(v, vdupq_n_u8(15));
}

static inline vector high_nibbles(vector v)
{
    return vshrq_n_u8(v, 4);
}

static inline vector lookup(vector table, vector nibbles)
{
    return vqtbl1q_u8(table, nibbles);
}

#include "guard/reserve_shuffle.inc"

const struct firn_reserve_engine firn_reserve_neon = {
    "neon", usable, inverse2, inverse4, inverse4_add, forward2, forward4, combine,
};
