/*
 * coding/matched_write.c - counting, codes and bitstreams of commands
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/matched.h"

#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum { HEAD_MAX_BYTES = 3 * FIRN_CONTEXTS_COST_MAX_BITS / 8 + 16 };

/* ---- counting ---- */

static void count_literals(const uint8_t *raw, size_t at, uint32_t literals, uint32_t distance,
                           struct firn_matched_counts *counts)
{
    for (uint32_t k = 0; k < literals; k++)
        counts->literals[firn_matched_literal_context(raw, at + k, k == 0, distance)][raw[at + k]]++;
}

/* All but the distances. */
static void count_commands(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                           struct firn_matched_counts *counts)
{
    uint32_t before = 0, distance = 1;
    size_t at = 0;

    memset(counts->commands, 0, sizeof counts->commands);
    memset(counts->literals, 0, sizeof counts->literals);
    counts->command_more_bits = 0;
    for (size_t i = 0; i < count; i++) {
        const struct firn_matched_command *c = &commands[i];
        unsigned run = firn_matched_run_code(c->literals),
                 length = c->length == 0 ? 0 : firn_matched_length_code(c->length);

        counts->commands[firn_matched_command_context(before)][run * FIRN_MATCHED_LENGTH_CODES + length]++;
        counts->command_more_bits += firn_matched_runs[run].bits + firn_matched_lengths[length].bits;
        count_literals(raw, at, c->literals, distance, counts);
        at += c->literals + c->length;
        before = c->length;
        distance = c->distance;
    }
}

static void count_distances(const struct firn_matched_command *commands, size_t count, unsigned fine,
                            struct firn_matched_counts *counts)
{
    uint32_t recent[FIRN_MATCHED_RECENT], more;
    size_t symbols = firn_matched_distances(fine);
    unsigned more_bits;

    memset(counts->distances, 0, FIRN_MATCHED_DISTANCE_CONTEXTS * symbols * sizeof *counts->distances);
    counts->distance_more_bits = 0;
    firn_matched_recent_start(recent);
    for (size_t i = 0; i < count && commands[i].length > 0; i++) {
        unsigned context = firn_matched_distance_context(commands[i].literals, commands[i].length);
        unsigned symbol = firn_matched_recall(recent, commands[i].distance);

        if (symbol == FIRN_MATCHED_RECENT) {
            symbol = firn_matched_distance_symbol(commands[i].distance, fine, &more_bits, &more);
            counts->distance_more_bits += more_bits;
        }
        counts->distances[context * symbols + symbol]++;
    }
}

/* ---- codes ---- */

static uint64_t make_distances(const struct firn_matched_command *commands, size_t count, unsigned fine,
                               struct firn_matched_write_work *w)
{
    count_distances(commands, count, fine, &w->counts);
    return firn_contexts_make(&w->logs, w->counts.distances, FIRN_MATCHED_DISTANCE_CONTEXTS,
                              firn_matched_distances(fine), FIRN_MATCHED_DISTANCE_CONTEXTS, FIRN_MATCHED_LIMIT,
                              &w->codes.distances, &w->contexts) +
           w->counts.distance_more_bits;
}

uint64_t firn_matched_make_codes(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                                 struct firn_matched_write_work *w)
{
    uint64_t bits, least = UINT64_MAX;
    unsigned best = 0;

    for (unsigned fine = 0; fine <= FIRN_MATCHED_FINE_MAX; fine++) {
        bits = make_distances(commands, count, fine, w);
        if (bits < least) {
            least = bits;
            best = fine;
        }
    }
    w->codes.fine = best;
    bits = make_distances(commands, count, best, w);
    count_commands(raw, commands, count, &w->counts);
    bits += w->counts.command_more_bits;
    bits += firn_contexts_make(&w->logs, w->counts.commands[0], FIRN_MATCHED_COMMAND_CONTEXTS, FIRN_MATCHED_COMMANDS,
                               FIRN_MATCHED_COMMAND_CONTEXTS, FIRN_MATCHED_LIMIT, &w->codes.commands, &w->contexts);
    return bits + firn_contexts_make(&w->logs, w->counts.literals[0], FIRN_MATCHED_LITERAL_CONTEXTS, 256,
                                     FIRN_CONTEXTS_TABLES_MAX, FIRN_MATCHED_LIMIT, &w->codes.literals, &w->contexts);
}

