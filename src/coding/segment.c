/*
 * coding/segment.c - a segment: how it is laid out, who codes what
 *
 * Layout: format-spec/segment.md. Byte 0 is the method, byte 1 the transform (none is defined yet, 0). A prefix
 * segment is a row of stretches, each with its own head, table and streams.
 *
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "firn/segment.h"

#include "coding/histogram.h"
#include "coding/matched.h"
#include "coding/parse.h"
#include "coding/sample.h"
#include "coding/samples.h"
#include "coding/split.h"
#include "coding/streams.h"
#include "coding/survey.h"
#include "coding/table.h"

#include "firn/prefix.h"

#include "base/limits.h"

#include <string.h>

enum {
    HEAD_BYTES = 2,
    NUMBER_MAX_BYTES = 3,              /* of a number below 2^21 */
    KIND_METHOD = 3,                   /* bits of a stretch's first byte */
    KIND_SIX = 4,
    KIND_LAST = 8,
    KIND_KNOWN = 15,
    STRETCH_MIN_BYTES = 256,           /* all stretches but the last: bounds the tables a reader can be made to build */
    SIX_MIN_BYTES = 2048               /* writer: shorter ones do not earn what the ends of six streams cost */
};

_Static_assert((int)FIRN_SEGMENT_RAW_MAX == (int)FIRN_LIMIT_SEGMENT_RAW_BYTES, "one limit, two names");
_Static_assert((int)FIRN_SPLIT_CELL_MIN_BYTES >= (int)STRETCH_MIN_BYTES, "cells are stretches too");

/* What finding matches takes. */
struct match_work {
    struct firn_repeats repeats;
    struct firn_parse_work parse;
    struct firn_matched_write_work write;
    struct firn_matched_command commands[FIRN_PARSE_COMMANDS_MAX];
};

struct encode_work {
    struct firn_split_work split;
    struct match_work match;
    struct firn_survey_work survey;
    struct firn_samples_write_work samples;
    uint8_t room[FIRN_SEGMENT_RAW_MAX + HEAD_BYTES];   /* for what may turn out smaller */
    uint8_t lengths[FIRN_TABLE_SYMBOLS];
    uint16_t words[FIRN_TABLE_SYMBOLS];
    uint32_t counts[FIRN_TABLE_SYMBOLS];
};

struct decode_work {
    struct firn_matched_read_work matched;
    struct firn_samples_read_work samples;
    uint16_t entries[FIRN_STREAMS_ENTRIES];
    uint8_t lengths[FIRN_TABLE_SYMBOLS];
    uint32_t counts[FIRN_TABLE_SYMBOLS];
};

size_t firn_segment_bound(size_t raw_bytes)
{
    return raw_bytes + HEAD_BYTES;
}

size_t firn_segment_encode_work_bytes(void)
{
    return sizeof(struct encode_work);
}

size_t firn_segment_decode_work_bytes(void)
{
    return sizeof(struct decode_work);
}

/* ---- writing ---- */

/* Where the coded bytes go; nothing is ever written at or past limit, and `full` is set instead. */
struct sink {
    uint8_t *at, *limit;
    bool full;
};

static void put_byte(struct sink *sink, unsigned value)
{
    if (sink->at == sink->limit)
        sink->full = true;
    else
        *sink->at++ = (uint8_t)value;
}

static void put_bytes(struct sink *sink, const uint8_t *bytes, size_t count)
{
    if (count > (size_t)(sink->limit - sink->at)) {
        sink->full = true;
        return;
    }
    memcpy(sink->at, bytes, count);
    sink->at += count;
}

/* Seven bits a byte, low ones first; the top bit says that more follow. */
static void put_number(struct sink *sink, size_t value)
{
    for (; value >= 128; value >>= 7)
        put_byte(sink, (unsigned)(value & 127) | 128);
    put_byte(sink, (unsigned)value);
}

/* 0, -1, 1, -2, 2 ... become 0, 1, 2, 3, 4 ... */
static size_t fold(size_t value, size_t expected)
{
    return value >= expected ? 2 * (value - expected) : 2 * (expected - value) - 1;
}

