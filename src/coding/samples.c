/*
 * coding/samples.c - numbers, predictions and contexts, for writer and reader alike
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include "coding/samples_predict.h"

#include "base/bytes.h"

#include <string.h>

bool firn_samples_shape_is_sound(const struct firn_samples_shape *shape, size_t raw_bytes)
{
    return shape->width >= 1 && shape->width <= FIRN_SAMPLES_WIDTH_MAX && shape->channels >= 1 &&
           shape->channels <= FIRN_SAMPLES_CHANNELS_MAX && (unsigned)shape->predictor < FIRN_SAMPLES_PREDICTORS &&
           shape->head_bytes <= FIRN_SAMPLES_HEAD_MAX && shape->row <= FIRN_SAMPLES_ROW_MAX &&
           (shape->row > shape->channels || (shape->row == 0 && !firn_samples_predict_looks_up(shape->predictor))) &&
           shape->row % shape->channels == 0 &&
           (!shape->floats || shape->width == 4) && (!shape->lean || shape->channels > 1) &&
           raw_bytes >= shape->head_bytes + (size_t)shape->width * shape->channels * FIRN_SAMPLES_PARTS;
}

/* ---- numbers ---- */

/* Widths and orders are constants where these are called, so that each gets a loop of its own. */
static inline void load(unsigned width, bool big, bool floats, const uint8_t *raw, size_t count, int32_t *x)
{
    unsigned spare = 32 - 8 * width;

    for (size_t i = 0; i < count; i++, raw += width) {
        uint32_t value = 0;

        for (unsigned k = 0; k < width; k++)
            value = value << 8 | raw[big ? k : width - 1 - k];
        if (floats && value >> 31)
            value ^= UINT32_C(0x7FFFFFFF);
        x[i] = width == 1 ? (int32_t)value : (int32_t)(value << spare) >> spare;
    }
}

static inline void store(unsigned width, bool big, bool floats, const int32_t *x, size_t count, uint8_t *raw)
{
    for (size_t i = 0; i < count; i++, raw += width) {
        uint32_t value = (uint32_t)x[i];

        if (floats && value >> 31)
            value ^= UINT32_C(0x7FFFFFFF);
        for (unsigned k = 0; k < width; k++)
            raw[big ? width - 1 - k : k] = (uint8_t)(value >> 8 * k);
    }
}

void firn_samples_load(const struct firn_samples_shape *shape, const uint8_t *raw, size_t count, int32_t *x)
{
    if (shape->width == 1)
        load(1, false, false, raw, count, x);
    else if (shape->width == 2 && !shape->big)
        load(2, false, false, raw, count, x);
    else if (shape->width == 4 && !shape->big)
        load(4, false, shape->floats, raw, count, x);
    else
        load(shape->width, shape->big, shape->floats, raw, count, x);
}

void firn_samples_store(const struct firn_samples_shape *shape, const int32_t *x, size_t count, uint8_t *raw)
{
    if (shape->width == 2 && !shape->big)
        store(2, false, false, x, count, raw);
    else if (shape->width == 4 && !shape->big)
        store(4, false, shape->floats, x, count, raw);
    else
        store(shape->width, shape->big, shape->floats, x, count, raw);
}

/* ---- predictions ---- */

/* A number of one byte stays within 0 .. 255; a wider one is sign-extended. */
static inline int32_t fit(uint32_t value, unsigned width)
{
    unsigned spare = 32 - 8 * width;

    return width == 1 ? (int32_t)(value & 255) : (int32_t)(value << spare) >> spare;
}

/* Leaning residuals become those of their own channel. */
static void straighten(const struct firn_samples_shape *shape, size_t count, int32_t *x)
{
    for (size_t i = 1, channel = 1; i < count; i++) {
        x[i] = channel == 0 ? x[i] : firn_samples_predict_wrap((uint32_t)x[i] + (uint32_t)x[i - 1]);
        channel = channel + 1 == shape->channels ? 0 : channel + 1;
    }
}

/* Numbers of two bytes without rows, from `start` on: the last ones of each channel stay in registers. */
static inline void restore_short(enum firn_samples_predictor predictor, size_t c, bool big, size_t start, size_t count,
                                 const int32_t *x, uint8_t *raw)
{
    uint32_t w[2] = { 0 }, ww[2] = { 0 }, www[2] = { 0 };

    for (size_t k = 0; k < c; k++) {
        w[k] = (uint32_t)x[start - c + k];
        ww[k] = (uint32_t)x[start - 2 * c + k];
        www[k] = (uint32_t)x[start - 3 * c + k];
    }
    for (size_t i = start; i < count; i += c)
        for (size_t k = 0; k < c; k++) {
            uint32_t prediction = predictor == FIRN_SAMPLES_LEFT ? w[k]
                                : predictor == FIRN_SAMPLES_LINE ? 2 * w[k] - ww[k] : 3 * (w[k] - ww[k]) + www[k];
            uint16_t number = (uint16_t)((uint32_t)x[i + k] + prediction);

            www[k] = ww[k];
            ww[k] = w[k];
            w[k] = number;             /* what is above two bytes never comes down */
            firn_bytes_put16(raw + 2 * (i + k), big ? (uint16_t)(number << 8 | number >> 8) : number);
        }
}

