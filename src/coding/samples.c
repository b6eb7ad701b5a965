/*
 * coding/samples.c - numbers, predictions and contexts, for writer and reader alike
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples.h"

#include <string.h>

/* Whether it needs the row above. */
static bool looks_up(enum firn_samples_predictor predictor)
{
    return predictor >= FIRN_SAMPLES_UP && predictor <= FIRN_SAMPLES_BENT;
}

bool firn_samples_shape_is_sound(const struct firn_samples_shape *shape, size_t raw_bytes)
{
    return shape->width >= 1 && shape->width <= FIRN_SAMPLES_WIDTH_MAX && shape->channels >= 1 &&
           shape->channels <= FIRN_SAMPLES_CHANNELS_MAX && (unsigned)shape->predictor < FIRN_SAMPLES_PREDICTORS &&
           shape->head_bytes <= FIRN_SAMPLES_HEAD_MAX && shape->row <= FIRN_SAMPLES_ROW_MAX &&
           (shape->row > shape->channels || (shape->row == 0 && !looks_up(shape->predictor))) &&
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

/* Written so that compilers make no jumps of it. */
static inline int32_t middle(int32_t a, int32_t b, int32_t c)
{
    int32_t low = a < b ? a : b, high = a < b ? b : a, below = c < high ? c : high;

    return below > low ? below : low;
}

/* Sums wrap round, so they are made without sign. */
static int32_t wrap(uint32_t value)
{
    return (int32_t)value;
}

/* What x[i] is expected to be; i >= channels, and i >= row + channels for predictors that look up. */
static inline int32_t predict(enum firn_samples_predictor predictor, const int32_t *x, size_t i, size_t c, size_t row)
{
    uint32_t w = (uint32_t)x[i - c], n = (uint32_t)x[i - row], nw = (uint32_t)x[i - row - c];

    switch (predictor) {
    case FIRN_SAMPLES_UP:
        return wrap(n);
    case FIRN_SAMPLES_PLANE:
        return wrap(w + n - nw);
    case FIRN_SAMPLES_MEDIAN:
        return middle(wrap(w), wrap(n), wrap(w + n - nw));
    case FIRN_SAMPLES_MEAN:
        return (int32_t)(((int64_t)wrap(w) + wrap(n)) >> 1);
    case FIRN_SAMPLES_BENT:
        return (int32_t)((3 * (int64_t)wrap(w) + 3 * (int64_t)wrap(n) - 2 * (int64_t)wrap(nw)) >> 2);
    case FIRN_SAMPLES_LINE:
        return wrap(2 * w - (uint32_t)(i >= 2 * c ? x[i - 2 * c] : x[i - c]));
    case FIRN_SAMPLES_CURVE:
        if (i < 3 * c)
            return wrap(w);
        return wrap(3 * w - 3 * (uint32_t)x[i - 2 * c] + (uint32_t)x[i - 3 * c]);
    default:
        return wrap(w);
    }
}

/* The prediction at the edges too: nothing in front; the left one as long as what is looked for is not there. */
static inline int32_t expected(const struct firn_samples_shape *shape, const int32_t *x, size_t i)
{
    if (shape->predictor == FIRN_SAMPLES_NOTHING || i < shape->channels)
        return 0;
    if (!looks_up(shape->predictor))
        return predict(shape->predictor, x, i, shape->channels, 0);
    if (i < shape->row + shape->channels)
        return x[i - shape->channels];
    return predict(shape->predictor, x, i, shape->channels, shape->row);
}

void firn_samples_differ(const struct firn_samples_shape *shape, const int32_t *x, size_t count, int32_t *residuals)
{
    for (size_t i = 0; i < count; i++)
        residuals[i] = wrap((uint32_t)x[i] - (uint32_t)expected(shape, x, i));
    if (shape->lean)
        for (size_t i = count; i-- > 0;)
            if (i % shape->channels != 0)
                residuals[i] = wrap((uint32_t)residuals[i] - (uint32_t)residuals[i - 1]);
}

/* A number of one byte stays within 0 .. 255; a wider one is sign-extended. */
static inline int32_t fit(uint32_t value, unsigned width)
{
    unsigned spare = 32 - 8 * width;

    return width == 1 ? (int32_t)(value & 255) : (int32_t)(value << spare) >> spare;
}

/* From where the predictor finds all it looks for; a loop for each. */
static inline void restore_from(enum firn_samples_predictor predictor, const struct firn_samples_shape *shape,
                                size_t start, size_t count, int32_t *x)
{
    size_t c = shape->channels, row = looks_up(predictor) ? shape->row : 0;
    unsigned width = shape->width;

    if (width == 2 && c == 1)
        for (size_t i = start; i < count; i++)
            x[i] = fit((uint32_t)x[i] + (uint32_t)predict(predictor, x, i, 1, row), 2);
    else if (width == 2 && c == 2)
        for (size_t i = start; i < count; i++)
            x[i] = fit((uint32_t)x[i] + (uint32_t)predict(predictor, x, i, 2, row), 2);
    else
        for (size_t i = start; i < count; i++)
            x[i] = fit((uint32_t)x[i] + (uint32_t)predict(predictor, x, i, c, row), width);
}

void firn_samples_restore(const struct firn_samples_shape *shape, size_t count, int32_t *x)
{
    size_t edge = (looks_up(shape->predictor) ? shape->row : 0) + 3 * (size_t)shape->channels;

    edge = edge < count ? edge : count;
    if (shape->lean)
        for (size_t i = 1, channel = 1; i < count; i++) {
            x[i] = channel == 0 ? x[i] : wrap((uint32_t)x[i] + (uint32_t)x[i - 1]);
            channel = channel + 1 == shape->channels ? 0 : channel + 1;
        }
    for (size_t i = 0; i < edge; i++)
        x[i] = fit((uint32_t)x[i] + (uint32_t)expected(shape, x, i), shape->width);
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
            x[i] = fit((uint32_t)x[i] + (uint32_t)expected(shape, x, i), shape->width);
        break;
    }
}

