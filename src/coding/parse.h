/*
 * coding/parse.h - which of the repeats to use: the cheapest way through a segment, by the codes' own prices
 *
 * Room: coding. Pure. A place is reached by a literal or at the end of a match; the cheapest ways to every place are
 * found from left to right, window by window, with the recent distances they leave. Prices come from a parse before,
 * through its codes; so codes and parse are made in turn.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_PARSE_H
#define FIRN_CODING_PARSE_H

#include "coding/matched.h"
#include "coding/repeats.h"

#include <stddef.h>
#include <stdint.h>

enum {
    FIRN_PARSE_WINDOW = 1 << 15,
    FIRN_PARSE_REACH = 160,            /* matches so long or longer are taken at once */
    FIRN_PARSE_WAYS = 3,               /* kept to each place: a dearer one may leave a better distance to recall */
    FIRN_PARSE_COMMANDS_MAX = FIRN_SEGMENT_RAW_MAX / FIRN_MATCHED_LENGTH_MIN + 1
};

/* What lies behind a place on a way that leads there. */
struct firn_parse_place {
    uint32_t run;                      /* literals since the last match */
    uint32_t before;                   /* length of the last match */
    uint32_t recent[FIRN_MATCHED_RECENT];
};

/*
 * A way that leads to a place, by its last step: a match of that length and distance, from the way numbered `from` of
 * the place where it starts; length 0: a literal.
 */
struct firn_parse_arrival {
    uint32_t price, length, distance;
    uint32_t latest;                   /* the latest distance then; ways to one place differ in it */
    uint32_t from;
};

/* Everything in 1/64 bit. */
struct firn_parse_prices {
    uint16_t literals[FIRN_CONTEXTS_TABLES_MAX][256];
    uint8_t literal_map[FIRN_MATCHED_LITERAL_CONTEXTS];
    uint32_t commands[FIRN_MATCHED_COMMAND_CONTEXTS][FIRN_MATCHED_RUN_CODES][FIRN_MATCHED_LENGTH_CODES];
    uint32_t runs[FIRN_MATCHED_RUN_CODES];         /* what a run is guessed to cost as long as no match follows */
    uint16_t distances[FIRN_MATCHED_DISTANCE_CONTEXTS][FIRN_MATCHED_DISTANCES_MAX];
    unsigned fine;
};

struct firn_parse_work {
    struct firn_parse_prices prices;
    uint8_t length_codes[FIRN_PARSE_REACH + 1];
    unsigned ways;                     /* kept to each place */
    struct firn_parse_arrival arrivals[FIRN_PARSE_WINDOW + FIRN_PARSE_REACH + 1][FIRN_PARSE_WAYS];
    struct firn_parse_place places[FIRN_PARSE_WINDOW + 1][FIRN_PARSE_WAYS];
    struct firn_parse_arrival path[FIRN_PARSE_WINDOW + 1];
};

/* Prices for a first parse, from the bytes' counts alone. */
void firn_parse_guess(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes,
                      struct firn_parse_prices *prices);

/* Prices by the codes and counts that firn_matched_make_codes left in `matched`. */
void firn_parse_learn(const struct firn_matched_write_work *matched, struct firn_parse_prices *prices);

/*
 * Returns the number of commands, at most FIRN_PARSE_COMMANDS_MAX. Prices stand in work->prices.
 * ways: 1 .. FIRN_PARSE_WAYS, kept to each place.
 */
size_t firn_parse(const uint8_t *raw, size_t raw_bytes, const struct firn_repeats *repeats,
                  unsigned ways, struct firn_matched_command *commands, struct firn_parse_work *work);

#endif
