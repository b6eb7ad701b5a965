/*
 * coding/samples_read.c - residuals decoded, four parts at a time, and numbers made of them
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include "coding/spread.h"
#include "coding/words.h"

#include <string.h>

enum {
    LENGTH_MASK = 15,
    PARTS = FIRN_SAMPLES_PARTS,
    PER_REFILL = 5,
    WIDE_TOKENS = 128,                 /* of numbers wider than a byte */
    WIDE_MORE_AT = 4,
    WIDE_MORE_MASK = 31,
    WIDE_TOKEN_AT = 9
};

/*
 * Of one byte: token << 8 | length of the word. Wider: token << 9 | extra bits << 4 | length, tokens being below 128.
 */
static void prepare(unsigned width, struct firn_samples_read_work *w)
{
    uint16_t values[256];

    for (unsigned token = 0; token < 256; token++)
        values[token] = (uint16_t)(width == 1 ? token << 8
                                              : (token & (WIDE_TOKENS - 1)) << WIDE_TOKEN_AT |
                                                    firn_samples_more(token & (WIDE_TOKENS - 1)) << WIDE_MORE_AT);
    for (unsigned token = 0; token < WIDE_TOKENS; token++)
        w->bases[token] = token < 16 ? token : (4 | (token & 3)) << firn_samples_more(token);
    for (unsigned t = 0; t < w->codes.tables; t++)
        firn_spread16(w->codes.lengths[t], 256, values, w->entries + t * FIRN_SAMPLES_ENTRIES);
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
        streams[part] = firn_words_open(coded + at, size);
    }
    for (unsigned t = 0; shape->width > 1 && t < w->codes.tables; t++)
        for (unsigned token = 32 * shape->width; token < 256; token++)
            if (w->codes.lengths[t][token] != 0)
                return false;
    prepare(shape->width, w);
    return true;
}

/* ---- numbers of one byte ---- */

static inline void step(struct firn_words_reader *s, const uint16_t *contexts, uint8_t *tokens, size_t k,
                        const struct firn_samples_read_work *w)
{
    unsigned entry = w->entries[w->places[contexts[k]] | s->bits >> (64 - FIRN_SAMPLES_LIMIT)];

    s->bits <<= entry & LENGTH_MASK;
    tokens[k] = (uint8_t)(entry >> 8);
}

/*
 * Whole rounds of a channel of a line, all parts in step, as long as all refills lie in front of `end`: a round moves
 * each stream by 7 bytes at most and reads 8. Returns how many tokens of each part are done.
 */
static size_t hurry(struct firn_words_reader parts[PARTS], size_t count, const uint8_t *end,
                    uint8_t *const tokens[PARTS], const struct firn_samples_read_work *w)
{
    struct firn_words_reader a = parts[0], b = parts[1], c = parts[2], d = parts[3];
    size_t rounds = count / PER_REFILL, k = 0;

    for (unsigned p = 0; p < PARTS; p++) {
        ptrdiff_t left = end - parts[p].at - firn_words_trailing_zeros(parts[p].bits) / 8;
        size_t safe = left < 8 ? 0 : (size_t)(left - 8) / 7 + 1;

        rounds = safe < rounds ? safe : rounds;
    }
    for (; rounds > 0; rounds--) {
        firn_words_refill_within(&a), firn_words_refill_within(&b);
        firn_words_refill_within(&c), firn_words_refill_within(&d);
        for (size_t stop = k + PER_REFILL; k < stop; k++) {
            step(&a, w->contexts[0], tokens[0], k, w);
            step(&b, w->contexts[1], tokens[1], k, w);
            step(&c, w->contexts[2], tokens[2], k, w);
            step(&d, w->contexts[3], tokens[3], k, w);
        }
    }
    parts[0] = a, parts[1] = b, parts[2] = c, parts[3] = d;
    return k;
}

/* A channel of a line of all parts, of `widths` pixels each. */
static void read_channel(const struct firn_samples_shape *shape, struct firn_words_reader parts[PARTS],
                         unsigned channel, const size_t widths[PARTS], uint8_t *const lines[PARTS],
                         struct firn_samples_read_work *w)
{
    uint8_t *tokens[PARTS];
    size_t done;