/*
 * Stream lengths and streams. The streams are written first, as far behind as the lengths may take, and then moved
 * up: that is cheaper than counting each of them beforehand.
 */
static void put_streams(struct sink *sink, struct encode_work *w, const uint8_t *raw, size_t raw_bytes,
                        unsigned streams, bool last)
{
    uint64_t bits = firn_prefix_cost_bits(w->counts, w->lengths, FIRN_TABLE_SYMBOLS);
    size_t each = raw_bytes / streams, reserve = (size_t)streams * NUMBER_MAX_BYTES, expected = 0, left;
    size_t sizes[FIRN_STREAMS_MAX];
    uint8_t *first, *to;

    if (streams == 1) {
        if (!last)
            put_number(sink, (size_t)((bits + 7) / 8));
        reserve = 0;
    }
    if (sink->full || (bits + 7) / 8 + streams + reserve > (size_t)(sink->limit - sink->at) + 1) {
        sink->full = true;
        return;
    }
    first = to = sink->at + reserve;
    for (unsigned s = 0; s < streams; s++) {
        left = s + 1 == streams ? raw_bytes - s * each : each;
        sizes[s] = firn_streams_write(raw + s * each, left, w->lengths, w->words, to, (size_t)(sink->limit - to));
        to += sizes[s];
    }
    for (unsigned s = 0; streams > 1 && s < streams - last; s++) {
        put_number(sink, s == 0 ? sizes[s] : fold(sizes[s], expected));
        expected = sizes[s];
    }
    memmove(sink->at, first, (size_t)(to - first));
    sink->at += to - first;
}

/* Table and streams; the stretch has at least two different bytes. */
static void put_prefix(struct sink *sink, struct encode_work *w, const struct firn_split_stretch *stretch,
                       const uint8_t *raw, unsigned streams, bool last)
{
    uint8_t table[(FIRN_TABLE_COST_MAX_BITS + 7) / 8];
    struct firn_bits_writer writer = { table, 0 };

    firn_split_counts(&w->split, stretch->first_cell, stretch->end_cell, w->counts);
    firn_prefix_lengths(w->counts, FIRN_TABLE_SYMBOLS, FIRN_TABLE_LENGTH_LIMIT, w->lengths, w->split.prefix_work);
    firn_prefix_assign(w->lengths, FIRN_TABLE_SYMBOLS, w->words);
    firn_table_write(&writer, w->lengths);
    put_bytes(sink, table, firn_bits_end(&writer));
    put_streams(sink, w, raw, stretch->raw_bytes, streams, last);
}

static void put_stretch(struct sink *sink, struct encode_work *w, const struct firn_split_stretch *stretch,
                        const uint8_t *segment, bool last)
{
    const uint8_t *raw = segment + stretch->raw_at;
    bool six = stretch->method == FIRN_SEGMENT_PREFIX && stretch->raw_bytes >= SIX_MIN_BYTES;

    put_byte(sink, (unsigned)stretch->method | (six ? KIND_SIX : 0u) | (last ? KIND_LAST : 0u));
    if (!last)
        put_number(sink, stretch->raw_bytes);
    if (stretch->method == FIRN_SEGMENT_STORED)
        put_bytes(sink, raw, stretch->raw_bytes);
    else if (stretch->method == FIRN_SEGMENT_RUN)
        put_byte(sink, raw[0]);
    else
        put_prefix(sink, w, stretch, raw, six ? FIRN_STREAMS_MAX : 1, last);
}

static void put_stored(const uint8_t *raw, size_t raw_bytes, uint8_t *coded, size_t *coded_bytes)
{
    coded[0] = FIRN_SEGMENT_STORED;
    coded[1] = 0;
    memcpy(coded + HEAD_BYTES, raw, raw_bytes);
    *coded_bytes = HEAD_BYTES + raw_bytes;
}

static size_t cell_bytes_of(enum firn_segment_effort effort)
{
    return effort == FIRN_SEGMENT_EFFORT_QUICK ? 16384 : effort == FIRN_SEGMENT_EFFORT_NORMAL ? 8192 : 4096;
}

