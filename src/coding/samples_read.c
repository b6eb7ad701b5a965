/*
 * coding/samples_read.c - residuals decoded, four parts at a time, and numbers made of them
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum { LENGTH_MASK = 15, PARTS = FIRN_SAMPLES_PARTS };

/* entries[bits] = token << 8 | length */
static void spread(const uint8_t *lengths, uint16_t entries[FIRN_SAMPLES_ENTRIES])
{
    uint16_t words[256];

    firn_prefix_assign(lengths, 256, words);
    for (unsigned s = 0; s < 256; s++) {
        unsigned span = 1u << (FIRN_SAMPLES_LIMIT - lengths[s]);

        for (unsigned k = 0; lengths[s] != 0 && k < span; k++)
            entries[words[s] * span + k] = (uint16_t)(s << 8 | lengths[s]);
    }
}

static bool take_shape(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes, size_t *at,
                       struct firn_samples_shape *shape)
{
    if (coded_bytes < 2 || coded[0] > 31 || coded[1] > 127)
        return false;
    *shape = (struct firn_samples_shape){ .width = (coded[0] & FIRN_SAMPLES_WIDTH_BITS) + 1u,
                                          .big = (coded[0] & FIRN_SAMPLES_BIG) != 0,
                                          .floats = (coded[0] & FIRN_SAMPLES_FLOATS) != 0,
                                          .lean = (coded[0] & FIRN_SAMPLES_LEAN) != 0,
                                          .predictor = (enum firn_samples_predictor)(coded[1] & 15),
                                          .channels = (coded[1] >> 4) + 1u };
    *at = 2;
    return firn_words_take_number(coded, coded_bytes, at, &shape->head_bytes) &&
           firn_words_take_number(coded, coded_bytes, at, &shape->row) && firn_samples_shape_is_sound(shape, raw_bytes);
}

/* Reads the codes and finds the streams; *edges_at: the bytes in front of the first number and behind the last. */
static bool open_streams(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes, size_t *edges_at,
                         struct firn_samples_shape *shape, struct firn_words_reader streams[PARTS],
                         struct firn_samples_read_work *w)
{
    struct firn_bits_reader reader;
    size_t at, tail, size, bytes, sizes[PARTS];

    if (!take_shape(coded, coded_bytes, raw_bytes, &at, shape))
        return false;
    tail = (raw_bytes - shape->head_bytes) % shape->width;
    if (coded_bytes - at < shape->head_bytes + tail)
        return false;
    *edges_at = at;
    at += shape->head_bytes + tail;
    reader = (struct firn_bits_reader){ coded + at, coded_bytes - at, 0 };
    if (firn_contexts_read(&reader, &w->codes, FIRN_SAMPLES_CONTEXTS, 256) != FIRN_OK)
        return false;
    w->table_bits = reader.at_bits;
    bytes = firn_bits_close(&reader);
    if (bytes == SIZE_MAX)
        return false;
    at += bytes;
    for (size_t part = 0; part + 1 < PARTS; part++)
        if (!firn_words_take_number(coded, coded_bytes, &at, &sizes[part]))
            return false;
    for (size_t part = 0; part < PARTS; part++, at += size) {
        size = part + 1 < PARTS ? sizes[part] : coded_bytes - at;
        if (size > coded_bytes - at)
            return false;
        streams[part] = (struct firn_words_reader){ .bytes = coded + at, .byte_count = size };
    }
    for (unsigned t = 0; t < w->codes.tables; t++)
        spread(w->codes.lengths[t], w->entries[t]);
    return true;
}

static void read_bytes(const struct firn_samples_shape *shape, struct firn_words_reader *s, size_t start, size_t end,
                       struct firn_samples_read_work *w)
{
    uint8_t classes[129];
    uint16_t context[1];

