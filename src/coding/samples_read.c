/*
 * coding/samples_read.c - residuals decoded, four parts at a time, and numbers made of them
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum { LENGTH_MASK = 15, PARTS = FIRN_SAMPLES_PARTS, PER_REFILL = 5, WIDE_TOKENS = 128 };

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
    tail = (raw_bytes - shape->head_bytes) % (shape->width * shape->channels);
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
    for (unsigned t = 0; shape->width > 1 && t < w->codes.tables; t++)
        for (unsigned token = WIDE_TOKENS; token < 256; token++)
            if (w->codes.lengths[t][token] != 0)
                return false;
    for (unsigned t = 0; t < w->codes.tables; t++)
        spread(w->codes.lengths[t], w->entries + t * FIRN_SAMPLES_ENTRIES);
    return true;
}

/* One part under way, as in coding/streams.c: where the lowest 1 of bits stands tells how many are taken. */
struct part {
    const uint8_t *at, *end;
    uint64_t bits;
};

/* The refill for where there are no eight bytes any more. A stream that is used up far beyond its end stays there. */
static void refill_end(struct part *p)
{
    unsigned taken = firn_words_trailing_zeros(p->bits);
    size_t left = (size_t)(p->end - p->at), step = taken / 8;

    if (step > left) {                 /* bits that are not there were taken: no more come, the count does not match */
        p->at = p->end;
        p->bits = UINT64_C(1) << 23;   /* what is taken before the next refill, at most 40 bits, does not push it out */
        return;
    }
    p->at += step;
    p->bits = (firn_words_load(p->at, p->end) | 1) << taken % 8;
}

static inline void refill(struct part *p)
{
    unsigned taken = firn_words_trailing_zeros(p->bits);

    p->at += taken / 8;
    p->bits = (firn_words_swap64(firn_bytes_get64(p->at)) | 1) << taken % 8;
}

/* All but less than eight zero bits taken, and none beyond. */
static bool is_used_up(const struct part *p)
{
    unsigned taken = firn_words_trailing_zeros(p->bits);
    size_t used_bits = taken, all_bits = 8 * (size_t)(p->end - p->at);

    if (used_bits > all_bits || all_bits - used_bits >= 8)
        return false;
    return all_bits == used_bits || (uint8_t)(p->end[-1] << (8 - (all_bits - used_bits))) == 0;
}

/* ---- numbers of one byte ---- */

static inline void step(struct part *p, size_t which, size_t k, struct firn_samples_read_work *w)
{
    unsigned entry = w->entries[w->places[w->contexts[which][k]] | p->bits >> (64 - FIRN_SAMPLES_LIMIT)];

    p->bits <<= entry & LENGTH_MASK;
    w->now[which][k] = (uint8_t)(entry >> 8);
}

/*
 * Whole rounds of a line, all parts in step, as long as all refills lie in front of `end`: a round moves each stream by
 * 7 bytes at most and reads 8. Returns how many tokens of each part are done.
 */
static size_t hurry(struct part parts[PARTS], size_t count, const uint8_t *end, struct firn_samples_read_work *w)
{
    struct part a = parts[0], b = parts[1], c = parts[2], d = parts[3];
    size_t rounds = count / PER_REFILL, k = 0;

    for (unsigned p = 0; p < PARTS; p++) {
        ptrdiff_t left = end - parts[p].at - firn_words_trailing_zeros(parts[p].bits) / 8;
        size_t safe = left < 8 ? 0 : (size_t)(left - 8) / 7 + 1;

        rounds = safe < rounds ? safe : rounds;
    }
    for (; rounds > 0; rounds--) {
        refill(&a), refill(&b), refill(&c), refill(&d);
        for (size_t stop = k + PER_REFILL; k < stop; k++) {
            step(&a, 0, k, w);
            step(&b, 1, k, w);
            step(&c, 2, k, w);
            step(&d, 3, k, w);
        }
    }
    parts[0] = a, parts[1] = b, parts[2] = c, parts[3] = d;
    return k;
}

/* Tokens of a channel of a line of part p, the first `done` of them known; then they go to where their numbers are. */
static void finish_line(const struct firn_samples_shape *shape, struct part *p, size_t which, unsigned channel,
                        size_t done, size_t width, uint8_t *tokens, struct firn_samples_read_work *w)
{
    const uint8_t *now = w->now[which];
    size_t c = shape->channels;

    for (size_t k = done; k < width; k++) {
        refill_end(p);
        step(p, which, k, w);
    }
    firn_samples_lines_tell(&w->lines[which], shape, channel, width, now);
    if (c == 1)
        memcpy(tokens, now, width);
    else if (c == 3)
        for (size_t k = 0; k < width; k++)
            tokens[3 * k + channel] = now[k];
    else
        for (size_t k = 0; k < width; k++)
            tokens[c * k + channel] = now[k];
}

/* Line after line of all parts; the last one may have some pixels more. */
static void read_bytes(const struct firn_samples_shape *shape, struct part parts[PARTS], size_t pixels,
                       struct firn_samples_read_work *w)
{
    size_t line = firn_samples_line(shape), longest = pixels - firn_samples_part(pixels, PARTS - 1);

