/*
 * coding/samples_write.c - residuals coded
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum {
    HEAD_BYTES = 2 + 2 * FIRN_WORDS_NUMBER_BYTES,
    CODES_BYTES = FIRN_CONTEXTS_COST_MAX_BITS / 8 + 1
};

static void take_channel(const uint8_t *from, size_t c, size_t width, uint8_t *to)
{
    if (c == 1)
        memcpy(to, from, width);
    else if (c == 3)
        for (size_t x = 0; x < width; x++)
            to[x] = from[3 * x];
    else
        for (size_t x = 0; x < width; x++)
            to[x] = from[c * x];
}

/* Residuals of one byte, line by line and channel by channel. */
static size_t order_lines(const struct firn_samples_shape *shape, size_t start, size_t end, size_t made,
                          struct firn_samples_write_work *w)
{
    size_t c = shape->channels, line = firn_samples_line(shape);

    firn_samples_lines_start(&w->lines);
    for (size_t at = start; at < end; at += line) {
        size_t width = end - at < line ? end - at : line;

        firn_samples_lines_next(&w->lines, shape);
        for (unsigned channel = 0; channel < c; channel++, made += width) {
            take_channel(w->byte_residuals + at * c + channel, c, width, w->tokens + made);
            firn_samples_lines_look(&w->lines, shape, channel, width, w->contexts + made);
            firn_samples_lines_tell(&w->lines, shape, channel, width, w->tokens + made);
        }
    }
    return made;
}

/* Tokens of wider numbers, in the order of the numbers; their folded residuals stand in w->residuals then. */
static void order_numbers(const struct firn_samples_shape *shape, size_t start, size_t end,
                          struct firn_samples_write_work *w)
{
    unsigned means[FIRN_SAMPLES_CHANNELS_MAX] = { 0 }, more_bits, c = shape->channels;
    bool rows = shape->row != 0;

    for (size_t pixel = start; pixel < end; pixel++)
        for (unsigned channel = 0; channel < c; channel++) {
            size_t i = pixel * c + channel;
            unsigned above = rows && i - start * c >= shape->row ? w->tokens[i - shape->row] : 0, token;
            uint32_t folded = firn_samples_fold((uint32_t)w->residuals[i], shape->width);

            token = firn_samples_token(folded, &more_bits);
            w->contexts[i] = (uint16_t)firn_samples_level(means[channel], above, rows, channel);
            w->tokens[i] = (uint8_t)token;
            w->residuals[i] = (int32_t)folded;
            means[channel] += token - (means[channel] >> 3);
        }
}

static void make_tokens(const struct firn_samples_shape *shape, const uint8_t *raw, size_t pixels,
                        struct firn_samples_write_work *w)
{
    size_t count = pixels * shape->channels, made = 0;

    if (shape->width == 1) {
        firn_samples_differ_bytes(shape, raw + shape->head_bytes, count, w->byte_residuals);
    } else {
        firn_samples_load(shape, raw + shape->head_bytes, count, w->x);
        firn_samples_differ(shape, w->x, count, w->residuals);
    }
    for (size_t part = 0; part < FIRN_SAMPLES_PARTS; part++) {
        size_t start = firn_samples_part(pixels, part), end = firn_samples_part(pixels, part + 1);

        if (shape->width == 1)
            made = order_lines(shape, start, end, made, w);
        else
            order_numbers(shape, start, end, w);
    }
    memset(w->counts, 0, sizeof w->counts);
    for (size_t i = 0; i < count; i++)
        w->counts[w->contexts[i]][w->tokens[i]]++;
}

static void put_part(const struct firn_samples_shape *shape, size_t start, size_t end,
                     const struct firn_samples_write_work *w, struct firn_words_writer *s)
{
    const uint8_t *map = w->codes.map;

    if (shape->width == 1) {
        for (size_t i = start; i < end && s->at < s->end; i++)
            firn_words_put_spelt(s, w->words[map[w->contexts[i]]][w->tokens[i]]);
        return;
    }
    for (size_t i = start; i < end && s->at < s->end; i++) {
        unsigned more_bits = firn_samples_more(w->tokens[i]);

        firn_words_put_spelt(s, w->words[map[w->contexts[i]]][w->tokens[i]]);
        firn_words_put(s, (uint32_t)w->residuals[i] & ((UINT32_C(1) << more_bits) - 1), more_bits);
    }
}

