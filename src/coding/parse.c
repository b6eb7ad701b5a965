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
};

/* A repeat as it looks from a way to a place: its distance and what that costs. */
struct offer {
    uint32_t distance, price;          /* price: of everything but distance symbol and command */
    uint32_t from;
    unsigned symbol;
};

/* Keeps the cheapest ways in order, one for each latest distance. */
static inline void arrive(struct firn_parse_arrival *ways, unsigned count, uint32_t price, uint32_t length,
                          uint32_t distance, uint32_t latest, uint32_t from)
{
    unsigned at = 0, last;

    if (price >= ways[count - 1].price)
        return;
    while (ways[at].price <= price)
        if (ways[at++].latest == latest)
            return;
    for (last = at; last + 1 < count && ways[last].latest != latest; last++)
        ;
    for (; last > at; last--)
        ways[last] = ways[last - 1];
    ways[at] = (struct firn_parse_arrival){ price, length, distance, latest, from };
}

/* All lengths from `shortest` to `longest` of the offer, from place `at` of the window. */
static void relax(struct firn_parse_work *w, uint32_t at, uint32_t run, const uint32_t *row, uint32_t shortest,
                  uint32_t longest, const struct offer *offer)
{
    uint16_t (*distances)[FIRN_MATCHED_DISTANCES_MAX] = w->prices.distances + (run == 0 ? 4 : 0);
    uint32_t length = shortest, far;

    for (; length <= longest && length < 5; length++)
        arrive(w->arrivals[at + length], w->ways, offer->price + distances[length - 2][offer->symbol] + row[length - 2],
               length, offer->distance, offer->distance, offer->from);
    far = offer->price + distances[3][offer->symbol];
    for (; length <= longest; length++)
        arrive(w->arrivals[at + length], w->ways, far + row[w->length_codes[length]], length, offer->distance,
               offer->distance, offer->from);
}

/* What leads on from a way to place `at` of the window; returns the distance of a match to be taken at once, or 0. */
static uint32_t step(const struct walk *walk, uint32_t at, uint32_t way, const struct firn_repeats *repeats)
{
    struct firn_parse_work *w = walk->w;
    const struct firn_parse_place *here = &w->places[at][way];
    const struct firn_parse_prices *p = &w->prices;
    size_t place = walk->start + at, left = walk->raw_bytes - place;
    const uint8_t *raw = walk->raw + place;
    uint32_t most = left < FIRN_PARSE_REACH ? (uint32_t)left : FIRN_PARSE_REACH, known = 1, recalled = 1, base;
    unsigned run_code = firn_matched_run_code(here->run), table, more_bits;
    const uint32_t *row = p->commands[firn_matched_command_context(here->before)][run_code];
    struct offer offer = { .from = way };

    table = p->literal_map[firn_matched_literal_context(walk->raw, place, here->run == 0, here->recent[0])];
    base = w->arrivals[at][way].price - p->runs[run_code];
    arrive(w->arrivals[at + 1], w->ways,
           base + p->literals[table][raw[0]] + p->runs[firn_matched_run_code(here->run + 1)], 0, 0, here->recent[0],
           way);
    if (left < 2)
        return 0;
    offer.price = base + p->runs[0];
    for (unsigned k = 0; k < FIRN_MATCHED_RECENT; k++) {
        uint32_t distance = here->recent[k], length;

        if (distance > place || firn_bytes_get16(raw) != firn_bytes_get16(raw - distance))
            continue;
        length = firn_repeats_equal(raw, raw - distance, most);
        if (length == FIRN_PARSE_REACH && way == 0)
            return distance;
        offer.distance = distance;
        offer.symbol = k;
        if (length > recalled)
            relax(w, at, here->run, row, recalled + 1, length, &offer);
        recalled = length > recalled ? length : recalled;
    }
    base = offer.price;
    known = recalled;
    for (uint32_t r = repeats->starts[place]; way == 0 && r < repeats->starts[place + 1]; r++) {
        uint32_t length = firn_repeats_length(repeats->kept[r]), distance = firn_repeats_distance(repeats->kept[r]),
                 more;

        if (length >= FIRN_PARSE_REACH)
            return distance;
        offer.symbol = firn_matched_distance_symbol(distance, p->fine, &more_bits, &more);
        offer.price = base + more_bits * (uint32_t)BIT;
        offer.distance = distance;
        if (length > known)
            relax(w, at, here->run, row, known + 1, length, &offer);
        known = length > known ? length : known;
    }
    return 0;
}

