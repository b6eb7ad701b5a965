/*
 * coding/survey.c - trying shapes on pieces
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/survey.h"

#include <string.h>

enum {
    SHORTEST = 512,                    /* raw bytes worth surveying */
    LAG_MIN = 16,
    BLOCKS = 48,
    BLOCK_BYTES = 32,
    GLANCES = 3,
    GLANCE_BYTES = 2048,
    GLANCE_GAIN = 100                  /* a difference must save one part in so many to be worth a survey */
};

/* Where piece k starts; all of one piece if the segment is short. */
static size_t piece_at(size_t raw_bytes, unsigned k)
{
    return raw_bytes <= FIRN_SURVEY_PIECE_BYTES ? 0
                                                : (raw_bytes - FIRN_SURVEY_PIECE_BYTES) / FIRN_SURVEY_PIECES * k +
                                                      (raw_bytes - FIRN_SURVEY_PIECE_BYTES) / (2 * FIRN_SURVEY_PIECES);
}

/* 64 times the bits of so many counted symbols under the best code without regard to whole bits. */
static uint64_t entropy(const struct firn_cost_logs *logs, const uint32_t counts[256])
{
    uint32_t total = 0;
    uint64_t sum = 0;

    for (unsigned s = 0; s < 256; s++)
        total += counts[s];
    for (unsigned s = 0; s < 256; s++)
        if (counts[s] != 0)
            sum += (uint64_t)counts[s] * (firn_cost_log(logs, total) - firn_cost_log(logs, counts[s]));
    return sum;
}

/* What the tokens of some pieces cost, in 1/64 bits for a byte. */
static uint32_t try_shape(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes,
                          const struct firn_samples_shape *shape, unsigned pieces, struct firn_survey_work *w)
{
    size_t unit = (size_t)shape->width * shape->channels, bytes = 0;
    uint64_t sum = 0;

    for (unsigned k = 0; k < pieces; k++) {
        size_t at = piece_at(raw_bytes, pieces == 1 ? FIRN_SURVEY_PIECES / 2 : k), size, count, from;
        unsigned more_bits;

        at += (shape->head_bytes + unit - at % unit) % unit;
        size = raw_bytes - at < FIRN_SURVEY_PIECE_BYTES ? raw_bytes - at : FIRN_SURVEY_PIECE_BYTES;
        count = size / shape->width;
        from = shape->row + shape->channels < count / 2 ? shape->row + shape->channels : shape->channels;
        firn_samples_load(shape, raw + at, count, w->x);
        firn_samples_differ(shape, w->x, count, w->residuals);
        memset(w->counts, 0, sizeof w->counts);
        for (size_t i = from, channel = from % shape->channels; i < count; i++) {
            uint32_t residual = (uint32_t)w->residuals[i];

            if (shape->width == 1) {
                w->counts[channel != 0][residual & 255]++;
            } else {
                w->counts[channel != 0][firn_samples_token(firn_samples_fold(residual, shape->width), &more_bits)]++;
                sum += more_bits * (uint64_t)FIRN_COST_BIT;
            }
            channel = channel + 1 == shape->channels ? 0 : channel + 1;
        }
        bytes += (count - from) * shape->width;
        sum += entropy(logs, w->counts[0]) + entropy(logs, w->counts[1]);
    }
    return bytes == 0 ? UINT32_MAX : (uint32_t)(sum / bytes);
}

struct best {
    struct firn_samples_shape shape;
    uint32_t price;
};

static void consider(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes,
                     const struct firn_samples_shape *shape, unsigned pieces, struct firn_survey_work *w,
                     struct best *best)
{
    uint32_t price = try_shape(logs, raw, raw_bytes, shape, pieces, w);

    if (price < best->price) {
        best->shape = *shape;
        best->price = price;
    }
}

/* Widths, byte orders, channels; by the number to the left alone. */
static void try_widths(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes,
                       struct firn_survey_work *w, struct best *best)
{
    static const struct { uint8_t width, channels, kind; } tries[] = {
        { 1, 1, 0 }, { 1, 2, 0 }, { 1, 3, 0 }, { 1, 4, 0 }, { 1, 6, 0 }, { 1, 8, 0 }, { 2, 1, 0 }, { 2, 2, 0 },
        { 2, 4, 0 }, { 2, 1, 1 }, { 2, 2, 1 }, { 3, 1, 0 }, { 3, 2, 0 }, { 4, 1, 0 }, { 4, 2, 0 }, { 4, 4, 0 },
        { 4, 1, 1 }, { 4, 1, 2 }, { 4, 2, 2 }, { 4, 4, 2 }, { 4, 1, 3 }, { 4, 2, 3 },
    };

