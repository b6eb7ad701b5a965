/*
 * tests/guard/random.h - random input that can be had again: the seed is printed, FIRN_SEED replays it
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_TESTS_GUARD_RANDOM_H
#define FIRN_TESTS_GUARD_RANDOM_H

#include <inttypes.h>
#include <stddef.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

struct random {
    uint64_t state;
};

static inline struct random random_start(const char *what)
{
    const char *given = getenv("FIRN_SEED");
    uint64_t seed = given != NULL ? strtoull(given, NULL, 0) : (uint64_t)time(NULL) * UINT64_C(2654435761);

    printf("%s: FIRN_SEED=%" PRIu64 "\n", what, seed);
    return (struct random){ seed };
}

/* A Weyl sequence, mixed by xor-shifts and odd multipliers. */
static inline uint64_t random_next(struct random *random)
{
    uint64_t x = random->state += UINT64_C(0x9E3779B97F4A7C15);

    x = (x ^ x >> 30) * UINT64_C(0xBF58476D1CE4E5B9);
    x = (x ^ x >> 27) * UINT64_C(0x94D049BB133111EB);
    return x ^ x >> 31;
}

static inline unsigned random_below(struct random *random, unsigned bound)
{
    return (unsigned)((random_next(random) >> 32) * bound >> 32);
}

static inline void random_fill(struct random *random, uint8_t *bytes, size_t count)
{
    for (size_t i = 0; i < count; i += 8) {
        uint64_t x = random_next(random);

        memcpy(bytes + i, &x, count - i < 8 ? count - i : 8);
    }
}

/* `wanted` distinct numbers below bound, ascending. */
static inline void random_choose(struct random *random, unsigned bound, unsigned wanted, unsigned *chosen)
{
    unsigned found = 0;

    for (unsigned i = 0; i < bound && found < wanted; i++)
        if (random_below(random, bound - i) < wanted - found)
            chosen[found++] = i;
}

#endif
