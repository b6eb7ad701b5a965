/*
 * coding/streams.c - writing and reading the bitstreams of a stretch
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/streams.h"

#include "base/bytes.h"

enum {
    PER_REFILL = 5,                    /* 5 words of at most 11 bits fit the 56 bits that a refill always gives */
    REFILL_ADVANCE_BYTES = 7           /* 5 * 11 + 7 bits already used of the first byte: 62 bits, so 7 whole bytes */
};

static uint64_t swap64(uint64_t v)
{
    v = (v & UINT64_C(0x00FF00FF00FF00FF)) << 8 | (v >> 8 & UINT64_C(0x00FF00FF00FF00FF));
    v = (v & UINT64_C(0x0000FFFF0000FFFF)) << 16 | (v >> 16 & UINT64_C(0x0000FFFF0000FFFF));
    return v << 32 | v >> 32;
}

static unsigned trailing_zeros(uint64_t v)         /* v is not 0 */
{
#if defined(__GNUC__)
    return (unsigned)__builtin_ctzll(v);
#else
    unsigned count = 0;

    for (unsigned step = 32; step > 0; step /= 2)
        if ((v & ((UINT64_C(1) << step) - 1)) == 0) {
            v >>= step;
            count += step;
        }
    return count;
#endif
}

size_t firn_streams_write(const uint8_t *raw, size_t raw_bytes, const uint8_t lengths[FIRN_TABLE_SYMBOLS],
                          const uint16_t words[FIRN_TABLE_SYMBOLS], uint8_t *room, size_t room_bytes)
{
    uint8_t *to = room, *const end = room + room_bytes;
    uint64_t held = 0;                 /* the low held_bits bits wait to be written */
    unsigned held_bits = 0;
    uint32_t word_of[FIRN_TABLE_SYMBOLS];
    size_t i = 0;

    for (size_t s = 0; s < FIRN_TABLE_SYMBOLS; s++)
        word_of[s] = (uint32_t)words[s] << 8 | lengths[s];
    for (; i + 4 <= raw_bytes && end - to >= 8; i += 4) {           /* 7 + 4 * 11 bits: fewer than 64, and never 0 */
        uint32_t a = word_of[raw[i]], b = word_of[raw[i + 1]], c = word_of[raw[i + 2]], d = word_of[raw[i + 3]];
        uint64_t ab = (uint64_t)(a >> 8) << (b & 63) | b >> 8, cd = (uint64_t)(c >> 8) << (d & 63) | d >> 8;

        ab = ab << ((c + d) & 63) | cd;
        held = held << ((a + b + c + d) & 63) | ab;
        held_bits += (a + b + c + d) & 63;
        firn_bytes_put64(to, swap64(held << (64 - held_bits)));
        to += held_bits / 8;
        held_bits %= 8;
    }
    for (; i < raw_bytes; i++) {
        held = held << lengths[raw[i]] | words[raw[i]];
        for (held_bits += lengths[raw[i]]; held_bits >= 8; held_bits -= 8)
            *to++ = (uint8_t)(held >> (held_bits - 8));
    }
    if (held_bits > 0)
        *to++ = (uint8_t)(held << (8 - held_bits));
    return (size_t)(to - room);
}

void firn_streams_prepare(const uint8_t lengths[FIRN_TABLE_SYMBOLS], uint16_t entries[FIRN_STREAMS_ENTRIES])
{
    unsigned at[FIRN_TABLE_LENGTH_LIMIT + 2] = { 0 };

    for (size_t s = 0; s < FIRN_TABLE_SYMBOLS; s++)
        at[lengths[s] + 1]++;
    at[1] = 0;                         /* absent symbols take no place */
    for (unsigned l = 1; l <= FIRN_TABLE_LENGTH_LIMIT; l++)
        at[l + 1] = at[l] + (at[l + 1] << (FIRN_TABLE_LENGTH_LIMIT - l));
    for (size_t s = 0; s < FIRN_TABLE_SYMBOLS; s++) {
        unsigned length = lengths[s], span = length == 0 ? 0 : 1u << (FIRN_TABLE_LENGTH_LIMIT - length);

        for (unsigned k = 0; k < span; k++)
            entries[at[length] + k] = (uint16_t)(s << 8 | length);
        at[length] += span;
    }
}

/* One stream under way. used_bits < 8 of the byte `at` are taken already. */
struct stream {
    const uint8_t *at;
    unsigned used_bits;
};

