/*
 * coding/segment.c - a segment: which methods are tried, and who codes what
 *
 * Layout: format-spec/segment.md. Byte 0 is the method, byte 1 the transform.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/segment.h"

#include "coding/branches.h"
#include "coding/candidates.h"
#include "coding/histogram.h"
#include "coding/matched.h"
#include "coding/sample.h"
#include "coding/samples.h"
#include "coding/stretches.h"

#include "base/limits.h"

#include <string.h>

enum { HEAD_BYTES = FIRN_CANDIDATES_HEAD_BYTES };

_Static_assert((int)FIRN_SEGMENT_RAW_MAX == (int)FIRN_LIMIT_SEGMENT_RAW_BYTES, "one limit, two names");

union decode_work {
    struct firn_stretches_read_work stretches;
    struct firn_matched_read_work matched;
    struct firn_samples_read_work samples;
};

size_t firn_segment_bound(size_t raw_bytes)
{
    return raw_bytes + HEAD_BYTES;
}

size_t firn_segment_encode_work_bytes(void)
{
    return sizeof(struct firn_candidates_work);
}

size_t firn_segment_decode_work_bytes(void)
{
    return sizeof(union decode_work);
}

/* ---- writing ---- */

static void put_stored(const uint8_t *raw, size_t raw_bytes, uint8_t *coded, size_t *coded_bytes)
{
    coded[0] = FIRN_SEGMENT_STORED;
    coded[1] = FIRN_SEGMENT_PLAIN;
    memcpy(coded + HEAD_BYTES, raw, raw_bytes);
    *coded_bytes = HEAD_BYTES + raw_bytes;
}

static bool is_run(const uint8_t *raw, size_t raw_bytes)
{
    return raw_bytes > 1 && memcmp(raw, raw + 1, raw_bytes - 1) == 0;
}

enum firn_status firn_segment_encode(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort,
                                     uint8_t *coded, size_t *coded_bytes, void *work)
{
    struct firn_candidates_work *w = work;

    if (raw_bytes < 1 || raw_bytes > FIRN_SEGMENT_RAW_MAX || (unsigned)effort > FIRN_SEGMENT_EFFORT_THOROUGH)
        return FIRN_BAD_ARGUMENT;
    if (effort == FIRN_SEGMENT_EFFORT_NONE) {
        put_stored(raw, raw_bytes, coded, coded_bytes);
    } else if (is_run(raw, raw_bytes)) {
        put_stored(raw, 1, coded, coded_bytes);
        coded[0] = FIRN_SEGMENT_RUN;
    } else {
        *coded_bytes = firn_candidates_best(raw, raw_bytes, effort, coded, w);
        if (*coded_bytes == 0)
            put_stored(raw, raw_bytes, coded, coded_bytes);
    }
    return FIRN_OK;
}

/* ---- reading ---- */

/* Whether the first two bytes, and the size where it is told by them, are those of a segment. */
static bool is_known(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes)
{
    if (raw_bytes < 1 || raw_bytes > FIRN_SEGMENT_RAW_MAX || coded_bytes <= HEAD_BYTES)
        return false;
    switch (coded[0]) {
    case FIRN_SEGMENT_STORED:
        return coded[1] == FIRN_SEGMENT_PLAIN && coded_bytes == HEAD_BYTES + raw_bytes;
    case FIRN_SEGMENT_RUN:
        return coded[1] == FIRN_SEGMENT_PLAIN && coded_bytes == HEAD_BYTES + 1;
    case FIRN_SEGMENT_MATCHED:
        return coded[1] == FIRN_SEGMENT_PLAIN || coded[1] == FIRN_SEGMENT_BRANCHES;
    case FIRN_SEGMENT_PREFIX:
    case FIRN_SEGMENT_SAMPLES:
        return coded[1] == FIRN_SEGMENT_PLAIN;
    default:
        return false;
    }
}

enum firn_status firn_segment_decode(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                     void *work)
{
    union decode_work *w = work;
    const uint8_t *body = coded + HEAD_BYTES;
    enum firn_status status = FIRN_OK;