    for (size_t p = 0; p < PARTS; p++) {
        tokens[p] = lines[p] + channel * widths[p];
        firn_samples_lines_look(&w->lines[p], shape, channel, widths[p], w->contexts[p]);
    }
    done = hurry(parts, widths[0], parts[PARTS - 1].end, tokens, w);
    for (size_t p = 0; p < PARTS; p++) {
        for (size_t k = done; k < widths[p]; k++) {
            firn_words_refill_end(&parts[p]);
            step(&parts[p], w->contexts[p], tokens[p], k, w);
        }
        firn_samples_lines_tell(&w->lines[p], shape, channel, widths[p], tokens[p]);
    }
}

/* The pixels of a line of part p that starts at pixel `at` of the part; none behind its end. */
static size_t width_of(size_t pixels, size_t p, size_t at, size_t line)
{
    size_t all = firn_samples_part(pixels, p + 1) - firn_samples_part(pixels, p), left = all < at ? 0 : all - at;

    return left < line ? left : line;
}

/* Line after line of all parts; the last one may have some pixels more. */
static void read_bytes(const struct firn_samples_shape *shape, struct firn_words_reader parts[PARTS], size_t pixels,
                       struct firn_samples_read_work *w)
{
    size_t line = firn_samples_line(shape), longest = pixels - firn_samples_part(pixels, PARTS - 1);

    for (size_t p = 0; p < PARTS; p++)
        firn_samples_lines_start(&w->lines[p]);
    for (size_t at = 0; at < longest; at += line) {
        uint8_t *lines[PARTS];
        size_t widths[PARTS];

        for (size_t p = 0; p < PARTS; p++) {
            widths[p] = width_of(pixels, p, at, line);
            lines[p] = w->tokens + (firn_samples_part(pixels, p) + at) * shape->channels;
            firn_samples_lines_next(&w->lines[p], shape);
        }
        for (unsigned channel = 0; channel < shape->channels; channel++)
            read_channel(shape, parts, channel, widths, lines, w);
    }
}

static void restore_bytes(const struct firn_samples_shape *shape, size_t pixels, struct firn_samples_read_work *w,
                          uint8_t *raw)
{
    size_t line = firn_samples_line(shape), c = shape->channels;

    for (size_t p = 0; p < PARTS; p++)
        for (size_t at = firn_samples_part(pixels, p), end = firn_samples_part(pixels, p + 1); at < end; at += line)
            firn_samples_restore_line(shape, w->tokens + at * c, end - at < line ? end - at : line, at * c,
                                      raw + at * c);
}

/* ---- wider numbers ---- */

/* A part under way: from where on its tokens and numbers go, and the means of its channels. */
struct numbers {
    struct firn_words_reader stream;
    uint8_t *tokens;
    int32_t *x;
    unsigned means[FIRN_SAMPLES_CHANNELS_MAX];
};

/* What all parts have alike; constants where it matters. */
struct kind {
    unsigned channels;
    size_t row;
    bool two;                          /* two numbers take no more bits than a refill brings */
};

/* Number i of a part, in a channel of that mean. */
static inline void read_number(struct numbers *part, size_t i, unsigned channel, unsigned *mean,
                               const struct kind *kind, const struct firn_samples_read_work *w)
{
    unsigned above = kind->row != 0 && i >= kind->row ? part->tokens[i - kind->row] : 0;
    unsigned context = firn_samples_level(*mean, above, kind->row != 0, channel);
    struct firn_words_reader *s = &part->stream;
    unsigned entry = w->entries[w->places[context] | s->bits >> (64 - FIRN_SAMPLES_LIMIT)];
    unsigned token = entry >> WIDE_TOKEN_AT, more = entry >> WIDE_MORE_AT & WIDE_MORE_MASK;

    *mean += token - (*mean >> 3);
    firn_words_drop(s, entry & LENGTH_MASK);
    if (kind->row != 0)
        part->tokens[i] = (uint8_t)token;
    part->x[i] = (int32_t)firn_samples_unfold(w->bases[token] | firn_words_peek(s->bits, more));
    firn_words_drop(s, more);
}

/* One pixel of a part; within: eight bytes are left for each refill. */
static inline void read_pixel(struct numbers *part, size_t pixel, unsigned *means, const struct kind *kind, bool within,
                              const struct firn_samples_read_work *w)
{
    for (unsigned channel = 0; channel < kind->channels; channel++) {
        if (!within)
            firn_words_refill(&part->stream);
        else if (!kind->two || channel % 2 == 0)
            firn_words_refill_within(&part->stream);
        read_number(part, pixel * kind->channels + channel, channel, &means[channel], kind, w);
    }
}

