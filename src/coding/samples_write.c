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

static unsigned token_of(const struct firn_samples_shape *shape, int32_t residual, unsigned *more_bits)
{
    *more_bits = 0;
    if (shape->width == 1)
        return (uint8_t)residual;
    return firn_samples_token(firn_samples_fold((uint32_t)residual, shape->width), more_bits);
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
            for (size_t x = 0; x < width; x++)
                w->tokens[made + x] = (uint8_t)w->residuals[(at + x) * c + channel];
            firn_samples_lines_look(&w->lines, shape, channel, width, w->contexts + made);
            firn_samples_lines_tell(&w->lines, shape, channel, width, w->tokens + made);
        }
    }
    return made;
}

/* Tokens of wider numbers, in the order of the numbers. */
static size_t order_numbers(const struct firn_samples_shape *shape, size_t start, size_t end,
                            struct firn_samples_write_work *w)
{
    unsigned mean[FIRN_SAMPLES_CHANNELS_MAX] = { 0 }, more_bits;
    size_t c = shape->channels;

    for (size_t i = start * c; i < end * c; i++) {
        unsigned above = shape->row != 0 && i - start * c >= shape->row ? w->tokens[i - shape->row] : 0;

        w->contexts[i] = (uint16_t)firn_samples_level(mean[i % c], above, shape->row != 0, (unsigned)(i % c));
        w->tokens[i] = (uint8_t)token_of(shape, w->residuals[i], &more_bits);
        mean[i % c] += w->tokens[i] - (mean[i % c] >> 3);
    }
    return end * c;
}

static void make_tokens(const struct firn_samples_shape *shape, const uint8_t *raw, size_t pixels,
                        struct firn_samples_write_work *w)
{
    size_t count = pixels * shape->channels, made = 0;

    firn_samples_load(shape, raw + shape->head_bytes, count, w->x);
    firn_samples_differ(shape, w->x, count, w->residuals);
    for (size_t part = 0; part < FIRN_SAMPLES_PARTS; part++) {
        size_t start = firn_samples_part(pixels, part), end = firn_samples_part(pixels, part + 1);

        made = shape->width == 1 ? order_lines(shape, start, end, made, w) : order_numbers(shape, start, end, w);
    }
    memset(w->counts, 0, sizeof w->counts);
    for (size_t i = 0; i < count; i++)
        w->counts[w->contexts[i]][w->tokens[i]]++;
}

static void put_part(const struct firn_samples_shape *shape, size_t start, size_t end,
                     const struct firn_samples_write_work *w, struct firn_words_writer *s)
{
    unsigned more_bits;

    for (size_t i = start; i < end && s->at < s->end; i++) {
        firn_words_put_spelt(s, w->words[w->codes.map[w->contexts[i]]][w->tokens[i]]);
        if (shape->width == 1)
            continue;
        token_of(shape, w->residuals[i], &more_bits);
        firn_words_put(s, firn_samples_fold((uint32_t)w->residuals[i], shape->width) & ((UINT32_C(1) << more_bits) - 1),
                       more_bits);
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