static bool encode_matched(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort, uint8_t *coded,
                           size_t *coded_bytes, struct encode_work *w)
{
    struct match_work *m = &w->match;
    size_t count = 0, bytes;

    (void)effort;
    firn_cost_prepare(&m->write.logs);
    m->write.codes.fine = 0;
    firn_repeats_find(raw, raw_bytes, FIRN_PARSE_REACH, 48, &m->repeats);
    firn_parse_guess(&m->write.logs, raw, raw_bytes, &m->parse.prices);
    for (unsigned pass = 0; pass < 3; pass++) {
        count = firn_parse(raw, raw_bytes, &m->repeats, m->commands, &m->parse);
        firn_matched_make_codes(raw, m->commands, count, FIRN_CONTEXTS_TABLES_MAX, true, &m->write);
        firn_parse_learn(&m->write, &m->parse.prices);
    }
    bytes = firn_matched_write(raw, m->commands, count, coded + HEAD_BYTES, raw_bytes, &m->write);
    coded[0] = 3;
    coded[1] = 0;
    *coded_bytes = bytes + HEAD_BYTES;
    return bytes != 0;
}

enum firn_status firn_segment_encode(const uint8_t *raw, size_t raw_bytes, enum firn_segment_effort effort,
                                     uint8_t *coded, size_t *coded_bytes, void *work)
{
    struct encode_work *w = work;
    struct sink sink = { coded, coded + raw_bytes + HEAD_BYTES, false };

    if (raw_bytes < 1 || raw_bytes > FIRN_SEGMENT_RAW_MAX || (unsigned)effort > FIRN_SEGMENT_EFFORT_THOROUGH)
        return FIRN_BAD_ARGUMENT;
    if (effort == FIRN_SEGMENT_EFFORT_NONE || firn_sample_is_even(raw, raw_bytes)) {
        put_stored(raw, raw_bytes, coded, coded_bytes);
        return FIRN_OK;
    }
    {
        struct firn_samples_shape shape;
        size_t bytes;
        firn_cost_prepare(&w->samples.logs);
        uint32_t price = firn_survey(&w->samples.logs, raw, raw_bytes, &shape, &w->survey);
        if (price < 460) {
            bytes = firn_samples_write(&shape, raw, raw_bytes, 16, coded + 2, raw_bytes, &w->samples);
#ifdef DBG
            extern int printf(const char*,...);
            printf("DBG shape w%u c%u %s%s%s pred %d head %zu row %zu  price %u ratio %.3f tables %u\n", shape.width, shape.channels, shape.big?"big ":"", shape.floats?"float ":"", shape.lean?"lean":"",
              shape.predictor, shape.head_bytes, shape.row, price, (double)raw_bytes/bytes, w->samples.codes.tables);
#endif
            if (bytes != 0) {
            coded[0] = 4;
            coded[1] = 0;
            *coded_bytes = bytes + 2;
            return FIRN_OK;
            }
        }
    }
    if (encode_matched(raw, raw_bytes, effort, coded, coded_bytes, w))
        return FIRN_OK;
    firn_split(raw, raw_bytes, cell_bytes_of(effort), true, &w->split);
    if (w->split.stretch_count == 1 && w->split.stretches[0].method != FIRN_SEGMENT_PREFIX) {
        bool run = w->split.stretches[0].method == FIRN_SEGMENT_RUN;

        put_stored(raw, run ? 1 : raw_bytes, coded, coded_bytes);   /* a run holds one byte where stored holds all */
        coded[0] = run ? FIRN_SEGMENT_RUN : FIRN_SEGMENT_STORED;
        return FIRN_OK;
    }
    put_byte(&sink, FIRN_SEGMENT_PREFIX);
    put_byte(&sink, 0);
    for (size_t s = 0; s < w->split.stretch_count && !sink.full; s++)
        put_stretch(&sink, w, &w->split.stretches[s], raw, s + 1 == w->split.stretch_count);
    if (sink.full || sink.at == sink.limit)
        put_stored(raw, raw_bytes, coded, coded_bytes);
    else
        *coded_bytes = (size_t)(sink.at - coded);
    return FIRN_OK;
}

/* ---- reading ---- */

struct source {
    const uint8_t *coded;
    size_t coded_bytes, at;
};

