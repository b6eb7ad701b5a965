/*
 * coding/branches.c - the instructions that hold a distance of four bytes
 *
 * The bytes that say whether a distance follows are never changed themselves, as the search goes on behind each
 * distance it has found, turned or not, and looks no further back than there: so turning back finds the same ones.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/branches.h"

#include "coding/words.h"

#include "base/bytes.h"

#include <string.h>

enum {
    NEAR_BITS = 25,                    /* distances of -2^24 .. 2^24 - 1 are turned: the fourth byte is 0 or 255 */
    FIELD_BYTES = 4,
    MARKED = 64                        /* bytes looked at together */
};

/*
 * marks[k]: 1 where bytes[k] looks like the last byte of an instruction before a distance, or like the first of two. No
 * jumps, so that compilers make vectors of it. bytes[-2] .. bytes[MARKED] are looked at.
 */
static void mark(const uint8_t *bytes, uint8_t marks[MARKED])
{
    for (size_t k = 0; k < MARKED; k++) {
        uint8_t byte = bytes[k], next = bytes[k + 1], last = (bytes - 1)[k], before = (bytes - 2)[k];
        bool call = (byte & 0xFE) == 0xE8;                             /* call, jmp */
        bool jump = (byte == 0x0F) & ((next & 0xF0) == 0x80);          /* jcc */
        bool move = ((byte & 0xC7) == 0x05) & ((last == 0x8B) | (last == 0x8D)) &
                    ((before & 0xF8) == 0x48);                         /* mov, lea: from where the instruction is */

        marks[k] = (uint8_t)(call | jump | move);
    }
}

static void turn_field(uint8_t *field, uint32_t place)
{
    uint32_t value = firn_bytes_get32(field) + place;

    value = (value & ((UINT32_C(1) << NEAR_BITS) - 1)) ^ UINT32_C(1) << (NEAR_BITS - 1);
    firn_bytes_put32(field, value - (UINT32_C(1) << (NEAR_BITS - 1)));
}

struct turning {
    uint8_t *bytes;
    size_t byte_count, free, turned;
    bool back;
};

/* The marked byte at `at`. */
static void consider(struct turning *t, size_t at)
{
    bool move = (t->bytes[at] & 0xC7) == 0x05;
    size_t field = at + (t->bytes[at] == 0x0F ? 2 : 1);

    if (at < t->free + (move ? 2 : 0) || field + FIELD_BYTES > t->byte_count)
        return;
    t->free = field + FIELD_BYTES;
    if (t->bytes[field + 3] != 0 && t->bytes[field + 3] != 0xFF)
        return;
    turn_field(t->bytes + field, t->back ? 0 - (uint32_t)field : (uint32_t)field);
    t->turned++;
}

/* Turning changes bytes behind the mark at hand only, and a mark whose bytes were changed is in front of `free`. */
static size_t turn(uint8_t *bytes, size_t byte_count, bool back)
{
    struct turning t = { .bytes = bytes, .byte_count = byte_count, .back = back };
    uint8_t marks[MARKED], edge[2 + MARKED + 1];

    for (size_t start = 0; start < byte_count; start += MARKED) {
        size_t left = byte_count - start, before = start == 0 ? 0 : 2;
        bool inside = before != 0 && left > MARKED;

        if (!inside) {
            memset(edge, 0, sizeof edge);
            memcpy(edge + 2 - before, bytes + start - before, before + (left > MARKED ? MARKED + 1 : left));
        }
        mark(inside ? bytes + start : edge + 2, marks);
        for (size_t k = 0; k < MARKED; k += 8)
            for (uint64_t word = firn_bytes_get64(marks + k); word != 0; word &= word - 1)
                consider(&t, start + k + firn_words_trailing_zeros(word) / 8);
    }
    return t.turned;
}

size_t firn_branches_turn(uint8_t *bytes, size_t byte_count)
{
    return turn(bytes, byte_count, false);
}

size_t firn_branches_turn_back(uint8_t *bytes, size_t byte_count)
{
    return turn(bytes, byte_count, true);
}
