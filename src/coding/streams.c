/*
 * coding/streams.c - writing and reading the bitstreams of a stretch
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/streams.h"

#include "coding/spread.h"
#include "coding/words.h"

#include "base/bytes.h"

#include <string.h>

enum {
    PER_REFILL = 5,                    /* 5 words of at most 11 bits fit the 56 bits that a refill always gives */
    REFILL_ADVANCE_BYTES = 7           /* 5 * 11 + 7 bits already used of the first byte: 62 bits, so 7 whole bytes */
};

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
        firn_bytes_put64(to, firn_words_swap64(held << (64 - held_bits)));
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
    uint16_t values[FIRN_TABLE_SYMBOLS];

    for (unsigned s = 0; s < FIRN_TABLE_SYMBOLS; s++)
        values[s] = (uint16_t)(s << 8);
    firn_spread16(lengths, FIRN_TABLE_SYMBOLS, values, entries);
}

static inline void step(struct firn_words_reader *s, const uint16_t *entries, uint8_t *to)
{
    unsigned entry = entries[s->bits >> (64 - FIRN_TABLE_LENGTH_LIMIT)];

    s->bits <<= entry & 63;            /* the mask costs nothing, but the symbol's bits must not count */
    *to = (uint8_t)(entry >> 8);
}

/*
 * How many rounds (a refill and five look-ups) a stream can go before its place has to be looked at again: round r
 * (from 0) reads 8 bytes from b + 7 r at most on, where b is its place now, and they lie in front of end as long as 7
 * r <= end - 8 - b.
 */
static size_t rounds_safe(const struct firn_words_reader *s, const uint8_t *end)
{
    ptrdiff_t left = end - s->at - firn_words_trailing_zeros(s->bits) / 8;

    return left < 8 ? 0 : (size_t)(left - 8) / REFILL_ADVANCE_BYTES + 1;
}

/*
 * The fast part: whole rounds of all streams, as long as every refill lies in front of end. Returns how many symbols
 * of each stream are done.
 *
 * Bounds. Reads: a batch has at most rounds_safe() rounds of every stream. Writes: round r writes five bytes of each
 * stream from done + 5 r of its part on, and a batch has at most (each - done) / 5 rounds, so they end at `each` or
 * before, and no part is shorter than that. Look-ups: the index has 11 bits.
 */
static size_t hurry_six(struct firn_words_reader *streams, const uint8_t *end, const uint16_t *entries, uint8_t *raw,
                        size_t each)
{
    struct firn_words_reader a = streams[0], b = streams[1], c = streams[2], d = streams[3], e = streams[4],
                             f = streams[5];
    size_t done = 0;

    for (;;) {
        size_t rounds = (each - done) / PER_REFILL, stop;

        streams[0] = a, streams[1] = b, streams[2] = c, streams[3] = d, streams[4] = e, streams[5] = f;
        for (unsigned k = 0; k < FIRN_STREAMS_MAX; k++) {
            size_t safe = rounds_safe(&streams[k], end);

            rounds = safe < rounds ? safe : rounds;
        }
        if (rounds == 0)
            return done;
        for (stop = done + rounds * PER_REFILL; done < stop; done += PER_REFILL) {
            firn_words_refill_within(&a), firn_words_refill_within(&b), firn_words_refill_within(&c);
            firn_words_refill_within(&d), firn_words_refill_within(&e), firn_words_refill_within(&f);
            for (unsigned k = 0; k < PER_REFILL; k++) {
                step(&a, entries, raw + done + k);
                step(&b, entries, raw + each + done + k);
                step(&c, entries, raw + 2 * each + done + k);
                step(&d, entries, raw + 3 * each + done + k);
                step(&e, entries, raw + 4 * each + done + k);
                step(&f, entries, raw + 5 * each + done + k);
            }
        }
    }
}

/* The same for one stream. */
static size_t hurry_one(struct firn_words_reader *s, const uint8_t *end, const uint16_t *entries, uint8_t *raw,
                        size_t each)
{
    size_t done = 0;

    for (;;) {
        size_t rounds = (each - done) / PER_REFILL, safe = rounds_safe(s, end), stop;

        rounds = safe < rounds ? safe : rounds;
        if (rounds == 0)
            return done;
        for (stop = done + rounds * PER_REFILL; done < stop; done += PER_REFILL) {
            firn_words_refill_within(s);
            for (unsigned k = 0; k < PER_REFILL; k++)
                step(s, entries, raw + done + k);
        }
    }
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
    struct firn_words_reader stream[FIRN_STREAMS_MAX];
    size_t each = raw_bytes / streams, done;

    for (unsigned k = 0; k < streams; k++)
        stream[k] = firn_words_open(coded + starts[k], starts[k + 1] - starts[k]);
    done = (streams == 1 ? hurry_one : hurry_six)(stream, coded + coded_bytes, entries, raw, each);
    for (unsigned k = 0; k < streams; k++) {
        struct firn_bits_reader reader = { coded + starts[k], starts[k + 1] - starts[k], 0 };
        size_t part = k + 1 < streams ? each : raw_bytes - k * each;

        reader.at_bits = 8 * (size_t)(stream[k].at - reader.bytes) + firn_words_trailing_zeros(stream[k].bits);
        if (finish(&reader, entries, raw + k * each + done, part - done) != FIRN_OK)
            return FIRN_BAD_DATA;
    }
    return FIRN_OK;
}