/* What stands in front of the contents of a stretch. */
struct head {
    enum firn_segment_method method;
    unsigned streams;
    bool last;
    size_t raw_bytes;
    size_t table_bits;
    size_t starts[FIRN_STREAMS_MAX + 1];       /* prefix: the streams in coded */
    size_t contents_at, end;                   /* all but the head and table */
};

static bool take_byte(struct source *source, unsigned *value)
{
    if (source->at >= source->coded_bytes)
        return false;
    *value = source->coded[source->at++];
    return true;
}

/* At most three bytes, so below 2^21; no more bytes than it takes. */
static bool take_number(struct source *source, size_t *value)
{
    unsigned byte;

    *value = 0;
    for (unsigned shift = 0; shift < 21; shift += 7) {
        if (!take_byte(source, &byte))
            return false;
        *value |= (size_t)(byte & 127) << shift;
        if (byte < 128)
            return shift == 0 || byte != 0;
    }
    return false;
}

/* Stream lengths; afterwards source->at is the end of the last stream. */
static bool take_streams(struct source *source, struct head *head)
{
    size_t sizes[FIRN_STREAMS_MAX] = { 0 };
    unsigned told = head->last ? head->streams - 1 : head->streams;

    for (unsigned s = 0; s < told; s++) {
        size_t value;

        if (!take_number(source, &value))
            return false;
        if (s == 0)
            sizes[s] = value;
        else if (value % 2 == 0)
            sizes[s] = sizes[s - 1] + value / 2;
        else if (sizes[s - 1] >= (value + 1) / 2)
            sizes[s] = sizes[s - 1] - (value + 1) / 2;
        else
            return false;
    }
    head->contents_at = source->at;
    for (unsigned s = 0; s < head->streams; s++) {
        size_t left = source->coded_bytes - source->at, size = s < told ? sizes[s] : left;

        if (size > left)
            return false;
        head->starts[s] = source->at;
        source->at += size;
    }
    head->starts[head->streams] = source->at;
    return true;
}

static bool take_table(struct source *source, struct decode_work *w, struct head *head)
{
    struct firn_bits_reader reader = { source->coded + source->at, source->coded_bytes - source->at, 0 };
    size_t bytes;

    if (firn_table_read(&reader, w->lengths) != FIRN_OK)
        return false;
    head->table_bits = reader.at_bits;
    bytes = firn_bits_close(&reader);
    if (bytes == SIZE_MAX)
        return false;
    source->at += bytes;
    return true;
}

/* Reads the head of the next stretch, which has at most raw_left bytes; source->at moves to the end of the stretch. */
static bool take_head(struct source *source, struct decode_work *w, size_t raw_left, struct head *head)
{
    unsigned kind;
    size_t size;

    if (!take_byte(source, &kind) || kind > KIND_KNOWN || (kind & KIND_METHOD) > FIRN_SEGMENT_PREFIX)
        return false;
    *head = (struct head){ .method = (enum firn_segment_method)(kind & KIND_METHOD), .last = (kind & KIND_LAST) != 0,
                           .streams = kind & KIND_SIX ? FIRN_STREAMS_MAX : 1, .raw_bytes = raw_left };
    if (!head->last && (!take_number(source, &head->raw_bytes) || head->raw_bytes < STRETCH_MIN_BYTES ||
                        head->raw_bytes >= raw_left))
        return false;
    if (head->method == FIRN_SEGMENT_PREFIX) {
        if (head->raw_bytes < head->streams || !take_table(source, w, head) || !take_streams(source, head))
            return false;
    } else {
        if (head->streams != 1)
            return false;
        size = head->method == FIRN_SEGMENT_RUN ? 1 : head->raw_bytes;
        if (size > source->coded_bytes - source->at)
            return false;
        head->contents_at = source->at;
        source->at += size;
    }
    head->end = source->at;
    return !head->last || source->at == source->coded_bytes;
}