/* A loop for each of what sound is made of. */
static void restore_sound(const struct firn_samples_shape *shape, size_t start, size_t count, const int32_t *x,
                          uint8_t *raw)
{
    enum firn_samples_predictor predictor = shape->predictor;

    if (shape->channels == 1 && predictor == FIRN_SAMPLES_LEFT)
        restore_short(FIRN_SAMPLES_LEFT, 1, shape->big, start, count, x, raw);
    else if (shape->channels == 1 && predictor == FIRN_SAMPLES_LINE)
        restore_short(FIRN_SAMPLES_LINE, 1, shape->big, start, count, x, raw);
    else if (shape->channels == 1)
        restore_short(FIRN_SAMPLES_CURVE, 1, shape->big, start, count, x, raw);
    else if (predictor == FIRN_SAMPLES_LEFT)
        restore_short(FIRN_SAMPLES_LEFT, 2, shape->big, start, count, x, raw);
    else if (predictor == FIRN_SAMPLES_LINE)
        restore_short(FIRN_SAMPLES_LINE, 2, shape->big, start, count, x, raw);
    else
        restore_short(FIRN_SAMPLES_CURVE, 2, shape->big, start, count, x, raw);
}

/* From where the predictor finds all it looks for; a loop for each. */
static inline void restore_from(enum firn_samples_predictor predictor, const struct firn_samples_shape *shape,
                                size_t start, size_t count, int32_t *x)
{
    size_t c = shape->channels, row = firn_samples_predict_looks_up(predictor) ? shape->row : 0;
    unsigned width = shape->width;

    if (width == 2)
        for (size_t i = start; i < count; i++)
            x[i] = fit((uint32_t)x[i] + (uint32_t)firn_samples_predict(predictor, x, i, c, row), 2);
    else
        for (size_t i = start; i < count; i++)
            x[i] = fit((uint32_t)x[i] + (uint32_t)firn_samples_predict(predictor, x, i, c, row), width);
}

void firn_samples_restore(const struct firn_samples_shape *shape, size_t count, int32_t *x, uint8_t *raw)
{
    size_t edge = (firn_samples_predict_looks_up(shape->predictor) ? shape->row : 0) + 3 * (size_t)shape->channels;
    bool sound = shape->width == 2 && shape->channels <= 2 && (shape->predictor == FIRN_SAMPLES_LEFT ||
                 shape->predictor == FIRN_SAMPLES_LINE || shape->predictor == FIRN_SAMPLES_CURVE);

    edge = edge < count ? edge : count;
    if (shape->lean)
        straighten(shape, count, x);
    for (size_t i = 0; i < edge; i++)
        x[i] = fit((uint32_t)x[i] + (uint32_t)firn_samples_predict_number(shape, x, i), shape->width);
    if (sound && edge < count) {
        firn_samples_store(shape, x, edge, raw);
        restore_sound(shape, edge, count, x, raw);
        return;
    }
    switch (shape->predictor) {
    case FIRN_SAMPLES_LEFT:
        restore_from(FIRN_SAMPLES_LEFT, shape, edge, count, x);
        break;
    case FIRN_SAMPLES_LINE:
        restore_from(FIRN_SAMPLES_LINE, shape, edge, count, x);
        break;
    case FIRN_SAMPLES_CURVE:
        restore_from(FIRN_SAMPLES_CURVE, shape, edge, count, x);
        break;
    case FIRN_SAMPLES_PLANE:
        restore_from(FIRN_SAMPLES_PLANE, shape, edge, count, x);
        break;
    default:
        for (size_t i = edge; i < count; i++)
            x[i] = fit((uint32_t)x[i] + (uint32_t)firn_samples_predict_number(shape, x, i), shape->width);
        break;
    }
    firn_samples_store(shape, x, count, raw);
}

/* ---- numbers of one byte ---- */

/* A line of residuals, channel after channel, and where its numbers go; what came before them stands there. */
struct byte_line {
    uint8_t *residuals;
    size_t width, row;                 /* width: pixels */
    uint8_t lean;                      /* 255 if they lean, else 0 */
    uint8_t *raw;
};