    for (size_t p = 0; p < PARTS; p++)
        firn_samples_lines_start(&w->lines[p]);
    for (size_t at = 0; at < longest; at += line) {
        size_t widths[PARTS];

        for (size_t p = 0; p < PARTS; p++) {
            size_t all = firn_samples_part(pixels, p + 1) - firn_samples_part(pixels, p),
                   left = all < at ? 0 : all - at;

            widths[p] = left < line ? left : line;
            firn_samples_lines_next(&w->lines[p], shape);
        }
        for (unsigned channel = 0; channel < shape->channels; channel++) {
            size_t done;

            for (size_t p = 0; p < PARTS; p++)
                firn_samples_lines_look(&w->lines[p], shape, channel, widths[p], w->contexts[p]);
            done = hurry(parts, widths[0], parts[PARTS - 1].end, w);
            for (size_t p = 0; p < PARTS; p++)
                finish_line(shape, &parts[p], p, channel, done, widths[p],
                            w->tokens + (firn_samples_part(pixels, p) + at) * shape->channels, w);
        }
    }
}

/* ---- wider numbers ---- */

/* Number i of a part that starts at number `start`, in channel `channel`. */
static inline void read_number(const struct firn_samples_shape *shape, struct part *p, size_t start, size_t i,
                               unsigned channel, unsigned *mean, struct firn_samples_read_work *w)
{
    unsigned above = shape->row != 0 && i - start >= shape->row ? w->tokens[i - shape->row] : 0, entry, token, more;
    unsigned context = firn_samples_level(*mean, above, shape->row != 0, channel);
    uint32_t folded;

    if (p->end - p->at >= 16)
        refill(p);
    else
        refill_end(p);
    entry = w->entries[w->places[context] | p->bits >> (64 - FIRN_SAMPLES_LIMIT)];
    p->bits <<= entry & LENGTH_MASK;
    token = entry >> 8;
    w->tokens[i] = (uint8_t)token;
    *mean += token - (*mean >> 3);
    more = token < 16 ? 0 : token / 4 - 2;
    folded = token < 16 ? token : (4 | (token & 3)) << more | (uint32_t)(p->bits >> 1 >> (63 - more));
    p->bits <<= more;
    w->x[i] = (int32_t)firn_samples_unfold(folded);
}

/* All parts in step, pixel by pixel; the last one may have some more. */
static void read_numbers(const struct firn_samples_shape *shape, struct part parts[PARTS], size_t pixels,
                         struct firn_samples_read_work *w)
{
    unsigned means[PARTS][FIRN_SAMPLES_CHANNELS_MAX] = { { 0 } };
    struct part a = parts[0], b = parts[1], c = parts[2], d = parts[3];
    size_t starts[PARTS], n = 0, each = firn_samples_part(pixels, 1), last = pixels - 3 * each;

    for (size_t p = 0; p < PARTS; p++)
        starts[p] = firn_samples_part(pixels, p) * shape->channels;
    for (size_t x = 0; x < last; x++)
        for (unsigned channel = 0; channel < shape->channels; channel++, n++) {
            if (x < each) {
                read_number(shape, &a, starts[0], starts[0] + n, channel, &means[0][channel], w);
                read_number(shape, &b, starts[1], starts[1] + n, channel, &means[1][channel], w);
                read_number(shape, &c, starts[2], starts[2] + n, channel, &means[2][channel], w);
            }
            read_number(shape, &d, starts[3], starts[3] + n, channel, &means[3][channel], w);
        }
    parts[0] = a, parts[1] = b, parts[2] = c, parts[3] = d;
}

enum firn_status firn_samples_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_samples_read_work *work)
{
    struct firn_words_reader streams[PARTS];
    struct firn_samples_shape shape;
    struct part parts[PARTS];
    size_t pixels, tail, edges_at;

    if (!open_streams(coded, coded_bytes, raw_bytes, &edges_at, &shape, streams, work))
        return FIRN_BAD_DATA;
    tail = (raw_bytes - shape.head_bytes) % (shape.width * shape.channels);
    memcpy(raw, coded + edges_at, shape.head_bytes);
    memcpy(raw + raw_bytes - tail, coded + edges_at + shape.head_bytes, tail);
    pixels = firn_samples_pixels(&shape, raw_bytes);
    for (size_t p = 0; p < PARTS; p++)
        parts[p] = (struct part){ streams[p].bytes, streams[p].bytes + streams[p].byte_count, 1 };
    for (unsigned i = 0; i < FIRN_SAMPLES_CONTEXTS; i++)
        work->places[i] = (uint16_t)(work->codes.map[i] << FIRN_SAMPLES_LIMIT);
    (shape.width == 1 ? read_bytes : read_numbers)(&shape, parts, pixels, work);
    for (size_t p = 0; p < PARTS; p++)
        if (!is_used_up(&parts[p]))
            return FIRN_BAD_DATA;
    if (shape.width == 1) {
        firn_samples_restore_bytes(&shape, work->tokens, pixels * shape.channels, raw + shape.head_bytes);
    } else {
        firn_samples_restore(&shape, pixels * shape.channels, work->x);
        firn_samples_store(&shape, work->x, pixels * shape.channels, raw + shape.head_bytes);
    }
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
