/*
 * tests/guard/spoil.h - bits flipped at a rate, for tests of what brings blocks back; knows nothing of their layout
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_GUARD_SPOIL_H
#define FIRN_TESTS_GUARD_SPOIL_H

#include "random.h"

#include <math.h>

/* Flips every bit with the probability `rate`: the gaps between flips are geometric. Returns how many were flipped. */
static inline unsigned spoil_bits(struct random *random, uint8_t *bytes, size_t count, double rate)
{
    unsigned flipped = 0;

    for (double at = 0;; at += 1) {
        double fraction = ((double)(random_next(random) >> 11) + 0.5) / 9007199254740992.0;
        size_t bit;

        at += floor(log(fraction) / log1p(-rate));
        if (at >= 8.0 * (double)count)
            return flipped;
        bit = (size_t)at;
        bytes[bit / 8] ^= (uint8_t)(1U << bit % 8);
        flipped++;
    }
}

#endif
