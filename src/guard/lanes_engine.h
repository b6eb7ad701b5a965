/*
 * guard/lanes_engine.h - the one hot loop of the lanes, by several engines
 *
 * Room: guard. Pure. Used by guard/lanes.c. Every engine gives the answer of the plain one.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_GUARD_LANES_ENGINE_H
#define FIRN_GUARD_LANES_ENGINE_H

#include "firn/lanes.h"

enum { FIRN_LANES_SYNDROME_WORDS = FIRN_LANES_PARITY_WORDS + 1 };

struct firn_lanes_engine {
    const char *name;
    bool (*usable)(void);      /* asks the processor */

    /*
     * syndrome[j], j < 9: the XOR of the words whose label has bit j; syndrome[9]: the XOR of all 512 words. Bit b of
     * the ten speaks of lane b.
     */
    void (*syndrome)(const uint8_t *block, uint64_t syndrome[FIRN_LANES_SYNDROME_WORDS]);
};

extern const struct firn_lanes_engine firn_lanes_plain;
#if defined(__x86_64__) && !defined(FIRN_PLAIN)
extern const struct firn_lanes_engine firn_lanes_avx2;
#endif
extern const struct firn_lanes_engine *const firn_lanes_engines[];      /* fastest first, plain, NULL */

/* The first engine that the processor at hand can run. */
const struct firn_lanes_engine *firn_lanes_engine_here(void);

/* The word with a given label, 0 .. 511; the overall parity word has label 0. */
unsigned firn_lanes_word_of(unsigned label);

#endif
