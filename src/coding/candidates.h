/*
 * coding/candidates.h - a segment coded by one method after another, the smallest kept
 *
 * Room: coding. Pure. Which are tried depends on the effort and on what quick looks say; each can also be asked for by
 * itself.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_CANDIDATES_H
#define FIRN_CODING_CANDIDATES_H

#include "coding/hasty.h"
#include "coding/matched.h"
#include "coding/parse.h"
#include "coding/repeats.h"
#include "coding/samples.h"
#include "coding/stretches.h"
#include "coding/survey.h"

#include "firn/segment.h"

enum { FIRN_CANDIDATES_HEAD_BYTES = 2 };           /* method and transform */

struct firn_candidates_work {
    struct firn_cost_logs logs;
    struct firn_matched_command commands[FIRN_PARSE_COMMANDS_MAX];
    struct firn_matched_write_work matched;
    struct firn_parse_work parse;
    union {
        struct firn_repeats repeats;
        struct firn_hasty_work hasty;
    } find;
    union {
        struct firn_stretches_write_work stretches;
        struct firn_survey_work survey;
        struct firn_samples_write_work samples;
    } other;
    uint8_t turned[FIRN_SEGMENT_RAW_MAX];
    uint8_t room[FIRN_SEGMENT_RAW_MAX + FIRN_CANDIDATES_HEAD_BYTES];
};

/*
 * All write a whole segment of fewer than raw_bytes + 2 bytes into `coded`, which has room for as many, and return its
 * size; 0 when it would not be smaller than stored.
 */
size_t firn_candidates_best(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                            struct firn_candidates_work *w);
size_t firn_candidates_stretches(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                                 struct firn_candidates_work *w);
size_t firn_candidates_matched(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort,
                               enum firn_segment_transform transform, uint8_t *coded, struct firn_candidates_work *w);
size_t firn_candidates_samples(const uint8_t *raw, size_t raw_bytes, const struct firn_samples_shape *shape,
                               uint8_t *coded, struct firn_candidates_work *w);

#endif
