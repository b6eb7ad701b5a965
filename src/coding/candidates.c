/*
 * coding/candidates.c - which methods are worth trying
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/candidates.h"

#include "coding/branches.h"
#include "coding/histogram.h"
#include "coding/sample.h"

#include <string.h>

enum {
    HEAD_BYTES = FIRN_CANDIDATES_HEAD_BYTES,
    PASSES = 4,                        /* of parse and codes in turn */
    TRIES_THOROUGH = 48,
    TRIES_NORMAL = 12,
    QUICK_TABLES = 6,                  /* of numbers */
    SHORT_BYTES = 1 << 16,             /* below, everything is tried */
    BRANCH_EVERY_BYTES = 200,          /* at least one turned in so many, and it is code */
    TRIAL_BYTES = 1 << 16,             /* a piece that tells of the rest of a segment, if that is large */
    HOPELESS = 505,                    /* 1/64 bits a byte */
    REPEATED_LEAST = 64,               /* one byte in so many must lie in a repeat */
    LITTLE = 32                        /* one bit of so many bytes */
};

static size_t cell_bytes_of(enum firn_segment_effort effort)
{
    return effort == FIRN_SEGMENT_EFFORT_QUICK ? 16384 : effort == FIRN_SEGMENT_EFFORT_NORMAL ? 8192 : 4096;
}

/* The first two bytes; `bytes` follow, or none. Returns the size of the segment. */
static size_t finish(enum firn_segment_method method, enum firn_segment_transform transform, size_t bytes,
                     uint8_t *coded)
{
    coded[0] = (uint8_t)method;
    coded[1] = (uint8_t)transform;
    return bytes == 0 ? 0 : bytes + HEAD_BYTES;
}

size_t firn_candidates_stretches(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                                 struct firn_candidates_work *w)
{
    return finish(FIRN_SEGMENT_PREFIX, FIRN_SEGMENT_PLAIN, firn_stretches_write(raw, raw_bytes, cell_bytes_of(effort),
                  coded + HEAD_BYTES, raw_bytes - 1, &w->other.stretches), coded);
}

static size_t write_samples(const uint8_t *raw, size_t raw_bytes, const struct firn_samples_shape *shape,
                            unsigned tables_max, uint8_t *coded, struct firn_candidates_work *w)
{
    w->other.samples.logs = w->logs;
    return finish(FIRN_SEGMENT_SAMPLES, FIRN_SEGMENT_PLAIN,
                  firn_samples_write(shape, raw, raw_bytes, tables_max, coded + HEAD_BYTES, raw_bytes - 1,
                                     &w->other.samples), coded);
}

size_t firn_candidates_samples(const uint8_t *raw, size_t raw_bytes, const struct firn_samples_shape *shape,
                               uint8_t *coded, struct firn_candidates_work *w)
{
    return write_samples(raw, raw_bytes, shape, FIRN_CONTEXTS_TABLES_MAX, coded, w);
}

/* Parse and codes in turn, each learning from the other. Returns the bits of codes and streams. */
static uint64_t parse_well(const uint8_t *bytes, size_t raw_bytes, size_t *count, struct firn_candidates_work *w)
{
    uint64_t bits = 0;

    firn_repeats_find(bytes, raw_bytes, FIRN_PARSE_REACH, TRIES_THOROUGH, &w->find.repeats);
    firn_parse_guess(&w->logs, bytes, raw_bytes, &w->parse.prices);
    for (unsigned pass = 0; pass < PASSES; pass++) {
        unsigned ways = pass + 1 < PASSES ? 1 : FIRN_PARSE_WAYS;       /* prices settle as well with one */

        *count = firn_parse(bytes, raw_bytes, &w->find.repeats, ways, w->commands, &w->parse);
        bits = firn_matched_make_codes(bytes, w->commands, *count, &w->matched);
        if (bits > 8 * (uint64_t)raw_bytes - raw_bytes / LITTLE)
            break;                     /* there is next to nothing to gain */
        firn_parse_learn(&w->matched, &w->parse.prices);
    }
    return bits;
}