static enum firn_status read_stretch(const struct source *source, struct decode_work *w, const struct head *head,
                                     uint8_t *raw)
{
    switch (head->method) {
    case FIRN_SEGMENT_STORED:
        memcpy(raw, source->coded + head->contents_at, head->raw_bytes);
        return FIRN_OK;
    case FIRN_SEGMENT_RUN:
        memset(raw, source->coded[head->contents_at], head->raw_bytes);
        return FIRN_OK;
    case FIRN_SEGMENT_PREFIX:
        firn_streams_prepare(w->lengths, w->entries);
        return firn_streams_read(source->coded, source->coded_bytes, head->starts, head->streams, w->entries, raw,
                                 head->raw_bytes);
    }
    return FIRN_BAD_DATA;
}

/* A whole segment under one method; false when it is one of stretches. */
static bool is_solid(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes)
{
    return (coded[0] == FIRN_SEGMENT_STORED && coded_bytes == HEAD_BYTES + raw_bytes) ||
           (coded[0] == FIRN_SEGMENT_RUN && coded_bytes == HEAD_BYTES + 1);
}

static bool is_known(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes)
{
    return raw_bytes >= 1 && raw_bytes <= FIRN_SEGMENT_RAW_MAX && coded_bytes > HEAD_BYTES && coded[1] == 0 &&
           (coded[0] == FIRN_SEGMENT_PREFIX || coded[0] == 3 || coded[0] == 4 || is_solid(coded, coded_bytes, raw_bytes));
}

enum firn_status firn_segment_decode(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                     void *work)
{
    struct source source = { coded, coded_bytes, HEAD_BYTES };
    struct decode_work *w = work;
    struct head head = { .last = false };

    if (!is_known(coded, coded_bytes, raw_bytes))
        return FIRN_BAD_DATA;
    if (coded[0] == FIRN_SEGMENT_STORED)
        memcpy(raw, coded + HEAD_BYTES, raw_bytes);
    else if (coded[0] == FIRN_SEGMENT_RUN)
        memset(raw, coded[HEAD_BYTES], raw_bytes);
    else if (coded[0] == 4)
        return firn_samples_read(coded + HEAD_BYTES, coded_bytes - HEAD_BYTES, raw, raw_bytes, &w->samples);
    else if (coded[0] == 3)
        return firn_matched_read(coded + HEAD_BYTES, coded_bytes - HEAD_BYTES, raw, raw_bytes, &w->matched);
    else
        for (size_t at = 0; !head.last; at += head.raw_bytes)
            if (!take_head(&source, w, raw_bytes - at, &head) || read_stretch(&source, w, &head, raw + at) != FIRN_OK)
                return FIRN_BAD_DATA;
    return FIRN_OK;
}

enum firn_status firn_segment_examine(const uint8_t *coded, size_t coded_bytes, const uint8_t *raw, size_t raw_bytes,
                                      void *work, firn_segment_teller *tell, void *self)
{
    struct source source = { coded, coded_bytes, HEAD_BYTES };
    struct decode_work *w = work;
    struct head head = { .last = false };

    if (!is_known(coded, coded_bytes, raw_bytes))
        return FIRN_BAD_DATA;
    if (coded[0] != FIRN_SEGMENT_PREFIX) {
        firn_histogram_count(raw, raw_bytes, w->counts);
        tell(self, &(struct firn_segment_stretch){ .method = (enum firn_segment_method)coded[0], .raw_bytes = raw_bytes,
                                                   .coded_bytes = coded_bytes - HEAD_BYTES, .counts = w->counts });
        return FIRN_OK;
    }
    for (size_t at = 0; !head.last; at += head.raw_bytes) {
        struct firn_segment_stretch stretch = { .raw_at = at, .counts = w->counts };
        size_t start = source.at;

        if (!take_head(&source, w, raw_bytes - at, &head))
            return FIRN_BAD_DATA;
        firn_histogram_count(raw + at, head.raw_bytes, w->counts);
        stretch.method = head.method;
        stretch.raw_bytes = head.raw_bytes;
        stretch.coded_bytes = source.at - start;
        if (head.method == FIRN_SEGMENT_PREFIX) {
            stretch.lengths = w->lengths;
            stretch.table_bits = head.table_bits;
            stretch.code_bits = firn_prefix_cost_bits(w->counts, w->lengths, FIRN_TABLE_SYMBOLS);
        }
        tell(self, &stretch);
    }
    return FIRN_OK;
}
