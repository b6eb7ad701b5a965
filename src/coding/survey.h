/*
 * coding/survey.h - what numbers the bytes of a segment might be
 *
 * Room: coding. Pure. Looks at pieces of the segment only: tries widths, byte orders and channels with the simplest
 * prediction, then looks for the length of a row, then tries the predictors. What comes out is a guess; the real coder
 * decides whether it is any good.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_CODING_SURVEY_H
#define FIRN_CODING_SURVEY_H

#include "coding/samples.h"

enum {
    FIRN_SURVEY_PIECES = 3,
    FIRN_SURVEY_PIECE_BYTES = 24576,
    FIRN_SURVEY_LAG_MAX = 20000        /* bytes of a row that are looked for */
};

struct firn_survey_work {
    int32_t x[FIRN_SURVEY_PIECE_BYTES], residuals[FIRN_SURVEY_PIECE_BYTES];
    uint32_t sums[FIRN_SURVEY_LAG_MAX + 1];
    uint32_t counts[2][256];
};

/*
 * Fills in the shape that looks cheapest. Returns 1/64 bits for a byte (so 512 is as good as nothing), by statistics
 * without contexts; UINT32_MAX when the segment is too short, or, unless always is set, when a glance says that it
 * holds no numbers.
 */
uint32_t firn_survey(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes, bool always,
                     struct firn_samples_shape *shape, struct firn_survey_work *w);

#endif
