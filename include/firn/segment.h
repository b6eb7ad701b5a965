/*
 * firn/segment.h - coding a stretch of at most 1 MiB so that it stands alone
 *
 * Room: coding. Methods: stored, run, prefix, matched, samples. The decoding tables stand inside the coded bytes;
 * nothing outside them is needed. Layout: format-spec/segment.md. The coded bytes carry no digest: whoever keeps them
 * must (the container does).
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#ifndef FIRN_SEGMENT_H
#define FIRN_SEGMENT_H

#include "firn/status.h"

#include <stddef.h>
#include <stdint.h>

enum { FIRN_SEGMENT_RAW_MAX = 1 << 20 };

enum firn_segment_method {
    FIRN_SEGMENT_STORED = 0,
    FIRN_SEGMENT_RUN = 1,
    FIRN_SEGMENT_PREFIX = 2,           /* stretches, each with a code of its own */
    FIRN_SEGMENT_MATCHED = 3,          /* literals under contexts, and repeats of what came before */
    FIRN_SEGMENT_SAMPLES = 4           /* numbers, predicted from their neighbours */
};

/* What was done to the raw bytes before they were coded. */
enum firn_segment_transform {
    FIRN_SEGMENT_PLAIN = 0,            /* nothing */
    FIRN_SEGMENT_BRANCHES = 1          /* x86 branches tell places, not distances */
};

/* How much time the encoder may spend on density. The output depends on it; the decoder does not care. */
enum firn_segment_effort {
    FIRN_SEGMENT_EFFORT_NONE,          /* store */
    FIRN_SEGMENT_EFFORT_QUICK,
    FIRN_SEGMENT_EFFORT_NORMAL,
    FIRN_SEGMENT_EFFORT_THOROUGH
};

/* The most coded bytes that raw_bytes raw ones can become: stored costs a few bytes of header. */
FIRN_API size_t firn_segment_bound(size_t raw_bytes);

/* Work space, in bytes, aligned to 64; needs no set-up and means nothing afterwards. */
FIRN_API size_t firn_segment_encode_work_bytes(void);
FIRN_API size_t firn_segment_decode_work_bytes(void);

/*
 * raw_bytes    1 .. FIRN_SEGMENT_RAW_MAX
 * coded        out, firn_segment_bound(raw_bytes) bytes of room
 * coded_bytes  out
 *
 * FIRN_OK or FIRN_BAD_ARGUMENT. Same input and effort, same output, on every machine and engine.
 */
FIRN_API enum firn_status firn_segment_encode(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort,
                                              uint8_t *coded, size_t *coded_bytes, void *work);

/*
 * coded, coded_bytes  untrusted: whatever they hold, nothing outside raw[0 .. raw_bytes) and work is written, and the
 *                     time is bounded by a constant multiple of raw_bytes + coded_bytes
 * raw_bytes           as known from the segment's record
 *
 * FIRN_OK: raw holds raw_bytes bytes. FIRN_BAD_DATA: contents of raw are undefined.
 */
FIRN_API enum firn_status firn_segment_decode(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                              void *work);

/* One of the prefix codes of a matched or samples segment. */
struct firn_segment_code {
    const char *of;                    /* "commands", "distances", "literals", "tokens" */
    const uint8_t *lengths;            /* of the words of `symbols` symbols; 0: does not occur */
    size_t symbols;
};

/* One stretch, as firn_segment_examine tells it. */
struct firn_segment_stretch {
    enum firn_segment_method method;
    size_t raw_at, raw_bytes;          /* within the segment */
    size_t coded_bytes;                /* table and streams */
    uint64_t table_bits, code_bits;    /* what the tables cost, and the words; 0 for stored and run */
    const uint8_t *lengths;            /* prefix: 256 code lengths, else NULL; lent for the call */
    const struct firn_segment_code *codes;     /* matched and samples: which contexts share; lent for the call */
    size_t code_count;
    const uint32_t *counts;            /* 256 counts of the raw bytes; lent for the call */
};

typedef void (firn_segment_teller)(void *self, const struct firn_segment_stretch *stretch);

/*
 * Tells the stretches of a coded segment in order, given its raw bytes too; a segment of any method but prefix is told
 * as one stretch. FIRN_OK or FIRN_BAD_DATA.
 */
FIRN_API enum firn_status firn_segment_examine(const uint8_t *coded, size_t coded_bytes, const uint8_t *raw,
                                               size_t raw_bytes, void *work, firn_segment_teller *tell, void *self);

#endif