/* Everything in the rows of context 0. */
static void count_hastily(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                          struct firn_matched_counts *counts)
{
    uint32_t recent[FIRN_MATCHED_RECENT], more;
    unsigned more_bits;

    memset(counts->commands[0], 0, sizeof counts->commands[0]);
    memset(counts->literals[0], 0, sizeof counts->literals[0]);
    memset(counts->distances, 0, FIRN_MATCHED_DISTANCES_MAX * sizeof *counts->distances);
    counts->command_more_bits = counts->distance_more_bits = 0;
    firn_matched_recent_start(recent);
    for (size_t i = 0; i < count; i++) {
        const struct firn_matched_command *c = &commands[i];
        unsigned run = firn_matched_run_code(c->literals),
                 length = c->length == 0 ? 0 : firn_matched_length_code(c->length), symbol;

        counts->commands[0][run * FIRN_MATCHED_LENGTH_CODES + length]++;
        counts->command_more_bits += firn_matched_runs[run].bits + firn_matched_lengths[length].bits;
        for (uint32_t k = 0; k < c->literals; k++)
            counts->literals[0][raw[k]]++;
        raw += c->literals + c->length;
        if (c->length == 0)
            break;
        symbol = firn_matched_recall(recent, c->distance);
        if (symbol == FIRN_MATCHED_RECENT) {
            symbol = firn_matched_distance_symbol(c->distance, 0, &more_bits, &more);
            counts->distance_more_bits += more_bits;
        }
        counts->distances[symbol]++;
    }
}

uint64_t firn_matched_make_codes_hastily(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                                         struct firn_matched_write_work *w)
{
    uint64_t bits;

    count_hastily(raw, commands, count, &w->counts);
    w->codes.fine = 0;
    bits = w->counts.command_more_bits + w->counts.distance_more_bits;
    bits += firn_contexts_make_one(w->counts.commands[0], FIRN_MATCHED_COMMAND_CONTEXTS, FIRN_MATCHED_COMMANDS,
                                   FIRN_MATCHED_LIMIT, &w->codes.commands, &w->contexts);
    bits += firn_contexts_make_one(w->counts.distances, FIRN_MATCHED_DISTANCE_CONTEXTS, firn_matched_distances(0),
                                   FIRN_MATCHED_LIMIT, &w->codes.distances, &w->contexts);
    return bits + firn_contexts_make_one(w->counts.literals[0], FIRN_MATCHED_LITERAL_CONTEXTS, 256, FIRN_MATCHED_LIMIT,
                                         &w->codes.literals, &w->contexts);
}

static void spell(const struct firn_contexts *codes, size_t symbols, uint32_t *spelt, size_t stride)
{
    uint16_t words[FIRN_CONTEXTS_ALPHABET_MAX];

    for (unsigned t = 0; t < codes->tables; t++) {
        firn_prefix_assign(codes->lengths[t], symbols, words);
        for (size_t s = 0; s < symbols; s++)
            spelt[t * stride + s] = (uint32_t)words[s] << 8 | codes->lengths[t][s];
    }
}

/* ---- bitstreams ---- */

static void put_commands(const struct firn_matched_command *commands, size_t count,
                         const struct firn_matched_write_work *w, struct firn_words_writer *s)
{
    uint32_t before = 0;

    for (size_t i = 0; i < count && s->at < s->end; i++) {
        const struct firn_matched_command *c = &commands[i];
        unsigned run = firn_matched_run_code(c->literals),
                 length = c->length == 0 ? 0 : firn_matched_length_code(c->length);
        unsigned table = w->codes.commands.map[firn_matched_command_context(before)];

        firn_words_put_spelt(s, w->command_words[table][run * FIRN_MATCHED_LENGTH_CODES + length]);
        firn_words_put(s, c->literals - firn_matched_runs[run].base, firn_matched_runs[run].bits);
        if (c->length > 0)
            firn_words_put(s, c->length - firn_matched_lengths[length].base, firn_matched_lengths[length].bits);
        before = c->length;
    }
}