    firn_samples_classes(classes);
    (void)context;
    for (size_t i = start; i < end; i++) {
        size_t c = shape->channels, beside = c == 1 ? 2 : 1, up = shape->row == 0 ? 3 * c : shape->row;
        unsigned a = i - start >= c ? classes[firn_samples_size(w->tokens[i - c])] : 0;
        unsigned b = i - start >= beside ? classes[firn_samples_size(w->tokens[i - beside])] : 0;
        unsigned n = i - start >= up ? firn_samples_size(w->tokens[i - up]) : 0;
        unsigned ne = i - start >= up - c ? firn_samples_size(w->tokens[i - up + c]) : 0;
        unsigned entry;

        firn_words_refill(s);
        entry = w->entries[w->codes.map[(i % c != 0 ? 512u : 0u) + 64 * a + 8 * b + classes[(n + ne + 1) / 2]]]
                          [s->bits >> (64 - FIRN_SAMPLES_LIMIT)];
        firn_words_drop(s, entry & LENGTH_MASK);
        w->tokens[i] = (uint8_t)(entry >> 8);
        w->x[i] = (int32_t)(entry >> 8);
    }
}

static void read_numbers(const struct firn_samples_shape *shape, struct firn_words_reader *s, size_t start, size_t end,
                         struct firn_samples_read_work *w)
{
    unsigned mean[FIRN_SAMPLES_CHANNELS_MAX] = { 0 };
    size_t c = shape->channels;

    for (size_t i = start; i < end; i++) {
        unsigned *m = &mean[i % c], level = *m >> 3, entry, token;
        uint32_t folded;

        if (shape->row != 0)
            level = (level + (i - start >= shape->row ? w->tokens[i - shape->row] : 0u)) / 2;
        firn_words_refill(s);
        entry = w->entries[w->codes.map[level + (i % c != 0 ? 128u : 0u)]][s->bits >> (64 - FIRN_SAMPLES_LIMIT)];
        firn_words_drop(s, entry & LENGTH_MASK);
        token = entry >> 8;
        if (token > 127)
            token = 127;
        w->tokens[i] = (uint8_t)token;
        *m += token - (*m >> 3);
        folded = token;
        if (token >= 16)
            folded = (4 | (token & 3)) << (token / 4 - 2) | firn_words_take(s, token / 4 - 2);
        w->x[i] = (int32_t)firn_samples_unfold(folded);
    }
}

enum firn_status firn_samples_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_samples_read_work *work)
{
    struct firn_words_reader streams[PARTS];
    struct firn_samples_shape shape;
    size_t count, each, tail, edges_at;

    if (!open_streams(coded, coded_bytes, raw_bytes, &edges_at, &shape, streams, work))
        return FIRN_BAD_DATA;
    tail = (raw_bytes - shape.head_bytes) % shape.width;
    memcpy(raw, coded + edges_at, shape.head_bytes);
    memcpy(raw + raw_bytes - tail, coded + edges_at + shape.head_bytes, tail);
    count = firn_samples_count(&shape, raw_bytes);
    each = count / PARTS;
    for (size_t part = 0; part < PARTS; part++) {
        size_t end = part + 1 < PARTS ? (part + 1) * each : count;

        if (shape.width == 1)
            read_bytes(&shape, &streams[part], part * each, end, work);
        else
            read_numbers(&shape, &streams[part], part * each, end, work);
        if (!firn_words_used_up(&streams[part]))
            return FIRN_BAD_DATA;
    }
    firn_samples_restore(&shape, count, work->x);
    firn_samples_store(&shape, work->x, count, raw + shape.head_bytes);
    return FIRN_OK;
}

enum firn_status firn_samples_measure(const uint8_t *coded, size_t coded_bytes, size_t raw_bytes, uint64_t *table_bits,
                                      uint64_t *code_bits, struct firn_samples_read_work *work)
{
    struct firn_words_reader streams[PARTS];
    struct firn_samples_shape shape;
    size_t edges_at;

    if (!open_streams(coded, coded_bytes, raw_bytes, &edges_at, &shape, streams, work))
        return FIRN_BAD_DATA;
    *table_bits = work->table_bits;
    *code_bits = 0;
    for (size_t part = 0; part < PARTS; part++)
        *code_bits += 8 * (uint64_t)streams[part].byte_count;
    return FIRN_OK;
}
