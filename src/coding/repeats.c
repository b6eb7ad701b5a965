/*
 * coding/repeats.c - binary trees of suffixes
 *
 * The tree of a hash holds all places with it, ordered by what follows, the latest as the root. Looking for repeats of
 * a new place walks down and, on the way, splits the tree in what is smaller and what is greater than the new place:
 * these become its two sides. All that is compared once is not compared again: both sides are known to agree with the
 * new place for some bytes.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/repeats.h"

#include "base/bytes.h"

#include <stdbool.h>
#include <string.h>

enum { NOWHERE = 0 };                  /* places are kept plus one */

uint32_t firn_repeats_equal(const uint8_t *a, const uint8_t *b, uint32_t most)
{
    uint32_t same = 0;

#if defined(__GNUC__) && FIRN_BYTES_LITTLE
    for (; same + 8 <= most; same += 8) {
        uint64_t differ = firn_bytes_get64(a + same) ^ firn_bytes_get64(b + same);

        if (differ != 0)
            return same + (uint32_t)__builtin_ctzll(differ) / 8;
    }
#endif
    while (same < most && a[same] == b[same])
        same++;
    return same;
}

static uint32_t hash_of(uint32_t word, unsigned bytes)
{
    return (bytes == 3 ? word << 8 : word) * 2654435761u >> (32 - FIRN_REPEATS_HASH_BITS);
}

struct finding {
    const uint8_t *raw;
    struct firn_repeats *r;
    uint32_t *made;                    /* repeats of the place so far end here */
    uint32_t longest;
};

static void keep(struct finding *f, uint32_t length, uint32_t distance)
{
    uint32_t kept = length < FIRN_REPEATS_LENGTH_MAX ? length : FIRN_REPEATS_LENGTH_MAX;

    *f->made++ = kept << FIRN_REPEATS_DISTANCE_BITS | (distance - 1);
    f->longest = length;
}

/* Puts `at` at the root of its tree, keeping longer and longer repeats on the way when `asked`. */
static void climb(struct finding *f, uint32_t at, uint32_t most, uint32_t enough, unsigned tries, bool asked)
{
    struct firn_repeats *r = f->r;
    uint32_t hash = hash_of(firn_bytes_get32(f->raw + at), 4), next = r->heads[hash];
    uint32_t *smaller = r->below + 2 * (size_t)at, *greater = smaller + 1;
    uint32_t same_smaller = 0, same_greater = 0;

    r->heads[hash] = at + 1;
    for (; next != NOWHERE && tries > 0; tries--) {
        uint32_t other = next - 1, same = same_smaller < same_greater ? same_smaller : same_greater;
        uint32_t *sides = r->below + 2 * (size_t)other;

        same += firn_repeats_equal(f->raw + at + same, f->raw + other + same, most - same);
        if (asked && same > f->longest)
            keep(f, same, at - other);
        if (same >= enough || same == most) {
            *smaller = sides[0];
            *greater = sides[1];
            return;
        }
        if (f->raw[other + same] < f->raw[at + same]) {
            *smaller = next;
            smaller = sides + 1;
            next = sides[1];
            same_smaller = same;
        } else {
            *greater = next;
            greater = sides;
            next = sides[0];
            same_greater = same;
        }
    }
    *smaller = NOWHERE;
    *greater = NOWHERE;
}

/* The last places of the same two and three bytes. */
static void look_near(struct finding *f, uint32_t at, uint32_t most)
{
    struct firn_repeats *r = f->r;
    uint32_t word = firn_bytes_get32(f->raw + at), two = r->heads2[word & 0xFFFF];
    uint32_t three = r->heads3[hash_of(word, 3)], same;

    if (two != NOWHERE) {
        same = firn_repeats_equal(f->raw + at, f->raw + two - 1, most < 8 ? most : 8);
        keep(f, same, at + 1 - two);
    }
    if (three != NOWHERE && three != two) {
        same = firn_repeats_equal(f->raw + at, f->raw + three - 1, most < 8 ? most : 8);
        if (same > f->longest)
            keep(f, same, at + 1 - three);
    }
}

void firn_repeats_find(const uint8_t *raw, size_t raw_bytes, uint32_t enough, unsigned tries, struct firn_repeats *work)
{
    struct finding f = { raw, work, work->kept, 0 };
    uint32_t inside = 0;               /* places left of a repeat that is long enough */

    memset(work->heads, 0, sizeof work->heads);
    memset(work->heads2, 0, sizeof work->heads2);
    memset(work->heads3, 0, sizeof work->heads3);
    for (uint32_t at = 0; at < raw_bytes; at++) {
        uint32_t most = (uint32_t)raw_bytes - at, *first = f.made, word;

        work->starts[at] = (uint32_t)(f.made - work->kept);
        if (most < 4)
            continue;
        word = firn_bytes_get32(raw + at);
        f.longest = 1;
        if (inside == 0)
            look_near(&f, at, most);
        climb(&f, at, most < enough ? most : enough, enough, tries, inside == 0);
        if (inside > 0)
            inside--;
        work->heads2[word & 0xFFFF] = at + 1;
        work->heads3[hash_of(word, 3)] = at + 1;
        if (f.made > first && f.longest >= enough) {
            uint32_t distance = firn_repeats_distance(*(f.made - 1));

            f.made--;
            f.longest = enough + firn_repeats_equal(raw + at + enough, raw + at + enough - distance, most - enough);
            keep(&f, f.longest, distance);
            inside = f.longest - 1;
        }
        if (f.made - work->kept > FIRN_REPEATS_KEPT && f.made > first + 1) {
            *first = *(f.made - 1);
            f.made = first + 1;
        }
    }
    work->starts[raw_bytes] = (uint32_t)(f.made - work->kept);
}