/* What stands around the channel whose number goes to `to`. */
static inline struct firn_samples_predict_around look_around(enum firn_samples_predictor predictor, const uint8_t *to,
                                                             size_t c, size_t row)
{
    bool up = firn_samples_predict_looks_up(predictor),
         far = predictor == FIRN_SAMPLES_LINE || predictor == FIRN_SAMPLES_CURVE;

    return (struct firn_samples_predict_around){
        .w = *(to - c), .ww = far ? *(to - 2 * c) : 0, .www = far ? *(to - 3 * c) : 0, .nw = up ? *(to - row - c) : 0
    };
}

/* Makes the number of a residual, and goes on to the next pixel. */
static inline void restore_number(enum firn_samples_predictor predictor, struct firn_samples_predict_around *a,
                                  uint8_t residual, size_t row, uint8_t *to)
{
    uint8_t number;

    if (firn_samples_predict_looks_up(predictor))
        a->n = *(to - row);
    number = (uint8_t)(residual + firn_samples_predict_byte(predictor, a));
    a->www = a->ww;
    a->ww = a->w;
    a->w = number;
    a->nw = a->n;
    *to = number;
}

static inline void restore_one(enum firn_samples_predictor predictor, const struct byte_line *line, size_t from)
{
    struct firn_samples_predict_around a = look_around(predictor, line->raw + from, 1, line->row);

    for (size_t x = from; x < line->width; x++)
        restore_number(predictor, &a, line->residuals[x], line->row, line->raw + x);
}

/* Three channels in turn, side by side. */
static inline void restore_three(enum firn_samples_predictor predictor, const struct byte_line *line, size_t from)
{
    const uint8_t *ra = line->residuals, *rb = ra + line->width, *rc = rb + line->width;
    size_t row = line->row, width = line->width;
    uint8_t *to = line->raw + 3 * from, lean = line->lean;
    struct firn_samples_predict_around a = look_around(predictor, to, 3, row),
                                       b = look_around(predictor, to + 1, 3, row),
                                       c = look_around(predictor, to + 2, 3, row);

    for (size_t x = from; x < width; x++, to += 3) {
        uint8_t second = (uint8_t)(rb[x] + (ra[x] & lean)), third = (uint8_t)(rc[x] + (second & lean));

        restore_number(predictor, &a, ra[x], row, to);
        restore_number(predictor, &b, second, row, to + 1);
        restore_number(predictor, &c, third, row, to + 2);
    }
}

/* Any number of channels, one after the other. */
static inline void restore_many(enum firn_samples_predictor predictor, const struct firn_samples_shape *shape,
                                const struct byte_line *line, size_t from)
{
    size_t c = shape->channels, width = line->width;
    uint8_t *residuals = line->residuals;

    for (size_t k = 0; k < c; k++) {
        struct firn_samples_predict_around a = look_around(predictor, line->raw + from * c + k, c, line->row);

        for (size_t x = from; x < width; x++) {
            if (k != 0)
                residuals[k * width + x] = (uint8_t)(residuals[k * width + x] +
                                                     (residuals[(k - 1) * width + x] & line->lean));
            restore_number(predictor, &a, residuals[k * width + x], line->row, line->raw + x * c + k);
        }
    }
}

/* From pixel `from` of a line on, where all that the predictor looks for is there. */
static inline void restore_pixels(enum firn_samples_predictor predictor, const struct firn_samples_shape *shape,
                                  const struct byte_line *line, size_t from)
{
    if (shape->channels == 1)
        restore_one(predictor, line, from);
    else if (shape->channels == 3)
        restore_three(predictor, line, from);
    else
        restore_many(predictor, shape, line, from);
}

/* The first pixels of all, up to `end` of the line, of which number `at` is the first: not everything is there yet. */
static void restore_first(const struct firn_samples_shape *shape, const struct byte_line *line, size_t at, size_t end)
{
    size_t c = shape->channels;

    for (size_t x = 0; x < end; x++) {
        uint8_t residual = 0;

        for (size_t k = 0; k < c; k++) {
            uint8_t *to = line->raw + x * c + k;
            size_t i = at + x * c + k;
            struct firn_samples_predict_around a = { 0 };

            a.w = i < c ? 0 : *(to - c);
            a.ww = i < 2 * c ? a.w : *(to - 2 * c);
            a.www = i < 3 * c ? 0 : *(to - 3 * c);
            residual = (uint8_t)(line->residuals[k * line->width + x] + (residual & (k == 0 ? 0 : line->lean)));
            if (firn_samples_predict_looks_up(shape->predictor) ||
                (shape->predictor == FIRN_SAMPLES_CURVE && i < 3 * c))
                *to = (uint8_t)(residual + a.w);
            else
                *to = (uint8_t)(residual + firn_samples_predict_byte(shape->predictor, &a));
        }
    }
}

