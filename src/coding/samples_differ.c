/*
 * coding/samples_differ.c - numbers less what they are expected to be
 *
 * Nothing here waits for what was made before, so these are loops that compilers make vectors of.
 * SPDX-License-Identifier: BSD-2-Clause
 */
#include "coding/samples_predict.h"

#include <string.h>

/* From where the predictor finds all it looks for. */
static size_t edge_of(const struct firn_samples_shape *shape, size_t count)
{
    size_t edge = (firn_samples_predict_looks_up(shape->predictor) ? shape->row : 0) + 3 * (size_t)shape->channels;

    return edge < count ? edge : count;
}

/* ---- numbers of any width ---- */

/* From `start` on. Narrow numbers have sums that fit 32 bits. */
static inline void differ(enum firn_samples_predictor predictor, bool narrow, const struct firn_samples_shape *shape,
                          const int32_t *restrict x, size_t start, size_t count, int32_t *restrict residuals)
{
    size_t c = shape->channels, row = firn_samples_predict_looks_up(predictor) ? shape->row : c;

    for (size_t i = start; i < count; i++) {
        int32_t w = x[i - c], n = x[i - row], nw = firn_samples_predict_looks_up(predictor) ? x[i - row - c] : 0;
        uint32_t prediction;

        if (predictor == FIRN_SAMPLES_MEAN && narrow)
            prediction = (uint32_t)((w + n) >> 1);
        else if (predictor == FIRN_SAMPLES_BENT && narrow)
            prediction = (uint32_t)((3 * (w + n) - 2 * nw) >> 2);
        else if (predictor == FIRN_SAMPLES_LINE)
            prediction = 2 * (uint32_t)w - (uint32_t)x[i - 2 * c];
        else if (predictor == FIRN_SAMPLES_CURVE)
            prediction = 3 * ((uint32_t)w - (uint32_t)x[i - 2 * c]) + (uint32_t)x[i - 3 * c];
        else
            prediction = (uint32_t)firn_samples_predict(predictor, x, i, c, row);
        residuals[i] = firn_samples_predict_wrap((uint32_t)x[i] - prediction);
    }
}

static void lean(const struct firn_samples_shape *shape, size_t count, int32_t *residuals)
{
    size_t c = shape->channels;

    for (size_t i = count - count % c; i > 0; i -= c)
        for (size_t k = c - 1; k > 0; k--)
            residuals[i - c + k] = firn_samples_predict_wrap((uint32_t)residuals[i - c + k] -
                                                             (uint32_t)residuals[i - c + k - 1]);
}

void firn_samples_differ(const struct firn_samples_shape *shape, const int32_t *x, size_t count, int32_t *residuals)
{
    size_t edge = edge_of(shape, count);
    bool narrow = shape->width < 4;

    for (size_t i = 0; i < edge; i++)
        residuals[i] = firn_samples_predict_wrap((uint32_t)x[i] - (uint32_t)firn_samples_predict_number(shape, x, i));
    switch (shape->predictor) {
    case FIRN_SAMPLES_UP:
        differ(FIRN_SAMPLES_UP, narrow, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_PLANE:
        differ(FIRN_SAMPLES_PLANE, narrow, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_MEDIAN:
        differ(FIRN_SAMPLES_MEDIAN, narrow, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_MEAN:
        if (narrow)
            differ(FIRN_SAMPLES_MEAN, true, shape, x, edge, count, residuals);
        else
            differ(FIRN_SAMPLES_MEAN, false, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_BENT:
        if (narrow)
            differ(FIRN_SAMPLES_BENT, true, shape, x, edge, count, residuals);
        else
            differ(FIRN_SAMPLES_BENT, false, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_LINE:
        differ(FIRN_SAMPLES_LINE, narrow, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_CURVE:
        differ(FIRN_SAMPLES_CURVE, narrow, shape, x, edge, count, residuals);
        break;
    case FIRN_SAMPLES_LEFT:
        differ(FIRN_SAMPLES_LEFT, narrow, shape, x, edge, count, residuals);
        break;
    default:
        memcpy(residuals + edge, x + edge, (count - edge) * sizeof *x);
        break;
    }
    if (shape->lean)
        lean(shape, count, residuals);
}

/* ---- numbers of one byte ---- */

static inline void differ_bytes(enum firn_samples_predictor predictor, const struct firn_samples_shape *shape,
                                const uint8_t *restrict raw, size_t start, size_t count, uint8_t *restrict residuals)
{
    size_t c = shape->channels, row = firn_samples_predict_looks_up(predictor) ? shape->row : c;
    bool up = firn_samples_predict_looks_up(predictor);

    for (size_t i = start; i < count; i++) {
        struct firn_samples_predict_around a = { raw[i - c], raw[i - 2 * c], raw[i - 3 * c], raw[i - row],
                                                 up ? raw[i - row - c] : 0 };

        residuals[i] = (uint8_t)(raw[i] - firn_samples_predict_byte(predictor, &a));
    }
}

/* The first ones, where not everything is there. */
static void differ_first(const struct firn_samples_shape *shape, const uint8_t *raw, size_t count, uint8_t *residuals)
{
    size_t c = shape->channels;

    for (size_t i = 0; i < count; i++) {
        enum firn_samples_predictor predictor = shape->predictor;
        struct firn_samples_predict_around a = { 0 };

        a.w = i < c ? 0 : raw[i - c];
        a.ww = i < 2 * c ? a.w : raw[i - 2 * c];
        a.www = i < 3 * c ? 0 : raw[i - 3 * c];
        if (firn_samples_predict_looks_up(predictor) && i >= shape->row + c) {
            a.n = raw[i - shape->row];
            a.nw = raw[i - shape->row - c];
        } else if (firn_samples_predict_looks_up(predictor) || (predictor == FIRN_SAMPLES_CURVE && i < 3 * c)) {
            predictor = FIRN_SAMPLES_LEFT;
        }
        residuals[i] = (uint8_t)(raw[i] - firn_samples_predict_byte(predictor, &a));
    }
}

static void lean_bytes(const struct firn_samples_shape *shape, size_t count, uint8_t *residuals)
{
    size_t c = shape->channels;

    for (size_t i = count - count % c; i > 0; i -= c)
        for (size_t k = c - 1; k > 0; k--)
            residuals[i - c + k] = (uint8_t)(residuals[i - c + k] - residuals[i - c + k - 1]);
}

void firn_samples_differ_bytes(const struct firn_samples_shape *shape, const uint8_t *raw, size_t count,
                               uint8_t *residuals)
{
    size_t edge = edge_of(shape, count);

    differ_first(shape, raw, edge, residuals);
    switch (shape->predictor) {
    case FIRN_SAMPLES_UP:
        differ_bytes(FIRN_SAMPLES_UP, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_PLANE:
        differ_bytes(FIRN_SAMPLES_PLANE, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_MEDIAN:
        differ_bytes(FIRN_SAMPLES_MEDIAN, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_MEAN:
        differ_bytes(FIRN_SAMPLES_MEAN, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_BENT:
        differ_bytes(FIRN_SAMPLES_BENT, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_LINE:
        differ_bytes(FIRN_SAMPLES_LINE, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_CURVE:
        differ_bytes(FIRN_SAMPLES_CURVE, shape, raw, edge, count, residuals);
        break;
    case FIRN_SAMPLES_LEFT:
        differ_bytes(FIRN_SAMPLES_LEFT, shape, raw, edge, count, residuals);
        break;
    default:
        memcpy(residuals + edge, raw + edge, count - edge);
        break;
    }
    if (shape->lean)
        lean_bytes(shape, count, residuals);
}
