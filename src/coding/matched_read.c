/*
 * coding/matched_read.c - commands carried out
 *
 * Commands and distances depend on nothing that they make, so they are decoded in batches, without jumps that are hard
 * to foresee; then each batch is carried out. Every command but the last brings two bytes or more, so there are at most
 * about half as many as bytes, and time is bounded by the bytes made.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/matched.h"

#include "coding/spread.h"
#include "coding/words.h"

#include <string.h>

enum {
    WIDE = 16,                         /* bytes copied at a time where there is room */
    NARROW = 8,
    LITERALS_PER_REFILL = 5,
    LIMIT_SHIFT = 64 - FIRN_MATCHED_LIMIT,
    LENGTH_MASK = 15
};

/* Of an entry of commands above the length of its word: extra bits of run and length, table of the next, symbol. */
enum { COMMAND_MORE_AT = 4, COMMAND_MORE_MASK = 63, COMMAND_NEXT_AT = 10, COMMAND_NEXT_MASK = 3, COMMAND_LENGTH_AT = 12,
       COMMAND_RUN_AT = 17 };

/* Of an entry of distances: extra bits, whether it is a recent one, then its number or the least distance less 1. */
enum { DISTANCE_MORE_AT = 4, DISTANCE_MORE_MASK = 31, DISTANCE_RECENT = 1 << 9, DISTANCE_BASE_AT = 10 };

/* ---- tables ---- */

static void prepare_commands(struct firn_matched_read_work *w)
{
    uint32_t values[FIRN_MATCHED_COMMANDS];

    for (unsigned s = 0; s < FIRN_MATCHED_COMMANDS; s++) {
        const struct firn_matched_class *run = &firn_matched_runs[s / FIRN_MATCHED_LENGTH_CODES],
                                        *length = &firn_matched_lengths[s % FIRN_MATCHED_LENGTH_CODES];
        uint32_t next = w->codes.commands.map[firn_matched_command_context(length->base)];

        values[s] = s << COMMAND_LENGTH_AT | next << COMMAND_NEXT_AT |
                    (uint32_t)(run->bits + length->bits) << COMMAND_MORE_AT;
    }
    for (unsigned t = 0; t < w->codes.commands.tables; t++)
        firn_spread32(w->codes.commands.lengths[t], FIRN_MATCHED_COMMANDS, values, w->commands[t]);
}

static void prepare_distances(struct firn_matched_read_work *w)
{
    uint32_t values[FIRN_MATCHED_DISTANCES_MAX], fine = w->codes.fine, symbols = (uint32_t)firn_matched_distances(fine);

    for (uint32_t s = 0; s < FIRN_MATCHED_RECENT; s++)
        values[s] = s << DISTANCE_BASE_AT | DISTANCE_RECENT;
    for (uint32_t s = FIRN_MATCHED_RECENT; s < symbols; s++) {
        uint32_t code = (s - FIRN_MATCHED_RECENT) >> fine, more = code / 2;
        uint32_t base = (((2 | (code & 1)) << more) - 2) << fine | ((s - FIRN_MATCHED_RECENT) & ((1u << fine) - 1));

        values[s] = base << DISTANCE_BASE_AT | more << DISTANCE_MORE_AT;
    }
    for (unsigned t = 0; t < w->codes.distances.tables; t++)
        firn_spread32(w->codes.distances.lengths[t], symbols, values, w->distances[t]);
}

/* Each entry tells the table of the next literal, so that no map is looked up on the way. */
static void prepare_literals(struct firn_matched_read_work *w)
{
    uint16_t values[256];

    for (unsigned s = 0; s < 256; s++)
        values[s] = (uint16_t)(s << 8 | (unsigned)w->codes.literals.map[s] << 4);
    for (unsigned t = 0; t < w->codes.literals.tables; t++)
        firn_spread16(w->codes.literals.lengths[t], 256, values, w->literals[t]);
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
        streams[k] = firn_words_open(coded + at, sizes[k]);
        at += sizes[k];
    }
    prepare_commands(w);
    prepare_distances(w);
    prepare_literals(w);
    return true;
}

/* ---- commands ---- */

/* Where decoding of commands stands. */
struct reading {
    struct firn_words_reader commands, distances;
    uint32_t recent[FIRN_MATCHED_RECENT];
    size_t made;                       /* bytes that the commands so far make */
    unsigned table;                    /* of the next command */
};

/* A distance; it becomes the first of the recent ones. Selections, no jumps: which it is, is hard to foresee. */
static inline uint32_t take_distance(struct firn_words_reader *s, const uint32_t *entries, unsigned fine,
                                     uint32_t recent[FIRN_MATCHED_RECENT])
{
    uint32_t entry, more, base, which, distance, a = recent[0], b = recent[1], c = recent[2], d = recent[3];

    firn_words_need(s, FIRN_MATCHED_LIMIT + FIRN_MATCHED_DISTANCE_BITS);
    entry = entries[s->bits >> LIMIT_SHIFT];
    firn_words_drop(s, entry & LENGTH_MASK);
    more = entry >> DISTANCE_MORE_AT & DISTANCE_MORE_MASK;
    base = entry >> DISTANCE_BASE_AT;
    which = (entry & DISTANCE_RECENT) != 0 ? base : FIRN_MATCHED_RECENT;
    distance = base + (firn_words_peek(s->bits, more) << fine) + 1;
    firn_words_drop(s, more);
    distance = which == 0 ? a : distance;
    distance = which == 1 ? b : distance;
    distance = which == 2 ? c : distance;
    distance = which == 3 ? d : distance;
    recent[3] = which >= 3 ? c : d;
    recent[2] = which >= 2 ? b : c;
    recent[1] = which >= 1 ? a : b;
    recent[0] = distance;
    return distance;
}

