/*
 * coding/bits.h - bit strings, most significant bit first, for headers and tables
 *
 * Room: coding. Pure. Bit k of a string is bit 7 - k % 8 of its byte k / 8. A string ends on a byte boundary; the
 * bits between are zero, and a reader refuses anything else. The streams of coding/streams.c have the same order and
 * their own loops.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_BITS_H
#define FIRN_CODING_BITS_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Reads as zeros past the end, and remembers having done so. */
struct firn_bits_reader {
    const uint8_t *bytes;
    size_t byte_count;
    size_t at_bits;                    /* may run past 8 * byte_count */
};

/* The next 16 bits, not taken; zeros past the end. */
static inline unsigned firn_bits_peek16(const struct firn_bits_reader *reader)
{
    uint32_t window = 0;
    size_t at = reader->at_bits / 8;

    if (at + 3 <= reader->byte_count)
        return ((uint32_t)reader->bytes[at] << 16 | (uint32_t)reader->bytes[at + 1] << 8 | reader->bytes[at + 2]) >>
                   (8 - reader->at_bits % 8) & 0xFFFF;
    for (size_t k = 0; k < 3; k++)
        window = window << 8 | (at + k < reader->byte_count ? reader->bytes[at + k] : 0u);
    return window >> (8 - reader->at_bits % 8) & 0xFFFF;
}

/* count <= 16 */
static inline unsigned firn_bits_take(struct firn_bits_reader *reader, unsigned count)
{
    unsigned value = firn_bits_peek16(reader) >> (16 - count);

    reader->at_bits += count;
    return value;
}

/* Whole bytes taken; SIZE_MAX when the reader ran past the end or the bits up to the byte boundary are not zero. */
static inline size_t firn_bits_close(struct firn_bits_reader *reader)
{
    unsigned rest = (unsigned)(-reader->at_bits % 8);
    size_t bytes = (reader->at_bits + 7) / 8;

    if (bytes > reader->byte_count || firn_bits_take(reader, rest) != 0)
        return SIZE_MAX;
    return bytes;
}

/* The caller has seen to it that there is room. */
struct firn_bits_writer {
    uint8_t *bytes;
    size_t at_bits;
};

/* count <= 16; bits of value above count are zero */
static inline void firn_bits_put(struct firn_bits_writer *writer, unsigned value, unsigned count)
{
    for (unsigned k = count; k-- > 0; writer->at_bits++) {
        uint8_t *at = writer->bytes + writer->at_bits / 8;
        unsigned bit = value >> k & 1;

        if (writer->at_bits % 8 == 0)
            *at = 0;
        *at = (uint8_t)(*at | bit << (7 - writer->at_bits % 8));
    }
}

/* The last byte is filled up with zeros already; returns whole bytes. */
static inline size_t firn_bits_end(const struct firn_bits_writer *writer)
{
    return (writer->at_bits + 7) / 8;
}

#endif