/* One number of one byte; w, n, nw as in predict. */
static inline uint8_t predict_byte(enum firn_samples_predictor predictor, int w, int n, int nw)
{
    switch (predictor) {
    case FIRN_SAMPLES_UP:
        return (uint8_t)n;
    case FIRN_SAMPLES_PLANE:
        return (uint8_t)(w + n - nw);
    case FIRN_SAMPLES_MEDIAN:
        return (uint8_t)middle(w, n, w + n - nw);
    case FIRN_SAMPLES_MEAN:
        return (uint8_t)((w + n) / 2);
    case FIRN_SAMPLES_BENT:
        return (uint8_t)((3 * (w + n) - 2 * nw) >> 2);
    default:
        return (uint8_t)w;
    }
}

/* One channel: the number to the left stays in a register. */
static inline void restore_one(enum firn_samples_predictor predictor, const uint8_t *residuals, size_t start,
                               size_t end, size_t row, uint8_t *raw)
{
    uint8_t w = raw[start - 1], nw = looks_up(predictor) ? raw[start - row - 1] : 0;

    for (size_t i = start; i < end; i++) {
        uint8_t n = looks_up(predictor) ? raw[i - row] : 0;

        w = (uint8_t)(residuals[i] + predict_byte(predictor, w, n, nw));
        raw[i] = w;
        nw = n;
    }
}

/* Three channels in turn, without a look at which is next. */
static inline void restore_three(enum firn_samples_predictor predictor, const uint8_t *residuals, size_t start,
                                 size_t end, size_t row, bool lean, uint8_t *raw)
{
    bool up = looks_up(predictor);
    uint8_t a = raw[start - 3], b = raw[start - 2], c = raw[start - 1];
    uint8_t na = up ? raw[start - row - 3] : 0, nb = up ? raw[start - row - 2] : 0, nc = up ? raw[start - row - 1] : 0;

    for (size_t i = start; i + 3 <= end; i += 3) {
        uint8_t la = na, lb = nb, lc = nc, residual = residuals[i];

        if (up)
            na = raw[i - row], nb = raw[i + 1 - row], nc = raw[i + 2 - row];
        a = (uint8_t)(residual + predict_byte(predictor, a, na, la));
        raw[i] = a;
        residual = (uint8_t)(residuals[i + 1] + (lean ? residual : 0));
        b = (uint8_t)(residual + predict_byte(predictor, b, nb, lb));
        raw[i + 1] = b;
        residual = (uint8_t)(residuals[i + 2] + (lean ? residual : 0));
        c = (uint8_t)(residual + predict_byte(predictor, c, nc, lc));
        raw[i + 2] = c;
    }
}