/* Commands and codes, not written yet. Returns the bits of codes and streams. */
static uint64_t plan_matched(const uint8_t *bytes, size_t raw_bytes, enum firn_segment_effort effort, size_t *count,
                             struct firn_candidates_work *w)
{
    bool quick = effort == FIRN_SEGMENT_EFFORT_QUICK;

    w->matched.logs = w->logs;
    if (effort == FIRN_SEGMENT_EFFORT_THOROUGH)
        return parse_well(bytes, raw_bytes, count, w);
    *count = firn_hasty_parse(bytes, raw_bytes, quick ? 1 : TRIES_NORMAL, w->commands, &w->find.hasty);
    return (quick ? firn_matched_make_codes_hastily : firn_matched_make_codes)(bytes, w->commands, *count, &w->matched);
}

static size_t write_matched(const uint8_t *bytes, size_t raw_bytes, enum firn_segment_transform transform, size_t count,
                            uint8_t *coded, struct firn_candidates_work *w)
{
    return finish(FIRN_SEGMENT_MATCHED, transform,
                  firn_matched_write(bytes, w->commands, count, coded + HEAD_BYTES, raw_bytes - 1, &w->matched), coded);
}

size_t firn_candidates_matched(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort,
                               enum firn_segment_transform transform, uint8_t *coded, struct firn_candidates_work *w)
{
    const uint8_t *bytes = raw;
    size_t count;

    if (transform == FIRN_SEGMENT_BRANCHES) {
        memcpy(w->turned, raw, raw_bytes);
        firn_branches_turn(w->turned, raw_bytes);
        bytes = w->turned;
    }
    plan_matched(bytes, raw_bytes, effort, &count, w);
    return write_matched(bytes, raw_bytes, transform, count, coded, w);
}

/* Nearly all of what texts are made of; then a glance must tell that there are numbers. */
static bool is_text(const uint8_t *raw, size_t raw_bytes)
{
    size_t others = 0;

    for (size_t i = 0; i < raw_bytes; i++)
        others += (raw[i] < 32 && raw[i] != 9 && raw[i] != 10 && raw[i] != 13) | (raw[i] > 126);
    return others < raw_bytes / 32;
}

/* Keeps what stands in w->room when it is smaller than what was best. */
static void keep(size_t bytes, size_t *best, uint8_t *coded, const struct firn_candidates_work *w)
{
    if (bytes != 0 && (*best == 0 || bytes < *best)) {
        memcpy(coded, w->room, bytes);
        *best = bytes;
    }
}

/* 1/64 bits a byte, each for itself. */
static uint32_t plain_price(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes)
{
    uint32_t counts[256];
    uint16_t costs[256];
    uint64_t sum = 0;

    firn_histogram_count(raw, raw_bytes, counts);
    firn_cost_symbols(logs, counts, 256, costs);
    for (size_t s = 0; s < 256; s++)
        sum += (uint64_t)counts[s] * costs[s];
    return (uint32_t)(sum / raw_bytes);
}

/* Whether hardly anything is repeated: then a better search is spared. Files of which there are two are found. */
static bool is_hopeless(const uint8_t *raw, size_t raw_bytes, struct firn_candidates_work *w)
{
    size_t count, repeated = 0;

    if (raw_bytes < TRIAL_BYTES)
        return false;
    count = firn_hasty_parse(raw, raw_bytes, 1, w->commands, &w->find.hasty);
    for (size_t i = 0; i < count; i++)
        repeated += w->commands[i].length;
    return repeated < raw_bytes / REPEATED_LEAST;
}