/* How many pixels lie in front of the last bytes of a stream, however long their words are. */
static size_t safe_pixels(const struct firn_words_reader *s, unsigned channels)
{
    size_t left = (size_t)(s->end - s->at), most = channels * (FIRN_SAMPLES_LIMIT + WIDE_MORE_MASK + 7) / 8;

    return left < 16 + most ? 0 : (left - 16) / most;
}

/* Pixels start .. end of all parts in step. Each part is a variable of its own, so that it is kept in registers. */
static inline void hurry_numbers(struct numbers parts[PARTS], size_t start, size_t end, const struct kind *kind,
                                 const struct firn_samples_read_work *w)
{
    struct numbers a = parts[0], b = parts[1], c = parts[2], d = parts[3];

    for (size_t pixel = start; pixel < end; pixel++) {
        read_pixel(&a, pixel, a.means, kind, true, w);
        read_pixel(&b, pixel, b.means, kind, true, w);
        read_pixel(&c, pixel, c.means, kind, true, w);
        read_pixel(&d, pixel, d.means, kind, true, w);
    }
    parts[0] = a, parts[1] = b, parts[2] = c, parts[3] = d;
}

static void read_numbers(const struct firn_samples_shape *shape, struct firn_words_reader streams[PARTS], size_t pixels,
                         struct firn_samples_read_work *w)
{
    static const struct kind one = { 1, 0, true }, two = { 2, 0, true };
    struct kind kind = { shape->channels, shape->row, shape->width == 2 };
    size_t each = firn_samples_part(pixels, 1), last = pixels - firn_samples_part(pixels, PARTS - 1), pixel = 0;
    struct numbers parts[PARTS];

    for (size_t p = 0; p < PARTS; p++) {
        size_t start = firn_samples_part(pixels, p) * kind.channels;

        parts[p] = (struct numbers){ .stream = streams[p], .tokens = w->tokens + start, .x = w->x + start };
    }
    while (pixel < each) {
        size_t safe = each - pixel;

        for (size_t p = 0; p < PARTS; p++) {
            size_t of = safe_pixels(&parts[p].stream, kind.channels);

            safe = of < safe ? of : safe;
        }
        if (kind.two && kind.channels == 1 && kind.row == 0)
            hurry_numbers(parts, pixel, pixel + safe, &one, w);
        else if (kind.two && kind.channels == 2 && kind.row == 0)
            hurry_numbers(parts, pixel, pixel + safe, &two, w);
        else
            hurry_numbers(parts, pixel, pixel + safe, &kind, w);
        pixel += safe;
        for (size_t p = 0; safe == 0 && p < PARTS; p++)
            read_pixel(&parts[p], pixel, parts[p].means, &kind, false, w);
        pixel += safe == 0;
    }
    for (; pixel < last; pixel++)
        read_pixel(&parts[PARTS - 1], pixel, parts[PARTS - 1].means, &kind, false, w);
    for (size_t p = 0; p < PARTS; p++)
        streams[p] = parts[p].stream;
}

enum firn_status firn_samples_read(const uint8_t *coded, size_t coded_bytes, uint8_t *raw, size_t raw_bytes,
                                   struct firn_samples_read_work *work)
{
    struct firn_words_reader parts[PARTS];
    struct firn_samples_shape shape;
    size_t pixels, tail, edges_at;

    if (!open_streams(coded, coded_bytes, raw_bytes, &edges_at, &shape, parts, work))
        return FIRN_BAD_DATA;
    tail = (raw_bytes - shape.head_bytes) % (shape.width * shape.channels);
    memcpy(raw, coded + edges_at, shape.head_bytes);
    memcpy(raw + raw_bytes - tail, coded + edges_at + shape.head_bytes, tail);
    pixels = firn_samples_pixels(&shape, raw_bytes);
    for (unsigned i = 0; i < FIRN_SAMPLES_CONTEXTS; i++)
        work->places[i] = (uint16_t)(work->codes.map[i] << FIRN_SAMPLES_LIMIT);
    (shape.width == 1 ? read_bytes : read_numbers)(&shape, parts, pixels, work);
    for (size_t p = 0; p < PARTS; p++)
        if (!firn_words_used_up(&parts[p]))
            return FIRN_BAD_DATA;
    if (shape.width == 1)
        restore_bytes(&shape, pixels, work, raw + shape.head_bytes);
    else
        firn_samples_restore(&shape, pixels * shape.channels, work->x, raw + shape.head_bytes);
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
        *code_bits += 8 * (uint64_t)(streams[part].end - streams[part].at);
    return FIRN_OK;
}
