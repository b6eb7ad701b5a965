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

/* ---- writing ---- */

struct firn_words_writer {
    uint8_t *at, *end;                 /* nothing is written at or past end */
    uint64_t held;                     /* the low held_bits bits wait to be written */
    unsigned held_bits;
};

static inline void firn_words_flush_end(struct firn_words_writer *w)
{
    for (; w->held_bits >= 8 && w->at < w->end; w->held_bits -= 8)
        *w->at++ = (uint8_t)(w->held >> (w->held_bits - 8));
    w->held_bits &= 63;                /* no room: what is held is lost, and close says so */
}

/* Whole bytes go out, where there is room eight at a time, of which some will be written again. */
static inline void firn_words_flush(struct firn_words_writer *w)
{
    if (w->end - w->at < 8) {
        firn_words_flush_end(w);
    } else if (w->held_bits > 0) {
        firn_bytes_put64(w->at, firn_words_swap64(w->held << (64 - w->held_bits)));
        w->at += w->held_bits / 8;
        w->held_bits %= 8;
    }
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

/*
 * `bits` is a refill, the eight bytes at `at` with the lowest bit set to 1, less the bits that are taken already. That
 * 1 takes no part in the 56 bits a refill is good for, and its place tells how many were taken: nothing else is
 * counted. Zeros follow behind the end.
 */
struct firn_words_reader {
    const uint8_t *at, *end;
    uint64_t bits;                     /* 1 to begin with */
};

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

static inline struct firn_words_reader firn_words_open(const uint8_t *bytes, size_t byte_count)
{
    return (struct firn_words_reader){ bytes, bytes + byte_count, 1 };
}

/* The refill for where there are no eight bytes any more. A stream that is used up beyond its end stays there. */
static inline void firn_words_refill_end(struct firn_words_reader *r)
{
    unsigned taken = firn_words_trailing_zeros(r->bits);
    size_t left = (size_t)(r->end - r->at), step = taken / 8;

    if (step > left) {                 /* bits that are not there were taken: no more come, and it is never used up */
        r->at = r->end;
        r->bits = UINT64_C(1) << 8;    /* 55 bits more can be taken without losing the 1 */
        return;
    }
    r->at += step;
    r->bits = (firn_words_load(r->at, r->end) | 1) << taken % 8;
}

/* For where eight bytes are left for sure. */
static inline void firn_words_refill_within(struct firn_words_reader *r)
{
    unsigned taken = firn_words_trailing_zeros(r->bits);

    r->at += taken / 8;
    r->bits = (firn_words_swap64(firn_bytes_get64(r->at)) | 1) << taken % 8;
}

static inline void firn_words_refill(struct firn_words_reader *r)
{
    if (r->end - r->at >= 16)
        firn_words_refill_within(r);
    else
        firn_words_refill_end(r);
}

/* After a first refill: sees to it that `count` bits are held, at most 56; cheaper where they mostly are. */
static inline void firn_words_need(struct firn_words_reader *r, unsigned count)
{
    if (r->bits << count == 0)         /* the 1 would be gone */
        firn_words_refill(r);
}

static inline void firn_words_drop(struct firn_words_reader *r, unsigned count)
{
    r->bits <<= count;
}

/* The first bits, not taken; count <= 32 */
static inline uint32_t firn_words_peek(uint64_t bits, unsigned count)
{
    return (uint32_t)(bits >> 1 >> (63 - count));
}

/* All but less than eight zero bits taken, and none beyond. */
static inline bool firn_words_used_up(const struct firn_words_reader *r)
{
    size_t used_bits = firn_words_trailing_zeros(r->bits), all_bits = 8 * (size_t)(r->end - r->at);

    if (used_bits > all_bits || all_bits - used_bits >= 8)
        return false;
    return all_bits == used_bits || (uint8_t)(r->end[-1] << (8 - (all_bits - used_bits))) == 0;
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