static void put_distances(const struct firn_matched_command *commands, size_t count,
                          const struct firn_matched_write_work *w, struct firn_words_writer *s)
{
    uint32_t recent[FIRN_MATCHED_RECENT], more = 0;
    unsigned more_bits = 0;

    firn_matched_recent_start(recent);
    for (size_t i = 0; i < count && s->at < s->end; i++) {
        const struct firn_matched_command *c = &commands[i];
        unsigned table, symbol;

        if (c->length == 0)
            return;
        table = w->codes.distances.map[firn_matched_distance_context(c->literals, c->length)];
        symbol = firn_matched_recall(recent, c->distance);
        if (symbol < FIRN_MATCHED_RECENT) {
            firn_words_put_spelt(s, w->distance_words[table][symbol]);
            continue;
        }
        symbol = firn_matched_distance_symbol(c->distance, w->codes.fine, &more_bits, &more);
        firn_words_put_spelt(s, w->distance_words[table][symbol]);
        firn_words_put(s, more, more_bits);
    }
}

static void put_literals(const uint8_t *raw, const struct firn_matched_command *commands, size_t count,
                         const struct firn_matched_write_work *w, struct firn_words_writer *s)
{
    size_t at = 0;
    uint32_t distance = 1;

    for (size_t i = 0; i < count && s->at < s->end; i++) {
        for (uint32_t k = 0; k < commands[i].literals; k++, at++) {
            unsigned context = firn_matched_literal_context(raw, at, k == 0, distance);

            firn_words_put_spelt(s, w->literal_words[w->codes.literals.map[context]][raw[at]]);
        }
        at += commands[i].length;
        distance = commands[i].distance;
    }
}

/* `fine` and the codes. */
static size_t put_codes(const struct firn_matched_codes *codes, uint8_t *room)
{
    struct firn_bits_writer writer = { room, 0 };

    firn_bits_put(&writer, codes->fine, 2);
    firn_contexts_write(&writer, &codes->commands, FIRN_MATCHED_COMMAND_CONTEXTS, FIRN_MATCHED_COMMANDS);
    firn_contexts_write(&writer, &codes->distances, FIRN_MATCHED_DISTANCE_CONTEXTS,
                        firn_matched_distances(codes->fine));
    firn_contexts_write(&writer, &codes->literals, FIRN_MATCHED_LITERAL_CONTEXTS, 256);
    return firn_bits_end(&writer);
}

size_t firn_matched_write(const uint8_t *raw, const struct firn_matched_command *commands, size_t count, uint8_t *room,
                          size_t room_bytes, struct firn_matched_write_work *w)
{
    uint8_t head[HEAD_MAX_BYTES];
    size_t head_bytes = put_codes(&w->codes, head), first, second;
    struct firn_words_writer s = { .end = room + room_bytes };
    uint8_t *start, *to = head + head_bytes;

    if (head_bytes + 2 * FIRN_WORDS_NUMBER_BYTES > room_bytes)
        return 0;
    spell(&w->codes.commands, FIRN_MATCHED_COMMANDS, w->command_words[0], FIRN_MATCHED_COMMANDS);
    spell(&w->codes.distances, firn_matched_distances(w->codes.fine), w->distance_words[0], FIRN_MATCHED_DISTANCES_MAX);
    spell(&w->codes.literals, 256, w->literal_words[0], 256);
    start = s.at = room + head_bytes + 2 * FIRN_WORDS_NUMBER_BYTES;
    put_commands(commands, count, w, &s);
    if (!firn_words_close(&s))
        return 0;
    first = (size_t)(s.at - start);
    put_distances(commands, count, w, &s);
    if (!firn_words_close(&s))
        return 0;
    second = (size_t)(s.at - start) - first;
    put_literals(raw, commands, count, w, &s);
    if (!firn_words_close(&s) )
        return 0;
    firn_words_put_number(&to, first);
    firn_words_put_number(&to, second);
    memcpy(room, head, (size_t)(to - head));
    memmove(room + (to - head), start, (size_t)(s.at - start));
    return (size_t)(to - head) + (size_t)(s.at - start);
}