/* Whether matches are far behind numbers, which came to `samples` bytes, in a piece out of the middle. */
static bool are_behind(const uint8_t *bytes, size_t raw_bytes, size_t samples, struct firn_candidates_work *w)
{
    size_t count;

    return raw_bytes >= 4 * TRIAL_BYTES &&
           plan_matched(bytes + raw_bytes / 2, TRIAL_BYTES, FIRN_SEGMENT_EFFORT_QUICK, &count, w) / 8 >
               samples / 2 * (TRIAL_BYTES / 1024) / (raw_bytes / 1024) * 3;
}

/* Whether it looks like code, by so many turned bytes; they stand in w->turned then. A piece tells for most of it. */
static bool is_code(const uint8_t *raw, size_t raw_bytes, struct firn_candidates_work *w)
{
    if (raw_bytes >= 4 * TRIAL_BYTES) {
        size_t turned = 0;

        for (size_t k = 0; k < 4; k++) {
            memcpy(w->turned, raw + raw_bytes / 4 * k, TRIAL_BYTES / 4);
            turned += firn_branches_turn(w->turned, TRIAL_BYTES / 4);
        }
        if (turned < TRIAL_BYTES / (4 * BRANCH_EVERY_BYTES))
            return false;
    }
    memcpy(w->turned, raw, raw_bytes);
    return firn_branches_turn(w->turned, raw_bytes) > raw_bytes / BRANCH_EVERY_BYTES;
}

/*
 * Matches, after numbers came to `samples` bytes, 0 if they were not tried. What numbers code well, repeats seldom code
 * better: a hasty look tells.
 */
static void try_matched(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, size_t samples,
                        size_t *best, uint8_t *coded, struct firn_candidates_work *w)
{
    bool code = is_code(raw, raw_bytes, w);
    const uint8_t *bytes = code ? w->turned : raw;
    uint64_t hasty = 0;
    size_t count;

    if (samples != 0 && effort != FIRN_SEGMENT_EFFORT_THOROUGH && are_behind(bytes, raw_bytes, samples, w))
        return;
    if (samples != 0 || effort == FIRN_SEGMENT_EFFORT_QUICK)
        hasty = plan_matched(bytes, raw_bytes, FIRN_SEGMENT_EFFORT_QUICK, &count, w) / 8;
    if (samples != 0 && hasty > samples + (effort == FIRN_SEGMENT_EFFORT_QUICK ? 0 : samples / 4))
        return;
    if (effort != FIRN_SEGMENT_EFFORT_QUICK)
        plan_matched(bytes, raw_bytes, effort, &count, w);
    else if (hasty > raw_bytes)
        return;
    keep(write_matched(bytes, raw_bytes, code ? FIRN_SEGMENT_BRANCHES : FIRN_SEGMENT_PLAIN, count, w->room, w), best,
         coded, w);
}

size_t firn_candidates_best(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                            struct firn_candidates_work *w)
{
    bool thorough = effort == FIRN_SEGMENT_EFFORT_THOROUGH, quick = effort == FIRN_SEGMENT_EFFORT_QUICK;
    struct firn_samples_shape shape;
    size_t best = 0, samples = 0;
    uint32_t price;

    if (quick && firn_sample_is_even(raw, raw_bytes))
        return 0;
    firn_cost_prepare(&w->logs);
    price = plain_price(&w->logs, raw, raw_bytes);
    if (firn_survey(&w->logs, raw, raw_bytes, thorough && !is_text(raw, raw_bytes), &shape, &w->other.survey) < price) {
        samples = write_samples(raw, raw_bytes, &shape, quick ? QUICK_TABLES : FIRN_CONTEXTS_TABLES_MAX, w->room, w);
        keep(samples, &best, coded, w);
    }
    if (!thorough && samples == 0 && price > HOPELESS && is_hopeless(raw, raw_bytes, w))
        return 0;
    try_matched(raw, raw_bytes, effort, samples, &best, coded, w);
    if (best == 0 || (!quick && (best > raw_bytes / 2 || raw_bytes < SHORT_BYTES)))
        keep(firn_candidates_stretches(raw, raw_bytes, effort, w->room, w), &best, coded, w);
    return best;
}
