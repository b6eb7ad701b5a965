/*
 * coding/parse.c - the cheapest way, and what it is measured by
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/parse.h"

#include "coding/histogram.h"

#include "base/bytes.h"

#include <string.h>

enum { BIT = FIRN_COST_BIT, NEVER = 1 << 30 };

/* ---- prices ---- */

void firn_parse_guess(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes,
                      struct firn_parse_prices *prices)
{
    uint32_t counts[256];

    firn_histogram_count(raw, raw_bytes, counts);
    firn_cost_symbols(logs, counts, 256, prices->literals[0]);
    memset(prices->literal_map, 0, sizeof prices->literal_map);
    prices->fine = 0;
    for (unsigned r = 0; r < FIRN_MATCHED_RUN_CODES; r++) {
        prices->runs[r] = BIT + r * BIT / 3 + firn_matched_runs[r].bits * BIT;
        for (unsigned l = 0; l < FIRN_MATCHED_LENGTH_CODES; l++)
            for (unsigned c = 0; c < FIRN_MATCHED_COMMAND_CONTEXTS; c++)
                prices->commands[c][r][l] = prices->runs[r] + 2 * BIT + l * BIT / 5 +
                                            firn_matched_lengths[l].bits * BIT;
    }
    for (unsigned c = 0; c < FIRN_MATCHED_DISTANCE_CONTEXTS; c++)
        for (unsigned s = 0; s < FIRN_MATCHED_DISTANCES_MAX; s++)
            prices->distances[c][s] = s < FIRN_MATCHED_RECENT ? (uint16_t)(2 * BIT + s * BIT / 2) : 5 * BIT;
}

/* A command that did not occur costs what its run and its length cost apart, and a bit. */
static void learn_commands(const struct firn_matched_write_work *m, struct firn_parse_prices *prices)
{
    uint32_t runs[FIRN_MATCHED_RUN_CODES] = { 0 }, lengths[FIRN_MATCHED_LENGTH_CODES] = { 0 };
    uint16_t run_costs[FIRN_MATCHED_RUN_CODES], length_costs[FIRN_MATCHED_LENGTH_CODES];
    uint32_t sums[FIRN_MATCHED_COMMANDS];
    uint16_t costs[FIRN_MATCHED_COMMANDS];

    for (unsigned c = 0; c < FIRN_MATCHED_COMMAND_CONTEXTS; c++)
        for (unsigned s = 0; s < FIRN_MATCHED_COMMANDS; s++) {
            runs[s / FIRN_MATCHED_LENGTH_CODES] += m->counts.commands[c][s];
            lengths[s % FIRN_MATCHED_LENGTH_CODES] += m->counts.commands[c][s];
        }
    firn_cost_symbols(&m->logs, runs, FIRN_MATCHED_RUN_CODES, run_costs);
    firn_cost_symbols(&m->logs, lengths, FIRN_MATCHED_LENGTH_CODES, length_costs);
    for (unsigned r = 0; r < FIRN_MATCHED_RUN_CODES; r++)
        prices->runs[r] = run_costs[r] + firn_matched_runs[r].bits * (uint32_t)BIT;
    for (unsigned c = 0; c < FIRN_MATCHED_COMMAND_CONTEXTS; c++) {
        memset(sums, 0, sizeof sums);
        for (unsigned other = 0; other < FIRN_MATCHED_COMMAND_CONTEXTS; other++)
            for (unsigned s = 0; m->codes.commands.map[other] == m->codes.commands.map[c] && s < FIRN_MATCHED_COMMANDS;
                 s++)
                sums[s] += m->counts.commands[other][s];
        firn_cost_symbols(&m->logs, sums, FIRN_MATCHED_COMMANDS, costs);
        for (unsigned s = 0; s < FIRN_MATCHED_COMMANDS; s++) {
            unsigned r = s / FIRN_MATCHED_LENGTH_CODES, l = s % FIRN_MATCHED_LENGTH_CODES;
            uint32_t cost = costs[s], apart = run_costs[r] + length_costs[l] + (uint32_t)BIT;

            if (sums[s] == 0 && apart > cost)
                cost = apart < FIRN_COST_MAX ? apart : FIRN_COST_MAX;
            prices->commands[c][r][l] = cost +
                                        (firn_matched_runs[r].bits + firn_matched_lengths[l].bits) * (uint32_t)BIT;
        }
    }
}