/*
 * Five symbols after one refill. Reads 8 bytes at stream->at. The 1 put in as the lowest bit of the refill takes no part in
 * any look-up (of 64 - 7 bits the last is never among the first 55), and tells at the end by how much the word was
 * shifted: so the lengths need not be added up.
 */
static inline void five(struct stream *stream, const uint16_t *entries, uint8_t *to)
{
    uint64_t bits = (swap64(firn_bytes_get64(stream->at)) | 1) << stream->used_bits;
    unsigned shifted;

    for (unsigned k = 0; k < PER_REFILL; k++) {
        unsigned entry = entries[bits >> (64 - FIRN_TABLE_LENGTH_LIMIT)];

        bits <<= entry & 63;           /* the mask costs nothing; the symbol's low bits must not count */
        to[k] = (uint8_t)(entry >> 8);
    }
    shifted = trailing_zeros(bits);
    stream->at += shifted / 8;
    stream->used_bits = shifted % 8;
}

/*
 * How many times five() may be called for a stream before its place has to be looked at again: call r (from 0) reads the 8
 * bytes from at + 7 r at most on, which lie in coded as long as 7 r <= end - 8 - at.
 */
static size_t rounds_safe(const struct stream *stream, const uint8_t *end)
{
    return end - stream->at < 8 ? 0 : (size_t)(end - stream->at - 8) / REFILL_ADVANCE_BYTES + 1;
}

/*
 * The fast part: whole rounds of five symbols of every stream, as long as every refill lies within coded. Returns how many
 * symbols of each stream are done.
 *
 * Bounds. Reads: rounds is at most rounds_safe() of every stream, taken anew for each batch. Writes: round r of a stream
 * writes five bytes at done + 5 r of its part, and rounds is at most (each - done) / 5, so they end at `each` or before;
 * a part has at least `each` bytes. Look-ups: the index has 11 bits.
 */
static inline size_t hurry(struct stream *stream, unsigned streams, const uint8_t *end, const uint16_t *entries,
                           uint8_t *raw, size_t each)
{
    struct stream s[FIRN_STREAMS_MAX];
    size_t done = 0, rounds;

    for (unsigned k = 0; k < streams; k++)
        s[k] = stream[k];
    for (;;) {
        rounds = (each - done) / PER_REFILL;
        for (unsigned k = 0; k < streams; k++) {
            size_t safe = rounds_safe(&s[k], end);

            rounds = safe < rounds ? safe : rounds;
        }
        if (rounds == 0)
            break;
        for (size_t stop = done + rounds * PER_REFILL; done < stop; done += PER_REFILL)
            for (unsigned k = 0; k < streams; k++)
                five(&s[k], entries, raw + k * each + done);
    }
    for (unsigned k = 0; k < streams; k++)
        stream[k] = s[k];
    return done;
}

/* The last symbols of a stream, with no byte read past its end; then the stream must be used up. */
static enum firn_status finish(struct firn_bits_reader *reader, const uint16_t *entries, uint8_t *raw, size_t raw_bytes)
{
    for (size_t i = 0; i < raw_bytes; i++) {
        unsigned entry = entries[firn_bits_peek16(reader) >> (16 - FIRN_TABLE_LENGTH_LIMIT)];

        reader->at_bits += entry & 63;
        raw[i] = (uint8_t)(entry >> 8);
    }
    return firn_bits_close(reader) == reader->byte_count ? FIRN_OK : FIRN_BAD_DATA;
}

enum firn_status firn_streams_read(const uint8_t *coded, size_t coded_bytes, const size_t *starts, unsigned streams,
                                   const uint16_t entries[FIRN_STREAMS_ENTRIES], uint8_t *raw, size_t raw_bytes)
{
    struct stream stream[FIRN_STREAMS_MAX];
    size_t each = raw_bytes / streams, done;

    for (unsigned k = 0; k < streams; k++)
        stream[k] = (struct stream){ coded + starts[k], 0 };
    done = streams == 1 ? hurry(stream, 1, coded + coded_bytes, entries, raw, each)
                        : hurry(stream, FIRN_STREAMS_MAX, coded + coded_bytes, entries, raw, each);
    for (unsigned k = 0; k < streams; k++) {
        size_t part = k + 1 < streams ? each : raw_bytes - k * each, start = starts[k], end = starts[k + 1];
        struct firn_bits_reader reader = { coded + start, end - start, 0 };

        reader.at_bits = 8 * (size_t)(stream[k].at - reader.bytes) + stream[k].used_bits;
        if (finish(&reader, entries, raw + k * each + done, part - done) != FIRN_OK)
            return FIRN_BAD_DATA;
    }
    return FIRN_OK;
}
