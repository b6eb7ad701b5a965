/*
 * coding/random.h - repeatable randomness for the tests of this room; prints its seed, FIRN_SEED replays it
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_CODING_RANDOM_H
#define FIRN_TESTS_CODING_RANDOM_H

#include <inttypes.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

static uint64_t random_state;

static inline void random_start(void)
{
    const char *wish = getenv("FIRN_SEED");

    random_state = wish != NULL ? strtoull(wish, NULL, 0) : (uint64_t)time(NULL) * UINT64_C(0x9E3779B97F4A7C15);
    printf("FIRN_SEED=%" PRIu64 "\n", random_state);
}

/* SplitMix64: G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014, from memory; only its being repeatable matters here */
static inline uint64_t random_word(void)
{
    uint64_t z = random_state += UINT64_C(0x9E3779B97F4A7C15);

    z = (z ^ z >> 30) * UINT64_C(0xBF58476D1CE4E5B9);
    z = (z ^ z >> 27) * UINT64_C(0x94D049BB133111EB);
    return z ^ z >> 31;
}

static inline uint32_t random_below(uint32_t limit)
{
    return (uint32_t)((random_word() >> 32) * limit >> 32);
}

#endif