    if (!is_known(coded, coded_bytes, raw_bytes))
        return FIRN_BAD_DATA;
    coded_bytes -= HEAD_BYTES;
    switch ((enum firn_segment_method)coded[0]) {
    case FIRN_SEGMENT_STORED:
        memcpy(raw, body, raw_bytes);
        break;
    case FIRN_SEGMENT_RUN:
        memset(raw, body[0], raw_bytes);
        break;
    case FIRN_SEGMENT_PREFIX:
        status = firn_stretches_read(body, coded_bytes, raw, raw_bytes, &w->stretches);
        break;
    case FIRN_SEGMENT_MATCHED:
        status = firn_matched_read(body, coded_bytes, raw, raw_bytes, &w->matched);
        break;
    case FIRN_SEGMENT_SAMPLES:
        status = firn_samples_read(body, coded_bytes, raw, raw_bytes, &w->samples);
        break;
    }
    if (status == FIRN_OK && coded[1] == FIRN_SEGMENT_BRANCHES)
        firn_branches_turn_back(raw, raw_bytes);
    return status;
}

enum { CODES_MAX = 3 * FIRN_CONTEXTS_TABLES_MAX };

static size_t list_codes(const char *of, const struct firn_contexts *contexts, size_t symbols,
                         struct firn_segment_code *codes)
{
    for (unsigned t = 0; t < contexts->tables; t++)
        codes[t] = (struct firn_segment_code){ of, contexts->lengths[t], symbols };
    return contexts->tables;
}

/* What is no row of stretches is told as a single one. */
static enum firn_status examine_whole(const uint8_t *coded, size_t coded_bytes, const uint8_t *raw, size_t raw_bytes,
                                      union decode_work *w, firn_segment_teller *tell, void *self)
{
    uint32_t counts[256];
    struct firn_segment_code codes[CODES_MAX];
    struct firn_segment_stretch stretch = { .codes = codes,
                                            .method = (enum firn_segment_method)coded[0],
                                            .raw_bytes = raw_bytes,
                                            .coded_bytes = coded_bytes - HEAD_BYTES,
                                            .counts = counts };
    const uint8_t *body = coded + HEAD_BYTES;
    enum firn_status status = FIRN_OK;

    if (stretch.method == FIRN_SEGMENT_MATCHED)
        status = firn_matched_measure(body, stretch.coded_bytes, &stretch.table_bits, &stretch.code_bits, &w->matched);
    else if (stretch.method == FIRN_SEGMENT_SAMPLES)
        status = firn_samples_measure(body, stretch.coded_bytes, raw_bytes, &stretch.table_bits, &stretch.code_bits,
                                      &w->samples);
    if (status != FIRN_OK)
        return status;
    if (stretch.method == FIRN_SEGMENT_MATCHED) {
        const struct firn_matched_codes *m = &w->matched.codes;

        stretch.code_count = list_codes("commands", &m->commands, FIRN_MATCHED_COMMANDS, codes);
        stretch.code_count += list_codes("distances", &m->distances, firn_matched_distances(m->fine),
                                         codes + stretch.code_count);
        stretch.code_count += list_codes("literals", &m->literals, 256, codes + stretch.code_count);
    } else if (stretch.method == FIRN_SEGMENT_SAMPLES) {
        stretch.code_count = list_codes("tokens", &w->samples.codes, 256, codes);
    }
    firn_histogram_count(raw, raw_bytes, counts);
    tell(self, &stretch);
    return FIRN_OK;
}

enum firn_status firn_segment_examine(const uint8_t *coded, size_t coded_bytes, const uint8_t *raw, size_t raw_bytes,
                                      void *work, firn_segment_teller *tell, void *self)
{
    union decode_work *w = work;

    if (!is_known(coded, coded_bytes, raw_bytes))
        return FIRN_BAD_DATA;
    if (coded[0] == FIRN_SEGMENT_PREFIX)
        return firn_stretches_examine(coded + HEAD_BYTES, coded_bytes - HEAD_BYTES, raw, raw_bytes, &w->stretches, tell,
                                      self);
    return examine_whole(coded, coded_bytes, raw, raw_bytes, w, tell, self);
}