/* Any number of channels; leaning residuals are summed up along a pixel. */
static inline void restore_many(enum firn_samples_predictor predictor, const uint8_t *residuals, size_t start,
                                size_t end, size_t row, size_t c, bool lean, uint8_t *raw)
{
    size_t channel = start % c;
    uint8_t residual = 0;

    for (size_t k = 0; lean && k < channel; k++)
        residual = (uint8_t)(residual + residuals[start - channel + k]);
    for (size_t i = start; i < end; i++) {
        residual = (uint8_t)(residuals[i] + (lean && channel != 0 ? residual : 0));
        raw[i] = (uint8_t)(residual + predict_byte(predictor, raw[i - c], looks_up(predictor) ? raw[i - row] : 0,
                                                   looks_up(predictor) ? raw[i - row - c] : 0));
        channel = channel + 1 == c ? 0 : channel + 1;
    }
}

static inline void restore_by(enum firn_samples_predictor predictor, const struct firn_samples_shape *shape,
                              const uint8_t *residuals, size_t start, size_t end, uint8_t *raw)
{
    if (shape->channels == 1)
        restore_one(predictor, residuals, start, end, shape->row, raw);
    else if (shape->channels == 3 && shape->lean)
        restore_three(predictor, residuals, start, end, shape->row, true, raw);
    else if (shape->channels == 3)
        restore_three(predictor, residuals, start, end, shape->row, false, raw);
    else
        restore_many(predictor, residuals, start, end, shape->row, shape->channels, shape->lean, raw);
}

/* Numbers start .. end, one by one, whatever is around them. */
static void restore_edge(const struct firn_samples_shape *shape, const uint8_t *residuals, size_t start, size_t end,
                         uint8_t *raw)
{
    size_t c = shape->channels;
    uint8_t residual = 0;

    for (size_t i = start; i < end; i++) {
        int w = i < c ? 0 : raw[i - c];

        residual = (uint8_t)(residuals[i] + (shape->lean && i % c != 0 ? residual : 0));
        if (shape->predictor == FIRN_SAMPLES_LINE && i >= c)
            w = 2 * w - (i >= 2 * c ? raw[i - 2 * c] : w);
        else if (shape->predictor == FIRN_SAMPLES_CURVE && i >= 3 * c)
            w = 3 * w - 3 * raw[i - 2 * c] + raw[i - 3 * c];
        else if (shape->predictor == FIRN_SAMPLES_NOTHING)
            w = 0;
        raw[i] = (uint8_t)(residual + w);
    }
}

void firn_samples_restore_bytes(const struct firn_samples_shape *shape, const uint8_t *residuals, size_t count,
                                uint8_t *raw)
{
    size_t edge = looks_up(shape->predictor) ? shape->row + shape->channels
                : shape->predictor == FIRN_SAMPLES_LEFT ? shape->channels : count;

    edge = edge < count ? edge : count;
    restore_edge(shape, residuals, 0, edge, raw);
    if (edge == count)
        return;
    switch (shape->predictor) {
    case FIRN_SAMPLES_UP:
        restore_by(FIRN_SAMPLES_UP, shape, residuals, edge, count, raw);
        break;
    case FIRN_SAMPLES_PLANE:
        restore_by(FIRN_SAMPLES_PLANE, shape, residuals, edge, count, raw);
        break;
    case FIRN_SAMPLES_MEDIAN:
        restore_by(FIRN_SAMPLES_MEDIAN, shape, residuals, edge, count, raw);
        break;
    case FIRN_SAMPLES_MEAN:
        restore_by(FIRN_SAMPLES_MEAN, shape, residuals, edge, count, raw);
        break;
    case FIRN_SAMPLES_BENT:
        restore_by(FIRN_SAMPLES_BENT, shape, residuals, edge, count, raw);
        break;
    default:
        restore_by(FIRN_SAMPLES_LEFT, shape, residuals, edge, count, raw);
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