/* Sums the rows of contexts that share table t, and prices them. */
static void learn_table(const struct firn_cost_logs *logs, const struct firn_contexts *codes, unsigned t,
                        const uint32_t *counts, size_t contexts, size_t symbols, uint16_t *costs)
{
    uint32_t sums[FIRN_CONTEXTS_ALPHABET_MAX] = { 0 };

    for (size_t c = 0; c < contexts; c++)
        if (codes->map[c] == t)
            for (size_t s = 0; s < symbols; s++)
                sums[s] += counts[c * symbols + s];
    firn_cost_symbols(logs, sums, symbols, costs);
}

void firn_parse_learn(const struct firn_matched_write_work *matched, struct firn_parse_prices *prices)
{
    const struct firn_matched_codes *codes = &matched->codes;
    size_t symbols = firn_matched_distances(codes->fine);
    uint16_t costs[FIRN_MATCHED_DISTANCES_MAX];

    prices->fine = codes->fine;
    learn_commands(matched, prices);
    for (unsigned t = 0; t < codes->literals.tables; t++)
        learn_table(&matched->logs, &codes->literals, t, matched->counts.literals[0], FIRN_MATCHED_LITERAL_CONTEXTS,
                    256, prices->literals[t]);
    memcpy(prices->literal_map, codes->literals.map, sizeof prices->literal_map);
    for (unsigned t = 0; t < codes->distances.tables; t++) {
        learn_table(&matched->logs, &codes->distances, t, matched->counts.distances, FIRN_MATCHED_DISTANCE_CONTEXTS,
                    symbols, costs);
        for (unsigned c = 0; c < FIRN_MATCHED_DISTANCE_CONTEXTS; c++)
            if (codes->distances.map[c] == t)
                memcpy(prices->distances[c], costs, symbols * sizeof *costs);
    }
}

/* ---- the way ---- */

/* A window of the segment on its way. */
struct walk {
    const uint8_t *raw;
    size_t raw_bytes, start;
    struct firn_parse_work *w;
    struct firn_matched_command *commands;
    size_t made;
    uint32_t run;                      /* literals before the window that no match has followed yet */
    uint32_t before;                   /* length of the last match before the window */
};

/* A repeat as it looks from a place: its distance and what that costs. */
struct offer {
    uint32_t distance, price;          /* price: of everything but distance symbol and command */
    unsigned symbol;
};

/* All lengths from `shortest` to `longest` of the offer, from place `at` of the window. */
static void relax(struct firn_parse_work *w, uint32_t at, const uint32_t *row, uint32_t shortest, uint32_t longest,
                  const struct offer *offer)
{
    uint16_t (*distances)[FIRN_MATCHED_DISTANCES_MAX] = w->prices.distances + (w->places[at].run == 0 ? 4 : 0);
    uint32_t length = shortest, far;

    for (; length <= longest && length < 5; length++) {
        uint32_t price = offer->price + distances[length - 2][offer->symbol] + row[length - 2];

        if (price < w->price[at + length]) {
            w->price[at + length] = price;
            w->arrival[at + length] = (struct firn_parse_arrival){ length, offer->distance };
        }
    }
    far = offer->price + distances[3][offer->symbol];
    for (; length <= longest; length++) {
        uint32_t price = far + row[w->length_codes[length]];

        if (price < w->price[at + length]) {
            w->price[at + length] = price;
            w->arrival[at + length] = (struct firn_parse_arrival){ length, offer->distance };
        }
    }
}

/* What leads on from place `at` of the window; returns the distance of a match that is to be taken at once, or 0. */
static uint32_t step(const struct walk *walk, uint32_t at, uint32_t before, const struct firn_repeats *repeats)
{
    struct firn_parse_work *w = walk->w;
    struct firn_parse_place *here = &w->places[at];
    const struct firn_parse_prices *p = &w->prices;
    size_t place = walk->start + at, left = walk->raw_bytes - place;
    const uint8_t *raw = walk->raw + place;
    uint32_t most = left < FIRN_PARSE_REACH ? (uint32_t)left : FIRN_PARSE_REACH, known = 1, price, base;
    unsigned run_code = firn_matched_run_code(here->run), table, more_bits;
    const uint32_t *row = p->commands[firn_matched_command_context(before)][run_code];
    struct offer offer;

    table = p->literal_map[firn_matched_literal_context(walk->raw, place, here->run == 0, here->recent[0])];
    base = w->price[at] - p->runs[run_code];
    price = base + p->literals[table][raw[0]] + p->runs[firn_matched_run_code(here->run + 1)];
    if (price < w->price[at + 1]) {
        w->price[at + 1] = price;
        w->arrival[at + 1].length = 0;
    }
    if (left < 2)
        return 0;
    base += p->runs[0];
    for (unsigned k = 0; k < FIRN_MATCHED_RECENT; k++) {
        uint32_t distance = here->recent[k], length;

        if (distance > place || firn_bytes_get16(raw) != firn_bytes_get16(raw - distance))
            continue;
        length = firn_repeats_equal(raw, raw - distance, most);
        if (length == FIRN_PARSE_REACH)
            return distance;
        offer = (struct offer){ distance, base, k };
        relax(w, at, row, 2, length, &offer);
    }
    for (uint32_t r = repeats->starts[place]; r < repeats->starts[place + 1]; r++) {
        uint32_t length = firn_repeats_length(repeats->kept[r]), distance = firn_repeats_distance(repeats->kept[r]),
                 more;

        if (length >= FIRN_PARSE_REACH)
            return distance;
        offer.symbol = firn_matched_distance_symbol(distance, p->fine, &more_bits, &more);
        offer.price = base + more_bits * (uint32_t)BIT;
        offer.distance = distance;
        relax(w, at, row, known + 1, length, &offer);
        known = length;
    }
    return 0;
}

