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
    PASSES = 3,                        /* of parse and codes in turn */
    TRIES_THOROUGH = 48,
    TRIES_NORMAL = 12,
    SHORT_BYTES = 1 << 16,             /* below, everything is tried */
    BRANCH_EVERY_BYTES = 200,          /* at least one turned in so many, and it is code */
    TRIAL_BYTES = 1 << 16,             /* of what looks hopeless, so much is tried before the rest is */
    HOPELESS = 505                     /* 1/64 bits a byte */
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

/* The bytes to be coded. */
static const uint8_t *transformed(const uint8_t *raw, size_t raw_bytes, enum firn_segment_transform transform,
                                  struct firn_candidates_work *w)
{
    if (transform == FIRN_SEGMENT_PLAIN)
        return raw;
    memcpy(w->turned, raw, raw_bytes);
    firn_branches_turn(w->turned, raw_bytes);
    return w->turned;
}

size_t firn_candidates_stretches(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                                 struct firn_candidates_work *w)
{
    return finish(FIRN_SEGMENT_PREFIX, FIRN_SEGMENT_PLAIN, firn_stretches_write(raw, raw_bytes, cell_bytes_of(effort),
                  coded + HEAD_BYTES, raw_bytes - 1, &w->other.stretches), coded);
}

size_t firn_candidates_samples(const uint8_t *raw, size_t raw_bytes, const struct firn_samples_shape *shape,
                               uint8_t *coded, struct firn_candidates_work *w)
{
    w->other.samples.logs = w->logs;
    return finish(FIRN_SEGMENT_SAMPLES, FIRN_SEGMENT_PLAIN,
                  firn_samples_write(shape, raw, raw_bytes, FIRN_CONTEXTS_TABLES_MAX, coded + HEAD_BYTES, raw_bytes - 1,
                                     &w->other.samples), coded);
}

/* Parse and codes in turn, each learning from the other. */
static size_t parse_well(const uint8_t *bytes, size_t raw_bytes, struct firn_candidates_work *w)
{
    size_t count = 0;

    firn_repeats_find(bytes, raw_bytes, FIRN_PARSE_REACH, TRIES_THOROUGH, &w->find.repeats);
    firn_parse_guess(&w->logs, bytes, raw_bytes, &w->parse.prices);
    for (unsigned pass = 0; pass < PASSES; pass++) {
        count = firn_parse(bytes, raw_bytes, &w->find.repeats, w->commands, &w->parse);
        firn_matched_make_codes(bytes, w->commands, count, FIRN_CONTEXTS_TABLES_MAX, true, &w->matched);
        firn_parse_learn(&w->matched, &w->parse.prices);
    }
    return count;
}

size_t firn_candidates_matched(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort,
                               enum firn_segment_transform transform, uint8_t *coded, struct firn_candidates_work *w)
{
    const uint8_t *bytes = transformed(raw, raw_bytes, transform, w);
    bool quick = effort == FIRN_SEGMENT_EFFORT_QUICK;
    size_t count;

    w->matched.logs = w->logs;
    w->matched.codes.fine = 0;
    if (effort == FIRN_SEGMENT_EFFORT_THOROUGH) {
        count = parse_well(bytes, raw_bytes, w);
    } else {
        count = firn_hasty_parse(bytes, raw_bytes, quick ? 1 : TRIES_NORMAL, w->commands, &w->find.hasty);
        firn_matched_make_codes(bytes, w->commands, count, quick ? 2 : FIRN_CONTEXTS_TABLES_MAX, !quick, &w->matched);
    }
    return finish(FIRN_SEGMENT_MATCHED, transform,
                  firn_matched_write(bytes, w->commands, count, coded + HEAD_BYTES, raw_bytes - 1, &w->matched), coded);
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

/* Whether a piece out of the middle gains nothing: then the rest, which looks alike, is not tried either. */
static bool is_hopeless(const uint8_t *raw, size_t raw_bytes, struct firn_candidates_work *w)
{
    size_t size;

    if (raw_bytes < 4 * TRIAL_BYTES)
        return false;
    size = firn_candidates_matched(raw + raw_bytes / 2, TRIAL_BYTES, FIRN_SEGMENT_EFFORT_QUICK, FIRN_SEGMENT_PLAIN,
                                   w->room, w);
    return size == 0 || size > TRIAL_BYTES - TRIAL_BYTES / 128;
}

size_t firn_candidates_best(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                            struct firn_candidates_work *w)
{
    enum firn_segment_transform transform = FIRN_SEGMENT_PLAIN;
    bool thorough = effort == FIRN_SEGMENT_EFFORT_THOROUGH;
    struct firn_samples_shape shape;
    size_t best = 0, samples = 0;
    uint32_t price;

    if (firn_sample_is_even(raw, raw_bytes))
        return 0;
    firn_cost_prepare(&w->logs);
    price = plain_price(&w->logs, raw, raw_bytes);
    if (firn_survey(&w->logs, raw, raw_bytes, thorough, &shape, &w->other.survey) < price) {
        samples = firn_candidates_samples(raw, raw_bytes, &shape, w->room, w);
        keep(samples, &best, coded, w);
    }
    if (!thorough && samples == 0 && price > HOPELESS && is_hopeless(raw, raw_bytes, w))
        return 0;
    memcpy(w->turned, raw, raw_bytes);
    if (firn_branches_turn(w->turned, raw_bytes) > raw_bytes / BRANCH_EVERY_BYTES)
        transform = FIRN_SEGMENT_BRANCHES;
    if (samples != 0) {
        /* what numbers code well, repeats seldom code better: a hasty look tells */
        size_t hasty = firn_candidates_matched(raw, raw_bytes, FIRN_SEGMENT_EFFORT_QUICK, transform, w->room, w);

        if (hasty == 0 || hasty > samples + samples / 4)
            return best;
        if (effort == FIRN_SEGMENT_EFFORT_QUICK) {
            keep(hasty, &best, coded, w);
            return best;
        }
    }
    keep(firn_candidates_matched(raw, raw_bytes, effort, transform, w->room, w), &best, coded, w);
    if (best == 0 || best > raw_bytes / 2 || raw_bytes < SHORT_BYTES)
        keep(firn_candidates_stretches(raw, raw_bytes, effort, w->room, w), &best, coded, w);
    return best;
}