/* The next commands, all that make raw_bytes together or as many as a batch holds. 0: they do not make a segment. */
static size_t take_batch(struct reading *reading, size_t raw_bytes, struct firn_matched_read_work *w)
{
    struct reading r = *reading;
    unsigned fine = w->codes.fine;
    size_t count = 0;

    while (count < FIRN_MATCHED_BATCH && r.made < raw_bytes) {
        struct firn_matched_command *command = &w->batch[count++];
        const struct firn_matched_class *run_class, *length_class;
        uint32_t entry, more, run, length;
        uint64_t bits;

        firn_words_need(&r.commands, FIRN_MATCHED_LIMIT);
        entry = w->commands[r.table][r.commands.bits >> LIMIT_SHIFT];
        firn_words_drop(&r.commands, entry & LENGTH_MASK);
        more = entry >> COMMAND_MORE_AT & COMMAND_MORE_MASK;
        firn_words_need(&r.commands, more);
        bits = r.commands.bits;
        firn_words_drop(&r.commands, more);
        r.table = entry >> COMMAND_NEXT_AT & COMMAND_NEXT_MASK;
        run_class = &firn_matched_runs[entry >> COMMAND_RUN_AT];
        length_class = &firn_matched_lengths[entry >> COMMAND_LENGTH_AT & (FIRN_MATCHED_LENGTH_CODES - 1)];
        run = run_class->base + firn_words_peek(bits, run_class->bits);
        if (run > raw_bytes - r.made)
            return 0;
        *command = (struct firn_matched_command){ .literals = run };
        r.made += run;
        if (r.made == raw_bytes) {     /* the last: its length was none, and has no extra bits */
            r.commands.bits = bits << run_class->bits;
            break;
        }
        length = length_class->base + firn_words_peek(bits << run_class->bits, length_class->bits);
        command->length = length;
        command->distance = take_distance(
            &r.distances, w->distances[w->codes.distances.map[firn_matched_distance_context(run, length)]], fine,
            r.recent);
        if (command->distance > r.made || length > raw_bytes - r.made)
            return 0;
        r.made += length;
    }
    *reading = r;
    return count;
}

/* A run of literals; the first has contexts of its own. */
static inline void take_literals(struct firn_words_reader *s, const struct firn_matched_read_work *w, unsigned context,
                                 uint8_t *to, size_t count)
{
    unsigned table = w->codes.literals.map[context];

    while (count > 0) {
        size_t now = count < LITERALS_PER_REFILL ? count : LITERALS_PER_REFILL;

        firn_words_refill(s);
        count -= now;
        for (; now > 0; now--) {
            unsigned entry = w->literals[table][s->bits >> LIMIT_SHIFT];

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

    if (room < length + WIDE) {
        for (size_t k = 0; k < length; k++)
            to[k] = from[k];
    } else if (distance >= WIDE) {
        for (size_t k = 0; k < length; k += WIDE)
            memcpy(to + k, from + k, WIDE);
    } else if (distance == 1) {
        memset(to, *from, length);
    } else {
        size_t k = 0;

        if (distance < NARROW) {       /* what is made goes on with its period, and so with any multiple of it */
            for (; k < NARROW; k++)
                to[k] = from[k];
            from -= (NARROW - 1) / distance * distance;
        }
        for (; k < length; k += NARROW)
            memcpy(to + k, from + k, NARROW);
    }
}

/* Makes the bytes of a batch, from raw[at] on. Returns where they end. *distance: of the command before. */
static size_t carry_out(size_t count, uint8_t *raw, size_t at, size_t raw_bytes, size_t *distance,
                        struct firn_words_reader *literals, const struct firn_matched_read_work *w)
{
    struct firn_words_reader s = *literals;
    size_t before = *distance;

    for (size_t i = 0; i < count; i++) {
        const struct firn_matched_command *command = &w->batch[i];

        if (command->literals > 0)
            take_literals(&s, w, firn_matched_literal_context(raw, at, true, (uint32_t)before), raw + at,
                          command->literals);
        at += command->literals;
        if (command->length == 0)
            break;
        before = command->distance;
        copy_match(raw + at, before, command->length, raw_bytes - at);
        at += command->length;
    }
    *literals = s;
    *distance = before;
    return at;
}

enum firn_status firn_matched_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_matched_read_work *work)
{
    struct firn_words_reader streams[3];
    struct reading reading = { .made = 0 };
    size_t at = 0, distance = 1;

    if (!open_streams(coded, coded_bytes, streams, work))
        return FIRN_BAD_DATA;
    reading.commands = streams[0];
    reading.distances = streams[1];
    firn_words_refill(&reading.commands);
    firn_words_refill(&reading.distances);
    firn_matched_recent_start(reading.recent);
    reading.table = work->codes.commands.map[0];
    while (at < raw_bytes) {
        size_t count = take_batch(&reading, raw_bytes, work);

        if (count == 0)
            return FIRN_BAD_DATA;
        at = carry_out(count, raw, at, raw_bytes, &distance, &streams[2], work);
    }
    return firn_words_used_up(&reading.commands) && firn_words_used_up(&reading.distances) &&
                   firn_words_used_up(&streams[2])
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
    *code_bits = 0;
    for (unsigned k = 0; k < 3; k++)
        *code_bits += 8 * (uint64_t)(streams[k].end - streams[k].at);
    return FIRN_OK;
}