/* Settles a place that is reached: the run and the recent distances of the way that leads to it. */
static void settle(struct firn_parse_work *w, uint32_t at)
{
    struct firn_parse_place *place = &w->places[at];
    struct firn_parse_arrival arrival = w->arrival[at];

    if (arrival.length == 0) {
        *place = w->places[at - 1];
        place->run++;
    } else {
        *place = w->places[at - arrival.length];
        place->run = 0;
        firn_matched_recall(place->recent, arrival.distance);
    }
}

/* Turns the way to place `end` round and adds its commands. */
static void add_commands(struct walk *walk, uint32_t end)
{
    const struct firn_parse_arrival *arrival = walk->w->arrival;
    uint32_t *next = walk->w->price;   /* of a place on the way now: where the next one is */
    uint32_t at = end;

    next[end] = end;
    while (at > 0) {
        uint32_t back = at - (arrival[at].length == 0 ? 1 : arrival[at].length);

        next[back] = at;
        at = back;
    }
    while (at != end) {
        at = next[at];
        if (arrival[at].length == 0) {
            walk->run++;
            continue;
        }
        walk->commands[walk->made++] = (struct firn_matched_command){ walk->run, arrival[at].length,
                                                                      arrival[at].distance };
        walk->before = arrival[at].length;
        walk->run = 0;
    }
}

/* A match that is longer than a window reaches. */
static size_t add_long(struct walk *walk, size_t place, uint32_t distance, uint32_t recent[FIRN_MATCHED_RECENT])
{
    size_t left = walk->raw_bytes - place;
    uint32_t length = firn_repeats_equal(walk->raw + place, walk->raw + place - distance, (uint32_t)left);

    walk->commands[walk->made++] = (struct firn_matched_command){ walk->run, length, distance };
    walk->run = 0;
    walk->before = length;
    firn_matched_recall(recent, distance);
    return place + length;
}

size_t firn_parse(const uint8_t *raw, size_t raw_bytes, const struct firn_repeats *repeats,
                  struct firn_matched_command *commands, struct firn_parse_work *work)
{
    struct walk walk = { .raw = raw, .raw_bytes = raw_bytes, .w = work, .commands = commands };
    struct firn_parse_place *places = work->places;
    uint32_t recent[FIRN_MATCHED_RECENT];

    for (uint32_t length = 2; length <= FIRN_PARSE_REACH; length++)
        work->length_codes[length] = (uint8_t)firn_matched_length_code(length);
    firn_matched_recent_start(recent);
    while (walk.start < raw_bytes) {
        size_t left = raw_bytes - walk.start;
        uint32_t at = 0, end = left < FIRN_PARSE_WINDOW ? (uint32_t)left : FIRN_PARSE_WINDOW, taken = 0;

        for (size_t k = 0; k < end + FIRN_PARSE_REACH + 1; k++)
            work->price[k] = NEVER;
        work->price[0] = work->prices.runs[firn_matched_run_code(walk.run)];
        places[0].run = walk.run;
        memcpy(places[0].recent, recent, sizeof recent);
        while (at < end) {
            uint32_t before = places[at].run < at ? work->arrival[at - places[at].run].length : walk.before;

            taken = step(&walk, at, before, repeats);
            if (taken != 0)
                break;
            settle(work, ++at);
        }
        memcpy(recent, places[at].recent, sizeof recent);
        add_commands(&walk, at);
        walk.start += at;
        if (taken != 0)
            walk.start = add_long(&walk, walk.start, taken, recent);
    }
    if (walk.run > 0 || walk.made == 0)
        commands[walk.made++] = (struct firn_matched_command){ walk.run, 0, 0 };
    return walk.made;
}