/* Kind, channels and so on; the bytes in front and behind. */
static uint8_t *put_shape(const struct firn_samples_shape *shape, const uint8_t *raw, size_t raw_bytes, uint8_t *to)
{
    size_t tail = (raw_bytes - shape->head_bytes) % (shape->width * shape->channels);

    *to++ = (uint8_t)((shape->width - 1) | (shape->big ? FIRN_SAMPLES_BIG : 0u) |
                      (shape->floats ? FIRN_SAMPLES_FLOATS : 0u) | (shape->lean ? FIRN_SAMPLES_LEAN : 0u));
    *to++ = (uint8_t)((unsigned)shape->predictor | (shape->channels - 1) << 4);
    firn_words_put_number(&to, shape->head_bytes);
    firn_words_put_number(&to, shape->row);
    memcpy(to, raw, shape->head_bytes);
    memcpy(to + shape->head_bytes, raw + raw_bytes - tail, tail);
    return to + shape->head_bytes + tail;
}

static void spell(const struct firn_contexts *codes, uint32_t words[][256])
{
    uint16_t assigned[256];

    for (unsigned t = 0; t < codes->tables; t++) {
        firn_prefix_assign(codes->lengths[t], 256, assigned);
        for (size_t s = 0; s < 256; s++)
            words[t][s] = (uint32_t)assigned[s] << 8 | codes->lengths[t][s];
    }
}

size_t firn_samples_write(const struct firn_samples_shape *shape, const uint8_t *raw, size_t raw_bytes,
                          unsigned tables_max, uint8_t *room, size_t room_bytes, struct firn_samples_write_work *w)
{
    size_t pixels = firn_samples_pixels(shape, raw_bytes), c = shape->channels, codes_bytes, first;
    uint8_t codes[CODES_BYTES], *to, *from, *start;
    struct firn_bits_writer writer = { codes, 0 };
    struct firn_words_writer s = { .end = room + room_bytes };
    size_t sizes[FIRN_SAMPLES_PARTS];

    make_tokens(shape, raw, pixels, w);
    firn_contexts_make(&w->logs, w->counts[0], FIRN_SAMPLES_CONTEXTS, 256, tables_max, FIRN_SAMPLES_LIMIT, &w->codes,
                       &w->clusters);
    spell(&w->codes, w->words);
    firn_contexts_write(&writer, &w->codes, FIRN_SAMPLES_CONTEXTS, 256);
    codes_bytes = firn_bits_end(&writer);
    first = HEAD_BYTES + shape->head_bytes + FIRN_SAMPLES_WIDTH_MAX * FIRN_SAMPLES_CHANNELS_MAX + codes_bytes +
            FIRN_SAMPLES_PARTS * FIRN_WORDS_NUMBER_BYTES;
    if (first >= room_bytes)
        return 0;
    to = put_shape(shape, raw, raw_bytes, room);
    memcpy(to, codes, codes_bytes);
    to += codes_bytes;
    start = s.at = room + first;
    for (size_t part = 0; part < FIRN_SAMPLES_PARTS; part++) {
        from = s.at;
        put_part(shape, firn_samples_part(pixels, part) * c, firn_samples_part(pixels, part + 1) * c, w, &s);
        if (!firn_words_close(&s))
            return 0;
        sizes[part] = (size_t)(s.at - from);
    }
    for (size_t part = 0; part + 1 < FIRN_SAMPLES_PARTS; part++)
        firn_words_put_number(&to, sizes[part]);
    memmove(to, start, (size_t)(s.at - start));
    return (size_t)(to - room) + (size_t)(s.at - start);
}
