/*
 * guard/reserve_plain.c - the hot loops of the reserve in plain C; every other engine is checked against it
 *
 * Bytes pass through short arrays of the loop's own, so that a compiler sees that nothing overlaps and makes vectors of
 * it.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "guard/reserve_engine.h"

#include <string.h>

enum { CHUNK = 64 };

static bool usable(void)
{
    return true;
}

static inline uint8_t chosen(uint8_t byte, uint8_t bit, uint8_t product)
{
    return (byte & bit) == 0 ? 0 : product;
}

/* to += factor from. The table's entries at powers of two are all that is needed. */
static void multiply_add(uint8_t *restrict to, const uint8_t *restrict from, const uint8_t *table)
{
    const uint8_t p0 = table[1], p1 = table[2], p2 = table[4], p3 = table[8];
    const uint8_t p4 = table[17], p5 = table[18], p6 = table[20], p7 = table[24];

    for (unsigned i = 0; i < CHUNK; i++) {
        uint8_t v = from[i];
        uint8_t low = chosen(v, 1, p0) ^ chosen(v, 2, p1) ^ chosen(v, 4, p2) ^ chosen(v, 8, p3);
        uint8_t high = chosen(v, 16, p4) ^ chosen(v, 32, p5) ^ chosen(v, 64, p6) ^ chosen(v, 128, p7);

        to[i] = (uint8_t)(to[i] ^ low ^ high);
    }
}

static void add(uint8_t *restrict to, const uint8_t *restrict from)
{
    for (unsigned i = 0; i < CHUNK; i++)
        to[i] ^= from[i];
}

static void inverse(uint8_t *u, uint8_t *v, const uint8_t *table)
{
    add(v, u);
    multiply_add(u, v, table);
}

static void forward(uint8_t *u, uint8_t *v, const uint8_t *table)
{
    multiply_add(u, v, table);
    add(v, u);
}

static size_t least(size_t a, size_t b)
{
    return a < b ? a : b;
}

static void fetch(uint8_t chunk[][CHUNK], unsigned count, const uint8_t *const *from, size_t at, size_t bytes)
{
    for (unsigned i = 0; i < count; i++)
        memcpy(chunk[i], from[i] + at, least(CHUNK, bytes - at));
}

static void store(uint8_t chunk[][CHUNK], unsigned count, uint8_t *const *to, size_t at, size_t bytes)
{
    for (unsigned i = 0; i < count; i++)
        memcpy(to[i] + at, chunk[i], least(CHUNK, bytes - at));
}

static void inverse2(const uint8_t *const *from, uint8_t *const *to, const uint8_t *const *tables, size_t bytes,
                     const uint8_t *const ahead[2])
{
    uint8_t c[2][CHUNK] = { { 0 } };

    (void)ahead;
    for (size_t at = 0; at < bytes; at += CHUNK) {
        fetch(c, 2, from, at, bytes);
        inverse(c[0], c[1], tables[0]);
        store(c, 2, to, at, bytes);
    }
}

static void forward2(const uint8_t *const *from, uint8_t *const *to, const uint8_t *const *tables, size_t bytes,
                     const uint8_t *const ahead[2])
{
    uint8_t c[2][CHUNK] = { { 0 } };

    (void)ahead;
    for (size_t at = 0; at < bytes; at += CHUNK) {
        fetch(c, 2, from, at, bytes);
        forward(c[0], c[1], tables[0]);
        store(c, 2, to, at, bytes);
    }
}

static void inverse_levels(uint8_t c[4][CHUNK], const uint8_t *const *tables)
{
    inverse(c[0], c[1], tables[0]);
    inverse(c[2], c[3], tables[1]);
    inverse(c[0], c[2], tables[2]);
    inverse(c[1], c[3], tables[2]);
}

static void inverse4(const uint8_t *const *from, uint8_t *const *to, const uint8_t *const *tables, size_t bytes,
                     const uint8_t *const ahead[2])
{
    uint8_t c[4][CHUNK] = { { 0 } };

    (void)ahead;
    for (size_t at = 0; at < bytes; at += CHUNK) {
        fetch(c, 4, from, at, bytes);
        inverse_levels(c, tables);
        store(c, 4, to, at, bytes);
    }
}

static void inverse4_add(const uint8_t *const *from, uint8_t *const *to, const uint8_t *const *tables, size_t bytes,
                         const uint8_t *const ahead[2])
{
    uint8_t c[4][CHUNK] = { { 0 } }, sum[CHUNK] = { 0 };

    (void)ahead;
    for (size_t at = 0; at < bytes; at += CHUNK) {
        fetch(c, 4, from, at, bytes);
        inverse_levels(c, tables);
        for (unsigned i = 0; i < 4; i++) {
            memcpy(sum, to[i] + at, least(CHUNK, bytes - at));
            add(c[i], sum);
        }
        store(c, 4, to, at, bytes);
    }
}

static void forward4(const uint8_t *const *from, uint8_t *const *to, const uint8_t *const *tables, size_t bytes,
                     const uint8_t *const ahead[2])
{
    uint8_t c[4][CHUNK] = { { 0 } };

    (void)ahead;
    for (size_t at = 0; at < bytes; at += CHUNK) {
        fetch(c, 4, from, at, bytes);
        forward(c[0], c[2], tables[2]);
        forward(c[1], c[3], tables[2]);
        forward(c[0], c[1], tables[0]);
        forward(c[2], c[3], tables[1]);
        store(c, 4, to, at, bytes);
    }
}

static void combine(const uint8_t *const *from, unsigned count, const uint8_t *const *tables, uint8_t *const *to,
                    size_t bytes)
{
    uint8_t sums[FIRN_RESERVE_TOGETHER][CHUNK], c[1][CHUNK] = { { 0 } };

    for (size_t at = 0; at < bytes; at += CHUNK) {
        memset(sums, 0, sizeof sums);
        for (unsigned j = 0; j < count; j++) {
            fetch(c, 1, from + j, at, bytes);
            for (unsigned i = 0; i < FIRN_RESERVE_TOGETHER; i++)
                multiply_add(sums[i], c[0], tables[i * count + j]);
        }
        store(sums, FIRN_RESERVE_TOGETHER, to, at, bytes);
    }
}

const struct firn_reserve_engine firn_reserve_plain = {
    "plain", usable, inverse2, inverse4, inverse4_add, forward2, forward4, combine,
};
