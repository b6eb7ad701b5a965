/*
 * coding/words.h - long bitstreams, most significant bit first, many bits at a time
 *
 * Room: coding. Pure. For what coding/bits.h is too slow for. A stream ends with less than eight zero bits. Numbers
 * between streams are here, too: seven bits a byte, the lowest first, bit 7 set when more follow.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_WORDS_H
#define FIRN_CODING_WORDS_H

#include "base/bytes.h"

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum { FIRN_WORDS_NUMBER_BYTES = 3 };  /* of a number below 2^21 */

/* ---- writing ---- */

struct firn_words_writer {
    uint8_t *at, *end;                 /* nothing is written at or past end */
    uint64_t held;                     /* the low held_bits bits wait to be written */
    unsigned held_bits;
};

static inline void firn_words_flush(struct firn_words_writer *w)
{
    for (; w->held_bits >= 8 && w->at < w->end; w->held_bits -= 8)
        *w->at++ = (uint8_t)(w->held >> (w->held_bits - 8));
    w->held_bits &= 63;                /* no room: what is held is lost, and close says so */
}

/* count <= 32, and value has no more bits */
static inline void firn_words_put(struct firn_words_writer *w, uint32_t value, unsigned count)
{
    if (w->held_bits + count > 56)
        firn_words_flush(w);
    w->held = w->held << count | value;
    w->held_bits += count;
}

/* spelt: word << 8 | length */
static inline void firn_words_put_spelt(struct firn_words_writer *w, uint32_t spelt)
{
    firn_words_put(w, spelt >> 8, spelt & 255);
}

/* Fills up the last byte; tells whether there was room for all of it. */
static inline bool firn_words_close(struct firn_words_writer *w)
{
    firn_words_flush(w);
    if (w->at == w->end)
        return false;
    if (w->held_bits > 0)
        *w->at++ = (uint8_t)(w->held << (8 - w->held_bits));
    w->held = 0;
    w->held_bits = 0;
    return true;
}

/* At most FIRN_WORDS_NUMBER_BYTES bytes for what is below 2^21. */
static inline void firn_words_put_number(uint8_t **to, size_t value)
{
    for (; value >= 128; value >>= 7)
        *(*to)++ = (uint8_t)(value | 128);
    *(*to)++ = (uint8_t)value;
}

/* ---- reading ---- */

/* Zeros behind the end. At least 56 bits are held after a refill. */
struct firn_words_reader {
    const uint8_t *bytes;
    size_t byte_count, at;             /* at: of the next byte to load; may run past byte_count */
    uint64_t bits;
    unsigned held;
};

static inline uint64_t firn_words_swap64(uint64_t v)
{
#if defined(__GNUC__)
    return __builtin_bswap64(v);       /* firn_bytes_get64 is little-endian on every machine */
#else
    v = (v & UINT64_C(0x00FF00FF00FF00FF)) << 8 | (v >> 8 & UINT64_C(0x00FF00FF00FF00FF));
    v = (v & UINT64_C(0x0000FFFF0000FFFF)) << 16 | (v >> 16 & UINT64_C(0x0000FFFF0000FFFF));
    return v << 32 | v >> 32;
#endif
}

static inline unsigned firn_words_trailing_zeros(uint64_t v)           /* v is not 0 */
{
#if defined(__GNUC__)
    return (unsigned)__builtin_ctzll(v);
#else
    unsigned count = 0;

    for (; (v & 1) == 0; v >>= 1)
        count++;
    return count;
#endif
}

/* The eight bytes at `at`, zeros from `end` on; `at` may lie behind it. */
static inline uint64_t firn_words_load(const uint8_t *at, const uint8_t *end)
{
    uint64_t word = 0;

    for (ptrdiff_t k = 0; k < 8; k++)
        word = word << 8 | (k < end - at ? at[k] : 0u);
    return word;
}

static inline uint64_t firn_words_load_end(const struct firn_words_reader *r)
{
    uint64_t word = 0;

    for (size_t k = 0; k < 8; k++)
        word = word << 8 | (r->at < r->byte_count && k < r->byte_count - r->at ? r->bytes[r->at + k] : 0u);
    return word;
}

static inline void firn_words_refill(struct firn_words_reader *r)
{
    uint64_t word = r->at + 8 <= r->byte_count ? firn_words_swap64(firn_bytes_get64(r->bytes + r->at))
                                               : firn_words_load_end(r);

    r->bits |= word >> r->held;
    r->at += (63 - r->held) >> 3;
    r->held |= 56;
}

static inline void firn_words_drop(struct firn_words_reader *r, unsigned count)
{
    r->bits <<= count;
    r->held -= count;
}

/* count <= 32 */
static inline uint32_t firn_words_take(struct firn_words_reader *r, unsigned count)
{
    uint32_t value = (uint32_t)(r->bits >> 1 >> (63 - count));

    firn_words_drop(r, count);
    return value;
}

/* Used up but for less than eight zero bits. */
static inline bool firn_words_used_up(struct firn_words_reader *r)
{
    size_t used_bits = 8 * r->at - r->held, end_bits = 8 * r->byte_count;

    firn_words_refill(r);
    return used_bits <= end_bits && end_bits - used_bits < 8 && (r->bits >> 56) == 0;
}

/* False at the end, after three bytes, or when there are more bytes than it takes. */
static inline bool firn_words_take_number(const uint8_t *coded, size_t coded_bytes, size_t *at, size_t *value)
{
    *value = 0;
    for (unsigned k = 0; k < FIRN_WORDS_NUMBER_BYTES; k++) {
        uint8_t byte;

        if (*at >= coded_bytes)
            return false;
        byte = coded[(*at)++];
        *value |= (size_t)(byte & 127) << 7 * k;
        if (byte < 128)
            return k == 0 || byte != 0;
    }
    return false;
}

#endif
