/*
 * coding/samples_read.c - residuals decoded, four parts at a time, and numbers made of them
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include "coding/words.h"

#include "firn/prefix.h"

#include <string.h>

enum { LENGTH_MASK = 15, PARTS = FIRN_SAMPLES_PARTS, BATCH = 1024, PER_REFILL = 5 };

static inline uint8_t size_of(uint8_t token)
{
    uint8_t other = (uint8_t)-token;

    return token < other ? token : other;
}

/* Plain comparisons, so that compilers make vectors of it: the table of firn_samples_classes. */
static inline uint8_t class_of(uint8_t size)
{
    return (uint8_t)((size >= 1) + (size >= 2) + (size >= 3) + (size >= 5) + (size >= 8) + (size >= 13) + (size >= 25));
}

/* entries[bits] = token << 8 | class << 4 | length */
static void spread(const uint8_t *lengths, uint16_t entries[FIRN_SAMPLES_ENTRIES])
{
    uint16_t words[256];

    firn_prefix_assign(lengths, 256, words);
    for (unsigned s = 0; s < 256; s++) {
        unsigned span = 1u << (FIRN_SAMPLES_LIMIT - lengths[s]);

        for (unsigned k = 0; lengths[s] != 0 && k < span; k++)
            entries[words[s] * span + k] = (uint16_t)(s << 8 | (unsigned)class_of(size_of((uint8_t)s)) << 4 | lengths[s]);
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

/* ---- numbers of one byte ---- */

/*
 * One part under way. All parts go on in step, so that four look-ups that do not wait for one another are under way.
 * `above` tells what the rows above and the channel add to the contexts of a batch; it is made beforehand, many at a time.
 */
struct part {
    struct firn_words_reader in;
    uint8_t *tokens;                   /* of this part, from its first one */
    size_t count;
    uint8_t above[BATCH];
    unsigned entry, before;            /* the last entry, and the one before it, of a part of one channel */
};

/* above[k] for tokens done + k: class of the row above, and 8 for all channels but the first. */
static void look_above(const struct firn_samples_shape *shape, struct part *p, size_t part_start, size_t done, size_t count)
{
    size_t row = shape->row, c = shape->channels, k = 0, known = row == 0 ? SIZE_MAX : row;
    const uint8_t *up = p->tokens + done - row;
    uint8_t channel = c > 1 ? 8 : 0;

    for (; k < count && done + k < known - c; k++)
        p->above[k] = channel;
    for (; k < count && done + k < known; k++)
        p->above[k] = (uint8_t)(class_of((uint8_t)((size_of(up[k + c]) + 1) / 2)) | channel);
    for (; k < count; k++)
        p->above[k] = (uint8_t)(class_of((uint8_t)((size_of(up[k]) + size_of(up[k + c]) + 1) / 2)) | channel);
    for (k = (c - (part_start + done) % c) % c; c > 1 && k < count; k += c)
        p->above[k] &= 7;
}

/* map[above << 6 | class at the left << 3 | class beside] from the order of the format. */
static void turn_map(const struct firn_contexts *codes, uint8_t map[FIRN_SAMPLES_CONTEXTS])
{
    for (unsigned i = 0; i < FIRN_SAMPLES_CONTEXTS; i++)
        map[(i >> 9) << 9 | (i & 7) << 6 | (i >> 3 & 63)] = codes->map[i];
}

/* One token of a part. Entries are token << 8 | class << 4 | length. */
static inline void step(struct part *p, size_t at, size_t k, size_t channels, const struct firn_samples_read_work *w)
{
    unsigned context = (unsigned)p->above[k] << 6, entry;

    if (channels == 1)
        context |= (p->entry >> 1 & 0x38) | (p->before >> 4 & 7);
    else
        context |= w->left[p->tokens[(ptrdiff_t)at - (ptrdiff_t)channels]] | (p->entry >> 4 & 7);
    entry = w->entries[w->turned[context]][p->in.bits >> (64 - FIRN_SAMPLES_LIMIT)];
    firn_words_drop(&p->in, entry & LENGTH_MASK);
    p->before = p->entry;
    p->entry = entry;
    p->tokens[at] = (uint8_t)(entry >> 8);
}

/* Tokens done .. done + count of all four parts. */
static inline void read_batch(struct part parts[PARTS], size_t done, size_t count, size_t channels,
                              const struct firn_samples_read_work *w)
{
    struct part *a = &parts[0], *b = &parts[1], *c = &parts[2], *d = &parts[3];

    for (size_t k = 0; k < count;) {
        size_t stop = count - k < PER_REFILL ? count : k + PER_REFILL;

        firn_words_refill(&a->in);
        firn_words_refill(&b->in);
        firn_words_refill(&c->in);
        firn_words_refill(&d->in);
        for (; k < stop; k++) {
            step(a, done + k, k, channels, w);
            step(b, done + k, k, channels, w);
            step(c, done + k, k, channels, w);
            step(d, done + k, k, channels, w);
        }
    }
}

/* The last tokens of a part that is longer than the others. */
static void read_rest(const struct firn_samples_shape *shape, struct part *p, size_t part_start, size_t done,
                      const struct firn_samples_read_work *w)
{
    for (; done < p->count; done++) {
        look_above(shape, p, part_start, done, 1);
        firn_words_refill(&p->in);
        step(p, done, 0, shape->channels, w);
    }
}

/*
 * In front of each part's tokens there are as many zeros as the left one reaches back: the tokens of a part are not those in
 * front of the next one, so each part starts FIRN_SAMPLES_CHANNELS_MAX bytes further on than the one before.
 */
static bool read_bytes(const struct firn_samples_shape *shape, const struct firn_words_reader streams[PARTS], size_t count,
                       struct firn_samples_read_work *w)
{
    struct part parts[PARTS];
    size_t each = count / PARTS, most = shape->row == 0 ? BATCH : shape->row - shape->channels, now;

    most = most < BATCH ? most : BATCH;
    turn_map(&w->codes, w->turned);
    for (unsigned t = 0; t < 256; t++)
        w->left[t] = (uint8_t)(class_of(size_of((uint8_t)t)) << 3);
    for (size_t k = 0; k < PARTS; k++) {
        uint8_t *tokens = w->tokens + k * each + (k + 1) * FIRN_SAMPLES_CHANNELS_MAX;

        parts[k] = (struct part){ .in = streams[k], .tokens = tokens, .count = k + 1 < PARTS ? each : count - k * each };
        memset(tokens - FIRN_SAMPLES_CHANNELS_MAX, 0, FIRN_SAMPLES_CHANNELS_MAX);
    }
    for (size_t done = 0; done < each; done += now) {
        now = each - done < most ? each - done : most;
        for (size_t k = 0; k < PARTS; k++)
            look_above(shape, &parts[k], k * each, done, now);
        if (shape->channels == 1)
            read_batch(parts, done, now, 1, w);
        else
            read_batch(parts, done, now, shape->channels, w);
    }
    read_rest(shape, &parts[PARTS - 1], (PARTS - 1) * each, each, w);
    for (size_t k = 0; k < PARTS; k++) {
        if (!firn_words_used_up(&parts[k].in))
            return false;
        memmove(w->tokens + k * each, parts[k].tokens, parts[k].count);
    }
    return true;
}

/* ---- wider numbers ---- */

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
    if (shape.width == 1) {
        if (!read_bytes(&shape, streams, count, work))
            return FIRN_BAD_DATA;
        firn_samples_restore_bytes(&shape, work->tokens, count, raw + shape.head_bytes);
        return FIRN_OK;
    }
    for (size_t part = 0; part < PARTS; part++) {
        size_t end = part + 1 < PARTS ? (part + 1) * each : count;

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
