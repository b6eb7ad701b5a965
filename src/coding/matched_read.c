/*
 * coding/matched_read.c - commands carried out
 *
 * A command brings at least one byte but the first ones of a run of length 0 and the last, so there are at most about
 * half as many as bytes, and time is bounded by the bytes made.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/matched.h"

#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum {
    WIDE = 16,                         /* bytes copied at a time where there is room */
    LITERALS_PER_REFILL = 5,
    LENGTH_MASK = 15
};

/* ---- tables ---- */

/* entries[bits] = symbol << 8 | of[symbol] << 4 | length, in the order of the words */
static void spread16(const uint8_t *lengths, const uint8_t *of, uint16_t entries[FIRN_MATCHED_ENTRIES])
{
    uint16_t words[256];

    firn_prefix_assign(lengths, 256, words);
    for (unsigned s = 0; s < 256; s++) {
        unsigned span = 1u << (FIRN_MATCHED_LIMIT - lengths[s]);
        uint16_t entry = (uint16_t)(s << 8 | (unsigned)of[s] << 4 | lengths[s]);

        for (unsigned k = 0; lengths[s] != 0 && k < span; k++)
            entries[words[s] * span + k] = entry;
    }
}

/* entries[bits] = symbol << 4 | length */
static void spread32(const uint8_t *lengths, size_t symbols, uint32_t entries[FIRN_MATCHED_ENTRIES])
{
    uint16_t words[FIRN_CONTEXTS_ALPHABET_MAX];

    firn_prefix_assign(lengths, symbols, words);
    for (uint32_t s = 0; s < symbols; s++) {
        unsigned span = 1u << (FIRN_MATCHED_LIMIT - lengths[s]);

        for (unsigned k = 0; lengths[s] != 0 && k < span; k++)
            entries[words[s] * span + k] = s << 4 | lengths[s];
    }
}

/* Codes and places of the three streams. */
static bool open_streams(const uint8_t *coded, size_t coded_bytes, struct firn_words_reader streams[3],
                         struct firn_matched_read_work *w)
{
    struct firn_bits_reader reader = { coded, coded_bytes, 0 };
    struct firn_matched_codes *c = &w->codes;
    size_t at, sizes[3];

    c->fine = firn_bits_take(&reader, 2);
    if (firn_contexts_read(&reader, &c->commands, FIRN_MATCHED_COMMAND_CONTEXTS, FIRN_MATCHED_COMMANDS) != FIRN_OK ||
        firn_contexts_read(&reader, &c->distances, FIRN_MATCHED_DISTANCE_CONTEXTS, firn_matched_distances(c->fine)) !=
            FIRN_OK ||
        firn_contexts_read(&reader, &c->literals, FIRN_MATCHED_LITERAL_CONTEXTS, 256) != FIRN_OK ||
        c->commands.tables > FIRN_MATCHED_COMMAND_CONTEXTS || c->distances.tables > FIRN_MATCHED_DISTANCE_CONTEXTS)
        return false;
    w->table_bits = reader.at_bits;
    at = firn_bits_close(&reader);
    if (at == SIZE_MAX || !firn_words_take_number(coded, coded_bytes, &at, &sizes[0]) ||
        !firn_words_take_number(coded, coded_bytes, &at, &sizes[1]) || sizes[0] > coded_bytes - at ||
        sizes[1] > coded_bytes - at - sizes[0])
        return false;
    sizes[2] = coded_bytes - at - sizes[0] - sizes[1];
    for (unsigned k = 0; k < 3; k++) {
        streams[k] = (struct firn_words_reader){ .bytes = coded + at, .byte_count = sizes[k] };
        at += sizes[k];
    }
    for (unsigned t = 0; t < c->commands.tables; t++)
        spread32(c->commands.lengths[t], FIRN_MATCHED_COMMANDS, w->commands[t]);
    for (unsigned t = 0; t < c->distances.tables; t++)
        spread32(c->distances.lengths[t], firn_matched_distances(c->fine), w->distances[t]);
    for (unsigned t = 0; t < c->literals.tables; t++)
        spread16(c->literals.lengths[t], c->literals.map, w->literals[t]);
    return true;
}

/* ---- commands ---- */

/*
 * A run of literals; the first has contexts of its own. Each entry tells the table of the next literal, so that no map
 * is looked up on the way.
 */
static inline void take_literals(struct firn_words_reader *s, const struct firn_matched_read_work *w, unsigned context,
                                 uint8_t *to, size_t count)
{
    unsigned table = w->codes.literals.map[context];

    while (count > 0) {
        size_t now = count < LITERALS_PER_REFILL ? count : LITERALS_PER_REFILL;

        firn_words_refill(s);
        count -= now;
        for (; now > 0; now--) {
            unsigned entry = w->literals[table][s->bits >> (64 - FIRN_MATCHED_LIMIT)];

            firn_words_drop(s, entry & LENGTH_MASK);
            *to++ = (uint8_t)(entry >> 8);
            table = entry >> 4 & 15;
        }
    }
}

