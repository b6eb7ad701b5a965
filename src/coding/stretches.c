/*
 * coding/stretches.c - stretches written and read
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/stretches.h"

#include "coding/histogram.h"
#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum {
    KIND_METHOD = 3,                   /* bits of a stretch's first byte */
    KIND_SIX = 4,
    KIND_LAST = 8,
    KIND_KNOWN = 15,
    STRETCH_MIN_BYTES = 256,           /* all stretches but the last: bounds the tables a reader can be made to build */
    SIX_MIN_BYTES = 2048               /* writer: shorter ones do not earn what the ends of six streams cost */
};

_Static_assert((int)FIRN_SPLIT_CELL_MIN_BYTES >= (int)STRETCH_MIN_BYTES, "cells are stretches too");

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

static void put_number(struct sink *sink, size_t value)
{
    uint8_t bytes[FIRN_WORDS_NUMBER_BYTES], *to = bytes;

    firn_words_put_number(&to, value);
    put_bytes(sink, bytes, (size_t)(to - bytes));
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
static void put_streams(struct sink *sink, struct firn_stretches_write_work *w, const uint8_t *raw, size_t raw_bytes,
                        unsigned streams, bool last)
{
    uint64_t bits = firn_prefix_cost_bits(w->counts, w->lengths, FIRN_TABLE_SYMBOLS);
    size_t each = raw_bytes / streams, reserve = (size_t)streams * FIRN_WORDS_NUMBER_BYTES, expected = 0, left;
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
static void put_prefix(struct sink *sink, struct firn_stretches_write_work *w, const struct firn_split_stretch *stretch,
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

static void put_stretch(struct sink *sink, struct firn_stretches_write_work *w,
                        const struct firn_split_stretch *stretch, const uint8_t *segment, bool last)
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

size_t firn_stretches_write(const uint8_t *raw, size_t raw_bytes, size_t cell_bytes, uint8_t *room, size_t room_bytes,
                            struct firn_stretches_write_work *work)
{
    struct sink sink = { room, room + room_bytes, false };

    firn_split(raw, raw_bytes, cell_bytes, true, &work->split);
    for (size_t s = 0; s < work->split.stretch_count && !sink.full; s++)
        put_stretch(&sink, work, &work->split.stretches[s], raw, s + 1 == work->split.stretch_count);
    return sink.full ? 0 : (size_t)(sink.at - room);
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

static bool take_number(struct source *source, size_t *value)
{
    return firn_words_take_number(source->coded, source->coded_bytes, &source->at, value);
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

static bool take_table(struct source *source, struct firn_stretches_read_work *w, struct head *head)
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
static bool take_head(struct source *source, struct firn_stretches_read_work *w, size_t raw_left, struct head *head)
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

static enum firn_status read_stretch(const struct source *source, struct firn_stretches_read_work *w,
                                     const struct head *head, uint8_t *raw)
{
    switch (head->method) {
    case FIRN_SEGMENT_STORED:
        memcpy(raw, source->coded + head->contents_at, head->raw_bytes);
        return FIRN_OK;
    case FIRN_SEGMENT_RUN:
        memset(raw, source->coded[head->contents_at], head->raw_bytes);
        return FIRN_OK;
    default:
        firn_streams_prepare(w->lengths, w->entries);
        return firn_streams_read(source->coded, source->coded_bytes, head->starts, head->streams, w->entries, raw,
                                 head->raw_bytes);
    }
}

enum firn_status firn_stretches_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                     struct firn_stretches_read_work *work)
{
    struct source source = { coded, coded_bytes, 0 };
    struct head head = { .last = false };

    for (size_t at = 0; !head.last; at += head.raw_bytes)
        if (!take_head(&source, work, raw_bytes - at, &head) ||
            read_stretch(&source, work, &head, raw + at) != FIRN_OK)
            return FIRN_BAD_DATA;
    return FIRN_OK;
}

enum firn_status firn_stretches_examine(const uint8_t *coded, size_t coded_bytes, const uint8_t *raw, size_t raw_bytes,
                                        struct firn_stretches_read_work *work, firn_segment_teller *tell, void *self)
{
    struct source source = { coded, coded_bytes, 0 };
    struct head head = { .last = false };

    for (size_t at = 0; !head.last; at += head.raw_bytes) {
        struct firn_segment_stretch stretch = { .raw_at = at, .counts = work->counts };
        size_t start = source.at;

        if (!take_head(&source, work, raw_bytes - at, &head))
            return FIRN_BAD_DATA;
        firn_histogram_count(raw + at, head.raw_bytes, work->counts);
        stretch.method = head.method;
        stretch.raw_bytes = head.raw_bytes;
        stretch.coded_bytes = source.at - start;
        if (head.method == FIRN_SEGMENT_PREFIX) {
            stretch.lengths = work->lengths;
            stretch.table_bits = head.table_bits;
            stretch.code_bits = firn_prefix_cost_bits(work->counts, work->lengths, FIRN_TABLE_SYMBOLS);
        }
        tell(self, &stretch);
    }
    return FIRN_OK;
}