void firn_samples_restore_line(const struct firn_samples_shape *shape, uint8_t *residuals, size_t width, size_t at,
                               uint8_t *raw)
{
    size_t c = shape->channels, edge = firn_samples_predict_looks_up(shape->predictor) ? shape->row / c + 1 : 3, from;
    struct byte_line line = { residuals, width, shape->row, shape->lean ? UINT8_MAX : 0, raw };

    from = at / c >= edge ? 0 : edge - at / c < width ? edge - at / c : width;
    restore_first(shape, &line, at, from);
    if (from == width)
        return;
    switch (shape->predictor) {
    case FIRN_SAMPLES_UP:
        restore_pixels(FIRN_SAMPLES_UP, shape, &line, from);
        break;
    case FIRN_SAMPLES_PLANE:
        restore_pixels(FIRN_SAMPLES_PLANE, shape, &line, from);
        break;
    case FIRN_SAMPLES_MEDIAN:
        restore_pixels(FIRN_SAMPLES_MEDIAN, shape, &line, from);
        break;
    case FIRN_SAMPLES_MEAN:
        restore_pixels(FIRN_SAMPLES_MEAN, shape, &line, from);
        break;
    case FIRN_SAMPLES_BENT:
        restore_pixels(FIRN_SAMPLES_BENT, shape, &line, from);
        break;
    case FIRN_SAMPLES_LINE:
        restore_pixels(FIRN_SAMPLES_LINE, shape, &line, from);
        break;
    case FIRN_SAMPLES_CURVE:
        restore_pixels(FIRN_SAMPLES_CURVE, shape, &line, from);
        break;
    case FIRN_SAMPLES_NOTHING:
        restore_pixels(FIRN_SAMPLES_NOTHING, shape, &line, from);
        break;
    default:
        restore_pixels(FIRN_SAMPLES_LEFT, shape, &line, from);
        break;
    }
}

/* ---- contexts ---- */

void firn_samples_lines_start(struct firn_samples_lines *lines)
{
    memset(lines->room, 0, sizeof lines->room);
    for (size_t k = 0; k < 3; k++)
        lines->line[k] = lines->room[k];
}

/* Where a channel of a line starts. */
static inline size_t channel_at(const struct firn_samples_shape *shape, unsigned channel)
{
    return channel * (firn_samples_line(shape) + 2 * FIRN_SAMPLES_MARGIN) + FIRN_SAMPLES_MARGIN;
}

void firn_samples_lines_next(struct firn_samples_lines *lines, const struct firn_samples_shape *shape)
{
    uint8_t *oldest = lines->line[2];

    lines->line[2] = lines->line[1];
    lines->line[1] = lines->line[0];
    lines->line[0] = oldest;
    memset(oldest, 0, channel_at(shape, shape->channels));
}

/* 0 .. 15, about evenly in the logarithm; comparisons only, so that compilers make vectors of it. */
static inline uint8_t level_of(uint8_t sum)
{
    return (uint8_t)((sum >= 1) + (sum >= 2) + (sum >= 3) + (sum >= 4) + (sum >= 6) + (sum >= 8) + (sum >= 11) +
                     (sum >= 15) + (sum >= 20) + (sum >= 27) + (sum >= 36) + (sum >= 50) + (sum >= 70) + (sum >= 100) +
                     (sum >= 150));
}

void firn_samples_lines_look(const struct firn_samples_lines *lines, const struct firn_samples_shape *shape,
                             unsigned channel, size_t width, uint16_t *contexts)
{
    const uint8_t *above = lines->line[1] + channel_at(shape, channel), *beside = lines->line[2] + channel_at(shape, 0);

    if (channel == 0) {
        for (size_t x = 0; x < width; x++) {
            uint8_t n = (uint8_t)(2 * above[x] + above[x + 1] + (above - 1)[x]);
            uint8_t m = (uint8_t)(2 * beside[x] + above[x + 2] + (above - 2)[x]);

            contexts[x] = (uint16_t)(level_of(n) << 4 | level_of(m));
        }
        return;
    }
    beside = lines->line[0] + channel_at(shape, channel - 1);
    for (size_t x = 0; x < width; x++) {
        uint8_t n = (uint8_t)(2 * above[x] + above[x + 1] + (above - 1)[x]);
        uint8_t m = (uint8_t)(2 * beside[x] + beside[x + 1] + (beside - 1)[x]);

        contexts[x] = (uint16_t)(256 | level_of(n) << 4 | level_of(m));
    }
}

void firn_samples_lines_tell(struct firn_samples_lines *lines, const struct firn_samples_shape *shape, unsigned channel,
                             size_t width, const uint8_t *residuals)
{
    uint8_t *line = lines->line[0] + channel_at(shape, channel);

    for (size_t x = 0; x < width; x++)
        line[x] = firn_samples_size(residuals[x]);
}