/* Copies from `distance` bytes back; room is what lies from `to` on. */
static inline void copy_match(uint8_t *to, size_t distance, size_t length, size_t room)
{
    const uint8_t *from = to - distance;

    if (distance >= WIDE && room >= length + WIDE) {
        for (size_t k = 0; k < length; k += WIDE)
            memcpy(to + k, from + k, WIDE);
    } else if (distance == 1) {
        memset(to, *from, length);
    } else {
        for (size_t k = 0; k < length; k++)
            to[k] = from[k];
    }
}

/* The distance a symbol stands for; the recent ones are kept in order. */
static inline size_t distance_of(struct firn_words_reader *s, unsigned symbol, unsigned fine,
                                 uint32_t recent[FIRN_MATCHED_RECENT])
{
    uint32_t distance, a = recent[0], b = recent[1], c = recent[2];

    if (symbol < FIRN_MATCHED_RECENT) {
        distance = recent[symbol];
    } else {
        unsigned code = (symbol - FIRN_MATCHED_RECENT) >> fine, exponent = code / 2 + 1;
        uint32_t high = (2u | (code & 1)) << (exponent - 1) | firn_words_take(s, exponent - 1);

        distance = ((high - 2) << fine | ((symbol - FIRN_MATCHED_RECENT) & ((1u << fine) - 1))) + 1;
    }
    recent[0] = distance;
    recent[1] = symbol >= 1 ? a : b;
    recent[2] = symbol >= 2 ? b : c;
    recent[3] = symbol >= 3 ? c : recent[3];
    return distance;
}

enum firn_status firn_matched_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_matched_read_work *work)
{
    struct firn_words_reader streams[3], commands, distances, literals;
    const struct firn_matched_codes *codes = &work->codes;
    uint32_t recent[FIRN_MATCHED_RECENT];
    size_t at = 0;
    unsigned table;

    if (!open_streams(coded, coded_bytes, streams, work))
        return FIRN_BAD_DATA;
    commands = streams[0], distances = streams[1], literals = streams[2];
    firn_matched_recent_start(recent);
    table = codes->commands.map[0];
    while (at < raw_bytes) {
        uint32_t entry, run, length;
        size_t distance;
        const struct firn_matched_class *run_class, *length_class;

        firn_words_refill(&commands);
        entry = work->commands[table][commands.bits >> (64 - FIRN_MATCHED_LIMIT)];
        firn_words_drop(&commands, entry & LENGTH_MASK);
        run_class = &firn_matched_runs[entry >> 9];
        length_class = &firn_matched_lengths[entry >> 4 & (FIRN_MATCHED_LENGTH_CODES - 1)];
        run = run_class->base + firn_words_take(&commands, run_class->bits);
        if (run > raw_bytes - at)
            return FIRN_BAD_DATA;
        if (run > 0)
            take_literals(&literals, work, firn_matched_literal_context(raw, at, true, recent[0]), raw + at, run);
        at += run;
        if (at == raw_bytes)
            break;
        length = length_class->base + firn_words_take(&commands, length_class->bits);
        table = codes->commands.map[firn_matched_command_context(length)];
        firn_words_refill(&distances);
        entry = work->distances[codes->distances.map[firn_matched_distance_context(run, length)]]
                               [distances.bits >> (64 - FIRN_MATCHED_LIMIT)];
        firn_words_drop(&distances, entry & LENGTH_MASK);
        distance = distance_of(&distances, entry >> 4, codes->fine, recent);
        if (distance > at || length > raw_bytes - at)
            return FIRN_BAD_DATA;
        copy_match(raw + at, distance, length, raw_bytes - at);
        at += length;
    }
    return firn_words_used_up(&commands) && firn_words_used_up(&distances) && firn_words_used_up(&literals)
               ? FIRN_OK
               : FIRN_BAD_DATA;
}

enum firn_status firn_matched_measure(const uint8_t *coded, size_t coded_bytes, uint64_t *table_bits,
                                      uint64_t *code_bits, struct firn_matched_read_work *work)
{
    struct firn_words_reader streams[3];

    if (!open_streams(coded, coded_bytes, streams, work))
        return FIRN_BAD_DATA;
    *table_bits = work->table_bits;
    *code_bits = 8 * (uint64_t)(streams[0].byte_count + streams[1].byte_count + streams[2].byte_count);
    return FIRN_OK;
}