    for (size_t t = 0; t < sizeof tries / sizeof *tries; t++) {
        struct firn_samples_shape shape = { .width = tries[t].width, .channels = tries[t].channels,
                                            .big = (tries[t].kind & 1) != 0, .floats = (tries[t].kind & 2) != 0 };

        for (; shape.head_bytes < shape.width; shape.head_bytes++)
            consider(logs, raw, raw_bytes, &shape, 1, w, best);
    }
}

/* The lag at which bytes differ least from those so far back. */
static size_t find_row(const uint8_t *raw, size_t raw_bytes, struct firn_survey_work *w)
{
    size_t most = raw_bytes / 4 < FIRN_SURVEY_LAG_MAX ? raw_bytes / 4 : FIRN_SURVEY_LAG_MAX, row = 0;
    uint32_t least = UINT32_MAX;

    for (size_t lag = LAG_MIN; lag <= most; lag++)
        w->sums[lag] = 0;
    for (size_t b = 0; b < BLOCKS; b++) {
        const uint8_t *block = raw + most + (raw_bytes - most - BLOCK_BYTES) / BLOCKS * b;

        for (size_t lag = LAG_MIN; lag <= most; lag++) {
            uint32_t sum = 0;

            for (size_t k = 0; k < BLOCK_BYTES; k++) {
                int difference = block[k] - (block - lag)[k];

                sum += (uint32_t)(difference < 0 ? -difference : difference);
            }
            w->sums[lag] += sum;
        }
    }
    for (size_t lag = LAG_MIN; lag <= most; lag++)
        if (w->sums[lag] < least) {
            least = w->sums[lag];
            row = lag;
        }
    return row;
}

/* Predictors, leaning, and where the first channel is. */
static void try_predictors(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes, size_t row,
                           struct firn_survey_work *w, struct best *best)
{
    struct firn_samples_shape shape = best->shape;
    size_t unit = (size_t)shape.width * shape.channels;

    best->price = UINT32_MAX;
    if (row % unit == 0 && row / unit > 1)
        shape.row = row / shape.width;
    for (unsigned p = 0; p < FIRN_SAMPLES_PREDICTORS; p++) {
        struct firn_samples_shape one = shape;

        one.predictor = (enum firn_samples_predictor)p;
        if (p == FIRN_SAMPLES_LEFT || p >= FIRN_SAMPLES_LINE)
            one.row = 0;
        else if (shape.row == 0)
            continue;
        consider(logs, raw, raw_bytes, &one, FIRN_SURVEY_PIECES, w, best);
    }
    if (shape.channels == 1)
        return;
    shape = best->shape;
    shape.lean = true;
    for (shape.head_bytes %= shape.width; shape.head_bytes < unit; shape.head_bytes += shape.width)
        consider(logs, raw, raw_bytes, &shape, FIRN_SURVEY_PIECES, w, best);
}

/* 64 times the bits of the glances' bytes, each less the one `lag` before it; as they are for lag 0. */
static uint64_t glance(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes, size_t lag)
{
    size_t size = raw_bytes / GLANCES < GLANCE_BYTES ? raw_bytes / GLANCES : GLANCE_BYTES;
    uint32_t counts[256] = { 0 };

    for (size_t g = 0; g < GLANCES; g++) {
        const uint8_t *at = raw + (raw_bytes - size) / (GLANCES - 1) * g;

        for (size_t i = LAG_MIN; i < size; i++)
            counts[(uint8_t)(at[i] - (lag == 0 ? 0 : at[i - lag]))]++;
    }
    return entropy(logs, counts);
}

/*
 * Whether bytes are nearer to those a few before them than they are frequent: a survey takes a hundred times as long,
 * and texts are most of what is kept.
 */
static bool looks_like_numbers(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes)
{
    static const uint8_t lags[] = { 1, 2, 3, 4, 6, 8 };
    uint64_t plain = glance(logs, raw, raw_bytes, 0);

    for (size_t i = 0; i < sizeof lags; i++)
        if (glance(logs, raw, raw_bytes, lags[i]) < plain - plain / GLANCE_GAIN)
            return true;
    return false;
}

uint32_t firn_survey(const struct firn_cost_logs *logs, const uint8_t *raw, size_t raw_bytes, bool always,
                     struct firn_samples_shape *shape, struct firn_survey_work *w)
{
    struct best best = { .price = UINT32_MAX };

    if (raw_bytes < SHORTEST || (!always && !looks_like_numbers(logs, raw, raw_bytes)))
        return UINT32_MAX;
    try_widths(logs, raw, raw_bytes, w, &best);
    try_predictors(logs, raw, raw_bytes, find_row(raw, raw_bytes, w), w, &best);
    *shape = best.shape;
    return best.price;
}
