/*
 * coding/branches.c - the instructions that hold a distance of four bytes
 *
 * The bytes that say whether a distance follows are never changed themselves, as the search goes on behind each
 * distance it has found, turned or not, and looks no further back than there: so turning back finds the same ones.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/branches.h"

#include "base/bytes.h"

enum {
    NEAR_BITS = 25,                    /* distances of -2^24 .. 2^24 - 1 are turned: the fourth byte is 0 or 255 */
    FIELD_BYTES = 4
};

/* Whether the four bytes at `at` are a distance, by the bytes from `free` on that stand before them. */
static inline bool is_distance(const uint8_t *bytes, size_t free, size_t at)
{
    unsigned last = bytes[at - 1];

    if ((last & 0xFE) == 0xE8)                                         /* call, jmp */
        return true;
    if (at - free >= 2 && bytes[at - 2] == 0x0F && (last & 0xF0) == 0x80)      /* jcc */
        return true;
    return at - free >= 3 && (last & 0xC7) == 0x05 && (bytes[at - 2] == 0x8B || bytes[at - 2] == 0x8D) &&
           (bytes[at - 3] & 0xF8) == 0x48;                             /* mov, lea: from where the instruction is */
}

static size_t turn(uint8_t *bytes, size_t byte_count, bool back)
{
    size_t free = 0, turned = 0;

    for (size_t at = 1; at + FIELD_BYTES <= byte_count; at++) {
        uint32_t value, place = (uint32_t)at;
        uint8_t *field = bytes + at;

        if (!is_distance(bytes, free, at))
            continue;
        free = at + FIELD_BYTES;
        at = free;
        if (field[3] != 0 && field[3] != 0xFF)
            continue;
        value = firn_bytes_get32(field) + (back ? 0 - place : place);
        value = (value & ((UINT32_C(1) << NEAR_BITS) - 1)) ^ UINT32_C(1) << (NEAR_BITS - 1);
        firn_bytes_put32(field, value - (UINT32_C(1) << (NEAR_BITS - 1)));
        turned++;
    }
    return turned;
}

size_t firn_branches_turn(uint8_t *bytes, size_t byte_count)
{
    return turn(bytes, byte_count, false);
}

size_t firn_branches_turn_back(uint8_t *bytes, size_t byte_count)
{
    return turn(bytes, byte_count, true);
}