/* Settles a place that is reached: the run and the recent distances of each way that leads to it. */
static void settle(struct firn_parse_work *w, uint32_t at)
{
    for (uint32_t way = 0; way < w->ways && w->arrivals[at][way].price < NEVER; way++) {
        const struct firn_parse_arrival *arrival = &w->arrivals[at][way];
        struct firn_parse_place *place = &w->places[at][way];

        if (arrival->length == 0) {
            *place = w->places[at - 1][arrival->from];
            place->run++;
        } else {
            *place = w->places[at - arrival->length][arrival->from];
            place->run = 0;
            place->before = arrival->length;
            firn_matched_recall(place->recent, arrival->distance);
        }
    }
}

/* Follows the cheapest way to place `end` back and adds its commands. */
static void add_commands(struct walk *walk, uint32_t end)
{
    struct firn_parse_arrival *path = walk->w->path;
    size_t steps = 0;

    for (uint32_t at = end, way = 0; at > 0;) {
        path[steps] = walk->w->arrivals[at][way];
        at -= path[steps].length == 0 ? 1 : path[steps].length;
        way = path[steps++].from;
    }
    while (steps-- > 0) {
        if (path[steps].length == 0) {
            walk->run++;
            continue;
        }
        walk->commands[walk->made++] = (struct firn_matched_command){ walk->run, path[steps].length,
                                                                      path[steps].distance };
        walk->run = 0;
    }
}

/* A match that is longer than a window reaches; `place` is behind it then. */
static size_t add_long(struct walk *walk, size_t at, uint32_t distance, struct firn_parse_place *place)
{
    size_t left = walk->raw_bytes - at;
    uint32_t length = firn_repeats_equal(walk->raw + at, walk->raw + at - distance, (uint32_t)left);

    walk->commands[walk->made++] = (struct firn_matched_command){ walk->run, length, distance };
    walk->run = 0;
    place->run = 0;
    place->before = length;
    firn_matched_recall(place->recent, distance);
    return at + length;
}

/* Nothing is reached but the first place. */
static void start_window(struct walk *walk, uint32_t end, const struct firn_parse_place *place)
{
    struct firn_parse_work *w = walk->w;

    for (size_t k = 0; k < end + FIRN_PARSE_REACH + 1; k++)
        for (size_t way = 0; way < w->ways; way++)
            w->arrivals[k][way] = (struct firn_parse_arrival){ .price = NEVER };
    w->arrivals[0][0].price = w->prices.runs[firn_matched_run_code(place->run)];
    w->places[0][0] = *place;
}

size_t firn_parse(const uint8_t *raw, size_t raw_bytes, const struct firn_repeats *repeats,
                  unsigned ways, struct firn_matched_command *commands, struct firn_parse_work *work)
{
    struct walk walk = { .raw = raw, .raw_bytes = raw_bytes, .w = work, .commands = commands };
    struct firn_parse_place place = { .run = 0 };

    work->ways = ways;
    for (uint32_t length = 2; length <= FIRN_PARSE_REACH; length++)
        work->length_codes[length] = (uint8_t)firn_matched_length_code(length);
    firn_matched_recent_start(place.recent);
    while (walk.start < raw_bytes) {
        size_t left = raw_bytes - walk.start;
        uint32_t at = 0, end = left < FIRN_PARSE_WINDOW ? (uint32_t)left : FIRN_PARSE_WINDOW, taken = 0;

        start_window(&walk, end, &place);
        while (at < end) {
            taken = step(&walk, at, 0, repeats);
            if (taken != 0)
                break;
            for (uint32_t way = 1; way < ways && work->arrivals[at][way].price < NEVER; way++)
                step(&walk, at, way, repeats);
            settle(work, ++at);
        }
        place = work->places[at][0];
        add_commands(&walk, at);
        walk.start += at;
        if (taken != 0)
            walk.start = add_long(&walk, walk.start, taken, &place);
    }
    if (walk.run > 0 || walk.made == 0)
        commands[walk.made++] = (struct firn_matched_command){ walk.run, 0, 0 };
    return walk.made;
}
